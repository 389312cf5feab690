"""The least first contact of a band with -1 over all frequencies, by branch and bound over cells.

The set that holds L on a whole cell bounds a first contact from below, the set at the cell's middle alone is what
further splitting cannot undercut. Cells whose bound lies below the least middle value are split until both agree. What
is found is always a bound.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from encircle.engine.band_cells import BandOfLoop, CellSets
from encircle.engine.counting import Counter
from encircle.engine.grids import distinct
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import FloatArray

AGREEMENT = 1e-7  # relative, between bound and middle
PARTS = 8  # of a cell that is split
MOST_CELLS = 40_000  # evaluated before the bounds are taken as they are
NARROWEST = 1e-12  # cells are split down to this part of their frequency ...
STANDSTILL = 1e-9  # ... and the one that begins at 0 to this part of the lowest feature
NEVER = 1e6  # beyond this (120 dB) a contact comes only where the middle of a cell meets it
FAR_RATIO = 1.6  # beyond the counted cells L is followed in such steps ...
FAR_STEPS = 48  # ... to 6e9 times the last edge
TAIL_RATIO = 1.05  # a narrow cell there stands for infinity

Contacts = Callable[[CellSets, FloatArray], FloatArray]


@dataclass(frozen=True, slots=True)
class FirstContact:
    """A guaranteed bound of a first contact and the cell in which it comes (rad/s, inf at infinity)."""

    value: float
    lower: float
    upper: float

    @property
    def omega(self) -> float:
        """The middle of the cell; a cell that begins at 0 stands for standstill."""
        return 0.5 * (self.lower + self.upper) if self.lower > 0.0 else 0.0


@dataclass(frozen=True, slots=True)
class BandCells:
    """A band on the cells that a search starts from, ``lower``, ``upper`` (n,) in rad/s, at their middles, at infinity.

    ``standstill``: down to this frequency the cell that begins at 0 is split.
    """

    lower: FloatArray
    upper: FloatArray
    cells: CellSets
    middles: CellSets
    tail: CellSets
    tail_upper: FloatArray
    standstill: float

    def scaled(self, factor: float) -> BandCells:
        """The same for factor times L."""
        cells, middles, tail = (sets.scaled(factor) for sets in (self.cells, self.middles, self.tail))
        return BandCells(self.lower, self.upper, cells, middles, tail, self.tail_upper, self.standstill)


def band_on_counted_cells(counter: Counter, loop: OpenLoop, band: BandOfLoop) -> BandCells:
    """Counted cells, cut at every measured line, one of width 0 at each first line, and wide ones beyond."""
    system = counter.system
    edges = distinct(np.concatenate([[0.0], counter.cells(loop.stage.part), system.lines]))
    far = edges[-1] * FAR_RATIO ** np.arange(1.0, FAR_STEPS + 1.0)
    edges = np.concatenate([np.sort(np.concatenate([edges, system.first_lines])), far])
    lower, upper, end = edges[:-1], edges[1:], edges[-1:]
    middle, tail_upper = 0.5 * (lower + upper), TAIL_RATIO * end
    cells, middles, tail = band.on_cells(lower, upper), band.on_cells(middle, middle), band.on_cells(end, tail_upper)
    return BandCells(lower, upper, cells, middles, tail, tail_upper, STANDSTILL * system.lowest)


def least_contacts(band: BandOfLoop, start: BandCells, contacts: Contacts) -> list[FirstContact]:
    """The least of each row that ``contacts(cells, upper edges)`` gives, (rows, cells), over all frequencies."""
    return _Search(band, contacts, start.standstill).run(start)


class _Search:
    def __init__(self, band: BandOfLoop, contacts: Contacts, standstill: float) -> None:
        self._band, self._contacts, self._standstill = band, contacts, standstill
        self._least: list[FirstContact] = []
        self._at_ends: list[list[FirstContact]] = []
        self._evaluated = 0

    def run(self, start: BandCells) -> list[FirstContact]:
        tail = self._contacts(start.tail, start.tail_upper)
        tail[tail >= NEVER] = np.inf
        self._least = [FirstContact(float(value), np.inf, np.inf) for value in tail[:, 0]]
        self._at_ends.append(self._least.copy())
        lower, upper = start.lower, start.upper
        bound, reached = self._contacts(start.cells, upper), self._contacts(start.middles, 0.5 * (lower + upper))
        best = tail[:, 0]
        while len(lower):
            best = np.minimum(best, reached.min(axis=1))
            lower, upper = self._divide(lower, upper, bound, best)
            if len(lower):
                bound, reached = self._level(lower, upper)
        return [self._at_end_if_equal(row, least) for row, least in enumerate(self._least)]

    def _at_end_if_equal(self, row: int, least: FirstContact) -> FirstContact:
        """What is approached at standstill or at infinity is said to come there."""
        for end in self._at_ends:
            if end[row].value <= least.value * (1.0 + 2.0 * AGREEMENT):
                return FirstContact(least.value, end[row].lower, end[row].upper)
        return least

    def _level(self, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Contacts on cells and at their middles, (rows, cells) each."""
        middle = 0.5 * (lower + upper)
        ends = np.concatenate([upper, middle])
        both = self._contacts(self._band.on_cells(np.concatenate([lower, middle]), ends), ends)
        self._evaluated += len(lower)
        return both[:, : len(lower)], both[:, len(lower) :]

    def _divide(
        self, lower: FloatArray, upper: FloatArray, bound: FloatArray, best: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Parts of the cells that may hold less than the best middle value; the bounds of the others are kept."""
        undercut = ((bound < best[:, None] * (1.0 - AGREEMENT)) & (bound < NEVER)).any(axis=0)
        wide = upper - lower > np.where(lower > 0.0, NARROWEST * upper, self._standstill)
        split = undercut & wide & (self._evaluated + PARTS * undercut.sum() <= MOST_CELLS)
        certain = np.where(bound < NEVER, bound, np.maximum(bound, best[:, None]))
        self._record(lower[~split], upper[~split], certain[:, ~split])
        return parts_of(lower[split], upper[split])

    def _record(self, lower: FloatArray, upper: FloatArray, bound: FloatArray) -> None:
        if not bound.size:
            return
        for row, place in enumerate(bound.argmin(axis=1)):
            if bound[row, place] < self._least[row].value:
                self._least[row] = FirstContact(float(bound[row, place]), float(lower[place]), float(upper[place]))
        for column in np.flatnonzero(lower == 0.0):
            self._at_ends.append([FirstContact(float(value), 0.0, float(upper[column])) for value in bound[:, column]])


def parts_of(lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Each cell cut into PARTS equal ones."""
    cuts = lower + (upper - lower) * (np.arange(PARTS + 1) / PARTS)[:, None]
    cuts[-1] = upper
    return cuts[:-1].ravel(), cuts[1:].ravel()
