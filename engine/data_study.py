"""One loop with measured blocks: the chord curve with its crossings, and what the band guarantees."""

from __future__ import annotations

from collections.abc import Sequence

from encircle.engine.band_cells import BandOfLoop
from encircle.engine.contact_search import band_on_counted_cells
from encircle.engine.counting import Counter, Gains
from encircle.engine.crossings import NegativeCrossing, UnboundedArc, unbounded_arcs, unit_crossings
from encircle.engine.data_crossings import chord_crossings, off_the_axis
from encircle.engine.data_margins import data_margins
from encircle.engine.data_ranges import data_ranges
from encircle.engine.loop_study import DENSITIES, LoopStudy, sample_loop
from encircle.engine.open_loop import OpenLoop
from encircle.engine.sampled_curve import SampledCurve


def study_data(
    counter: Counter, loop: OpenLoop, gains: Gains, unstable: int, windings: int | None, unit: float
) -> LoopStudy:
    """What curve and band show, held against the counts Z = ``unstable`` and N = ``windings``.

    Raises ArithmeticError where the chord curve never winds as the count says.
    """
    band = BandOfLoop(counter, loop.stage, gains)
    start = band_on_counted_cells(counter, loop, band)
    curve, crossings, arcs = _chord_curve(counter, loop, band, windings)

    def count(factors: Sequence[float]) -> list[int | None]:
        return counter.count_at_factors(loop.stage.part, loop.stage.loop, gains, factors)

    ranges = data_ranges(band, start, loop.endless, count, unstable)
    margins = data_margins(band, start, ranges, unit_crossings(loop, curve), unit)
    return LoopStudy(curve, tuple(crossings), tuple(arcs), ranges, margins)


def _chord_curve(
    counter: Counter, loop: OpenLoop, band: BandOfLoop, windings: int | None
) -> tuple[SampledCurve, list[NegativeCrossing], list[UnboundedArc]]:
    """The curve of the chords with its crossings and arcs, sampled ever finer until they wind as counted."""
    for density in DENSITIES:
        curve = off_the_axis(sample_loop(counter, loop, density=density))
        crossings = chord_crossings(loop, band, curve)
        arcs = unbounded_arcs(loop, curve)
        turns = sum(c.turns for c in crossings if c.value < -1.0) + sum(arc.turns for arc in arcs)
        if windings is None or turns == windings:
            return curve, crossings, arcs
    raise ArithmeticError(f"the chords turn {turns} times about -1, the count says {windings}")
