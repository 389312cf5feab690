"""Results as the JSON object that other programs read (``"format": 1``).

Names, order of keys and meaning of ``null`` are fixed: a later change is an addition, or a new format number.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import TypeVar

from encircle.engine.errors import Problem
from encircle.engine.result import (
    AxisPole,
    DelayMargin,
    GainMargin,
    GainRange,
    HiddenPole,
    LimitFinding,
    LoopResult,
    Margins,
    MeasuredFile,
    ModulusMargin,
    Peak,
    PhaseMargin,
    RealAxisCrossing,
    Result,
    UndecidedStretch,
)
from encircle.engine.text import quoted

FORMAT = 1
LONGEST_LIST = 1000

Json = dict[str, "Json"] | list["Json"] | str | int | float | None
Item = TypeVar("Item")


def result_json(result: Result) -> str:
    """The whole result as indented ASCII JSON. Raises ``ArithmeticError`` where a number is not finite."""
    return json_text(result_object(result))


def errors_json(problems: Iterable[Problem]) -> str:
    """What is printed for input that cannot be used."""
    return json_text({"format": FORMAT, "errors": [_problem(problem) for problem in problems]})


def json_text(value: Json) -> str:
    """Indented JSON in ASCII, so that no character of a file reaches a terminal as it stands."""
    import json  # not needed for the printed report

    return json.dumps(value, indent=2, allow_nan=False)


def result_object(result: Result) -> dict[str, Json]:
    """The result as plain dictionaries, lists, strings and finite numbers, keys in the fixed order."""
    shortened = [note for loop in result.loops for note in _shortened_lists(loop)]
    return {
        "format": FORMAT,
        "program": _text(result.program),
        "project": {"title": _text(result.title), "file": _text(result.file), "sha256": result.sha256},
        "measured": [_measured(file) for file in result.measured],
        "frequency_unit": result.frequency_unit,
        "result": result.result,
        "uncut_feedback": [[_text(block) for block in group] for group in result.uncut_feedback],
        "unstable_poles_all_open": result.unstable_poles_all_open,
        "unstable_poles_all_closed": result.unstable_poles_all_closed,
        "hidden_unstable_poles": [_hidden_pole(pole) for pole in result.hidden_unstable_poles],
        "loops": [_loop(loop) for loop in result.loops],
        "warnings": [_problem(problem) for problem in (*result.warnings, *shortened)],
    }


def _loop(loop: LoopResult) -> Json:
    return {
        "name": _text(loop.name),
        "cut": _text(loop.cut),
        "gain": _number(loop.gain),
        "verdict": loop.verdict,
        "windings": loop.windings,
        "unstable_poles_before": loop.unstable_poles_before,
        "unstable_poles_after": loop.unstable_poles_after,
        "axis_poles_left": [_axis_pole(pole) for pole in loop.axis_poles_left],
        "evidence": loop.evidence,
        "undecided": [_stretch(stretch) for stretch in loop.undecided[:LONGEST_LIST]],
        "real_axis_crossings": [_crossing(crossing) for crossing in _nearest_crossings(loop.real_axis_crossings)],
        "gain_ranges": [_gain_range(gain_range) for gain_range in _nearest_ranges(loop.gain_ranges)],
        "margins": None if loop.margins is None else _margins(loop.margins),
        "limits": [_limit(finding) for finding in loop.limits],
    }


def _margins(margins: Margins) -> Json:
    return {
        "gain_increase": _gain_margin(margins.gain_increase),
        "gain_decrease": _gain_margin(margins.gain_decrease),
        "phase": _phase_margin(margins.phase),
        "delay": _delay_margin(margins.delay),
        "modulus": _modulus_margin(margins.modulus),
        "sensitivity_peak": _peak(margins.sensitivity_peak),
        "complementary_peak": _peak(margins.complementary_peak),
        "gain_crossovers": [_number(frequency) for frequency in _nearest_crossovers(margins)],
    }


def _gain_margin(margin: GainMargin | None) -> Json:
    if margin is None:
        return None
    return {"factor": _number(margin.factor), "db": _number(margin.db), "frequency": _optional(margin.frequency)}


def _phase_margin(margin: PhaseMargin | None) -> Json:
    if margin is None:
        return None
    return {
        "deg": _number(margin.degrees),
        "direction": margin.direction,
        "frequency": _optional(margin.frequency),
    }


def _delay_margin(margin: DelayMargin | None) -> Json:
    if margin is None:
        return None
    return {"seconds": _number(margin.seconds), "frequency": _optional(margin.frequency)}


def _modulus_margin(margin: ModulusMargin) -> Json:
    return {"value": _number(margin.value), "frequency": _optional(margin.frequency)}


def _peak(peak: Peak) -> Json:
    return {"value": _number(peak.value), "db": _number(peak.db), "frequency": _optional(peak.frequency)}


def _limit(finding: LimitFinding) -> Json:
    return {
        "name": finding.name,
        "required": _number(finding.required),
        "found": _optional(finding.found),
        "met": finding.met,
    }


def _axis_pole(pole: AxisPole) -> Json:
    return {"block": _text(pole.block), "frequency": _number(pole.frequency)}


def _hidden_pole(pole: HiddenPole) -> Json:
    place: Json = None if pole.pole is None else [_number(pole.pole.real), _number(abs(pole.pole.imag))]
    return {"block": _text(pole.block), "pole": place}


def _stretch(stretch: UndecidedStretch) -> Json:
    return {"from": _number(stretch.lower), "to": _optional(stretch.upper), "why": _text(stretch.why)}


def _crossing(crossing: RealAxisCrossing) -> Json:
    return {
        "frequency": _optional(crossing.frequency),
        "value": _optional(crossing.value),
        "turns": crossing.turns,
    }


def _gain_range(gain_range: GainRange) -> Json:
    return {
        "from": _number(gain_range.lower),
        "to": _optional(gain_range.upper),
        "unstable_poles": gain_range.unstable_poles,
    }


def _measured(file: MeasuredFile) -> Json:
    return {
        "block": _text(file.block),
        "file": _text(file.file),
        "sha256": file.sha256,
        "lines": file.lines,
        "from": _number(file.lower),
        "to": _number(file.upper),
    }


def _problem(problem: Problem) -> Json:
    return {"code": problem.code, "where": _text(problem.where), "message": _text(problem.message)}


def _number(value: float) -> float:
    """A finite number, -0 as 0, numpy's numbers as Python's."""
    number = float(value)
    if not math.isfinite(number):
        raise ArithmeticError(f"a result holds {number!r}, which is no finite number")
    return number + 0.0  # turns -0.0 into 0.0


def _optional(value: float | None) -> float | None:
    return None if value is None else _number(value)


def _text(text: str) -> str:
    """Text that every JSON reader accepts: lone surrogates (undecodable bytes of a path) as their escapes."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8")


def _nearest(items: Sequence[Item], distances: Sequence[float]) -> list[Item]:
    """The entries with the least distances, in the order in which they stood."""
    if len(items) <= LONGEST_LIST:
        return list(items)
    kept = sorted(range(len(items)), key=lambda index: distances[index])[:LONGEST_LIST]
    return [items[index] for index in sorted(kept)]


def _nearest_crossings(crossings: Sequence[RealAxisCrossing]) -> list[RealAxisCrossing]:
    """Those nearest -1; an infinite value of L is the farthest."""
    return _nearest(crossings, [math.inf if item.value is None else abs(item.value + 1) for item in crossings])


def _nearest_ranges(ranges: Sequence[GainRange]) -> list[GainRange]:
    """Those nearest the gain as it stands, 1.0."""
    return _nearest(ranges, [_distance_from_one(item) for item in ranges])


def _distance_from_one(gain_range: GainRange) -> float:
    """The distance as a ratio, so that ranges below and above 1.0 count alike; 0 for the range that holds 1.0."""
    if gain_range.lower > 1:
        return math.log(gain_range.lower)
    if gain_range.upper is not None and gain_range.upper < 1:
        return -math.log(gain_range.upper)
    return 0.0


def _nearest_crossovers(margins: Margins) -> list[float]:
    """Those nearest the crossover that stands nearest -1, where the phase margin is found."""
    phase = margins.phase
    centre = 0.0 if phase is None or phase.frequency is None else phase.frequency
    return _nearest(margins.gain_crossovers, [abs(frequency - centre) for frequency in margins.gain_crossovers])


def _shortened_lists(loop: LoopResult) -> list[Problem]:
    """A warning for every list of this loop that is longer than the result shows."""
    crossovers = () if loop.margins is None else loop.margins.gain_crossovers
    lists: tuple[tuple[str, Sequence[object], str], ...] = (
        ("undecided", loop.undecided, "the lowest in frequency"),
        ("real_axis_crossings", loop.real_axis_crossings, "those nearest -1, so that their turns need not sum to N"),
        ("gain_ranges", loop.gain_ranges, "those nearest 1.0"),
        ("margins.gain_crossovers", crossovers, "those nearest the one at which the phase margin is found"),
    )
    return [
        Problem(
            "list-shortened",
            f"loops.{loop.name}.{key}",
            f"loop {quoted(loop.name)}, {key}: of {len(items)} entries {LONGEST_LIST} are listed, {kept}",
        )
        for key, items, kept in lists
        if len(items) > LONGEST_LIST
    ]
