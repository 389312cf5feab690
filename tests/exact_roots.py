"""Exact counts of polynomial roots right of and on the imaginary axis (python-flint; the oracle of the random tests).

Coefficients are exact rationals. Roots on the axis are found by exact algebra; the signs of all other real parts are
read from certified root enclosures whose precision is raised until each is decided. No floating-point number decides.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction

from flint import ctx, fmpq, fmpq_poly


@dataclass(frozen=True, slots=True)
class RootCount:
    """Roots strictly right of the axis and on it, with multiplicity."""

    right: int
    axis: int


def rational(value: Fraction | float | int) -> fmpq:
    exact = Fraction(value)
    return fmpq(exact.numerator, exact.denominator)


def polynomial(ascending: Sequence[Fraction | float | int]) -> fmpq_poly:
    """The polynomial with these exact coefficients, ascending powers of s."""
    return fmpq_poly([rational(c) for c in ascending])


def descending(coefficients: Sequence[Fraction | float | int]) -> fmpq_poly:
    return polynomial(list(coefficients)[::-1])


@contextmanager
def precision(bits: int) -> Iterator[None]:
    before = ctx.prec
    ctx.prec = bits
    try:
        yield
    finally:
        ctx.prec = before


def without_zero_roots(p: fmpq_poly) -> tuple[fmpq_poly, int]:
    """p(s)/s^k and k, the order of the root at 0."""
    coefficients = p.coeffs()
    order = next(i for i, c in enumerate(coefficients) if c != 0)
    return fmpq_poly(coefficients[order:]), order


def pairs_on_axis(p: fmpq_poly) -> int:
    """How many roots of p, p(0) != 0, lie on the axis.

    A root of p on the axis is one of p(-s) too: it is a root of their greatest common divisor, an even polynomial
    h(s^2), and belongs to a negative real root of h.
    """
    mirrored = fmpq_poly([c if i % 2 == 0 else -c for i, c in enumerate(p.coeffs())])
    common = p.gcd(mirrored)
    if common.degree() < 1:
        return 0
    in_square = fmpq_poly(common.coeffs()[::2])
    return sum(2 * multiplicity for root, multiplicity in in_square.complex_roots() if is_negative_real(root))


def is_negative_real(root: object) -> bool:
    """True for a negative real root; flint returns real roots with an imaginary part of exactly 0."""
    return bool(root.imag == 0 and root.real < 0)  # type: ignore[attr-defined]


def count_roots(p: fmpq_poly) -> RootCount:
    """Roots of p strictly right of the axis and on it."""
    reduced, at_zero = without_zero_roots(p)
    on_axis = pairs_on_axis(reduced)
    for bits in (64, 128, 256, 512, 1024, 2048):
        with precision(bits):
            roots = reduced.complex_roots()
        right = sum(multiplicity for root, multiplicity in roots if root.real > 0)
        left = sum(multiplicity for root, multiplicity in roots if root.real < 0)
        if right + left + on_axis == reduced.degree():
            return RootCount(right, on_axis + at_zero)
    raise ArithmeticError("the sign of a real part stayed open at 2048 bits")


def determinant(rows: list[list[fmpq_poly]]) -> fmpq_poly:
    """Determinant of a matrix of polynomials, by fraction-free elimination (E. H. Bareiss, Math. Comp. 22, 1968)."""
    matrix = [list(row) for row in rows]
    size, sign, divisor = len(matrix), 1, polynomial([1])
    for k in range(size - 1):
        pivot = next((i for i in range(k, size) if not matrix[i][k].is_zero()), None)
        if pivot is None:
            return polynomial([])
        if pivot != k:
            matrix[k], matrix[pivot], sign = matrix[pivot], matrix[k], -sign
        for i in range(k + 1, size):
            for j in range(k + 1, size):
                matrix[i][j] = (matrix[i][j] * matrix[k][k] - matrix[i][k] * matrix[k][j]) // divisor
        divisor = matrix[k][k]
    return matrix[-1][-1] * sign if size else polynomial([1])
