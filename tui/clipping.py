"""Clipping of polylines to a window, all segments at once.

The method is the parametric one of Y.-D. Liang and B. A. Barsky, "A new concept and method for line clipping",
ACM Transactions on Graphics 3 (1984) 1-22. Segments with an end that is no finite number are dropped.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.intp]

# Points further off than this many window widths are drawn in along the ray from the window's centre, so that no
# difference overflows; the line then leaves the window less than a millionth of its width from where it should.
FARTHEST = 1e9


@dataclass(frozen=True, slots=True)
class Window:
    """The rectangle of the plane that is seen; ``left < right`` and ``bottom < top``, all finite."""

    left: float
    right: float
    bottom: float
    top: float

    def __post_init__(self) -> None:
        edges = (self.left, self.right, self.bottom, self.top)
        if not (np.isfinite(edges).all() and self.left < self.right and self.bottom < self.top):
            raise ValueError(f"no window has the edges {edges}")

    def contains(self, x: ArrayLike, y: ArrayLike) -> NDArray[np.bool_]:
        """Which points lie inside or on the edge."""
        inside_x = (np.asarray(x) >= self.left) & (np.asarray(x) <= self.right)
        return inside_x & (np.asarray(y) >= self.bottom) & (np.asarray(y) <= self.top)

    def fractions(self, x: ArrayLike, y: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Positions as fractions of the window's width and height: 0 at left and bottom, 1 at right and top."""
        across = (np.asarray(x, dtype=float) - self.left) / (self.right - self.left)
        upward = (np.asarray(y, dtype=float) - self.bottom) / (self.top - self.bottom)
        return across, upward


@dataclass(frozen=True, slots=True, eq=False)
class Segments:
    """The visible parts of a polyline in order of travel: from (x0, y0) to (x1, y1), each (m,), fractions in [0, 1].

    ``first`` (m,): the point of the polyline at which the segment began before it was clipped.
    """

    first: IntArray
    x0: FloatArray
    y0: FloatArray
    x1: FloatArray
    y1: FloatArray


def clip(x: FloatArray, y: FloatArray, window: Window) -> Segments:
    """The visible parts of the polyline through (x, y), each (n,), as fractions of the window.

    A number that is not finite breaks the line. A point between two breaks is a segment of no length.
    """
    with np.errstate(over="ignore", invalid="ignore"):
        across, upward = _drawn_in(*window.fractions(x, y))
    whole = np.concatenate(([False], np.isfinite(across) & np.isfinite(upward), [False]))
    before, here, after = whole[:-2], whole[1:-1], whole[2:]
    first = np.flatnonzero(here & (after | ~before))
    last = first + after[first]
    return _clip_to_unit_square(first, across[first], upward[first], across[last], upward[last])


def _drawn_in(across: FloatArray, upward: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Far points moved towards the window's centre to the distance FARTHEST."""
    distance = np.maximum(np.abs(across - 0.5), np.abs(upward - 0.5))
    scale = FARTHEST / np.maximum(distance, FARTHEST)
    return 0.5 + (across - 0.5) * scale, 0.5 + (upward - 0.5) * scale


def _clip_to_unit_square(first: IntArray, x0: FloatArray, y0: FloatArray, x1: FloatArray, y1: FloatArray) -> Segments:
    """Liang-Barsky: each edge bounds the parameter t of the point (x0, y0) + t (x1 - x0, y1 - y0) from one side."""
    dx, dy = x1 - x0, y1 - y0
    towards = np.stack([-dx, dx, -dy, dy])
    room = np.stack([x0, 1 - x0, y0, 1 - y0])
    with np.errstate(divide="ignore", invalid="ignore"):
        t = room / towards
    entering = np.where(towards < 0, t, 0.0).max(axis=0, initial=0.0)
    leaving = np.where(towards > 0, t, 1.0).min(axis=0, initial=1.0)
    parallel_outside = ((towards == 0) & (room < 0)).any(axis=0)
    seen = (entering <= leaving) & ~parallel_outside
    x0, y0, dx, dy, entering, leaving = (part[seen] for part in (x0, y0, dx, dy, entering, leaving))
    return Segments(
        first[seen],
        np.clip(x0 + entering * dx, 0, 1),
        np.clip(y0 + entering * dy, 0, 1),
        np.clip(x0 + leaving * dx, 0, 1),
        np.clip(y0 + leaving * dy, 0, 1),
    )
