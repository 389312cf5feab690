"""The delay kernel psi_k(T s), what is left of exp(-T s) when it cancels k poles at 0, on cells of the axis.

psi_k(z) = k! phi_k(-z) with phi_k(y) = sum_m y^m/(m + k)!; phi_k' = phi_k - k phi_(k+1) and y phi_k = phi_(k-1) -
1/(k-1)! (the phi functions of exponential integrators: M. Hochbruck, A. Ostermann, Acta Numerica 19 (2010) 209-286;
from memory). On the axis |psi_k'''| <= 6 / ((k + 1)(k + 2)(k + 3)), the third moment of the density k (1 - x)^(k-1),
and |psi_k(j theta)| <= min(1, 2 k/theta) by the recurrence with |phi_(k-1)| <= 1/(k-1)!.
"""

from __future__ import annotations

from math import factorial

import numpy as np

from encircle.engine.coprime_factors import DelayKernel
from encircle.engine.factor_models import FarFactor, RelativeModel, never_zero
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import UNIT

SERIES_TERMS = 80
OFF_CENTRE = 1024.0  # a disc round 0 is given by a value this much smaller than its radius: values must not vanish


class DelayKernelModel:
    """psi_k(T s) as a factor of products."""

    measured = False

    def __init__(self, kernel: DelayKernel) -> None:
        self._order = kernel.order
        self._delay = float(kernel.delay)

    def on_cells(self, w: FloatArray, h: FloatArray) -> RelativeModel:
        """Second-order expansion in theta = T (w + h t), or the disc round 0 where min(1, 2 k/theta) says more."""
        k = self._order
        theta, step = self._delay * w, self._delay * h * (1.0 + 4.0 * UNIT)
        value, slope, bend, error = self._derivatives(theta)
        error = error * (1.0 + step) ** 2 + 4.0 * UNIT * theta  # the rounded argument moves psi by less
        remainder = step**3 / ((k + 1) * (k + 2) * (k + 3))
        v = never_zero(value, np.ones_like(w))
        moved = np.abs(v - value)
        size = np.abs(v)
        a, b, eps = -1j * step * slope / v, -0.5 * step * step * bend / v, (error + remainder + moved) / size
        bound = np.minimum(1.0, 2.0 * k / np.maximum((theta - step) * (1.0 - 16.0 * UNIT), 2.0 * k))
        loose = ~(size * (np.abs(a) + np.abs(b) + eps) <= bound)
        v = np.where(loose, bound / OFF_CENTRE + 0j, v)
        return v, np.where(loose, 0.0, a), np.where(loose, 0.0, b), np.where(loose, OFF_CENTRE + 1.001, eps)

    def band(self, w: FloatArray, h: FloatArray) -> tuple[ComplexArray, FloatArray]:
        """No band: the kernel is known."""
        return np.zeros(len(w), complex), np.zeros(len(w))

    def at_points(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """psi_k(j T omega) and its derivative."""
        value, slope, _, _ = self._derivatives(self._delay * omega)
        return value, -1j * self._delay * slope

    def far(self, radii: FloatArray) -> FarFactor:
        """Not used: behaviour at infinity is taken from the sum of delays itself."""
        raise NotImplementedError("numerators at infinity hold no delay kernels")

    def _derivatives(self, theta: FloatArray) -> tuple[ComplexArray, ComplexArray, ComplexArray, FloatArray]:
        """k! (phi, phi', phi'') of order k at y = -j theta, and a bound of their rounding errors."""
        k = self._order
        phi, error = _phi(k + 2, (-1j * theta).astype(complex))
        first = phi[k] - k * phi[k + 1]
        second = first - k * (phi[k + 1] - (k + 1) * phi[k + 2])
        scale = factorial(k)
        total = (1.0 + k) * (2.0 + k) * (error[k] + error[k + 1] + error[k + 2])
        return scale * phi[k], scale * first, scale * second, scale * (total + 16.0 * UNIT)


def _phi(highest: int, y: ComplexArray) -> tuple[list[ComplexArray], list[FloatArray]]:
    """phi_0 ... phi_highest on the imaginary axis with bounds of their errors.

    Upward recurrence from exp(y) where |y| is large, the power series where it is small: the recurrence divides
    errors by |y|.
    """
    small = np.abs(y) < highest + 2.0
    safe = np.where(small, 1.0, y)
    size = np.abs(safe)
    phi, error = [np.exp(y)], [np.full(len(y), 4.0 * UNIT)]
    for k in range(1, highest + 1):
        constant = 1.0 / factorial(k - 1)
        phi.append((phi[-1] - constant) / safe)
        error.append((error[-1] + 8.0 * UNIT * (np.abs(phi[-2]) + constant)) / size)
    for k in range(1, highest + 1):
        series, spread = _series(k, y[small])
        phi[k][small], error[k][small] = series, spread
    return phi, error


def _series(k: int, y: ComplexArray) -> tuple[ComplexArray, FloatArray]:
    """sum_m y^m/(m + k)! by Horner's rule, with the rounding bound 8 u m on the sum of absolute values."""
    total, size = np.zeros(len(y), complex), np.zeros(len(y))
    for m in range(SERIES_TERMS, -1, -1):
        coefficient = 1.0 / factorial(m + k)
        total = total * y + coefficient
        size = size * np.abs(y) + coefficient
    return total, 8.0 * UNIT * 24.0 * size
