"""What signal equations and blocks mean: each test is one sentence of the file format, its answer found by hand."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from single_loop_files import opened

from encircle.engine import ProjectError
from encircle.engine.errors import Problem

HEAD = 'format = 1\nfrequency_unit = "rad/s"\n'
LOOP = '[[loops]]\nname = "loop"\ncut = "e"\n'


def project(body: str, folder: Path):  # type: ignore[no-untyped-def]
    return opened(HEAD + body + LOOP, folder)


def refused(text: str, folder: Path) -> tuple[Problem, ...]:
    with pytest.raises(ProjectError) as caught:
        opened(text, folder)
    return caught.value.problems


def one_block(block: str, folder: Path, equation: str = "block * e"):  # type: ignore[no-untyped-def]
    """One block in one loop: L is the block (times what the equation adds)."""
    return project(f'[blocks.block]\n{block}\n[signals]\ne = "-y"\ny = "{equation}"\n', folder)


def L(opened_project, omega: float) -> complex:  # type: ignore[no-untyped-def]
    return complex(opened_project.response("loop", np.array([omega]))[0])


# ---- copies of blocks ------------------------------------------------------------------------------------------------


def test_each_use_of_a_block_is_one_more_copy(tmp_path: Path) -> None:
    """1/(s - 1) used twice: (s-1)^2 + 2(s-1) = (s-1)(s+1), so one pole stays right of the axis."""
    twice = one_block('formula = "1/(s - 1)"', tmp_path, "block*e + block*e")
    loop = twice.loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (2, -1, 1)
    assert any("block" in f"{w.where} {w.message}" for w in twice.warnings)


def test_a_device_that_receives_two_signals_is_one_copy(tmp_path: Path) -> None:
    """device*(a + b) is one copy: s - 1 + 2 = s + 1, stable."""
    once = one_block('formula = "1/(s - 1)"', tmp_path, "block*(e + e)")
    loop = once.loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (1, -1, 0)
    assert once.warnings == ()


def test_equal_unstable_poles_in_two_blocks_draw_a_warning_and_change_no_count(tmp_path: Path) -> None:
    body = """
[blocks.first]
formula = "1/(s - 1)"
[blocks.second]
formula = "1/(s - 1)"
[signals]
e = "-y"
y = "3*first*e + 3*second*e"
"""
    found = project(body, tmp_path)
    assert found.loop("loop").unstable_poles_before == 2
    assert any("first" in str(w) and "second" in str(w) for w in found.warnings)


def test_equal_stable_poles_draw_no_warning(tmp_path: Path) -> None:
    body = """
[blocks.first]
formula = "1/(s + 1)"
[blocks.second]
formula = "1/(s + 1)"
[signals]
e = "-y"
y = "first*e + second*e"
"""
    assert project(body, tmp_path).warnings == ()


# ---- equations -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("equation", "expected"),
    [
        ("block*e", 1.0),
        ("2*block*e", 2.0),
        ("block*2*e", 2.0),
        ("-block*e", -1.0),
        ("block*e/4", 0.25),
        ("k*block*e", 3.0),
        ("block*e/k", 1 / 3),
        ("block*(e - 3*e)", -2.0),
        ("2*(block*e - block*(e + e))", -2.0),
        ("-(block*e)", -1.0),
    ],
)
def test_terms_multiply_numbers_parameters_blocks_and_one_signal(
    equation: str, expected: float, tmp_path: Path
) -> None:
    body = f'[parameters]\nk = 3.0\n[blocks.block]\nformula = "1/(s + 2)"\n[signals]\ne = "-y"\ny = "{equation}"\n'
    if "k" not in equation.replace("block", ""):
        body = body.replace("[parameters]\nk = 3.0\n", "")
    assert L(project(body, tmp_path), 1.0) == pytest.approx(expected / (2 + 1j), rel=1e-12)


def test_algebraic_feedback_is_solved(tmp_path: Path) -> None:
    """y = 0.5 y + block e means y = 2 block e."""
    found = one_block('formula = "1/(s + 1)"', tmp_path, "0.5*y + block*e")
    assert L(found, 1.0) == pytest.approx(2 / (1 + 1j), rel=1e-12)


def test_algebraic_feedback_without_solution_is_refused_naming_the_cycle(tmp_path: Path) -> None:
    body = """
[blocks.block]
formula = "1/(s + 1)"
[signals]
e = "-y"
y = "0.5*z + block*e"
z = "2*y"
"""
    message = " ".join(str(p) for p in refused(HEAD + body + LOOP, tmp_path))
    assert "y" in message
    assert "z" in message


def test_a_loop_that_vanishes_at_infinity_is_refused(tmp_path: Path) -> None:
    """L = -(s + 2)/(s + 1): 1 + L = -1/(s + 1) -> 0."""
    text = '[blocks.block]\nformula = "(s + 2)/(s + 1)"\n[signals]\ne = "y"\ny = "block*e"\n'
    assert refused(HEAD + text + LOOP, tmp_path)


def test_a_loop_with_direct_path_is_fine_otherwise(tmp_path: Path) -> None:
    """L = -2(s + 2)/(s + 1): 1 + L = -(s + 3)/(s + 1), stable; L(0) = -4 and L(inf) = -2, both left of -1."""
    loop = one_block('formula = "2*(s + 2)/(s + 1)"', tmp_path, "-block*e").loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (0, 0, 0)


def test_1_plus_L_vanishing_at_a_later_stage_is_refused_too(tmp_path: Path) -> None:
    """Inner loop L = (s+2)/(s+1) is fine; the outer one then sees -(2s + 3)/(s + 2) times 1/2 -> -1."""
    body = """
[blocks.inner]
formula = "(s + 2)/(s + 1)"
[signals]
e = "u - y"
y = "inner*e"
f = "2*y"
u = "f"
[[loops]]
name = "loop"
cut = "e"
[[loops]]
name = "outer"
cut = "f"
"""
    # with the inner loop closed y/u = (s+2)/(2s+3) -> 1/2, and L of the outer loop is -2 y/u -> -1
    assert refused(HEAD + body, tmp_path)


# ---- kinds of blocks -------------------------------------------------------------------------------------------------

SECOND_ORDER = 5 * (1j + 3) / ((1j + 1) ** 2 + 4)  # 5 (s + 3)/((s + 1)^2 + 2^2) at s = j


@pytest.mark.parametrize(
    "block",
    [
        'formula = "g*(s + 3)/((s + 1)^2 + 4)"\ng = 5.0',
        "numerator = [5.0, 15.0]\ndenominator = [1.0, 2.0, 5.0]",
        "numerator = [10, 30]\ndenominator = [2, 4, 10]",
        "zeros = [-3.0]\npoles = [[-1.0, 2.0]]\nleading_gain = 5.0",
        "zeros = [-3.0]\npoles = [[-1.0, -2.0]]\nleading_gain = 5.0",
        "state_space = { A = [[0, 1], [-5, -2]], B = [[0], [1]], C = [[15, 5]], D = [[0]] }",
    ],
)
def test_kinds_of_blocks_that_say_the_same(block: str, tmp_path: Path) -> None:
    assert L(one_block(block, tmp_path), 1.0) == pytest.approx(SECOND_ORDER, rel=1e-12)


@pytest.mark.parametrize(
    "block",
    [
        'formula = "5/(s + 1)*exp(-0.25*s)"',
        "numerator = [5.0]\ndenominator = [1.0, 1.0]\ndead_time = 0.25",
        "zeros = []\npoles = [-1.0]\nleading_gain = 5.0\ndead_time = 0.25",
        "state_space = { A = [[-1]], B = [[5]], C = [[1]], D = [[0]] }\ndead_time = 0.25",
    ],
)
def test_dead_time_is_in_seconds(block: str, tmp_path: Path) -> None:
    expected = 5 / (1 + 2j) * np.exp(-0.5j)
    assert L(one_block(block, tmp_path), 2.0) == pytest.approx(expected, rel=1e-12)


def test_s_is_in_radians_per_second_whatever_the_unit(tmp_path: Path) -> None:
    text = HEAD.replace('"rad/s"', '"Hz"') + '[blocks.block]\nformula = "4/(s*(s + 1)^2)"\n'
    text += '[signals]\ne = "-y"\ny = "0.25*block*e"\n' + LOOP
    loop = opened(text, tmp_path).loop("loop")
    assert loop.margins is not None
    assert loop.margins.gain_increase is not None
    assert loop.margins.gain_increase.factor == pytest.approx(2.0, rel=1e-9)  # 1/(s(s+1)^2): K = 2 at 1 rad/s
    assert loop.margins.gain_increase.frequency == pytest.approx(1 / (2 * math.pi), rel=1e-9)


@pytest.mark.parametrize(
    ("formula", "expected"),
    [
        ("2^3^2/(s + 1)", 512 / (1 + 1j)),  # from the right
        ("-2^2/(s + 1)", -4 / (1 + 1j)),  # power before minus
        ("2^-1/(s + 1)", 0.5 / (1 + 1j)),
        ("24/4/3/(s + 1)", 2 / (1 + 1j)),  # from the left
        ("(9 - 4 - 3)/(s + 1)", 2 / (1 + 1j)),
        ("1/2*4/(s + 1)", 2 / (1 + 1j)),
        ("1 - -1/(s + 1)", 1 + 1 / (1 + 1j)),
        ("-s^2/(s + 1)^3", 1 / (1 + 1j) ** 3),
        ("sqrt(2)/(s + 1)", math.sqrt(2) / (1 + 1j)),  # a function of constants is a constant
        ("exp(0)*pi/(s + 1)", math.pi / (1 + 1j)),
        ("1/(s + cosh(0))", 1 / (1 + 1j)),
        ("s^-2*(s + 1)/(s + 3)", -(1 + 1j) / (3 + 1j)),
    ],
)
def test_precedence_in_formulas(formula: str, expected: complex, tmp_path: Path) -> None:
    found = one_block(f'formula = "{formula}"', tmp_path, "0.01*block*e")
    assert L(found, 1.0) == pytest.approx(expected / 100, rel=1e-12)


def test_sums_of_rational_functions_times_dead_times_are_recognised(tmp_path: Path) -> None:
    """1/(s-1) + exp(-s)/(s+2): the unstable pole is found, no declaration needed."""
    loop = one_block('formula = "1/(s - 1) + exp(-s)/(s + 2)"', tmp_path, "3*block*e").loop("loop")
    assert loop.unstable_poles_before == 1
    assert loop.evidence == "proved"


def test_a_pole_at_standstill_that_the_dead_times_cancel_is_none(tmp_path: Path) -> None:
    """The average over T, (1 - exp(-T s))/(T s), is 1 at standstill: L(0) = 2, and no arc is drawn."""
    found = one_block('formula = "(1 - exp(-T*s))/(T*s)"\nT = 0.5', tmp_path, "2*block*e")
    curve = found.curve("loop")
    assert curve.at_zero == pytest.approx(2.0)
    assert curve.arcs == ()
    loop = found.loop("loop")
    assert loop.unstable_poles_before == 0
    assert loop.axis_poles_left == ()


@pytest.mark.parametrize(
    ("formula", "limit", "omega"),
    [
        # x = sqrt(w/2): exp(-sqrt(s)) has size exp(-x) and angle -x, so it is real again at x = pi
        ("exp(-sqrt(s))", math.exp(math.pi), 2 * math.pi**2),
        # cosh((1 + j) x) = cosh x cos x + j sinh x sin x: real and negative at x = pi (a rod heated at one end)
        ("1/cosh(sqrt(s))", math.cosh(math.pi), 2 * math.pi**2),
        # (1 + s)^1.5: angle -1.5 atan(w) - w = -pi at w = 1.6164266
        ("exp(-s)/(1 + s)^1.5", (1 + 1.616426591572**2) ** 0.75, 1.616426591572),
    ],
)
def test_irrational_formulas_rest_on_the_declared_poles(
    formula: str, limit: float, omega: float, tmp_path: Path
) -> None:
    loop = one_block(f'formula = "{formula}"\nunstable_poles = 0', tmp_path).loop("loop")
    assert loop.evidence == "declared"
    assert loop.verdict == "stable"
    assert loop.margins is not None
    assert loop.margins.gain_increase is not None
    assert loop.margins.gain_increase.factor == pytest.approx(limit, rel=1e-6)
    assert loop.margins.gain_increase.frequency == pytest.approx(omega, rel=1e-6)


@pytest.mark.parametrize(
    "formula",
    ["exp(0.1*s)/(s + 1)", "1/(s + exp(-s))", "exp(-sqrt(s))", "1/0", "s/(s - s)", "(s + 1)^65", "1/(s + 1e999)"],
)
def test_formulas_that_are_refused(formula: str, tmp_path: Path) -> None:
    text = f'{HEAD}[blocks.block]\nformula = "{formula}"\n[signals]\ne = "-y"\ny = "block*e"\n{LOOP}'
    assert all("block" in p.where or "block" in p.message for p in refused(text, tmp_path))


# ---- cancellation ----------------------------------------------------------------------------------------------------


def test_a_rational_block_is_reduced_to_lowest_terms_with_a_warning(tmp_path: Path) -> None:
    """(s - 1)/((s - 1)(s + 2)) has no pole at 1."""
    found = one_block('formula = "(s - 1)/((s - 1)*(s + 2))"', tmp_path)
    loop = found.loop("loop")
    assert (loop.unstable_poles_before, loop.unstable_poles_after) == (0, 0)
    assert any(w.where.startswith("blocks.block") for w in found.warnings)


def test_a_stable_common_factor_draws_no_warning(tmp_path: Path) -> None:
    assert one_block('formula = "(s + 1)/((s + 1)*(s + 2))"', tmp_path).warnings == ()


def test_a_common_factor_is_found_among_decimals_as_written(tmp_path: Path) -> None:
    """(s - 0.1)/(s^2 + 0.1 s - 0.02) = 1/(s + 0.2): exact in decimals, not in doubles."""
    loop = one_block("numerator = [1, -0.1]\ndenominator = [1, 0.1, -0.02]", tmp_path).loop("loop")
    assert (loop.unstable_poles_before, loop.unstable_poles_after) == (0, 0)


def test_every_eigenvalue_of_a_state_space_counts(tmp_path: Path) -> None:
    """The state at +1 is neither driven nor seen, and is still there: one hidden pole."""
    block = "state_space = { A = [[-1, 0], [0, 1]], B = [[1], [0]], C = [[1, 0]], D = [[0]] }"
    found = one_block(block, tmp_path)
    loop = found.loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (1, 0, 1)
    assert [(h.block, h.pole) for h in found.check().hidden_unstable_poles] == [("block", 1 + 0j)]


def test_across_blocks_nothing_cancels(tmp_path: Path) -> None:
    """(s-1)/(s+1) times 1/(s-1): L = 1/(s+1) looks harmless, Z = 1."""
    body = """
[blocks.zero]
formula = "(s - 1)/(s + 1)"
[blocks.pole]
formula = "1/(s - 1)"
[signals]
e = "-y"
y = "zero*pole*e"
"""
    found = project(body, tmp_path)
    loop = found.loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (1, 0, 1)
    assert [(h.block, h.pole) for h in found.check().hidden_unstable_poles] == [("pole", 1 + 0j)]


def test_a_block_may_be_improper(tmp_path: Path) -> None:
    """1/(s^2 - 1) with 2 + 3 s fed back: s^2 + 3 s + 1."""
    body = """
[blocks.plant]
formula = "1/(s^2 - 1)"
[blocks.rate]
formula = "s"
[signals]
e = "-2*y - 3*rate*y"
y = "plant*e"
"""
    loop = project(body, tmp_path).loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (1, -1, 0)


def test_an_improper_loop_turns_at_infinity(tmp_path: Path) -> None:
    """L = s^2: 1 + s^2 has its roots on the axis; L = s + s^2/4: (s/2 + 1)^2, stable."""
    assert one_block('formula = "s^2"', tmp_path).loop("loop").verdict == "undecided"
    loop = one_block('formula = "s + s^2/4"', tmp_path).loop("loop")
    assert (loop.unstable_poles_before, loop.unstable_poles_after) == (0, 0)
