"""Margins of one loop against its limits, as lines of a table; a missed limit is marked in words and signs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from encircle.engine.result import LimitFinding, LoopResult, Margins
from encircle.tui.plain_text import Layout, Style, aligned
from encircle.tui.wording import (
    LIMIT_WORDS,
    Direction,
    decibels,
    degrees,
    frequency,
    limit_found,
    limit_required,
    limit_status,
    rounded,
    seconds,
)

MISSED_MARK = "!!"
NO_LIMIT = "no finite limit"
_INDENT = 4

_STATUS_STYLE: dict[bool | None, Style] = {True: "good", False: "bad", None: "doubt"}


@dataclass(frozen=True, slots=True)
class Quantity:
    """A margin in words: its value, what belongs to it (a factor, a direction), and where it was found."""

    value: str
    addition: str = ""
    place: str = ""


@dataclass(frozen=True, slots=True)
class MarginRow:
    """One line of the table; ``finding`` where a limit is set on the quantity."""

    name: str
    quantity: Quantity
    finding: LimitFinding | None


def margin_lines(loop: LoopResult, frequency_unit: str, layout: Layout) -> list[str]:
    """The table, or one line per entry and limit where the columns do not fit."""
    rows = margin_rows(loop, frequency_unit)
    lines = aligned([_cells(row, frequency_unit, layout) for row in rows])
    if not layout.holds(lines):
        return [line for row in rows for line in _stacked(row, frequency_unit, layout)]
    return [layout.paint(line, _style(row)) for row, line in zip(rows, lines, strict=True)]


def margin_rows(loop: LoopResult, frequency_unit: str) -> list[MarginRow]:
    """Every margin and every limit of the loop, in a fixed order."""
    found = _quantities(loop.margins, frequency_unit) if loop.margins else {}
    findings = {finding.name: finding for finding in loop.limits}
    return [
        MarginRow(name, _beside_limit(found.get(name), findings.get(name), frequency_unit), findings.get(name))
        for name in LIMIT_WORDS
        if name in findings or (name in found and name != "crossover_max")
    ]


def _beside_limit(quantity: Quantity | None, finding: LimitFinding | None, frequency_unit: str) -> Quantity:
    """The quantity with the digits that its limit needs."""
    if finding is None:
        return quantity or Quantity("")
    value = limit_found(finding, frequency_unit)
    return Quantity(value, quantity.addition, quantity.place) if quantity else Quantity(value)


def _quantities(margins: Margins, unit: str) -> Mapping[str, Quantity]:
    """All margins in words, under the names of the limits that may be set on them."""
    return {
        "gain_increase_db": _gain(margins, "increase", unit),
        "gain_decrease_db": _gain(margins, "decrease", unit),
        "phase_margin_deg": _phase(margins, unit),
        "delay_margin_s": _delay(margins, unit),
        "modulus_margin": Quantity(rounded(margins.modulus.value, "down"), "", _at(margins.modulus.frequency, unit)),
        "sensitivity_peak_db": _peak(margins, "S", unit),
        "complementary_peak_db": _peak(margins, "T", unit),
        "crossover_min": _crossover(margins, 0, unit),
        "crossover_max": _crossover(margins, -1, unit),
    }


def _gain(margins: Margins, side: str, unit: str) -> Quantity:
    margin = margins.gain_increase if side == "increase" else margins.gain_decrease
    if margin is None:
        return Quantity(NO_LIMIT)
    towards_one: Direction = "down" if side == "increase" else "up"
    factor = f"×{rounded(margin.factor, towards_one)}"
    return Quantity(decibels(margin.db, "down"), factor, _at(margin.frequency, unit))


def _phase(margins: Margins, unit: str) -> Quantity:
    phase = margins.phase
    if phase is None:
        return Quantity(NO_LIMIT)
    return Quantity(degrees(phase.degrees), f"towards {phase.direction}", _at(phase.frequency, unit))


def _delay(margins: Margins, unit: str) -> Quantity:
    delay = margins.delay
    return Quantity(seconds(delay.seconds), "", _at(delay.frequency, unit)) if delay else Quantity(NO_LIMIT)


def _peak(margins: Margins, function: str, unit: str) -> Quantity:
    peak = margins.sensitivity_peak if function == "S" else margins.complementary_peak
    return Quantity(decibels(peak.db, "up"), f"×{rounded(peak.value, 'up')}", _at(peak.frequency, unit))


def _crossover(margins: Margins, which: int, unit: str) -> Quantity:
    crossovers = margins.gain_crossovers
    if not crossovers:
        return Quantity("none")
    several = f"of {len(crossovers)}" if len(crossovers) > 1 else ""
    return Quantity(frequency(crossovers[which], unit), several)


def _at(value: float | None, unit: str) -> str:
    return f"at {frequency(value, unit)}"


def _cells(row: MarginRow, unit: str, layout: Layout) -> tuple[str, ...]:
    finding, quantity = row.finding, row.quantity
    found = f"{quantity.value}  {quantity.addition}".rstrip()
    cells = (_mark(row), LIMIT_WORDS[row.name].quantity, found, quantity.place)
    limit = (limit_required(finding, unit), limit_status(finding)) if finding else ("", "")
    return tuple(layout.text(cell) for cell in (*cells, *limit))


def _stacked(row: MarginRow, unit: str, layout: Layout) -> list[str]:
    quantity, finding = row.quantity, row.finding
    words = (LIMIT_WORDS[row.name].quantity, quantity.value, quantity.addition, quantity.place)
    found = " ".join(word for word in words if word)
    limit = f"; {limit_required(finding, unit)}: {limit_status(finding)}" if finding else ""
    lines = layout.wrapped(found + limit, _INDENT, _INDENT + 2, mark=_mark(row))
    return [layout.paint(line, _style(row)) for line in lines]


def _mark(row: MarginRow) -> str:
    return MISSED_MARK if row.finding is not None and row.finding.met is False else "  "


def _style(row: MarginRow) -> Style | None:
    """Colour for what is missed or undecided; what is met stays quiet."""
    if row.finding is None or row.finding.met is True:
        return None
    return _STATUS_STYLE[row.finding.met]
