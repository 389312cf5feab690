"""Second-order Taylor models of many products of factors at once, on cells of the imaginary axis.

On a cell s = j(w + h t), |t| <= 1, each factor is q = v (1 + a t + b t^2 + eps) with |eps| bounded, and a product of
factors with exponents +-1 costs only reductions over its factors:

    V = prod v^+-1,   A = sum +-a,   B = sum +-(b - a^2/2),   d = V A,   e = V (B + A^2/2),
    majorant X = prod_num (1 + |a| + |b| + eps) / prod_den (1 - |a| - |b| - eps),
    r = |V| (X - 1 - E1 - E2) + rounding,   with E1, E2 the first two coefficients of the majorant.

Coefficientwise majorants make the tail rigorous (K. Makino, M. Berz, "Taylor models and other validated functional
inclusion methods", Int. J. Pure Appl. Math. 4 (2003) 379-456). A dead time contributes exp(-j T (w + h t)) exactly: a =
-j T h and majorant exp(T h); where T h is large it is replaced by the unit disc. The result encloses each product in
V + d t + e t^2 + Disc(0, r); r = inf or NaN means that nothing is proved on that cell.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple, TypeVar

import numpy as np
from numpy.typing import NDArray

from encircle.engine.coprime_factors import Factor, Powers
from encircle.engine.factor_models import FactorModel
from encircle.engine.grids import distinct
from encircle.engine.measured_factor import MeasuredModel
from encircle.engine.polynomial import Polynomial
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import SLACK, TINY, UNIT, inflated_half
from encircle.engine.sections import Sections, sections

LARGEST_EXPONENT = 1000.0  # binary exponent up to which a partial product surely stays within the doubles
LARGEST_DELAY_TURN = 1.5  # rad per half cell, beyond which a dead time is replaced by the unit disc
ONE = Polynomial((Fraction(1),))  # stands in a product without factors
REMAINDER_SCALE = 1.0  # tests put 0.5 here and must then see containment fail


NumericArray = TypeVar("NumericArray", FloatArray, ComplexArray)


@dataclass(frozen=True, slots=True)
class Models:
    """Enclosures v + d t + e t^2 + sum_m (g_m t_m + u_m z_m) + Disc(0, r), arrays (..., cells).

    ``g``, shape (m, ..., cells), holds the half chords of measured blocks between two lines, ``u`` of the same shape
    the discs round them; t, t_m in [-1, 1] and z_m complex, |z_m| <= 1, are common to all terms.
    """

    v: ComplexArray
    d: ComplexArray
    e: ComplexArray
    r: FloatArray
    g: ComplexArray
    u: ComplexArray

    @property
    def radius(self) -> FloatArray:
        """Radius of the disc that holds ``r`` and the discs of all measured blocks."""
        radius: FloatArray = self.r + np.abs(self.u).sum(axis=0) * (1.0 + SLACK)
        return radius

    def combine(self, weights: FloatArray) -> Models:
        """Linear combinations: ``weights`` (n, terms) of doubles, each with one rounding of its own."""
        with np.errstate(invalid="ignore"):  # infinite radii stay infinite or become NaN: both mean not proved
            return self._combine(weights)

    def _combine(self, weights: FloatArray) -> Models:
        size = np.abs(weights) + TINY  # a weight may have underflowed
        bands = np.abs(self.g).sum(axis=0) + np.abs(self.u).sum(axis=0)
        total = size @ (np.abs(self.v) + np.abs(self.d) + np.abs(self.e) + bands)
        slack = (weights.shape[1] + 4) * SLACK
        radius = size @ self.r * (1.0 + slack) + slack * total + TINY
        return Models(
            _real_times(weights, self.v),
            _real_times(weights, self.d),
            _real_times(weights, self.e),
            radius,
            _real_times(weights, self.g),
            _real_times(weights, self.u),
        )


def _real_times(weights: FloatArray, values: ComplexArray) -> ComplexArray:
    """A real matrix times complex columns, without promoting the matrix to complex."""
    values = np.ascontiguousarray(values)
    result: ComplexArray = np.matmul(weights, values.view(np.float64)).view(np.complex128)
    return result


class _Factors(NamedTuple):
    """Models of the single factors, (factors, cells); ``size`` bounds a polynomial's sections coefficient by
    coefficient.
    """

    v: ComplexArray
    a: ComplexArray
    b: ComplexArray
    eps: FloatArray
    size: FloatArray


class _Layout(NamedTuple):
    """Which factors each product gathers: indices into [factors, reciprocals], where each begins, and the exponents."""

    chosen: NDArray[np.intp]
    starts: NDArray[np.intp]
    exponents: FloatArray  # (terms, factors)


class TermModels:
    """Products of factors, compiled once and evaluated on any cells or at any points.

    ``terms``: pairs (powers, delay). ``models`` supplies the factors that are no polynomials.
    """

    def __init__(self, terms: Sequence[tuple[Powers, Fraction]], models: Mapping[Factor, FactorModel]) -> None:
        terms = [(powers or {ONE: 1}, delay) for powers, delay in terms]
        factors = dict.fromkeys(factor for powers, _ in terms for factor in powers)
        polynomials = [factor for factor in factors if isinstance(factor, Polynomial)]
        others = [factor for factor in factors if not isinstance(factor, Polynomial)]
        found = {factor: sections(factor) for factor in polynomials}
        places: dict[Factor, list[int]] = {}
        count = 0
        for factor in polynomials:
            places[factor] = list(range(count, count + len(found[factor].rows)))
            count += len(found[factor].rows)
        places.update({factor: [count + i] for i, factor in enumerate(others)})
        self._rows = np.concatenate([found[factor].rows for factor in polynomials] or [np.empty((0, 3))])
        self._others = [models[factor] for factor in others]
        self._layout = _layout([powers for powers, _ in terms], places, count + len(others))
        self.delays = np.array([float(delay) for _, delay in terms])
        self._some_delays = distinct(self.delays)
        self._delay_place = np.searchsorted(self._some_delays, self.delays)
        self._delta = np.array([_combined_delta(powers, found) for powers, _ in terms])
        self._longest = float(np.abs(self._layout.exponents).sum(axis=1).max(initial=0.0))
        self._slack = (np.abs(self._layout.exponents).sum(axis=1) + 12.0) * SLACK
        self.lines = tuple(model.lines for model in self._others if isinstance(model, MeasuredModel))
        self._measured = [count + i for i, model in enumerate(self._others) if model.measured]
        self._measured_power = self._layout.exponents[:, self._measured].T  # (m, terms)

    def on_cells(self, lower: FloatArray, upper: FloatArray) -> Models:
        """Enclosures of all terms, shape (terms, cells), on the cells [lower, upper] in rad/s."""
        w, h = centres_and_halves(lower, upper)
        with np.errstate(all="ignore"):
            factors = self._factors_on_cells(w, h)
            bands = self._bands(w, h, factors.v)
            return self._products(w, h, factors, *bands)

    def at_points(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """Plain values of all terms and their derivatives with respect to omega (rad/s), both (terms, points)."""
        a2, a1, a0 = (column[:, None] for column in self._rows.T)
        count = len(self._rows)
        v, slope = np.empty((2, count + len(self._others), len(omega)), complex)
        v.real[:count] = a0 - a2 * (omega * omega)
        v.imag[:count] = a1 * omega
        with np.errstate(all="ignore"):
            v[:count][v[:count] == 0.0] = 1e-300
            slope[:count] = (-2.0 * a2 * omega + 1j * a1) / v[:count]
            for i, model in enumerate(self._others, start=count):
                v[i], change = model.at_points(omega)
                slope[i] = np.where(v[i] == 0.0, 0.0, change / v[i])
            V: ComplexArray = self._values(v, np.reciprocal(v))
            relative = _real_times(self._layout.exponents, slope)
            if self._some_delays[-1] > 0.0:
                V *= np.exp(-1j * np.outer(self._some_delays, omega))[self._delay_place]
                relative -= 1j * self.delays[:, None]
            return V, V * relative

    def _factors_on_cells(self, w: FloatArray, h: FloatArray) -> _Factors:
        count, cells = len(self._rows), len(w)
        a2, a1, a0 = (column[:, None] for column in self._rows.T)
        v, a, b = np.empty((3, count + len(self._others), cells), complex)
        eps, size = np.empty((2, count + len(self._others), cells))
        top = w + h
        size[:count] = np.abs(a0) + np.abs(a1) * top + np.abs(a2) * (top * top)
        v.real[:count] = a0 - a2 * (w * w)
        v.imag[:count] = a1 * w
        _replace_zeros(v[:count], size[:count])
        relative = h / v[:count]
        a[:count] = relative * (-2.0 * a2 * w + 1j * a1)
        b[:count] = relative * (-a2 * h)
        eps[:count] = 1.5 * SLACK * size[:count] / np.abs(v[:count])
        for i, model in enumerate(self._others, start=count):
            v[i], a[i], b[i], eps[i] = model.on_cells(w, h)
            size[i] = np.abs(v[i]) * (1.0 + np.abs(a[i]) + np.abs(b[i]) + eps[i])
        return _Factors(v, a, b, eps, size)

    def _bands(self, w: FloatArray, h: FloatArray, v: ComplexArray) -> tuple[ComplexArray, FloatArray]:
        """Half chords of the measured factors and radii round them, relative to the factors' values, (m, cells)."""
        chords, radii = np.empty((len(self._measured), len(w)), complex), np.empty((len(self._measured), len(w)))
        for row, i in enumerate(self._measured):
            chord, radius = self._others[i - len(self._rows)].band(w, h)
            chords[row], radii[row] = chord / v[i], radius / np.abs(v[i])
        return chords, radii

    def _products(
        self, w: FloatArray, h: FloatArray, factors: _Factors, chords: ComplexArray, loose: FloatArray
    ) -> Models:
        v, a, b = factors.v, factors.a, factors.b
        exponents = self._layout.exponents
        size_a, size_b = np.abs(a), np.abs(b)
        reach = size_a + size_b + factors.eps
        room = np.where(reach < 1.0, 1.0 - reach, 0.0)  # reciprocal inf where nothing is proved
        V = self._values(v, 1.0 / v)
        X = self._reduce(1.0 + reach, 1.0 / room)
        A = _real_times(exponents, a)
        B = _real_times(exponents, b - 0.5 * a * a)
        E1 = np.abs(exponents) @ size_a
        E2 = np.abs(exponents) @ size_b - exponents @ (0.5 * size_a * size_a)
        theta = self.delays[:, None] * h
        fast = theta > LARGEST_DELAY_TURN
        if self._some_delays[-1] > 0.0:
            V *= np.exp(-1j * np.outer(self._some_delays, w))[self._delay_place]
            theta = np.where(fast, 0.0, theta)
            A -= 1j * theta
            X *= np.exp(theta)
            E1 += theta
        tail = X - 1.0 - E1 - (E2 + 0.5 * E1 * E1)
        slack = self._slack[:, None] + 3.0 * UNIT * self.delays[:, None] * w
        size_V = np.abs(V)
        r = size_V * (REMAINDER_SCALE * tail + slack * X) + TINY * X  # V may have underflowed
        difference: FloatArray | float = 0.0
        if self._delta.any():
            difference = self._delta[:, None] * self._values(factors.size, 1.0 / (np.abs(v) * room))
            r += difference
        g = u = np.zeros((0, *V.shape), complex)
        if len(chords):
            g, u, whole, spread = self._with_bands(V, X, chords, loose)
            r = r * whole + spread
            X, difference = X * whole, difference * whole
        d, e = V * A, V * (B + 0.5 * A * A)
        if fast.any():
            r = np.where(fast, size_V * X * (1.0 + slack) + difference + TINY * X, r)
            g, u = np.where(fast, 0.0, g), np.where(fast, 0.0, u)
            V, d, e = (np.where(fast, 0.0, part) for part in (V, d, e))
        return Models(V, d, e, r, g, u)

    def _with_bands(
        self, V: ComplexArray, X: FloatArray, chords: ComplexArray, loose: FloatArray
    ) -> tuple[ComplexArray, ComplexArray, FloatArray, FloatArray]:
        """Half chords and discs of each term, the factor by which bands enlarge it, and what they add to its radius.

        A term is V q(t) prod (1 + c_m t_m + l_m z_m)^p_m with |q - 1| <= X - 1: the bands' linear parts stay apart,
        what is of second order in them, or of first order in them and in t, goes into the radius.
        """
        power = self._measured_power[:, :, None]
        size, radius = np.abs(chords)[:, None, :], loose[:, None, :]
        whole = np.prod((1.0 + size + radius) ** power, axis=0)
        second = np.maximum(whole - 1.0 - (power * (size + radius)).sum(axis=0), 0.0)
        second = np.where(self._measured_power.sum(axis=0)[:, None] > 1.0, second + SLACK * whole, 0.0)
        spread = np.abs(V) * (second + (X - 1.0) * (whole - 1.0)) * (1.0 + 16.0 * SLACK)
        g, u = V * (power * chords[:, None, :]), V * (power * radius)
        return g, u, whole, spread + 2.0 * SLACK * (np.abs(g) + np.abs(u)).sum(axis=0)

    def _reduce(self, values: NumericArray, reciprocals: NumericArray) -> NumericArray:
        gathered = np.concatenate([values, reciprocals])[self._layout.chosen]
        product: NumericArray = np.multiply.reduceat(gathered, self._layout.starts, axis=0)
        return product

    def _values(self, values: NumericArray, reciprocals: NumericArray) -> NumericArray:
        """As ``_reduce``, for factors of which some may multiply to less than the smallest double though all do not."""
        bits = np.log2(np.abs(values))
        product = self._reduce(values, reciprocals)
        if np.abs(bits).max(initial=0.0) * self._longest <= LARGEST_EXPONENT:
            return product
        above, below = np.maximum(bits, 0.0), np.maximum(-bits, 0.0)
        up, down = np.maximum(self._layout.exponents, 0.0), np.maximum(-self._layout.exponents, 0.0)
        extent = np.maximum(up @ above + down @ below, up @ below + down @ above)  # of any partial product
        far = np.flatnonzero(~(extent.max(axis=0) <= LARGEST_EXPONENT))
        gathered = np.concatenate([values[:, far], reciprocals[:, far]])[self._layout.chosen]
        product[:, far] = _scaled_product(gathered, self._layout.starts)
        return product


def _scaled_product(gathered: NumericArray, starts: NDArray[np.intp]) -> NumericArray:
    """Products through mantissas and binary exponents; NaN where even the mantissas leave the range of doubles."""
    _, exponent = np.frexp(np.abs(gathered))
    mantissa = np.multiply.reduceat(gathered * np.ldexp(1.0, -exponent), starts, axis=0)
    total = np.add.reduceat(exponent, starts, axis=0)
    kept = (np.abs(mantissa) > TINY) | np.logical_or.reduceat(gathered == 0.0, starts, axis=0)
    product: NumericArray = np.where(kept, mantissa, np.nan)
    for part in (product.real, product.imag) if np.iscomplexobj(product) else (product,):
        np.ldexp(part, total, out=part)
    return product


def centres_and_halves(lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Centre and half width of each cell; the halves are widened so that rounded neighbours overlap."""
    w = 0.5 * (lower + upper)
    return w, inflated_half(w, 0.5 * (upper - lower))


def _layout(terms: Sequence[Powers], places: Mapping[Factor, list[int]], factors: int) -> _Layout:
    """Each product gathers its factors one by one; index ``factors`` + i means the reciprocal of factor i."""
    exponents = np.zeros((len(terms), factors))
    chosen: list[int] = []
    starts: list[int] = []
    for row, powers in enumerate(terms):
        starts.append(len(chosen))
        for factor, power in powers.items():
            for place in places[factor]:
                exponents[row, place] = power
                chosen.extend([place if power > 0 else factors + place] * abs(power))
    return _Layout(np.array(chosen, dtype=np.intp), np.array(starts, dtype=np.intp), exponents)


def _combined_delta(powers: Powers, found: Mapping[Polynomial, Sections]) -> float:
    """prod(1 + delta)^power - 1, rounded up.

    Only factors above the line have a delta: what stands below is of first or second order (``hurwitz_stand_ins``).
    """
    total = 1.0
    for factor, power in powers.items():
        if isinstance(factor, Polynomial) and found[factor].delta > 0.0:
            total *= (1.0 + found[factor].delta) ** power
    return (total - 1.0) * (1.0 + 1e-9) + (8.0 * UNIT if total > 1.0 else 0.0)


def _replace_zeros(v: ComplexArray, size: FloatArray) -> None:
    """Move values that vanish by a hair of their scale; the rounding share then covers the move."""
    small = np.abs(v) < 1e-30 * size
    if small.any():
        v[small] = 1e-30 * size[small]
