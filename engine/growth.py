"""Growth of functions on |s| >= R, Re s >= 0: generalised power series in 1/s with a bound on the rest.

A ``Growth`` encloses, for each radius R of an array, a function on the outer half disc as

    sum_i c_i s^(p_i) + rest,   |rest| <= bound |s/R|^order,

with rational descending powers p_i and real coefficients c_i (intervals, exact where the formula is rational). The
terms are the same for every radius; only the bounds differ. An infinite bound means that nothing is known. Several
terms are kept, not just the leading one, because exp(-T sqrt(s(s + a))) is seen to stay below exp(-T a/2 + small) only
through the second term of the root. ``Exponential`` adds a factor exp(E), E a sum of positive powers, so that cosh(x
sqrt s)/cosh(sqrt s) is compared exponent with exponent before anything is bounded.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

import numpy as np

from encircle.engine.real_interval import RealInterval
from encircle.engine.result import FloatArray
from encircle.engine.rounding import UNIT
from encircle.engine.taylor_model import BoolArray

Term = tuple[Fraction, RealInterval]
Terms = tuple[Term, ...]

MOST_TERMS = 5
DECAY = Fraction(8)  # power of 1/|s| by which an exponential decay is represented
UP = 1.0 + 1e-10  # charged on every bound: covers hundreds of roundings and |s|^p with p rounded to a double
UNKNOWN_ORDER = Fraction(10**6)


class Leading(NamedTuple):
    """H = coefficient s^power (1 + Disc(0, spread)), ``spread`` one for each radius and below 1 where it is of use."""

    coefficient: float
    power: Fraction
    spread: FloatArray


class Bound(NamedTuple):
    """|H| <= size |s/R|^power."""

    size: FloatArray
    power: Fraction


@dataclass(frozen=True, slots=True)
class Growth:
    """sum c_i s^(p_i) + rest with |rest| <= bound |s/R|^order on |s| >= R, Re s >= 0; radius and bound (m,)."""

    radius: FloatArray
    terms: Terms
    bound: FloatArray
    order: Fraction

    @property
    def unknown(self) -> bool:
        """Whether nothing is known at any radius."""
        return not bool(np.isfinite(self.bound).any())

    @property
    def size(self) -> Bound:
        """A bound on the whole."""
        if not self.terms:
            return Bound(self.bound, self.order)
        total = sum((_size(term, self.radius) for term in self.terms), self.bound)
        return Bound(total * UP, max(self.terms[0][0], self.order))

    @property
    def leading(self) -> Leading | None:
        """The leading term with all the rest relative to it; None where no term dominates for large |s|."""
        if not self.terms or self.order > self.terms[0][0] or self.terms[0][1].sign == 0:
            return None
        power, coefficient = self.terms[0]
        scaled = coefficient.scaled()
        value = float(np.ldexp(scaled.value, scaled.exponent))
        if value == 0.0 or math.isinf(value):
            return None
        width = float(max(abs(Fraction(value) - coefficient.lower), abs(Fraction(value) - coefficient.upper)))
        rest = sum((_size(term, self.radius) for term in self.terms[1:]), self.bound)
        spread = (width + rest * _power(self.radius, -power)) / abs(value)
        return Leading(value, power, np.where(np.isnan(spread), np.inf, spread * UP))

    def __add__(self, other: Growth) -> Growth:
        terms: dict[Fraction, RealInterval] = dict(self.terms)
        for power, coefficient in other.terms:
            terms[power] = terms[power] + coefficient if power in terms else coefficient
        return _trimmed(self.radius, terms, self.bound + other.bound, max(self.order, other.order))

    def __mul__(self, other: Growth) -> Growth:
        terms: dict[Fraction, RealInterval] = {}
        for p, a in self.terms:
            for q, b in other.terms:
                terms[p + q] = terms[p + q] + a * b if p + q in terms else a * b
        first, second = self.size, other.size
        bound, order = np.zeros_like(self.bound), -UNKNOWN_ORDER
        if other.bound.any():
            bound, order = first.size * other.bound, first.power + other.order
        if self.bound.any():
            bound, order = bound + second.size * self.bound, max(order, second.power + self.order)
        return _trimmed(self.radius, terms, bound, order)

    def scaled(self, coefficient: RealInterval, power: Fraction = Fraction(0)) -> Growth:
        """coefficient s^power times this."""
        return self * single_term(self.radius, coefficient, power)

    def where(self, proved: BoolArray) -> Growth:
        """The same where ``proved`` holds, nothing known elsewhere."""
        return Growth(self.radius, self.terms, np.where(proved, self.bound, np.inf), self.order)

    def power(self, alpha: Fraction) -> Growth:
        """The power of the leading term times (1 + x)^alpha expanded in x; any branch is left to the caller.

        The remainder after K terms is a binomial series whose coefficients grow at most by q = max(1, (|alpha| + K)/(K
        + 1)): below |C(|alpha| + K - 1, K)| xi^K / (1 - q xi) for |x| <= xi.
        """
        if alpha >= 0 and alpha.denominator == 1:
            return self._integer_power(int(alpha))
        lead = self.terms[0] if self.terms else None
        if lead is None or lead[1].sign == 0 or self.order > lead[0] or (lead[1].sign < 0 and alpha.denominator != 1):
            return unknown(self.radius)
        x = Growth(self.radius, self.terms[1:], self.bound, self.order).scaled(lead[1].reciprocal(), -lead[0])
        scale = single_term(self.radius, lead[1].power(alpha), lead[0] * alpha)
        return scale * _binomial_series(x, alpha)

    def _integer_power(self, n: int) -> Growth:
        result, base = constant(self.radius, RealInterval.exact(1)), self
        while n:
            result = result * base if n & 1 else result
            n >>= 1
            base = base * base if n else base
        return result


@dataclass(frozen=True, slots=True)
class Exponential:
    """exp(sum of ``exponent``) times ``factor``; ``exponent`` holds positive powers of s only."""

    exponent: Terms
    factor: Growth

    def __add__(self, other: Exponential) -> Exponential:
        if self.exponent == other.exponent:
            return Exponential(self.exponent, self.factor + other.factor)
        radius = self.factor.radius
        beyond = _exponential_bound(radius, _difference(other.exponent, self.exponent))
        if not beyond.unknown:
            return Exponential(self.exponent, self.factor + beyond * other.factor)
        beyond = _exponential_bound(radius, _difference(self.exponent, other.exponent))
        return Exponential(other.exponent, other.factor + beyond * self.factor)

    def __mul__(self, other: Exponential) -> Exponential:
        return Exponential(_sum(self.exponent, other.exponent), self.factor * other.factor)

    def power(self, n: Fraction) -> Exponential:
        """An integer power; a fractional one only without exponent (the branch is left to the caller)."""
        if self.exponent and n.denominator != 1:
            return Exponential((), unknown(self.factor.radius))
        exponent = tuple((p, c * RealInterval.exact(n)) for p, c in self.exponent)
        return Exponential(exponent, self.factor.power(n))

    def bounded(self) -> Growth:
        """The whole as a growth: the exponential replaced by a bound of its size."""
        return _exponential_bound(self.factor.radius, self.exponent) * self.factor if self.exponent else self.factor


def plain(growth: Growth) -> Exponential:
    """A growth without exponential factor."""
    return Exponential((), growth)


def unknown(radius: FloatArray) -> Growth:
    """Nothing is known."""
    return Growth(radius, (), np.full(len(radius), np.inf), UNKNOWN_ORDER)


def constant(radius: FloatArray, value: RealInterval) -> Growth:
    """A constant."""
    return single_term(radius, value, Fraction(0))


def single_term(radius: FloatArray, coefficient: RealInterval, power: Fraction) -> Growth:
    """coefficient s^power."""
    terms = () if coefficient.is_zero else ((power, coefficient),)
    return Growth(radius, terms, np.zeros(len(radius)), -UNKNOWN_ORDER)


def exponential(x: Growth) -> Exponential:
    """exp(x): positive powers become the exponent, the rest a series; unknown where the rest of x may grow."""
    if x.bound.any() and x.order > 0:
        return Exponential((), unknown(x.radius))
    exponent = tuple(term for term in x.terms if term[0] > 0)
    value = next((c for p, c in x.terms if p == 0), RealInterval.exact(0))
    small = Growth(x.radius, tuple(term for term in x.terms if term[0] < 0), x.bound, x.order)
    try:
        scale = value.function("exp")
    except OverflowError:
        return Exponential((), unknown(x.radius))
    return Exponential(exponent, _exponential_series(small).scaled(scale))


def off_negative_axis(power: Fraction, factors: Iterable[tuple[Growth, Fraction]]) -> BoolArray:
    """Whether s^power prod x^n is proved to stay off the closed negative real axis on |s| >= R, Re s >= 0, for each R.

    The arguments of the factors are enclosed one by one and added; the sum must stay within -pi ... pi.
    """
    lowest, highest, loose, strict = power, power, np.zeros(1), False
    for x, n in factors:
        argument = _argument(x)
        ends = (n * argument.lowest, n * argument.highest)
        lowest, highest = lowest + min(ends), highest + max(ends)
        loose = loose + float(abs(n)) * argument.loose
        strict = strict or argument.strict
    largest = max(abs(lowest), abs(highest))
    if not loose.any() and largest == 2:
        return np.full(len(loose), strict)
    with np.errstate(invalid="ignore"):
        below: BoolArray = float(largest) * math.pi / 2.0 + loose * UP < math.pi / UP
    return below


class _Argument(NamedTuple):
    """lowest arg s - loose <= arg x <= highest arg s + loose for arg s >= 0; strict: never at both ends."""

    lowest: Fraction
    highest: Fraction
    loose: FloatArray
    strict: bool


def _argument(x: Growth) -> _Argument:
    """A sum of terms c s^p with c > 0 lies, for 0 <= arg s <= pi/2, in the cone between its lowest and highest power,
    convex while they differ by at most 2; it touches an edge of the cone only if it has no other direction. Otherwise
    |arg (1 + Disc(xi))| <= arcsin xi is added to the leading power's argument; NaN where nothing is proved.
    """
    powers = [p for p, _ in x.terms]
    if powers and not x.bound.any() and all(c.sign > 0 for _, c in x.terms):
        width = powers[0] - powers[-1]
        if width < 2 or (width == 2 and len(powers) > 2):
            return _Argument(powers[-1], powers[0], np.zeros(len(x.radius)), len(powers) > 1)
    lead = x.leading
    if lead is None or lead.coefficient < 0:
        return _Argument(Fraction(0), Fraction(0), np.full(len(x.radius), np.nan), False)
    loose = np.arcsin(np.where(lead.spread < 1.0, lead.spread, np.nan))
    return _Argument(lead.power, lead.power, loose, False)


def _binomial_series(x: Growth, alpha: Fraction) -> Growth:
    """(1 + x)^alpha for |x| <= xi < 1."""
    size = x.size
    xi = size.size
    if size.power > 0:
        return unknown(x.radius)
    kept = MOST_TERMS if x.terms else 1
    a = float(abs(alpha))
    growing = max(1.0, (a + kept) / (kept + 1.0))
    coefficient = math.prod((a + k) / (k + 1.0) for k in range(kept))
    room = 1.0 - growing * xi * UP
    tail = np.where(room > 0.0, coefficient * xi**kept / np.where(room > 0.0, room, 1.0) * UP, np.inf)
    binomials = [RealInterval.exact(_binomial(alpha, k)) for k in range(kept)]
    return _series(x, binomials, tail, size.power * kept)


def _exponential_series(x: Growth) -> Growth:
    """exp(x) for bounded x: after K terms the remainder is below xi^K/K! exp(xi)."""
    size = x.size
    if size.power > 0:
        return unknown(x.radius)
    kept = MOST_TERMS if x.terms else 1
    with np.errstate(over="ignore"):
        tail = size.size**kept / math.factorial(kept) * np.exp(size.size) * UP
    coefficients = [RealInterval.exact(Fraction(1, math.factorial(k))) for k in range(kept)]
    return _series(x, coefficients, tail, size.power * kept)


def _series(x: Growth, coefficients: list[RealInterval], tail: FloatArray, order: Fraction) -> Growth:
    """sum_k coefficients[k] x^k by Horner's rule, plus a disc of radius ``tail``."""
    total = constant(x.radius, coefficients[-1])
    for coefficient in reversed(coefficients[:-1]):
        total = total * x + constant(x.radius, coefficient)
    rest = Growth(x.radius, (), np.where(np.isnan(tail), np.inf, tail), order if tail.any() else -UNKNOWN_ORDER)
    return total + rest


def _binomial(alpha: Fraction, k: int) -> Fraction:
    value = Fraction(1)
    for i in range(k):
        value = value * (alpha - i) / (i + 1)
    return value


def _exponential_bound(radius: FloatArray, exponent: Terms) -> Growth:
    """A bound of |exp(sum c_i s^(p_i))|, p_i > 0 descending; unknown where it may grow.

    For 0 < p <= 1 and Re s >= 0, cos(p pi/2) |s|^p <= Re s^p <= |s|^p. A negative leading coefficient with p < 1 gives
    decay exp(-D |s|^p), the other terms counted at their largest; with p = 1 it only gives |exp| <= 1, and the next
    term decides.
    """
    if exponent and exponent[0][0] == 1 and exponent[0][1].upper <= 0:
        exponent = exponent[1:]
    if not exponent:
        return Growth(radius, (), np.full(len(radius), 1.0), Fraction(0))
    (power, coefficient), others = exponent[0], exponent[1:]
    if power >= 1 or coefficient.sign >= 0:
        return unknown(radius)
    p = float(power)
    strength = float(-coefficient.upper) * math.cos(p * math.pi / 2.0) / UP
    loss = sum((_size((q - power, c), radius) for q, c in others), np.zeros(len(radius)))
    return _decay(radius, np.maximum(strength - loss * UP, 0.0), p)


def _decay(radius: FloatArray, rate: FloatArray, p: float) -> Growth:
    """exp(-rate |s|^p) <= bound |s/R|^-DECAY: the maximum of exp(-rate x^p) (x/R)^DECAY lies at rate p x^p = DECAY."""
    decay = float(DECAY)
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        peak = np.maximum(rate * radius**p, decay / p)
        ratio = peak / (rate * radius**p)
        logarithm = decay / p * np.log(ratio) - peak
        slack = 16.0 * UNIT * (peak + decay / p * (1.0 + np.abs(np.log(ratio))))
        bound = np.exp(logarithm + slack) * UP + 1e-300
    return Growth(radius, (), np.where(np.isfinite(bound), bound, np.inf), -DECAY)


def _difference(first: Terms, second: Terms) -> Terms:
    return _sum(first, tuple((p, -c) for p, c in second))


def _sum(first: Terms, second: Terms) -> Terms:
    total = dict(first)
    for power, coefficient in second:
        total[power] = total[power] + coefficient if power in total else coefficient
    return _descending(total.items())


def _descending(terms: Iterable[Term]) -> Terms:
    return tuple(sorted(((p, c) for p, c in terms if not c.is_zero), key=lambda term: -term[0]))


def _trimmed(radius: FloatArray, terms: dict[Fraction, RealInterval], bound: FloatArray, order: Fraction) -> Growth:
    """Keep the leading terms above the rest's order; the others go into the rest."""
    descending = _descending(terms.items())
    if not bound.any():
        order = -UNKNOWN_ORDER
    kept = tuple(term for term in descending if term[0] > order or term is descending[0])[:MOST_TERMS]
    for term in descending[len(kept) :]:
        bound, order = bound + _size(term, radius), max(order, term[0])
    if bound.any():
        bound = np.where(np.isnan(bound), np.inf, bound * UP)
    return Growth(radius, kept, bound, order) if np.isfinite(bound).any() else unknown(radius)


def _size(term: Term, radius: FloatArray) -> FloatArray:
    """An upper bound of |c| R^p."""
    scaled = term[1].scaled()
    with np.errstate(over="ignore", under="ignore"):
        coefficient = float(np.ldexp((abs(scaled.value) + scaled.radius) * UP, scaled.exponent))
        return coefficient * _power(radius, term[0])


def _power(radius: FloatArray, power: Fraction) -> FloatArray:
    with np.errstate(over="ignore", under="ignore", divide="ignore"):
        value: FloatArray = radius ** float(power) * (UP + 1e-12 * float(abs(power))) + 1e-300
    return value
