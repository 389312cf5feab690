"""Loop determinants on |s| >= R, Re s >= 0: the arc at infinity closed by one disc.

Every product of factors is c s^m exp(-T s) (1 + Disc(rho)) there. The terms of the highest order without dead time,
summed exactly, make the lead D_0 s^m; where |D_0| exceeds the sum of all the rest, the determinant has no zero on |s|
>= R and ends in a disc round D_0 s^m that excludes 0. Dead times enter as |exp(-T s)| <= 1, so delayed terms of the
same order must sum to less than |D_0|: the condition of strong stability of neutral systems (J. K. Hale, S. M.
Verduyn Lunel, IMA J. Math. Control Inf. 19 (2002) 5-23; cited from memory).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from enum import Enum
from fractions import Fraction
from typing import NamedTuple

import numpy as np

from encircle.engine.coprime_factors import Factor, Powers
from encircle.engine.encirclement import Ending
from encircle.engine.factor_models import FactorModel
from encircle.engine.memory import Memory
from encircle.engine.polynomial import Polynomial
from encircle.engine.result import FloatArray
from encircle.engine.rounding import UNIT
from encircle.engine.sections import sections

DOUBLINGS = 120
MOST_ANSWERS = 5_000  # endings kept, one for each setting of the factors
CLOSING = 0.1  # relative disc at the largest radius below which a product has a lead of its own
BEYOND = 1e300  # stands for the logarithm of infinity: finite, so that 0 times it is 0


class FarCause(Enum):
    """Why nothing is proved on the arc at infinity."""

    NEUTRAL = "delayed gain reaches 1"
    ILL_POSED = "lead vanishes"
    UNKNOWN = "unknown growth"


class FarProduct(NamedTuple):
    """One product of the sum: factors with exponents, dead time, exact constant without the factors at the cuts."""

    powers: Powers
    delay: Fraction
    coefficient: Fraction


@dataclass(frozen=True, slots=True, eq=False)
class _Asymptote:
    """lead s^order (1 + Disc(rho)) exp(-delay s), rho (radii,); for lead 0 the size is within rho |s|^order."""

    lead: Fraction
    order: Fraction
    rho: FloatArray
    delay: Fraction


class FarGrowth:
    """Relative discs of polynomials on |s| >= R for an array of radii, as logarithms: found once for a whole
    project.
    """

    def __init__(self, polynomials: Iterable[Polynomial], highest: float) -> None:
        self.radii: FloatArray = np.ldexp(highest, np.arange(DOUBLINGS))
        unique = list(dict.fromkeys(polynomials))
        self._place = {polynomial: i for i, polynomial in enumerate(unique)}
        found = [sections(polynomial) for polynomial in unique]
        if not found:
            self._up = self._down = np.empty((0, DOUBLINGS))
            return
        spread = _relative_spread(np.concatenate([each.rows for each in found]), self.radii)
        starts = np.cumsum([0, *(len(each.rows) for each in found[:-1])])
        delta = np.array([[each.delta] for each in found])
        with np.errstate(all="ignore"):
            self._up = np.add.reduceat(np.log1p(spread), starts) + np.log1p(delta)
            down = -np.add.reduceat(np.log1p(-np.minimum(spread, 1.0)), starts) - np.log1p(-delta)
            self._down = np.minimum(down, BEYOND)

    def of(self, products: Sequence[FarProduct]) -> FloatArray:
        """(products, radii): 1 + the relative disc of the polynomials in each product, rounded up."""
        powers = np.zeros((len(products), len(self._place)))
        for row, product in enumerate(products):
            for factor, power in product.powers.items():
                if isinstance(factor, Polynomial):
                    powers[row, self._place[factor]] = power
        logarithm = np.maximum(powers, 0.0) @ self._up + np.maximum(-powers, 0.0) @ self._down
        slack = 64.0 * UNIT * (1.0 + logarithm + np.abs(powers).sum(axis=1)[:, None])
        with np.errstate(over="ignore"):
            growth: FloatArray = np.exp(logarithm) * (1.0 + slack)
        return growth


class FarField:
    """A sum of products on |s| >= R, R = highest * 2^k; built once, asked with changing factors at the cuts."""

    def __init__(self, products: Sequence[FarProduct], models: Mapping[Factor, FactorModel], growth: FarGrowth) -> None:
        self.radii = growth.radii
        discs = growth.of(products)
        self._asymptotes = [
            _asymptote(product, models, self.radii, disc) for product, disc in zip(products, discs, strict=True)
        ]
        self._answers: Memory[tuple[Fraction, ...], Ending | FarCause] = Memory(MOST_ANSWERS)

    @property
    def leads(self) -> list[tuple[Fraction, Fraction]]:
        """Lead and order of each product; lead 0 where only a bound is known or the disc round it does not close."""
        return [(term.lead if term.rho[-1] < CLOSING else Fraction(0), term.order) for term in self._asymptotes]

    def ending(self, factors: Sequence[Fraction]) -> Ending | FarCause:
        """The ending of sum_i factors[i] * product_i on the smallest radius that serves, or why there is none."""
        address = tuple(factors)
        return self._answers.remember(address, lambda: self._find_ending(address))

    def _find_ending(self, factors: Sequence[Fraction]) -> Ending | FarCause:
        sums: dict[tuple[Fraction, Fraction], Fraction] = defaultdict(Fraction)
        for term, factor in zip(self._asymptotes, factors, strict=True):
            sums[term.order, term.delay] += term.lead * factor
        prompt = {order: total for (order, delay), total in sums.items() if delay == 0}
        orders = [order for order, total in prompt.items() if total != 0]
        if not orders:
            return FarCause.ILL_POSED
        top = max(orders)
        if any(term.order > top and term.lead != 0 and term.delay == 0 for term in self._asymptotes):
            return FarCause.ILL_POSED  # the highest powers cancel exactly
        delayed = [(order, abs(total)) for (order, delay), total in sums.items() if delay > 0 and total != 0]
        neutral = sum((size for order, size in delayed if order == top), Fraction(0)) / abs(prompt[top])
        if neutral >= 1 or any(order > top for order, _ in delayed):
            return FarCause.NEUTRAL
        rest = self._rest(factors, top, prompt[top]) + _float_upper(neutral)
        good = np.flatnonzero(rest < 0.9) if neutral < 0.8 else np.flatnonzero(rest < 1.0 - 1e-12)
        if not len(good):
            return FarCause.UNKNOWN
        return Ending(float(self.radii[good[0]]), 1.0 if prompt[top] > 0 else -1.0, float(top))

    def _rest(self, factors: Sequence[Fraction], top: Fraction, lead: Fraction) -> FloatArray:
        """All but the lead and the limits of delayed terms, relative to the lead, for each radius."""
        rest = np.zeros(len(self.radii))
        with np.errstate(all="ignore"):
            for term, factor in zip(self._asymptotes, factors, strict=True):
                size = _float_upper(abs((term.lead or 1) * factor / lead))
                fall = self.radii ** float(term.order - top)
                loose = term.rho if term.lead == 0 or term.order == top else 1.0 + term.rho
                if term.lead == 0 and term.order > top:
                    return np.full(len(self.radii), np.inf)
                rest += size * fall * loose
        return rest * (1.0 + 64.0 * UNIT * (len(factors) + 4))


def _asymptote(
    product: FarProduct, models: Mapping[Factor, FactorModel], radii: FloatArray, growth: FloatArray
) -> _Asymptote:
    """Join the other factors to the polynomials; relative discs multiply as 1 + rho."""
    lead, order = product.coefficient, Fraction(0)
    bound = np.ones(len(radii))
    only_bounded = False
    for factor, power in product.powers.items():
        if isinstance(factor, Polynomial):
            order += factor.degree * power
            continue
        far = models[factor].far(radii)
        order += far.order * power
        if far.lead == 0.0:
            only_bounded = True
            bound = bound * far.spread**power
        else:
            lead *= Fraction(far.lead) ** power
            growth = growth * (1.0 + far.spread / abs(far.lead)) ** power
    if only_bounded:
        size = _float_upper(abs(lead)) * growth * bound * (1.0 + 64.0 * UNIT)
        return _Asymptote(Fraction(0), order, size, product.delay)
    return _Asymptote(lead, order, (growth - 1.0) * (1.0 + 8.0 * UNIT) + 8.0 * UNIT, product.delay)


def _relative_spread(rows: FloatArray, radii: FloatArray) -> FloatArray:
    """(rows, radii): |q(s)/(lead s^n) - 1| <= this on |s| >= R for sections q."""
    a2, a1, a0 = np.abs(rows).T[:, :, None]
    second = a2 != 0.0
    lead = np.where(second, a2, np.where(a1 != 0.0, a1, a0))
    next_one = np.where(second, a1, np.where(a1 != 0.0, a0, 0.0))
    last = np.where(second, a0, 0.0)
    spread: FloatArray = (next_one + last / radii) / radii / lead * (1.0 + 8.0 * UNIT) + 2.0 * UNIT
    return spread


def _float_upper(value: Fraction) -> float:
    """A double not below ``value`` >= 0; inf where it is too large."""
    try:
        return float(value) * (1.0 + 4.0 * UNIT)
    except OverflowError:
        return float("inf")
