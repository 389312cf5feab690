"""The project file: what its tables mean, and one clear sentence for every mistake in them."""

from __future__ import annotations

import hashlib
from fractions import Fraction
from pathlib import Path

import pytest
from project_texts import COIL, REWINDER, ROTOR, changed, one_problem, problems_of, read_text

from encircle.engine.declarations import (
    CoefficientBlock,
    FormulaBlock,
    LoopDeclaration,
    MeasuredBlock,
    RootBlock,
    StateSpaceBlock,
    Term,
)
from encircle.engine.errors import ProjectError
from encircle.engine.formula import parse_formula
from encircle.engine.project_file import read_project

FRF = "frequency_hz,real,imag\n1,0,-2\n2,0,-1\n"
LAST_LOOP = "limits = { phase_margin_deg = 50, modulus_margin = 0.5 }\n"

# ---- what a good file means ------------------------------------------------------------------------------------------


def test_the_whole_file_is_declared(tmp_path: Path) -> None:
    found = read_text(REWINDER, tmp_path)
    assert found.title == "Rewinder drive"
    assert found.file == str(tmp_path / "rewinder.toml")
    assert found.sha256 == hashlib.sha256(REWINDER.encode()).hexdigest()
    assert found.frequency_unit == "Hz"
    assert found.inputs == ("speed_command", "load_torque")
    assert found.band == (0.1, 20000.0)
    assert found.parameters == {"kt": Fraction(41, 100), "ke": Fraction(41, 100)}
    assert list(found.signals) == [
        "current_error",
        "voltage",
        "current",
        "speed",
        "current_command",
        "speed_error",
    ]
    assert found.warnings == ()


def test_numbers_are_the_decimals_as_written(tmp_path: Path) -> None:
    blocks = read_text(REWINDER, tmp_path).blocks
    assert blocks["amplifier"] == FormulaBlock(
        "amplifier",
        parse_formula("exp(-T*s) / (1 + tau*s)"),
        "exp(-T*s) / (1 + tau*s)",
        {"T": Fraction(9, 100_000), "tau": Fraction(2, 100_000)},
        None,
        "",
    )
    coil = CoefficientBlock("coil", (Fraction(1),), (Fraction(34, 10_000), Fraction(82, 100)), Fraction(0), "")
    assert blocks["coil"] == coil
    assert blocks["current_controller"].note == "gains as on the drive, 12 March"


def test_equations_become_terms(tmp_path: Path) -> None:
    signals = read_text(REWINDER, tmp_path).signals
    inner = (Term(Fraction(1), (), "voltage"), Term(Fraction(-41, 100), (), "speed"))
    assert signals["current"] == (Term(Fraction(1), ("coil",), inner),)
    assert signals["voltage"] == (Term(Fraction(1), ("amplifier", "current_controller"), "current_error"),)


def test_limits_of_a_loop_replace_the_shared_ones_key_by_key(tmp_path: Path) -> None:
    loops = read_text(REWINDER, tmp_path).loops
    shared = {"gain_margin_db": 6.0, "phase_margin_deg": 45.0}
    own = {"gain_margin_db": 6.0, "phase_margin_deg": 50.0, "modulus_margin": 0.5}
    assert loops == (
        LoopDeclaration("current", "current_error", 1.0, shared, None, None),
        LoopDeclaration("speed", "speed_error", 1.0, own, None, None),
    )


def test_what_may_be_left_out(tmp_path: Path) -> None:
    found = read_text('format = 1\n[signals]\ne = "-e"\n[[loops]]\nname = "l"\ncut = "e"\n', tmp_path)
    assert (found.title, found.inputs, found.band, found.frequency_unit) == ("", (), None, "Hz")
    assert found.loops == (LoopDeclaration("l", "e", 1.0, {}, None, None),)


def test_a_loop_may_be_meant_to_be_unfinished(tmp_path: Path) -> None:
    text = changed((LAST_LOOP, "leaves_unstable = 2\nleaves_on_axis = 0\ngain = 0.5\n"), ("gain = 1.0\n", ""))
    loop = read_text(text, tmp_path).loops[1]
    assert (loop.leaves_unstable, loop.leaves_on_axis, loop.gain) == (2, 0, 0.5)


def test_names_of_loops_are_free(tmp_path: Path) -> None:
    loops = read_text(changed(('name = "speed"', 'name = "Drehzahl, äußere [2]"')), tmp_path).loops
    assert loops[1].name == "Drehzahl, äußere [2]"


def test_block_parameters_may_repeat_names_of_other_tables(tmp_path: Path) -> None:
    """Only blocks, signals, inputs and shared parameters live in one namespace."""
    text = changed(("tf*s", "speed*s"), ("tf = 4e-4", "speed = 4e-4"))
    block = read_text(text, tmp_path).blocks["speed_filter"]
    assert isinstance(block, FormulaBlock)
    assert block.parameters == {"speed": Fraction(4, 10_000)}


def test_a_formula_holds_the_shared_parameters_that_it_uses(tmp_path: Path) -> None:
    block = read_text(changed(("1/(1 + tf*s)", "kt*pi/(1 + tf*s)")), tmp_path).blocks["speed_filter"]
    assert isinstance(block, FormulaBlock)
    assert block.parameters == {"kt": Fraction(41, 100), "tf": Fraction(4, 10_000)}


def test_roots_stand_for_pairs(tmp_path: Path) -> None:
    keys = "zeros = [[-1, 2.5], [-1, 2.5], -3]\npoles = [[0, -4], 0, 1e-3]\nleading_gain = -2\ndead_time = 1e-3\n"
    block = read_text(changed((COIL, keys)), tmp_path).blocks["coil"]
    zeros = ((Fraction(-1), Fraction(5, 2)), (Fraction(-1), Fraction(5, 2)), (Fraction(-3), Fraction(0)))
    poles = ((Fraction(0), Fraction(4)), (Fraction(0), Fraction(0)), (Fraction(1, 1000), Fraction(0)))
    assert block == RootBlock("coil", zeros, poles, Fraction(-2), Fraction(1, 1000), "")


@pytest.mark.parametrize("b", ["[0, 1]", "[[0], [1]]", "[[0, 1]]"])
@pytest.mark.parametrize(("c", "d"), [("[1, 0.5]", "0.25"), ("[[1, 0.5]]", "[0.25]"), ("[[1, 0.5]]", "[[0.25]]")])
def test_state_space_takes_rows_and_columns(b: str, c: str, d: str, tmp_path: Path) -> None:
    keys = f"state_space = {{ A = [[-1, 2], [0, -3]], B = {b}, C = {c}, D = {d} }}\n"
    block = read_text(changed((COIL, keys)), tmp_path).blocks["coil"]
    A = ((Fraction(-1), Fraction(2)), (Fraction(0), Fraction(-3)))
    B, C = (Fraction(0), Fraction(1)), (Fraction(1), Fraction(1, 2))
    assert block == StateSpaceBlock("coil", A, B, C, Fraction(1, 4), Fraction(0), "")


def test_measured_blocks_are_read_beside_the_project_file(tmp_path: Path) -> None:
    (tmp_path / "data").mkdir()
    (tmp_path / "data" / "rotor.csv").write_text(FRF.replace("frequency_hz", "Freq [Hz]"))
    keys = 'measured = "data/rotor.csv"\nunstable_poles = 1\nintegrators = -1\n'
    keys += 'columns = { frequency_hz = "Freq [Hz]" }\n'
    block = read_text(changed((ROTOR, keys)), tmp_path).blocks["rotor"]
    assert isinstance(block, MeasuredBlock)
    assert (block.unstable_poles, block.integrators, block.roll_off, block.between_lines) == (1, -1, None, 1.0)
    assert block.response.file == "data/rotor.csv"
    assert block.response.H.tolist() == [-2j, -1j]
    more = keys + "roll_off = 2\nbetween_lines = 0\n"
    block = read_text(changed((ROTOR, more)), tmp_path).blocks["rotor"]
    assert isinstance(block, MeasuredBlock)
    assert (block.roll_off, block.between_lines) == (2, 0.0)


# ---- warnings --------------------------------------------------------------------------------------------------------


def test_blocks_and_parameters_used_by_nothing_draw_warnings(tmp_path: Path) -> None:
    text = changed(("[parameters]\n", "[parameters]\nspare = 3\n"), ("speed_filter*speed", "speed"))
    warnings = read_text(text, tmp_path).warnings
    assert [(warning.code, warning.where) for warning in warnings] == [
        ("unused-block", "blocks.speed_filter"),
        ("unused-parameter", "parameters.spare"),
    ]
    assert "`speed_filter` is a block that no equation uses" in warnings[0].message


def test_a_signal_used_by_nothing_is_an_output(tmp_path: Path) -> None:
    assert read_text(changed(("[signals]\n", '[signals]\nshown = "2*speed"\n')), tmp_path).warnings == ()


def test_several_measured_blocks_with_poles_draw_a_warning(tmp_path: Path) -> None:
    (tmp_path / "rotor.csv").write_text(FRF)
    measured = 'measured = "rotor.csv"\nunstable_poles = 0\nintegrators = 1\n'
    both = changed((ROTOR, measured), (COIL, measured))
    assert [w.code for w in read_text(both, tmp_path).warnings] == ["measured-poles-repeated"]
    flat = measured.replace("integrators = 1", "integrators = 0")
    assert read_text(changed((ROTOR, measured), (COIL, flat)), tmp_path).warnings == ()


# ---- mistakes --------------------------------------------------------------------------------------------------------

MISTAKES = [
    # the file as a whole
    ("format = 1\n", "", "format-missing", "format", "`format` is missing"),
    ("format = 1\n", "format = 2\n", "format-unknown", "format", "reads `format = 1`"),
    ("format = 1\n", "format = true\n", "format-unknown", "format", "the truth value `true`"),
    ("format = 1\n", 'format = 1\ntitel = "x"\n', "unknown-key", "titel", "nearest known name is `title`"),
    ('title = "Rewinder drive"', "title = 3", "not-a-text", "title", "must be a text in quotes, not the number `3`"),
    ('frequency_unit = "Hz"', 'frequency_unit = "hz"', "not-a-choice", "frequency_unit", "must be `Hz` or `rad/s`"),
    ('"load_torque"]', "3]", "not-a-text", "inputs", "entry 2 must be a name in quotes"),
    ("from = 0.1\n", "", "key-missing", "band.from", "[band]: `from` is missing"),
    ("from = 0.1", "from = 0", "not-positive", "band.from", "must be above 0"),
    ("from = 0.1", "from = 20000", "band-order", "band", "`from` must be below `to`"),
    ("to = 20000", "to = 20000\nupto = 3", "unknown-key", "band.upto", "is no key of the band"),
    ("kt = 0.41", 'kt = "0.41"', "not-a-number", "parameters.kt", "must be a number, not the text `0.41`"),
    # names
    ("[blocks.rotor]", '[blocks."rotor 2"]', "bad-name", "blocks.`rotor 2`", "is no name"),
    ('"speed_command", ', '"speed_command", "speed_command", ', "name-twice", "inputs", "names an input twice"),
    ('"speed_command", ', '"speed_command", "coil", ', "name-twice", "blocks.coil", "an input already (inputs)"),
    ("ke = 0.41\n", "ke = 0.41\nspeed = 1\n", "name-twice", "parameters.speed", "a signal already (signals.speed)"),
    ("ke = 0.41\n", "ke = 0.41\n2k = 1\n", "bad-name", "parameters.2k", "start with no digit"),
    ("ke = 0.41\n", "ke = 0.41\ns = 1\n", "bad-name", "parameters.s", "Laplace variable"),
    ("ke = 0.41\n", "ke = 0.41\npi = 1\n", "bad-name", "parameters.pi", "3.14159"),
    ("ke = 0.41\n", "ke = 0.41\ntanh = 1\n", "bad-name", "parameters.tanh", "is a function"),
    ("ke = 0.41\n", "ke = 0.41\nroll_off = 1\n", "bad-name", "parameters.roll_off", "is a key of blocks"),
    ("[signals]\n", '[signals]\nnote = "speed"\n', "bad-name", "signals.note", "is a key of blocks"),
    ("J = 1.8e-3", "J = 1.8e-3\nsqrt = 3", "bad-name", "blocks.rotor.sqrt", "is a function"),
    ("J = 1.8e-3", "J = 1.8e-3\nJ = 2", "name-twice", "", "line 32: `J` is given twice"),
    # blocks
    (ROTOR, "", "block-kind", "blocks.rotor", "needs one of `formula`"),
    (ROTOR, 'formulae = "1/s"\n', "block-kind", "blocks.rotor", "nearest known name is `formula`"),
    (ROTOR, ROTOR + "poles = [1]\n", "block-kind", "blocks.rotor", "by `formula` and `poles` at once"),
    ("J = 1.8e-3", "J = 1.8e-3\nk = 2", "unused-parameter", "blocks.rotor.k", "the formula does not use"),
    ("J = 1.8e-3", "J = 1\nunstable_pole = 0", "unused-parameter", "blocks.rotor.unstable_pole", "`unstable_poles`"),
    ("J = 1.8e-3", 'J = 1.8e-3\nnotes = "x"', "unknown-key", "blocks.rotor.notes", "nearest known name is `note`"),
    ("J = 1.8e-3", "J = 1.8e-3\ndead_time = 1", "key-not-used", "blocks.rotor.dead_time", "`formula` does not use"),
    ("J = 1.8e-3", "J = 1.8e-3\nunstable_poles = -1", "out-of-range", "blocks.rotor.unstable_poles", "from 0 to"),
    ("J = 1.8e-3", "J = 1\nunstable_poles = 1.0", "not-a-whole-number", "blocks.rotor.unstable_poles", "without"),
    ("1/(J*s)", "1/(J*s) + kt*x", "unknown-name", "blocks.rotor.formula", "uses `x`, which is defined nowhere"),
    ("1/(J*s)", "1/(J*s) + coil", "unknown-name", "blocks.rotor.formula", "uses `coil`"),
    ("1/(J*s)", "1/(J*s", "formula-syntax", "blocks.rotor.formula", "character 3: this parenthesis is never closed"),
    ("1/(J*s)", "1/(J*s)^65", "exponent-too-large", "blocks.rotor.formula", "exponents go up to 64"),
    ("1/(J*s)", "1/(J*s*(2-2))", "division-by-zero", "blocks.rotor.formula", "divided by 0"),
    ("J = 1.8e-3", "J = inf", "number-range", "blocks.rotor.J", "is infinite"),
    ("J = 1.8e-3", "J = nan", "number-range", "blocks.rotor.J", "is NaN"),
    ("J = 1.8e-3", "J = 1e-999999999", "number-range", "blocks.rotor.J", "too small"),
    ("J = 1.8e-3", "J = 1e999999999", "number-range", "blocks.rotor.J", "too large"),
    ("J = 1.8e-3", "J = 1" + 400 * "0", "number-range", "blocks.rotor.J", "too large"),
    ("J = 1.8e-3", "J = 0." + 400 * "3", "number-range", "blocks.rotor.J", "402 characters"),
    ("J = 1.8e-3", "J = [1]", "not-a-number", "blocks.rotor.J", "must be a number, not an array"),
    ("J = 1.8e-3", "J = 2024-03-12", "not-a-number", "blocks.rotor.J", "not a date or time"),
    ("J = 1.8e-3", "J = 1.8e-3\nnote = 3", "not-a-text", "blocks.rotor.note", "must be a text"),
    ("J = 1.8e-3", "J = 1.8e-3\n[blocks]\nfan = 3", "not-a-table", "blocks.fan", "must be a table"),
    ("J = 1.8e-3", 'kt = 1.8e-3\nJ = 1', "name-twice", "blocks.rotor.kt", "repeats a shared parameter"),
    # coefficients
    ("numerator = [1.0]\n", "", "key-missing", "blocks.coil.numerator", "is missing"),
    ("numerator = [1.0]", "numerator = []", "empty-array", "blocks.coil.numerator", "is empty"),
    ("numerator = [1.0]", "numerator = 1.0", "not-an-array", "blocks.coil.numerator", "must be an array"),
    ("numerator = [1.0]", 'numerator = [1, "2"]', "not-a-number", "blocks.coil.numerator", "entry 2 must be a number"),
    ("[3.4e-3, 0.82]", "[0, 0.0]", "zero-denominator", "blocks.coil.denominator", "must not be"),
    ("[3.4e-3, 0.82]", "[]", "empty-array", "blocks.coil.denominator", "is empty"),
    ("[3.4e-3, 0.82]", str([1] * 102), "order-too-high", "blocks.coil.denominator", "has order 101"),
    (COIL, COIL + "dead_time = -1\n", "negative", "blocks.coil.dead_time", "must be 0 or more"),
    (COIL, COIL + "kp = 1\n", "unknown-key", "blocks.coil.kp", "is no key of a block given by `numerator`"),
    (COIL, COIL + "roll_off = 1\n", "key-not-used", "blocks.coil.roll_off", "does not use"),
    # signals
    ("rotor * (kt", "rotr * (kt", "unknown-name", "signals.speed", "nearest known name is `rotor`"),
    ("ke*speed)", "ke*speed) + 1", "constant-term", "signals.current", "constant terms are not allowed"),
    ("ke*speed)", "ke*speed)*speed", "product-of-signals", "signals.current", "character 29"),
    ("ke*speed)", "ke*speed)/rotor", "division-by-block", "signals.current", "`rotor` is a block"),
    ("- load_torque", "- load_torque*s", "unknown-name", "signals.speed", "in the formula of a block only"),
    ('"current_command - current"', "3", "not-a-text", "signals.current_error", "must be a text"),
    # limits and loops
    ("gain_margin_db = 6", "gain_margin_db = -6", "not-positive", "limits.gain_margin_db", "must be above 0"),
    ("gain_margin_db = 6", "gain_margin = 6", "unknown-key", "limits.gain_margin", "`gain_margin_db`"),
    ("modulus_margin = 0.5", "modulus_margin = 0", "not-positive", "loops.2.limits.modulus_margin", "above 0"),
    ("modulus_margin = 0.5", "modulus = 0.5", "unknown-key", "loops.2.limits.modulus", "`modulus_margin`"),
    ("gain = 1.0", "gain = 0", "not-positive", "loops.2.gain", "must be above 0"),
    ("gain = 1.0", "gain = -1.0", "not-positive", "loops.2.gain", "must be above 0"),
    ("gain = 1.0", "gian = 1.0", "unknown-key", "loops.2.gian", "nearest known name is `gain`"),
    ("gain = 1.0", "leaves_unstable = -1", "out-of-range", "loops.2.leaves_unstable", "from 0"),
    ("gain = 1.0", "leaves_on_axis = true", "not-a-whole-number", "loops.2.leaves_on_axis", "the truth value"),
    ('name = "speed"', 'name = "current"', "name-twice", "loops.2.name", "the name of [[loops]] number 1"),
    ('name = "speed"', 'name = " "', "bad-name", "loops.2.name", "printable characters"),
    ('name = "speed"', 'name = "a\\u001b[2J"', "bad-name", "loops.2.name", r"`a\x1b[2J`"),
    ('name = "speed"', f'name = "{"n" * 81}"', "bad-name", "loops.2.name", "81 characters"),
    ('name = "speed"\n', "", "key-missing", "loops.2.name", "`name` is missing"),
    ('cut = "speed_error"', 'cut = "speed_eror"', "unknown-name", "loops.2.cut", "`speed_error`"),
    ('cut = "speed_error"', 'cut = "rotor"', "cut-no-signal", "loops.2.cut", "which is a block"),
    ('cut = "speed_error"', 'cut = "load_torque"', "cut-no-signal", "loops.2.cut", "which is an input"),
    ('cut = "speed_error"', 'cut = "current_error"', "cut-twice", "loops.2.cut", "the cut of [[loops]] number 1"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "code", "where", "said"), MISTAKES)
def test_every_mistake_is_one_sentence_with_its_place(
    old: str, new: str, code: str, where: str, said: str, tmp_path: Path
) -> None:
    problems = problems_of(changed((old, new)), tmp_path)
    found = [problem for problem in problems if problem.code == code and problem.where == where]
    assert len(found) == 1, problems
    assert said in found[0].message
    key = where.rpartition(".")[2]
    assert key in found[0].message


ROOTS = "zeros = []\npoles = [-1]\nleading_gain = 1\n"
SPACE = "state_space = { A = [[-1, 2], [0, -3]], B = [0, 1], C = [1, 0], D = 0 }\n"
MEASURED = 'measured = "rotor.csv"\nunstable_poles = 0\nintegrators = 1\n'

OTHER_BLOCKS = [
    (ROOTS, "poles = [-1]", "poles = [[-1, 0]]", "bad-root", "poles", "is `[re, 0]`, no pair"),
    (ROOTS, "poles = [-1]", "poles = [[-1, 2], [-1, -2]]", "bad-root", "poles", "the conjugate of `[-1, 2]` too"),
    (ROOTS, "poles = [-1]", "poles = [[-1, 2, 3]]", "bad-root", "poles", "root 1"),
    (ROOTS, "poles = [-1]", 'poles = [-1, "x"]', "not-a-number", "poles", "root 2"),
    (ROOTS, "poles = [-1]", "poles = [-1, [2, inf]]", "number-range", "poles", "root 2, entry 2 is infinite"),
    (ROOTS, "poles = [-1]", f"poles = {[[-1, 2]] * 51}", "order-too-high", "poles", "has order 102"),
    (ROOTS, "zeros = []\n", "", "key-missing", "zeros", "is missing"),
    (ROOTS, "leading_gain = 1\n", "", "key-missing", "leading_gain", "is missing"),
    (ROOTS, "leading_gain = 1", "leading_gain = nan", "number-range", "leading_gain", "is NaN"),
    (SPACE, "[0, -3]]", "[0, -3, 1]]", "bad-shape", "state_space.A", "must be square"),
    (SPACE, "[[-1, 2], [0, -3]]", "[]", "bad-shape", "state_space.A", "one row at least"),
    (SPACE, "B = [0, 1]", "B = [0, 1, 2]", "bad-shape", "state_space.B", "has 3 entries and needs 2"),
    (SPACE, "C = [1, 0]", "C = [[1], [0]]", "bad-shape", "state_space.C", "one input and one output"),
    (SPACE, "D = 0", "D = [0, 1]", "bad-shape", "state_space.D", "needs 1"),
    (SPACE, ", D = 0", "", "key-missing", "state_space.D", "is missing"),
    (SPACE, "D = 0", "D = 0, E = 1", "unknown-key", "state_space.E", "is no key of a state space"),
    (SPACE, "[[-1, 2], [0, -3]]", str([[0] * 101] * 101), "order-too-high", "state_space.A", "has order 101"),
    (MEASURED, "unstable_poles = 0\n", "", "key-missing", "unstable_poles", "must be stated"),
    (MEASURED, "integrators = 1\n", "", "key-missing", "integrators", "must be stated"),
    (MEASURED, "integrators = 1", "integrators = 0.5", "not-a-whole-number", "integrators", "whole number"),
    (MEASURED, "integrators = 1", "integrators = 1\nroll_off = -1", "out-of-range", "roll_off", "from 0"),
    (MEASURED, "integrators = 1", "integrators = 1\nbetween_lines = -0.1", "negative", "between_lines", "0 or more"),
    (MEASURED, "integrators = 1", "integrators = 1\ndead_time = 0", "key-not-used", "dead_time", "does not use"),
    (MEASURED, "rotor.csv", "roter.csv", "no-such-file", "measured", "nearest known name is `rotor.csv`"),
    (MEASURED, "rotor.csv", ".", "not-a-file", "measured", "is a directory"),
    (MEASURED, "rotor.csv", "a\\u0000b", "bad-path", "measured", "no file name"),
    (MEASURED, "rotor.csv", "bad.csv", "not-a-number", "measured", "`bad.csv`, line 3: `imag` is `x`"),
    (MEASURED, "integrators = 1", 'integrators = 1\ncolumns = { real = "Re" }', "column-missing", "measured", "`Re`"),
    (MEASURED, "integrators = 1", 'integrators = 1\ncolumns = { rael = "" }', "unknown-key", "columns.rael", "`real`"),
    (MEASURED, "integrators = 1", "integrators = 1\ncolumns = { real = 3 }", "not-a-text", "columns.real", "a text"),
]  # fmt: skip


@pytest.mark.parametrize(("keys", "old", "new", "code", "where", "said"), OTHER_BLOCKS)
def test_mistakes_in_roots_state_spaces_and_measured_blocks(
    keys: str, old: str, new: str, code: str, where: str, said: str, tmp_path: Path
) -> None:
    (tmp_path / "rotor.csv").write_text(FRF)
    (tmp_path / "bad.csv").write_text(FRF.replace("2,0,-1", "2,0,x"))
    read_text(changed((COIL, keys)), tmp_path)
    assert old in keys
    problem = one_problem(changed((COIL, keys.replace(old, new))), tmp_path)
    assert (problem.code, problem.where) == (code, f"blocks.coil.{where}")
    assert said in problem.message
    assert "[blocks.coil" in problem.message


def test_several_mistakes_are_reported_together(tmp_path: Path) -> None:
    text = changed(
        ("speed_filter*speed", "sped_filter*sped"),
        ("J = 1.8e-3", "Jx = 1.8e-3"),
        ('cut = "speed_error"', 'cut = "x"'),
        ("gain_margin_db = 6", "gain_margin_db = 0"),
        ("[3.4e-3, 0.82]", "[0]"),
    )
    problems = problems_of(text, tmp_path)
    assert [problem.where for problem in problems] == [
        "blocks.coil.denominator",
        "blocks.rotor.formula",
        "blocks.rotor.Jx",
        "signals.speed_error",
        "signals.speed_error",
        "limits.gain_margin_db",
        "loops.2.cut",
    ]


def test_a_name_given_twice_is_one_mistake(tmp_path: Path) -> None:
    """What the name means in equations is not guessed."""
    text = changed(("ke = 0.41\n", "ke = 0.41\nspeed = 1\n"), ("current_command - current", "current_comand"))
    assert [problem.code for problem in problems_of(text, tmp_path)] == ["name-twice", "unknown-name"]


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("[signals]", "[signal]", "write the diagram's equations under `[signals]`"),
        ("[[loops]]", "[[loop]]", "write one `[[loops]]`"),
    ],
)
def test_tables_that_must_be_there(old: str, new: str, said: str, tmp_path: Path) -> None:
    problems = problems_of(REWINDER.replace(old, new), tmp_path)
    assert any(said in problem.message for problem in problems)


def test_a_single_table_is_no_array_of_loops(tmp_path: Path) -> None:
    text = REWINDER.partition("[[loops]]")[0] + '[loops]\nname = "speed"\n'
    assert "in double brackets" in one_problem(text, tmp_path).message


def test_a_missing_project_file_names_its_neighbour(tmp_path: Path) -> None:
    read_text(REWINDER, tmp_path)
    with pytest.raises(ProjectError, match=r"does not exist; .*`rewinder\.toml`"):
        read_project(tmp_path / "rewinde.toml")
    with pytest.raises(ProjectError, match="is a directory"):
        read_project(tmp_path)
