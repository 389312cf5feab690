"""Guaranteed margins of a loop with measured blocks: first contact of the band round the curve with -1."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np

from encircle.engine.band_cells import BandOfLoop, CellSets, Contact, first_contacts
from encircle.engine.contact_search import BandCells, FirstContact, least_contacts
from encircle.engine.gain_map import FactorRange
from encircle.engine.margins import decibels, frequency_of
from encircle.engine.result import DelayMargin, FloatArray, GainMargin, Margins, ModulusMargin, Peak, PhaseMargin


def data_margins(
    band: BandOfLoop, start: BandCells, ranges: Sequence[FactorRange], crossovers: FloatArray, unit: float
) -> Margins:
    """All margins as guaranteed by the band; those of gain end the range that holds 1.

    ``crossovers`` (rad/s) are those of the chords, ``unit`` is the file's frequency unit in rad/s.
    """
    present = next(r for r in ranges if r.lower < 1.0 and (r.upper is None or r.upper > 1.0))
    near, T, turn, delay = least_contacts(band, start, _sought)
    place = frequency_of(near.omega, unit)
    S, largest_T = 1.0 / near.value, 1.0 / T.value
    return Margins(
        gain_increase=_gain(present.upper, present.upper_omega, unit),
        gain_decrease=_gain(present.lower, present.lower_omega, unit),
        phase=_phase(band, turn, unit),
        delay=_delay(start, delay, unit),
        modulus=ModulusMargin(near.value, place),
        sensitivity_peak=Peak(S, decibels(S), place),
        complementary_peak=Peak(largest_T, decibels(largest_T), frequency_of(T.omega, unit)),
        gain_crossovers=tuple(float(w) / unit for w in crossovers),
    )


def _sought(cells: CellSets, upper: FloatArray) -> FloatArray:
    """Rows: |1 + L|, |1 + 1/L|, the smaller turn in rad, lag over frequency in s."""
    found = first_contacts(cells)
    lag, lead = found[Contact.LAG], found[Contact.LEAD]
    with np.errstate(all="ignore"):
        return np.vstack([found[Contact.DISTANCE], found[Contact.INVERSE_T], np.minimum(lag, lead), lag / upper])


def _gain(factor: float | None, omega: float | None, unit: float) -> GainMargin | None:
    if factor is None or factor == 0.0:
        return None
    return GainMargin(factor, abs(decibels(factor)), frequency_of(omega, unit))


def _phase(band: BandOfLoop, found: FirstContact, unit: float) -> PhaseMargin | None:
    if np.isinf(found.value):
        return None
    degrees = float(np.degrees(found.value))
    if np.isinf(found.omega):
        return PhaseMargin(degrees, "lag", None)
    on_cell = first_contacts(band.on_cells(np.array([found.lower]), np.array([found.upper])))[:, 0]
    direction: Literal["lag", "lead"] = "lag" if on_cell[Contact.LAG] <= on_cell[Contact.LEAD] else "lead"
    return PhaseMargin(degrees, direction, found.omega / unit)


def _delay(start: BandCells, found: FirstContact, unit: float) -> DelayMargin | None:
    """0 where lim sup |L| >= 1 at infinity, since any dead time turns the band past -1."""
    tail = start.tail
    stays_below = ~tail.inverted & (np.abs(tail.sets.c) + tail.sets.size < 1.0)
    if not stays_below[0]:
        return DelayMargin(0.0, None)
    return None if np.isinf(found.value) else DelayMargin(found.value, frequency_of(found.omega, unit))
