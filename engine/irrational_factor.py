"""A formula that is irrational in s as coprime factors.

Its power of s at 0 is taken out, the rest enclosed by composed models. H = s^p R with R finite and
not 0 at s = 0. For p >= 0, N = s^p R and M = 1. For p < 0, N = R (s + a)^p and
M = (s/(s + a))^-p, both continuous on the closed right half plane; whole powers of s stand as polynomial factors.
"""

from __future__ import annotations

from fractions import Fraction
from math import ceil, floor

import numpy as np

from encircle.engine.composed_response import Composed, product_on_cells, values_and_slopes
from encircle.engine.coprime_factors import CoprimeFactors, Factor, IrrationalFactor, S
from encircle.engine.coprime_factors import Product as FactorProduct
from encircle.engine.declarations import FormulaBlock
from encircle.engine.factor_models import FactorModel, FarFactor, RelativeModel, never_zero
from encircle.engine.factored_formula import Product, shifted_power, times_power_of_s
from encircle.engine.formula_at_infinity import growth_of
from encircle.engine.polynomial import Polynomial
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import UNIT


class IrrationalBlock:
    """A formula block that is no rational function with dead time; its unstable poles are stated, not found."""

    def __init__(self, block: FormulaBlock) -> None:
        """Compile the formula; raises ProjectError where a constant in it cannot be used."""
        self.name = block.name
        self.unstable_poles = block.unstable_poles or 0
        self._composed = Composed(block)
        self.features = self._composed.features

    def coprime_factors(self, scale: float) -> CoprimeFactors:
        """N and M as products; ``scale`` (rad/s) is the corner a of the factors that stand in for poles at 0."""
        p = self._composed.power_at_zero
        powers: dict[Factor, int] = {IrrationalFactor(self.name, "regular"): 1}
        below: dict[Factor, int] = {}
        if p >= 1:
            powers[S] = floor(p)
        if p < 0:
            powers[IrrationalFactor(self.name, "shifted")] = 1
            if p <= -1:
                below = {S: -ceil(p), Polynomial((Fraction(scale), Fraction(1))): ceil(p)}
            if p != ceil(p):
                below[IrrationalFactor(self.name, "root")] = 1
        numerator = (FactorProduct(Fraction(1), powers, Fraction(0)),)
        return CoprimeFactors(numerator, numerator, below)

    def models(self, scale: float) -> dict[Factor, FactorModel]:
        """A model of each factor that is no polynomial."""
        p, a = self._composed.power_at_zero, Fraction(scale)
        regular = times_power_of_s(self._composed.regular, p - floor(p)) if p >= 0 else self._composed.regular
        parts = {"regular": regular}
        if p < 0:
            rest = ceil(p) - p
            parts["shifted"] = shifted_power(a, p)
            parts["root"] = times_power_of_s(shifted_power(a, -rest), rest)
        return {IrrationalFactor(self.name, part): IrrationalModel(product) for part, product in parts.items()}


class IrrationalModel:
    """One irrational factor."""

    measured = False

    def __init__(self, product: Product) -> None:
        self._product = product

    def on_cells(self, w: FloatArray, h: FloatArray) -> RelativeModel:
        """The composed enclosure relative to its own value; infinite where nothing is proved."""
        v, d, e, r, exponent = product_on_cells(self._product, w, h)
        size = np.ldexp(1.0, exponent)
        v, d, e, r = v * size, d * size, e * size, r * size
        value = never_zero(v, np.where(np.isfinite(r), r + np.abs(d) + np.abs(e), 1.0) + 1e-200)
        eps = (r + np.abs(value - v)) / np.abs(value) + 4.0 * UNIT
        return value, d / value, e / value, eps

    def band(self, w: FloatArray, h: FloatArray) -> tuple[ComplexArray, FloatArray]:
        """No band: the factor is known."""
        return np.zeros(len(w), complex), np.zeros(len(w))

    def at_points(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """Values and derivatives on the principal branch."""
        return values_and_slopes(self._product, omega)

    def far(self, radii: FloatArray) -> FarFactor:
        """The leading power where one dominates, else a bound, from generalised series at infinity."""
        growth = growth_of(self._product, radii)
        leading = growth.leading
        if leading is not None:
            return FarFactor(leading.coefficient, leading.power, leading.spread * abs(leading.coefficient))
        bound = growth.size
        with np.errstate(all="ignore"):
            return FarFactor(0.0, bound.power, bound.size * radii ** -float(bound.power))
