"""Exact polynomials as products of first- and second-order sections in double precision, with a bound on the
difference.

A section is a row (a2, a1, a0) of doubles. A polynomial p with sections q_1 ... q_m obeys, for every s, |p(s) - prod
q_i(s)| <= delta * prod S_i(|s|) with S_i(x) = |a2| x^2 + |a1| x + |a0|: the residual is computed exactly and compared
with prod S_i coefficient by coefficient. For one section delta is the rounding of its coefficients.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

import numpy as np

from encircle.engine.polynomial import Polynomial
from encircle.engine.result import FloatArray
from encircle.engine.rounding import UNIT


@dataclass(frozen=True, slots=True, eq=False)
class Sections:
    """``rows`` (m, 3) of (a2, a1, a0); ``delta`` bounds the difference, 0 where the evaluation's own slack covers
    it.
    """

    rows: FloatArray
    delta: float


@lru_cache(maxsize=4096)
def sections(polynomial: Polynomial) -> Sections:
    """Sections of a monic polynomial of degree >= 1.

    Degrees 1 and 2 are rounded coefficient by coefficient (one unit roundoff each, charged by the evaluation). Raises
    OverflowError where a coefficient lies outside double precision.
    """
    if polynomial.degree <= 2:
        ascending = [float(c) for c in polynomial.coefficients]
        ascending += [0.0] * (3 - len(ascending))
        return Sections(np.array([ascending[::-1]]), 0.0)
    rows = np.array(_rows_of_roots(polynomial.roots()))
    return Sections(rows, _difference_upper(polynomial, rows))


def _rows_of_roots(roots: np.ndarray) -> list[tuple[float, float, float]]:
    rows = []
    for root in roots:
        if root.imag == 0:
            rows.append((0.0, 1.0, -float(root.real)))
        elif root.imag > 0:
            rows.append((1.0, -2.0 * float(root.real), float(abs(root)) ** 2))
    return rows


def _difference_upper(polynomial: Polynomial, rows: FloatArray) -> float:
    """delta >= max_k |e_k|/sigma_k with p - prod q = sum e_k s^k (exact) and prod S_i = sum sigma_k x^k."""
    product = Polynomial((Fraction(1),))
    sizes = np.ones(1)
    for row in rows:
        ascending = row[::-1] if row[0] else row[:0:-1]
        product = product * Polynomial(tuple(Fraction(float(c)) for c in ascending))
        sizes = np.convolve(sizes, np.abs(ascending))
    residual = (polynomial - product).coefficients
    ratios = [
        abs(float(e / Fraction(float(size)))) if size > 0.0 else np.inf  # a size below all doubles proves nothing
        for e, size in zip(residual, sizes, strict=False)
        if e
    ]
    return max(ratios, default=0.0) * (1.0 + 4.0 * len(rows) * 8.0 * UNIT)
