"""The JSON result: keys, their order, null, finite numbers and long lists, as the project file format fixes them."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from result_values import AS_DECLARED, CURRENT, CURRENT_MARGINS, DRIVE, TROUBLED, UNDECIDED, UNSTABLE

from encircle.engine.errors import Problem
from encircle.engine.result import GainRange, LimitFinding, Margins, PhaseMargin, RealAxisCrossing, UndecidedStretch
from encircle.tui.result_json import LONGEST_LIST, errors_json, result_json, result_object

# The worked example of the project file format, first loop; the limit left out there is added.
EXAMPLE = """
{
  "format": 1,
  "program": "encircle 0.1.0",
  "project": {"title": "Rewinder drive", "file": "rewinder.toml", "sha256": "SHA"},
  "measured": [],
  "frequency_unit": "Hz",
  "result": "pass",
  "uncut_feedback": [["coil", "rotor"]],
  "unstable_poles_all_open": 0,
  "unstable_poles_all_closed": 0,
  "hidden_unstable_poles": [],
  "loops": [
    {
      "name": "current", "cut": "current_error", "gain": 1.0,
      "verdict": "stable",
      "windings": 0, "unstable_poles_before": 0, "unstable_poles_after": 0,
      "axis_poles_left": [{"block": "current_controller", "frequency": 0.0}],
      "evidence": "proved",
      "undecided": [],
      "real_axis_crossings": [{"frequency": 2267.25, "value": -0.158910, "turns": 0}],
      "gain_ranges": [{"from": 0.0, "to": 6.29286, "unstable_poles": 0}, {"from": 6.29286, "to": 59.0825, "unstable_poles": 2}],
      "margins": {
        "gain_increase": {"factor": 6.29286, "db": 15.9770, "frequency": 2267.25},
        "gain_decrease": null,
        "phase": {"deg": 71.2641, "direction": "lag", "frequency": 379.181},
        "delay": {"seconds": 5.22062e-4, "frequency": 379.181},
        "modulus": {"value": 0.793289, "frequency": 1312.92},
        "sensitivity_peak": {"value": 1.26058, "db": 2.01137, "frequency": 1312.92},
        "complementary_peak": {"value": 1.03100, "db": 0.265157, "frequency": 108.373},
        "gain_crossovers": [379.181]
      },
      "limits": [{"name": "gain_margin_db", "required": 6, "found": 15.9770, "met": true},
                 {"name": "phase_margin_deg", "required": 45, "found": 71.2641, "met": true}]
    }
  ],
  "warnings": []
}
""".replace("SHA", "ab" * 32)  # noqa: E501 - copied as it stands there


def ordered(text: str) -> Any:
    """JSON with every object as its list of pairs, so that the order of keys is compared as well."""
    return json.loads(text, object_pairs_hook=lambda pairs: pairs)


def loop_object(**changes: Any) -> dict[str, Any]:
    written = json.loads(result_json(replace(DRIVE, loops=(replace(CURRENT, **changes),))))
    return dict(written["loops"][0])


def test_the_worked_example_is_written_key_by_key_in_its_order() -> None:
    assert ordered(result_json(replace(DRIVE, loops=(CURRENT,)))) == ordered(EXAMPLE)


def test_what_is_undecided_is_null_and_its_lists_are_empty() -> None:
    written = json.loads(result_json(replace(DRIVE, loops=(UNDECIDED,), unstable_poles_all_closed=None)))
    loop = written["loops"][0]
    assert written["unstable_poles_all_closed"] is None
    assert (loop["windings"], loop["unstable_poles_before"], loop["unstable_poles_after"]) == (None, 1, None)
    assert loop["real_axis_crossings"] == loop["gain_ranges"] == []
    assert loop["margins"] is None
    assert loop["limits"] == [{"name": "sensitivity_peak_db", "required": 9.5, "found": None, "met": None}]
    assert loop["undecided"][1] == {
        "from": 3000.0,
        "to": None,
        "why": "no roll-off is stated above the last line of flexible.csv",
    }


def test_an_unstable_loop_has_no_margins_and_misses_its_limits() -> None:
    loop = json.loads(result_json(replace(DRIVE, loops=(UNSTABLE,))))["loops"][0]
    assert loop["margins"] is None
    assert loop["real_axis_crossings"][0] == {"frequency": 0.0, "value": None, "turns": -1}
    assert loop["gain_ranges"][-1] == {"from": 0.310564, "to": None, "unstable_poles": 2}
    assert [limit["met"] for limit in loop["limits"]] == [False, False]
    assert [limit["found"] for limit in loop["limits"]] == [None, None]


def test_the_words_of_the_verdict_are_those_of_the_format() -> None:
    verdicts = [loop["verdict"] for loop in json.loads(result_json(TROUBLED))["loops"]]
    assert verdicts == ["as_declared", "unstable", "undecided", "stable"]
    assert AS_DECLARED.verdict == "as_declared"


def test_hidden_poles_are_pairs_of_numbers_or_null() -> None:
    hidden = json.loads(result_json(TROUBLED))["hidden_unstable_poles"]
    assert hidden == [
        {"block": "vessel", "pole": [0.0015, 0.0]},
        {"block": "fan", "pole": [1.0, 2.0]},
        {"block": "bending", "pole": None},
    ]


def test_measured_files_and_warnings_are_listed() -> None:
    written = json.loads(result_json(TROUBLED))
    expected = {
        "block": "bending",
        "file": "flexible.csv",
        "sha256": "cd" * 32,
        "lines": 812,
        "from": 2.0,
        "to": 3000.0,
    }
    assert [list(file.items()) for file in written["measured"]] == [list(expected.items())]
    assert list(written["warnings"][0]) == ["code", "where", "message"]


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, np.float64("nan")])
def test_a_number_that_is_not_finite_is_refused(value: float) -> None:
    with pytest.raises(ArithmeticError, match="no finite number"):
        loop_object(gain=value)
    with pytest.raises(ArithmeticError, match="no finite number"):
        loop_object(margins=replace(CURRENT_MARGINS, gain_crossovers=(1.0, value)))


def test_numbers_of_numpy_and_minus_zero_are_written_plainly() -> None:
    loop = loop_object(gain=np.float64(2.5), limits=(LimitFinding("crossover_min", np.float64(1), -0.0, False),))
    assert loop["gain"] == 2.5
    assert math.copysign(1, loop["limits"][0]["found"]) == 1


def test_every_digit_of_a_number_survives() -> None:
    assert loop_object(gain=0.1 + 0.2)["gain"] == 0.1 + 0.2


def test_the_text_is_ascii_and_holds_no_control_character() -> None:
    hostile = "a\x1b]0;title\x07\x9b31m\u202e\udc80ö"
    warning = Problem("code", f"blocks.{hostile}", hostile)
    text = result_json(replace(DRIVE, title=hostile, file=hostile, warnings=(warning,)))
    assert text.isascii()
    assert all(char >= " " or char == "\n" for char in text)
    assert "\\udc80" not in text.replace("\\\\udc80", "")  # a lone surrogate is written as its escape, not as one
    assert json.loads(text)["project"]["title"] == hostile.replace("\udc80", "\\udc80")


def test_long_lists_keep_the_entries_nearest_the_critical_point_and_say_so() -> None:
    crossings = tuple(RealAxisCrossing(float(k), -1.0 - k, 1) for k in range(1, 1501))
    far = (RealAxisCrossing(0.5, None, 1), *reversed(crossings))  # the nearest ones last
    ranges = tuple(GainRange(k / 600, (k + 1) / 600, k) for k in range(1800))
    written = json.loads(
        result_json(replace(DRIVE, loops=(replace(CURRENT, real_axis_crossings=far, gain_ranges=ranges),)))
    )
    loop = written["loops"][0]
    assert [item["frequency"] for item in loop["real_axis_crossings"]] == [float(k) for k in range(1000, 0, -1)]
    assert len(loop["gain_ranges"]) == LONGEST_LIST
    lower, upper = loop["gain_ranges"][0]["from"], loop["gain_ranges"][-1]["to"]
    assert lower < 1 < upper
    assert math.log(upper) == pytest.approx(-math.log(lower), rel=0.01)  # both ways alike, as ratios
    assert [item["unstable_poles"] for item in loop["gain_ranges"]] == sorted(
        item["unstable_poles"] for item in loop["gain_ranges"]
    )
    assert [(item["code"], item["where"]) for item in written["warnings"]] == [
        ("list-shortened", "loops.current.real_axis_crossings"),
        ("list-shortened", "loops.current.gain_ranges"),
    ]
    assert "1501" in written["warnings"][0]["message"]


def test_long_lists_of_crossovers_and_stretches_are_shortened_too() -> None:
    crossovers = tuple(float(k) for k in range(1, 3001))
    margins: Margins = replace(
        CURRENT_MARGINS, gain_crossovers=crossovers, phase=PhaseMargin(10.0, "lag", 2000.0), delay=None
    )
    stretches = tuple(UndecidedStretch(float(k), k + 0.5, "why") for k in range(1200))
    written = json.loads(result_json(replace(DRIVE, loops=(replace(CURRENT, margins=margins, undecided=stretches),))))
    kept = written["loops"][0]["margins"]["gain_crossovers"]
    assert (len(kept), kept[0], kept[-1]) == (LONGEST_LIST, 1500.0, 2499.0)
    assert [item["from"] for item in written["loops"][0]["undecided"]] == [float(k) for k in range(1000)]
    assert len(written["warnings"]) == 2


def test_lists_of_a_thousand_entries_are_left_alone() -> None:
    ranges = tuple(GainRange(float(k), k + 1.0, 0) for k in range(LONGEST_LIST))
    written = json.loads(result_json(replace(DRIVE, loops=(replace(CURRENT, gain_ranges=ranges),))))
    assert len(written["loops"][0]["gain_ranges"]) == LONGEST_LIST
    assert written["warnings"] == []


def test_the_object_holds_plain_values_only() -> None:
    def plain(value: Any) -> bool:
        if isinstance(value, dict):
            return all(type(key) is str and plain(item) for key, item in value.items())
        return all(map(plain, value)) if isinstance(value, list) else type(value) in (str, int, float, bool, type(None))

    assert plain(result_object(TROUBLED))


def test_errors_have_their_own_object() -> None:
    text = errors_json([Problem("unknown_name", "signals.speed", "`rotr` is not defined; did you mean `rotor`?")])
    assert ordered(text) == [
        ("format", 1),
        (
            "errors",
            [
                [
                    ("code", "unknown_name"),
                    ("where", "signals.speed"),
                    ("message", "`rotr` is not defined; did you mean `rotor`?"),
                ]
            ],
        ),
    ]
