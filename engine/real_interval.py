"""Real constants as intervals with rational ends: exact as long as the formula is rational, outward where it is not."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import NamedTuple

from encircle.engine.expression import FunctionName

LARGEST_BITS = 2048  # longer exact numbers are replaced by enclosures of KEPT_BITS
KEPT_BITS = 256
FUNCTION_WIDTH = Fraction(1, 2**49)  # relative; a library function errs by at most 4 units in the last place = 2^-50
LARGEST_ROOT = 64
LARGEST_BINARY_EXPONENT = 20000  # constants beyond 2^20000 are refused: nothing near double precision needs them


class ScaledConstant(NamedTuple):
    """The interval within 2^exponent [value - radius, value + radius], |value| in [1/4, 4]."""

    value: float
    radius: float
    exponent: int


@dataclass(frozen=True, slots=True)
class RealInterval:
    """[lower, upper]; exact where both are equal. Operations enclose the exact result.

    Raises ZeroDivisionError for a division by an interval that holds 0, ValueError for a power or root that is not
    real, OverflowError where a function's argument or value lies outside double precision.
    """

    lower: Fraction
    upper: Fraction

    @classmethod
    def exact(cls, value: Fraction | int) -> RealInterval:
        """The single number ``value``."""
        return cls(Fraction(value), Fraction(value))

    @classmethod
    def pi(cls) -> RealInterval:
        """The double below pi and the one above it."""
        return cls(Fraction(math.pi), Fraction(math.nextafter(math.pi, 4.0)))

    @property
    def is_exact(self) -> bool:
        return self.lower == self.upper

    @property
    def is_zero(self) -> bool:
        """Whether the interval is the single number 0."""
        return self.lower == 0 == self.upper

    @property
    def sign(self) -> int:
        """1 or -1 where all of the interval has that sign; 0 otherwise."""
        return 1 if self.lower > 0 else -1 if self.upper < 0 else 0

    @property
    def magnitude(self) -> Fraction:
        """The largest absolute value."""
        return max(abs(self.lower), abs(self.upper))

    def __add__(self, other: RealInterval) -> RealInterval:
        return _enclosed(self.lower + other.lower, self.upper + other.upper)

    def __neg__(self) -> RealInterval:
        return RealInterval(-self.upper, -self.lower)

    def __mul__(self, other: RealInterval) -> RealInterval:
        if self.is_exact and other.is_exact:
            product = self.lower * other.lower
            return _enclosed(product, product)
        ends = [a * b for a in (self.lower, self.upper) for b in (other.lower, other.upper)]
        return _enclosed(min(ends), max(ends))

    def reciprocal(self) -> RealInterval:
        """1/x."""
        if self.sign == 0:
            raise ZeroDivisionError("a constant of the formula divides by zero")
        return _enclosed(1 / self.upper, 1 / self.lower)

    def power(self, exponent: Fraction) -> RealInterval:
        """x^exponent; x must be positive (or 0 with a positive exponent) unless the exponent is an integer."""
        if exponent.denominator == 1:
            whole = self._integer_power(abs(exponent.numerator))
            return whole if exponent >= 0 else whole.reciprocal()
        if self.is_zero and exponent > 0:
            return self
        if self.sign <= 0:
            raise ValueError("a constant of the formula takes a root of a number that is not positive")
        rational = _exact_power(self.lower, exponent) if self.is_exact else None
        if rational is not None:
            return RealInterval.exact(rational)
        ends = (_power(self.lower, exponent), _power(self.upper, exponent))
        return _enclosed(min(ends[0][0], ends[1][0]), max(ends[0][1], ends[1][1]))

    def _integer_power(self, n: int) -> RealInterval:
        result, base = RealInterval.exact(1), self
        while n:
            if n & 1:
                result = result * base
            n >>= 1
            base = base * base if n else base
        return result

    def function(self, name: FunctionName) -> RealInterval:
        """exp, sinh, cosh, tanh or sqrt of the interval."""
        if name == "sqrt":
            return self.power(Fraction(1, 2))
        if self.is_zero:
            return RealInterval.exact(1 if name in ("exp", "cosh") else 0)
        if name == "cosh":  # even: monotone in the size of the argument
            least = Fraction(0) if self.sign == 0 else min(abs(self.lower), abs(self.upper))
            return _enclosed(max(Fraction(1), _value("cosh", least)[0]), _value("cosh", self.magnitude)[1])
        return _enclosed(_value(name, self.lower)[0], _value(name, self.upper)[1])

    def scaled(self) -> ScaledConstant:
        """The interval as a double with a radius, scaled by a power of two."""
        return _scaled(self)

    def __float__(self) -> float:
        """The double nearest to the middle. Raises OverflowError outside double precision."""
        return float((self.lower + self.upper) / 2)


@lru_cache(maxsize=4096)
def _scaled(interval: RealInterval) -> ScaledConstant:
    largest = interval.magnitude
    exponent = largest.numerator.bit_length() - largest.denominator.bit_length()
    scale = Fraction(2) ** -exponent
    centre = (interval.lower + interval.upper) / 2 * scale
    value = float(centre)
    radius = float(abs(centre - Fraction(value)) + (interval.upper - interval.lower) / 2 * scale)
    return ScaledConstant(value, radius * (1.0 + 1e-12), exponent)


def _enclosed(lower: Fraction, upper: Fraction) -> RealInterval:
    """The interval, with ends of moderate length."""
    return RealInterval(_shortened(lower, -1), _shortened(upper, 1))


def _shortened(value: Fraction, direction: int) -> Fraction:
    """The value, or one with KEPT_BITS bits below (direction -1) or above (1) it when it is very long."""
    above, below = value.numerator.bit_length(), value.denominator.bit_length()
    if above + below <= LARGEST_BITS:
        return value
    if abs(above - below) > LARGEST_BINARY_EXPONENT:
        raise OverflowError("a constant of the formula lies outside double precision")
    scale = Fraction(2) ** (KEPT_BITS - above + below)
    scaled = value * scale
    return Fraction(math.floor(scaled) if direction < 0 else math.ceil(scaled)) / scale


def _exact_power(base: Fraction, exponent: Fraction) -> Fraction | None:
    """base^exponent where it is rational and short, else None; ``base`` > 0."""
    degree = exponent.denominator
    long = max(base.numerator.bit_length(), base.denominator.bit_length()) > LARGEST_BITS // 2
    if degree > LARGEST_ROOT or abs(exponent.numerator) > LARGEST_ROOT or long:
        return None
    roots = [round(math.exp(math.log(part) / degree)) for part in (base.numerator, base.denominator)]
    if roots[0] ** degree != base.numerator or roots[1] ** degree != base.denominator:
        return None
    return Fraction(*roots) ** exponent.numerator


def _power(base: Fraction, exponent: Fraction) -> tuple[Fraction, Fraction]:
    """Lower and upper bound of base^exponent; argument and exponent are rounded to doubles first."""
    x, alpha = _double(base), float(exponent)
    value = _in_range(lambda: x**alpha)
    loss = Fraction(abs(alpha) * (1.0 + abs(math.log(x))) * 2.0**-50) + FUNCTION_WIDTH
    return value * (1 - loss), value * (1 + loss)


def _value(name: FunctionName, argument: Fraction) -> tuple[Fraction, Fraction]:
    """Lower and upper bound of an elementary function; rounding the argument to a double is charged too."""
    x = _double(argument)
    value = _in_range(lambda: _FUNCTIONS[name](x))
    loss = FUNCTION_WIDTH + Fraction((1.0 + abs(x)) * 2.0**-50)
    return value - abs(value) * loss, value + abs(value) * loss


_FUNCTIONS = {"exp": math.exp, "sinh": math.sinh, "cosh": math.cosh, "tanh": math.tanh}


def _double(value: Fraction) -> float:
    """The nearest double; below 1e-290 or beyond all doubles is refused."""
    return float(_in_range(lambda: float(value))) if value else 0.0


def _in_range(compute: Callable[[], float]) -> Fraction:
    """The value computed, which must keep full relative precision as a double."""
    try:
        value = compute()
    except OverflowError:
        value = math.inf
    if not 1e-290 < abs(value) < math.inf:
        raise OverflowError("a constant of the formula lies outside double precision")
    return Fraction(value)
