"""The open-loop response L = g B/A of one loop with the earlier loops closed, at any frequency and at the ends of the
axis.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from encircle.engine.block_poles import poles_of
from encircle.engine.closing_order import Stage
from encircle.engine.coprime_factors import IrrationalFactor, S
from encircle.engine.counting import Counter, Gains, term_weights
from encircle.engine.far_end import FarEnd, far_end
from encircle.engine.loop_determinant import Term
from encircle.engine.result import ComplexArray, FloatArray

NEAR_ZERO = 1e-9  # where a limit at 0 is taken numerically: this part of the lowest feature
DEEP_ZERO = (1e-32, 1e-16, 1e-9)  # the same for irrational formulas, whose limits are approached slowly


@dataclass(frozen=True, slots=True)
class NearEnd:
    """L at standstill: L ~ value * (j w)^order; ``value`` is the finite limit itself when ``order`` is 0."""

    value: float
    order: float

    @property
    def limit(self) -> float | None:
        """The finite real limit, if there is one."""
        return self.value if self.order == 0 else None


@dataclass(frozen=True, slots=True)
class AxisPoleOfLoop:
    """A point j omega where L is unbounded: |L| ~ |s - j omega|^-order."""

    omega: float
    order: int


class OpenLoop:
    """L of one stage for given factors at the cuts."""

    def __init__(self, counter: Counter, stage: Stage, gains: Gains) -> None:
        self.system, self.stage = counter.system, stage
        system = counter.system
        self._models = counter.models((stage.part,))
        self._leads_of_terms = counter.leads(stage.part)
        terms = system.determinants[stage.part].terms
        weights = term_weights(system.determinants[stage.part], gains)
        self._closing = np.array([stage.loop in term.cuts for term in terms])
        self._weights = np.array([np.where(self._closing, 0.0, weights), np.where(self._closing, weights, 0.0)])
        self.is_zero = not self._closing.any()
        self.delayed = any(term.delay > 0 for term in system.determinants[stage.part].far_terms)
        self.measured = bool(system.measured_in(stage.part))
        self.poles = self._axis_poles(terms)
        self.zero = self._at_zero(terms)
        self.infinity = self._at_infinity(gains)
        self.endless = self._keeps_turning()

    def at(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """L and dL/d omega at omega (n,) > 0 in rad/s."""
        values, slopes = self._models.at_points(omega)
        with np.errstate(all="ignore"):
            A, B = self._weights @ values
            dA, dB = self._weights @ slopes
            L = B / A
            if self.measured:
                L[L == 0.0] = np.nan  # above the last line, where the data leave nothing but a disc round 0
            return L, (dB - L * dA) / A

    def _axis_poles(self, terms: Sequence[Term]) -> tuple[AxisPoleOfLoop, ...]:
        """Factors that every term of A holds although the sum of all terms does not vanish there."""
        before = [term for term in terms if self.stage.loop not in term.cuts]
        shared = {
            factor: power
            for factor in before[0].powers
            if (power := min(term.powers.get(factor, 0) for term in before)) > 0
        }
        orders: dict[float, int] = defaultdict(int)
        for factor, power in shared.items():
            for omega in poles_of({factor: 1}).on_axis:
                orders[omega] += power
        return tuple(AxisPoleOfLoop(omega, order) for omega, order in sorted(orders.items()))

    def _at_zero(self, terms: Sequence[Term]) -> NearEnd:
        """Lowest powers of s in A and B; what stands with them gives the value."""
        if self.is_zero:
            return NearEnd(0.0, 0.0)
        if any(isinstance(factor, IrrationalFactor) for term in terms for factor in term.powers):
            return self._numerical_end()
        power = np.array([term.powers.get(S, 0) for term in terms])
        lowest_A, lowest_B = int(power[~self._closing].min()), int(power[self._closing].min())
        tiny = NEAR_ZERO * self.system.lowest
        values, _ = self._models.at_points(np.array([tiny]))
        scale = (1j * tiny) ** power
        with np.errstate(invalid="ignore"):  # s^60 at tiny s is no double: such a value is only asked for its power
            plain = (values[:, 0] / scale).real
        A = float(self._weights[0][power == lowest_A] @ plain[power == lowest_A])
        B = float(self._weights[1][power == lowest_B] @ plain[power == lowest_B])
        if A == 0.0:  # the lowest powers cancel: a pole of the open loop at 0 that belongs to no single block
            return NearEnd(np.nan, -1.0)
        return NearEnd(B / A, float(lowest_B - lowest_A))

    def _numerical_end(self) -> NearEnd:
        """By value and slope far below all features; powers of s are multiples of 1/64 for all practical formulas."""
        tiny = np.array(DEEP_ZERO) * self.system.lowest
        L, slope = self.at(tiny)
        with np.errstate(all="ignore"):
            orders = (tiny * slope / L).real
        usable = np.flatnonzero(np.isfinite(orders))
        if not len(usable):
            return NearEnd(np.nan, -1.0)
        i = usable[0]
        rounded = round(orders[i] * 64.0) / 64.0
        order = rounded if abs(orders[i] - rounded) < 1e-6 else float(orders[i])
        return NearEnd(float((L[i] / (1j * tiny[i]) ** order).real), order)

    def _at_infinity(self, gains: Gains) -> FarEnd:
        """Leading powers of A and B, summed exactly."""
        if self.is_zero:
            return FarEnd(0.0, (Fraction(1), Fraction(0)), ())
        return far_end(self._leads(gains, closing=False), self._leads(gains, closing=True))

    def _keeps_turning(self) -> bool:
        """Whether dead time makes L cross the negative real axis for ever.

        Delayed terms of its leading power swing it so far, or its asymptote is the negative real axis itself and
        delayed terms of lower order swing L about it.
        """
        only_bounded = self.infinity.prompt[1] == 0  # a decay faster than any power turns for ever as well
        return not self.is_zero and (self.delayed or only_bounded) and self.infinity.reaches_negative_axis()

    def _leads(self, gains: Gains, closing: bool) -> dict[tuple[Fraction, Fraction], Fraction]:
        """Exact leading coefficients by (order, delay); factors that are no polynomials count with their known lead."""
        sums: dict[tuple[Fraction, Fraction], Fraction] = defaultdict(Fraction)
        determinant = self.system.determinants[self.stage.part]
        for term, (lead, order) in zip(determinant.far_terms, self._leads_of_terms, strict=True):
            if (self.stage.loop in term.cuts) == closing:
                sums[order, term.delay] += lead * term.factor(gains)
        kept = {key: value for key, value in sums.items() if value}
        return kept or {(min(order for order, _ in sums), Fraction(0)): Fraction(0)}
