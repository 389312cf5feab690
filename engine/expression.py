"""Syntax trees of formulas in s: numbers, names, arithmetic, powers and function calls."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

FunctionName = Literal["exp", "sqrt", "sinh", "cosh", "tanh"]


@dataclass(frozen=True, slots=True)
class Number:
    """A decimal as written."""

    value: Fraction


@dataclass(frozen=True, slots=True)
class Name:
    """``s``, ``pi``, a parameter, or (in signal equations) a block, signal or input."""

    name: str


@dataclass(frozen=True, slots=True)
class Negative:
    """Unary minus."""

    operand: Expression


@dataclass(frozen=True, slots=True)
class Operation:
    """A binary operation; ``^`` binds tightest and from the right, then unary minus, then ``* /``, then ``+ -``."""

    operator: Literal["+", "-", "*", "/", "^"]
    left: Expression
    right: Expression


@dataclass(frozen=True, slots=True)
class Call:
    """A function of one argument."""

    function: FunctionName
    argument: Expression


Expression = Number | Name | Negative | Operation | Call
