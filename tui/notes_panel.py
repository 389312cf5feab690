"""What else is known: warnings, hidden poles, gain ranges, data files, notes from the file, the caution."""

from __future__ import annotations

from encircle.engine.declarations import Declarations
from encircle.engine.result import GainRange, HiddenPole, LoopResult, Result
from encircle.tui.sheet import Ink, Row, Sheet
from encircle.tui.wording import CAUTION, complex_pair, frequency, rounded_towards_one

TITLE = "Notes"


def notes_rows(
    result: Result,
    loop: LoopResult,
    declarations: Declarations,
    width: int,
    *,
    key: str = "",
    chosen: bool = False,
    ascii_only: bool = False,
) -> tuple[Row, ...]:
    """The whole panel, as long as it needs to be; the gravest first."""
    sheet = Sheet(width, ascii_only=ascii_only)
    sheet.heading(key, f"{TITLE}{_tally(result)}", chosen=chosen)
    for pole in result.hidden_unstable_poles:
        sheet.paragraph(f"HIDDEN unstable pole: {_hidden(pole)}; no feedback moves it", Ink.BAD, hanging=3)
    for warning in result.warnings:
        sheet.paragraph(f"! {warning}", Ink.DOUBT, hanging=3)
    _gain_ranges(sheet, loop)
    _parts(sheet, result, loop)
    _data_files(sheet, result)
    _block_notes(sheet, loop, declarations)
    sheet.paragraph(CAUTION, Ink.QUIET, hanging=3)
    return sheet.rows


def _tally(result: Result) -> str:
    count = len(result.warnings) + len(result.hidden_unstable_poles)
    return f": {count} to heed" if count else ""


def _hidden(pole: HiddenPole) -> str:
    return f"{pole.block}, {complex_pair(pole.pole)}" if pole.pole is not None else f"{pole.block}, as declared"


def _gain_ranges(sheet: Sheet, loop: LoopResult) -> None:
    """Z over the factor on top of the loop's gain."""
    if loop.gain_ranges:
        ranges = "; ".join(_range(item) for item in loop.gain_ranges)
        sheet.paragraph(f"{loop.name}, factor on its gain: {ranges}", hanging=3)


def _range(item: GainRange) -> str:
    lower = "0" if item.lower == 0 else rounded_towards_one(item.lower)
    span = f"above {lower}" if item.upper is None else f"{lower} to {rounded_towards_one(item.upper)}"
    return f"{span}: Z {item.unstable_poles}"


def _parts(sheet: Sheet, result: Result, loop: LoopResult) -> None:
    sheet.paragraph(f"cut of {loop.name} at {loop.cut}; its part: {', '.join(loop.blocks)}", hanging=3)
    for group in result.uncut_feedback:
        sheet.paragraph(f"feedback that no cut opens: {', '.join(group)}", hanging=3)


def _data_files(sheet: Sheet, result: Result) -> None:
    for data in result.measured:
        unit = result.frequency_unit
        span = f"{frequency(data.lower, unit)} to {frequency(data.upper, unit)}"
        sheet.paragraph(f"{data.block}: {data.file}, {data.lines} lines, {span}", hanging=3)


def _block_notes(sheet: Sheet, loop: LoopResult, declarations: Declarations) -> None:
    """The notes of the file, those of the chosen loop's blocks first."""
    blocks = sorted(declarations.blocks.items(), key=lambda item: item[0] not in loop.blocks)
    for name, block in blocks:
        if block.note:
            sheet.paragraph(f"{name}: {block.note}", Ink.QUIET, hanging=3)
