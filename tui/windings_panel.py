"""The count of one loop, laid open: every crossing of the real axis left of -1, their sum, the poles, the evidence."""

from __future__ import annotations

from collections.abc import Sequence

from encircle.engine.result import GainRange, LoopResult, PoleOwner, RealAxisCrossing
from encircle.tui.loop_ladder import VERDICT_INK
from encircle.tui.sheet import Ink, Row, Run, Sheet
from encircle.tui.wording import (
    EVIDENCE_WORDS,
    VERDICT_WORDS,
    count_or_unknown,
    frequency,
    plural,
    rounded_towards_one,
    signed,
)

TITLE = "Turns round −1"


def windings_rows(
    loop: LoopResult, frequency_unit: str, width: int, *, key: str = "", chosen: bool = False, ascii_only: bool = False
) -> tuple[Row, ...]:
    """The whole panel, as long as it needs to be."""
    sheet = Sheet(width, ascii_only=ascii_only)
    sheet.heading(key, f"{TITLE}: {loop.name}", chosen=chosen)
    _sum_row(sheet, loop)
    _undecided(sheet, loop, frequency_unit)
    _crossings(sheet, loop, frequency_unit)
    _owners(sheet, loop)
    _axis_poles(sheet, loop, frequency_unit)
    _evidence(sheet, loop)
    _gain_ranges(sheet, loop)
    return sheet.rows


def _sum_row(sheet: Sheet, loop: LoopResult) -> None:
    """N + P = Z, what it means in one word."""
    windings = "?" if loop.windings is None else signed(loop.windings)
    before, after = count_or_unknown(loop.unstable_poles_before), count_or_unknown(loop.unstable_poles_after)
    sheet.row(
        (f" P {before}  +  N {windings}  =  Z {after}   ", Ink.STRONG),
        (VERDICT_WORDS[loop.verdict], VERDICT_INK[loop.verdict]),
    )
    if loop.verdict == "as_declared":
        sheet.paragraph(f"the file says that this loop leaves {_intended(loop)}", hanging=3)


def _intended(loop: LoopResult) -> str:
    left = []
    if loop.leaves_unstable:
        left.append(plural(loop.leaves_unstable, "unstable pole"))
    if loop.leaves_on_axis:
        left.append(f"{plural(loop.leaves_on_axis, 'pole')} on the axis")
    return " and ".join(left)


def _undecided(sheet: Sheet, loop: LoopResult, unit: str) -> None:
    for stretch in loop.undecided:
        place = f"{frequency(stretch.lower, unit)} to {frequency(stretch.upper, unit)}"
        sheet.paragraph(f"{place}: {stretch.why}", mark=("UNDECIDED", Ink.DOUBT), hanging=3)


def _crossings(sheet: Sheet, loop: LoopResult, unit: str) -> None:
    """The crossings in order of frequency with the running sum; the nearest one right of -1 stands last."""
    if loop.windings is None and not loop.real_axis_crossings:
        return
    turning = sorted((item for item in loop.real_axis_crossings if item.turns), key=_rank)
    if not turning:
        sheet.row((" no crossing of the real axis left of −1", Ink.PLAIN))
    lines = [_header(), *_with_running_sum(turning, unit)] if turning else []
    lines += [_nearest(item, unit) for item in loop.real_axis_crossings if not item.turns]
    if lines:
        sheet.table(lines, "rrrrl", optional=(4,))


def _header() -> list[Run]:
    return [(word, Ink.QUIET) for word in ("at", "L", "turns", "sum", "")]


def _rank(crossing: RealAxisCrossing) -> float:
    return float("inf") if crossing.frequency is None else crossing.frequency


def _with_running_sum(crossings: Sequence[RealAxisCrossing], unit: str) -> list[list[Run]]:
    lines: list[list[Run]] = []
    total = 0
    for crossing in crossings:
        total += crossing.turns
        direction = "clockwise" if crossing.turns > 0 else "anticlockwise"
        place = frequency(crossing.frequency, unit)
        cells = (place, _value(crossing), signed(crossing.turns), signed(total), direction)
        lines.append([(text, Ink.PLAIN) for text in cells])
    return lines


def _nearest(crossing: RealAxisCrossing, unit: str) -> list[Run]:
    cells = (frequency(crossing.frequency, unit), _value(crossing), "0", "", "right of −1")
    return [(text, Ink.QUIET) for text in cells]


def _value(crossing: RealAxisCrossing) -> str:
    """Where L crosses, rounded towards -1."""
    return "−∞" if crossing.value is None else f"−{rounded_towards_one(-crossing.value)}"


def _owners(sheet: Sheet, loop: LoopResult) -> None:
    if loop.pole_owners:
        sheet.paragraph(f"P: {', '.join(_owner(owner) for owner in loop.pole_owners)}", hanging=4)


def _owner(owner: PoleOwner) -> str:
    origin = f"left by loop {owner.owner}" if owner.kind == "loop" else f"from {owner.kind} {owner.owner}"
    return f"{owner.unstable_poles} {origin}"


def _axis_poles(sheet: Sheet, loop: LoopResult, unit: str) -> None:
    if loop.axis_poles_left:
        poles = ", ".join(f"{pole.block} at {frequency(pole.frequency, unit)}" for pole in loop.axis_poles_left)
        sheet.paragraph(f"left on the axis: {poles}", hanging=3)


def _evidence(sheet: Sheet, loop: LoopResult) -> None:
    ink = Ink.DOUBT if loop.evidence == "none" else Ink.GOOD if loop.evidence == "proved" else Ink.PLAIN
    sheet.paragraph(f"evidence: {loop.evidence}; {EVIDENCE_WORDS[loop.evidence]}", ink, hanging=3)
    for assumption in loop.assumptions:
        sheet.paragraph(f"· {assumption}", Ink.PLAIN, hanging=3)


def _gain_ranges(sheet: Sheet, loop: LoopResult) -> None:
    """Z over the factor on top of the loop's gain, the present one at 1."""
    if loop.gain_ranges:
        sheet.paragraph(f"Z over a factor on the gain: {'; '.join(map(_range, loop.gain_ranges))}", hanging=3)


def _range(item: GainRange) -> str:
    lower = "0" if item.lower == 0 else rounded_towards_one(item.lower)
    span = f"above {lower}" if item.upper is None else f"{lower} to {rounded_towards_one(item.upper)}"
    return f"{span}: {item.unstable_poles}"
