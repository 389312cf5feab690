"""One loop known by models: curve, crossings, gain ranges and margins for a count that is already proved."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from encircle.engine.counting import Counter, Gains
from encircle.engine.crossings import NegativeCrossing, UnboundedArc, negative_crossings, unbounded_arcs
from encircle.engine.gain_map import FactorRange, MissedCrossingError, Reach, gain_ranges
from encircle.engine.margins import margins
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import Margins
from encircle.engine.sampled_curve import SampledCurve, sample

DENSITIES = (1, 4, 16)
# With dead time L is followed down to these sizes until two changes of Z are found
SMALLEST = (0.5, 0.2, 0.05, 1e-3, 1e-6)
SMALL = 0.05  # what lies beyond changes no extreme that matters
LONGEST_SEARCH = 5_000  # samples after which no further changes are looked for


@dataclass(frozen=True, slots=True)
class LoopStudy:
    """What the curve of L shows: crossings and arcs, ranges of the gain factor, margins.

    ``complete``: the turns of the crossings sum to the proved N.
    """

    curve: SampledCurve
    crossings: tuple[NegativeCrossing, ...]
    arcs: tuple[UnboundedArc, ...]
    ranges: tuple[FactorRange, ...]
    margins: Margins
    complete: bool = True


def sample_loop(counter: Counter, loop: OpenLoop, smallest: float = SMALLEST[0], density: int = 1) -> SampledCurve:
    """The curve of L, with points where the blocks or the certified cells show narrow structure."""
    hints = np.concatenate([counter.system.features, counter.system.resonances, counter.cells(loop.stage.part)])
    return sample(loop, hints[hints > 0.0], smallest, density)


def study(
    counter: Counter, loop: OpenLoop, gains: Gains, unstable: int, windings: int | None, unit: float
) -> LoopStudy:
    """Everything the curve shows, held against the proved counts Z = ``unstable`` and N = ``windings``.

    The sampling is refined until crossings and counts agree; where they never do, the counts alone locate the changes
    and the list of crossings is marked as incomplete.
    """
    for density in DENSITIES:
        try:
            return _study(counter, loop, gains, unstable, windings, unit, density, strict=True)
        except MissedCrossingError:
            continue
    return _study(counter, loop, gains, unstable, windings, unit, DENSITIES[-1], strict=False)


def _study(
    counter: Counter,
    loop: OpenLoop,
    gains: Gains,
    unstable: int,
    windings: int | None,
    unit: float,
    density: int,
    strict: bool,
) -> LoopStudy:
    for smallest in SMALLEST:
        curve = sample_loop(counter, loop, smallest, density)
        crossings = negative_crossings(loop, curve)
        complete = _complete_up_to(loop, curve, smallest)
        if not loop.endless:
            break
        enough = _changes_between(crossings, 1.0, complete) >= 2
        long = len(curve.omega) > LONGEST_SEARCH and smallest <= SMALL
        if long or (enough and (smallest <= SMALL or _extremes_inside(curve, smallest))):
            break
    arcs = unbounded_arcs(loop, curve)
    explained = windings is None or _turns(crossings, arcs) == windings
    if strict and not explained:
        raise MissedCrossingError(f"the crossings left of -1 do not turn {windings} times as the count says")

    def count(factors: Sequence[float]) -> list[int | None]:
        return counter.count_at_factors(loop.stage.part, loop.stage.loop, gains, factors)

    ranges = gain_ranges(crossings, _reach(loop, crossings, complete), count, unstable, strict)
    found = margins(loop, curve, ranges, unit)
    return LoopStudy(curve, tuple(crossings), tuple(arcs), ranges, found, complete=explained)


def _extremes_inside(curve: SampledCurve, smallest: float) -> bool:
    """Whether the least |1 + L| and the largest |T| sampled cannot be beaten where |L| is below ``smallest``."""
    tail = max(float(np.abs(curve.L[-1])), smallest)
    F = np.abs(1.0 + curve.L)
    return bool(F.min() <= 1.0 - tail and (np.abs(curve.L) / F).max() >= tail / (1.0 - tail))


def _reach(loop: OpenLoop, crossings: Sequence[NegativeCrossing], complete: float) -> Reach:
    """How far the ranges go; where L turns for ever beyond -1, they start at the second change below 1."""
    lower, upper = loop.infinity.factor_limits()
    if loop.endless and loop.infinity.largest_size() > 1.0:
        changes = sorted(-1.0 / c.value for c in crossings if c.turns != 0 and c.value < -1.0)
        lower = changes[-2] if len(changes) > 1 else None
    return Reach(lower, upper, complete if loop.endless else None)


def _complete_up_to(loop: OpenLoop, curve: SampledCurve, smallest: float) -> float:
    """The factor below which all crossings are sampled: where |L| is below ``smallest`` the curve is not resolved, and
    beyond the last sample |L| stays below its bounds there.

    Where L keeps turning about a point left of -1, what is not sampled lies at factors below 1 only.
    """
    bound = loop.infinity.largest_size()
    tail = max(float(np.abs(curve.L[-1])), smallest, bound)
    return 1.0 / tail if tail > 0.0 and bound < 1.0 else np.inf


def _changes_between(crossings: Sequence[NegativeCrossing], low: float, high: float) -> int:
    return sum(1 for c in crossings if c.turns != 0 and c.value < 0.0 and low < -1.0 / c.value < high)


def _turns(crossings: Sequence[NegativeCrossing], arcs: Sequence[UnboundedArc]) -> int:
    """Clockwise turns about -1 by all crossings left of it."""
    return sum(c.turns for c in crossings if c.value < -1.0) + sum(arc.turns for arc in arcs)
