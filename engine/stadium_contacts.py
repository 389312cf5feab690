"""Where a stadium first meets -1 when it is scaled or turned, and how near it comes: closed forms, cell by cell.

A stadium is a segment widened by a disc: {c + q t + z, |t| <= 1, |z| <= rho}, with -1 outside. All its extremes lie on
its boundary, two circles and two straight sides, whose points are members of the closed set; so each extreme is the
best of a few candidates.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from encircle.engine.result import BoolArray, ComplexArray, FloatArray

FULL_TURN = 2.0 * np.pi


class Stadiums(NamedTuple):
    """Centres ``c``, half segments ``q`` (complex) and radii ``rho`` >= 0, arrays of one shape."""

    c: ComplexArray
    q: ComplexArray
    rho: FloatArray

    @property
    def reach(self) -> FloatArray:
        """The largest distance of a member from the centre."""
        return np.abs(self.q) + self.rho

    def columns(self, mask: BoolArray) -> Stadiums:
        """Those of the last axis for which ``mask`` holds."""
        return Stadiums(self.c[..., mask], self.q[..., mask], self.rho[..., mask])

    def where(self, mask: BoolArray) -> Stadiums:
        """Those for which ``mask`` holds, as arrays of one dimension."""
        return Stadiums(self.c[mask], self.q[mask], self.rho[mask])


class Turns(NamedTuple):
    """Angles in (0, 2 pi) by which a set turns until it meets -1: clockwise (lag), the other way (lead), or inf."""

    lag: FloatArray
    lead: FloatArray


class RealPart(NamedTuple):
    """The least and the largest real member of each set; NaN where it has none."""

    least: FloatArray
    most: FloatArray


def distance(sets: Stadiums, point: complex) -> FloatArray:
    """Distance of a point from each stadium, negative inside."""
    c, q = sets.c - point, sets.q
    length = (q * q.conj()).real
    t = np.clip(-(q.conj() * c).real / np.where(length > 0.0, length, 1.0), -1.0, 1.0)
    gap: FloatArray = np.abs(c + q * t) - sets.rho
    return gap


def least_ratio(sets: Stadiums) -> FloatArray:
    """Lower bounds of |1 + z|/|z| over stadiums that exclude -1, exact wherever they may be the least of all.

    Elsewhere a bound by centre and reach stands, once it exceeds the value at some centre.
    """
    with np.errstate(all="ignore"):
        crude = np.maximum(np.abs(1.0 + sets.c) - sets.reach, 0.0) / (np.abs(sets.c) + sets.reach)
        close = ~(crude > np.fmin.reduce(np.abs(1.0 + sets.c) / np.abs(sets.c), axis=None, initial=np.inf))
        crude[close] = _least_ratio_exactly(sets.where(close))
    return crude


def _least_ratio_exactly(sets: Stadiums) -> FloatArray:
    """z/(1 + z) = 1 - 1/(1 + z) maps discs to discs; along a side (|1 + z|/|z|)^2 has a quadratic in its derivative."""
    ends = np.maximum(_largest_over_disc(sets.c + sets.q, sets.rho), _largest_over_disc(sets.c - sets.q, sets.rho))
    least = 1.0 / ends
    for side in _sides(sets):
        least = np.fmin(least, _least_ratio_on_side(side, sets.q))
    return least


def _largest_over_disc(c: ComplexArray, rho: FloatArray) -> FloatArray:
    """The largest |z/(1 + z)| over a disc; inf where it holds -1."""
    with np.errstate(all="ignore"):
        room = (np.abs(1.0 + c) - rho) * (np.abs(1.0 + c) + rho)
        largest = np.abs(1.0 - (1.0 + c).conj() / room) + rho / room
    return np.where(room > 0.0, largest, np.inf)


def _least_ratio_on_side(p: ComplexArray, u: ComplexArray) -> FloatArray:
    """The least |1 + z|/|z| at a stationary point inside z = p + u t, |t| < 1; NaN where there is none."""
    slope_far, slope_near = ((1.0 + p) * u.conj()).real, (p * u.conj()).real
    far, near, length = np.abs(1.0 + p) ** 2, np.abs(p) ** 2, np.abs(u) ** 2
    square, linear, free = length * (slope_near - slope_far), length * (near - far), slope_far * near - far * slope_near
    least = np.full(p.shape, np.nan)
    for t in _quadratic_roots(square, 0.5 * linear, free):
        z = p + u * np.where(np.abs(t) <= 1.0, t, np.nan)
        least = np.fmin(least, np.abs(1.0 + z) / np.abs(z))
    return least


def _quadratic_roots(a: FloatArray, half_b: FloatArray, c: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Real roots of a t^2 + 2 half_b t + c without cancellation; NaN where there are none."""
    root = np.sqrt(half_b * half_b - a * c)
    sum_of_like_signs = -(half_b + np.where(half_b < 0.0, -root, root))
    return sum_of_like_signs / a, c / sum_of_like_signs


def _sides(sets: Stadiums) -> tuple[ComplexArray, ComplexArray]:
    """Middles of the two straight sides; NaN for a disc."""
    normal = 1j * sets.rho * sets.q / np.abs(sets.q)
    return sets.c + normal, sets.c - normal


def real_part(sets: Stadiums) -> RealPart:
    """The ends of each stadium's part of the real axis; they lie on its boundary."""
    least, most = np.full((2, *sets.rho.shape), np.nan)
    near = np.abs(sets.c.imag) <= sets.reach
    with np.errstate(all="ignore"):
        points = np.array(_real_points(sets.where(near))).reshape(6, -1)
    least[near], most[near] = np.fmin.reduce(points), np.fmax.reduce(points)
    return RealPart(least, most)


def _real_points(sets: Stadiums) -> list[FloatArray]:
    """Points of the real axis on the boundary, NaN where there is none."""
    points = []
    for end in (sets.c + sets.q, sets.c - sets.q):
        half = np.sqrt((sets.rho - end.imag) * (sets.rho + end.imag))
        points += [end.real - half, end.real + half]
    for side in _sides(sets):
        t = -side.imag / sets.q.imag
        points.append(np.where(np.abs(t) <= 1.0, side.real + t * sets.q.real, np.nan))
    return points


def turns(sets: Stadiums) -> Turns:
    """How far each stadium turns about 0 until it meets -1: its points on the unit circle, as angles from -1."""
    lag, lead = np.full((2, *sets.rho.shape), np.inf)
    near = np.abs(np.abs(sets.c) - 1.0) <= sets.reach
    with np.errstate(all="ignore"):
        angles = np.array(_circle_angles(sets.where(near))).reshape(8, -1)
        lag[near] = np.fmin.reduce(np.mod(angles - np.pi, FULL_TURN), initial=np.inf)
        lead[near] = np.fmin.reduce(np.mod(np.pi - angles, FULL_TURN), initial=np.inf)
    return Turns(lag, lead)


def _circle_angles(sets: Stadiums) -> list[FloatArray]:
    """Angles of the points of the unit circle on each boundary, NaN where there is none."""
    angles = []
    for end in (sets.c + sets.q, sets.c - sets.q):
        size = np.abs(end)
        half = np.arccos((1.0 + (size - sets.rho) * (size + sets.rho)) / (2.0 * size))
        angles += [np.angle(end) - half, np.angle(end) + half]
    for side in _sides(sets):
        square, linear = np.abs(sets.q) ** 2, (side * sets.q.conj()).real
        for t in _quadratic_roots(square, linear, np.abs(side) ** 2 - 1.0):
            angles.append(np.angle(side + sets.q * np.where(np.abs(t) <= 1.0, t, np.nan)))
    return angles
