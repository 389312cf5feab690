"""What else is known: warnings, hidden poles, data files, notes from the file, the caution."""

from __future__ import annotations

from encircle.engine.declarations import Declarations
from encircle.engine.result import HiddenPole, LoopResult, Result
from encircle.tui.sheet import Ink, Row, Sheet
from encircle.tui.wording import CAUTION, complex_pair, frequency

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
        sheet.paragraph(f"unstable pole: {_hidden(pole)}; no feedback moves it", mark=("HIDDEN", Ink.ALARM), hanging=3)
    for warning in result.warnings:
        sheet.paragraph(str(warning), mark=("!", Ink.DOUBT), hanging=3)
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
