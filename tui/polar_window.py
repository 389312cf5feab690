"""Which rectangle of the plane a polar plot shows. One unit is as long upwards as it is across, whatever the canvas."""

from __future__ import annotations

import numpy as np

from encircle.engine.result import ComplexArray
from encircle.tui.clipping import FloatArray, Window
from encircle.tui.dots import DOTS_ACROSS, DOTS_UPWARD, Canvas

# What of L counts as near: a curve that stays within FINITE is shown whole, of others the part within NEAR.
FINITE = 4.0
NEAR = 2.0
FARTHEST_CROSSING = 6.0
# Windows end at these distances from 0, so that a small change of gain moves the curve and not the picture.
EDGES = np.array([1.2, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.5])
FOLDED_HALF = 1.04
NEAR_HALF = 1.5


def round_window(centre: complex, half_width: float, half_height: float, canvas: Canvas, cell_aspect: float) -> Window:
    """The smallest window about ``centre`` that holds the two half sizes and in which circles are round."""
    dot_width, dot_height = cell_aspect / DOTS_ACROSS, 1 / DOTS_UPWARD
    width = max(canvas.dots_across - 1, 1) * dot_width
    height = max(canvas.dots_upward - 1, 1) * dot_height
    scale = max(half_width / width, half_height / height)
    across, upward = scale * width, scale * height
    return Window(centre.real - across, centre.real + across, centre.imag - upward, centre.imag + upward)


def folded_window(canvas: Canvas, cell_aspect: float) -> Window:
    """The whole disc with a narrow margin."""
    return round_window(0j, FOLDED_HALF, FOLDED_HALF, canvas, cell_aspect)


def near_window(zoom: int, canvas: Canvas, cell_aspect: float) -> Window:
    """A square about -1, half as large by two steps of ``zoom``."""
    half = NEAR_HALF * 2 ** (-zoom / 2)
    return round_window(-1 + 0j, half, half, canvas, cell_aspect)


def whole_window(line: ComplexArray, mirror: bool, canvas: Canvas, cell_aspect: float) -> Window:
    """The unit circle, -1 and the near part of the curve; with the mirrored half the real axis is in the middle."""
    near = _near_part(line)
    height = np.concatenate([near.imag, -near.imag]) if mirror else near.imag
    left, right = -_edge(-near.real), _edge(near.real)
    bottom, top = -_edge(-height), _edge(height)
    centre = complex(left + right, bottom + top) / 2
    return round_window(centre, (right - left) / 2, (top - bottom) / 2, canvas, cell_aspect)


def _edge(reach: FloatArray) -> float:
    """The first of EDGES beyond all values."""
    return float(EDGES[min(np.searchsorted(EDGES, 1.03 * reach.max(initial=0.0)), EDGES.size - 1)])


def _near_part(line: ComplexArray) -> ComplexArray:
    """The points worth a place in the window: crossings of the real axis left of -1 reach further than the rest."""
    finite = line[np.isfinite(line)]
    size = np.abs(finite)
    near = finite[size <= (FINITE if size.max(initial=0.0) <= FINITE else NEAR)]
    crossings = _real_axis_crossings(finite)
    return np.concatenate([near, crossings[(crossings < -1) & (crossings >= -FARTHEST_CROSSING)]])


def _real_axis_crossings(line: ComplexArray) -> FloatArray:
    """Where the chords of the line cross the real axis, or end on it."""
    before, after = line[:-1], line[1:]
    with np.errstate(over="ignore", invalid="ignore"):
        crossed = (before.imag * after.imag <= 0) & (before.imag != after.imag)
        a, b = before[crossed], after[crossed]
        at = a.real - (b.real - a.real) * (a.imag / (b.imag - a.imag))
    return np.asarray(at[np.isfinite(at)])
