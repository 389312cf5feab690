"""The blocks of a project file: formula, coefficients, roots, state space or measured response."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Final

from encircle.engine import names
from encircle.engine.checked_table import CheckedTable, described
from encircle.engine.declarations import (
    Block,
    CoefficientBlock,
    FormulaBlock,
    MeasuredBlock,
    MeasuredResponse,
    RootBlock,
    StateSpaceBlock,
)
from encircle.engine.expression import Expression
from encircle.engine.formula import FUNCTIONS, names_used, parse_formula
from encircle.engine.formula_bounds import check_formula
from encircle.engine.measured_response import KNOWN_COLUMNS, ResponseFileError, read_response
from encircle.engine.text import listed, nearest_known, one_line, quoted
from encircle.engine.tokens import FormulaError

HIGHEST_ORDER: Final = 100
_MOST_POLES = 1000
_MOST_INTEGRATORS = 64
_ZERO = Fraction(0)

_Root = tuple[Fraction, Fraction]


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What a block may refer to: the shared parameters, and the folder that holds the project file."""

    parameters: Mapping[str, Fraction]
    folder: Path


def read_block(name: str, table: CheckedTable, around: Surroundings) -> Block | None:
    """The block that ``table`` declares; None where mistakes, which are noted in the table, prevent it."""
    kinds = [kind for kind, keys in _MARKS.items() if any(table.has(key) for key in keys)]
    if len(kinds) == 1:
        return _READERS[kinds[0]](name, table, around)
    if kinds:
        given = listed(next(key for key in _MARKS[kind] if table.has(key)) for kind in kinds)
        table.table_error("block-kind", f"the block is given by {given} at once; exactly one of them is needed")
    else:
        near = "".join(nearest_known(key, _MARKS) for key in list(table.content)[:20])
        table.table_error("block-kind", f"the block needs one of {listed(_MARKS, 'or')}{near}")
    return None


def _formula(name: str, table: CheckedTable, around: Surroundings) -> Block | None:
    text = table.text("formula")
    own = _own_parameters(table, around)
    unstable_poles = table.whole("unstable_poles", 0, _MOST_POLES) if table.has("unstable_poles") else None
    note = _note(table)
    expression = None if text is None else _parsed(table, text)
    if text is None or expression is None:
        return None
    used = dict.fromkeys(names_used(expression))
    known = _check_names(table, used, own, around)
    constants = {key: own.get(key, around.parameters.get(key, _ZERO)) for key in used if key not in ("s", "pi")}
    if not known or not _within_bounds(table, expression, constants):
        return None
    return FormulaBlock(name, expression, one_line(text), constants, unstable_poles, note)


def _own_parameters(table: CheckedTable, around: Surroundings) -> dict[str, Fraction]:
    """The numeric keys that are no block keys, mistakes among them noted."""
    own: dict[str, Fraction] = {}
    for key, value in table.content.items():
        if key in names.FORMULA_KEYS:
            continue
        if key in names.BLOCK_KEYS:
            _not_used(table, key, "formula")
        elif isinstance(value, str | bool | dict):
            near = nearest_known(key, names.FORMULA_KEYS)
            table.error("unknown-key", key, f"is no key of a block, nor a parameter, being {described(value)}{near}")
        elif complaint := names.complaint_about(key):
            table.error("bad-name", key, complaint)
        else:
            own[key] = table.number_or_stand_in(key)
            if key in around.parameters:
                table.error("name-twice", key, "repeats a shared parameter of this name; rename one of them")
    return own


def _parsed(table: CheckedTable, text: str) -> Expression | None:
    try:
        return parse_formula(text)
    except FormulaError as error:
        _formula_error(table, error)
        return None


def _formula_error(table: CheckedTable, error: FormulaError) -> None:
    at = f", character {error.position}" if error.position else ""
    table.error(error.code, "formula", f"cannot be used{at}: {error.message}")


def _check_names(
    table: CheckedTable, used: Collection[str], own: Mapping[str, Fraction], around: Surroundings
) -> bool:
    """Note unknown names, and block parameters that the formula does not use."""
    known = dict.fromkeys(("s", "pi", *own, *around.parameters))
    unknown = [name for name in used if name not in known]
    usable, wanted = (*known, *FUNCTIONS), (*unknown, *names.FORMULA_KEYS)
    for name in unknown:
        near = nearest_known(name, usable)
        table.error("unknown-name", "formula", f"uses {quoted(name)}, which is defined nowhere{near}")
    for name in own:
        if name not in used:
            near = nearest_known(name, wanted)
            table.error("unused-parameter", name, f"is a parameter that the formula does not use{near}")
    return not unknown


def _within_bounds(table: CheckedTable, expression: Expression, constants: Mapping[str, Fraction]) -> bool:
    try:
        check_formula(expression, constants)
    except FormulaError as error:
        _formula_error(table, error)
        return False
    return True


def _coefficients(name: str, table: CheckedTable, around: Surroundings) -> Block | None:
    _refuse_other_keys(table, names.COEFFICIENT_KEYS, "numerator")
    dead_time, note = _dead_time(table), _note(table)
    if not table.require("numerator", "denominator"):
        return None
    numerator, denominator = _polynomial(table, "numerator"), _polynomial(table, "denominator")
    if denominator is not None and not any(denominator):
        table.error("zero-denominator", "denominator", "is 0; one of its coefficients must not be")
    if numerator is None or denominator is None:
        return None
    return CoefficientBlock(name, numerator, denominator, dead_time, note)


def _polynomial(table: CheckedTable, key: str) -> tuple[Fraction, ...] | None:
    coefficients = table.numbers(key)
    if coefficients == ():
        table.error("empty-array", key, "is empty; write its coefficients in descending powers of s")
        return None
    if coefficients is not None:
        leading = next((place for place, value in enumerate(coefficients) if value), len(coefficients) - 1)
        _check_order(table, key, len(coefficients) - 1 - leading)
    return coefficients


def _check_order(table: CheckedTable, key: str, order: int) -> None:
    if order > HIGHEST_ORDER:
        table.error("order-too-high", key, f"has order {order}, and a block may have order {HIGHEST_ORDER}")


def _roots(name: str, table: CheckedTable, around: Surroundings) -> Block | None:
    _refuse_other_keys(table, names.ROOT_KEYS, "zeros")
    dead_time, note = _dead_time(table), _note(table)
    if not table.require("zeros", "poles", "leading_gain"):
        return None
    zeros, poles, gain = _root_list(table, "zeros"), _root_list(table, "poles"), table.number("leading_gain")
    if zeros is None or poles is None or gain is None:
        return None
    return RootBlock(name, zeros, poles, gain, dead_time, note)


def _root_list(table: CheckedTable, key: str) -> tuple[_Root, ...] | None:
    values = table.array(key)
    if values is None:
        return None
    roots = [_root(table, key, place, value) for place, value in enumerate(values, 1)]
    signed = [root for root in roots if root is not None]
    if len(signed) < len(roots) or not _pairs_given_once(table, key, signed):
        return None
    _check_order(table, key, sum(2 if imaginary else 1 for _, imaginary in signed))
    return tuple((real, abs(imaginary)) for real, imaginary in signed)


def _root(table: CheckedTable, key: str, place: int, value: object) -> _Root | None:
    """A number, or ``[re, im]``, which stands for the pair."""
    if not isinstance(value, list):
        real = table.number_in(key, value, f"root {place} ")
        return None if real is None else (real, _ZERO)
    if len(value) != 2:
        table.error("bad-root", key, f"root {place} is no pair; a complex root is written `[re, im]`")
        return None
    pair = table.numbers_in(key, value, f"root {place}, ")
    if pair is not None and pair[1] == 0:
        table.error("bad-root", key, f"root {place} is `[re, 0]`, no pair; write a real root as a plain number")
        return None
    return None if pair is None else (pair[0], pair[1])


def _pairs_given_once(table: CheckedTable, key: str, roots: Sequence[_Root]) -> bool:
    given = set(roots)
    for real, imaginary in roots:
        if imaginary > 0 and (real, -imaginary) in given:
            shown = f"`[{float(real):.6g}, {float(imaginary):.6g}]`"
            table.error("bad-root", key, f"lists the conjugate of {shown} too; one of them stands for the pair")
            return False
    return True


def _state_space(name: str, table: CheckedTable, around: Surroundings) -> Block | None:
    _refuse_other_keys(table, names.STATE_SPACE_KEYS, "state_space")
    dead_time, note = _dead_time(table), _note(table)
    matrices = table.table("state_space")
    if matrices is None:
        return None
    matrices.refuse_unknown(("A", "B", "C", "D"), "a state space")
    if not matrices.require("A", "B", "C", "D"):
        return None
    A = _square(matrices)
    B, C = (_vector(matrices, key, None if A is None else len(A)) for key in ("B", "C"))
    D = _vector(matrices, "D", 1)
    if A is None or B is None or C is None or D is None:
        return None
    return StateSpaceBlock(name, A, B, C, D[0], dead_time, note)


def _square(matrices: CheckedTable) -> tuple[tuple[Fraction, ...], ...] | None:
    values = matrices.array("A")
    if values is None:
        return None
    if not values or not all(isinstance(row, list) and len(row) == len(values) for row in values):
        matrices.error("bad-shape", "A", "must be square: as many rows `[…]` as numbers in each, one row at least")
        return None
    if len(values) > HIGHEST_ORDER:
        _check_order(matrices, "A", len(values))
        return None
    rows = [
        matrices.numbers_in("A", row, f"row {place}, ") for place, row in enumerate(values, 1) if isinstance(row, list)
    ]
    complete = tuple(row for row in rows if row is not None)
    return complete if len(complete) == len(rows) else None


def _vector(matrices: CheckedTable, key: str, length: int | None) -> tuple[Fraction, ...] | None:
    """B, C or D of one input and one output: plain numbers, one row, or (B) one number a row."""
    value = matrices.content[key]
    entries: list[object] = value if isinstance(value, list) else [value]
    if len(entries) == 1 and isinstance(entries[0], list):
        entries = entries[0]
    elif key == "B" and entries and all(isinstance(row, list) and len(row) == 1 for row in entries):
        entries = [row[0] for row in entries if isinstance(row, list)]
    if any(isinstance(entry, list) for entry in entries):
        matrices.error("bad-shape", key, "has rows that do not fit a block with one input and one output")
        return None
    if length is not None and len(entries) != length:
        sentence = f"has {len(entries)} entries and needs {length}: a block has one input and one output"
        matrices.error("bad-shape", key, sentence)
        return None
    return matrices.numbers_in(key, entries, "")


def _measured(name: str, table: CheckedTable, around: Surroundings) -> Block | None:
    _refuse_other_keys(table, names.MEASURED_KEYS, "measured")
    file, note = table.text("measured"), _note(table)
    columns = _columns(table)
    stated = table.require("unstable_poles", "integrators")
    unstable_poles = table.whole("unstable_poles", 0, _MOST_POLES) if stated else None
    integrators = table.whole("integrators", -_MOST_INTEGRATORS, _MOST_INTEGRATORS) if stated else None
    roll_off = table.whole("roll_off", 0, _MOST_INTEGRATORS) if table.has("roll_off") else None
    between_lines = table.not_negative("between_lines", Fraction(1))
    response = None if file is None or columns is None else _response(table, file, columns, around.folder)
    if response is None or unstable_poles is None or integrators is None:
        return None
    return MeasuredBlock(name, response, unstable_poles, integrators, roll_off, float(between_lines), note)


def _columns(table: CheckedTable) -> dict[str, str] | None:
    """The header that stands for each known column, where the file says so."""
    if not table.has("columns"):
        return {}
    headers = table.table("columns")
    if headers is None:
        return None
    headers.refuse_unknown(KNOWN_COLUMNS, "the columns of a measured response")
    texts = {key: headers.text(key) for key in headers.content if key in KNOWN_COLUMNS}
    return {key: text for key, text in texts.items() if text is not None} if None not in texts.values() else None


def _response(table: CheckedTable, file: str, columns: Mapping[str, str], folder: Path) -> MeasuredResponse | None:
    if not file.isprintable() or not file.strip():
        table.error("bad-path", "measured", f"is {quoted(file)}, which is no file name in printable characters")
        return None
    try:
        return read_response(folder / file, file, columns)
    except ResponseFileError as error:
        table.error(error.code, "measured", f"cannot be used: {error.sentence}")
        return None


def _dead_time(table: CheckedTable) -> Fraction:
    return table.not_negative("dead_time", _ZERO)


def _note(table: CheckedTable) -> str:
    text = table.text("note") if table.has("note") else ""
    return one_line(text or "")


def _refuse_other_keys(table: CheckedTable, used: Collection[str], kind: str) -> None:
    for key in table.content:
        if key in used:
            continue
        if key in names.BLOCK_KEYS:
            _not_used(table, key, kind)
        else:
            near = nearest_known(key, used)
            table.error("unknown-key", key, f"is no key of a block given by {quoted(kind)}{near}")


def _not_used(table: CheckedTable, key: str, kind: str) -> None:
    table.error("key-not-used", key, f"is a key that a block given by {quoted(kind)} does not use; remove it")


_Reader = Callable[[str, CheckedTable, Surroundings], Block | None]
_READERS: Final[Mapping[str, _Reader]] = {
    "formula": _formula,
    "numerator": _coefficients,
    "zeros": _roots,
    "state_space": _state_space,
    "measured": _measured,
}
# The keys by which each kind of block is known.
_MARKS: Final[Mapping[str, tuple[str, ...]]] = {
    "formula": ("formula",),
    "numerator": ("numerator", "denominator"),
    "zeros": ("zeros", "poles", "leading_gain"),
    "state_space": ("state_space",),
    "measured": ("measured",),
}
