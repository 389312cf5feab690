"""Formulas in s evaluated with 40 digits straight from their syntax trees, principal branches (mpmath)."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

import mpmath

from encircle.engine.declarations import FormulaBlock
from encircle.engine.expression import Call, Expression, Name, Negative, Number, Operation
from encircle.engine.formula import parse_formula

OPERATIONS = {"+": mpmath.fadd, "-": mpmath.fsub, "*": mpmath.fmul, "/": mpmath.fdiv, "^": mpmath.power}
FUNCTIONS = {
    "exp": mpmath.exp,
    "sqrt": mpmath.sqrt,
    "sinh": mpmath.sinh,
    "cosh": mpmath.cosh,
    "tanh": mpmath.tanh,
}


def formula_block(text: str, **parameters: str) -> FormulaBlock:
    """A block from its formula and the decimals of its parameters."""
    values = {name: Fraction(value) for name, value in parameters.items()}
    return FormulaBlock("block", parse_formula(text), text, values, 0, "")


def exact_value(block: FormulaBlock, s: mpmath.mpc) -> mpmath.mpc:
    """H(s) in the working precision of mpmath."""
    return _value(block.formula, block.parameters, s)


def _value(expression: Expression, parameters: Mapping[str, Fraction], s: mpmath.mpc) -> mpmath.mpc:
    match expression:
        case Number(value):
            return mpmath.mpf(value.numerator) / value.denominator
        case Name("s"):
            return s
        case Name("pi"):
            return +mpmath.pi
        case Name(name):
            return mpmath.mpf(parameters[name].numerator) / parameters[name].denominator
        case Negative(operand):
            return -_value(operand, parameters, s)
        case Call(function, argument):
            return FUNCTIONS[function](_value(argument, parameters, s))
        case Operation(operator, left, right):
            a, b = _value(left, parameters, s), _value(right, parameters, s)
            return OPERATIONS[operator](a, b)
