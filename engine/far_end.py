"""L at infinite frequency: A ~ s^m (a_0 + sum a_i exp(-T_i s)), B ~ s^n (b_0 + sum b_i exp(-T_i s)) with L = B/A.

Where delayed terms of the leading power remain, L keeps turning and has no limit; its bounds follow from |exp(-T_i
s)| = 1. With one dead time, |p + q z| / |r + t z| on |z| = 1 (real p, q, r, t) is a monotone function of Re z, so its
extremes are at z = 1 and z = -1; with several, triangle inequalities give bounds on the safe side.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

Leads = Mapping[tuple[Fraction, Fraction], Fraction]
"""Exact leading coefficients by (order, delay)."""


@dataclass(frozen=True, slots=True)
class FarEnd:
    """``order`` of L in s; ``prompt`` = (a_0, b_0); ``delayed`` = ((a_i, b_i), ...), one pair for each dead time."""

    order: float
    prompt: tuple[Fraction, Fraction]
    delayed: tuple[tuple[Fraction, Fraction], ...]

    @property
    def value(self) -> float:
        """b_0/a_0."""
        a, b = self.prompt
        return _double(b / a) if a else np.inf

    @property
    def limit(self) -> float | None:
        """The finite real limit of L, if there is one."""
        return self.value if self.order == 0 and not self.delayed and self.prompt[0] else None

    def spread(self) -> float:
        """Bound of |L/(value s^order) - 1| in the limit: how far delayed terms of the leading power swing L."""
        a, b = (self._loose(i) / abs(self.prompt[i]) if self.prompt[i] else Fraction(1) for i in (0, 1))
        return float((a + b) / (1 - a)) if a < 1 and b < 1 else np.inf

    def reaches_negative_axis(self) -> bool:
        """Whether the delayed terms of the leading power can swing L across the negative real axis for ever."""
        if self.spread() == np.inf:
            return True
        swing = sum(np.arcsin(float(self._loose(i) / abs(self.prompt[i]))) for i in (0, 1))
        direction = np.angle(np.sign(self.value) * np.exp(0.5j * np.pi * self.order))
        return bool(np.pi - abs(direction) <= swing + 1e-9)

    def largest_size(self) -> float:
        """lim sup |L|, or a bound above it."""
        if self.order:
            return np.inf if self.order > 0 else 0.0
        (a, b), loose_a, loose_b = self.prompt, self._loose(0), self._loose(1)
        if len(self.delayed) == 1:
            return max(_ratio(abs(b + z * self.delayed[0][1]), abs(a + z * self.delayed[0][0])) for z in (1, -1))
        return _ratio(abs(b) + loose_b, abs(a) - loose_a)

    def least_distance(self) -> float:
        """lim inf |1 + L|, or a bound below it."""
        if self.order:
            return 1.0 if self.order < 0 else np.inf
        (a, b), loose_a = self.prompt, self._loose(0)
        if len(self.delayed) == 1:
            da, db = self.delayed[0]
            return min(_ratio(abs(a + b + z * (da + db)), abs(a + z * da)) for z in (1, -1))
        return _ratio(abs(a + b) - self._loose_sum(Fraction(1)), abs(a) + loose_a)

    def largest_complementary(self) -> float:
        """lim sup |L/(1 + L)|, or a bound above it."""
        if self.order:
            return 0.0 if self.order < 0 else 1.0
        (a, b), loose_b = self.prompt, self._loose(1)
        if len(self.delayed) == 1:
            da, db = self.delayed[0]
            return max(_ratio(abs(b + z * db), abs(a + b + z * (da + db))) for z in (1, -1))
        return _ratio(abs(b) + loose_b, abs(a + b) - self._loose_sum(Fraction(1)))

    def factor_limits(self) -> tuple[float | None, float | None]:
        """Factors on top of the gain between which |a_0 + g b_0| > sum |a_i + g b_i|; ``None``: no limit on that side.

        Outside them the loop is undecided at infinity. Without delayed terms there are no such limits.
        """
        if self.order or not self.delayed:
            return None, None
        zeros = {-a / b for a, b in (self.prompt, *self.delayed) if b and -a / b > 0}
        lower = _first_failure(self._excess, sorted((z for z in zeros if z < 1), reverse=True), Fraction(0))
        upper = _first_failure(self._excess, sorted(z for z in zeros if z > 1), None)
        return lower, upper

    def _excess(self, factor: Fraction) -> Fraction:
        a, b = self.prompt
        return abs(a + factor * b) - self._loose_sum(factor)

    def _loose(self, which: int) -> Fraction:
        return sum((abs(pair[which]) for pair in self.delayed), Fraction(0))

    def _loose_sum(self, factor: Fraction) -> Fraction:
        return sum((abs(a + factor * b) for a, b in self.delayed), Fraction(0))


def far_end(A: Leads, B: Leads) -> FarEnd:
    """The end of L = B/A from the exact leading coefficients of both sums."""
    order_A, order_B = max(order for order, _ in A), max(order for order, _ in B)
    top_A = {delay: value for (order, delay), value in A.items() if order == order_A}
    top_B = {delay: value for (order, delay), value in B.items() if order == order_B}
    zero = Fraction(0)
    prompt = top_A.get(zero, zero), top_B.get(zero, zero)
    delays = sorted({delay for delay in (*top_A, *top_B) if delay > 0})
    return FarEnd(
        float(order_B - order_A), prompt, tuple((top_A.get(d, zero), top_B.get(d, zero)) for d in delays)
    )


def _first_failure(
    excess: Callable[[Fraction], Fraction], breaks: list[Fraction], end: Fraction | None
) -> float | None:
    """Where the piecewise linear, at 1 positive ``excess`` first reaches 0, walking from 1 over its breaks."""
    at, value = Fraction(1), excess(Fraction(1))
    last = (at, value)
    tail = end if end is not None else (breaks[-1] if breaks else Fraction(1)) + 1
    for place in [*breaks, tail]:
        there = excess(place)
        if there <= 0:
            return float(at + (place - at) * value / (value - there))
        last, at, value = (at, value), place, there
    if end is None:
        slope = (value - last[1]) / (at - last[0])
        return float(at - value / slope) if slope < 0 else None
    return None


def _ratio(above: Fraction, below: Fraction) -> float:
    if below <= 0:
        return np.inf
    return _double(max(above, Fraction(0)) / below)


def _double(value: Fraction) -> float:
    """The nearest double, infinite beyond their range."""
    try:
        return float(value)
    except OverflowError:
        return np.inf if value > 0 else -np.inf
