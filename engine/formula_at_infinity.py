"""A factored formula on |s| >= R, Re s >= 0, for an array of R: growth, decay, or nothing known."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from encircle.engine.factored_formula import Analytic, Factor, Function, PrincipalPower, Product, Sum
from encircle.engine.growth import Exponential, Growth, exponential, off_negative_axis, plain, single_term, unknown
from encircle.engine.real_interval import RealInterval
from encircle.engine.result import FloatArray

HALF = Fraction(1, 2)


def growth_of(product: Product, radius: FloatArray) -> Growth:
    """A factored formula on |s| >= R, Re s >= 0, for each R of ``radius`` (m,), rad/s."""
    with np.errstate(all="ignore"):
        try:
            return FarField(radius).product(product).bounded()
        except OverflowError:  # a coefficient of the expansion leaves double precision
            return unknown(radius)


class FarField:
    """Evaluation on the outer half discs of radii R (m,); each factor once."""

    def __init__(self, radius: FloatArray) -> None:
        self._radius = radius
        self._factors: dict[Factor, Exponential] = {}

    def product(self, product: Product) -> Exponential:
        """The growth of a product."""
        result = plain(single_term(self._radius, product.coefficient, product.power))
        for factor, n in product.factors:
            result = result * self._factor(factor).power(n)
        return result

    def _factor(self, factor: Factor) -> Exponential:
        found = self._factors.get(factor)
        if found is None:
            match factor:
                case Sum():
                    found = self._sum(factor)
                case PrincipalPower():
                    found = plain(self._principal_power(factor))
                case Function():
                    found = self._function(factor)
            self._factors[factor] = found
        return found

    def _sum(self, factor: Sum) -> Exponential:
        first, *others = (self.product(term) for term in factor.terms)
        for term in others:
            first = first + term
        return first

    def _principal_power(self, factor: PrincipalPower) -> Growth:
        """Unknown at radii where the base is not proved to stay off the negative real axis."""
        base, alpha = factor.base, factor.exponent
        parts = [(self._factor(inner), m) for inner, m in base.factors]
        if base.coefficient.sign < 0 or any(part.exponent for part, _ in parts):
            return unknown(self._radius)
        growths = [(part.factor, m) for part, m in parts]
        result = single_term(self._radius, RealInterval.exact(1), base.power * alpha)
        for growth, m in growths:
            result = result * growth.power(m * alpha)
        sure = off_negative_axis(base.power, growths)
        return result.where(sure)

    def _function(self, factor: Function) -> Exponential:
        argument = self.product(factor.argument).bounded()
        if factor.name == "exp":
            return exponential(argument)
        one = plain(single_term(self._radius, RealInterval.exact(1), Fraction(0)))
        if factor.name == "exponential_quotient":
            return (exponential(argument) + _negative(one)) * plain(argument).power(Fraction(-1))
        return _even_function(factor.name, argument.power(HALF), one)


def _even_function(name: Analytic, x: Growth, one: Exponential) -> Exponential:
    """cosh x, sinh(x)/x or tanh(x)/x; they are even, so the branch of the root x is free.

    tanh x = (1 - q)/(1 + q) with q = exp(-2 x).
    """
    inverse = plain(x).power(Fraction(-1))
    if name == "tanhc_of_root":
        q = exponential(x.scaled(RealInterval.exact(-2)))
        return (one + _negative(q)) * (one + q).power(Fraction(-1)) * inverse
    half = plain(one.factor.scaled(RealInterval.exact(HALF)))
    rising, falling = exponential(x), exponential(x.scaled(RealInterval.exact(-1)))
    if name == "cosh_of_root":
        return (rising + falling) * half
    return (rising + _negative(falling)) * half * inverse


def _negative(x: Exponential) -> Exponential:
    return Exponential(x.exponent, x.factor.scaled(RealInterval.exact(-1)))
