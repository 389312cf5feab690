"""The printed report: what it says, which way it rounds, and that it survives any width, encoding and text."""

from __future__ import annotations

import re
from dataclasses import replace
from decimal import Decimal

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from result_values import AS_DECLARED, CURRENT, DRIVE, MISSING, SPEED, TROUBLED, UNDECIDED, UNSTABLE

from encircle.engine.result import (
    AxisPole,
    GainMargin,
    GainRange,
    LimitFinding,
    LoopResult,
    Peak,
    RealAxisCrossing,
    Result,
)
from encircle.tui.check_table import check_table, outcome_sentence
from encircle.tui.plain_text import Layout
from encircle.tui.wording import CAUTION, LIMIT_WORDS, display_width, limit_found, rounded, rounded_towards_one, seconds

WIDE = Layout(width=100)


def report(*loops: LoopResult, layout: Layout = WIDE, **changes: object) -> str:
    result = replace(DRIVE, loops=loops, **changes) if loops else replace(DRIVE, **changes)  # type: ignore[arg-type]
    return check_table(result, layout)


def line_with(words: str, text: str) -> str:
    found = [line for line in text.splitlines() if words in line]
    assert len(found) == 1, f"{words!r} stands in {len(found)} lines"
    return found[0]


def flowing(text: str) -> str:
    """The text without its line breaks and columns."""
    return " ".join(text.split())


def test_a_good_project_reads_as_passed_with_every_loop_and_the_caution() -> None:
    text = report()
    assert text.startswith("Rewinder drive\n")
    assert "PASS  Every loop below is stable or as declared" in text
    assert re.search(r"^ +1 +current +stable +0 → 0 +0 +proved +2 met, tightest phase margin$", text, re.MULTILINE)
    assert re.search(r"^ +2 +speed +stable +0 → 0 +0 +proved +3 met, tightest phase margin$", text, re.MULTILINE)
    assert "Feedback that no cut opens: coil, rotor." in text
    assert flowing(text).endswith(CAUTION)


def test_margins_are_rounded_down_and_peaks_up() -> None:
    text = report(CURRENT)
    assert line_with("gain increase", text).split()[2:6] == ["15.97", "dB", "×6.292", "at"]  # 15.9770, 6.29286
    assert "phase margin      71.26°  towards lag  at 379.2 Hz  at least 45°" in text  # 71.2641
    assert "522.0 µs" in line_with("delay margin", text)  # 522.062
    assert "0.7932" in line_with("modulus margin", text)  # 0.793289
    assert "2.012 dB  ×1.261" in line_with("peak of |S|", text)  # 2.01137, 1.26058
    assert "0.2652 dB  ×1.031" in line_with("peak of |T|", text)  # 0.265157, 1.03100
    assert "no finite limit" in line_with("gain decrease", text)
    assert "Z = 2 from 6.292 to 59.08; above it not listed." in flowing(text)


def test_a_lower_gain_limit_is_rounded_towards_the_gain_as_it_stands() -> None:
    assert "×0.4124" in line_with("gain decrease", report(MISSING))  # 0.41234


def test_a_missed_limit_is_marked_in_signs_and_words_without_colour() -> None:
    text = report(MISSING)
    missed = line_with("phase margin", text)
    assert missed.startswith("!!")
    assert missed.endswith("MISSED")
    assert line_with("peak of |S|", text).startswith("!!")
    assert not line_with("highest crossover", text).startswith("!!")
    assert line_with("highest crossover", text).endswith("met")
    assert re.search(r"^!! +1 +position +stable .* 2 of 4 MISSED$", text, re.MULTILINE)


def test_an_unstable_loop_says_so_and_shows_where_it_would_be_stable() -> None:
    text = report(UNSTABLE)
    assert "UNSTABLE: 2 poles right of the imaginary axis once it closes." in text
    assert "N = +1 clockwise turns round −1, P = 1 before, Z = P + N = 2 after." in text
    assert "P: 1 of block vessel." in text
    assert "Z = 0 from 0 to 0.3106; Z = 2 above 0.3106 (1, as it stands, is here)." in text
    assert "−∞ at 0 Hz turns −1; −3.219 at 2.500 Hz turns +2." in text
    assert line_with("gain, either way", text).startswith("!!")


def test_what_is_undecided_is_named_with_its_reason() -> None:
    text = report(UNDECIDED)
    assert "??  From 212.0 Hz to 218.5 Hz: the chord between two lines passes -1;" in text
    assert "??  From 3000 Hz to infinity: no roll-off is stated" in text
    assert "N = ? clockwise turns" in text
    assert line_with("peak of |S|", text).endswith("undecided")
    assert "1 of 1 undecided" in text


def test_a_stage_that_is_meant_to_be_unfinished_says_what_it_leaves() -> None:
    text = report(replace(AS_DECLARED, leaves_on_axis=2))
    assert "As declared: closing this loop leaves 1 unstable pole and 2 poles on the axis" in text
    assert "P: 1 left by loop current." in text


def test_poles_left_on_the_axis_hidden_poles_files_and_warnings_are_told() -> None:
    text = flowing(check_table(TROUBLED, WIDE))
    assert "Left on the imaginary axis by this loop: current_controller at 0 Hz." in text
    assert "!! Hidden: block vessel has an unstable pole at 0.001500 rad/s that no feedback moves." in text
    assert "block fan has an unstable pole at 1.000 ± 2.000j rad/s" in text
    assert "block bending has an unstable pole that no feedback moves" in text
    assert "Measured: block bending from flexible.csv, 812 lines, 2.000 Hz to 3000 Hz." in text
    assert "Warning: rewinder.toml, [blocks.vessel]: the pole at 0.0015 rad/s" in text
    assert "unstable poles with all loops open 1, with all loops closed 3" in text
    assert "with all loops closed undecided." in report(UNDECIDED, unstable_poles_all_closed=None)


def test_assumptions_are_told() -> None:
    assert "- between two lines H stays near the chord" in report(
        replace(CURRENT, evidence="data", assumptions=("between two lines H stays near the chord",))
    )


@pytest.mark.parametrize(
    ("result", "sentence"),
    [
        (replace(DRIVE, result="fail", loops=(MISSING,)), "Loop position misses 2 limits."),
        (replace(DRIVE, result="fail", loops=(CURRENT, UNSTABLE)), "Loop level is unstable."),
        (replace(DRIVE, result="undecided", loops=(UNDECIDED,)), "Loop bearing is undecided."),
        (
            replace(DRIVE, result="undecided", unstable_poles_all_closed=None),
            "The poles of the whole diagram with all loops closed are not decided.",
        ),
        (replace(DRIVE, result="fail", loops=(CURRENT,)), "A loop that is not listed here is the reason (fail)."),
        (
            replace(DRIVE, result="fail", unstable_poles_all_closed=1),
            "The whole diagram has 1 unstable pole with all loops closed.",
        ),
    ],
)
def test_the_first_sentence_gives_the_reason(result: Result, sentence: str) -> None:
    assert outcome_sentence(result) == sentence


def test_long_lists_show_what_stands_near_and_say_that_there_is_more() -> None:
    ranges = tuple(GainRange(k / 10, (k + 1) / 10, k) for k in range(5, 40))  # 0.5 to 4
    crossings = tuple(RealAxisCrossing(float(k), -1.0 - k, 1) for k in range(1, 40))
    text = flowing(report(replace(CURRENT, gain_ranges=ranges, real_axis_crossings=crossings)))
    assert "more with --json" in text
    assert "27 more crossings with --json." in text
    assert text.count("turns +1") == 12


def test_colour_is_an_extra_and_the_text_is_the_same_without() -> None:
    coloured = check_table(TROUBLED, Layout(width=100, colour=True))
    assert "\x1b[1;31m" in coloured
    assert re.sub(r"\x1b\[[0-9;]*m", "", coloured) == check_table(TROUBLED, WIDE)
    assert "\x1b" not in check_table(TROUBLED, WIDE)


def test_text_of_files_cannot_steer_the_terminal() -> None:
    hostile = "x\x1b[2J\x07\x9b\r\u202e[red]"
    loop = replace(
        CURRENT, name=hostile, cut=hostile, axis_poles_left=(AxisPole(hostile, 1.0),), assumptions=(hostile,)
    )
    text = report(loop, title=hostile, file=hostile, uncut_feedback=((hostile,),))
    assert all(char.isprintable() or char == "\n" for char in text)
    assert re.search(r"x\\x1b\[2J\\x07\\x9b\\(r|x0d)\\u202e\[red\]", text)


@pytest.mark.parametrize("result", [DRIVE, TROUBLED], ids=["drive", "troubled"])
def test_without_unicode_the_report_is_ascii(result: Result) -> None:
    text = check_table(result, Layout(width=90, unicode=False))
    assert text.isascii()
    assert "0 -> 0" in text
    assert "71.26 deg" in text


@pytest.mark.parametrize("unicode", [True, False])
@pytest.mark.parametrize("width", [40, 60, 72, 80, 100, 120])
def test_no_line_is_wider_than_asked(width: int, unicode: bool) -> None:
    text = check_table(TROUBLED, Layout(width=width, unicode=unicode))
    assert max(display_width(line) for line in text.splitlines()) <= width
    assert "MISSED" in text


def test_wide_characters_keep_the_columns_aligned() -> None:
    text = report(replace(CURRENT, name="速度"), replace(SPEED, name="speed"))
    first, second = (line for line in text.splitlines() if " met, tightest" in line)
    assert display_width(first[: first.index("stable")]) == display_width(second[: second.index("stable")])


DIRECTIONS = ("down", "nearest", "up")
FINITE = st.floats(min_value=-1e12, max_value=1e12, allow_nan=False)


@given(value=FINITE, digits=st.integers(3, 9))
def test_rounding_goes_the_way_it_says_and_not_too_far(value: float, digits: int) -> None:
    exact = Decimal(repr(value))
    lower, nearest, upper = (Decimal(rounded(value, direction, digits)) for direction in DIRECTIONS)  # type: ignore[arg-type]
    assert lower <= exact <= upper
    assert abs(nearest - exact) <= abs(upper - lower) / 2
    assert upper - lower <= abs(exact) * Decimal(10) ** (1 - digits)


@settings(max_examples=40)
@given(value=st.floats(min_value=1e-9, max_value=1e9), required=st.floats(min_value=1e-3, max_value=1e3))
@example(value=0.13476101675112576, required=0.13476101675112576)
@pytest.mark.parametrize("name", sorted(LIMIT_WORDS))
def test_a_printed_number_stands_on_its_side_of_the_limit(name: str, value: float, required: float) -> None:
    ceiling = LIMIT_WORDS[name].ceiling
    met = value <= required if ceiling else value >= required
    text = limit_found(LimitFinding(name, required, value, met), "Hz")
    number, _, unit = text.replace("°", " deg").partition(" ")
    scale = {"ms": Decimal("1e-3"), "µs": Decimal("1e-6"), "ns": Decimal("1e-9")}.get(unit, Decimal(1))
    printed = Decimal(number) * scale
    assert printed >= Decimal(repr(value)) if ceiling else printed <= Decimal(repr(value))
    assert (printed <= Decimal(repr(required)) if ceiling else printed >= Decimal(repr(required))) == met


@given(factor=st.floats(min_value=1e-6, max_value=1e6))
def test_bounds_of_gain_ranges_round_towards_one_and_never_reach_it(factor: float) -> None:
    printed = float(rounded_towards_one(factor))
    assert min(factor, 1) <= printed <= max(factor, 1)
    assert (printed == 1) == (factor == 1)


def test_times_are_given_in_the_unit_that_reads_best() -> None:
    assert [seconds(value) for value in (12.3456, 0.0149343, 5.22062e-4, 3.3e-8, 0.0)] == [
        "12.34 s",
        "14.93 ms",
        "522.0 µs",
        "33.00 ns",
        "0 s",
    ]


def test_a_margin_found_at_infinity_or_at_standstill_says_so() -> None:
    margins = CURRENT.margins
    assert margins is not None
    loop = replace(
        CURRENT,
        margins=replace(
            margins, gain_increase=GainMargin(2.0, 6.0206, None), sensitivity_peak=Peak(2.0, 6.0206, 0.0), phase=None
        ),
    )
    text = report(loop)
    assert "at infinity" in line_with("gain increase", text)
    assert line_with("peak of |S|", text).endswith("at 0 Hz")
