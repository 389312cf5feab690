"""Numerical roots of square-free integer polynomials, each accurate to the last bits of double precision.

Simultaneous iteration of Ehrlich and Aberth (O. Aberth, "Iteration methods for finding all zeros of a polynomial
simultaneously", Math. Comp. 27 (1973), quoted from memory) on pairs of doubles, with the polynomial evaluated in
integer fixed-point arithmetic as precise as the conditioning of the roots demands.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from encircle.engine.result import ComplexArray

_SETTLED = 2.0**-88  # |p/(z p')| at which an iterate z held as two doubles has converged
_REAL = 2.0**-78  # |im| below this part of |root| is rounding
_FIRST_BITS, _LAST_BITS = 160, 40_000
_VALUE_BITS = 24  # fewer bits of p than these are rounding (its error is below 3 * degree units)
_SLOPE_BITS = 104  # with fewer bits of z p' the rounding of p moves the root by more than _SETTLED
_ITERATIONS = 150


def simple_roots(coefficients: Sequence[int]) -> ComplexArray:
    """The roots (degree,), real ones exactly real, the others as exact conjugate pairs, im > 0 first, ascending |s|.

    ``coefficients``: ascending, first and last not 0, without repeated roots. Raises OverflowError where a root is
    beyond double precision, ArithmeticError where the iteration does not settle.
    """
    degree = len(coefficients) - 1
    if degree <= 0:
        return np.empty(0, complex)
    if degree == 1:
        return np.array([complex(-coefficients[0] / coefficients[1])])
    if degree == 2:
        return _ordered(np.array(_quadratic_roots(*coefficients)))
    return _ordered(_conjugate_symmetric(_iterate(coefficients, _start(coefficients))))


def _quadratic_roots(c: int, b: int, a: int) -> tuple[complex, complex]:
    """Roots of a s^2 + b s + c; the integer square root carries 64 bits more than a double."""
    discriminant = b * b - 4 * a * c
    shift = max(0, 128 - abs(discriminant).bit_length() // 2)
    root = math.isqrt(abs(discriminant) << (2 * shift))
    if discriminant < 0:
        pair = complex(-b / (2 * a), abs(root / (2 * a << shift)))
        return pair, pair.conjugate()
    larger = -((b << shift) + (root if b >= 0 else -root))  # no cancellation
    return complex(larger / (2 * a << shift)), complex((2 * c << shift) / larger)


def _start(coefficients: Sequence[int]) -> ComplexArray:
    """First approximations: eigenvalues of the companion matrix where they are credible, else Newton's polygon.

    The k-th root by magnitude lies within a factor 2 * degree of the k-th radius of the polygon (A. Ostrowski, Acta
    Math. 72 (1940), quoted from memory): eigenvalues elsewhere are rounding.
    """
    octaves = [_octave(c) for c in coefficients]
    on_polygon = _polygon_start(octaves)
    roots = _companion_eigenvalues(coefficients, octaves)
    roots = roots[np.argsort(np.abs(roots))]
    with np.errstate(divide="ignore"):
        credible = np.abs(np.log2(np.abs(roots) / np.abs(on_polygon))) < 2 + math.log2(len(roots))
    # Off the conjugate symmetry, which could hold two real roots together as a pair
    return np.where(credible, roots * (1 + 2.0**-30 * np.exp(1j * np.arange(len(roots)))), on_polygon)


def _companion_eigenvalues(coefficients: Sequence[int], octaves: Sequence[float]) -> ComplexArray:
    """Approximate roots from doubles, zeros where the coefficients do not fit them.

    The variable is scaled by a power of two so that the roots lie about the unit circle.
    """
    degree = len(coefficients) - 1
    scale = round((octaves[0] - octaves[-1]) / degree)
    exponents = [octave - octaves[-1] + scale * (k - degree) for k, octave in enumerate(octaves)]
    if max(abs(exponent) for exponent in exponents if exponent > -math.inf) > 1000 or abs(scale) > 900:
        return np.zeros(degree, complex)
    lead, octave = Fraction(coefficients[-1]), Fraction(2) ** scale
    companion = np.diag(np.ones(degree - 1), -1)
    companion[:, -1] = [-float(c / lead * octave ** (k - degree)) for k, c in enumerate(coefficients[:-1])]
    return np.asarray(np.linalg.eigvals(companion) * 2.0**scale, complex)


def _octave(c: int) -> float:
    """log2|c|, minus infinity for 0."""
    return math.log2(abs(c)) if c else -math.inf


def _polygon_start(octaves: Sequence[float]) -> ComplexArray:
    """Points on circles whose radii are the slopes of the upper convex hull of (k, log2|c_k|).

    Source: D. A. Bini, "Numerical computation of polynomial zeros by means of Aberth's method", Numer. Algorithms 13
    (1996), quoted from memory.
    """
    hull: list[int] = []
    for k, octave in enumerate(octaves):
        while len(hull) > 1 and _below_chord(hull[-2], hull[-1], k, octaves):
            hull.pop()
        if octave > -math.inf:
            hull.append(k)
    circles = []
    for low, high in pairwise(hull):
        radius = 2.0 ** ((octaves[low] - octaves[high]) / (high - low))
        angles = 2 * np.pi * np.arange(high - low) / (high - low) + 0.7 + low
        circles.append(radius * np.exp(1j * angles))
    return np.concatenate(circles)


def _below_chord(first: int, middle: int, last: int, octaves: Sequence[float]) -> bool:
    rise = (octaves[last] - octaves[first]) * (middle - first)
    return (octaves[middle] - octaves[first]) * (last - first) <= rise


def _iterate(coefficients: Sequence[int], start: ComplexArray) -> ComplexArray:
    """All roots at once from first approximations, with as many bits as their conditioning asks for."""
    high, low = start.copy(), np.zeros_like(start)
    active, bits = np.arange(len(start)), _FIRST_BITS
    for _ in range(_ITERATIONS):
        ratio, value_bits, slope_bits = _logarithmic_derivatives(coefficients, high[active], low[active], bits)
        with np.errstate(all="ignore"):
            step = -1 / (ratio - _repulsion(high, active))
            distance = 1 / np.abs(ratio) / np.abs(high[active])
        near = distance < _SETTLED
        if (slope_bits[near] < _SLOPE_BITS).any() or (value_bits[~near] < _VALUE_BITS).any():
            bits *= 2
            if bits > _LAST_BITS:
                break
            continue
        step[~np.isfinite(step)] = 0
        step /= np.maximum(np.abs(step) / np.abs(high[active]), 1)
        high[active], low[active] = _moved(high[active], low[active], step)
        active = active[~near]
        if not len(active):
            return high
    raise ArithmeticError(f"the roots of a polynomial of degree {len(start)} did not settle")


def _repulsion(high: ComplexArray, active: NDArray[np.int64]) -> ComplexArray:
    """sum over k of 1/(z_i - z_k) for the active i, without those that equal z_i in double precision."""
    difference = high[active, None] - high
    difference[difference == 0] = np.inf
    return np.asarray((1 / difference).sum(axis=1))


def _moved(high: ComplexArray, low: ComplexArray, step: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """high + low + step as an unevaluated sum, high its rounding (two-sum; D. E. Knuth, TAOCP vol. 2, sec. 4.2.2)."""
    a, b = high.view(float), (low + step).view(float)
    total = a + b
    part = total - a
    rest = (a - (total - part)) + (b - part)
    return total.view(complex), rest.view(complex)


def _logarithmic_derivatives(
    coefficients: Sequence[int], high: ComplexArray, low: ComplexArray, bits: int
) -> tuple[ComplexArray, NDArray[np.int64], NDArray[np.int64]]:
    """p'/p at each root, and the bits that p and |z| p' keep where the largest term c_k z^k has ``bits`` bits."""
    scaled: dict[int, list[int]] = {}
    ratio = np.empty_like(high)
    kept = np.empty((2, len(high)), np.int64)
    for i, (z, rest) in enumerate(zip(high.tolist(), low.tolist(), strict=True)):
        exponent = math.frexp(abs(z))[1]
        if exponent not in scaled:
            scaled[exponent] = _scaled(coefficients, exponent, bits)
        x = _fixed(z.real, bits - exponent) + _fixed(rest.real, bits - exponent)
        y = _fixed(z.imag, bits - exponent) + _fixed(rest.imag, bits - exponent)
        a, b, c, d = _horner(scaled[exponent], x, y, bits)
        norm = a * a + b * b
        kept[:, i] = norm.bit_length() // 2, (c * c + d * d).bit_length() // 2
        quotient = complex((a * c + b * d) / norm, (a * d - b * c) / norm) if norm else complex(math.inf)
        ratio[i] = quotient * 2.0**-exponent
    return ratio, kept[0], kept[1]


def _scaled(coefficients: Sequence[int], exponent: int, bits: int) -> list[int]:
    """The coefficients of p(2^exponent t), descending, scaled so that the largest has ``bits`` bits."""
    top = max(c.bit_length() + k * exponent for k, c in enumerate(coefficients) if c)
    shifts = [bits - top + k * exponent for k in range(len(coefficients))]
    return [c << n if n >= 0 else c >> -n for c, n in zip(reversed(coefficients), reversed(shifts), strict=True)]


def _fixed(value: float, shift: int) -> int:
    """value * 2^shift, rounded down."""
    mantissa, exponent = math.frexp(value)
    shift += exponent - 53
    whole = int(mantissa * 2**53)
    return whole << shift if shift >= 0 else whole >> -shift


def _horner(descending: Sequence[int], x: int, y: int, bits: int) -> tuple[int, int, int, int]:
    """Real and imaginary parts of p and p' at (x + jy)/2^bits."""
    a = b = c = d = 0
    for coefficient in descending:
        c, d = ((c * x - d * y) >> bits) + a, ((c * y + d * x) >> bits) + b
        a, b = ((a * x - b * y) >> bits) + coefficient, (a * y + b * x) >> bits
    return a, b, c, d


def _conjugate_symmetric(roots: ComplexArray) -> ComplexArray:
    """Roots next to the real axis made real, every other one below it replaced by the conjugate of one above."""
    real = np.abs(roots.imag) <= _REAL * np.abs(roots)
    upper = roots[~real & (roots.imag > 0)]
    result = np.concatenate([roots[real].real, upper, upper.conj()])
    if len(result) != len(roots):
        raise ArithmeticError(f"the roots of a polynomial of degree {len(roots)} do not pair")
    return result


def _ordered(roots: ComplexArray) -> ComplexArray:
    return roots[np.lexsort((-roots.imag, roots.real, np.abs(roots)))]
