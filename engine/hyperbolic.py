"""Hyperbolic functions as functions of the square of their argument, and (exp x - 1)/x, on cells.

cosh(sqrt z), sinh(sqrt z)/sqrt z and tanh(sqrt z)/sqrt z are analytic at z = 0 and do not depend on the branch of the
root, so no cut and no singular point at s = 0 remains in tanh(sqrt s)/sqrt s and its kin. Where |z| <= 1 on the whole
cell the Maclaurin series serves, elsewhere the exponentials of any root of z, scaled by powers of two.
"""

from __future__ import annotations

from collections.abc import Callable
from math import comb, factorial

import numpy as np

from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import SLACK, outward
from encircle.engine.taylor_model import (
    BoolArray,
    TaylorModel,
    add,
    add_constant,
    exponential,
    exponents,
    multiply,
    negate,
    real_power,
    reciprocal,
    scale,
    size_upper,
)

Function = Callable[[TaylorModel], TaylorModel]

SERIES_REACH = 1.0
TERMS = 24  # the first term left out is below 1e-22 of the first kept, at |z| = 1


def cosh_of_root(z: TaylorModel) -> TaylorModel:
    """cosh(sqrt z)."""
    return _by_size(z, lambda near: _series(near, _COSH), _far_cosh)


def sinhc_of_root(z: TaylorModel) -> TaylorModel:
    """sinh(sqrt z)/sqrt z."""
    return _by_size(z, lambda near: _series(near, _SINHC), _far_sinhc)


def tanhc_of_root(z: TaylorModel) -> TaylorModel:
    """tanh(sqrt z)/sqrt z."""
    return _by_size(z, _near_tanhc, _far_tanhc)


def exponential_quotient(x: TaylorModel) -> TaylorModel:
    """(exp x - 1)/x, 1 at x = 0."""
    return _by_size(x, lambda near: _series(near, _QUOTIENT), _far_quotient)


def _near_tanhc(z: TaylorModel) -> TaylorModel:
    return multiply(_series(z, _SINHC), reciprocal(_series(z, _COSH)))


def _far_cosh(z: TaylorModel) -> TaylorModel:
    x = real_power(z, 0.5)
    return scale(add(exponential(x), exponential(negate(x))), 0.5)


def _far_sinhc(z: TaylorModel) -> TaylorModel:
    x = real_power(z, 0.5)
    double = add(exponential(x), negate(exponential(negate(x))))
    return scale(multiply(double, reciprocal(x)), 0.5)


def _far_tanhc(z: TaylorModel) -> TaylorModel:
    """tanh x = 2/(1 + exp(-2x)) - 1 with Re x >= 0 at the middle of the cell: one quantity, no dependency."""
    x = real_power(z, 0.5)
    decaying = exponential(scale(x, -2.0))
    tanh = add_constant(scale(reciprocal(add_constant(decaying, 1.0)), 2.0), -1.0)
    return multiply(tanh, reciprocal(x))


def _far_quotient(x: TaylorModel) -> TaylorModel:
    return multiply(add_constant(exponential(x), -1.0), reciprocal(x))


def _by_size(z: TaylorModel, near: Function, far: Function) -> TaylorModel:
    """``near`` on the cells where |z| <= 1, ``far`` on the others."""
    small = size_upper(z) <= SERIES_REACH
    if small.all():
        return near(z)
    if not small.any():
        return far(z)
    return _merged(small, near(_taken(z, small)), far(_taken(z, ~small)))


def _taken(z: TaylorModel, mask: BoolArray) -> TaylorModel:
    exponent = None if z.exponent is None else z.exponent[mask]
    return TaylorModel(z.v[mask], z.d[mask], z.e[mask], z.r[mask], exponent)


def _merged(mask: BoolArray, chosen: TaylorModel, others: TaylorModel) -> TaylorModel:
    parts = []
    for p, q in ((chosen.v, others.v), (chosen.d, others.d), (chosen.e, others.e)):
        part = np.empty(len(mask), complex)
        part[mask], part[~mask] = p, q
        parts.append(part)
    r, exponent = np.empty(len(mask)), np.zeros(len(mask), dtype=np.int64)
    r[mask], r[~mask] = chosen.r, others.r
    exponent[mask], exponent[~mask] = exponents(chosen), exponents(others)
    unscaled = chosen.exponent is None and others.exponent is None
    return TaylorModel(parts[0], parts[1], parts[2], r, None if unscaled else exponent)


class _Series:
    """Nonnegative Maclaurin coefficients c_k of f, of f' and f''/2, and sum_k C(k,3) c_k >= |f'''|/6 on |z| <= 1."""

    def __init__(self, coefficient: Callable[[int], float]) -> None:
        c = [coefficient(k) for k in range(TERMS)]
        rows = [[comb(k + m, m) * c[k + m] if k + m < TERMS else 0.0 for k in range(TERMS)] for m in range(3)]
        self.rows: FloatArray = np.array(rows)
        self.third = sum(comb(k, 3) * c[k] for k in range(TERMS)) * (1.0 + 1e-12)
        self.size = sum(c) + sum(self.rows[1]) + sum(self.rows[2])


_COSH = _Series(lambda k: 1.0 / factorial(2 * k))
_SINHC = _Series(lambda k: 1.0 / factorial(2 * k + 1))
_QUOTIENT = _Series(lambda k: 1.0 / factorial(k + 1))


def _series(z: TaylorModel, series: _Series) -> TaylorModel:
    """f(v + y), y = d t + e t^2 + zeta: second order at v; |f'''|/6 <= ``third`` on the disc that holds the cell.

    The powers v^0 ... v^23 are formed one from the other: 3 k u for v^k, and 28 u for the sum of 24 products; weighted
    with c_k, whose mean index is below 1, less than 64 u of the sum of the c_k.
    """
    if z.exponent is not None:
        factor = np.ldexp(1.0, z.exponent)
        z = TaylorModel(z.v * factor, z.d * factor, z.e * factor, outward(z.r * factor), None)
    powers: ComplexArray = np.ones((TERMS, len(z.v)), complex)
    np.multiply.accumulate(np.broadcast_to(z.v, (TERMS - 1, len(z.v))), axis=0, out=powers[1:])
    value, first, second = (series.rows[:, :, None] * powers).sum(axis=1)  # not @: its rounding depends on the batch
    size_d, size_e = np.abs(z.d), np.abs(z.e)
    sigma = size_d + size_e
    tail = np.abs(first) * z.r + np.abs(second) * (2.0 * size_d * size_e + size_e * size_e + z.r * (2.0 * sigma + z.r))
    tail = tail + series.third * (sigma + z.r) ** 3
    slack = 8.0 * SLACK * series.size * (1.0 + sigma + z.r) ** 2
    return TaylorModel(value, first * z.d, first * z.e + second * (z.d * z.d), outward(tail * (1.0 + SLACK) + slack))
