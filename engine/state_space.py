"""State equations as polynomials: C (sI - A)^-1 B + D over det(sI - A), exactly, nothing cancelled."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import lcm

from encircle.engine.characteristic_polynomial import IntMatrix, characteristic_polynomials
from encircle.engine.delayed_quotient import check_size
from encircle.engine.integer_polynomial import multiply
from encircle.engine.polynomial import Polynomial

Vector = Sequence[Fraction]


def state_space_polynomials(
    A: Sequence[Vector], B: Vector, C: Vector, D: Fraction
) -> tuple[Polynomial, list[Polynomial]]:
    """The numerator, and monic polynomials whose product is det(sI - A): one for each strongly connected part of A.

    Raises UnusableBlockError where the entries of a large A differ so much in size that determinants grow out of hand.
    """
    scale = _common_denominator(*A)
    matrix = [_integers(row, scale) for row in A]
    check_size(sum(max(map(int.bit_length, row)) for row in matrix))  # a determinant may have as many bits
    parts = characteristic_polynomials(matrix) if matrix else []
    whole = [1]
    for part in parts:
        whole = multiply(whole, part)
    strictly_proper = _adjugate_form(matrix, scale, whole, B, C)
    return strictly_proper + _rescaled(whole, scale).scaled_by(D), [_rescaled(part, scale) for part in parts]


def _adjugate_form(matrix: IntMatrix, scale: int, characteristic: Sequence[int], B: Vector, C: Vector) -> Polynomial:
    """C adj(sI - A) B for A = matrix/scale.

    adj(xI - M) = sum_j x^j sum_(i>j) c_i M^(i-j-1) for the characteristic polynomial sum_i c_i x^i of M
    (F. R. Gantmacher, "The Theory of Matrices", ch. IV, quoted from memory).
    """
    size, unit = len(matrix), _common_denominator(B) * _common_denominator(C)
    markov = _markov_parameters(matrix, _integers(B, _common_denominator(B)), _integers(C, _common_denominator(C)))
    sums = (sum(map(int.__mul__, characteristic[j + 1 :], markov)) for j in range(size))
    return Polynomial(tuple(Fraction(total, unit * scale ** (size - j - 1)) for j, total in enumerate(sums)))


def _markov_parameters(matrix: IntMatrix, column: Sequence[int], row: Sequence[int]) -> list[int]:
    """row matrix^k column for k below the order."""
    sparse = [[(j, entry) for j, entry in enumerate(entries) if entry] for entries in matrix]
    state, parameters = column, []
    for _ in matrix:
        parameters.append(sum(map(int.__mul__, row, state)))
        state = [sum(entry * state[j] for j, entry in entries) for entries in sparse]
    return parameters


def _rescaled(monic: Sequence[int], scale: int) -> Polynomial:
    """p(scale * s) / scale^degree: from the integer matrix scale * A back to A."""
    degree = len(monic) - 1
    return Polynomial(tuple(Fraction(c, scale ** (degree - k)) for k, c in enumerate(monic)))


def _common_denominator(*rows: Vector) -> int:
    return lcm(*(entry.denominator for row in rows for entry in row))


def _integers(row: Vector, scale: int) -> list[int]:
    return [entry.numerator * (scale // entry.denominator) for entry in row]
