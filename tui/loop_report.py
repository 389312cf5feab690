"""Loops in words: the overview with the ladder of unstable poles, and the paragraph on each loop."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from encircle.engine.result import GainRange, LoopResult, PoleOwner, RealAxisCrossing, Result
from encircle.tui.margin_table import MISSED_MARK, margin_lines
from encircle.tui.plain_text import Layout, Style, aligned
from encircle.tui.tightest_limit import tightest_limit
from encircle.tui.wording import (
    EVIDENCE_WORDS,
    LIMIT_WORDS,
    VERDICT_WORDS,
    as_declared,
    count_or_unknown,
    frequency,
    plural,
    rounded_towards_one,
    signed,
)

MOST_LISTED = 12
UNDECIDED_MARK = "??"
_INDENT = 4

_VERDICT_STYLE: dict[str, Style] = {"stable": "good", "unstable": "bad", "undecided": "doubt", "as_declared": "good"}


def overview_lines(result: Result, layout: Layout) -> list[str]:
    """One line per loop in closing order: verdict, P → Z, N, evidence, limits; a few lines where it is narrow."""
    header = ("", "", "loop", "verdict", "P → Z", "N", "evidence", "limits")
    rows = [_overview_cells(number, loop) for number, loop in enumerate(result.loops, 1)]
    lines = aligned([[layout.text(cell) for cell in row] for row in (header, *rows)], right=frozenset({1, 5}))
    lead = layout.wrapped("Loops in closing order, the innermost first; unstable poles before and after each closes:")
    if not layout.holds(lines):
        return [*lead, *(line for row in rows for line in _overview_stacked(row, layout))]
    styles: list[Style | None] = ["quiet", *(_loop_style(loop) for loop in result.loops)]
    return [*lead, *(layout.paint(line, style) for line, style in zip(lines, styles, strict=True))]


def _overview_stacked(row: tuple[str, ...], layout: Layout) -> list[str]:
    mark, number, name, verdict, ladder, windings, evidence, limits = row
    sentence = f"{number} {name}: {verdict}, P → Z {ladder}, N {windings}, {evidence}, limits: {limits}"
    return layout.wrapped(sentence, _INDENT, _INDENT + 2, mark=mark)


def _overview_cells(number: int, loop: LoopResult) -> tuple[str, ...]:
    ladder = f"{count_or_unknown(loop.unstable_poles_before)} → {count_or_unknown(loop.unstable_poles_after)}"
    windings = "?" if loop.windings is None else signed(loop.windings)
    troubled = loop.verdict == "unstable" or any(finding.met is False for finding in loop.limits)
    mark = MISSED_MARK if troubled else ""
    verdict = VERDICT_WORDS[loop.verdict]
    return (mark, str(number), loop.name, verdict, ladder, windings, loop.evidence, _limits_in_short(loop))


def _limits_in_short(loop: LoopResult) -> str:
    missed = sum(finding.met is False for finding in loop.limits)
    undecided = sum(finding.met is None for finding in loop.limits)
    if missed:
        return f"{missed} of {len(loop.limits)} MISSED"
    if undecided:
        return f"{undecided} of {len(loop.limits)} undecided"
    tightest = tightest_limit(loop)
    return f"{len(loop.limits)} met, tightest {LIMIT_WORDS[tightest.name].quantity}" if tightest else "none set"


def _loop_style(loop: LoopResult) -> Style | None:
    if loop.verdict == "unstable" or any(finding.met is False for finding in loop.limits):
        return "bad"
    return "doubt" if loop.verdict == "undecided" else None


def loop_lines(number: int, loop: LoopResult, frequency_unit: str, layout: Layout) -> list[str]:
    """All that is known of one loop."""
    sentences = [_counts(loop), *_pole_owners(loop), *_evidence(loop), *_axis_poles(loop, frequency_unit)]
    return [
        *_loop_heading(number, loop, layout),
        *(layout.paint(line, _VERDICT_STYLE[loop.verdict]) for line in layout.wrapped(_verdict(loop), _INDENT)),
        *_paragraphs(sentences, layout),
        *_undecided(loop, frequency_unit, layout),
        *_margins(loop, frequency_unit, layout),
        *_paragraphs([*_gain_ranges(loop), *_crossings(loop, frequency_unit)], layout),
    ]


def _loop_heading(number: int, loop: LoopResult, layout: Layout) -> list[str]:
    heading = layout.text(f"{number}  {loop.name}")
    place = layout.text(f"cut at {loop.cut}, gain {as_declared(loop.gain)}")
    if layout.holds([f"{heading}   {place}"]):
        return [f"{layout.paint(heading, 'title')}   {place}"]
    title = (layout.paint(line, "title") for line in layout.wrapped(heading, hanging=_INDENT))
    return [*title, *layout.wrapped(place, _INDENT)]


def _paragraphs(sentences: Iterable[str], layout: Layout) -> list[str]:
    return [line for text in sentences for line in layout.wrapped(text, _INDENT, _INDENT + 2)]


def _verdict(loop: LoopResult) -> str:
    """The verdict as a sentence."""
    if loop.verdict == "stable":
        return "Stable: with this loop closed no pole right of the imaginary axis is left."
    if loop.verdict == "unstable":
        return f"UNSTABLE: {plural(loop.unstable_poles_after or 0, 'pole')} right of the imaginary axis once it closes."
    if loop.verdict == "undecided":
        return "Undecided: nothing is claimed about this loop, for the reasons given below."
    return f"As declared: closing this loop leaves {_left_as_declared(loop)}, as the file says it should."


def _left_as_declared(loop: LoopResult) -> str:
    left = []
    if loop.leaves_unstable:
        left.append(plural(loop.leaves_unstable, "unstable pole"))
    if loop.leaves_on_axis:
        left.append(f"{plural(loop.leaves_on_axis, 'pole')} on the axis")
    return " and ".join(left) or "the poles that were stated"


def _counts(loop: LoopResult) -> str:
    before, after = count_or_unknown(loop.unstable_poles_before), count_or_unknown(loop.unstable_poles_after)
    windings = "?" if loop.windings is None else signed(loop.windings)
    return f"N = {windings} clockwise turns round −1, P = {before} before, Z = P + N = {after} after."


def _pole_owners(loop: LoopResult) -> list[str]:
    owned = ", ".join(_pole_owner(owner) for owner in loop.pole_owners)
    return [f"P: {owned}."] if owned else []


def _pole_owner(owner: PoleOwner) -> str:
    if owner.kind == "loop":
        return f"{owner.unstable_poles} left by loop {owner.owner}"
    return f"{owner.unstable_poles} of {owner.kind} {owner.owner}"


def _evidence(loop: LoopResult) -> list[str]:
    return [f"Evidence: {loop.evidence}; {EVIDENCE_WORDS[loop.evidence]}.", *(f"- {text}" for text in loop.assumptions)]


def _axis_poles(loop: LoopResult, unit: str) -> list[str]:
    poles = ", ".join(f"{pole.block} at {frequency(pole.frequency, unit)}" for pole in loop.axis_poles_left)
    return [f"Left on the imaginary axis by this loop: {poles}."] if poles else []


def _undecided(loop: LoopResult, unit: str, layout: Layout) -> list[str]:
    sentences = [
        f"From {frequency(stretch.lower, unit)} to {frequency(stretch.upper, unit)}: {stretch.why}"
        for stretch in loop.undecided[:MOST_LISTED]
    ]
    sentences += _more(loop.undecided, "stretches")
    lines = [line for text in sentences for line in layout.wrapped(text, _INDENT, mark=UNDECIDED_MARK)]
    return [layout.paint(line, "doubt") for line in lines]


def _margins(loop: LoopResult, unit: str, layout: Layout) -> list[str]:
    lines = margin_lines(loop, unit, layout)
    if loop.margins is not None:
        return lines
    why = "undecided" if loop.verdict == "undecided" else "none, for the loop is unstable"
    return [*layout.wrapped(f"Margins: {why}.", _INDENT), *lines]


def _gain_ranges(loop: LoopResult) -> list[str]:
    """Z over the factor on top of the loop's gain, the ranges nearest 1 where there are many."""
    if not loop.gain_ranges:
        return []
    here = next((k for k, item in enumerate(loop.gain_ranges) if _holds_one(item)), 0)
    start = max(0, min(here - MOST_LISTED // 2, len(loop.gain_ranges) - MOST_LISTED))
    shown = loop.gain_ranges[start : start + MOST_LISTED]
    left_out = ["more with --json"] if len(shown) < len(loop.gain_ranges) else []
    left_out += ["above it not listed"] if shown[-1].upper is not None and not left_out else []
    return [f"Over the gain factor: {'; '.join([*(_gain_range(item) for item in shown), *left_out])}."]


def _holds_one(item: GainRange) -> bool:
    return item.lower < 1 and (item.upper is None or item.upper > 1)


def _gain_range(item: GainRange) -> str:
    lower = "0" if item.lower == 0 else rounded_towards_one(item.lower)
    span = f"above {lower}" if item.upper is None else f"from {lower} to {rounded_towards_one(item.upper)}"
    as_it_stands = " (1, as it stands, is here)" if _holds_one(item) else ""
    return f"Z = {item.unstable_poles} {span}{as_it_stands}"


def _crossings(loop: LoopResult, unit: str) -> list[str]:
    """Crossings of the real axis left of -1 with their turns, and the nearest one right of it."""
    if loop.windings is None:
        return []
    turning = [crossing for crossing in loop.real_axis_crossings if crossing.turns]
    others = [crossing for crossing in loop.real_axis_crossings if not crossing.turns]
    listed = "; ".join(_crossing(crossing, unit) for crossing in turning[:MOST_LISTED])
    sentences = [f"Real axis left of −1: {listed or 'not crossed'}.", *_more(turning, "crossings")]
    if others:
        nearest = others[0]
        sentences.append(f"Nearest crossing without a turn: {_value(nearest)} {_place(nearest, unit)}.")
    return sentences


def _crossing(crossing: RealAxisCrossing, unit: str) -> str:
    return f"{_value(crossing)} {_place(crossing, unit)} turns {signed(crossing.turns)}"


def _value(crossing: RealAxisCrossing) -> str:
    """Where L crosses, rounded towards -1."""
    return "−∞" if crossing.value is None else f"−{rounded_towards_one(-crossing.value)}"


def _place(crossing: RealAxisCrossing, unit: str) -> str:
    return f"at {frequency(crossing.frequency, unit)}"


def _more(items: Sequence[object], noun: str) -> list[str]:
    return [f"{len(items) - MOST_LISTED} more {noun} with --json."] if len(items) > MOST_LISTED else []
