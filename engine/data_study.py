"""One loop with measured blocks: the chord curve and its crossings, ranges of gain and margins as the band guarantees them."""

from __future__ import annotations

from collections.abc import Sequence

from encircle.engine.band_cells import BandOfLoop
from encircle.engine.counting import Counter, Gains
from encircle.engine.crossings import NegativeCrossing, UnboundedArc, unbounded_arcs, unit_crossings
from encircle.engine.data_crossings import chord_crossings, off_the_axis
from encircle.engine.data_margins import band_edges, data_margins
from encircle.engine.data_ranges import data_ranges
from encircle.engine.loop_study import DENSITIES, LoopStudy, sample_loop
from encircle.engine.open_loop import OpenLoop


def study_data(
    counter: Counter, loop: OpenLoop, gains: Gains, unstable: int, windings: int | None, unit: float
) -> LoopStudy:
    """What curve and band show, held against the counts Z = ``unstable`` and N = ``windings``.

    The sampling is refined until the chord curve winds as the count says; ArithmeticError where it never does.
    """
    band = BandOfLoop(counter, loop.stage, gains)
    for density in DENSITIES:
        curve = off_the_axis(sample_loop(counter, loop, density=density))
        crossings = chord_crossings(loop, band, curve)
        arcs = unbounded_arcs(loop, curve)
        turns = _turns(crossings, arcs)
        if windings is None or turns == windings:
            break
    else:
        raise ArithmeticError(f"the chords turn {turns} times about -1, the count says {windings}")

    def count(factors: Sequence[float]) -> list[int | None]:
        return counter.count_at_factors(loop.stage.part, loop.stage.loop, gains, factors)

    edges = band_edges(counter, loop)
    margins = data_margins(band, edges, unit_crossings(loop, curve), unit)
    ranges = data_ranges(lambda factor: BandOfLoop(counter, loop.stage, gains, factor), edges, count, unstable)
    return LoopStudy(curve, tuple(crossings), tuple(arcs), ranges, margins)


def _turns(crossings: Sequence[NegativeCrossing], arcs: Sequence[UnboundedArc]) -> int:
    return sum(c.turns for c in crossings if c.value < -1.0) + sum(arc.turns for arc in arcs)
