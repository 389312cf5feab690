"""A curve that holds the marked frequencies as points of its own, so that the cursor and the marks stand exactly."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from encircle.engine.result import ComplexArray, FloatArray, LoopCurve


def with_points(curve: LoopCurve, frequency: FloatArray, L: ComplexArray) -> LoopCurve:
    """``curve`` with the points (``frequency``, ``L``), each (m,), put in where it has none; its pieces stay whole.

    Points outside the curve, and those that are not finite, are left out; the width of the band between two points of
    the curve is the larger of theirs.
    """
    usable = np.isfinite(L) & (L != -1) & ~np.isin(frequency, curve.frequency)
    usable &= (frequency > curve.frequency[0]) & (frequency < curve.frequency[-1])
    points, first = np.unique(frequency[usable], return_index=True)
    values = L[usable][first]
    places = np.searchsorted(curve.frequency, points)
    S = 1 / (1 + values)
    return replace(
        curve,
        frequency=np.insert(curve.frequency, places, points),
        L=np.insert(curve.L, places, values),
        S=np.insert(curve.S, places, S),
        T=np.insert(curve.T, places, values * S),
        radius=np.insert(curve.radius, places, np.maximum(curve.radius[places - 1], curve.radius[places])),
        pieces=tuple((_moved(start, places), _moved(stop, places)) for start, stop in curve.pieces),
    )


def _moved(index: int, places: NDArray[np.intp]) -> int:
    """Where the boundary of a piece goes; a point put in between two pieces joins the later one."""
    return index + int(np.count_nonzero(places < index))
