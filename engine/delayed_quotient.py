"""Arithmetic of sums of polynomials times dead times over one polynomial, kept as factors, nothing cancelled."""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction

from encircle.engine.polynomial import Polynomial
from encircle.engine.polynomial_factors import ONE, Factors, as_factors, degree, expanded, over_common_base

MAXIMUM_ORDER = 100
MAXIMUM_EXPONENT = 64
MAXIMUM_BITS = 20_000  # of a numerator or denominator of one coefficient: some 6,000 digits
MAXIMUM_DEAD_TIMES = 200

DelayedSum = tuple[tuple[Fraction, Polynomial], ...]


class UnusableBlockError(ValueError):
    """What cannot be used: a code, the rest of a sentence that begins with the block's key, the key if known."""

    def __init__(self, code: str, predicate: str, key: str = "") -> None:
        super().__init__(predicate)
        self.code = code
        self.predicate = predicate
        self.key = key


@dataclass(frozen=True, slots=True)
class DelayedQuotient:
    """gain * prod(numerator)/prod(denominator) * exp(-delay*s) * sum_i n_i(s) exp(-T_i s).

    Factors are monic, of degree >= 1; common ones of numerator and denominator are kept. ``delayed_sum`` is () for 1,
    else two or more (T_i, n_i), T ascending from 0, n_0 monic, without a common factor. Gain 0 is the zero function.
    """

    gain: Fraction
    numerator: Factors = field(default_factory=Counter)
    denominator: Factors = field(default_factory=Counter)
    delay: Fraction = Fraction(0)
    delayed_sum: DelayedSum = ()

    def __post_init__(self) -> None:
        check_size(self.gain.numerator.bit_length(), self.gain.denominator.bit_length())
        if self.numerator or self.delayed_sum:
            check_order(degree(self.numerator) + max((n.degree for _, n in self.delayed_sum), default=0))
        if self.denominator:
            check_order(degree(self.denominator))

    @property
    def constant(self) -> Fraction | None:
        """The value of a constant, None for what depends on s."""
        depends = self.numerator or self.denominator or self.delay or self.delayed_sum
        return None if depends and self.gain else self.gain

    @property
    def polynomial(self) -> Polynomial | None:
        """The polynomial it is, None where it holds a dead time or a denominator."""
        if self.denominator or self.delay or self.delayed_sum:
            return None if self.gain else Polynomial(())
        return expanded(self.numerator).scaled_by(self.gain)

    def __neg__(self) -> DelayedQuotient:
        return replace(self, gain=-self.gain)

    def __mul__(self, other: DelayedQuotient) -> DelayedQuotient:
        gain = self.gain * other.gain
        for factor, rest in ((self, other), (other, self)):
            if factor.constant is not None:
                return replace(rest, gain=gain)
        numerator, denominator = self.numerator + other.numerator, self.denominator + other.denominator
        plain = DelayedQuotient(gain, numerator, denominator, self.delay + other.delay)
        sums = [x.delayed_sum for x in (self, other) if x.delayed_sum]
        if len(sums) < 2:
            return replace(plain, delayed_sum=sums[0]) if sums else plain
        terms = ((t + u, n * m) for t, n in sums[0] for u, m in sums[1])
        return plain * _collected(terms)

    def __truediv__(self, other: DelayedQuotient) -> DelayedQuotient:
        """Denominators inside both are cleared by their least common multiple, so what both share leaves no trace."""
        check_divisor(other)
        upper, lower = over_common_base(self.denominator, other.denominator)
        common = upper | lower
        return DelayedQuotient(
            self.gain / other.gain,
            self.numerator + (common - upper),
            other.numerator + (common - lower),
            self.delay,
            self.delayed_sum,
        )

    def __pow__(self, exponent: int) -> DelayedQuotient:
        if exponent < 0:
            return DelayedQuotient(Fraction(1)) / self**-exponent
        if not exponent:
            return DelayedQuotient(Fraction(1))
        bits = max(self.gain.numerator.bit_length(), self.gain.denominator.bit_length())
        check_size((bits - 1) * exponent)
        plain = DelayedQuotient(
            self.gain**exponent,
            Counter({factor: m * exponent for factor, m in self.numerator.items()}),
            Counter({factor: m * exponent for factor, m in self.denominator.items()}),
            self.delay * exponent,
        )
        base = DelayedQuotient(Fraction(1), delayed_sum=self.delayed_sum)
        for _ in range(exponent if self.delayed_sum else 0):
            plain = plain * base
        return plain

    def __add__(self, other: DelayedQuotient) -> DelayedQuotient:
        """Over the least common denominator; common factors of the numerators and common dead time stay outside."""
        if not self.gain or not other.gain:
            return self if self.gain else other
        if self.constant is not None and other.constant is not None:
            return DelayedQuotient(self.gain + other.gain)
        shared = self.numerator & other.numerator
        upper, lower = over_common_base(self.denominator, other.denominator)
        common = upper | lower
        delay = min(self.delay, other.delay)
        terms = [
            *_terms(self, self.numerator - shared, common - upper, delay),
            *_terms(other, other.numerator - shared, common - lower, delay),
        ]
        return DelayedQuotient(Fraction(1), shared, common, delay) * _collected(terms)


def from_polynomial(p: Polynomial) -> DelayedQuotient:
    """A polynomial as a quotient over 1."""
    return DelayedQuotient(p.leading, as_factors(p)) if p else DelayedQuotient(Fraction(0))


def lowest_terms(x: DelayedQuotient) -> tuple[DelayedQuotient, Factors]:
    """x without the factors common to numerator and denominator, and those factors; all of a zero's denominator."""
    if not x.gain:
        return DelayedQuotient(Fraction(0)), x.denominator
    if not x.numerator or not x.denominator:
        return x, Factors()
    numerator, denominator = over_common_base(x.numerator, x.denominator)
    common = numerator & denominator
    return replace(x, numerator=numerator - common, denominator=denominator - common), common


def check_divisor(divisor: DelayedQuotient) -> None:
    """Raises UnusableBlockError where one cannot divide: by zero, by a dead time, by a sum with dead time."""
    if not divisor.gain:
        raise UnusableBlockError("zero-denominator", "divides by zero: give that denominator a value other than 0")
    if divisor.delayed_sum:
        raise UnusableBlockError(
            "delay-in-denominator",
            "has dead time in a denominator: draw that feedback as signals, with the dead time in a block of its own",
        )
    if divisor.delay:
        raise UnusableBlockError(
            "negative-dead-time",
            "divides by a dead time, which looks into the future: multiply by exp(-T*s) with T >= 0",
        )


def _terms(
    x: DelayedQuotient, own: Mapping[Polynomial, int], missing: Mapping[Polynomial, int], delay: Fraction
) -> Iterable[tuple[Fraction, Polynomial]]:
    """The numerator of x without what is shared, times what its denominator lacks, term by term."""
    check_order(degree(own) + degree(missing))
    outside = (expanded(own) * expanded(missing)).scaled_by(x.gain)
    for time, polynomial in x.delayed_sum or ((Fraction(0), ONE),):
        yield x.delay - delay + time, outside * polynomial


def _collected(terms: Iterable[tuple[Fraction, Polynomial]]) -> DelayedQuotient:
    """sum_i n_i exp(-T_i s) with equal dead times added up and what all terms share put before the sum."""
    collected: dict[Fraction, Polynomial] = defaultdict(lambda: Polynomial(()))
    for time, polynomial in terms:
        collected[time] = collected[time] + polynomial
        _check_coefficients(collected[time])
        if len(collected) > MAXIMUM_DEAD_TIMES:
            raise UnusableBlockError(
                "too-many-dead-times", f"adds more than {MAXIMUM_DEAD_TIMES} dead times: write fewer terms"
            )
    kept = sorted((time, polynomial) for time, polynomial in collected.items() if polynomial)
    if not kept:
        return DelayedQuotient(Fraction(0))
    first = kept[0][0]
    if len(kept) == 1:
        return replace(from_polynomial(kept[0][1]), delay=first)
    common = Polynomial(()).gcd(*(polynomial for _, polynomial in kept))
    lead = kept[0][1].leading
    quotients = ((time - first, polynomial.exact_quotient(common)) for time, polynomial in kept)
    inside = tuple((time, q.scaled_by(1 / lead)) for time, q in quotients if q is not None)
    return DelayedQuotient(lead, as_factors(common), Counter(), first, inside)


def check_order(order: int, key: str = "") -> None:
    """Raises UnusableBlockError for an order above 100."""
    if order > MAXIMUM_ORDER:
        predicate = f"has order {order}, above {MAXIMUM_ORDER}: split it into several blocks of lower order"
        raise UnusableBlockError("order-above-100", predicate, key)


def _check_coefficients(p: Polynomial) -> None:
    check_order(p.degree)
    check_size(*(max(c.numerator.bit_length(), c.denominator.bit_length()) for c in p.coefficients))


def check_size(*bits: int) -> None:
    """Raises UnusableBlockError for numbers of more bits than exact arithmetic handles quickly."""
    if max(bits, default=0) > MAXIMUM_BITS:
        raise UnusableBlockError(
            "too-many-digits",
            "leads to numbers with thousands of digits: write constants with fewer digits and closer to 1",
        )
