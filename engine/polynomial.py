"""Exact real polynomials in s: arithmetic over fractions, common divisors, and where the roots lie."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import lcm

import numpy as np

from encircle.engine import integer_polynomial
from encircle.engine.polynomial_roots import simple_roots
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.routh import right_half_plane_roots


@dataclass(frozen=True, slots=True)
class Polynomial:
    """sum of coefficients[k] * s^k; ascending powers, no trailing zeros, ``()`` is zero."""

    coefficients: tuple[Fraction, ...]

    def __post_init__(self) -> None:
        size = len(self.coefficients)
        while size and not self.coefficients[size - 1]:
            size -= 1
        object.__setattr__(self, "coefficients", tuple(self.coefficients[:size]))

    def __hash__(self) -> int:
        # Hashing a fraction is slow, and factors seldom share both their degree and their constant
        return hash((len(self.coefficients), self.coefficients[0].numerator if self.coefficients else 0))

    @classmethod
    def of(cls, *coefficients: int | Fraction) -> Polynomial:
        """Polynomial.of(1, 2, 3) is 1 + 2 s + 3 s^2."""
        return cls(tuple(map(Fraction, coefficients)))

    @classmethod
    def monomial(cls, power: int) -> Polynomial:
        """s^power."""
        return cls((*(Fraction(0),) * power, Fraction(1)))

    @property
    def degree(self) -> int:
        """-1 for the zero polynomial."""
        return len(self.coefficients) - 1

    @property
    def leading(self) -> Fraction:
        """The coefficient of the highest power, 0 for the zero polynomial."""
        return self.coefficients[-1] if self.coefficients else Fraction(0)

    def __bool__(self) -> bool:
        return bool(self.coefficients)

    def __add__(self, other: Polynomial) -> Polynomial:
        longer, shorter = self.coefficients, other.coefficients
        if len(longer) < len(shorter):
            longer, shorter = shorter, longer
        overlap = tuple(a + b for a, b in zip(longer, shorter, strict=False))
        return Polynomial(overlap + longer[len(shorter) :])

    def __neg__(self) -> Polynomial:
        return Polynomial(tuple(-c for c in self.coefficients))

    def __sub__(self, other: Polynomial) -> Polynomial:
        return self + -other

    def __mul__(self, other: Polynomial) -> Polynomial:
        if len(self.coefficients) == 1:
            return other.scaled_by(self.coefficients[0])
        if len(other.coefficients) == 1:
            return self.scaled_by(other.coefficients[0])
        a, a_denominator = _over_common_denominator(self)
        b, b_denominator = _over_common_denominator(other)
        denominator = a_denominator * b_denominator
        return Polynomial(tuple(Fraction(c, denominator) for c in integer_polynomial.multiply(a, b)))

    def __pow__(self, exponent: int) -> Polynomial:
        if exponent < 0:
            raise ValueError("a polynomial has no negative powers")
        power, square = Polynomial.of(1), self
        while exponent:
            if exponent & 1:
                power = power * square
            exponent >>= 1
            if exponent:
                square = square * square
        return power

    def __divmod__(self, other: Polynomial) -> tuple[Polynomial, Polynomial]:
        if not other:
            raise ZeroDivisionError("polynomial division by zero")
        remainder, lead, size = list(self.coefficients), other.leading, len(other.coefficients)
        quotient = [Fraction(0)] * max(len(remainder) - size + 1, 0)
        for low in range(len(quotient) - 1, -1, -1):
            quotient[low] = ratio = remainder.pop() / lead
            if ratio:
                for j, c in enumerate(other.coefficients[:-1], low):
                    remainder[j] -= ratio * c
        return Polynomial(tuple(quotient)), Polynomial(tuple(remainder))

    def scaled_by(self, factor: Fraction) -> Polynomial:
        """factor * p(s)."""
        return self if factor == 1 else Polynomial(tuple(factor * c for c in self.coefficients))

    def evaluate(self, s: Fraction) -> Fraction:
        """p(s), exactly."""
        value = Fraction(0)
        for c in reversed(self.coefficients):
            value = value * s + c
        return value

    def monic(self) -> Polynomial:
        """p over its leading coefficient; zero stays zero."""
        lead = self.leading
        return self if lead in (0, 1) else Polynomial(tuple(c / lead for c in self.coefficients))

    def derivative(self) -> Polynomial:
        """dp/ds."""
        return Polynomial(tuple(k * c for k, c in enumerate(self.coefficients))[1:])

    def reflected(self) -> Polynomial:
        """p(-s)."""
        return Polynomial(tuple(-c if k % 2 else c for k, c in enumerate(self.coefficients)))

    def order_at_zero(self) -> int:
        """The multiplicity of the root 0; 0 for the zero polynomial."""
        return next((k for k, c in enumerate(self.coefficients) if c), 0)

    def shifted_down(self, power: int) -> Polynomial:
        """p / s^power, for a power up to ``order_at_zero``."""
        return Polynomial(self.coefficients[power:])

    def exact_quotient(self, other: Polynomial) -> Polynomial | None:
        """p / other where other divides p, else None; both not zero."""
        if self.degree < other.degree:
            return None
        if not other.degree:
            return self.scaled_by(1 / other.leading)
        quotient = integer_polynomial.exact_quotient(self.integers(), other.integers())
        if quotient is None:
            return None
        factor = self.leading / other.leading / quotient[-1]
        return Polynomial(tuple(factor * c for c in quotient))

    def gcd(self, *others: Polynomial) -> Polynomial:
        """The monic greatest common divisor; zeros among the polynomials change nothing."""
        polynomials = [p for p in (self, *others) if p]
        if len(polynomials) < 2:
            return polynomials[0].monic() if polynomials else self
        degrees = {p.degree for p in polynomials}
        if degrees == {1}:
            return self.monic() if len({p.monic() for p in polynomials}) == 1 else Polynomial.of(1)
        if 0 in degrees:
            return Polynomial.of(1)
        common = integer_polynomial.greatest_common_divisor(*(p.integers() for p in polynomials))
        return Polynomial.of(*common).monic()

    def square_free_factors(self) -> tuple[tuple[Polynomial, int], ...]:
        """Monic square-free factors, pairwise coprime, with their multiplicities; constants have none.

        Source: D. Y. Y. Yun, "On square-free decomposition algorithms", SYMSAC 1976, quoted from memory.
        """
        if self.degree < 1:
            return ()
        monic, slope = self.monic(), self.monic().derivative()
        repeated = monic.gcd(slope)
        if not repeated.degree:
            return ((monic, 1),)
        factors, rest, multiplicity = [], _quotient(monic, repeated), 1
        slope = _quotient(slope, repeated) - rest.derivative()
        while rest.degree > 0:
            factor = rest.gcd(slope)
            if factor.degree > 0:
                factors.append((factor, multiplicity))
            rest = _quotient(rest, factor)
            slope = _quotient(slope, factor) - rest.derivative()
            multiplicity += 1
        return tuple(factors)

    def symmetric_factor(self) -> Polynomial:
        """The monic gcd of p(s) and p(-s), for p(0) != 0: an even polynomial that holds every root on the axis.

        Both polynomials share r exactly where p has r and -r, and that is a common root r^2 of the even and odd parts.
        """
        even, odd = Polynomial(self.coefficients[::2]), Polynomial(self.coefficients[1::2])
        common = even.gcd(odd)
        if common.degree < 1:
            return Polynomial.of(1)
        return _in_square(common)

    def count_right(self) -> tuple[int, int]:
        """(roots right of the imaginary axis, roots on it), with multiplicity, exactly; zero raises ValueError.

        Roots come in pairs r, -r in the symmetric factor. For a square-free factor f of it, which is even, f + f' has
        as many roots on the right as f and none on the axis: the Cauchy index of f'/f along the axis counts the roots
        of f there, and they move left.
        """
        if not self:
            raise ValueError("the zero polynomial has no count of roots")
        on_axis = self.order_at_zero()
        rest = self.shifted_down(on_axis)
        symmetric = rest.symmetric_factor()
        right = right_half_plane_roots(_quotient(rest, symmetric).integers())
        for factor, multiplicity in symmetric.square_free_factors():
            on_the_right = right_half_plane_roots((factor + factor.derivative()).integers())
            right += multiplicity * on_the_right
            on_axis += multiplicity * (factor.degree - 2 * on_the_right)
        return right, on_axis

    def roots(self) -> ComplexArray:
        """The roots (degree,) with repeats, each accurate to double precision, ascending |s|; read-only.

        Real roots and roots on the imaginary axis come out exactly there, the others as exact conjugate pairs. Raises
        ValueError for zero, OverflowError where a root lies beyond double precision, ArithmeticError where more roots
        than five or so lie so close together (some 1e-16 of their size) that the iteration does not part them.
        """
        if not self:
            raise ValueError("every number is a root of the zero polynomial")
        return _roots(self)

    def integers(self) -> list[int]:
        """The primitive integer polynomial with the same roots, leading coefficient positive; not for zero."""
        return integer_polynomial.primitive_part(_over_common_denominator(self)[0])

    def as_floats(self) -> FloatArray:
        """The coefficients rounded to double precision, ascending; OverflowError beyond its range."""
        return np.array([float(c) for c in self.coefficients])


def _over_common_denominator(p: Polynomial) -> tuple[list[int], int]:
    denominator = lcm(*(c.denominator for c in p.coefficients))
    return [c.numerator * (denominator // c.denominator) for c in p.coefficients], denominator


def _quotient(dividend: Polynomial, divisor: Polynomial) -> Polynomial:
    """Quotient where the divisor is known to divide."""
    quotient = dividend.exact_quotient(divisor) if dividend else dividend
    if quotient is None:
        raise ArithmeticError("inexact polynomial division")
    return quotient


@lru_cache(maxsize=4096)
def _roots(p: Polynomial) -> ComplexArray:
    at_zero = p.order_at_zero()
    found = [np.zeros(at_zero, complex)]
    for factor, multiplicity in p.shifted_down(at_zero).square_free_factors():
        symmetric = factor.symmetric_factor()
        parts = [simple_roots(_quotient(factor, symmetric).integers()), _roots_of_even(symmetric)]
        found.append(np.repeat(np.concatenate(parts), multiplicity))
    roots = np.concatenate(found) + 0  # no negative zeros
    roots = roots[np.lexsort((-roots.imag, roots.real, np.abs(roots)))]
    roots.setflags(write=False)
    return roots


def _in_square(p: Polynomial) -> Polynomial:
    """p(s^2)."""
    spread: list[Fraction] = [Fraction(0)] * (2 * p.degree + 1)
    spread[::2] = p.coefficients
    return Polynomial(tuple(spread))


def _roots_of_even(p: Polynomial) -> ComplexArray:
    """Roots of a square-free even polynomial: plus and minus the square roots of those in s^2."""
    squares = simple_roots(Polynomial(p.coefficients[::2]).integers())
    real = np.where(squares.real < 0, 1j, 1) * np.sqrt(np.abs(squares.real))
    roots = np.where(squares.imag == 0, real, np.sqrt(squares))
    return np.concatenate([roots, -roots])
