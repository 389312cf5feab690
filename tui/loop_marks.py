"""What the plots mark besides the curves, taken from a loop's result."""

from __future__ import annotations

from dataclasses import dataclass

from encircle.engine.result import LoopResult, Margins


@dataclass(frozen=True, slots=True)
class LoopMarks:
    """Limits as they are drawn and frequencies (file unit) worth a mark.

    ``forbidden_radius``: L must keep this distance from -1. ``margins``: frequencies of the gain, phase and modulus
    margins, without those at standstill or infinity.
    """

    forbidden_radius: float | None = None
    sensitivity_limit_db: float | None = None
    complementary_limit_db: float | None = None
    crossovers: tuple[float, ...] = ()
    margins: tuple[float, ...] = ()


def loop_marks(result: LoopResult) -> LoopMarks:
    """The marks of a loop: its limits, and the frequencies of its margins where it has any."""
    required = {limit.name: limit.required for limit in result.limits}
    return LoopMarks(
        forbidden_radius=_forbidden_radius(required),
        sensitivity_limit_db=required.get("sensitivity_peak_db"),
        complementary_limit_db=required.get("complementary_peak_db"),
        crossovers=result.margins.gain_crossovers if result.margins else (),
        margins=_margin_frequencies(result.margins) if result.margins else (),
    )


def _forbidden_radius(required: dict[str, float]) -> float | None:
    """|S| = 1/|1 + L|: a limit on the peak of S is a limit on the least |1 + L|; the stricter one counts."""
    radii = [required["modulus_margin"]] if "modulus_margin" in required else []
    if "sensitivity_peak_db" in required:
        radii.append(10 ** (-required["sensitivity_peak_db"] / 20))
    return max(radii, default=None)


def _margin_frequencies(margins: Margins) -> tuple[float, ...]:
    found = (margins.gain_increase, margins.gain_decrease, margins.phase, margins.modulus)
    frequencies = [margin.frequency for margin in found if margin is not None]
    return tuple(sorted({frequency for frequency in frequencies if frequency}))
