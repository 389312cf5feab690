"""Ranges of the gain factor of a loop with measured blocks: where -1/g stays outside the band, each with its count.

Cells give the factors that may meet -1; what no cell blocks is free. Each free stretch is extended from a point inside
it by the first contacts of the band there.
"""

from __future__ import annotations

import numpy as np

from encircle.engine.band_cells import BandOfLoop, CellSets, blocked_factors, gain_contacts
from encircle.engine.contact_search import BandCells, least_contacts, parts_of
from encircle.engine.gain_map import Count, FactorRange
from encircle.engine.result import BoolArray, FloatArray

MOST_RANGES = 24  # those nearest to 1 are looked at
LEAST_WIDTH = 1e-6  # relative width of a free stretch worth a count
ROUNDS = 2
LARGEST_EXTENT = 0.2  # of a cell's set relative to L, beyond twice what the data leave at its middle
SMALLEST = 1e-3  # smaller L is not looked at closely


def data_ranges(
    band: BandOfLoop, start: BandCells, endless: bool, count: Count, present: int
) -> tuple[FactorRange, ...]:
    """Ranges of a factor on top of the gain with Z in each, ascending; gaps where the data decide nothing.

    ``count`` proves Z at factors (``None``: undecided), ``present`` is Z at 1. ``endless``: infinitely many changes
    follow (dead time), and the list stops after the second change above 1.
    """
    ranges = [_range_round(1.0, band, start, present)]
    for probe in _probes(free_stretches(band, start)):
        enough = endless and probe > 1.0 and any(r.lower > 1.0 for r in ranges)
        if enough or any(r.lower < probe and (r.upper is None or probe < r.upper) for r in ranges):
            continue
        (unstable,) = count([probe])
        if unstable is not None and unstable >= 0:
            ranges.append(_range_round(probe, band.scaled(probe), start.scaled(probe), unstable))
    return _united(sorted(ranges, key=lambda found: found.lower))


def _united(ranges: list[FactorRange]) -> tuple[FactorRange, ...]:
    """Join ranges that overlap: the bound found from one side can be better than from the other."""
    found = ranges[:1]
    for after in ranges[1:]:
        before = found[-1]
        if before.upper is not None and before.upper <= after.lower:
            found.append(after)
        elif before.upper is not None and (after.upper is None or after.upper > before.upper):
            found[-1] = FactorRange(before.lower, after.upper, before.unstable, before.lower_omega, after.upper_omega)
    return tuple(found)


def _range_round(probe: float, band: BandOfLoop, start: BandCells, unstable: int) -> FactorRange:
    """The range round a free factor, up to the first contacts on both sides; ``band`` is that of probe times L."""
    up, down = least_contacts(band, start, _gains_only)
    lower, lower_omega = (probe / down.value, down.omega) if np.isfinite(down.value) else (0.0, None)
    upper, upper_omega = (probe * up.value, up.omega) if np.isfinite(up.value) else (None, None)
    return FactorRange(lower, upper, unstable, lower_omega, upper_omega)


def _gains_only(cells: CellSets, _: FloatArray) -> FloatArray:
    return gain_contacts(cells)


def _probes(stretches: FloatArray) -> list[float]:
    """A factor inside each free stretch (n, 2), nearest to 1 first."""
    probes = []
    for lower, upper in stretches:
        if lower == 0.0:
            probes.append(0.5 * upper if np.isfinite(upper) else 1.0)
        else:
            probes.append(np.sqrt(lower) * np.sqrt(upper) if np.isfinite(upper) else 2.0 * lower)
    return sorted((float(p) for p in probes), key=lambda p: abs(np.log(p)))[:MOST_RANGES]


def free_stretches(band: BandOfLoop, start: BandCells) -> FloatArray:
    """(n, 2) open intervals of factors that no cell blocks, ascending from 0 to infinity."""
    blocked = np.concatenate([blocked_factors(cells) for cells in (start.tail, *_refined(band, start))], axis=-1)
    first, last = blocked[:, 0].ravel(), blocked[:, 1].ravel()
    meets = ~np.isnan(first)
    order = np.argsort(first[meets])
    reached = np.maximum.accumulate(np.concatenate([[0.0], last[meets][order]]))
    following = np.concatenate([first[meets][order], [np.inf]])
    free = following > reached * (1.0 + LEAST_WIDTH)
    return np.column_stack([reached[free], following[free]])


def _refined(band: BandOfLoop, start: BandCells) -> list[CellSets]:
    """Sets on cells on which L moves little against its own size and the width that the data leave."""
    lower, upper, cells, middles = start.lower, start.upper, start.cells, start.middles
    done: list[CellSets] = []
    for _ in range(ROUNDS):
        split = _moves_far(cells, middles)
        done.append(cells.where(~split))
        lower, upper = parts_of(lower[split], upper[split])
        middle = 0.5 * (lower + upper)
        cells, middles = band.on_cells(lower, upper), band.on_cells(middle, middle)
    return [*done, cells]


def _moves_far(cells: CellSets, middles: CellSets) -> BoolArray:
    """Cells whose set is wide although the data leave little at the cell's middle."""
    with np.errstate(all="ignore"):
        size = np.abs(middles.sets.c)
        matters = np.where(middles.inverted, size < 1.0 / SMALLEST, size > SMALLEST)
        wide: BoolArray = ~(cells.sets.size <= LARGEST_EXTENT * size + 2.0 * middles.sets.size)
    return wide & matters
