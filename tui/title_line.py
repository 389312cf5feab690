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
    """Title and file at the left, the outcome with its gravest reasons at the right."""
    sheet = Sheet(width, ascii_only=ascii_only)
    ending: list[Piece] = [("counting …  ", Ink.DOUBT)] if counting else []
    if picture.changed:
        ending += [("TRIAL ", Ink.TRIAL), *_outcome(picture.now, width // 3), ("  file ", Ink.QUIET)]
        ending += [(OUTCOME_WORDS[picture.filed.result], OUTCOME_INK[picture.filed.result]), " "]
    else:
        ending += [*_outcome(picture.now, width // 2), " "]
    file = PurePath(picture.filed.file).name
    sheet.split_row([" ", (picture.filed.title or file, Ink.STRONG), "  ", (file, Ink.QUIET), "  "], ending)
    return sheet.rows[0]


def _outcome(result: Result, room: int) -> list[Piece]:
    reasons = list(outcome_reasons(result))
    while len(reasons) > 1 and len("; ".join(reasons)) > room:
        reasons.pop()
    ink = Ink.BAD if result.result == "fail" else Ink.PLAIN
    outcome = (f" {OUTCOME_WORDS[result.result]} ", OUTCOME_INK[result.result])
    return [outcome, *([(f" {'; '.join(reasons)}", ink)] if reasons else [])]


def outcome_reasons(result: Result) -> tuple[str, ...]:
    """Why the whole does not pass, the gravest reason first; empty where it passes."""
    if result.result == "pass":
        return ()
    unstable = [loop.name for loop in result.loops if loop.verdict == "unstable"]
    undecided = [loop.name for loop in result.loops if loop.verdict == "undecided"]
    hidden = [pole.block for pole in result.hidden_unstable_poles]
    left = result.unstable_poles_all_closed or 0
    missed = sum(len(missed_limits(loop)) for loop in result.loops if loop.verdict != "unstable")
    reasons = (
        f"unstable: {', '.join(unstable)}" if unstable else "",
        f"hidden unstable pole in {', '.join(hidden)}" if hidden else "",
        f"{plural(left, 'unstable pole')} with all loops closed" if left and not unstable and not hidden else "",
        f"{plural(missed, 'limit')} missed" if missed else "",
        f"undecided: {', '.join(undecided)}" if undecided else "",
    )
    return tuple(reason for reason in reasons if reason) or ("the count of the whole diagram is undecided",)
