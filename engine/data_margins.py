"""Guaranteed margins of a loop with measured blocks: first contact of the band round the curve with -1.

Branch and bound over cells of frequency: the set that holds L on a whole cell bounds a first contact from below, the set at
the cell's middle alone is what further splitting cannot undercut. Cells whose bound lies below the least middle value are
split until both agree. What is reported is always a bound.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from encircle.engine.band_cells import BandOfLoop, Contact, counted_edges, first_contacts
from encircle.engine.counting import Counter
from encircle.engine.margins import decibels, frequency_of
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import DelayMargin, FloatArray, GainMargin, Margins, ModulusMargin, Peak, PhaseMargin

AGREEMENT = 1e-7  # relative, between bound and middle
PARTS = 4  # of a cell that is split
MOST_CELLS = 40_000  # evaluated before the bounds are taken as they are
NARROWEST = 1e-12  # cells are split down to this part of their frequency
FAR_RATIO = 1.6  # beyond the counted cells L is followed in such steps ...
FAR_STEPS = 48  # ... to 6e9 times the last edge
TAIL_RATIO = 1.05  # a narrow cell there stands for infinity
PHASE, DELAY = len(Contact), len(Contact) + 1  # further rows: the smaller turn, and lag over frequency


@dataclass(frozen=True, slots=True)
class FirstContact:
    """A guaranteed bound of a first contact and where it comes (rad/s, inf at infinity, 0 at standstill)."""

    value: float
    omega: float


class ContactSearch:
    """Finds first contacts of a band with -1 on given cells; ``rows`` of ``Contact``, PHASE and DELAY are made exact."""

    def __init__(self, band: BandOfLoop, rows: tuple[int, ...]) -> None:
        self.band, self.rows = band, list(rows)
        self._best = np.full(len(rows), np.inf)
        self._least = [FirstContact(np.inf, np.inf)] * len(rows)
        self._evaluated = 0

    def run(self, edges: FloatArray) -> dict[int, FirstContact]:
        """The least contact of each row over the cells between ``edges`` (rad/s) and from the last one to infinity."""
        tail = self._contacts(edges[-1:], TAIL_RATIO * edges[-1:])
        self._best = tail[:, 0]
        self._record(tail, np.array([np.inf]), np.array([np.inf]))
        lower, upper = edges[:-1], edges[1:]
        while len(lower):
            lower, upper = self._level(lower, upper)
        return dict(zip(self.rows, self._least, strict=True))

    def _level(self, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Evaluate cells and their middles; returns the parts of those that must be split."""
        middle = 0.5 * (lower + upper)
        both = self._contacts(np.concatenate([lower, middle]), np.concatenate([upper, middle]))
        bound, reached = both[:, : len(lower)], both[:, len(lower) :]
        self._evaluated += len(lower)
        self._best = np.minimum(self._best, reached.min(axis=1))
        undercut = (bound < self._best[:, None] * (1.0 - AGREEMENT)).any(axis=0)
        wide = upper - lower > NARROWEST * upper
        split = undercut & wide & (self._evaluated + PARTS * undercut.sum() <= MOST_CELLS)
        self._record(bound[:, ~split], lower[~split], upper[~split])
        return parts_of(lower[split], upper[split])

    def _contacts(self, lower: FloatArray, upper: FloatArray) -> FloatArray:
        found = first_contacts(self.band.on_cells(lower, upper))
        smaller = np.minimum(found[Contact.LAG], found[Contact.LEAD])
        return np.vstack([found, smaller, found[Contact.LAG] / upper])[self.rows]

    def _record(self, bound: FloatArray, lower: FloatArray, upper: FloatArray) -> None:
        """Keep the least bound of cells that are not split further; a cell that begins at 0 stands for standstill."""
        if not bound.size:
            return
        for row, place in enumerate(bound.argmin(axis=1)):
            if bound[row, place] < self._least[row].value:
                omega = 0.5 * (lower[place] + upper[place]) if lower[place] > 0.0 else 0.0
                self._least[row] = FirstContact(float(bound[row, place]), float(omega))


def parts_of(lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Each cell cut into equal parts."""
    cuts = lower + (upper - lower) * (np.arange(PARTS + 1) / PARTS)[:, None]
    cuts[-1] = upper
    return cuts[:-1].ravel(), cuts[1:].ravel()


def band_edges(counter: Counter, loop: OpenLoop) -> FloatArray:
    """The counted cells, and wide ones beyond to where L has reached its limit."""
    edges = counted_edges(counter, loop.stage)
    return np.concatenate([edges, edges[-1] * FAR_RATIO ** np.arange(1.0, FAR_STEPS + 1.0)])


def data_margins(band: BandOfLoop, edges: FloatArray, crossovers: FloatArray, unit: float) -> Margins:
    """All margins as guaranteed by the band; ``crossovers`` (rad/s) are those of the chords, ``unit`` is in rad/s."""
    rows = (Contact.DISTANCE, Contact.INVERSE_T, Contact.INCREASE, Contact.DECREASE, PHASE, DELAY)
    found = ContactSearch(band, rows).run(edges)
    near, T = found[Contact.DISTANCE], found[Contact.INVERSE_T]
    S = 1.0 / near.value
    largest_T = 1.0 / T.value
    return Margins(
        gain_increase=_gain(found[Contact.INCREASE], 1.0, unit),
        gain_decrease=_gain(found[Contact.DECREASE], -1.0, unit),
        phase=_phase(band, found[PHASE], unit),
        delay=_delay(band, edges, found[DELAY], unit),
        modulus=ModulusMargin(near.value, frequency_of(near.omega, unit)),
        sensitivity_peak=Peak(S, decibels(S), frequency_of(near.omega, unit)),
        complementary_peak=Peak(largest_T, decibels(largest_T), frequency_of(T.omega, unit)),
        gain_crossovers=tuple(float(w) / unit for w in crossovers),
    )


def _gain(found: FirstContact, sign: float, unit: float) -> GainMargin | None:
    if np.isinf(found.value):
        return None
    return GainMargin(found.value**sign, decibels(found.value), frequency_of(found.omega, unit))


def _phase(band: BandOfLoop, found: FirstContact, unit: float) -> PhaseMargin | None:
    if np.isinf(found.value):
        return None
    omega = np.array([found.omega])
    at_contact = first_contacts(band.on_cells(omega, omega))[:, 0]
    direction = "lag" if at_contact[Contact.LAG] <= at_contact[Contact.LEAD] else "lead"
    degrees = float(np.degrees(found.value))
    if np.isinf(found.omega):
        return PhaseMargin(degrees, direction, None)
    return PhaseMargin(degrees, direction, found.omega / unit)


def _delay(band: BandOfLoop, edges: FloatArray, found: FirstContact, unit: float) -> DelayMargin | None:
    """0 where lim sup |L| >= 1 at infinity, since any dead time turns the band past -1."""
    tail = band.on_cells(edges[-1:], TAIL_RATIO * edges[-1:])
    largest = np.abs(tail.c) + tail.size
    stays_below = ~tail.inverted & (largest < 1.0)
    if not stays_below[0]:
        return DelayMargin(0.0, None)
    return None if np.isinf(found.value) else DelayMargin(found.value, frequency_of(found.omega, unit))
