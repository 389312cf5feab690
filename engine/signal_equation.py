"""Signal equations: sums of terms, each a coefficient and blocks acting on one signal, input or parenthesised sum.

Grammar::

    sum    = [ "-" ] term { ("+" | "-") term }
    term   = factor { "*" factor | "/" (number | parameter) }
    factor = number | parameter | block | signal | input | "(" sum ")"

with exactly one signal, input or parenthesised sum in each term.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from encircle.engine.decimals import NumberRefused, exact_decimal, within_double
from encircle.engine.declarations import Term
from encircle.engine.formula import FUNCTIONS
from encircle.engine.text import nearest_known, quoted
from encircle.engine.tokens import FormulaError, Token, TokenStream, tokenise

_MOST_BITS = 4096
_MOST_FACTORS = 100


@dataclass(frozen=True, slots=True)
class Vocabulary:
    """What the names in an equation stand for; ``sources`` are signals and inputs."""

    sources: Collection[str]
    blocks: Collection[str]
    parameters: Mapping[str, Fraction]

    def knows(self, name: str) -> bool:
        """Whether the name is defined."""
        return name in self.sources or name in self.blocks or name in self.parameters


@dataclass(slots=True)
class _Product:
    """A term while it is read."""

    coefficient: Fraction
    blocks: list[str] = field(default_factory=list)
    source: str | tuple[Term, ...] | None = None


def parse_equation(text: str, vocabulary: Vocabulary) -> tuple[Term, ...]:
    """The terms of an equation, numbers and parameters folded into exact coefficients.

    Raises FormulaError for anything that is no sum of such terms: constant terms, products of signals, division by
    anything but a number or parameter, unknown names.
    """
    stream = TokenStream(text)
    terms = _sum(stream, vocabulary)
    stream.finish()
    return terms


def names_in(text: str) -> tuple[str, ...]:
    """Every name in an equation once, from left to right; raises FormulaError for characters that fit nowhere."""
    return tuple(dict.fromkeys(token.text for token in tokenise(text) if token.kind == "name"))


def _sum(stream: TokenStream, vocabulary: Vocabulary) -> tuple[Term, ...]:
    negative = stream.comes("-")
    if negative:
        stream.take()
    terms = [_term(stream, vocabulary, negative)]
    while stream.comes("+", "-"):
        terms.append(_term(stream, vocabulary, stream.take().text == "-"))
    return tuple(terms)


def _term(stream: TokenStream, vocabulary: Vocabulary, negative: bool) -> Term:
    start = stream.next
    product = _Product(Fraction(-1 if negative else 1))
    _multiply(product, stream, vocabulary)
    factors = 1
    while stream.comes("*", "/"):
        factors += 1
        if factors > _MOST_FACTORS:
            sentence = f"a term has more than {_MOST_FACTORS} factors; give a part of it a name"
            raise FormulaError(stream.next.position, sentence, "too-long")
        if stream.take().text == "*":
            _multiply(product, stream, vocabulary)
        else:
            _divide(product, stream, vocabulary)
    if stream.comes("^"):
        raise FormulaError(stream.next.position, "`^` can stand in the formula of a block only")
    if product.source is None:
        raise FormulaError(start.position, _without_signal(start, product), "constant-term")
    return Term(product.coefficient, tuple(product.blocks), product.source)


def _without_signal(start: Token, product: _Product) -> str:
    if product.blocks:
        return f"the term with the block {quoted(product.blocks[-1])} acts on no signal; write a signal behind it"
    return f"the term that starts with {quoted(start.text)} holds no signal; constant terms are not allowed"


def _multiply(product: _Product, stream: TokenStream, vocabulary: Vocabulary) -> None:
    token = stream.next
    if stream.comes("("):
        _set_source(product, token, _parenthesised(stream, vocabulary))
    elif token.kind == "number" or token.text in vocabulary.parameters:
        _scale(product, token, _constant(stream.take(), vocabulary))
    elif token.text in vocabulary.blocks:
        product.blocks.append(stream.take().text)
    elif token.text in vocabulary.sources:
        _set_source(product, token, stream.take().text)
    elif token.kind == "name":
        raise FormulaError(token.position, _unknown(token.text, vocabulary), "unknown-name")
    elif token.text == "-":
        raise FormulaError(token.position, "a minus stands in front of a whole term, not inside one")
    else:
        raise stream.unexpected()


def _set_source(product: _Product, token: Token, source: str | tuple[Term, ...]) -> None:
    if product.source is not None:
        sentence = "a term holds one signal, input or parenthesised sum, and this is a second one"
        raise FormulaError(token.position, sentence, "product-of-signals")
    product.source = source


def _parenthesised(stream: TokenStream, vocabulary: Vocabulary) -> tuple[Term, ...]:
    opening = stream.take()
    with stream.nested():
        terms = _sum(stream, vocabulary)
    stream.close(opening)
    return terms


def _divide(product: _Product, stream: TokenStream, vocabulary: Vocabulary) -> None:
    token = stream.next
    if token.kind != "number" and token.text not in vocabulary.parameters:
        raise _bad_divisor(stream, vocabulary)
    divisor = _constant(stream.take(), vocabulary)
    if divisor == 0:
        raise FormulaError(token.position, f"{quoted(token.text)} is 0 and divides nothing", "division-by-zero")
    _scale(product, token, 1 / divisor)


def _bad_divisor(stream: TokenStream, vocabulary: Vocabulary) -> FormulaError:
    token = stream.next
    rule = "only a number or a shared parameter may be divided by"
    if token.kind == "end":
        return stream.unexpected()
    if token.kind == "name" and not vocabulary.knows(token.text):
        return FormulaError(token.position, _unknown(token.text, vocabulary), "unknown-name")
    if token.text in vocabulary.blocks:
        return FormulaError(token.position, f"{quoted(token.text)} is a block; {rule}", "division-by-block")
    return FormulaError(token.position, f"{rule}, and {quoted(token.text)} is none", "division-by-signal")


def _constant(token: Token, vocabulary: Vocabulary) -> Fraction:
    if token.kind == "name":
        return vocabulary.parameters[token.text]
    try:
        return exact_decimal(token.text)
    except NumberRefused as refusal:
        raise FormulaError(token.position, f"the number {refusal}", "number-range") from None


def _scale(product: _Product, token: Token, factor: Fraction) -> None:
    coefficient = product.coefficient * factor
    if coefficient.numerator.bit_length() + coefficient.denominator.bit_length() > _MOST_BITS:
        raise FormulaError(token.position, "the coefficient of this term has too many digits", "too-many-digits")
    try:
        product.coefficient = within_double(coefficient)
    except NumberRefused as refusal:
        raise FormulaError(token.position, f"the coefficient of this term {refusal}", "number-range") from None


def _unknown(name: str, vocabulary: Vocabulary) -> str:
    if name == "s" or name == "pi" or name in FUNCTIONS:
        return f"{quoted(name)} can stand in the formula of a block only"
    known = [*vocabulary.sources, *vocabulary.blocks, *vocabulary.parameters]
    return f"{quoted(name)} is defined nowhere{nearest_known(name, known)}"
