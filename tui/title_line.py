"""The first row: which project, and whether all of it passes, as the file stands and with the gains on trial."""

from __future__ import annotations

from pathlib import PurePath

from encircle.engine.result import Result
from encircle.tui.picture import Picture
from encircle.tui.sheet import Ink, Piece, Row, Sheet
from encircle.tui.tightest_limit import missed_limits
from encircle.tui.wording import OUTCOME_WORDS, plural

OUTCOME_INK = {"pass": Ink.GOOD, "fail": Ink.ALARM, "undecided": Ink.DOUBT}


def title_row(picture: Picture, width: int, *, counting: bool = False, ascii_only: bool = False) -> Row:
    """Title and file at the left, the outcome with its first reason at the right."""
    sheet = Sheet(width, ascii_only=ascii_only)
    ending: list[Piece] = [("counting …  ", Ink.DOUBT)] if counting else []
    if picture.changed:
        ending += [("TRIAL ", Ink.TRIAL), *_outcome(picture.now), ("  file ", Ink.QUIET)]
        ending += [(OUTCOME_WORDS[picture.filed.result], OUTCOME_INK[picture.filed.result]), " "]
    else:
        ending += [*_outcome(picture.now), " "]
    file = PurePath(picture.filed.file).name
    sheet.split_row([" ", (picture.filed.title or file, Ink.STRONG), "  ", (file, Ink.QUIET), "  "], ending)
    return sheet.rows[0]


def _outcome(result: Result) -> list[Piece]:
    reason = outcome_reason(result)
    words: list[Piece] = [(f" {OUTCOME_WORDS[result.result]} ", OUTCOME_INK[result.result])]
    return [*words, (f" {reason}", Ink.BAD if result.result == "fail" else Ink.PLAIN)] if reason else words


def outcome_reason(result: Result) -> str:
    """Why the whole does not pass, the gravest reason first; empty where it passes."""
    unstable = [loop.name for loop in result.loops if loop.verdict == "unstable"]
    if unstable:
        return f"unstable: {', '.join(unstable)}"
    if result.hidden_unstable_poles:
        return f"hidden unstable pole in {', '.join(pole.block for pole in result.hidden_unstable_poles)}"
    if result.unstable_poles_all_closed:
        return f"{plural(result.unstable_poles_all_closed, 'unstable pole')} with all loops closed"
    missed = sum(len(missed_limits(loop)) for loop in result.loops)
    if missed:
        return f"{plural(missed, 'limit')} missed"
    undecided = [loop.name for loop in result.loops if loop.verdict == "undecided"]
    if undecided:
        return f"undecided: {', '.join(undecided)}"
    return "" if result.result == "pass" else "the count of the whole diagram is undecided"
