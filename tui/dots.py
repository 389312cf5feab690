"""From polylines to the dots of a character canvas: thinning that no eye can see.

A braille character is 2 dots wide and 4 dots high. A line becomes the set of dots that it passes, each dot once, so
that the work behind never exceeds the size of the canvas, and extremes and crossings stay where they are.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from encircle.tui.clipping import FloatArray, Segments, Window, clip

IntArray = NDArray[np.intp]

DOTS_ACROSS = 2
DOTS_UPWARD = 4
# A line that fills an area with more dots than this is thinned along its way; it looks lighter, not different.
MOST_DOTS = 3000


@dataclass(frozen=True, slots=True)
class Canvas:
    """The part of a plot in which curves are drawn: its size in character cells, each at least 1."""

    columns: int
    rows: int

    @property
    def dots_across(self) -> int:
        return DOTS_ACROSS * self.columns

    @property
    def dots_upward(self) -> int:
        return DOTS_UPWARD * self.rows

    def cell(self, x: float, y: float, window: Window) -> tuple[int, int]:
        """Column from the left and row from the bottom of the cell at a point inside the window."""
        across = (x - window.left) / (window.right - window.left)
        upward = (y - window.bottom) / (window.top - window.bottom)
        column = round(across * (self.dots_across - 1)) // DOTS_ACROSS
        return column, round(upward * (self.dots_upward - 1)) // DOTS_UPWARD


def line_dots(x: FloatArray, y: FloatArray, window: Window, canvas: Canvas) -> IntArray:
    """The distinct dots (m, 2) of the polyline through (x, y), as (from the left, from the bottom), in order of travel.

    The outermost dots lie on the window's edges.
    """
    dots = _without_corners(_without_repeats(_passed(clip(x, y, window), canvas)))
    key = dots[:, 0] * canvas.dots_upward + dots[:, 1]
    _, first = np.unique(key, return_index=True)
    first.sort()
    stride = 1 + first.size // MOST_DOTS
    return np.asarray(dots[first[::stride]])


def _passed(segments: Segments, canvas: Canvas) -> IntArray:
    """Dots along every segment at steps of at most one dot, both ends included."""
    width, height = canvas.dots_across - 1, canvas.dots_upward - 1
    x0, y0 = segments.x0 * width, segments.y0 * height
    dx, dy = segments.x1 * width - x0, segments.y1 * height - y0
    steps = np.ceil(np.maximum(np.abs(dx), np.abs(dy))).astype(np.intp)
    which = np.repeat(np.arange(steps.size), steps + 1)
    first = np.cumsum(steps + 1) - (steps + 1)
    t = (np.arange(which.size) - first[which]) / np.maximum(steps, 1)[which]
    dots = np.stack([np.rint(x0[which] + t * dx[which]), np.rint(y0[which] + t * dy[which])], axis=1)
    return dots.astype(np.intp)


def _without_repeats(dots: IntArray) -> IntArray:
    """Dots that differ from the one before."""
    if len(dots) == 0:
        return dots
    moved = (np.diff(dots, axis=0) != 0).any(axis=1)
    return dots[np.concatenate(([True], moved))]


def _without_corners(dots: IntArray) -> IntArray:
    """The same line one dot thin: a dot is left out where its neighbours touch by their corners without it."""
    if len(dots) < 3:
        return dots
    straight = np.abs(np.diff(dots, axis=0)).sum(axis=1) == 1
    corner = np.zeros(len(dots), dtype=bool)
    corner[1:-1] = straight[:-1] & straight[1:] & (np.abs(dots[2:] - dots[:-2]) == 1).all(axis=1)
    # Of corners in a row every second one goes, or the line would tear.
    place = np.arange(len(dots))
    run_start = np.maximum.accumulate(np.where(corner, 0, place + 1))
    return np.asarray(dots[~(corner & ((place - run_start) % 2 == 0))])
