"""From polylines to the dots of a character canvas: thinning that no eye can see.

A braille character is 2 dots wide and 4 dots high. A line becomes the set of dots that it passes, each dot once, so
that the work behind never exceeds the size of the canvas, and extremes and crossings stay where they are.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from encircle.tui.clipping import FloatArray, IntArray, Segments, Window, clip

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


def line_dots(lines: Sequence[tuple[FloatArray, FloatArray]], window: Window, canvas: Canvas) -> list[IntArray]:
    """The distinct dots (m, 2) of each polyline through (x, y), in order of travel, from the left and from the bottom.

    The outermost dots lie on the window's edges. All lines are worked on at once.
    """
    x, y, number = _joined(lines)
    segments = clip(x, y, window)
    steps = _thin(_passed(segments, number[segments.first], canvas))
    key = (steps[:, 0] * canvas.dots_across + steps[:, 1]) * canvas.dots_upward + steps[:, 2]
    _, first = np.unique(key, return_index=True)
    steps = steps[np.sort(first)]
    ends = np.searchsorted(steps[:, 0], np.arange(1, len(lines)))
    return [dots[:: 1 + len(dots) // MOST_DOTS] for dots in np.split(steps[:, 1:], ends)]


def _joined(lines: Sequence[tuple[FloatArray, FloatArray]]) -> tuple[FloatArray, FloatArray, IntArray]:
    """One polyline with a break after each line, and the number of the line that each point belongs to."""
    gap = np.array([np.nan])
    x = np.concatenate([part for x, _ in lines for part in (x, gap)])
    y = np.concatenate([part for _, y in lines for part in (y, gap)])
    return x, y, np.repeat(np.arange(len(lines)), [len(x) + 1 for x, _ in lines])


def _passed(segments: Segments, number: IntArray, canvas: Canvas) -> IntArray:
    """Along every segment, at steps of at most one dot and at both ends: line number and dot, (m, 3)."""
    width, height = canvas.dots_across - 1, canvas.dots_upward - 1
    x0, y0 = segments.x0 * width, segments.y0 * height
    dx, dy = segments.x1 * width - x0, segments.y1 * height - y0
    steps = np.ceil(np.maximum(np.abs(dx), np.abs(dy))).astype(np.intp)
    which = np.repeat(np.arange(steps.size), steps + 1)
    first = np.cumsum(steps + 1) - (steps + 1)
    t = (np.arange(which.size) - first[which]) / np.maximum(steps, 1)[which]
    across, upward = np.rint(x0[which] + t * dx[which]), np.rint(y0[which] + t * dy[which])
    return np.stack([number[which], across.astype(np.intp), upward.astype(np.intp)], axis=1)


def _thin(steps: IntArray) -> IntArray:
    """The same lines without repeated dots and without dots that only fill a corner between two others."""
    if len(steps) == 0:
        return steps
    moved = (np.diff(steps, axis=0) != 0).any(axis=1)
    steps = steps[np.concatenate(([True], moved))]
    straight = np.abs(np.diff(steps, axis=0)).sum(axis=1) == 1
    corner = np.zeros(len(steps), dtype=bool)
    corner[1:-1] = straight[:-1] & straight[1:] & (steps[2:, 1:] != steps[:-2, 1:]).all(axis=1)
    # Of corners in a row every second one goes, or the line would tear.
    place = np.arange(len(steps))
    run_start = np.maximum.accumulate(np.where(corner, 0, place + 1))
    return np.asarray(steps[~(corner & ((place - run_start) % 2 == 0))])
