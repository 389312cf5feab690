"""What loops mean: the cut, the closing order, the part, poles on the axis, the verdicts; every answer by hand."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from single_loop_files import assert_consistent, opened

from encircle.engine import ProjectError
from encircle.engine.result import AxisPole

HEAD = 'format = 1\nfrequency_unit = "rad/s"\n'


def loops(*lines: str) -> str:
    """Loop tables: each line is 'name cut' and further keys after a '|'."""
    tables = []
    for line in lines:
        names, _, keys = line.partition("|")
        name, cut = names.split()
        tables.append("\n".join([f'[[loops]]\nname = "{name}"\ncut = "{cut}"', *keys.split(";"), ""]))
    return "\n".join(tables)


def refusal(text: str, folder: Path) -> str:
    with pytest.raises(ProjectError) as caught:
        opened(text, folder)
    return " ".join(str(problem) for problem in caught.value.problems)


# ---- the cut ---------------------------------------------------------------------------------------------------------

ONLY_PLANT = '[blocks.plant]\nformula = "1/(s + 2)"\n[signals]\n'
PLANT = '[blocks.gain]\nformula = "3"\n' + ONLY_PLANT


@pytest.mark.parametrize(
    "signals",
    [
        'e = "r - y"\nu = "gain*e"\ny = "plant*u"',
        'e = "y - r"\nu = "-gain*e"\ny = "plant*u"',
        'e = "r + y"\nu = "gain*e"\ny = "-plant*u"',
    ],
)
def test_L_is_the_same_wherever_the_minus_stands(signals: str, tmp_path: Path) -> None:
    found = opened(HEAD + 'inputs = ["r"]\n' + PLANT + signals + "\n" + loops("loop e"), tmp_path)
    assert complex(found.response("loop", np.array([2.0]))[0]) == pytest.approx(3 / (2 + 2j), rel=1e-12)


@pytest.mark.parametrize("cut", ["e", "u", "y"])
def test_L_of_a_ring_is_the_same_at_every_wire(cut: str, tmp_path: Path) -> None:
    found = opened(HEAD + PLANT + 'e = "-y"\nu = "gain*e"\ny = "plant*u"\n' + loops(f"loop {cut}"), tmp_path)
    assert complex(found.response("loop", np.array([2.0]))[0]) == pytest.approx(3 / (2 + 2j), rel=1e-12)


def test_gain_is_in_L_and_reaches_every_consumer(tmp_path: Path) -> None:
    """y fed back over two consumers: L = gain (1 + 3) plant."""
    signals = 'e = "-y - 3*y"\ny = "plant*e"\n'
    text = HEAD + ONLY_PLANT + signals
    found = opened(text + loops("loop y |gain = 0.5"), tmp_path)
    assert complex(found.response("loop", np.array([2.0]))[0]) == pytest.approx(2 / (2 + 2j), rel=1e-12)
    assert found.loop("loop").gain == 0.5


def test_a_name_for_one_branch_opens_that_branch_only(tmp_path: Path) -> None:
    """Cutting ``branch`` leaves the other feedback closed: L = 3 plant/(1 + plant) = 3/(s + 3)."""
    text = HEAD + ONLY_PLANT + 'e = "-y - 3*branch"\nbranch = "y"\ny = "plant*e"\n'
    found = opened(text + loops("loop branch"), tmp_path)
    assert complex(found.response("loop", np.array([2.0]))[0]) == pytest.approx(3 / (3 + 2j), rel=1e-12)


def test_with_gain_equals_the_file_with_that_gain(tmp_path: Path) -> None:
    text = HEAD + PLANT + 'e = "-y"\nu = "gain*e"\ny = "plant*u"\n'
    first = opened(text + loops("loop e"), tmp_path).with_gain("loop", 2.5)
    second = opened(text + loops("loop e |gain = 2.5"), tmp_path)
    assert first.loop("loop") == second.loop("loop")
    assert first.gains["loop"] == 2.5


def test_two_loops_cannot_cut_one_signal(tmp_path: Path) -> None:
    text = HEAD + PLANT + 'e = "-y"\nu = "gain*e"\ny = "plant*u"\n'
    message = refusal(text + loops("first e", "second e"), tmp_path)
    assert "second" in message
    assert "first" in message


# ---- closing order ---------------------------------------------------------------------------------------------------

CASCADE = """
inputs = ["r"]
[blocks.motor]
formula = "1/(s + 1)"
[blocks.travel]
formula = "1/s"
[signals]
outer_error = "r - position"
speed_command = "2*outer_error"
inner_error = "speed_command - speed"
speed = "4*motor*inner_error"
position = "travel*speed"
"""


def test_inner_loops_are_closed_and_outer_ones_open(tmp_path: Path) -> None:
    """L1 = 4/(s+1); with it closed speed = 4/(s+5), so L2 = 8/(s(s+5))."""
    found = opened(HEAD + CASCADE + loops("inner inner_error", "outer outer_error"), tmp_path)
    assert complex(found.response("inner", np.array([3.0]))[0]) == pytest.approx(4 / (1 + 3j), rel=1e-12)
    assert complex(found.response("outer", np.array([3.0]))[0]) == pytest.approx(8 / (3j * (5 + 3j)), rel=1e-12)


def test_order_changes_L_but_not_the_poles_with_all_loops_closed(tmp_path: Path) -> None:
    """The inner loop cut at its sensor, so that it may close last: L = 8/(s(s+1)), then 4 s/(s^2 + s + 8)."""
    text = CASCADE.replace("speed_command - speed", "speed_command - sensed") + 'sensed = "speed"\n'
    found = opened(HEAD + text + loops("outer outer_error", "inner sensed"), tmp_path)
    s = 3j
    assert complex(found.response("outer", np.array([3.0]))[0]) == pytest.approx(8 / (s * (s + 1)), rel=1e-12)
    assert complex(found.response("inner", np.array([3.0]))[0]) == pytest.approx(4 * s / (s * s + s + 8), rel=1e-12)
    other = opened(HEAD + text + loops("inner sensed", "outer outer_error"), tmp_path)
    assert found.check().unstable_poles_all_closed == other.check().unstable_poles_all_closed == 0


def test_a_path_through_an_open_cut_is_open(tmp_path: Path) -> None:
    """The outer loop of the cascade runs through the inner error: it cannot close before it."""
    message = refusal(HEAD + CASCADE + loops("outer outer_error", "inner inner_error"), tmp_path)
    assert "until loop `inner` is closed" in message


def test_a_cut_that_no_feedback_reaches_yet_names_the_loop_to_close_first(tmp_path: Path) -> None:
    """z and its feedback run only through ``gate``, which loop ``first`` opens."""
    text = """
[blocks.a]
formula = "1/(s + 1)"
[signals]
e = "-gate"
y = "a*e"
gate = "2*y"
"""
    message = refusal(HEAD + text + loops("second e", "first gate"), tmp_path)
    assert "second" in message
    assert "first" in message


def test_a_cut_that_no_feedback_ever_reaches(tmp_path: Path) -> None:
    text = """
inputs = ["r"]
[blocks.a]
formula = "1/(s + 1)"
[signals]
e = "-y"
y = "a*e"
aside = "r"
"""
    message = refusal(HEAD + text + loops("loop e", "lost aside"), tmp_path)
    assert "lost" in message
    assert "at all" in message


# ---- the loop's part -------------------------------------------------------------------------------------------------

TWO_PARTS = """
inputs = ["r"]
[blocks.left]
formula = "1/(s - 1)"
[blocks.right]
formula = "1/(s - 2)"
[blocks.lag]
formula = "1/(s + 7)"
[signals]
e1 = "r - y1"
y1 = "3*left*e1"
e2 = "lag*y1 - y2"
y2 = "5*right*e2"
"""


def test_only_the_loops_part_is_counted(tmp_path: Path) -> None:
    """The first loop feeds the second; each has one pole right of the axis of its own, and the lag belongs to none."""
    found = opened(HEAD + TWO_PARTS + loops("first e1", "second e2"), tmp_path)
    first, second = found.loop("first"), found.loop("second")
    for loop, block in ((first, "left"), (second, "right")):
        assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (1, -1, 0)
        assert loop.blocks == (block,)
    result = found.check()
    assert (result.unstable_poles_all_open, result.unstable_poles_all_closed) == (2, 0)
    assert result.result == "pass"


def test_an_unstable_block_outside_all_loops_fails_the_whole_diagram(tmp_path: Path) -> None:
    text = TWO_PARTS.replace("1/(s + 7)", "1/(s - 7)")
    found = opened(HEAD + text + loops("first e1", "second e2"), tmp_path)
    assert [found.loop(name).verdict for name in found.loop_names] == ["stable", "stable"]
    result = found.check()
    assert (result.unstable_poles_all_open, result.unstable_poles_all_closed) == (3, 1)
    assert [(h.block, h.pole) for h in result.hidden_unstable_poles] == [("lag", 7 + 0j)]
    assert any("lag" in str(w) for w in result.warnings)
    assert result.result == "fail"


BACK_EMF = """
[blocks.coil]
formula = "1/(0.5*s + 1)"
[blocks.rotor]
formula = "1/(2*s + 1)"
[blocks.controller]
formula = "4"
[signals]
e = "-current"
current = "coil*(controller*e - 3*speed)"
speed = "rotor*3*current"
"""


def test_feedback_with_no_open_cut_is_closed(tmp_path: Path) -> None:
    """L = 4 (2s+1)/((0.5s+1)(2s+1) + 9), and the rotor belongs to the current loop's part."""
    found = opened(HEAD + BACK_EMF + loops("current e"), tmp_path)
    s = 1.5j
    expected = 4 * (2 * s + 1) / ((0.5 * s + 1) * (2 * s + 1) + 9)
    assert complex(found.response("current", np.array([1.5]))[0]) == pytest.approx(expected, rel=1e-12)
    assert set(found.loop("current").blocks) == {"coil", "rotor", "controller"}
    assert [set(group) for group in found.check().uncut_feedback] == [{"coil", "rotor"}]


def test_P_counts_the_poles_of_uncut_feedback_not_of_its_blocks(tmp_path: Path) -> None:
    """Positive uncut feedback 4/((s+1)(s+2)): s^2 + 3 s - 2 has one root right of the axis, the blocks have none."""
    text = """
[blocks.one]
formula = "1/(s + 1)"
[blocks.two]
formula = "1/(s + 2)"
[signals]
e = "-y"
x = "one*(6*e + 4*y)"
y = "two*x"
"""
    found = opened(HEAD + text + loops("loop e"), tmp_path)
    loop = found.loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (1, -1, 0)
    assert found.check().unstable_poles_all_open == 1
    assert sum(owner.unstable_poles for owner in loop.pole_owners) == 1


def test_owners_of_P_are_blocks_and_earlier_loops(tmp_path: Path) -> None:
    text = """
[blocks.plant]
formula = "1/(s - 1)"
[blocks.lag]
formula = "1/(0.1*s + 1)"
[signals]
e = "u - y"
y = "0.5*plant*e"
f = "-z"
u = "4*f"
z = "lag*y"
"""
    found = opened(HEAD + text + loops("inner e |leaves_unstable = 1", "outer f"), tmp_path)
    inner, outer = found.loop("inner"), found.loop("outer")
    assert [(o.owner, o.kind, o.unstable_poles) for o in inner.pole_owners] == [("plant", "block", 1)]
    assert [(o.owner, o.kind, o.unstable_poles) for o in outer.pole_owners] == [("inner", "loop", 1)]
    assert (outer.unstable_poles_before, outer.windings, outer.unstable_poles_after) == (1, -1, 0)


# ---- poles on the axis -----------------------------------------------------------------------------------------------

MOTOR = """
[blocks.controller]
formula = "2 + 3/s"
[blocks.coil]
formula = "1/(0.5*s + 1)"
[blocks.rotor]
formula = "1/(2*s)"
[blocks.speed_controller]
formula = "5"
[signals]
e = "command - current"
current = "coil*(controller*e - 3*speed)"
speed = "rotor*3*current"
speed_error = "-speed"
command = "speed_controller*speed_error"
"""
CURRENT, SPEED = "current e", "speed speed_error"


def test_a_frictionless_motor_keeps_an_integrator_until_the_speed_loop_closes(tmp_path: Path) -> None:
    """Back-EMF turns the rotor's pole into a zero at 0 that cancels the controller's integrator: one pole stays at 0.

    s (0.5 s + 1) 2 s + 9 s + (2 s + 3) 2 s = s (s^2 + 6 s + 15) with the current loop closed.
    """
    found = opened(HEAD + MOTOR + loops(CURRENT, SPEED), tmp_path)
    current = found.loop("current")
    assert (current.unstable_poles_before, current.windings, current.unstable_poles_after) == (0, 0, 0)
    assert current.axis_poles_left == (AxisPole("controller", 0.0),)
    assert current.verdict == "stable"
    speed = found.loop("speed")
    assert (speed.unstable_poles_before, speed.windings, speed.unstable_poles_after) == (0, 0, 0)
    assert speed.axis_poles_left == ()
    assert found.check().result == "pass"


@pytest.mark.parametrize(
    ("keys", "verdict"),
    [
        ("", "stable"),  # a later loop's part holds the pole
        ("|leaves_on_axis = 1", "as_declared"),
        ("|leaves_on_axis = 2", "undecided"),
        ("|leaves_on_axis = 0", "undecided"),
    ],
)
def test_verdict_with_a_pole_left_and_a_later_loop(keys: str, verdict: str, tmp_path: Path) -> None:
    found = opened(HEAD + MOTOR + loops(CURRENT + keys, SPEED), tmp_path)
    assert found.loop("current").verdict == verdict
    assert found.loop("current").unstable_poles_after == 0


@pytest.mark.parametrize(
    ("keys", "verdict", "result", "met"),
    [("", "undecided", "undecided", None), ("; leaves_on_axis = 1", "as_declared", "pass", True)],
)
def test_verdict_with_a_pole_left_and_no_later_loop(
    keys: str, verdict: str, result: str, met: bool | None, tmp_path: Path
) -> None:
    alone = MOTOR[: MOTOR.index("speed_error =")].replace('[blocks.speed_controller]\nformula = "5"\n', "")
    text = 'inputs = ["command"]\n' + alone + loops(CURRENT + "|limits = { phase_margin_deg = 10 }" + keys)
    found = opened(HEAD + text, tmp_path)
    loop = found.loop("current")
    assert (loop.verdict, loop.unstable_poles_after) == (verdict, 0)
    assert [limit.met for limit in loop.limits] == [met]
    assert (loop.margins is None) == (verdict == "undecided")
    assert found.check().result == result


def test_a_pair_left_on_the_axis_counts_two(tmp_path: Path) -> None:
    """An undamped pair at 2 rad/s that a notch hides: (s^2 + 4)(s + 1)^2 + (s^2 + 4) keeps it."""
    text = """
[blocks.swing]
formula = "1/(s^2 + 4)"
[blocks.notch]
formula = "(s^2 + 4)/(s + 1)^2"
[signals]
e = "-y"
y = "swing*notch*e"
"""
    found = opened(HEAD + text + loops("loop e |leaves_on_axis = 2"), tmp_path)
    loop = found.loop("loop")
    assert loop.verdict == "as_declared"
    assert loop.axis_poles_left == (AxisPole("swing", 2.0),)
    assert (loop.unstable_poles_before, loop.unstable_poles_after) == (0, 0)
    assert opened(HEAD + text + loops("loop e |leaves_on_axis = 1"), tmp_path).loop("loop").verdict == "undecided"


def test_any_other_pole_on_the_axis_leaves_Z_undecided(tmp_path: Path) -> None:
    """1/(s(s+1)^2) with gain 2: (s^2 + 1)(s + 2) = 0."""
    text = '[blocks.plant]\nformula = "1/(s*(s + 1)^2)"\n[signals]\ne = "-y"\ny = "plant*e"\n'
    loop = opened(HEAD + text + loops("loop e |gain = 2"), tmp_path).loop("loop")
    assert loop.verdict == "undecided"
    assert (loop.windings, loop.unstable_poles_after) == (None, None)
    assert loop.evidence == "none"
    assert any(u.lower <= 1.0 and (u.upper is None or u.upper >= 1.0) and u.why for u in loop.undecided)
    assert_consistent(loop)


def test_Z_without_P(tmp_path: Path) -> None:
    """Two integrators swing at 1 rad/s in uncut feedback: poles on the axis that are no block's own, until damped."""
    text = """
[blocks.first]
formula = "1/s"
[blocks.second]
formula = "1/s"
[signals]
rate = "first*(force - place)"
place = "second*rate"
force = "-0.5*damping"
damping = "rate"
"""
    found = opened(HEAD + text + loops("damper damping"), tmp_path)
    loop = found.loop("damper")
    assert loop.unstable_poles_after == 0
    assert (loop.unstable_poles_before, loop.windings) == (None, None)
    assert loop.verdict == "stable"
    assert found.check().result == "pass"
    assert_consistent(loop)


# ---- stages meant to be unfinished, and the order of verdicts --------------------------------------------------------


@pytest.mark.parametrize(
    ("gain", "keys", "verdict"),
    [
        (3.0, "", "stable"),
        (3.0, "|leaves_unstable = 0", "stable"),
        (3.0, "|leaves_unstable = 1", "stable"),  # Z = 0 needs no excuse
        (3.0, "|leaves_on_axis = 0", "stable"),
        (3.0, "|leaves_on_axis = 1", "stable"),
        (0.5, "", "unstable"),
        (0.5, "|leaves_unstable = 1", "as_declared"),
        (0.5, "|leaves_unstable = 2", "unstable"),
        (0.5, "|leaves_unstable = 0", "unstable"),
        (1.0, "", "undecided"),  # the pole lies at 0
        (1.0, "|leaves_unstable = 1", "undecided"),
    ],
)
def test_verdicts_of_one_unstable_lag(gain: float, keys: str, verdict: str, tmp_path: Path) -> None:
    """gain/(s - 1): Z = 0 above gain 1, Z = 1 below."""
    text = f'[blocks.plant]\nformula = "1/(s - 1)"\n[signals]\ne = "-y"\ny = "{gain}*plant*e"\n'
    assert opened(HEAD + text + loops("loop e" + keys), tmp_path).loop("loop").verdict == verdict


def test_unstable_goes_before_undecided(tmp_path: Path) -> None:
    """The motor's current loop with a wrong sign: s (s^2 - 2 s + 3), Z = 2, and a pole left at 0 as well."""
    text = HEAD + MOTOR.replace('"2 + 3/s"', '"-2 - 3/s"')
    loop = opened(text + loops(CURRENT + "|leaves_on_axis = 2", SPEED), tmp_path).loop("current")
    assert loop.unstable_poles_after == 2
    assert loop.verdict == "unstable"


# ---- neutral loops ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("D", "Z"), [(0.5, 0), (0.9, 2), (0.99, 4), (1.0, None), (1.1, None)])
def test_a_neutral_loop_is_undecided_once_its_delayed_gain_reaches_1(D: float, Z: int | None, tmp_path: Path) -> None:
    """D (s+3)/(s+2) exp(-s): |L| > 1 below 4.16 rad/s for D = 0.9, below 15.57 for D = 0.99.

    L meets the negative axis near pi, 3 pi and (at 15.64) 5 pi rad/s: once and twice with |L| > 1, a pair each time.
    """
    text = '[blocks.plant]\nformula = "(s + 3)/(s + 2)*exp(-s)"\n[signals]\ne = "-y"\n'
    loop = opened(HEAD + text + f'y = "{D}*plant*e"\n' + loops("loop e"), tmp_path).loop("loop")
    assert loop.unstable_poles_after == Z
    if Z is None:
        assert any(stretch.upper is None for stretch in loop.undecided)


def test_direct_paths_without_dead_time_may_exceed_1(tmp_path: Path) -> None:
    """2(s+2)/(s+1) + 0.5 exp(-s): |L(inf)| > 1 but the delayed part stays below 1 + 2."""
    text = '[blocks.plant]\nformula = "2*(s + 2)/(s + 1) + 0.5*exp(-s)"\n[signals]\ne = "-y"\ny = "plant*e"\n'
    loop = opened(HEAD + text + loops("loop e"), tmp_path).loop("loop")
    assert loop.unstable_poles_after == 0
    assert loop.verdict == "stable"
