"""Every panel of text is a pure function from results to rows: judged here without a screen.

Figures are those of the example in the project file format (the "Rewinder drive"), as the result format prints them;
conventions of what must be seen (missed limits without colour, rounding to the safe side) are the program's own.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from fake_project import FakeProject

from encircle.engine.result import (
    AxisPole,
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
    PoleOwner,
    RealAxisCrossing,
    UndecidedStretch,
)
from encircle.tui.footer import footer_row
from encircle.tui.help_page import help_rows
from encircle.tui.loop_ladder import ladder_height, ladder_rows, strands
from encircle.tui.margins_panel import margins_rows
from encircle.tui.marked_curve import with_points
from encircle.tui.notes_panel import notes_rows
from encircle.tui.picture import Picture
from encircle.tui.sheet import Ink, Row, row_text, row_width
from encircle.tui.tightest_limit import room, tightest_limit
from encircle.tui.title_line import outcome_reasons, title_row
from encircle.tui.windings_panel import windings_rows

MARGINS = Margins(
    GainMargin(6.29286, 15.97704, 2267.25),
    None,
    PhaseMargin(71.26419, "lag", 379.181),
    None,
    ModulusMargin(0.7932899, 1312.92),
    Peak(1.2605801, 2.0113701, 1312.92),
    Peak(1.03100, 0.265157, 108.373),
    (379.181,),
)
LOOP = LoopResult(
    "current", "current_error", 1.0, "stable", 0, 0, 0, (), (), "proved", (), (),
    (RealAxisCrossing(2267.25, -0.15891, 0),), (GainRange(0, 6.29286, 0), GainRange(6.29286, None, 2)), MARGINS,
    (LimitFinding("phase_margin_deg", 45, 71.26419, True), LimitFinding("gain_margin_db", 6, 15.97704, True)),
    ("coil",), None, None,
)  # fmt: skip


def picture(
    *loops: LoopResult, filed: tuple[LoopResult, ...] | None = None, chosen: int = 0, **result: object
) -> Picture:
    project = FakeProject()
    now = replace(project.check(), loops=loops, **result)  # type: ignore[arg-type]
    before = now if filed is None else replace(now, loops=filed)
    return Picture(before, now, chosen, project.curve("current"), None)


def texts(rows: tuple[Row, ...]) -> list[str]:
    assert len({row_width(row) for row in rows}) == 1
    return [row_text(row).rstrip() for row in rows]


def inks(row: Row, text: str) -> set[object]:
    return {ink for run, ink in row if text in run}


# ---- ladder --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("before", "after", "drawn"),
    [
        (0, 0, ""),
        (1, 0, "┴"),
        (2, 1, "│┴"),
        (0, 2, "┬┬"),
        (1, 3, "│┬┬"),
        (None, 0, "?"),
        (1, None, "?"),
        (9, 9, "│││││+"),
    ],
)
def test_strands_end_where_a_loop_catches_a_pole_and_start_where_it_makes_one(
    before: int | None, after: int | None, drawn: str
) -> None:
    assert strands(before, after) == drawn


def test_the_ladder_tells_each_loop_from_inside_to_outside() -> None:
    inner = replace(LOOP, verdict="as_declared", unstable_poles_before=2, unstable_poles_after=1, leaves_unstable=1)
    outer = replace(LOOP, name="position", unstable_poles_before=1, unstable_poles_after=0)
    rows = ladder_rows(
        picture(inner, outer, chosen=1, unstable_poles_all_open=2, unstable_poles_all_closed=0), 60, 10, key="1"
    )
    lines = texts(rows)
    assert "││ " in lines[1]
    assert "2 unstable poles" in lines[1]
    assert lines[2].startswith("  1 │┴")
    assert "as declared" in lines[2]
    assert "2 → 1" in lines[2]
    assert "phase 71.26° (≥ 45°)" in lines[3]
    assert lines[4].startswith("► 2 ┴")
    assert "no unstable pole" in lines[6]


def test_the_tightest_limit_is_the_one_with_least_room_and_a_missed_one_comes_first() -> None:
    modulus = LimitFinding("modulus_margin", 0.5, 0.51, True)
    peak = LimitFinding("sensitivity_peak_db", 6.0, 6.3, False)
    loop = replace(LOOP, limits=(*LOOP.limits, modulus))
    assert tightest_limit(loop) == modulus
    assert tightest_limit(replace(loop, limits=(*loop.limits, peak))) == peak
    assert room(peak) == pytest.approx(-0.05)
    assert room(modulus) == pytest.approx(0.02)
    lines = texts(ladder_rows(picture(replace(loop, limits=(*loop.limits, peak))), 60, 10))
    assert "MISSED peak |S| 6.300 dB (≤ 6 dB)" in lines[3]


def test_the_tightest_limit_is_told_in_as_many_words_as_there_is_room_for() -> None:
    now = picture(replace(LOOP, gain=2.0), filed=(LOOP,))
    for width, words in ((60, "phase 71.26° (≥ 45°)  least room"), (38, "phase 71.26° (≥ 45°)"), (30, "phase 71.26°")):
        line = texts(ladder_rows(now, width, 9))[3]
        assert line.split("+")[0].strip() == words
    axis = replace(LOOP, verdict="undecided", axis_poles_left=(AxisPole("rotor", 0.0), AxisPole("rotor", 3.0)))
    assert "undecided: it leaves poles on the axis (rotor)" in texts(ladder_rows(picture(axis), 60, 9))[3]


def test_many_loops_keep_the_chosen_one_in_sight() -> None:
    loops = tuple(replace(LOOP, name=f"loop_{number}") for number in range(12))
    rows = texts(ladder_rows(picture(*loops, chosen=9), 50, 9))
    assert len(rows) == 9
    assert any(row.startswith("►10") for row in rows)
    assert ladder_height(12, 9) == 9
    assert ladder_height(3, 20) == 9


def test_several_trial_gains_are_marked_and_measured_against_the_file() -> None:
    now = (replace(LOOP, gain=2.0), LOOP, replace(LOOP, name="position", gain=0.5))
    lines = texts(ladder_rows(picture(*now, filed=(LOOP, LOOP, replace(LOOP, name="position"))), 60, 12))
    assert "1*" in lines[2]
    assert "+6.02 dB" in lines[2]
    assert "*" not in lines[4]
    assert "−6.02 dB" in lines[6]


# ---- room ----------------------------------------------------------------------------------------


def test_margins_are_rounded_down_and_peaks_up() -> None:
    text = "\n".join(texts(margins_rows(LOOP, LOOP, "Hz", 90)))
    for figure in ("15.97 dB", "71.26°", "0.7932", "2.012 dB", "0.2652 dB", "∞", "at 2267 Hz"):
        assert figure in text


def test_a_missed_limit_is_told_in_words_and_reverse_video() -> None:
    missed = LimitFinding("phase_margin_deg", 75, 71.26419, False)
    rows = margins_rows(replace(LOOP, limits=(missed,)), LOOP, "Hz", 60)
    row = next(row for row in rows if "phase" in row_text(row))
    assert row_text(row).startswith(" MISSED phase")
    assert {ink for _, ink in row} == {Ink.ALARM, Ink.PLAIN}
    assert inks(row, "71.26°") == {Ink.ALARM}
    assert "MISSED 1 of 1" in row_text(rows[0])


def test_a_changed_margin_stands_beside_the_file_with_its_direction() -> None:
    margins = replace(MARGINS, phase=PhaseMargin(60.0, "lag", 500.0), gain_increase=None)
    now = replace(LOOP, margins=margins, limits=(LimitFinding("phase_margin_deg", 45, 60.0, True),))
    lines = texts(margins_rows(now, LOOP, "Hz", 90))
    phase = next(line for line in lines if "phase" in line)
    assert "▼" in phase
    assert "file 71.26°" in phase
    gain = next(line for line in lines if "gain up" in line)
    assert "∞ ▲" in gain
    assert "file 15.97 dB" in gain
    assert not any("file" in line for line in lines if "modulus" in line)


def test_no_margins_are_said_to_be_none() -> None:
    lost = tuple(LimitFinding(limit.name, limit.required, None, False) for limit in LOOP.limits)
    lines = texts(margins_rows(replace(LOOP, verdict="unstable", margins=None, limits=lost), LOOP, "Hz", 60))
    assert "no margins: the loop is not stable" in lines[1]
    assert sum(line.startswith(" MISSED") for line in lines) == 2


@pytest.mark.parametrize("width", [1, 8, 20, 36, 60, 200])
def test_narrow_panels_keep_status_quantity_and_value(width: int) -> None:
    lines = texts(margins_rows(LOOP, LOOP, "Hz", width))
    if width >= 36:
        assert any(line.startswith(" met    phase") and "71.26°" in line and "≥ 45°" in line for line in lines)


# ---- turns ---------------------------------------------------------------------------------------


def test_crossings_run_up_to_the_sum() -> None:
    loop = replace(
        LOOP, windings=-1, unstable_poles_before=2, unstable_poles_after=1, verdict="unstable", evidence="data",
        real_axis_crossings=(
            RealAxisCrossing(120.0, -3.21099, -2), RealAxisCrossing(None, None, 1), RealAxisCrossing(9.0, -0.5, 0),
        ),
        pole_owners=(PoleOwner("rotor", "block", 1), PoleOwner("current", "loop", 1)),
        axis_poles_left=(AxisPole("controller", 0.0),), assumptions=("between two lines rotor stays near its chord",),
    )  # fmt: skip
    text = " ".join(" ".join(texts(windings_rows(loop, "Hz", 60))).split())
    assert "P 2 + N −1 = Z 1 UNSTABLE" in text
    assert "120.0 Hz −3.210 −2 −2 anticlockwise" in text
    assert "infinity −∞ +1 −1 clockwise" in text
    assert "right of −1" in text
    assert "P: 1 from block rotor, 1 left by loop current" in text
    assert "left on the axis: controller at 0 Hz" in text
    assert "evidence: data" in text
    assert "between two lines rotor stays near its chord" in text
    assert "0 to 6.292: 0; above 6.292: 2" in text


def test_an_undecided_stretch_is_named_with_its_reason() -> None:
    loop = replace(
        LOOP, verdict="undecided", windings=None, unstable_poles_after=None, evidence="none", gain_ranges=(),
        real_axis_crossings=(), undecided=(UndecidedStretch(210.0, None, "nothing is assumed above the last line"),),
    )  # fmt: skip
    rows = windings_rows(loop, "Hz", 100)
    text = "\n".join(texts(rows))
    assert "UNDECIDED 210.0 Hz to infinity: nothing is assumed above the last line" in text
    assert "N ?" in text
    assert "Z ?" in text


# ---- notes, title, footer, help ------------------------------------------------------------------


def test_notes_begin_with_what_is_gravest() -> None:
    project = FakeProject(note="set on \x1b[2J site")
    result = replace(
        project.check(),
        hidden_unstable_poles=(HiddenPole("vessel", 0.0015 + 0j), HiddenPole("rotor", None)),
        measured=(MeasuredFile("bending", "mode.csv", "0" * 64, 400, 1.0, 3000.0),),
    )
    lines = texts(notes_rows(result, LOOP, project.declarations, 100))
    assert "HIDDEN unstable pole: vessel, 0.001500 rad/s" in lines[1]
    assert "HIDDEN unstable pole: rotor, as declared" in lines[2]
    text = "\n".join(lines)
    assert "bending: mode.csv, 400 lines, 1.000 Hz to 3000 Hz" in text
    assert "\\x1b[2J" in text
    assert "responsible engineer" in text


def test_the_title_says_why_the_whole_fails() -> None:
    unstable = replace(LOOP, verdict="unstable", unstable_poles_after=2)
    failing = picture(
        unstable, result="fail", hidden_unstable_poles=(HiddenPole("vessel", None),), unstable_poles_all_closed=2
    )
    assert outcome_reasons(failing.now) == ("unstable: current", "hidden unstable pole in vessel")
    assert "FAIL  unstable: current; hidden unstable pole in vessel" in row_text(title_row(failing, 120))
    assert "FAIL  unstable: current" in row_text(title_row(failing, 60))
    missed = picture(
        replace(LOOP, limits=(LimitFinding("phase_margin_deg", 75, 71.3, False),)),
        result="fail",
        unstable_poles_all_closed=0,
    )
    assert outcome_reasons(missed.now) == ("1 limit missed",)
    assert outcome_reasons(picture(LOOP, result="pass").now) == ()


@pytest.mark.parametrize("width", [10, 40, 80, 200])
def test_the_footer_fits_and_a_message_takes_its_place(width: int) -> None:
    assert row_width(footer_row(width)) == width
    assert "loop" in row_text(footer_row(width))
    assert row_text(footer_row(width, notice="\x1b[1mtold")).startswith(" \\x1b[1m")


@pytest.mark.parametrize("width", [30, 80, 109, 110, 200])
def test_the_help_page_is_whole_at_any_width(width: int) -> None:
    text = " ".join(" ".join(texts(help_rows(width))).split())
    if width >= 80:
        assert "next loop outward / inward" in text
        assert "modulus" in text


# ---- the curve with its marks --------------------------------------------------------------------


def test_marked_points_join_the_curve_in_order_and_leave_its_pieces_whole() -> None:
    curve = FakeProject().curve("current")
    curve = replace(curve, pieces=((0, 500), (500, len(curve.frequency))))
    edge = float(np.sqrt(curve.frequency[499] * curve.frequency[500]))
    marks = np.array([1.2345, 3.21, 1.2345, edge, curve.frequency[7], 1e9])
    joined = with_points(curve, marks, np.full(6, -2 + 1j))
    assert len(joined.frequency) == len(curve.frequency) + 3
    assert np.all(np.diff(joined.frequency) > 0)
    for name in ("L", "S", "T", "radius"):
        assert len(getattr(joined, name)) == len(joined.frequency)
    (_, first_stop), (second_start, second_stop) = joined.pieces
    assert first_stop == second_start
    assert joined.frequency[first_stop - 1] == curve.frequency[499]
    assert joined.frequency[second_start] == edge
    assert second_stop == len(joined.frequency)
    assert joined.S[joined.frequency == 3.21] == pytest.approx(1 / (-1 + 1j))
