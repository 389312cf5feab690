"""The curve of L sampled finely enough that between two neighbours nothing is missed that a model can show.

Points are placed at features of the blocks and where certified cells had to be narrow, the ends are moved outward
until L follows its asymptotes, and neighbours are halved until L and 1 + L turn and grow by little from one to the
next. What decides a verdict is the certified count; the samples only locate crossings and extremes, and the crossings
found are checked against the count.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from encircle.engine.far_end import FarEnd
from encircle.engine.grids import distinct
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import BoolArray, ComplexArray, FloatArray

POINTS_PER_DECADE = 12
LARGEST_TURN = 0.3  # rad, of L and of 1 + L between neighbours
LARGEST_GROWTH = 0.6  # of log|L| and log|1 + L|
MOST_POINTS = 200_000
MOST_ROUNDS = 30
FAR = 1e12  # ends are moved outward by at most this factor
NEAREST_TO_POLE = 1e-8  # relative distance to an axis pole at which a piece of the curve starts


@dataclass(frozen=True, slots=True)
class SampledCurve:
    """``omega`` (n,) ascending in rad/s, ``L`` and ``slope`` = dL/d omega (n,); ``breaks``: axis poles between the
    pieces.
    """

    omega: FloatArray
    L: ComplexArray
    slope: ComplexArray
    breaks: FloatArray

    @property
    def joined(self) -> BoolArray:
        """(n - 1,) whether neighbours belong to one unbroken piece."""
        if len(self.breaks) == 0:
            return np.ones(len(self.omega) - 1, bool)
        piece = np.searchsorted(self.breaks, self.omega)
        same: BoolArray = piece[1:] == piece[:-1]
        return same


def sample(loop: OpenLoop, hints: FloatArray, smallest: float, finer: int = 1) -> SampledCurve:
    """Sample L over all frequencies where it matters.

    ``hints``: frequencies (rad/s) where narrow structure is known. ``smallest``: with dead time, the curve is followed
    until |L| stays below this. ``finer`` multiplies the density.
    """
    breaks = np.array([pole.omega for pole in loop.poles if pole.omega > 0.0])
    omega = _start(loop, hints, breaks, finer, smallest)
    L, slope = loop.at(omega)
    for _ in range(MOST_ROUNDS):
        middle = _wanted(SampledCurve(omega, L, slope, breaks), smallest if loop.endless else 0.0, finer)
        if not len(middle) or len(omega) > MOST_POINTS:
            break
        more_L, more_slope = loop.at(middle)
        omega = np.concatenate([omega, middle])
        order = np.argsort(omega)
        omega, L, slope = omega[order], np.concatenate([L, more_L])[order], np.concatenate([slope, more_slope])[order]
    good = np.isfinite(L) & np.isfinite(slope)
    return SampledCurve(omega[good], L[good], slope[good], breaks)


def _start(loop: OpenLoop, hints: FloatArray, breaks: FloatArray, finer: int, smallest: float) -> FloatArray:
    lowest, highest = _ends(loop, smallest)
    decades = np.log10(highest / lowest)
    grid = np.geomspace(lowest, highest, max(8, int(POINTS_PER_DECADE * finer * decades)))
    inner = hints[(hints > lowest) & (hints < highest)]
    closeness = 10.0 ** -np.arange(1.0, 1.5 - np.log10(NEAREST_TO_POLE))
    near = [pole * (1.0 + sign * closeness) for pole in breaks for sign in (-1.0, 1.0)]
    omega = distinct(np.concatenate([grid, inner, *near]))
    for pole in breaks:
        omega = omega[np.abs(omega - pole) >= 0.9 * NEAREST_TO_POLE * pole]
    return omega


def _ends(loop: OpenLoop, smallest: float) -> tuple[float, float]:
    """Frequencies below and above which L follows its asymptote (or, with dead time, stays small)."""
    steps = 10.0 ** np.arange(0.0, np.log10(FAR) + 1.0)
    below = 0.1 * loop.system.lowest / steps
    L, slope = loop.at(below)
    settled = _on_asymptote(below, L, slope, loop.zero.order, loop.zero.limit)
    settled &= _beyond_one(L, loop.zero.order)
    lowest = below[np.argmax(settled)] if settled.any() else below[-1]
    above = 10.0 * loop.system.highest * steps
    L, slope = loop.at(above)
    far = loop.infinity
    if loop.endless:
        settled = (np.abs(L) < smallest) | (np.abs(L) > 1.0 / smallest) & (far.order > 0.0) | (far.order == 0)
    elif loop.delayed and far.value != 0.0:
        settled = _near_asymptote(above, L, far) & _beyond_one(L, -far.order)
    else:
        settled = _on_asymptote(above, L, slope, far.order, far.limit) & _beyond_one(L, -far.order)
    settled |= ~np.isfinite(L)  # above the last measured line nothing is known
    highest = above[np.argmax(settled)] if settled.any() else above[-1]
    return float(lowest), float(highest)


def _on_asymptote(
    omega: FloatArray, L: ComplexArray, slope: ComplexArray, order: float, limit: float | None
) -> BoolArray:
    """d log L/d log omega is close to its limit; a finite limit is reached on its own side of |L| = 1."""
    with np.errstate(all="ignore"):
        settled = np.abs(omega * slope / L - order) <= 1e-3
        if limit is not None:
            settled &= (np.abs(L) > 1.0) == (abs(limit) > 1.0)
            settled &= np.abs(omega * slope / (1.0 + L)) <= 1e-3
            settled |= np.abs(L) == 0.0
    return settled


def _near_asymptote(omega: FloatArray, L: ComplexArray, far: FarEnd) -> BoolArray:
    """L is within reach of value * (j omega)^order: delayed terms of lower order no longer turn it across an axis."""
    with np.errstate(all="ignore"):
        return np.abs(L / (far.value * (1j * omega) ** far.order) - 1.0) < 0.3 + far.spread()


def _beyond_one(L: ComplexArray, order: float) -> BoolArray:
    """Moving outward, |L| has left 1 behind for good: large where it grows without bound, small where it vanishes."""
    if order == 0.0:
        return np.ones(len(L), bool)
    with np.errstate(all="ignore"):
        return np.abs(L) > 10.0 if order < 0.0 else np.abs(L) < 0.1


def _wanted(curve: SampledCurve, smallest: float, finer: int) -> FloatArray:
    """Midpoints (geometric) of neighbours between which L or 1 + L changes too much."""
    L, F = curve.L, 1.0 + curve.L
    with np.errstate(all="ignore"):
        ratio_L, ratio_F = L[1:] / L[:-1], F[1:] / F[:-1]
        turn = np.maximum(np.abs(np.angle(ratio_F)), np.abs(np.angle(ratio_L)))
        growth = np.maximum(np.abs(np.log(np.abs(ratio_F))), np.abs(np.log(np.abs(ratio_L))))
        predicted = np.abs(curve.slope[:-1]) * np.diff(curve.omega)
        rough = predicted > 2.0 * LARGEST_TURN / finer * np.minimum(np.abs(F[:-1]), np.abs(L[:-1]))
    large = (np.abs(L) > smallest)[1:] | (np.abs(L) > smallest)[:-1]
    coarse = (turn * finer > LARGEST_TURN) | (growth * finer > LARGEST_GROWTH) | rough
    narrow = np.diff(curve.omega) <= 1e-13 * curve.omega[1:]
    at = np.flatnonzero(coarse & large & curve.joined & ~narrow & np.isfinite(turn))
    return np.sqrt(curve.omega[at]) * np.sqrt(curve.omega[at + 1])
