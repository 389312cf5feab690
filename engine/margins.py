"""Margins of a loop known by models: distances to a change of Z along gain, phase and dead time, and extremes of S
and T.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from encircle.engine.crossings import roots_of, unit_crossings
from encircle.engine.gain_map import FactorRange
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import (
    DelayMargin,
    FloatArray,
    GainMargin,
    Margins,
    ModulusMargin,
    Peak,
    PhaseMargin,
)
from encircle.engine.sampled_curve import SampledCurve

# Neighbouring samples differ by less than this, so a sample within the factor may lie beside the extreme
BESIDE_EXTREME = 2.5


def margins(loop: OpenLoop, curve: SampledCurve, ranges: Sequence[FactorRange], unit: float) -> Margins:
    """All margins; ``unit`` is the file's frequency unit in rad/s (2 pi for Hz)."""
    crossovers = unit_crossings(loop, curve)
    distance, near = _least_distance(loop, curve)
    T, peak = _largest_complementary(loop, curve)
    S = 1.0 / distance
    return Margins(
        gain_increase=_gain_margin(ranges, upward=True, unit=unit),
        gain_decrease=_gain_margin(ranges, upward=False, unit=unit),
        phase=_phase_margin(loop, crossovers, unit),
        delay=_delay_margin(loop, crossovers, unit),
        modulus=ModulusMargin(distance, frequency_of(near, unit)),
        sensitivity_peak=Peak(S, decibels(S), frequency_of(near, unit)),
        complementary_peak=Peak(T, decibels(T), frequency_of(peak, unit)),
        gain_crossovers=tuple(float(w) / unit for w in crossovers),
    )


def decibels(size: float) -> float:
    """20 log10 of a size > 0; a size of 0 gives the smallest double's."""
    return 20.0 * float(np.log10(max(size, 1e-300)))


def _gain_margin(ranges: Sequence[FactorRange], upward: bool, unit: float) -> GainMargin | None:
    """The end of the range that holds 1, above or below."""
    present = next(r for r in ranges if r.lower < 1.0 and (r.upper is None or r.upper > 1.0))
    factor, omega = (present.upper, present.upper_omega) if upward else (present.lower, present.lower_omega)
    if factor is None or factor == 0.0:
        return None
    return GainMargin(factor, abs(decibels(factor)), frequency_of(omega, unit))


def frequency_of(omega: float | None, unit: float) -> float | None:
    """A frequency in the file's unit, ``None`` at infinity."""
    return None if omega is None or np.isinf(omega) else float(omega) / unit


def _lag_angles(loop: OpenLoop, crossovers: FloatArray) -> FloatArray:
    """How far L must turn clockwise from each crossover to reach -1, in (0, 2 pi]."""
    L, _ = loop.at(crossovers)
    angle = np.mod(np.angle(L) + np.pi, 2.0 * np.pi)
    return np.where(angle == 0.0, 2.0 * np.pi, angle)


def _phase_margin(loop: OpenLoop, crossovers: FloatArray, unit: float) -> PhaseMargin | None:
    if not len(crossovers):
        return None
    lag = _lag_angles(loop, crossovers)
    smaller = np.minimum(lag, 2.0 * np.pi - lag)
    i = int(np.argmin(smaller))
    degrees, frequency = float(np.degrees(smaller[i])), float(crossovers[i]) / unit
    return PhaseMargin(degrees, "lag" if lag[i] <= np.pi else "lead", frequency)


def _delay_margin(loop: OpenLoop, crossovers: FloatArray, unit: float) -> DelayMargin | None:
    """The smallest lag angle over frequency; 0 where lim sup |L| >= 1 at infinity, since any dead time turns it past
    -1.
    """
    if loop.infinity.largest_size() >= 1.0:
        return DelayMargin(0.0, None)
    if not len(crossovers):
        return None
    seconds = _lag_angles(loop, crossovers) / crossovers
    i = int(np.argmin(seconds))
    return DelayMargin(float(seconds[i]), float(crossovers[i]) / unit)


def _least_distance(loop: OpenLoop, curve: SampledCurve) -> tuple[float, float]:
    """The least |1 + L| and its frequency in rad/s: inside, at 0 or in the limit at infinity."""
    sizes = np.abs(1.0 + curve.L)
    near = sizes <= BESIDE_EXTREME * sizes.min(initial=np.inf)
    omega = roots_of(loop, curve, lambda L, slope: (slope / (1.0 + L)).real, near)
    L, _ = loop.at(omega)
    found = list(zip(np.abs(1.0 + L).tolist(), omega.tolist(), strict=True))
    near = loop.zero
    if near.order >= 0:
        found.append((abs(1.0 + near.value) if near.order == 0 else 1.0, 0.0))
    found.append((loop.infinity.least_distance(), np.inf))
    return min(found)


def _largest_complementary(loop: OpenLoop, curve: SampledCurve) -> tuple[float, float]:
    """The largest |L/(1 + L)| and its frequency in rad/s: inside, at 0, at a pole of L on the axis or at infinity."""
    with np.errstate(all="ignore"):
        sampled = np.nan_to_num(np.abs(curve.L / (1.0 + curve.L)))
    near = sampled * BESIDE_EXTREME >= sampled.max(initial=0.0)
    omega = roots_of(loop, curve, lambda L, slope: (slope / (L * (1.0 + L))).real, near)
    L, _ = loop.at(omega)
    with np.errstate(all="ignore"):
        sizes = np.abs(L / (1.0 + L))
    found = [(float(size), -float(w)) for size, w in zip(sizes, omega, strict=True) if np.isfinite(size)]
    found += [(1.0, -pole.omega) for pole in loop.poles if pole.omega > 0.0]
    near = loop.zero
    if near.order <= 0:
        found.append((abs(near.value / (1.0 + near.value)) if near.order == 0 else 1.0, 0.0))
    found.append((loop.infinity.largest_complementary(), -np.inf))
    size, place = max(found)
    return size, abs(place)
