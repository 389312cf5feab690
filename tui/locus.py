"""The polar curve as one line in the order of travel: in the plane, or in the plane folded into a disc.

Folding is z -> z/(1 + |z|): angles stay, infinity is the rim, the unit circle becomes the circle of radius 1/2 and -1
the point -1/2. NaN breaks a line.
"""

from __future__ import annotations

import numpy as np

from encircle.engine.result import Arc, ComplexArray, LoopCurve

ARC_STEP = np.pi / 90
BREAK = np.array([complex(np.nan, np.nan)])


def plane_line(curve: LoopCurve) -> ComplexArray:
    """L along the pieces, from its limit at standstill to that at infinity where these are finite."""
    parts: list[ComplexArray] = [_limit(curve.at_zero)]
    for start, stop in curve.pieces:
        parts += [BREAK] if start > 0 else []
        parts.append(curve.L[start:stop])
    return np.concatenate([*parts, _limit(curve.at_infinity)])


def folded_line(curve: LoopCurve) -> ComplexArray:
    """L along the whole upper half contour in the disc, the arcs at infinity on its rim."""
    parts: list[ComplexArray] = [fold(_limit(curve.at_zero)), *_arcs(curve, 0.0, _first_frequency(curve))]
    for start, stop in curve.pieces:
        if start > 0:
            parts += _arcs(curve, float(curve.frequency[start - 1]), float(curve.frequency[start])) or [BREAK]
        parts.append(fold(curve.L[start:stop]))
    return np.concatenate([*parts, *_arcs(curve, np.inf, np.inf), fold(_limit(curve.at_infinity))])


def fold(z: ComplexArray) -> ComplexArray:
    """Points of the plane in the disc; a number without a finite absolute value lands on the rim or is no number."""
    with np.errstate(over="ignore", invalid="ignore"):
        size = np.abs(z)
        return np.asarray(np.where(size < 1e300, z / (1 + size), np.exp(1j * np.angle(z))))


def _limit(value: complex | None) -> ComplexArray:
    return np.array([] if value is None else [value], dtype=complex)


def _first_frequency(curve: LoopCurve) -> float:
    return float(curve.frequency[0]) if curve.frequency.size else 0.0


def _arcs(curve: LoopCurve, lower: float, upper: float) -> list[ComplexArray]:
    """The arcs that lie between two frequencies, on the rim."""
    return [_on_rim(arc) for arc in curve.arcs if lower <= _frequency(arc) <= upper]


def _frequency(arc: Arc) -> float:
    return np.inf if arc.frequency is None else arc.frequency


def _on_rim(arc: Arc) -> ComplexArray:
    steps = 2 + int(abs(arc.end_angle - arc.start_angle) / ARC_STEP)
    return np.asarray(np.exp(1j * np.linspace(arc.start_angle, arc.end_angle, steps)))
