"""The polar plot: what is in view, where things stand, and which way the curve runs."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plot_curves import CURVES, banded, cells, curve_of, dots, empty, first_order, integrating, resonant, text
from plotext._figure import _figure_class

from encircle.engine.result import Arc, LoopCurve
from encircle.tui import plotext_canvas
from encircle.tui.drawing import Drawing, draw
from encircle.tui.glyphs import Glyph
from encircle.tui.locus import fold, folded_line
from encircle.tui.loop_marks import LoopMarks
from encircle.tui.polar_plot import PolarView, polar_drawing
from encircle.tui.roles import Role

KINDS = ("whole", "near", "folded")
SIZES = [(20, 8), (48, 24), (61, 23), (100, 35), (180, 55)]
POINTING = {Glyph.RIGHT: 1 + 0j, Glyph.UP: 1j, Glyph.LEFT: -1 + 0j, Glyph.DOWN: -1j}
EVERYTHING = LoopMarks(forbidden_radius=0.5, crossovers=(1.0,), margins=(0.5, 2.0))


def to_plane(found: np.ndarray, drawing: Drawing) -> np.ndarray:
    """Where dots of the whole picture stand in the plane, as complex numbers."""
    frame, window, canvas = drawing.frame, drawing.window, drawing.frame.canvas
    across = (found[:, 0] - 2 * frame.gutter) / (canvas.dots_across - 1)
    upward = (found[:, 1] - 4 * frame.foot) / (canvas.dots_upward - 1)
    x = window.left + across * (window.right - window.left)
    return np.asarray(x + 1j * (window.bottom + upward * (window.top - window.bottom)))


def dot_size(drawing: Drawing) -> float:
    return (drawing.window.top - drawing.window.bottom) / (drawing.frame.canvas.dots_upward - 1)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("name", CURVES)
def test_minus_one_is_always_seen(name: str, size: tuple[int, int], kind: str) -> None:
    curve = CURVES[name]()
    view = PolarView(kind)  # type: ignore[arg-type]
    cursor = 0 if curve.frequency.size else None
    rows = draw(polar_drawing(curve, *size, view, marks=EVERYTHING, before=curve, cursor=cursor))
    assert Glyph.CRITICAL in {sign for _, _, sign in cells(rows, Role.CRITICAL)}
    assert {len(row) for row in text(rows)} == {size[0]}
    assert len(rows) == size[1]


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("size", [(1, 1), (2, 2), (5, 3), (20, 8)])
@pytest.mark.parametrize("name", CURVES)
def test_the_smallest_sizes_can_be_drawn(name: str, size: tuple[int, int], kind: str) -> None:
    rows = draw(polar_drawing(CURVES[name](), *size, PolarView(kind), marks=EVERYTHING), ascii_only=True)  # type: ignore[arg-type]
    assert [len(row) for row in text(rows)] == [size[0]] * size[1]
    assert all(row.isascii() for row in text(rows))


@given(
    st.lists(st.complex_numbers(allow_nan=True, allow_infinity=True), max_size=30),
    st.sampled_from(KINDS),
    st.booleans(),
    st.integers(-6, 20),
    st.floats(0, 1e12),
)
@settings(max_examples=80, deadline=None)
def test_any_curve_reaches_plotext_as_points_inside(
    values: list[complex], kind: str, mirror: bool, zoom: int, radius: float
) -> None:
    given_points: list[tuple[float, float]] = []
    scatter = _figure_class.scatter

    def recorded(figure: _figure_class, x: list[float], y: list[float], **rest: object) -> None:
        limits = figure.monitor.xlim[0], figure.monitor.ylim[0]
        assert all(limits[0][0] <= a <= limits[0][1] for a in x)
        assert all(limits[1][0] <= b <= limits[1][1] for b in y)
        given_points.extend(zip(x, y, strict=True))
        scatter(figure, x, y, **rest)

    L = np.array(values, dtype=complex)
    curve = curve_of(np.arange(1.0, 1 + len(L)), L, radius=np.full(len(L), radius))
    view = PolarView(kind, zoom, mirror)  # type: ignore[arg-type]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(_figure_class, "scatter", recorded)
        plotext_canvas.plot.cache_clear()
        draw(polar_drawing(curve, 40, 16, view, marks=EVERYTHING, before=curve))
    assert given_points


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("aspect", [0.45, 0.5, 0.55])
@pytest.mark.parametrize("size", SIZES)
def test_one_unit_is_as_long_upwards_as_across(size: tuple[int, int], aspect: float, kind: str) -> None:
    drawing = polar_drawing(integrating(), *size, PolarView(kind, cell_aspect=aspect))  # type: ignore[arg-type]
    window, canvas = drawing.window, drawing.frame.canvas
    across = (window.right - window.left) / ((canvas.dots_across - 1) * aspect / 2)
    upward = (window.top - window.bottom) / ((canvas.dots_upward - 1) / 4)
    assert across == pytest.approx(upward, rel=1e-12)


@pytest.mark.parametrize("kind", KINDS)
def test_the_unit_circle_is_round(kind: str) -> None:
    drawing = polar_drawing(empty(), 100, 35, PolarView(kind, zoom=-4))  # type: ignore[arg-type]
    found = to_plane(dots(draw(drawing), Role.UNIT_CIRCLE), drawing)
    radius = 0.5 if kind == "folded" else 1.0
    assert np.abs(np.abs(found) - radius).max() < dot_size(drawing)
    assert np.ptp(found.real) == pytest.approx(np.ptp(found.imag), rel=0.04, abs=2 * dot_size(drawing))


def test_a_first_order_loop_is_a_half_circle_below_the_axis() -> None:
    """2/(1 + jw) runs on the circle of radius 1 about 1, clockwise from 2 to 0 (elementary complex mapping)."""
    drawing = polar_drawing(first_order(2.0), 100, 35, PolarView(mirror=False))
    rows = draw(drawing)
    found = to_plane(dots(rows, Role.CURVE), drawing)
    assert np.abs(np.abs(found - 1) - 1).max() < dot_size(drawing)
    assert found.imag.max() <= dot_size(drawing)
    heads = cells(rows, Role.DIRECTION)
    lowest = max(heads)
    assert Glyph.LEFT in {sign for _, _, sign in heads}
    assert lowest[2] == Glyph.LEFT


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("backward", [False, True])
def test_arrow_heads_point_the_way_the_curve_runs(kind: str, backward: bool) -> None:
    curve = first_order(3.0)
    if backward:
        curve = replace(curve, L=curve.L[::-1], at_zero=0j, at_infinity=3 + 0j)
    drawing = polar_drawing(curve, 100, 35, PolarView(kind, -6, mirror=False))  # type: ignore[arg-type]
    seen = fold(curve.L) if kind == "folded" else curve.L
    heads = [mark for mark in drawing.marks if mark.role == Role.DIRECTION]
    assert len(heads) >= 2
    for head in heads:
        place = int(np.abs(seen - complex(head.x, head.y)).argmin())
        travel = seen[min(place + 1, 599)] - seen[max(place - 1, 0)]
        assert (travel * POINTING[Glyph(head.glyph)].conjugate()).real > 0.6 * abs(travel)


def test_the_mirrored_half_can_be_switched_off() -> None:
    curve = integrating()
    shown, hidden = (draw(polar_drawing(curve, 60, 24, PolarView(mirror=mirror))) for mirror in (True, False))
    assert len(dots(shown, Role.MIRROR)) > 20
    assert len(dots(hidden, Role.MIRROR)) == 0


def test_the_forbidden_disc_is_the_circle_round_minus_one() -> None:
    drawing = polar_drawing(empty(), 80, 40, PolarView("near"), marks=LoopMarks(forbidden_radius=0.5))
    found = to_plane(dots(draw(drawing), Role.FORBIDDEN), drawing)
    clear = found[np.abs(np.abs(found) - 1) > 4 * dot_size(drawing)]
    assert np.abs(np.abs(clear + 1) - 0.5).max() < dot_size(drawing)
    assert len(clear) > 40


def test_the_earlier_curve_stays_behind() -> None:
    before = integrating()
    curve = replace(before, L=0.5 * before.L)
    drawing = polar_drawing(curve, 80, 40, before=before)
    found = to_plane(dots(draw(drawing), Role.CURVE_BEFORE), drawing)
    nearest = np.abs(found[:, None] - before.L).min(axis=1)
    assert (nearest < 2 * dot_size(drawing)).all()
    assert len(found) > 10


def test_the_band_of_measured_loops_is_drawn_round_the_curve() -> None:
    curve = banded()
    drawing = polar_drawing(curve, 100, 40, PolarView("near", -2))
    found = to_plane(dots(draw(drawing), Role.BAND), drawing)
    excess = np.abs(np.abs(found[:, None] - curve.L) - curve.radius).min(axis=1)
    assert len(found) > 20
    assert (excess < dot_size(drawing)).all()
    assert len(dots(draw(polar_drawing(integrating(), 100, 40)), Role.BAND)) == 0


@pytest.mark.parametrize("kind", KINDS)
def test_the_cursor_stands_on_its_sample(kind: str) -> None:
    curve = first_order(1.5)
    drawing = polar_drawing(curve, 100, 35, PolarView(kind, -2), cursor=300)  # type: ignore[arg-type]
    (row, column, sign), *others = cells(draw(drawing), Role.CURSOR)
    expected = fold(curve.L[300:301])[0] if kind == "folded" else curve.L[300]
    centre = to_plane(np.array([[2 * column + 0.5, 4 * (34 - row) + 1.5]]), drawing)[0]
    assert (sign, others) == (Glyph.CURSOR, [])
    assert abs(centre - expected) < 3 * dot_size(drawing)


def test_an_integrating_loop_is_light_work_down_to_a_millionth(monkeypatch: pytest.MonkeyPatch) -> None:
    """|L| reaches 2e6; plotext gets no more points than the visible lines have dots."""
    handed: list[int] = []
    scatter = _figure_class.scatter

    def counted(figure: _figure_class, x: list[float], y: list[float], **rest: object) -> None:
        handed.append(len(x))
        scatter(figure, x, y, **rest)

    monkeypatch.setattr(_figure_class, "scatter", counted)
    plotext_canvas.plot.cache_clear()
    for kind in KINDS:
        draw(polar_drawing(integrating(1e-6), 100, 35, PolarView(kind)))  # type: ignore[arg-type]
    assert sum(handed) < 3 * 1200


def test_arcs_at_infinity_run_along_the_rim() -> None:
    """The arc of 1/s round the pole at 0 turns from 0 to -90 degrees, its mirror image from 90 to 0."""
    drawing = polar_drawing(integrating(), 100, 50, PolarView("folded"))
    rows = draw(drawing)
    for role, sign in ((Role.CURVE, -1), (Role.MIRROR, 1)):
        found = to_plane(dots(rows, role), drawing)
        rim = found[np.abs(np.abs(found) - 1) < dot_size(drawing)]
        angles = np.sort(np.degrees(np.angle(rim)) * sign)
        inside = angles[(angles > 5) & (angles < 85)]
        assert len(inside) > 20
        assert np.diff(inside).max() < 6
        assert ((angles > -5) & (angles < 95)).all()


def test_the_folded_line_is_unbroken_through_infinity() -> None:
    line = folded_line(resonant())
    assert np.isfinite(line).all()
    assert np.abs(np.diff(line)).max() < 0.1
    assert np.abs(line).max() <= 1 + 1e-12


def test_a_gap_without_an_arc_breaks_the_line() -> None:
    line = folded_line(replace(resonant(), arcs=()))
    assert np.isnan(line).sum() == 1


def test_the_arc_at_infinity_comes_last() -> None:
    """L = s: the loop ends on the rim at 90 degrees and turns back to 0 along it."""
    omega = np.geomspace(0.01, 1000, 50)
    curve = curve_of(omega, 1j * omega, arcs=[Arc(None, np.pi / 2, 0.0)], at_zero=0j)
    assert folded_line(curve)[[0, -1]] == pytest.approx([0, 1])


def test_the_whole_view_reaches_left_to_the_crossings() -> None:
    """A loop that is unstable alone and crosses at -4.5: the crossing decides, so it must be seen."""
    omega = np.geomspace(1e-2, 1e3, 400)
    curve = curve_of(omega, 4.5 * (1j * omega / 3 + 1) / (1j * omega - 1), at_zero=-4.5 + 0j)
    window = polar_drawing(curve, 80, 30).window
    assert window.left < -4.5 < -1 < 1 < window.right


def test_a_small_change_of_gain_keeps_the_window() -> None:
    curve: LoopCurve = first_order(1.5)
    louder = replace(curve, L=1.05 * curve.L, at_zero=1.575 + 0j)
    assert polar_drawing(curve, 80, 30).window == polar_drawing(louder, 80, 30).window


def test_zoom_halves_the_window_in_two_steps() -> None:
    wide, close = (polar_drawing(empty(), 80, 30, PolarView("near", zoom)).window for zoom in (4, 6))
    assert wide.top == pytest.approx(2 * close.top)
    assert (close.left + close.right) / 2 == pytest.approx(-1)


def test_imaginary_labels_are_never_cut() -> None:
    for zoom in range(-6, 21):
        drawing = polar_drawing(empty(), 80, 40, PolarView("near", zoom))
        assert max(len(tick.label) for tick in drawing.y_ticks) < drawing.frame.gutter
        assert len({tick.label for tick in drawing.y_ticks}) == len(drawing.y_ticks) >= 2
