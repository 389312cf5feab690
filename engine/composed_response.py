"""Formulas that are irrational in s: enclosures on cells of the imaginary axis, at infinity, and plain values."""

from __future__ import annotations

from fractions import Fraction
from functools import cached_property

import numpy as np

from encircle.engine.declarations import FormulaBlock
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.factored_formula import (
    Factor,
    Function,
    PrincipalPower,
    Product,
    Sum,
    factored_formula,
    shifted_power,
    times_power_of_s,
)
from encircle.engine.formula_at_infinity import growth_of
from encircle.engine.formula_on_cells import QUARTER_TURN, Ray
from encircle.engine.growth import Growth
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import check_elementary_functions
from encircle.engine.taylor_model import BoolArray, IntArray, TaylorModel, exponents

Enclosure = tuple[ComplexArray, ComplexArray, ComplexArray, FloatArray, IntArray]

BESIDE_THE_CUT = 2.0**-32  # rad right of the imaginary axis, for plain values where the axis itself is a cut
SEARCH_GRID = np.logspace(-18.0, 18.0, 217)  # rad/s


class Composed:
    """A formula in s as enclosures. Proved under the assumption on elementary functions stated in ``rounding``.

    ``power_at_zero`` p: H = s^p times a part that is finite at s = 0, and not 0 there unless terms cancel in a way that
    the algebra does not see.
    """

    def __init__(self, block: FormulaBlock) -> None:
        """Compile. Raises ProjectError where a constant divides by zero, is not real, or leaves double precision."""
        check_elementary_functions()
        try:
            self.formula = factored_formula(block.formula, block.parameters)
        except (ValueError, ZeroDivisionError, OverflowError) as error:
            raise ProjectError(Problem("formula-constant", f"blocks.{block.name}.formula", f"{error}")) from None
        self.power_at_zero: Fraction = self.formula.order
        self.regular = times_power_of_s(self.formula, -self.power_at_zero)

    def on_cells(self, centre: FloatArray, half: FloatArray) -> Enclosure:
        """H on cells; see ``product_on_cells``."""
        return product_on_cells(self.formula, centre, half)

    def regular_on_cells(self, centre: FloatArray, half: FloatArray) -> Enclosure:
        """H/s^power_at_zero on cells; see ``product_on_cells``."""
        return product_on_cells(self.regular, centre, half)

    def at_points(self, omega: FloatArray) -> ComplexArray:
        """Plain values of H(j omega), principal branch; the limit from Re s > 0 where the axis is a cut."""
        return values_and_slopes(self.formula, omega)[0]

    def at_infinity(self, radius: float | FloatArray) -> Growth:
        """H on |s| >= R, Re s >= 0, for one R or an array of them (rad/s)."""
        return growth_of(self.formula, np.atleast_1d(np.asarray(radius, dtype=float)))

    @cached_property
    def features(self) -> tuple[float, ...]:
        """Frequencies near which H changes, rad/s, ascending: best effort, for start grids and plots."""
        with np.errstate(all="ignore"):
            return _features(self.formula)


def product_on_cells(product: Product, centre: FloatArray, half: FloatArray) -> Enclosure:
    """A factored formula on the cells s = j(centre + half t), |t| <= 1, centre + half t >= 0; (n,), rad/s.

    The centres and half widths are taken as they are, so that t means the same in every factor of a product; for cells
    that must overlap, widen the halves first with ``rounding.inflated_half``.

    Returns v, d, e (complex), r (real, inf where nothing is proved) and integer exponents, all (n,): the values lie in
    2^exponent (v + d t + e t^2 + Disc(0, r)).
    """
    with np.errstate(all="ignore"):
        return _finished(Ray(centre, half).full(product))


def power_on_cells(alpha: float, a: float, centre: FloatArray, half: FloatArray) -> Enclosure:
    """(s/(s + a))^alpha, a > 0, alpha > 0, on the cells; also on one that touches 0. See ``product_on_cells``."""
    exponent = Fraction(alpha)
    return product_on_cells(times_power_of_s(shifted_power(Fraction(a), -exponent), exponent), centre, half)


def _finished(model: TaylorModel) -> Enclosure:
    """Plain arrays; cells on which anything is not finite hold zeros and an infinite radius."""
    parts = (model.v, model.d, model.e)
    sound = np.isfinite(model.r)
    for part in parts:
        sound &= np.isfinite(part)
    v, d, e = (np.where(sound, part, 0.0) for part in parts)
    return v, d, e, np.where(sound, model.r, np.inf), exponents(model)


def values_and_slopes(product: Product, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
    """Plain values at s = j omega (rad/s), as ``Composed.at_points``, and derivatives by omega, both (n,) complex."""
    omega = np.asarray(omega, dtype=float)
    with np.errstate(all="ignore"):
        v, slope, unsure = _on_ray(product, omega, QUARTER_TURN)
        if unsure.any():
            beside = _on_ray(product, omega[unsure], QUARTER_TURN - BESIDE_THE_CUT)
            v[unsure], slope[unsure] = beside[0], beside[1]
    return v, slope


def _on_ray(product: Product, omega: FloatArray, angle: float) -> tuple[ComplexArray, ComplexArray, BoolArray]:
    """Value, derivative (the linear coefficient of narrow cells), and where the enclosure proves nothing."""
    ray = Ray(omega, 1e-9 * omega, angle)
    model = ray.full(product)
    size = np.ldexp(1.0, exponents(model))
    return model.v * size, model.d * size / ray.half, ~np.isfinite(model.r)


def _features(formula: Product) -> tuple[float, ...]:
    """Where the largest term of a sum changes, and where the argument of a function passes size 1."""
    ray = Ray(SEARCH_GRID, 0.0 * SEARCH_GRID)
    found: set[float] = set()
    for factor in _factors(formula):
        if isinstance(factor, Sum):
            terms = (ray.times_power(term, term.order) for term in factor.terms)
            found.update(_takeovers(np.array([_logarithm(term) for term in terms])))
        elif isinstance(factor, Function):
            size = _logarithm(ray.full(factor.argument))
            found.update(_takeovers(np.array([size, np.zeros_like(size)])))
    return tuple(sorted(found))


def _factors(formula: Product) -> list[Factor]:
    """Every factor in the formula once, at any depth."""
    seen: dict[Factor, None] = {}
    waiting = [factor for factor, _ in formula.factors]
    while waiting:
        factor = waiting.pop()
        if factor not in seen:
            seen[factor] = None
            inner = factor.terms if isinstance(factor, Sum) else (_inside(factor),)
            waiting += [part for product in inner for part, _ in product.factors]
    return list(seen)


def _inside(factor: PrincipalPower | Function) -> Product:
    return factor.base if isinstance(factor, PrincipalPower) else factor.argument


def _logarithm(model: TaylorModel) -> FloatArray:
    """log2 of the size of each cell, NaN where the enclosure does not tell it."""
    size = np.log2(np.abs(model.v)) + exponents(model)
    return np.where(model.r < 0.5 * np.abs(model.v), size, np.nan)


def _takeovers(sizes: FloatArray) -> list[float]:
    """Frequencies at which the largest row of log sizes (rows, grid) changes, by linear interpolation."""
    known: BoolArray = np.asarray(np.isfinite(sizes).all(axis=0))
    largest = np.argmax(sizes, axis=0)
    before = np.flatnonzero((largest[1:] != largest[:-1]) & known[1:] & known[:-1])
    first, second = largest[before], largest[before + 1]
    gap = sizes[first, before] - sizes[second, before]
    gap_after = sizes[second, before + 1] - sizes[first, before + 1]
    share = np.nan_to_num(gap / (gap + gap_after), nan=0.5)
    logarithm = np.log(SEARCH_GRID)
    places = np.exp(logarithm[before] + share * (logarithm[before + 1] - logarithm[before]))
    return [float(place) for place in places]
