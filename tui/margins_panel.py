"""Margins of one loop against its limits, and against the file where a gain is on trial.

A missed limit is told three ways: the word at the start of the row, reverse video over the row, and colour.
"""

from __future__ import annotations

import math

from encircle.engine.result import LoopResult
from encircle.tui.margin_names import SHORT_NAMES, short_required, short_value
from encircle.tui.margin_table import MarginRow, margin_rows
from encircle.tui.sheet import Ink, Row, Run, Sheet
from encircle.tui.tightest_limit import missed_limits

TITLE = "Room"
_STATUS: dict[bool | None, Run] = {
    True: ("met   ", Ink.GOOD),
    False: ("MISSED", Ink.ALARM),
    None: ("undecided", Ink.DOUBT),
}
_NO_STATUS: Run = ("      ", Ink.PLAIN)  # the columns stay where they are whatever is met or missed


def margins_rows(
    loop: LoopResult,
    filed: LoopResult,
    frequency_unit: str,
    width: int,
    *,
    key: str = "",
    chosen: bool = False,
    ascii_only: bool = False,
) -> tuple[Row, ...]:
    """The whole panel; ``filed`` is the same loop in the file, the very same object where nothing is changed."""
    sheet = Sheet(width, ascii_only=ascii_only)
    sheet.heading(key, f"{TITLE}: {loop.name}{_tally(loop)}", chosen=chosen)
    if loop.margins is None:
        sheet.row((f" {_no_margins(loop)}", Ink.DOUBT if loop.verdict == "undecided" else Ink.BAD))
    rows = margin_rows(loop, frequency_unit)
    before = {row.name: row for row in margin_rows(filed, frequency_unit)} if filed is not loop else {}
    trends = _trends(loop, filed)
    lines = [_cells(row, before.get(row.name), trends.get(row.name, ""), frequency_unit) for row in rows]
    missed = [number for number, row in enumerate(rows) if row.finding is not None and row.finding.met is False]
    if lines:
        sheet.table(lines, "llrlllll", gap=1, optional=(4, 7, 6), reverse=missed)
    return sheet.rows


def _tally(loop: LoopResult) -> str:
    missed = len(missed_limits(loop))
    return f", MISSED {missed} of {len(loop.limits)}" if missed else ""


def _no_margins(loop: LoopResult) -> str:
    if loop.verdict == "undecided":
        return "no margins: the count is undecided"
    return "no margins: the loop is not stable" if loop.verdict == "unstable" else "no margins"


def _cells(row: MarginRow, before: MarginRow | None, trend: str, unit: str) -> list[Run]:
    """Status, quantity, value, trend, addition, limit, value in the file, place."""
    status = _STATUS[row.finding.met] if row.finding is not None else _NO_STATUS
    changed = before is not None and before.quantity.value != row.quantity.value
    limit = short_required(row.finding, unit) if row.finding is not None else ""
    filed = f"file {short_value(before.quantity.value)}" if before is not None and changed else ""
    return [
        status,
        (SHORT_NAMES[row.name], Ink.PLAIN),
        (short_value(row.quantity.value), Ink.TRIAL if changed else Ink.STRONG),
        (trend if changed else "", Ink.TRIAL),
        (row.quantity.addition, Ink.QUIET),
        (limit, Ink.PLAIN),
        (filed, Ink.QUIET),
        (row.quantity.place, Ink.QUIET),
    ]


def _sizes(loop: LoopResult) -> dict[str, float]:
    """The margins as plain sizes under the names of their limits; a side without a finite limit is infinite."""
    margins = loop.margins
    if margins is None:
        return {}
    crossovers = margins.gain_crossovers
    return {
        "gain_increase_db": margins.gain_increase.db if margins.gain_increase else math.inf,
        "gain_decrease_db": margins.gain_decrease.db if margins.gain_decrease else math.inf,
        "phase_margin_deg": margins.phase.degrees if margins.phase else math.inf,
        "delay_margin_s": margins.delay.seconds if margins.delay else math.inf,
        "modulus_margin": margins.modulus.value,
        "sensitivity_peak_db": margins.sensitivity_peak.db,
        "complementary_peak_db": margins.complementary_peak.db,
        **({"crossover_min": crossovers[0], "crossover_max": crossovers[-1]} if crossovers else {}),
    }


def _trends(loop: LoopResult, filed: LoopResult) -> dict[str, str]:
    """``▲`` where a size has grown against the file, ``▼`` where it has shrunk."""
    before = _sizes(filed)
    return {
        name: "▲" if size > before[name] else "▼" if size < before[name] else ""
        for name, size in _sizes(loop).items()
        if name in before
    }
