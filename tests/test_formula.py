"""Formulas: the grammar against Python's own parser, exact decimals against ``decimal``, and what is refused."""

from __future__ import annotations

import ast
import math
from decimal import Decimal
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from encircle.engine.decimals import NumberRefused, exact_decimal
from encircle.engine.expression import Call, Expression, Name, Negative, Number, Operation
from encircle.engine.formula import FUNCTIONS, MOST_OPERATIONS_DEEP, FormulaError, names_used, parse_formula, parts
from encircle.engine.formula_bounds import check_formula

SYMBOLS = {ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/", ast.Pow: "^"}


def as_python_reads(node: ast.expr) -> Expression | None:
    """Our tree of a Python expression; None where it holds something that formulas have not (unary plus, ...)."""
    match node:
        case ast.Constant(int(value) | float(value)):
            return Number(Fraction(value))
        case ast.Name(name):
            return Name(name)
        case ast.UnaryOp(ast.USub(), operand):
            inner = as_python_reads(operand)
            return inner and Negative(inner)
        case ast.Call(ast.Name(name), [argument], []) if name in FUNCTIONS:
            inner = as_python_reads(argument)
            return inner and Call(name, inner)  # type: ignore[arg-type]
        case ast.BinOp(left, operator, right) if type(operator) in SYMBOLS:
            first, second = as_python_reads(left), as_python_reads(right)
            return first and second and Operation(SYMBOLS[type(operator)], first, second)  # type: ignore[arg-type]
    return None


OPERATORS = st.sampled_from(["+", "-", "*", "/", "^"])
WORDS = ["1", "2", "0.5", "s", "pi", "kp", "exp", "tanh", "+", "-", "*", "/", "^", "(", ")", "(", ")", "s", "-"]


def attempt(text: str) -> Expression | FormulaError:
    """What becomes of a text: a tree or a refusal, and nothing else."""
    try:
        return parse_formula(text)
    except FormulaError as error:
        return error


def compare_with_python(text: str) -> None:
    try:
        expected = as_python_reads(ast.parse(text.replace("^", "**").strip(), mode="eval").body)
    except SyntaxError:
        expected = None
    if expected is not None and not any(name in FUNCTIONS for name in names_used(expected)):
        assert parse_formula(text) == expected
    else:
        with pytest.raises(FormulaError):
            parse_formula(text)


@settings(max_examples=200, deadline=None)
@given(st.lists(st.sampled_from(WORDS), max_size=12))
def test_what_is_no_expression_is_none_for_python_either(words: list[str]) -> None:
    """Reference: the parser of Python itself."""
    compare_with_python(" ".join(words))


OPERANDS = st.recursive(
    st.sampled_from(["1", "2", "0.5", "s", "pi", "kp"]),
    lambda inner: st.builds(
        "{}{}".format,
        st.sampled_from(["", "-", "--", "exp", "-tanh"]),
        st.builds("({} {} {} {} {})".format, inner, OPERATORS, inner, OPERATORS, inner),
    )
    | st.builds("{}^{}".format, inner, inner),
    max_leaves=6,
)


@settings(max_examples=200, deadline=None)
@given(st.lists(st.tuples(OPERATORS, OPERANDS), min_size=1, max_size=5))
def test_precedence_is_that_of_python(parts_of_text: list[tuple[str, str]]) -> None:
    """Reference: Python Language Reference, "Operator precedence": ** from the right, unary minus, * /, + -."""
    text = " ".join(f"{operator} {operand}" for operator, operand in parts_of_text).lstrip("+*/^ ")
    assert names_used(parse_formula(text)) is not None
    compare_with_python(text)


@pytest.mark.parametrize(
    ("text", "value"),
    [("-2^2", -4), ("2^3^2", 512), ("2^-1", Fraction(1, 2)), ("8/4/2", 1), ("8-4-2", 2), ("-2*3", -6), ("2*-3", -6)],
)
def test_powers_bind_from_the_right_and_before_minus(text: str, value: Fraction) -> None:
    assert check_formula(parse_formula(text), {}).value == value


@given(st.decimals(allow_nan=False, allow_infinity=False, min_value="-1e300", max_value="1e300", places=25))
def test_decimals_are_exact(value: Decimal) -> None:
    """Reference: the decimal module of the standard library."""
    assert exact_decimal(str(value)) == Fraction(value)


@given(st.floats(min_value=0.0, allow_infinity=False))
def test_every_double_survives(value: float) -> None:
    number = parse_formula(repr(value))
    assert isinstance(number, Number)
    assert float(number.value) == value


def test_the_limits_are_those_of_double_precision() -> None:
    """IEEE 754-2019 binary64: largest finite 1.797...e308, smallest positive 4.94e-324 (from memory)."""
    assert exact_decimal("1.7976931348623157e308") == Fraction(Decimal("1.7976931348623157e308"))
    assert exact_decimal("5e-324") > 0
    assert exact_decimal("0e999999999999") == exact_decimal("-0.000") == 0
    for text in ("1.8e308", "-1.8e308", "1e999999999", "2e-324", "1e-999999999", "inf", "-inf", "nan"):
        with pytest.raises(NumberRefused):
            exact_decimal(text)


@settings(max_examples=300, deadline=None)
@given(st.text(max_size=60) | st.text(alphabet="s(+-*/^).,1eE exptanh_\x1b\u202e", max_size=60))
def test_any_text_is_read_or_refused_in_one_line(text: str) -> None:
    found = attempt(text)
    if isinstance(found, FormulaError):
        assert found.message
        assert str(found).isprintable()
    else:
        assert text.strip()
        assert all(name.isascii() for name in names_used(found))


def test_positions_count_characters_from_one() -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula("1 + 2s")
    assert caught.value.position == 6
    assert "operator is missing between `2` and `s`" in caught.value.message


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "nothing is written"),
        ("  ", "nothing is written"),
        ("(s + 1", "never closed"),
        ("s + 1)", "closes nothing"),
        ("s +", "missing at the end"),
        ("()", "missing before `)`"),
        ("+s", "missing before `+`"),
        ("2**3", "`^`"),
        ("kp(s + 1)", "`kp` is no function; a product needs a `*`"),
        ("sqr(s)", "nearest known name is `sqrt`"),
        ("exp s", "argument in parentheses"),
        ("exp()", "missing before `)`"),
        ("s − 1", "U+2212"),
        ("1,5*s", "write `.`"),
        ("1e999*s", "too large for double precision"),
        ("1e-999*s", "too small for double precision"),
        ("0." + "3" * 5000, "has 5002 characters"),
        ("\x1b[2Js", "`\\x1b`"),
        ("s\u202e", "`\\u202e`"),
        ("__import__('os').system('true')", "cannot be used"),
        ("exp.__class__", "cannot be used"),
        ("s if s else s", "operator is missing"),
        ("lambda: s", "cannot be used"),
        ("[s]", "cannot be used"),
    ],
)
def test_what_is_no_formula_is_refused_by_name(text: str, said: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula(text)
    assert said in caught.value.message
    assert caught.value.message.isprintable()


@pytest.mark.parametrize(
    "text",
    [
        "(" * 100_000 + "s" + ")" * 100_000,
        "(" * 4_000 + "s" + ")" * 4_000,
        "-" * 9_000 + "s",
        "2^" * 4_000 + "s",
        "exp(" * 2_000 + "s" + ")" * 2_000,
        "s+" * 4_000 + "s",
        "s*" * 4_000 + "s",
        "1" * 100_000,
    ],
)
def test_huge_or_deep_formulas_are_refused(text: str) -> None:
    with pytest.raises(FormulaError):
        parse_formula(text)


def test_trees_can_be_walked_by_recursion() -> None:
    """The deepest tree that is accepted stays far from the interpreter's limit."""

    def depth(tree: Expression) -> int:
        return 1 + max((depth(part) for part in parts(tree)), default=0)

    accepted = parse_formula("s+" * MOST_OPERATIONS_DEEP + "s")
    assert depth(accepted) == MOST_OPERATIONS_DEEP + 1
    with pytest.raises(FormulaError, match="rest on each other"):
        parse_formula("s+" * (MOST_OPERATIONS_DEEP + 1) + "s")


def test_names_are_listed_once_from_left_to_right() -> None:
    assert names_used(parse_formula("kp + ki/s + kp*exp(-T*s)*pi")) == ("kp", "ki", "s", "T", "pi")


# ---- what a formula may not exceed -----------------------------------------------------------------------------------


def bound(text: str, **constants: str) -> str:
    """The code with which a formula is refused, or an empty text."""
    try:
        check_formula(parse_formula(text), {name: Fraction(value) for name, value in constants.items()})
    except FormulaError as error:
        return error.code
    return ""


@pytest.mark.parametrize("text", ["s^64", "s^-64", "(s+1)^(2^6)", "s^0.5", "s^n", "2^64", "s^sqrt(4)", "s^pi"])
def test_exponents_are_constants_up_to_64(text: str) -> None:
    assert bound(text, n="64") == ""


@pytest.mark.parametrize("text", ["s^65", "s^-65", "s^64.1", "2^65", "s^n", "9^9^9^9", "s^(9^9)", "s^1e300", "s^2^7"])
def test_larger_exponents_are_refused_by_name(text: str) -> None:
    assert bound(text, n="65") == "exponent-too-large"


@pytest.mark.parametrize("text", ["2^s", "s^s", "s^(1/(1+s))", "s^exp(s)"])
def test_an_exponent_may_not_depend_on_s(text: str) -> None:
    assert bound(text) == "exponent-not-constant"


@pytest.mark.parametrize("text", ["s/0", "1/(2-2)", "1/(0.1+0.2-0.3)", "0^-1", "s/sinh(0)", "s/(a-a)"])
def test_division_by_a_constant_zero_is_refused(text: str) -> None:
    """0.1 + 0.2 - 0.3 is exactly 0 in decimals, though not in double precision."""
    assert bound(text, a="1/3") == "division-by-zero"


def test_constants_are_compared_exactly() -> None:
    """1e16 + 1 - 1e16 is 1, which double precision would call 0."""
    assert bound("s/(1e16 + 1 - 1e16)") == ""


@pytest.mark.parametrize("text", ["exp(1e3)", "1e200*1e200*s", "1e200^2", "exp(-1000)", "1e-200/1e200", "cosh(1e9)"])
def test_constants_beyond_double_precision_are_refused(text: str) -> None:
    assert bound(text) == "number-range"


@pytest.mark.parametrize("text", ["sqrt(-2)*s", "(-8)^(1/3)", "sqrt(1-3)"])
def test_constants_that_are_not_real_are_refused(text: str) -> None:
    assert bound(text) == "not-real"


@pytest.mark.parametrize("text", ["((s+1)^64)^64", "(1/(s+1)^64)^64", "((s+1)^64*(s+2)^64)^64", "exp(-((s+1)^64)^64)"])
def test_towers_of_polynomials_are_refused(text: str) -> None:
    assert bound(text) == "order-too-high"


def test_towers_of_digits_are_refused() -> None:
    tower = "1.000000001"
    for _ in range(12):
        tower = f"({tower})^64"
    assert bound(tower) == "too-many-digits"


@given(st.integers(min_value=1, max_value=8), st.integers(min_value=0, max_value=8))
def test_the_order_is_bounded_from_above(top: int, bottom: int) -> None:
    extent = check_formula(parse_formula(f"(s+1)^{top}/(s+2)^{bottom} + 1/s"), {})
    assert extent.numerator >= max(top + 1, bottom)
    assert extent.denominator >= bottom + 1


@pytest.mark.parametrize("name", FUNCTIONS)
def test_functions_of_constants_are_constants(name: str) -> None:
    """Reference: the math module of the standard library."""
    value = check_formula(parse_formula(f"{name}(3/4)"), {}).value
    assert value == getattr(math, name)(0.75)
