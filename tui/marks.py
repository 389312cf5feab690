"""The frequencies of a loop that are worth a look."""

from __future__ import annotations

from encircle.engine.result import LoopResult, Margins


def marked_frequencies(loop: LoopResult) -> tuple[float, ...]:
    """Frequencies worth a look, ascending: crossings of the real axis, crossovers, margins and peaks."""
    crossings = [crossing.frequency for crossing in loop.real_axis_crossings]
    found = [*crossings, *(_of_margins(loop.margins) if loop.margins else ())]
    return tuple(sorted({value for value in found if value}))


def _of_margins(margins: Margins) -> list[float | None]:
    places = (
        margins.gain_increase,
        margins.gain_decrease,
        margins.phase,
        margins.delay,
        margins.modulus,
        margins.sensitivity_peak,
        margins.complementary_peak,
    )
    return [*margins.gain_crossovers, *(place.frequency for place in places if place is not None)]
