"""A factored formula on cells of a ray s = w exp(j angle), as a rule the imaginary axis.

Every factor is evaluated in Taylor models divided by its own power of s at 0, so that the only singular quantity, a
power of the frequency, is formed once and exactly: w^b on a cell that touches 0 lies between its chord and the chord
plus the largest gap.

Principal branches: for a power of a product the arguments of its factors are enclosed and added; the result is proved
where the sum stays within one turn and off the negative real axis. A cell on which it does not has an infinite radius.
"""

from __future__ import annotations

import cmath
import functools
import math
from collections.abc import Callable, Mapping
from fractions import Fraction

import numpy as np

from encircle.engine import hyperbolic
from encircle.engine.factored_formula import Analytic, Factor, Function, PrincipalPower, Product, Sum
from encircle.engine.real_interval import RealInterval
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import SLACK, TINY, UNIT, outward
from encircle.engine.taylor_model import (
    TaylorModel,
    add,
    affine,
    argument_range,
    choose,
    constant,
    exponential,
    integer_power,
    multiply,
    real_power,
    rotate,
    scale,
    unprove,
)

QUARTER_TURN = math.pi / 2.0
ONE = RealInterval.exact(1)
ON_CELLS: Mapping[Analytic, Callable[[TaylorModel], TaylorModel]] = {
    "exp": exponential,
    "exponential_quotient": hyperbolic.exponential_quotient,
    "cosh_of_root": hyperbolic.cosh_of_root,
    "sinhc_of_root": hyperbolic.sinhc_of_root,
    "tanhc_of_root": hyperbolic.tanhc_of_root,
}


class Ray:
    """Evaluation on cells s = w exp(j angle), w = centre + half t; each factor and each power of s once."""

    def __init__(self, centre: FloatArray, half: FloatArray, angle: float = QUARTER_TURN) -> None:
        self.centre = np.asarray(centre, dtype=float)
        self.half = np.asarray(half, dtype=float)
        self._angle = angle
        self._on_axis = angle == QUARTER_TURN
        self._frequency = affine(self.centre.astype(complex), self.half.astype(complex))
        self._touches_zero = self.centre - self.half <= 0.0
        with np.errstate(divide="ignore", invalid="ignore"):
            self._largest_logarithm = float(np.abs(np.log(self.centre)).max(initial=0.0))
        self._powers: dict[Fraction, TaylorModel] = {}
        self._factors: dict[Factor, TaylorModel] = {}

    def regular(self, product: Product) -> TaylorModel:
        """The product divided by s^(its order at 0)."""
        coefficient = product.coefficient.scaled()
        result, below = None, None
        for factor, n in product.factors:
            power = integer_power(self.regular_factor(factor), abs(int(n)))
            if n > 0:
                result = power if result is None else multiply(result, power)
            else:
                below = power if below is None else multiply(below, power)
        if below is not None:
            inverse = integer_power(below, -1)
            result = inverse if result is None else multiply(result, inverse)
        if result is None:
            return constant(coefficient.value, coefficient.radius, coefficient.exponent, len(self.centre))
        return result if product.coefficient == ONE else scale(result, *coefficient)

    def full(self, product: Product) -> TaylorModel:
        """The product itself."""
        return self.times_power(product, product.order)

    def times_power(self, product: Product, power: Fraction) -> TaylorModel:
        """s^power times the regular part of the product."""
        if power == 0:
            return self.regular(product)
        if product.factors:
            return multiply(self.regular(product), self.power(power))
        return scale(self.power(power), *product.coefficient.scaled())

    def regular_factor(self, factor: Factor) -> TaylorModel:
        """The factor divided by s^(its order at 0)."""
        model = self._factors.get(factor)
        if model is None:
            match factor:
                case Sum():
                    model = self._sum(factor)
                case PrincipalPower():
                    model = self._principal_power(factor)
                case Function():
                    model = ON_CELLS[factor.name](self.full(factor.argument))
            self._factors[factor] = model
        return model

    def _sum(self, factor: Sum) -> TaylorModel:
        models = (self.times_power(term, term.order - factor.order) for term in factor.terms)
        return functools.reduce(add, models)

    def _principal_power(self, factor: PrincipalPower) -> TaylorModel:
        """With base = +-s^P prod x^m: arg base = arg(+-1) + P angle + sum m arg x, reduced by whole turns.

        Each factor's power continues its principal value at the middle; the turns taken off the sum come back as a
        phase.
        """
        base, alpha = factor.base, float(factor.exponent)
        half_turn = math.pi if base.coefficient.sign < 0 else 0.0
        lower = upper = np.full(len(self.centre), float(base.order) * self._angle + half_turn)
        result = constant(1.0, 0.0, 0, len(self.centre))
        for inner, m in base.factors:
            model = self.regular_factor(inner)
            low, high = argument_range(model)
            low, high = (low, high) if m > 0 else (high, low)
            lower, upper = lower + float(m) * low, upper + float(m) * high
            power = real_power(model, float(m * factor.exponent))
            result = multiply(result, power) if len(base.factors) > 1 else power
        middle, slack = 0.5 * (lower + upper), SLACK * (1.0 + np.abs(lower) + np.abs(upper))
        turns = np.where(np.isfinite(middle), np.ceil(middle / (2.0 * math.pi) - 0.5), 0.0)
        proved = (lower - 2.0 * math.pi * turns - slack > -math.pi) & (upper - 2.0 * math.pi * turns + slack < math.pi)
        phase = alpha * (half_turn - 2.0 * math.pi * turns)
        if phase.any():
            result = rotate(result, np.exp(1j * phase), SLACK * (2.0 + np.abs(phase)))
        return unprove(result, ~proved)

    def power(self, beta: Fraction) -> TaylorModel:
        """s^beta = w^beta exp(j beta angle)."""
        model = self._powers.get(beta)
        if model is None:
            model = self._new_power(beta)
            if self._touches_zero.any() and beta != 1:
                model = choose(self._touches_zero, rotate(self._power_at_zero(float(beta)), self._turn(beta)), model)
            self._powers[beta] = model
        return model

    def _new_power(self, beta: Fraction) -> TaylorModel:
        """s^beta on cells that keep off 0."""
        alpha = float(beta)
        if beta == 1:
            return rotate(self._frequency, self._turn(beta))
        if self._largest_logarithm * abs(alpha) > 69.0:  # sizes beyond 2^100
            return rotate(real_power(self._frequency, alpha), self._turn(beta))
        rounded = 0.0 if beta == Fraction(alpha) else 128.0 * UNIT
        return _moderate_power(self.centre, self.half, alpha, self._turn(beta), rounded)

    def _turn(self, beta: Fraction) -> complex:
        """exp(j beta angle); exact for integers on the imaginary axis."""
        if not self._on_axis:
            return cmath.exp(1j * float(beta) * self._angle)
        quarters = round(beta)
        rest = float(beta - quarters)  # at most 1/2 in size, so that rounding stays below 8 u
        return (1.0 + 0j, 1j, -1.0 + 0j, -1j)[quarters % 4] * cmath.exp(1j * rest * QUARTER_TURN)

    def _power_at_zero(self, beta: float) -> TaylorModel:
        """w^beta for 0 <= w <= W = centre + half: x = w/W lies in [0, 1], and x^beta between x and x + gap.

        The gap x^beta - x has its one extremum at x = beta^(1/(1 - beta)) (beta^(1/(1-beta)) (1/beta - 1) there).
        """
        largest = (self.centre + self.half) * (1.0 + 2.0 * UNIT)
        zero: ComplexArray = np.zeros(len(largest), complex)
        if beta < 0.0:
            return TaylorModel(np.full(len(largest), complex(np.inf)), zero, zero, np.full(len(largest), np.inf))
        gap = beta ** (1.0 / (1.0 - beta)) * (1.0 / beta - 1.0) if beta != 1.0 else 0.0
        positive = np.where(largest > 0.0, largest, 1.0)
        radius = np.full(len(largest), abs(0.5 * gap) + 2.0 * SLACK)
        middle = (self.centre / positive + 0.5 * gap).astype(complex)
        shape = TaylorModel(middle, (self.half / positive).astype(complex), zero, radius)
        whole = real_power(affine(positive.astype(complex), zero), beta)
        return choose(largest > 0.0, multiply(shape, whole), TaylorModel(zero, zero, zero, zero.real + TINY))


def _moderate_power(centre: FloatArray, half: FloatArray, beta: float, turn: complex, rounded: float) -> TaylorModel:
    """turn w^beta, w = centre (1 + a t): ``real_power`` for a positive real quantity, in a third of the operations.

    |(1 + a t)^beta - second order| <= |beta (beta - 1)(beta - 2)|/6 a^3 max(1 -+ a)^(beta - 3). ``rounded`` is charged
    for an exponent that is no double.
    """
    a = half / centre
    second = 0.5 * beta * (beta - 1.0)
    third = abs(beta * (beta - 1.0) * (beta - 2.0)) / 6.0 * (1.0 + 4.0 * SLACK)
    bend = (1.0 - a - 4.0 * UNIT) ** (beta - 3.0) if beta < 3.0 else (1.0 + a) ** (beta - 3.0)
    tail = third * a * a * a * bend
    size = np.power(centre, beta)
    v = turn * size
    first_order, second_order = beta * a, second * a * a
    slack = 6.0 * SLACK * (1.0 + abs(beta)) + rounded
    r = outward(size * (tail * (1.0 + abs(beta) * SLACK) + slack * (1.0 + abs(first_order) + abs(second_order) + tail)))
    return TaylorModel(v, v * first_order, v * second_order, r)
