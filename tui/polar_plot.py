"""The polar plot: L in the complex plane, with -1, the unit circle, the forbidden disc and the direction of travel."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from encircle.engine.result import ComplexArray, LoopCurve
from encircle.tui.clipping import Window
from encircle.tui.direction import direction_marks
from encircle.tui.dots import Canvas
from encircle.tui.drawing import Caption, Curve, Drawing, Frame, Mark
from encircle.tui.glyphs import Glyph
from encircle.tui.locus import fold, folded_line, plane_line
from encircle.tui.loop_marks import LoopMarks
from encircle.tui.polar_window import folded_window, near_window, whole_window
from encircle.tui.readout import nearest_index
from encircle.tui.roles import Role
from encircle.tui.ticks import Tick, linear_ticks

GUTTER = 7
CLOSE_GUTTER = 9
CLOSE_ZOOM = 8
FOOT = 1
# Characters across and rows upwards that a labelled tick needs.
TICK_COLUMNS = 9
TICK_ROWS = 4
CIRCLE = np.exp(1j * np.linspace(0, 2 * np.pi, 361))
BAND_CIRCLES = 14
FOLDED_TICKS = (("-∞", -1.0), ("-3", -0.75), ("-1", -0.5), ("0", 0.0), ("1", 0.5), ("3", 0.75), ("∞", 1.0))


@dataclass(frozen=True, slots=True)
class PolarView:
    """What part of the plane is seen, and how.

    ``whole``: the unit circle, -1 and the curve near them. ``near``: about -1, closer by 2^(1/2) with each step of
    ``zoom``. ``folded``: the whole plane in a disc, infinity on its rim (see ``locus``). ``mirror``: show the conjugate
    half too. ``cell_aspect``: width of a character cell over its height.
    """

    kind: Literal["whole", "near", "folded"] = "whole"
    zoom: int = 0
    mirror: bool = True
    cell_aspect: float = 0.5

    @property
    def folded(self) -> bool:
        return self.kind == "folded"


WHOLE = PolarView()
NO_MARKS = LoopMarks()


def polar_drawing(
    curve: LoopCurve,
    width: int,
    height: int,
    view: PolarView = WHOLE,
    *,
    marks: LoopMarks = NO_MARKS,
    before: LoopCurve | None = None,
    cursor: int | None = None,
) -> Drawing:
    """The polar plot of L, ``width`` by ``height`` characters.

    ``before``: an earlier curve, kept dim behind. ``cursor``: the sample of the curve that the cursor stands on.
    """
    frame = Frame.fitted(width, height, _gutter(view), FOOT)
    line = _line(curve, view)
    window = _window(line, view, frame.canvas)
    signs = _signs(curve, marks, view)
    loci = [Curve(line.real, line.imag, Role.CURVE)]
    loci += _mirrored(line) if view.mirror else []
    loci += _earlier(before, view) if before is not None else []
    return Drawing(
        frame,
        window,
        curves=(*_references(marks, window, view), *_band(curve, window, frame.canvas, view), *loci),
        marks=(*_heads(line, signs, window, frame.canvas, view), *signs, *_cursor(curve, cursor, view)),
        x_ticks=_real_ticks(window, frame.canvas, view),
        y_ticks=_imaginary_ticks(window, frame.canvas, view),
        captions=(Caption("rim ∞", Role.LABEL),) if view.folded else (),
        lattice=not view.folded,
    )


def _seen(z: ComplexArray, view: PolarView) -> ComplexArray:
    """Points of the plane where the view shows them."""
    return fold(z) if view.folded else z


def _line(curve: LoopCurve, view: PolarView) -> ComplexArray:
    return folded_line(curve) if view.folded else plane_line(curve)


def _window(line: ComplexArray, view: PolarView, canvas: Canvas) -> Window:
    if view.folded:
        return folded_window(canvas, view.cell_aspect)
    if view.kind == "near":
        return near_window(view.zoom, canvas, view.cell_aspect)
    return whole_window(line, view.mirror, canvas, view.cell_aspect)


def _mirrored(line: ComplexArray) -> list[Curve]:
    return [Curve(line.real, -line.imag, Role.MIRROR, gap=2)]


def _earlier(before: LoopCurve, view: PolarView) -> list[Curve]:
    line = _line(before, view)
    return [Curve(line.real, line.imag, Role.CURVE_BEFORE, gap=2)]


def _references(marks: LoopMarks, window: Window, view: PolarView) -> list[Curve]:
    """The axes, the unit circle, the rim of the folded plane and the forbidden disc."""
    curves = [
        Curve(np.array([window.left, window.right]), np.zeros(2), Role.AXIS, gap=3),
        Curve(np.zeros(2), np.array([window.bottom, window.top]), Role.AXIS, gap=3),
        _circle(CIRCLE, Role.UNIT_CIRCLE, 3, view),
    ]
    if view.folded:
        curves.append(Curve(CIRCLE.real, CIRCLE.imag, Role.GRID, gap=4))
    if marks.forbidden_radius is not None:
        curves.append(_circle(-1 + marks.forbidden_radius * CIRCLE, Role.FORBIDDEN, 2, view))
    return curves


def _circle(points: ComplexArray, role: Role, gap: int, view: PolarView) -> Curve:
    seen = _seen(points, view)
    return Curve(seen.real, seen.imag, role, gap)


def _band(curve: LoopCurve, window: Window, canvas: Canvas, view: PolarView) -> list[Curve]:
    """Circles of the band that measured blocks leave round L, at places spread evenly over the visible curve."""
    centre = _seen(curve.L, view)
    dot = (window.top - window.bottom) / canvas.dots_upward
    with np.errstate(invalid="ignore"):
        wide = np.abs(_seen(curve.L + curve.radius, view) - centre) > dot
    places = np.flatnonzero(wide & window.contains(centre.real, centre.imag))
    if places.size == 0:
        return []
    way = np.concatenate(([0.0], np.cumsum(np.abs(np.diff(centre[places])))))
    chosen = places[np.unique(np.searchsorted(way, np.linspace(0, way[-1], BAND_CIRCLES)).clip(max=places.size - 1))]
    return [_circle(curve.L[i] + curve.radius[i] * CIRCLE, Role.BAND, 2, view) for i in chosen]


def _signs(curve: LoopCurve, marks: LoopMarks, view: PolarView) -> list[Mark]:
    """-1, and the frequencies of margins and crossovers on the curve."""
    signs = [_mark(-1 + 0j, Glyph.CRITICAL, Role.CRITICAL, view, "-1")]
    if curve.frequency.size:
        for glyph, role, frequencies in (
            (Glyph.MARGIN, Role.MARGIN, marks.margins),
            (Glyph.CROSSOVER, Role.CROSSOVER, marks.crossovers),
        ):
            places = [nearest_index(curve, frequency) for frequency in frequencies]
            signs += [_mark(curve.L[place], glyph, role, view) for place in places]
    return signs


def _cursor(curve: LoopCurve, cursor: int | None, view: PolarView) -> list[Mark]:
    return [] if cursor is None else [_mark(curve.L[cursor], Glyph.CURSOR, Role.CURSOR, view)]


def _mark(z: complex, glyph: Glyph, role: Role, view: PolarView, words: str = "") -> Mark:
    place = complex(_seen(np.array([z]), view)[0])
    return Mark(place.real, place.imag, glyph, role, words)


def _heads(line: ComplexArray, signs: list[Mark], window: Window, canvas: Canvas, view: PolarView) -> tuple[Mark, ...]:
    keep_clear = np.array([complex(sign.x, sign.y) for sign in signs])
    if view.mirror:
        keep_clear = np.concatenate([keep_clear, line.conj()])
    return direction_marks(line, window, canvas, keep_clear)


def _gutter(view: PolarView) -> int:
    """Room for the labels of the imaginary axis, which the folded plane has none of."""
    if view.folded:
        return 0
    return CLOSE_GUTTER if view.kind == "near" and view.zoom > CLOSE_ZOOM else GUTTER


def _real_ticks(window: Window, canvas: Canvas, view: PolarView) -> tuple[Tick, ...]:
    if view.folded:
        return tuple(Tick(position, label) for label, position in FOLDED_TICKS)
    return linear_ticks(window.left, window.right, max(canvas.columns // TICK_COLUMNS, 2))


def _imaginary_ticks(window: Window, canvas: Canvas, view: PolarView) -> tuple[Tick, ...]:
    if view.folded:
        return ()
    ticks = linear_ticks(window.bottom, window.top, max(-(-canvas.rows // TICK_ROWS), 2))
    return tuple(Tick(tick.position, tick.label if tick.label == "0" else f"{tick.label}j") for tick in ticks)
