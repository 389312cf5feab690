"""The loops from the inside to the outside, and the ladder of unstable poles as they close.

Each unstable pole is a strand that comes down from "all open": a loop that catches it ends the strand (``┴``), a loop
that creates one starts a strand (``┬``), and what still hangs below the outermost loop is left unstable.
"""

from __future__ import annotations

import math

from encircle.engine.result import LoopResult
from encircle.tui.picture import Picture
from encircle.tui.sheet import Ink, Piece, Row, Run, Sheet, padded
from encircle.tui.tightest_limit import missed_limits, tightest_limit
from encircle.tui.wording import (
    LIMIT_WORDS,
    VERDICT_WORDS,
    count_or_unknown,
    limit_found,
    limit_required,
    plural,
)

TITLE = "Loops, inside to outside"
MOST_STRANDS = 5
_NAME_WIDTH = 20
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
        _loop_row(sheet, picture, number, strands)
        if roomy:
            _second_row(sheet, picture, number, strands)
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


def _loop_row(sheet: Sheet, picture: Picture, number: int, width: int) -> None:
    loop = picture.now.loops[number]
    chosen = number == picture.chosen
    name_ink = Ink.CHOSEN if chosen else Ink.STRONG
    name_width = max(8, min(_NAME_WIDTH, sheet.width - 24 - width))
    before, after = loop.unstable_poles_before, loop.unstable_poles_after
    count_ink = Ink.BAD if loop.verdict == "unstable" else Ink.PLAIN
    sheet.row(
        (f"{'►' if chosen else ' '}{number + 1:>2} ", name_ink),
        (strands(before, after).ljust(width), Ink.BAD),
        (padded(sheet.clean(loop.name), name_width), name_ink),
        " ",
        (VERDICT_WORDS[loop.verdict], VERDICT_INK[loop.verdict]),
        " " * (_VERDICT_WIDTH - len(VERDICT_WORDS[loop.verdict])),
        (f"{count_or_unknown(before)} → {count_or_unknown(after)}", count_ink),
        *_trial(loop, picture.filed.loops[number]),
    )


def _trial(loop: LoopResult, filed: LoopResult) -> list[Piece]:
    """The mark of a trial gain: its size against the file's in dB."""
    return [] if loop.gain == filed.gain else ["  ", (f"gain {gain_change(loop.gain, filed.gain)}", Ink.TRIAL)]


def gain_change(gain: float, filed: float) -> str:
    """A trial gain against the file's: ``+2.0 dB``."""
    return f"{20 * math.log10(gain / filed):+.2f} dB"


def _second_row(sheet: Sheet, picture: Picture, number: int, width: int) -> None:
    loop = picture.now.loops[number]
    after = loop.unstable_poles_after
    sheet.row("    ", (strands(after, after).ljust(width), Ink.BAD), *least_room(loop, picture.now.frequency_unit))


def least_room(loop: LoopResult, frequency_unit: str) -> list[Run]:
    """The tightest limit in words; missed ones first."""
    if loop.verdict == "undecided":
        return [(f"undecided: {loop.undecided[0].why}" if loop.undecided else "undecided", Ink.DOUBT)]
    finding = tightest_limit(loop)
    if loop.verdict == "unstable":
        return [("unstable: no margin is left", Ink.BAD)]
    if finding is None:
        return [("no limits set", Ink.QUIET)]
    words = f"{LIMIT_WORDS[finding.name].quantity} {limit_found(finding, frequency_unit)}"
    required = limit_required(finding, frequency_unit)
    missed = missed_limits(loop)
    if missed:
        return [(f"MISSED {len(missed)} of {len(loop.limits)}", Ink.ALARM), (f" {words}, {required}", Ink.BAD)]
    return [(f"tightest: {words}, {required}", Ink.PLAIN)]

