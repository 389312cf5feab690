"""Formulas in s as rational functions with dead time, where they are that."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction

from encircle.engine.delayed_quotient import (
    MAXIMUM_EXPONENT,
    DelayedQuotient,
    UnusableBlockError,
    check_divisor,
    from_polynomial,
    lowest_terms,
)
from encircle.engine.expression import Call, Expression, FunctionName, Name, Negative, Number, Operation
from encircle.engine.polynomial import Polynomial

Value = DelayedQuotient | None  # None: irrational in s

_FUNCTIONS: dict[FunctionName, Callable[[float], float]] = {
    "exp": math.exp,
    "sqrt": math.sqrt,
    "sinh": math.sinh,
    "cosh": math.cosh,
    "tanh": math.tanh,
}


def reduce_formula(formula: Expression, parameters: Mapping[str, Fraction]) -> DelayedQuotient | None:
    """The formula as a quotient with dead time, nothing cancelled yet; None where it is irrational in s.

    Constants are exact; pi, exp, sinh, cosh, tanh and roots that are not rational become the nearest double. Raises
    UnusableBlockError for what no formula may hold; KeyError for a name that is neither s, pi nor a parameter.
    """
    values: list[Value] = []
    for node in _operands_first(formula):
        match node:
            case Number(value):
                values.append(DelayedQuotient(value))
            case Name(name):
                values.append(_named(name, parameters))
            case Negative() | Operation("+" | "-"):
                signs = [sign for sign, _ in _summands(node)]
                summands, values = values[-len(signs) :], values[: -len(signs)]
                values.append(_sum(signs, summands))
            case Call(function, _):
                values.append(_called(function, values.pop()))
            case Operation(operator, _, _):
                right, left = values.pop(), values.pop()
                values.append(_combined(operator, left, right))
    return values.pop()


def _operands_first(formula: Expression) -> list[Expression]:
    """All nodes, operands before what is done with them, without recursion: depth is the user's choice.

    A whole sum is one node, its summands are its operands.
    """
    order: list[Expression] = []
    pending = [formula]
    while pending:
        node = pending.pop()
        order.append(node)
        match node:
            case Negative() | Operation("+" | "-"):
                pending += [summand for _, summand in _summands(node)]
            case Call(_, argument):
                pending.append(argument)
            case Operation(_, left, right):
                pending += [left, right]
    return order[::-1]


def _summands(formula: Expression) -> list[tuple[int, Expression]]:
    """The terms of a sum, in the order written, with their signs 1 or -1, through all its parentheses."""
    terms: list[tuple[int, Expression]] = []
    pending = [(1, formula)]
    while pending:
        sign, node = pending.pop()
        match node:
            case Negative(operand):
                pending.append((-sign, operand))
            case Operation("+" | "-" as operator, left, right):
                pending += [(sign if operator == "+" else -sign, right), (sign, left)]
            case _:
                terms.append((sign, node))
    return terms


def _sum(signs: Sequence[int], summands: Sequence[Value]) -> Value:
    """The signed sum, added up pairwise: that keeps the polynomials short as long as possible."""
    terms: list[DelayedQuotient] = []
    for sign, summand in zip(signs, summands, strict=True):
        if summand is None:
            return None
        terms.append(summand if sign > 0 else -summand)
    while len(terms) > 1:
        pairs = [a + b for a, b in zip(terms[::2], terms[1::2], strict=False)]
        terms = pairs + terms[len(terms) & ~1 :]
    return terms[0]


def _named(name: str, parameters: Mapping[str, Fraction]) -> DelayedQuotient:
    if name == "s":
        return from_polynomial(Polynomial.of(0, 1))
    return DelayedQuotient(Fraction(math.pi) if name == "pi" else parameters[name])


def _combined(operator: str, left: Value, right: Value) -> Value:
    if operator == "^":
        return _power(left, right)
    if left is None or right is None:
        if operator == "/" and right is not None:
            check_divisor(right)
        return None
    return left * right if operator == "*" else left / right


def _power(base: Value, exponent: Value) -> Value:
    constant = None if exponent is None else _constant(exponent)
    if constant is None:
        raise UnusableBlockError("exponent-not-constant", "has an exponent that depends on s: exponents are constants")
    if abs(constant) > MAXIMUM_EXPONENT:
        raise UnusableBlockError(
            "exponent-above-64", f"has an exponent above {MAXIMUM_EXPONENT}: write smaller exponents"
        )
    if base is None:
        return None
    if constant.denominator == 1:
        return base**constant.numerator
    value = _constant(base)
    return None if value is None else DelayedQuotient(_constant_power(value, constant))


def _called(function: FunctionName, argument: Value) -> Value:
    if argument is None:
        return None
    constant = _constant(argument)
    if constant is None:
        return _exponential(argument) if function == "exp" else None
    return DelayedQuotient(_square_root(constant) if function == "sqrt" else _computed(_FUNCTIONS[function], constant))


def _exponential(argument: DelayedQuotient) -> Value:
    """exp(c - T s) = exp(c) exp(-T s); None for any other argument."""
    polynomial = lowest_terms(argument)[0].polynomial
    if polynomial is None or polynomial.degree != 1:
        return None
    constant, slope = polynomial.coefficients
    if slope > 0:
        raise UnusableBlockError(
            "negative-dead-time", "holds exp of +T*s, which looks into the future: write exp(-T*s) with T >= 0"
        )
    return DelayedQuotient(_computed(math.exp, constant), delay=-slope)


def _constant(value: DelayedQuotient) -> Fraction | None:
    return lowest_terms(value)[0].constant


def _constant_power(base: Fraction, exponent: Fraction) -> Fraction:
    """base^exponent for an exponent that is no whole number."""
    if not base and exponent < 0:
        raise UnusableBlockError(
            "zero-denominator", "raises 0 to a negative power: give that base a value other than 0"
        )
    if exponent.denominator == 2 and base:
        return (DelayedQuotient(_square_root(base)) ** exponent.numerator).gain
    if base < 0:
        raise UnusableBlockError(
            "not-real", "raises a negative number to a power that is no whole number: no real value"
        )
    return _computed(lambda x: x ** float(exponent), base)


def _square_root(x: Fraction) -> Fraction:
    """Exact for the square of a rational number, else the nearest double."""
    if x < 0:
        raise UnusableBlockError("not-real", "takes the square root of a negative number: no real value")
    root = Fraction(math.isqrt(x.numerator), math.isqrt(x.denominator))
    return root if root * root == x else _computed(math.sqrt, x)


def _computed(function: Callable[[float], float], argument: Fraction) -> Fraction:
    """function(argument) in double precision, held exactly; an overflow, or an underflow to 0, is refused."""
    try:
        value = function(float(argument))
    except OverflowError:
        value = math.inf
    if math.isinf(value) or (not value and argument):
        raise UnusableBlockError(
            "out-of-range", "has a constant beyond double precision (about 1e-308 to 1e308): change the units"
        )
    return Fraction(value)
