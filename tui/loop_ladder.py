"""The loops from the inside to the outside, and the ladder of unstable poles as they close.

Each unstable pole is a strand that comes down from "all open": a loop that catches it ends the strand (``┴``), a loop
that creates one starts a strand (``┬``), and what still hangs below the outermost loop is left unstable.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from rich.cells import cell_len

from encircle.engine.result import LoopResult
from encircle.tui.margin_names import SHORT_NAMES, short_finding, short_found
from encircle.tui.picture import Picture
from encircle.tui.sheet import MINUS, Ink, Piece, Row, Run, Sheet, padded, row_width
from encircle.tui.tightest_limit import missed_limits, tightest_limit
from encircle.tui.wording import (
    VERDICT_WORDS,
    count_or_unknown,
    plural,
)

TITLE = "Loops, inside to outside"
MOST_STRANDS = 5
_MOST_NAME = 24
_EVIDENCE_FROM = 50
_TRIAL_WIDTH = len(" +00.00 dB ")
_VERDICT_WIDTH = max(map(len, VERDICT_WORDS.values())) + 2
VERDICT_INK = {"stable": Ink.GOOD, "as_declared": Ink.GOOD, "unstable": Ink.ALARM, "undecided": Ink.DOUBT}


def ladder_height(loops: int, most: int) -> int:
    """Rows the panel wants: heading, all open, two rows a loop (one where that is too much), all closed."""
    roomy = 3 + 2 * loops
    return roomy if roomy <= most else min(3 + loops, most)


def ladder_rows(
    picture: Picture, width: int, height: int, *, key: str = "", chosen: bool = False, ascii_only: bool = False
) -> tuple[Row, ...]:
    """The panel: as many rows as fit, the chosen loop always among them."""
    loops = picture.now.loops
    sheet = Sheet(width, ascii_only=ascii_only)
    sheet.heading(key, TITLE, chosen=chosen)
    roomy = 3 + 2 * len(loops) <= height
    strands = _strand_width(picture)
    _end_row(sheet, "all open", picture.now.unstable_poles_all_open, strands)
    for number in _shown(len(loops), picture.chosen, height - 3, 2 if roomy else 1):
        told = _loop_row(sheet, picture, number, strands)
        if roomy:
            _second_row(sheet, picture, number, strands, [] if told else _trial_mark(picture, number))
    _end_row(sheet, "all closed", picture.now.unstable_poles_all_closed, strands)
    return sheet.rows[:height]


def _shown(loops: int, chosen: int, rows: int, rows_each: int) -> range:
    """The loops that fit, the chosen one in the middle where not all do."""
    fitting = min(max(rows // rows_each, 1), loops)
    first = min(max(chosen - fitting // 2, 0), loops - fitting)
    return range(first, first + fitting)


def _strand_width(picture: Picture) -> int:
    counts = [picture.now.unstable_poles_all_open, picture.now.unstable_poles_all_closed]
    for loop in picture.now.loops:
        counts += [loop.unstable_poles_before, loop.unstable_poles_after]
    return min(max(count or 0 for count in counts), MOST_STRANDS) + 1


def strands(before: int | None, after: int | None) -> str:
    """Strands that pass, end and start at a loop; ``?`` where a count is unknown, ``+`` for those beyond the room."""
    if before is None or after is None:
        return "?"
    passing = min(before, after)
    drawn = "│" * passing + "┴" * (before - passing) + "┬" * (after - passing)
    return drawn if len(drawn) <= MOST_STRANDS else drawn[-MOST_STRANDS:] + "+"


def _end_row(sheet: Sheet, label: str, count: int | None, width: int) -> None:
    ink = Ink.DOUBT if count is None else (Ink.BAD if count else Ink.QUIET)
    words = "undecided" if count is None else plural(count, "unstable pole") if count else "no unstable pole"
    drawn = strands(count, count).ljust(width)
    sheet.row("    ", (drawn, Ink.BAD), (f"{label}: ", Ink.QUIET), (words, ink))


def _loop_row(sheet: Sheet, picture: Picture, number: int, width: int) -> bool:
    """The loop's own row; whether its trial gain had room there."""
    loop = picture.now.loops[number]
    chosen = number == picture.chosen
    name_ink = Ink.CHOSEN if chosen else Ink.STRONG
    names = _name_width(sheet, picture, width)
    verdict = VERDICT_WORDS[loop.verdict]
    left: list[Piece] = [
        (f"{'►' if chosen else ' '}{number + 1:>2}", name_ink),
        ("*" if number in picture.changed else " ", Ink.TRIAL),
        (strands(loop.unstable_poles_before, loop.unstable_poles_after).ljust(width), Ink.BAD),
        (padded(sheet.clean(loop.name), names), name_ink),
        "  ",
        (verdict, VERDICT_INK[loop.verdict]),
        " " * (_VERDICT_WIDTH - len(verdict)),
        *_counts(loop, with_evidence=sheet.width >= _EVIDENCE_FROM),
    ]
    has_room = row_width(sheet.runs(left)) + _TRIAL_WIDTH <= sheet.width
    sheet.split_row(left, _trial_mark(picture, number) if has_room else [])
    return has_room


def _counts(loop: LoopResult, *, with_evidence: bool) -> list[Piece]:
    """P → Z and, where there is room, what they rest on."""
    counts = f"{count_or_unknown(loop.unstable_poles_before)} → {count_or_unknown(loop.unstable_poles_after)}"
    pieces: list[Piece] = [(counts, Ink.BAD if loop.verdict == "unstable" else Ink.PLAIN)]
    return [*pieces, (f"  {loop.evidence}", Ink.QUIET)] if with_evidence and loop.evidence != "none" else pieces


def _trial_mark(picture: Picture, number: int) -> list[Piece]:
    """The change of a gain on trial against the file's."""
    if number not in picture.changed:
        return []
    return [(f" {gain_change(picture.now.loops[number].gain, picture.filed.loops[number].gain)} ", Ink.TRIAL)]


def _name_width(sheet: Sheet, picture: Picture, strands_width: int) -> int:
    """As long as the longest name, as far as there is room; names give way first."""
    longest = max(cell_len(sheet.clean(loop.name)) for loop in picture.now.loops)
    return max(min(longest, _MOST_NAME, sheet.width - 25 - strands_width), 6)


def gain_change(gain: float, filed: float) -> str:
    """A trial gain against the file's: ``+2.0 dB``."""
    return f"{20 * math.log10(gain / filed):+.2f} dB".replace("-", MINUS)


def _second_row(sheet: Sheet, picture: Picture, number: int, width: int, trial: Sequence[Piece]) -> None:
    """The loop's tightest limit, in as many words as there is room for."""
    loop = picture.now.loops[number]
    after = loop.unstable_poles_after
    left: list[Piece] = ["    ", (strands(after, after).ljust(width), Ink.BAD)]
    room = sheet.width - row_width(sheet.runs([*left, *trial]))
    wordings = least_room(loop, picture.now.frequency_unit)
    fitting = (words for words in wordings if row_width(sheet.runs(words)) <= room)
    sheet.split_row([*left, *next(fitting, wordings[-1])], trial)


def least_room(loop: LoopResult, frequency_unit: str) -> tuple[Sequence[Run], ...]:
    """The tightest limit in words, missed ones first; from the longest wording to the shortest."""
    if loop.verdict == "undecided":
        return ([(f"undecided: {_why(loop)}", Ink.DOUBT)],)
    if loop.verdict == "unstable":
        return ([("no room is left", Ink.BAD)],)
    finding = tightest_limit(loop)
    if finding is None:
        return ([("no limits set", Ink.QUIET)],)
    full, brief = short_finding(finding, frequency_unit), short_found(finding, frequency_unit)
    name = SHORT_NAMES[finding.name]
    missed = missed_limits(loop)
    if missed:
        more = f" and {len(missed) - 1} more" if len(missed) > 1 else ""
        return tuple([("MISSED", Ink.ALARM), (f" {words}", Ink.BAD)] for words in (full + more, full, brief, name))
    plain: list[Run] = [(full, Ink.PLAIN)]
    return [*plain, ("  least room", Ink.QUIET)], plain, [(brief, Ink.PLAIN)]


def _why(loop: LoopResult) -> str:
    """The first reason why a loop is undecided."""
    if loop.undecided:
        return loop.undecided[0].why
    blocks = ", ".join(dict.fromkeys(pole.block for pole in loop.axis_poles_left))
    return f"it leaves poles on the axis ({blocks})" if blocks else "the count is not known"
