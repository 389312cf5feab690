"""Ranges of the gain factor of a loop with measured blocks: where -1/g stays outside the band, each with a proved count.

Cells give the factors that may meet -1; what no cell blocks is free. Each free stretch is extended from a point inside it by
the first contacts of the band there, so the one that holds 1 ends at the guaranteed gain margins.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from encircle.engine.band_cells import BandOfLoop, Contact, blocked_factors
from encircle.engine.data_margins import TAIL_RATIO, ContactSearch, parts_of
from encircle.engine.gain_map import Count, FactorRange
from encircle.engine.result import FloatArray

MOST_RANGES = 24  # those nearest to 1 are looked at
LEAST_WIDTH = 1e-6  # relative width of a free stretch worth a count
ROUNDS = 3
LARGEST_EXTENT = 0.2  # of a cell's set, relative to L, beyond twice what the data leave at its middle
SMALLEST = 1e-3  # smaller L is not looked at closely

BandAt = Callable[[float], BandOfLoop]


def data_ranges(band_at: BandAt, edges: FloatArray, count: Count, present: int) -> tuple[FactorRange, ...]:
    """Ranges of a factor on top of the gain with Z in each, ascending; gaps where the data decide nothing.

    ``band_at(g)`` is the band of g L; ``present`` is Z at 1; ``count`` proves Z at factors (``None``: undecided).
    """
    ranges = [_extended(band_at, edges, 1.0, present)]
    for probe in _probes(free_stretches(band_at(1.0), edges)):
        if any(r.lower < probe and (r.upper is None or probe < r.upper) for r in ranges):
            continue
        (unstable,) = count([probe])
        if unstable is not None and unstable >= 0:
            ranges.append(_extended(band_at, edges, probe, unstable))
    return tuple(sorted(ranges, key=lambda found: found.lower))


def _extended(band_at: BandAt, edges: FloatArray, probe: float, unstable: int) -> FactorRange:
    """The range round a free factor, up to the first contacts on both sides."""
    found = ContactSearch(band_at(probe), (Contact.INCREASE, Contact.DECREASE)).run(edges)
    up, down = found[Contact.INCREASE], found[Contact.DECREASE]
    lower, lower_omega = (probe / down.value, down.omega) if np.isfinite(down.value) else (0.0, None)
    upper, upper_omega = (probe * up.value, up.omega) if np.isfinite(up.value) else (None, None)
    return FactorRange(lower, upper, unstable, lower_omega, upper_omega)


def _probes(stretches: FloatArray) -> list[float]:
    """A factor inside each free stretch (n, 2), nearest to 1 first."""
    probes = []
    for lower, upper in stretches:
        if lower == 0.0:
            probes.append(0.5 * upper if np.isfinite(upper) else 1.0)
        else:
            probes.append(np.sqrt(lower) * np.sqrt(upper) if np.isfinite(upper) else 2.0 * lower)
    return sorted((float(p) for p in probes), key=lambda p: abs(np.log(p)))[:MOST_RANGES]


def free_stretches(band: BandOfLoop, edges: FloatArray) -> FloatArray:
    """(n, 2) open intervals of factors that no cell blocks, ascending from 0 to infinity."""
    lower, upper = _refined(band, edges)
    blocked = blocked_factors(band.on_cells(lower, upper))
    start, stop = blocked[:, 0].ravel(), blocked[:, 1].ravel()
    meets = ~np.isnan(start)
    start, stop = start[meets], stop[meets]
    order = np.argsort(start)
    reached = np.maximum.accumulate(np.concatenate([[0.0], stop[order]]))
    following = np.concatenate([start[order], [np.inf]])
    free = following > reached * (1.0 + LEAST_WIDTH)
    return np.column_stack([reached[free], following[free]])


def _refined(band: BandOfLoop, edges: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Cells on which L moves little against its own size and the width that the data leave."""
    lower, upper = edges[:-1], edges[1:]
    for _ in range(ROUNDS):
        middle = 0.5 * (lower + upper)
        sets, at_middle = band.on_cells(lower, upper), band.on_cells(middle, middle)
        with np.errstate(all="ignore"):
            c = np.abs(sets.c)
            matters = np.where(sets.inverted, c < 1.0 / SMALLEST, c > SMALLEST)
            wide = ~(sets.size <= LARGEST_EXTENT * c + 2.0 * at_middle.size)
        split = wide & matters
        if not split.any():
            break
        parts = parts_of(lower[split], upper[split])
        lower, upper = np.concatenate([lower[~split], parts[0]]), np.concatenate([upper[~split], parts[1]])
    tail = np.array([edges[-1]])
    return np.concatenate([lower, tail]), np.concatenate([upper, TAIL_RATIO * tail])
