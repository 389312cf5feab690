"""Second-order Taylor models on cells: arithmetic, powers, exponential, distance from zero.

A model encloses, cell by cell, every value of a quantity q on a cell s = j(centre + half t), |t| <= 1:

    q(t) in 2^exponent (v + d t + e t^2 + Disc(0, r)).

v, d, e are complex, r is real and holds every truncation and rounding error (K. Makino, M. Berz, "Taylor models and
other validated functional inclusion methods", Int. J. Pure Appl. Math. 4 (2003) 379-456). An infinite or NaN radius
means "not proved"; both fail every comparison radius < distance. The exponents keep sizes within 2^-100 ... 2^100, so
that nothing overflows; exponent None stands for 0 in every cell, which spares the alignment of sums.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import SLACK, TINY, UNIT, outward

IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

LARGEST_SIZE = 2.0**100  # sizes beyond it, or below its reciprocal, move into the exponent
FARTHEST_SHIFT = 1000  # a power of two that a double holds, and so does its reciprocal
LARGEST_EXPONENT_REAL = 2.0**45  # beyond it the real part of an exponent has no digit left to place the value
LOG_2 = 0.6931471805599453


class TaylorModel(NamedTuple):
    """The sets 2^exponent (v + d t + e t^2 + Disc(0, r)), |t| <= 1; all arrays (n,)."""

    v: ComplexArray
    d: ComplexArray
    e: ComplexArray
    r: FloatArray
    exponent: IntArray | None = None


def affine(v: ComplexArray, d: ComplexArray) -> TaylorModel:
    """v + d t, both exact; normalised."""
    size = np.abs(v) + np.abs(d)
    return _normalised(TaylorModel(v, d, np.zeros_like(v), TINY + 0.0 * size), size)


def constant(value: complex, radius: float, exponent: int, count: int) -> TaylorModel:
    """2^exponent Disc(value, radius) on ``count`` cells."""
    zero = np.zeros(count, complex)
    scale = None if exponent == 0 else np.full(count, exponent, dtype=np.int64)
    return TaylorModel(zero + value, zero, zero, np.full(count, radius + TINY), scale)


def add(p: TaylorModel, q: TaylorModel) -> TaylorModel:
    """p + q."""
    p, q = _aligned(p, q)
    v, d, e = p.v + q.v, p.d + q.d, p.e + q.e
    return TaylorModel(v, d, e, outward(p.r + q.r + 2.0 * UNIT * _sizes(v, d, e)), p.exponent)


def add_constant(p: TaylorModel, value: float) -> TaylorModel:
    """p + value for a real number that is exactly a double."""
    if p.exponent is not None:
        return add(p, constant(value, 0.0, 0, len(p.v)))
    v = p.v + value
    return TaylorModel(v, p.d, p.e, outward(p.r + 2.0 * UNIT * np.abs(v)), None)


def negate(p: TaylorModel) -> TaylorModel:
    """-p, without rounding."""
    return TaylorModel(-p.v, -p.d, -p.e, p.r, p.exponent)


def scale(p: TaylorModel, factor: complex, radius: float = 0.0, exponent: int = 0) -> TaylorModel:
    """2^exponent Disc(factor, radius) times p."""
    if radius == 0.0 and exponent == 0 and factor in (1.0, -1.0):
        return p if factor == 1.0 else negate(p)
    size = _sizes(p.v, p.d, p.e)
    modulus = abs(factor)
    r = outward((modulus + radius) * p.r + (radius + SLACK * modulus) * size)
    total = _exponent_sum(p.exponent, None if exponent == 0 else np.full(len(size), exponent, dtype=np.int64))
    return _normalised(TaylorModel(p.v * factor, p.d * factor, p.e * factor, r, total), modulus * size + r)


def multiply(p: TaylorModel, q: TaylorModel) -> TaylorModel:
    """p q; what exceeds second order in t goes into the radius."""
    pv, pd, pe = np.abs(p.v), np.abs(p.d), np.abs(p.e)
    qv, qd, qe = np.abs(q.v), np.abs(q.d), np.abs(q.e)
    size_p, size_q = pv + pd + pe, qv + qd + qe
    product = size_p * size_q
    tail = pd * qe + pe * (qd + qe)
    r = outward(tail + p.r * size_q + q.r * (size_p + p.r) + SLACK * product)
    v = p.v * q.v
    d = p.v * q.d + p.d * q.v
    e = p.v * q.e + p.d * q.d + p.e * q.v
    return _normalised(TaylorModel(v, d, e, r, _exponent_sum(p.exponent, q.exponent)), product + r)


def reciprocal(q: TaylorModel) -> TaylorModel:
    """1/q where q is proved to exclude 0.

    With w = 1/v, a = d w, b = e w and p = w (1 - a t + (a^2 - b) t^2): 1/q - p = (1 - q p)/q, whose numerator is
    a (2 b - a^2) t^3 - b (a^2 - b) t^4 exactly; so the remainder needs only a lower bound of |q|.
    """
    w = 1.0 / q.v
    a, b = q.d * w, q.e * w
    second = a * a - b
    size_w, size_a, size_b = np.abs(w), np.abs(a), np.abs(b)
    reach = 1.0 + size_a + size_b
    least = _model_distance_lower(1.0 + 0.0 * a, a, b, size_w * q.r * (1.0 + SLACK) + 4.0 * SLACK * reach)
    third = size_a * np.abs(a * a - 2.0 * b) + size_b * np.abs(second)
    whole = 1.0 + size_a + np.abs(second)
    tail = third + (size_w * q.r + SLACK) * whole + 16.0 * SLACK * reach * reach * reach
    proved = (least > 0.0) & (size_w > 0.0)  # the reciprocal of an overflow proves nothing
    r = outward(size_w * np.where(proved, tail / least, np.inf))
    model = TaylorModel(w, -w * a, w * second, r, None if q.exponent is None else -q.exponent)
    return _normalised(model, size_w * whole)


def exponential(q: TaylorModel) -> TaylorModel:
    """exp(q), scaled by an integer power of two where it is large or small.

    exp(v + y0 + z) with y0 = d t + e t^2: |exp(y0) - 1 - y0 - y0^2/2| <= |y0|^3/6 sup exp(Re y0), and a disturbance z
    adds sup exp(Re y0) expm1(|z|). Where that is worse than the plain bound sup|exp q|, the disc of that radius about 0
    is used.
    """
    v, d, e, r = _unscaled(q)
    size_d, size_e = np.abs(d), np.abs(e)
    sigma = size_d + size_e
    value, exponent = _scaled_exponential(v)
    size = np.abs(value)
    disturbance = r + 2.0 * SLACK + 3.0 * UNIT * np.abs(v.real)  # rounding of exp itself, as if of its argument
    rise = np.abs(d.real) + np.abs(e.real)  # >= Re y0
    swing = np.exp(rise) * (1.0 + 4.0 * SLACK)
    tail = size_d * size_e + 0.5 * size_e * size_e + sigma * sigma * sigma * swing / 6.0
    tail = tail + swing * np.expm1(disturbance) + 2.0 * SLACK * (1.0 + sigma + sigma * sigma)
    radius = outward(size * tail * (1.0 + SLACK))
    model = TaylorModel(value, value * d, value * (e + 0.5 * d * d), radius, exponent)
    model = _or_disc(model, size, rise + disturbance)
    return _without_far_exponents(model, v.real, rise + r)


def _or_disc(model: TaylorModel, size: FloatArray, rise: FloatArray) -> TaylorModel:
    """The disc of radius size * exp(rise) about 0 on the cells where that is less than the model's own radius."""
    whole = np.where(rise > 60.0, np.rint(np.minimum(rise, LARGEST_EXPONENT_REAL) / LOG_2), 0.0)
    bound = outward(size * np.exp(rise - whole * LOG_2) * (1.0 + 2.0 * SLACK + 4.0 * UNIT * rise))
    use_disc = (bound < model.r) | (whole > 0.0)
    if not use_disc.any():
        return model
    zero = np.zeros_like(model.v)
    scale = model.exponent if not whole.any() else exponents(model) + whole.astype(np.int64)
    return choose(use_disc, TaylorModel(zero, zero, zero, bound, scale), model)


def real_power(q: TaylorModel, alpha: float) -> TaylorModel:
    """q^alpha by the branch that continues the principal value at v; proved where q is proved to exclude 0.

    With q = v (1 + y + z), y = a t + b t^2, |z| <= rho: Taylor's formula with integral remainder bounds |(1 + y)^alpha
    - 1 - alpha y - alpha (alpha - 1)/2 y^2| by |alpha (alpha - 1)(alpha - 2)|/6 |y|^3 max|1 + x y|^(alpha - 3), 0 <= x
    <= 1. For the principal branch on the whole cell see ``argument_range``.
    """
    if alpha == 0.0:
        return constant(1.0, 0.0, 0, len(q.v))
    w = 1.0 / q.v
    a, b = q.d * w, q.e * w
    size_a, size_b, rho = np.abs(a), np.abs(b), np.abs(w) * q.r * (1.0 + 2.0 * SLACK)
    root, exponent, slack = _power_of_centre(q.v, q.exponent, alpha)
    half_second = 0.5 * alpha * (alpha - 1.0)
    tail, whole = _power_tail(alpha, a, size_a, size_b, rho)
    tail = np.where(np.abs(w) > 0.0, tail, np.inf)  # the power of an overflow proves nothing
    tail = tail * (1.0 + 2.0 * (8.0 + abs(alpha)) * SLACK) + slack * (whole + tail)
    r = outward(np.abs(root) * tail * (1.0 + SLACK))
    model = TaylorModel(root, root * (alpha * a), root * (alpha * b + half_second * (a * a)), r, exponent)
    return _normalised(model, np.abs(root) * whole)


def _power_tail(
    alpha: float, a: ComplexArray, size_a: FloatArray, size_b: FloatArray, rho: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """The remainder of (1 + y + z)^alpha beyond second order in t, and the sum of the coefficients' sizes."""
    sigma = size_a + size_b
    one = 1.0 + 0.0 * a
    least = _segment_distance_lower(one, a) - size_b - 4.0 * SLACK * (1.0 + sigma)
    least = np.where(least - rho > 0.0, least, np.nan)
    most = 1.0 + sigma
    second = abs(0.5 * alpha * (alpha - 1.0))
    third = abs(alpha * (alpha - 1.0) * (alpha - 2.0)) / 6.0
    slope = (least - rho) ** (alpha - 1.0) if alpha < 1.0 else (most + rho) ** (alpha - 1.0)
    bend = least ** (alpha - 3.0) if alpha < 3.0 else most ** (alpha - 3.0)
    tail = second * size_b * (2.0 * size_a + size_b) + third * sigma * sigma * sigma * bend
    tail = tail + abs(alpha) * rho * slope
    whole = 1.0 + abs(alpha) * sigma + second * size_a * size_a
    return np.where(np.isfinite(tail), tail, np.inf), whole


def _power_of_centre(
    v: ComplexArray, exponent: IntArray | None, alpha: float
) -> tuple[ComplexArray, IntArray | None, FloatArray]:
    """(2^exponent v)^alpha as (value, exponent, relative rounding error), principal branch."""
    modulus = np.abs(v)
    least, most = float(modulus.min(initial=1.0)), float(modulus.max(initial=1.0))
    moderate = exponent is None and max(-np.log2(least), np.log2(most)) * abs(alpha) < 100.0 if least > 0.0 else False
    if alpha == 0.5 and moderate:
        return np.sqrt(v), None, np.full(len(v), 8.0 * SLACK)
    turn = np.exp(1j * (alpha * np.angle(v)))
    slack = SLACK * (12.0 + 8.0 * abs(alpha)) + UNIT * abs(alpha) * np.abs(np.log(modulus))
    if moderate:
        return np.power(modulus, alpha) * turn, None, slack
    mantissa, shift = np.frexp(modulus)
    logarithm = alpha * (shift if exponent is None else shift + exponent).astype(float)
    whole = np.rint(logarithm)
    value = np.power(mantissa, alpha) * np.exp2(logarithm - whole) * turn
    slack = SLACK * (16.0 + 8.0 * abs(alpha)) + 2.0 * UNIT * np.abs(logarithm)
    return value, np.where(np.isfinite(whole), whole, 0.0).astype(np.int64), slack


def _scaled_exponential(v: ComplexArray) -> tuple[ComplexArray, IntArray | None]:
    """exp(v) = value * 2^exponent; the rounding of the reduction is charged by the caller as 3 u |Re v|."""
    if np.all(np.abs(v.real) < 60.0):
        return np.exp(v), None
    limited = np.clip(np.where(np.isnan(v.real), 0.0, v.real), -LARGEST_EXPONENT_REAL, LARGEST_EXPONENT_REAL)
    whole = np.rint(limited / LOG_2)
    reduced = np.empty_like(v)
    reduced.real, reduced.imag = limited - whole * LOG_2, v.imag
    return np.exp(reduced), whole.astype(np.int64)


def _without_far_exponents(model: TaylorModel, real: FloatArray, rise: FloatArray) -> TaylorModel:
    """Replace cells whose exponent has lost its digits: not proved, or a disc about 0 where the value is far below."""
    far = ~(np.abs(real) < LARGEST_EXPONENT_REAL)
    if not far.any():
        return model
    below = real + rise < -LARGEST_EXPONENT_REAL
    zero = np.zeros_like(model.v)
    lowest = np.full(len(real), -int(LARGEST_EXPONENT_REAL), dtype=np.int64)
    disc = TaylorModel(zero, zero, zero, np.where(below, 1.0, np.inf), lowest)
    return choose(far, disc, model)


def integer_power(q: TaylorModel, n: int) -> TaylorModel:
    """q^n by repeated squaring; negative powers are proved where q^|n| is proved to exclude 0."""
    if n < 0:
        return reciprocal(integer_power(q, -n))
    result = None
    while n:
        if n & 1:
            result = q if result is None else multiply(result, q)
        n >>= 1
        q = multiply(q, q) if n else q
    return constant(1.0, 0.0, 0, len(q.v)) if result is None else result


def distance_from_zero_lower(q: TaylorModel) -> FloatArray:
    """A lower bound of |q| over the cell in units of 2^exponent; where it is > 0, q is proved to exclude 0.

    Distance of 0 to the segment {c + d t}, c = v + e/2, less |e|/2 and r (since |t^2 - 1/2| <= 1/2). NaN: not proved.
    """
    return _model_distance_lower(q.v, q.d, q.e, q.r)


def _model_distance_lower(v: ComplexArray, d: ComplexArray, e: ComplexArray, r: FloatArray) -> FloatArray:
    centre = v + 0.5 * e
    half_e = 0.5 * np.abs(e)
    return _segment_distance_lower(centre, d) - (half_e + r) * (1.0 + 2.0 * SLACK) - 2.0 * UNIT * np.abs(centre)


def _segment_distance_lower(c: ComplexArray, d: ComplexArray) -> FloatArray:
    """Distance of 0 to {c + d t, |t| <= 1}, rounded down: turned by -arg d the segment is parallel to the real axis."""
    length = np.abs(d)
    turned = c * np.conj(np.where(length > 1e-290, d / np.maximum(length, 1e-290), 1.0))
    beyond = np.maximum(np.abs(turned.real) - length, 0.0)
    distance: FloatArray = np.hypot(beyond, turned.imag) * (1.0 - SLACK) - 3.0 * SLACK * (np.abs(c) + length) - TINY
    return distance


def argument_range(q: TaylorModel) -> tuple[FloatArray, FloatArray]:
    """(lower, upper) bounds of the continuous argument of q over the cell, starting from the principal argument of v.

    Proved where q excludes 0; NaN elsewhere. The set of q is convex, so its argument is that of a point of the segment
    {c + d t} within arcsin(radius/distance).
    """
    c = q.v + 0.5 * q.e
    radius = 0.5 * np.abs(q.e) + q.r + 2.0 * UNIT * (np.abs(c) + np.abs(q.d))
    distance = _segment_distance_lower(c, q.d)
    spread = np.arcsin(np.where(radius < distance, radius / distance * (1.0 + 4.0 * SLACK), np.nan)) * (1.0 + SLACK)
    first = np.angle((c - q.d) * np.conj(q.v))
    last = np.angle((c + q.d) * np.conj(q.v))
    principal = np.angle(q.v)
    slack = 8.0 * SLACK  # three arctangents and two products
    return principal + np.minimum(first, last) - spread - slack, principal + np.maximum(first, last) + spread + slack


def rotate(q: TaylorModel, turn: ComplexArray | complex, slack: FloatArray | float = SLACK) -> TaylorModel:
    """q times numbers of modulus 1, known within ``slack``."""
    size = _sizes(q.v, q.d, q.e)
    r = outward(q.r * (1.0 + slack) + (SLACK + slack) * size)
    return TaylorModel(q.v * turn, q.d * turn, q.e * turn, r, q.exponent)


def unprove(q: TaylorModel, where: BoolArray) -> TaylorModel:
    """Infinite radius in the given cells; the values stay for plotting."""
    return q._replace(r=np.where(where, np.inf, q.r))


def choose(mask: BoolArray, p: TaylorModel, q: TaylorModel) -> TaylorModel:
    """p where ``mask`` holds, q elsewhere."""
    exponent = None
    if p.exponent is not None or q.exponent is not None:
        exponent = np.where(mask, exponents(p), exponents(q))
    v, d, e = np.where(mask, p.v, q.v), np.where(mask, p.d, q.d), np.where(mask, p.e, q.e)
    return TaylorModel(v, d, e, np.where(mask, p.r, q.r), exponent)


def size_upper(q: TaylorModel) -> FloatArray:
    """An upper bound of |q| over the cell as plain doubles; inf where it overflows or nothing is proved."""
    size = outward(_sizes(q.v, q.d, q.e) + q.r)
    if q.exponent is not None:
        size = np.ldexp(size, q.exponent) + TINY
    return np.where(np.isfinite(size), size, np.inf)


def exponents(q: TaylorModel) -> IntArray:
    """The exponents as an array, zeros where there are none."""
    return np.zeros(len(q.v), dtype=np.int64) if q.exponent is None else q.exponent


def _sizes(v: ComplexArray, d: ComplexArray, e: ComplexArray) -> FloatArray:
    return np.abs(v) + np.abs(d) + np.abs(e)


def _exponent_sum(p: IntArray | None, q: IntArray | None) -> IntArray | None:
    if p is None or q is None:
        return p if q is None else q
    return p + q


def _aligned(p: TaylorModel, q: TaylorModel) -> tuple[TaylorModel, TaylorModel]:
    """Both models with the larger of their exponents."""
    if p.exponent is None and q.exponent is None:
        return p, q
    top = np.maximum(exponents(p), exponents(q))
    return _with_exponent(p, top), _with_exponent(q, top)


def _with_exponent(q: TaylorModel, exponent: IntArray) -> TaylorModel:
    """The same sets, a little wider, with a larger exponent; what underflows is below TINY for sizes up to 2^140."""
    factor = np.ldexp(1.0, exponents(q) - exponent)
    small = _sizes(q.v, q.d, q.e) + q.r < LARGEST_SIZE * 2.0**40
    r = np.where(small | (factor == 1.0), q.r * factor + TINY, np.inf)
    return TaylorModel(q.v * factor, q.d * factor, q.e * factor, r, exponent)


def _unscaled(q: TaylorModel) -> tuple[ComplexArray, ComplexArray, ComplexArray, FloatArray]:
    """v, d, e, r as plain doubles; inf or NaN (not proved) where they overflow."""
    if q.exponent is None:
        return q.v, q.d, q.e, q.r
    factor = np.ldexp(1.0, q.exponent)
    r = np.where(np.isfinite(factor), q.r * factor + TINY, np.inf)
    return q.v * factor, q.d * factor, q.e * factor, r


def _normalised(q: TaylorModel, size: FloatArray) -> TaylorModel:
    """Move sizes outside 2^-100 ... 2^100 into the exponent; exact but for underflow, which TINY covers."""
    if size.min(initial=1.0) > 1.0 / LARGEST_SIZE and size.max(initial=1.0) < LARGEST_SIZE:
        return q
    size = np.where(np.isfinite(size), size, _sizes(q.v, q.d, q.e))  # unproved cells keep usable values
    outside = np.isfinite(size) & (size > 0.0) & ~((size > 1.0 / LARGEST_SIZE) & (size < LARGEST_SIZE))
    shift = np.where(outside, np.clip(np.frexp(size)[1], -FARTHEST_SHIFT, FARTHEST_SHIFT), 0).astype(np.int64)
    factor = np.ldexp(1.0, -shift)
    return TaylorModel(q.v * factor, q.d * factor, q.e * factor, q.r * factor + TINY, exponents(q) + shift)
