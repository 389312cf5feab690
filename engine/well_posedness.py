"""Whether feedback without dead time has a solution at infinite frequency, by exact degrees.

A determinant times all that stands below the line is a polynomial. If closing a loop lowers its degree, 1 + L tends to
0 at infinity; if feedback without a cut lowers it below the product of the denominators, the feedback has no solution
(F. M. Callier, C. A. Desoer, Multivariable Feedback Systems, Springer 1982, on well-posedness; cited from memory).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from math import prod

from encircle.engine.loop_determinant import Determinant, Term
from encircle.engine.polynomial import Polynomial


def loses_degree(determinant: Determinant, gains: Sequence[Fraction]) -> bool:
    """Whether closing the latest loop of a part (or its uncut feedback) lowers the degree of its determinant.

    With dead time the question is the one of neutral loops, and of factors that are no polynomials nothing exact is
    known: then the answer is False.
    """
    terms = determinant.far_terms
    if not terms:  # identically 0
        return True
    factors = dict.fromkeys(factor for term in terms for factor in term.powers)
    polynomials = [factor for factor in factors if isinstance(factor, Polynomial)]
    if len(polynomials) < len(factors) or any(term.delay > 0 for term in terms):
        return False
    lowest = {factor: min(0, *(term.powers.get(factor, 0) for term in terms)) for factor in polynomials}
    latest = max(determinant.closed, default=None)
    before = [term for term in terms if latest not in term.cuts] if latest is not None else terms[:1]
    return _sum(terms, lowest, gains).degree < _sum(before, lowest, gains).degree


def _sum(terms: Sequence[Term], lowest: Mapping[Polynomial, int], gains: Sequence[Fraction]) -> Polynomial:
    """The exact sum of the terms, with every factor's lowest exponent taken out."""
    total = Polynomial(())
    for term in terms:
        powers = (factor ** (term.powers.get(factor, 0) - floor) for factor, floor in lowest.items())
        expanded = prod(powers, start=Polynomial.of(1))
        total = total + expanded.scaled_by(term.coefficient * term.factor(gains))
    return total
