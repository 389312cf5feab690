"""Formulas in s, read by recursive descent into syntax trees; nothing is ever evaluated as a program.

Grammar: ``^`` binds tightest and from the right, then unary minus, then ``* /``, then ``+ -``, both from the left::

    sum     = product { ("+" | "-") product }
    product = signed { ("*" | "/") signed }
    signed  = "-" signed | power
    power   = atom [ "^" signed ]
    atom    = number | name | function "(" sum ")" | "(" sum ")"
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Literal, cast, get_args

from encircle.engine.decimals import NumberRefused, exact_decimal
from encircle.engine.expression import Call, Expression, FunctionName, Name, Negative, Number, Operation
from encircle.engine.text import nearest_known, quoted
from encircle.engine.tokens import FormulaError, Token, TokenStream

__all__ = ["FUNCTIONS", "MOST_OPERATIONS_DEEP", "FormulaError", "names_used", "parse_formula", "parts"]

FUNCTIONS: tuple[str, ...] = get_args(FunctionName)
MOST_OPERATIONS_DEEP = 200


def parse_formula(text: str) -> Expression:
    """The syntax tree of a formula, unsimplified, its numbers exact.

    Raises FormulaError for anything outside the grammar, for numbers beyond double precision, and for texts that are
    too long or trees that are too deep to be walked by recursion (200 operations one inside the other).
    """
    stream = TokenStream(text)
    tree = _sum(stream)
    stream.finish()
    if _depth(tree) > MOST_OPERATIONS_DEEP:
        sentence = f"more than {MOST_OPERATIONS_DEEP} operations rest on each other; split the block in several"
        raise FormulaError(None, sentence, "too-deep")
    return tree


def parts(expression: Expression) -> tuple[Expression, ...]:
    """The operands of an expression."""
    match expression:
        case Negative(operand):
            return (operand,)
        case Operation(_, left, right):
            return (left, right)
        case Call(_, argument):
            return (argument,)
        case _:
            return ()


def names_used(expression: Expression) -> tuple[str, ...]:
    """Every name in the formula once, from left to right."""
    return tuple(dict.fromkeys(node.name for node in _nodes(expression) if isinstance(node, Name)))


def _nodes(expression: Expression) -> Iterator[Expression]:
    waiting = [expression]
    while waiting:
        node = waiting.pop()
        yield node
        waiting.extend(reversed(parts(node)))


def _depth(expression: Expression) -> int:
    deepest, waiting = 0, [(expression, 0)]
    while waiting:
        node, depth = waiting.pop()
        deepest = max(deepest, depth)
        waiting.extend((part, depth + 1) for part in parts(node))
    return deepest


def _sum(stream: TokenStream) -> Expression:
    left = _product(stream)
    while stream.comes("+", "-"):
        operator = cast(Literal["+", "-"], stream.take().text)
        left = Operation(operator, left, _product(stream))
    return left


def _product(stream: TokenStream) -> Expression:
    left = _signed(stream)
    while stream.comes("*", "/"):
        operator = cast(Literal["*", "/"], stream.take().text)
        left = Operation(operator, left, _signed(stream))
    return left


def _signed(stream: TokenStream) -> Expression:
    if not stream.comes("-"):
        return _power(stream)
    stream.take()
    with stream.nested():
        return Negative(_signed(stream))


def _power(stream: TokenStream) -> Expression:
    base = _atom(stream)
    if not stream.comes("^"):
        return base
    stream.take()
    with stream.nested():
        return Operation("^", base, _signed(stream))


def _atom(stream: TokenStream) -> Expression:
    token = stream.next
    if token.kind == "number":
        return _number(stream.take())
    if token.kind == "name":
        return _name_or_call(stream, stream.take())
    if stream.comes("("):
        return _parenthesised(stream)
    raise stream.unexpected()


def _number(token: Token) -> Number:
    try:
        return Number(exact_decimal(token.text))
    except NumberRefused as refusal:
        raise FormulaError(token.position, f"the number {refusal}", "number-range") from None


def _name_or_call(stream: TokenStream, token: Token) -> Expression:
    if token.text in FUNCTIONS:
        if not stream.comes("("):
            raise FormulaError(token.position, f"the function {quoted(token.text)} needs its argument in parentheses")
        return Call(cast(FunctionName, token.text), _parenthesised(stream))
    if stream.comes("("):
        near = nearest_known(token.text, FUNCTIONS)
        raise FormulaError(token.position, f"{quoted(token.text)} is no function{near or '; a product needs a `*`'}")
    return Name(token.text)


def _parenthesised(stream: TokenStream) -> Expression:
    opening = stream.take()
    with stream.nested():
        inner = _sum(stream)
    stream.close(opening)
    return inner
