"""Signal equations: terms, exact coefficients, and what is no sum of products with one signal each."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from encircle.engine.declarations import Term
from encircle.engine.formula import FormulaError
from encircle.engine.signal_equation import Vocabulary, names_in, parse_equation

WORDS = Vocabulary(
    sources={"a", "b", "reference"},
    blocks={"device", "filter"},
    parameters={"k": Fraction(41, 100), "n": Fraction(3), "zero": Fraction(0)},
)


def read(text: str) -> tuple[Term, ...]:
    return parse_equation(text, WORDS)


def attempt(text: str) -> tuple[Term, ...] | FormulaError:
    """What becomes of a text: terms or a refusal, and nothing else."""
    try:
        return read(text)
    except FormulaError as error:
        return error


def refusal(text: str) -> FormulaError:
    with pytest.raises(FormulaError) as caught:
        read(text)
    assert caught.value.message.isprintable()
    return caught.value


def signal(name: str, coefficient: Fraction | int = 1) -> Term:
    return Term(Fraction(coefficient), (), name)


def test_a_sum_of_terms_with_signs() -> None:
    assert read("a - b + reference") == (signal("a"), signal("b", -1), signal("reference"))


def test_a_leading_minus_is_allowed() -> None:
    assert read("-a + b") == (signal("a", -1), signal("b"))
    assert read("device*(-a)") == (Term(Fraction(1), ("device",), (signal("a", -1),)),)


def test_blocks_keep_the_order_in_which_they_are_written() -> None:
    assert read("device * filter * device * a") == (Term(Fraction(1), ("device", "filter", "device"), "a"),)
    assert read("filter*a*device") == (Term(Fraction(1), ("filter", "device"), "a"),)


def test_numbers_and_parameters_fold_into_an_exact_coefficient() -> None:
    assert read("2*k*a/n/0.1") == (signal("a", 2 * Fraction(41, 100) / 3 * 10),)
    assert read("1/3*device*a") == (Term(Fraction(1, 3), ("device",), "a"),)
    assert read("zero*a") == (signal("a", 0),)


def test_a_parenthesised_sum_is_one_source() -> None:
    inner = (signal("a"), Term(Fraction(-41, 100), (), "b"))
    assert read("device*(a - k*b)/2") == (Term(Fraction(1, 2), ("device",), inner),)
    assert read("((a))") == (Term(Fraction(1), (), (Term(Fraction(1), (), (signal("a"),)),)),)


@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("", "formula-syntax"),
        ("a +", "formula-syntax"),
        ("+a", "formula-syntax"),
        ("a b", "formula-syntax"),
        ("a - -b", "formula-syntax"),
        ("2*-a", "formula-syntax"),
        ("a^2", "formula-syntax"),
        ("device*(a + b", "formula-syntax"),
        ("a)", "formula-syntax"),
        ("a; b", "formula-syntax"),
        ("5", "constant-term"),
        ("a + 1", "constant-term"),
        ("a + k", "constant-term"),
        ("(1)*a", "constant-term"),
        ("device", "constant-term"),
        ("device*filter + a", "constant-term"),
        ("a*b", "product-of-signals"),
        ("a*(a + b)", "product-of-signals"),
        ("(a + b)*(a - b)", "product-of-signals"),
        ("a/device", "division-by-block"),
        ("a/b", "division-by-signal"),
        ("a/(2*k)", "division-by-signal"),
        ("a/zero", "division-by-zero"),
        ("a/0", "division-by-zero"),
        ("s*a", "unknown-name"),
        ("pi*a", "unknown-name"),
        ("exp(a)", "unknown-name"),
        ("devise*a", "unknown-name"),
        ("a/kk", "unknown-name"),
        ("1e999*a", "number-range"),
        ("1e300*1e300*a", "number-range"),
        ("1e-300*1e-300*a", "number-range"),
        ("k*" * 200 + "a", "too-long"),
        ("a+" * 6000 + "a", "too-long"),
        ("(" * 4000 + "a" + ")" * 4000, "too-deep"),
    ],
)
def test_what_is_no_such_sum_is_refused(text: str, code: str) -> None:
    assert refusal(text).code == code


def test_messages_say_where_and_what_to_do() -> None:
    assert "nearest known name is `device`" in refusal("devise*a").message
    assert "`s` can stand in the formula of a block only" in refusal("s*a").message
    assert refusal("a + device").position == 5
    assert "`device` acts on no signal" in refusal("a + device").message
    assert "only a number or a shared parameter" in refusal("a/device").message
    assert "constant terms are not allowed" in refusal("a + 1").message


def test_coefficients_with_endless_digits_are_refused() -> None:
    words = Vocabulary({"a"}, (), {"q": Fraction("1." + "3" * 390)})
    with pytest.raises(FormulaError) as caught:
        parse_equation("q*q*q*q*a", words)
    assert caught.value.code == "too-many-digits"


def test_names_are_found_once_from_left_to_right() -> None:
    assert names_in("device*(a - k*b) + device*a") == ("device", "a", "k", "b")


@settings(max_examples=300, deadline=None)
@given(st.text(max_size=40) | st.text(alphabet="abkn()+-*/ 12.device", max_size=40))
def test_any_text_is_read_or_refused(text: str) -> None:
    found = attempt(text)
    assert str(found).isprintable() if isinstance(found, FormulaError) else found


NUMBERS = st.integers(min_value=1, max_value=999)
TERMS = st.tuples(st.sampled_from("+-"), NUMBERS, NUMBERS, st.sampled_from(["a", "b"]))


@given(st.lists(TERMS, min_size=1, max_size=8))
def test_coefficients_are_exact(parts: list[tuple[str, int, int, str]]) -> None:
    """Reference: fractions of the standard library."""
    text = " ".join(f"{sign} {top}*{name}/{bottom}" for sign, top, bottom, name in parts).removeprefix("+")
    expected = tuple(signal(name, Fraction(int(f"{sign}{top}"), bottom)) for sign, top, bottom, name in parts)
    assert read(text) == expected
