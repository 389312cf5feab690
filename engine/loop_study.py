"""One loop known by models: curve, crossings, gain ranges and margins for a count that is already proved."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from encircle.engine.counting import Counter, Gains
from encircle.engine.crossings import NegativeCrossing, UnboundedArc, negative_crossings, unbounded_arcs
from encircle.engine.gain_map import FactorRange, MissedCrossing, gain_ranges
from encircle.engine.margins import margins
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import Margins
from encircle.engine.sampled_curve import SampledCurve, sample

DENSITIES = (1, 4, 16)
SMALLEST = (1e-2, 1e-4, 1e-6, 1e-9, 1e-12)  # with dead time L is followed down to these sizes until two changes are found


@dataclass(frozen=True, slots=True)
class LoopStudy:
    """What the curve of L shows: crossings and arcs, ranges of the gain factor, margins."""

    curve: SampledCurve
    crossings: tuple[NegativeCrossing, ...]
    arcs: tuple[UnboundedArc, ...]
    ranges: tuple[FactorRange, ...]
    margins: Margins


def sample_loop(counter: Counter, loop: OpenLoop, smallest: float = SMALLEST[0], density: int = 1) -> SampledCurve:
    """The curve of L, with points where the blocks or the certified cells show narrow structure."""
    hints = np.concatenate([counter.system.features, counter.system.resonances, counter.cells(loop.stage.part)])
    return sample(loop, hints[hints > 0.0], smallest, density)


def study(
    counter: Counter, loop: OpenLoop, gains: Gains, unstable: int, windings: int | None, unit: float
) -> LoopStudy:
    """Everything the curve shows, held against the proved counts Z = ``unstable`` and N = ``windings``.

    The sampling is refined until crossings and counts agree; ArithmeticError where they never do.
    """
    for density in DENSITIES:
        try:
            return _study(counter, loop, gains, unstable, windings, unit, density)
        except MissedCrossing as error:
            reason = error
    raise ArithmeticError(f"crossings and certified counts disagree: {reason}")


def _study(
    counter: Counter, loop: OpenLoop, gains: Gains, unstable: int, windings: int | None, unit: float, density: int
) -> LoopStudy:
    far = max(abs(loop.infinity.value), loop.infinity.swing) if loop.infinity.order == 0 else 0.0
    limit = 1.0 / far if loop.infinity.swing > 0.0 and far > 0.0 else None
    endless = loop.endless and limit is None
    for smallest in SMALLEST:
        curve = sample_loop(counter, loop, smallest, density)
        crossings = negative_crossings(loop, curve)
        if not endless or _changes_above(crossings) >= 2:
            break
    arcs = unbounded_arcs(loop, curve)
    if windings is not None:
        _check_windings(crossings, arcs, windings)

    def count(factors: Sequence[float]) -> list[int | None]:
        return counter.count_at_factors(loop.stage.part, loop.stage.loop, gains, factors)

    ranges = gain_ranges(crossings, endless, limit, count, unstable)
    return LoopStudy(curve, tuple(crossings), tuple(arcs), ranges, margins(loop, curve, ranges, unit))


def _changes_above(crossings: Sequence[NegativeCrossing]) -> int:
    return sum(1 for crossing in crossings if -1.0 < crossing.value < 0.0 and crossing.turns != 0)


def _check_windings(crossings: Sequence[NegativeCrossing], arcs: Sequence[UnboundedArc], windings: int) -> None:
    turns = sum(c.turns for c in crossings if c.value < -1.0) + sum(arc.turns for arc in arcs)
    if turns != windings:
        raise MissedCrossing(f"the crossings left of -1 turn {turns} times, the count says {windings}")

