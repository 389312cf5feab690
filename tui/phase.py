"""The phase of L as it runs along the contour."""

from __future__ import annotations

import numpy as np

from encircle.engine.result import Arc, LoopCurve
from encircle.tui.clipping import FloatArray


def phase_degrees(curve: LoopCurve) -> FloatArray:
    """The phase (n,) of L in degrees, continuous within each piece.

    Between pieces it goes on by the turn of the arc that joins them; the first piece starts where the arc at
    standstill ends, or between -270 and 90 degrees where there is none. NaN where L is no finite number.
    """
    phase = np.full(curve.frequency.size, np.nan)
    reached: float | None = None
    for start, stop in curve.pieces:
        known = start + np.flatnonzero(np.isfinite(curve.L[start:stop]))
        if known.size == 0:
            continue
        piece = np.unwrap(np.angle(curve.L[known]))
        before = curve.frequency[start - 1] if start > 0 else 0.0
        begin = _begin(curve.arcs, before, curve.frequency[start], reached)
        phase[known] = piece + _whole_turns(begin - piece[0])
        reached = float(phase[known[-1]])
    return np.asarray(np.degrees(phase))


def _begin(arcs: tuple[Arc, ...], lower: float, upper: float, reached: float | None) -> float:
    """Where the phase of a piece is expected to begin, in rad."""
    for arc in arcs:
        if arc.frequency is not None and lower <= arc.frequency <= upper:
            return arc.end_angle if reached is None else reached + arc.end_angle - arc.start_angle
    return -np.pi / 2 if reached is None else reached


def _whole_turns(angle: float) -> float:
    return 2 * np.pi * round(angle / (2 * np.pi))
