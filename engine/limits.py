"""A loop's limits held against its margins."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from encircle.engine.result import LimitFinding, Margins, Verdict

Reading = Callable[[Margins], float | None]


def _smaller_gain_margin(margins: Margins) -> float | None:
    sizes = [side.db for side in (margins.gain_increase, margins.gain_decrease) if side is not None]
    return min(sizes, default=None)


def _first(margins: Margins) -> float | None:
    return min(margins.gain_crossovers, default=None)


def _last(margins: Margins) -> float | None:
    return max(margins.gain_crossovers, default=None)


AT_LEAST: Mapping[str, Reading] = {
    "gain_margin_db": _smaller_gain_margin,
    "gain_increase_db": lambda m: m.gain_increase.db if m.gain_increase else None,
    "gain_decrease_db": lambda m: m.gain_decrease.db if m.gain_decrease else None,
    "phase_margin_deg": lambda m: m.phase.degrees if m.phase else None,
    "modulus_margin": lambda m: m.modulus.value,
    "delay_margin_s": lambda m: m.delay.seconds if m.delay else None,
    "crossover_min": _first,
}
AT_MOST: Mapping[str, Reading] = {
    "sensitivity_peak_db": lambda m: m.sensitivity_peak.db,
    "complementary_peak_db": lambda m: m.complementary_peak.db,
    "crossover_max": _last,
}
CROSSOVER_LIMITS = ("crossover_min", "crossover_max")


def judge(limits: Mapping[str, float], verdict: Verdict, margins: Margins | None) -> tuple[LimitFinding, ...]:
    """Each limit with what was found; undecided loops leave it open, unstable ones miss it.

    Without a finite margin a limit is met, except that a crossover limit without a crossover is not.
    """
    return tuple(_judge(name, required, verdict, margins) for name, required in limits.items())


def _judge(name: str, required: float, verdict: Verdict, margins: Margins | None) -> LimitFinding:
    if verdict == "undecided":
        return LimitFinding(name, required, None, None)
    if margins is None:
        return LimitFinding(name, required, None, False)
    found = (AT_LEAST.get(name) or AT_MOST[name])(margins)
    if found is None:
        return LimitFinding(name, required, None, name not in CROSSOVER_LIMITS)
    return LimitFinding(name, required, found, found >= required if name in AT_LEAST else found <= required)
