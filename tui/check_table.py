"""The printed report of ``encircle check``: every loop with its verdict, counts, evidence and margins."""

from __future__ import annotations

from encircle.engine.result import LoopResult, Result
from encircle.tui.loop_report import loop_lines, overview_lines
from encircle.tui.margin_table import MISSED_MARK
from encircle.tui.plain_text import Layout, Style
from encircle.tui.wording import CAUTION, OUTCOME_WORDS, complex_pair, frequency, plural

_OUTCOME_STYLE: dict[str, Style] = {"pass": "good", "fail": "bad", "undecided": "doubt"}


def check_table(result: Result, layout: Layout) -> str:
    """The whole report, ending in a newline."""
    lines = [*_heading(result, layout), "", *overview_lines(result, layout)]
    for number, loop in enumerate(result.loops, 1):
        lines += ["", layout.rule(), *loop_lines(number, loop, result.frequency_unit, layout)]
    lines += ["", layout.rule(), *_whole_diagram(result, layout), *_warnings(result, layout)]
    lines += layout.wrapped(CAUTION)
    return "\n".join(lines) + "\n"


def _heading(result: Result, layout: Layout) -> list[str]:
    word = OUTCOME_WORDS[result.result]
    hanging = len(word) + 2
    sentence = "\n".join(layout.wrapped(outcome_sentence(result), indent=hanging))[hanging:]
    source = f"{result.file} (sha256 {result.sha256[:12]}…), checked by {result.program}"
    return [
        *(layout.paint(line, "title") for line in layout.wrapped(result.title or result.file)),
        *(layout.paint(line, "quiet") for line in layout.wrapped(source)),
        "",
        f"{layout.paint(word, _OUTCOME_STYLE[result.result])}  {sentence}",
    ]


def outcome_sentence(result: Result) -> str:
    """Why the result is what it is, in one sentence."""
    if result.result == "pass":
        return "Every loop below is stable or as declared, every limit is met, and no unstable pole is left."
    reasons = [reason for loop in result.loops for reason in _loop_reasons(loop)]
    if result.unstable_poles_all_closed:
        poles = plural(result.unstable_poles_all_closed, "unstable pole")
        reasons.append(f"the whole diagram has {poles} with all loops closed")
    elif result.unstable_poles_all_closed is None:
        reasons.append("the poles of the whole diagram with all loops closed are not decided")
    text = "; ".join(reasons) or f"a loop that is not listed here is the reason ({result.result})"
    return f"{text[0].upper()}{text[1:]}."


def _loop_reasons(loop: LoopResult) -> list[str]:
    missed = sum(finding.met is False for finding in loop.limits)
    if loop.verdict == "unstable":
        return [f"loop {loop.name} is unstable"]
    if loop.verdict == "undecided":
        return [f"loop {loop.name} is undecided"]
    return [f"loop {loop.name} misses {plural(missed, 'limit')}"] if missed else []


def _whole_diagram(result: Result, layout: Layout) -> list[str]:
    before, after = (
        "undecided" if count is None else str(count)
        for count in (result.unstable_poles_all_open, result.unstable_poles_all_closed)
    )
    counts = f"Whole diagram: unstable poles with all loops open {before}, with all loops closed {after}."
    groups = "; ".join(", ".join(group) for group in result.uncut_feedback)
    lines = layout.wrapped(counts, hanging=3)
    if groups:
        lines += layout.wrapped(f"Feedback that no cut opens: {groups}.", hanging=3)
    return [*lines, *_hidden_poles(result, layout), *_measured_files(result, layout)]


def _hidden_poles(result: Result, layout: Layout) -> list[str]:
    lines: list[str] = []
    for hidden in result.hidden_unstable_poles:
        place = f" at {complex_pair(hidden.pole)}" if hidden.pole is not None else ""
        sentence = (
            f"Hidden: block {hidden.block} has an unstable pole{place} that no feedback moves. "
            "The curves do not show it; the machine will."
        )
        lines += [layout.paint(line, "bad") for line in layout.wrapped(sentence, 4, mark=MISSED_MARK)]
    return lines


def _measured_files(result: Result, layout: Layout) -> list[str]:
    lines: list[str] = []
    for file in result.measured:
        span = f"{frequency(file.lower, result.frequency_unit)} to {frequency(file.upper, result.frequency_unit)}"
        sentence = f"Measured: block {file.block} from {file.file}, {file.lines} lines, {span}."
        lines += layout.wrapped(sentence, hanging=3)
    return lines


def _warnings(result: Result, layout: Layout) -> list[str]:
    lines: list[str] = []
    for warning in result.warnings:
        lines += [layout.paint(line, "doubt") for line in layout.wrapped(f"Warning: {warning.message}", hanging=3)]
    return lines
