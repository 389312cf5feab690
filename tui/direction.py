"""Arrow heads on a curve, in the direction of travel, where there is room for them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from encircle.engine.result import ComplexArray
from encircle.tui.clipping import FloatArray, Window
from encircle.tui.dots import Canvas
from encircle.tui.drawing import Mark
from encircle.tui.glyphs import Glyph
from encircle.tui.roles import Role

MOST_MARKS = 4
# Lengths in heights of a character cell.
BETWEEN_MARKS = 6.0
ROOM = 1.4
TANGENT = 0.7
SHIFTS = np.array([0.0, 1.5, -1.5, 3.0, -3.0])
HEADS = (Glyph.RIGHT, Glyph.UP, Glyph.LEFT, Glyph.DOWN)


@dataclass(frozen=True, slots=True, eq=False)
class _Strand:
    """The visible samples of a line in units of cell heights, and how far along the line each lies, (n,) both."""

    points: ComplexArray
    way: FloatArray

    def at(self, way: float) -> int:
        return min(int(np.searchsorted(self.way, way)), self.way.size - 1)

    def has_room(self, place: int, keep_clear: ComplexArray) -> bool:
        """Nothing to keep clear of and no other part of the line is near the sample ``place``."""
        elsewhere = np.abs(self.way - self.way[place]) > 2 * ROOM
        near = np.abs(self.points - self.points[place]) < ROOM
        return not (near & elsewhere).any() and bool((np.abs(keep_clear - self.points[place]) >= ROOM).all())

    def head(self, place: int) -> Glyph:
        """The arrow head nearest to the direction of travel."""
        way = self.way[place]
        travel = self.points[self.at(way + TANGENT)] - self.points[self.at(way - TANGENT)]
        return HEADS[round(float(np.angle(travel)) / (np.pi / 2)) % 4]


def direction_marks(line: ComplexArray, window: Window, canvas: Canvas, keep_clear: ComplexArray) -> tuple[Mark, ...]:
    """Up to four arrow heads on the line, clear of the points ``keep_clear`` and of other parts of the line."""
    cell = (window.top - window.bottom) / canvas.rows
    seen = line[np.isfinite(line) & window.contains(line.real, line.imag)]
    if seen.size < 3:
        return ()
    # A long step is a stretch outside the window or between few samples: no place for a mark.
    steps = np.minimum(np.abs(np.diff(seen)) / cell, 2 * ROOM)
    strand = _Strand(seen / cell, np.concatenate(([0.0], np.cumsum(steps))))
    keep_clear = keep_clear[np.isfinite(keep_clear)]
    count = int(min(MOST_MARKS, np.ceil(strand.way[-1] / BETWEEN_MARKS)))
    wanted = strand.way[-1] * (np.arange(count) + 0.5) / max(count, 1)
    places = (_free_place(strand, float(way), keep_clear / cell) for way in wanted)
    points = ((seen[place], strand.head(place)) for place in places if place is not None)
    return tuple(Mark(float(point.real), float(point.imag), head, Role.DIRECTION) for point, head in points)


def _free_place(strand: _Strand, way: float, keep_clear: ComplexArray) -> int | None:
    """The sample nearest to ``way`` that has room, if there is one close by."""
    candidates: NDArray[np.float64] = way + SHIFTS
    for candidate in candidates[(candidates > 0) & (candidates < strand.way[-1])]:
        place = strand.at(float(candidate))
        if strand.has_room(place, keep_clear):
            return place
    return None
