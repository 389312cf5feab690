"""Products of monic polynomials kept as factors with multiplicities: common bases, cancellation, expansion."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping
from fractions import Fraction

from encircle.engine.integer_polynomial import multiply
from encircle.engine.polynomial import Polynomial

# Monic polynomials of degree >= 1 with their multiplicities. + multiplies two products; over one coprime base | is the
# least common multiple, & the greatest common divisor and - the quotient.
Factors = Counter[Polynomial]

S = Polynomial.of(0, 1)
ONE = Polynomial.of(1)


def degree(factors: Mapping[Polynomial, int]) -> int:
    """The degree of the product."""
    return sum(multiplicity * factor.degree for factor, multiplicity in factors.items())


def expanded(factors: Mapping[Polynomial, int]) -> Polynomial:
    """The product, multiplied out."""
    numerators, denominator = [1], 1
    for factor, multiplicity in factors.items():
        integers = factor.integers()
        for _ in range(multiplicity):
            numerators = multiply(numerators, integers)
        denominator *= integers[-1] ** multiplicity
    return ONE if len(numerators) == 1 else Polynomial(tuple(Fraction(c, denominator) for c in numerators))


def as_factors(p: Polynomial) -> Factors:
    """A non-zero polynomial over its leading coefficient, with its powers of s apart."""
    power = p.order_at_zero()
    rest = p.shifted_down(power).monic()
    return +Factors({S: power, rest: min(rest.degree, 1)})


def separated(factors: Factors) -> Factors:
    """The same product in square-free factors; roots r that come with -r, as all on the axis do, in factors apart."""
    result = Factors()
    for factor, multiplicity in factors.items():
        for part, repeated in _parts(factor):
            result[part] += multiplicity * repeated
    return result


def _parts(factor: Polynomial) -> Iterable[tuple[Polynomial, int]]:
    if factor.degree == 1:
        yield factor, 1
        return
    for part, multiplicity in factor.square_free_factors():
        symmetric = part.symmetric_factor()
        for piece in (symmetric, part.exact_quotient(symmetric)):
            if piece is not None and piece.degree > 0:
                yield piece, multiplicity


def over_common_base(*products: Factors) -> tuple[Factors, ...]:
    """The same products written in pairwise coprime factors.

    Source: E. Bach, J. Driscoll, J. Shallit, "Factor refinement", J. Algorithms 15 (1993), quoted from memory.
    """
    distinct = {factor for factors in products for factor in factors}
    if len(distinct) < 2:
        return products
    base = _coprime_base(distinct)
    if distinct.issuperset(base):
        return products
    return tuple(_rewritten(factors, base) for factors in products)


def _coprime_base(polynomials: Iterable[Polynomial]) -> list[Polynomial]:
    """Pairwise coprime monic polynomials of which every given one is a product of powers."""
    base: list[Polynomial] = []
    pending = list(polynomials)
    while pending:
        candidate = pending.pop()
        if candidate.degree < 1 or candidate in base:
            continue
        for i, member in enumerate(base):
            common = member.gcd(candidate)
            if common.degree > 0:
                base.pop(i)
                quotients = (p.exact_quotient(common) for p in (member, candidate))
                pending += [common, *(q.monic() for q in quotients if q is not None)]
                break
        else:
            base.append(candidate)
    return base


def _rewritten(factors: Factors, base: Iterable[Polynomial]) -> Factors:
    result = Factors()
    for factor, multiplicity in factors.items():
        rest = factor
        for member in base:
            while rest.degree > 0 and (quotient := rest.exact_quotient(member)) is not None:
                result[member] += multiplicity
                rest = quotient
    return result
