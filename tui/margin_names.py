"""Margins and limits in as few words as the screen has room for."""

from __future__ import annotations

from encircle.engine.result import LimitFinding
from encircle.tui.margin_table import NO_LIMIT as NO_FINITE_LIMIT
from encircle.tui.wording import limit_found, limit_required

INFINITE = "∞"
SHORT_NAMES: dict[str, str] = {
    "gain_margin_db": "gain both",
    "gain_increase_db": "gain up",
    "gain_decrease_db": "gain down",
    "phase_margin_deg": "phase",
    "delay_margin_s": "delay",
    "modulus_margin": "modulus",
    "sensitivity_peak_db": "peak |S|",
    "complementary_peak_db": "peak |T|",
    "crossover_min": "crossover",
    "crossover_max": "highest",
}


def short_value(value: str) -> str:
    """A margin's value; one without a finite limit is infinite."""
    return INFINITE if value == NO_FINITE_LIMIT else value


def short_required(finding: LimitFinding, frequency_unit: str) -> str:
    """``≥ 45°`` for at least 45°."""
    return limit_required(finding, frequency_unit).replace("at least", "≥").replace("at most", "≤")


def short_found(finding: LimitFinding, frequency_unit: str) -> str:
    """``phase 71.26°``."""
    return f"{SHORT_NAMES[finding.name]} {short_value(limit_found(finding, frequency_unit))}"


def short_finding(finding: LimitFinding, frequency_unit: str) -> str:
    """``phase 71.26° (≥ 45°)``."""
    return f"{short_found(finding, frequency_unit)} ({short_required(finding, frequency_unit)})"
