"""What a formula may not exceed, checked on its syntax tree before any algebra is done with it.

Every constant in it must be real, finite and computable at little cost; exponents are constants up to 64; and the
rational function that it would expand to, nothing cancelled, stays of a size that exact arithmetic handles.
"""

from __future__ import annotations

import math
import operator
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from encircle.engine.decimals import NumberRefused, within_double
from encircle.engine.expression import Call, Expression, Name, Negative, Number, Operation
from encircle.engine.tokens import FormulaError

LARGEST_EXPONENT: Final = 64
_LARGEST_EXPANSION = 400
_MOST_BITS = 200_000
_DOUBLE_BITS = 64

_Constant = Fraction | float
_ARITHMETIC: Final[Mapping[str, Callable[[_Constant, _Constant], _Constant]]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": operator.truediv,
}
_FUNCTIONS: Final[Mapping[str, Callable[[float], float]]] = {
    "exp": math.exp,
    "sqrt": math.sqrt,
    "sinh": math.sinh,
    "cosh": math.cosh,
    "tanh": math.tanh,
}


@dataclass(frozen=True, slots=True)
class Extent:
    """How large a formula is: its value where it is constant (None: it depends on s), exact where it is rational;
    the degrees in s of the fraction it expands to, nothing cancelled; and a bound on the bits of its coefficients.
    """

    value: _Constant | None
    numerator: int
    denominator: int
    bits: int


def check_formula(expression: Expression, constants: Mapping[str, Fraction]) -> Extent:
    """The extent of a formula whose every name is ``s``, ``pi`` or in ``constants``.

    Raises FormulaError for exponents that depend on s or exceed 64, constants that are infinite, not real or divided
    by 0, and formulas that expand beyond all use.
    """
    match expression:
        case Number(number):
            return _constant(number)
        case Name(name):
            return _of_name(name, constants)
        case Negative(operand):
            inner = check_formula(operand, constants)
            value = None if inner.value is None else -inner.value
            return Extent(value, inner.numerator, inner.denominator, inner.bits)
        case Operation("^", left, right):
            return _power(check_formula(left, constants), check_formula(right, constants))
        case Operation(symbol, left, right):
            return _arithmetic(symbol, check_formula(left, constants), check_formula(right, constants))
        case Call(function, argument):
            return _call(function, check_formula(argument, constants))


def _of_name(name: str, constants: Mapping[str, Fraction]) -> Extent:
    if name == "s":
        return Extent(None, 1, 0, 1)
    return _constant(math.pi if name == "pi" else constants[name])


def _constant(value: _Constant) -> Extent:
    if isinstance(value, float):
        return Extent(value, 0, 0, _DOUBLE_BITS)
    return Extent(value, 0, 0, value.numerator.bit_length() + value.denominator.bit_length())


def _arithmetic(symbol: str, left: Extent, right: Extent) -> Extent:
    if left.value is not None and right.value is not None:
        _bounded(0, 0, left.bits + right.bits)
        return _constant(_compute(symbol, left.value, right.value))
    if symbol == "*" and (left.value == 0 or right.value == 0):
        return _constant(Fraction(0))
    if symbol == "/":
        if right.value == 0:
            raise FormulaError(None, "something is divided by 0", "division-by-zero")
        right = Extent(right.value, right.denominator, right.numerator, right.bits)
    numerator = left.numerator + right.numerator
    if symbol in "+-":
        numerator = max(left.numerator + right.denominator, right.numerator + left.denominator)
    return _bounded(numerator, left.denominator + right.denominator, left.bits + right.bits)


def _compute(symbol: str, left: _Constant, right: _Constant) -> _Constant:
    if symbol == "/" and right == 0:
        raise FormulaError(None, "a constant is divided by 0", "division-by-zero")
    try:
        value = _ARITHMETIC[symbol](left, right)
    except OverflowError:  # a fraction beyond double precision met a float
        raise _infinite() from None
    return _finite(value, vanishes=left == 0 or symbol in "+-")


def _finite(value: _Constant, vanishes: bool) -> _Constant:
    """The value, refused where it is infinite in double precision, or 0 though it does not vanish."""
    if isinstance(value, float):
        if math.isinf(value) or math.isnan(value):
            raise _infinite()
        if value == 0.0 and not vanishes:
            raise FormulaError(None, "a constant is too small for double precision", "number-range")
        return value
    try:
        return within_double(value)
    except NumberRefused as refusal:
        raise FormulaError(None, f"a constant {refusal}", "number-range") from None


def _infinite() -> FormulaError:
    return FormulaError(None, "a constant is infinite (beyond double precision, about 1.8e308)", "number-range")


def _power(base: Extent, exponent: Extent) -> Extent:
    if exponent.value is None:
        raise FormulaError(None, "an exponent depends on `s`, and exponents are constants", "exponent-not-constant")
    if not -LARGEST_EXPONENT <= exponent.value <= LARGEST_EXPONENT:
        sentence = f"an exponent is {float(exponent.value):.6g}, and exponents go up to {LARGEST_EXPONENT}"
        raise FormulaError(None, sentence, "exponent-too-large")
    whole = int(exponent.value) if exponent.value == int(exponent.value) else None
    if base.value is not None:
        _bounded(0, 0, base.bits * abs(whole or 1))
        return _constant(_constant_power(base.value, float(exponent.value) if whole is None else whole))
    if whole is None:
        return Extent(None, 0, 0, _DOUBLE_BITS)
    top, bottom = (base.numerator, base.denominator) if whole >= 0 else (base.denominator, base.numerator)
    return _bounded(top * abs(whole), bottom * abs(whole), base.bits * abs(whole))


def _constant_power(base: _Constant, exponent: float | int) -> _Constant:
    if base == 0 and exponent < 0:
        raise FormulaError(None, "0 has a negative exponent", "division-by-zero")
    if base < 0 and not isinstance(exponent, int):
        raise FormulaError(None, "a negative constant has a broken exponent, which is not real", "not-real")
    try:
        value: _Constant = base**exponent if isinstance(exponent, int) else math.pow(base, exponent)
    except OverflowError:
        raise _infinite() from None
    return _finite(value, vanishes=base == 0)


def _call(function: str, argument: Extent) -> Extent:
    if argument.value is None:
        return Extent(None, 0, 0, _DOUBLE_BITS)
    if function == "sqrt" and argument.value < 0:
        raise FormulaError(None, "`sqrt` of a negative constant is not real", "not-real")
    try:
        value = _FUNCTIONS[function](float(argument.value))
    except OverflowError:
        raise _infinite() from None
    return _constant(_finite(value, vanishes=argument.value == 0))


def _bounded(numerator: int, denominator: int, bits: int) -> Extent:
    order = max(numerator, denominator)
    if order > _LARGEST_EXPANSION:
        sentence = f"multiplied out it would have order {order}, and a block may have order 100"
        raise FormulaError(None, sentence, "order-too-high")
    if bits > _MOST_BITS:
        raise FormulaError(None, "multiplied out its constants would have too many digits", "too-many-digits")
    return Extent(None, numerator, denominator, bits)
