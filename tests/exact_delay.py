"""Certified counts of the zeros of D(s) + sum_i N_i(s) exp(-T_i s) right of the axis, by ball arithmetic.

The argument principle on the half disc |s| <= R, Re s >= 0: its boundary is cut into pieces until the rectangle that
encloses the function on each piece excludes 0; a rectangle is convex, so the argument turns by the principal value
between the piece's ends (X. Ying, I. N. Katz, Numer. Math. 53, 1988). python-flint's balls are an arithmetic of their
own: nothing is shared with the engine.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from exact_roots import descending, precision, rational
from flint import acb, acb_poly, arb, fmpq, fmpq_poly

BITS = 96
DEEPEST = 60


@dataclass(frozen=True, slots=True)
class DelayTerm:
    """coefficients (descending powers of s) times exp(-delay*s)."""

    coefficients: fmpq_poly
    delay: Fraction

    @staticmethod
    def of(coefficients: Sequence[float], delay: float | Fraction = 0) -> DelayTerm:
        return DelayTerm(descending(coefficients), Fraction(delay))

    def value(self, s: acb) -> acb:
        return acb_poly(self.coefficients)(s) * (-s * rational(self.delay)).exp()

    def slope(self, s: acb) -> acb:
        inner = self.coefficients.derivative() - self.coefficients * rational(self.delay)
        return acb_poly(inner)(s) * (-s * rational(self.delay)).exp()


def radius_without_zeros(terms: Sequence[DelayTerm]) -> fmpq:
    """R with no zero on |s| >= R, Re s >= 0: there the undelayed leading power outweighs all else, |exp(-T s)| <= 1."""
    undelayed = sum((t.coefficients for t in terms if t.delay == 0), fmpq_poly([0]))
    others = [c for t in terms if t.delay > 0 for c in enumerate(t.coefficients.coeffs())]
    others += list(enumerate(undelayed.coeffs()[:-1]))
    degree, leading = undelayed.degree(), abs(undelayed.coeffs()[-1])
    assert all(power < degree for power, _ in others), "retarded characteristic functions only"
    R = fmpq(1)
    while leading <= 2 * sum((abs(c) / R ** (degree - power) for power, c in others), fmpq(0)):
        R *= 2
    return R


def zeros_right_of_axis(terms: Sequence[DelayTerm]) -> int | None:
    """The number of zeros with Re s > 0; None where a zero on the axis cannot be excluded."""
    with precision(BITS):
        R = radius_without_zeros(terms)
        down = turn(terms, lambda u: acb(0, R * (1 - u)), lambda u: acb(0, -R))
        arc = turn(terms, lambda u: R * direction(u), lambda u: R * direction(u) * acb(0, arb.pi() / 2))
        if down is None or arc is None:
            return None
        count = (down + arc) / arb.pi()
        whole = round(float(count.mid()))
        assert abs(count - whole) < 1e-6
        return whole


def direction(u: arb) -> acb:
    """exp(j pi u/2): from the real to the imaginary axis."""
    return (acb(0, 1) * u * arb.pi() / 2).exp()


def turn(terms, path, speed) -> arb | None:  # type: ignore[no-untyped-def]
    """Turn of the argument along path(u), 0 <= u <= 1, in rad; ``speed`` is d path/d u on a ball of u."""
    total = arb(0)
    pieces = [(fmpq(k, 16), fmpq(k + 1, 16), 0) for k in range(16)]
    while pieces:
        left, right, depth = pieces.pop()
        if depth > DEEPEST:
            return None
        if excludes_zero(terms, path, speed, left, right):
            start, end = (sum((t.value(path(arb(u))) for t in terms), acb(0)) for u in (left, right))
            total += (end / start).arg()
        else:
            middle = (left + right) / 2
            pieces += [(left, middle, depth + 1), (middle, right, depth + 1)]
    return total


def excludes_zero(terms, path, speed, left: fmpq, right: fmpq) -> bool:  # type: ignore[no-untyped-def]
    """True if the mean value form F(u0) + F'([u]) ([u] - u0) excludes 0 on the piece."""
    middle, half = arb((left + right) / 2), arb((right - left) / 2)
    span = arb(0, 1) * half
    u = middle + span
    centre = sum((t.value(path(middle)) for t in terms), acb(0))
    slope = sum((t.slope(path(u)) for t in terms), acb(0)) * speed(u)
    return not (centre + slope * span).contains(0)
