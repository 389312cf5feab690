"""Magnitude and phase over frequency, the readout, and the marks taken from a result."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plot_curves import CURVES, cells, curve_of, delayed, dots, empty, first_order, integrating, resonant, sampled, text
from plotext._figure import _figure_class
from result_values import CURRENT, UNDECIDED

from encircle.engine.result import Arc, LimitFinding, LoopCurve
from encircle.tui import plotext_canvas
from encircle.tui.drawing import Drawing, draw
from encircle.tui.glyphs import Glyph
from encircle.tui.loop_marks import LoopMarks, loop_marks
from encircle.tui.magnitude_plot import FrequencyView, frequency_drawings
from encircle.tui.phase import phase_degrees
from encircle.tui.readout import nearest_index, readout
from encircle.tui.roles import Role

WIDE = FrequencyView(1e-2, 1e3)
FULL = FrequencyView(1e-2, 1e3, "rad/s", sensitivity=True, complementary=True)
EVERYTHING = LoopMarks(0.5, 6.0, 3.0, crossovers=(1.0,), margins=(0.5, 2.0))


def to_axes(found: np.ndarray, drawing: Drawing) -> tuple[np.ndarray, np.ndarray]:
    """Where dots of one picture stand: log10 of frequency, and dB or degrees."""
    frame, window, canvas = drawing.frame, drawing.window, drawing.frame.canvas
    across = (found[:, 0] - 2 * frame.gutter) / (canvas.dots_across - 1)
    upward = (found[:, 1] - 4 * frame.foot) / (canvas.dots_upward - 1)
    x = window.left + across * (window.right - window.left)
    return x, window.bottom + upward * (window.top - window.bottom)


def alone(curve: LoopCurve, *, phase: bool, **rest: object) -> Drawing:
    view = replace(WIDE, magnitude=not phase, phase=phase)
    (drawing,) = frequency_drawings(curve, 100, 35, view, **rest)  # type: ignore[arg-type]
    return drawing


def integrator(gain: float) -> LoopCurve:
    return sampled(lambda s: gain / s, arcs=[Arc(0.0, 0.0, -np.pi / 2)], at_infinity=0j)


def test_an_integrator_falls_by_20_db_in_a_decade() -> None:
    """Handbook: |10/(j omega)| is 20 dB at 1 rad/s, 0 dB at 10 rad/s, and so on down the decades."""
    drawing = alone(integrator(10.0), phase=False)
    decade, level = to_axes(dots(draw(drawing), Role.CURVE), drawing)
    one_dot = (drawing.window.top - drawing.window.bottom) / drawing.frame.canvas.dots_upward
    assert np.abs(level - (20 - 20 * decade)).max() < 1.5 * one_dot
    assert np.ptp(decade) > 4


@pytest.mark.parametrize(("poles", "phase"), [(1, -90.0), (2, -180.0), (3, -270.0)])
def test_integrators_turn_the_phase_by_a_quarter_each(poles: int, phase: float) -> None:
    """Handbook: the phase of 1/s^n is -90 n degrees."""
    curve = sampled(lambda s: 1 / s**poles, arcs=[Arc(0.0, 0.0, -poles * np.pi / 2)])
    assert phase_degrees(curve) == pytest.approx(phase)


def test_dead_time_turns_the_phase_without_end() -> None:
    """Handbook: exp(-sT) turns by -57.2958 omega T degrees."""
    omega = np.linspace(0.01, 100, 2000)
    curve = curve_of(omega, np.exp(-0.5j * omega), at_zero=1 + 0j)
    assert phase_degrees(curve) == pytest.approx(-57.29578 * 0.5 * omega, rel=1e-6)


def test_the_phase_falls_by_half_a_turn_past_a_pole_on_the_axis() -> None:
    """1/(s (s^2 + 1)): -90 degrees below the pole at j; the contour passes right of it, so -270 above."""
    phase = phase_degrees(resonant())
    assert phase[:300] == pytest.approx(-90)
    assert phase[300:] == pytest.approx(-270)


def test_a_negative_loop_starts_at_minus_half_a_turn() -> None:
    assert phase_degrees(sampled(lambda s: -2 / (s + 1)))[0] == pytest.approx(-180, abs=1)


@pytest.mark.parametrize("size", [(20, 8), (40, 12), (72, 24), (100, 35), (180, 50)])
@pytest.mark.parametrize("ascii_only", [False, True])
@pytest.mark.parametrize("name", CURVES)
def test_rows_fill_the_size_asked_for(name: str, size: tuple[int, int], ascii_only: bool) -> None:
    curve = CURVES[name]()
    cursor = 0 if curve.frequency.size else None
    plots = frequency_drawings(curve, *size, FULL, marks=EVERYTHING, before=curve, cursor=cursor)
    rows = text(draw(*plots, ascii_only=ascii_only))
    assert [len(row) for row in rows] == [size[0]] * size[1]
    assert not ascii_only or all(row.isascii() and row.isprintable() for row in rows)


@pytest.mark.parametrize("size", [(1, 1), (2, 2), (6, 5), (9, 7)])
@pytest.mark.parametrize("name", CURVES)
def test_the_smallest_sizes_can_be_drawn(name: str, size: tuple[int, int]) -> None:
    rows = draw(*frequency_drawings(CURVES[name](), *size, FULL, marks=EVERYTHING))
    assert [len(row) for row in text(rows)] == [size[0]] * size[1]


@given(
    st.lists(st.complex_numbers(allow_nan=True, allow_infinity=True), max_size=30),
    st.floats(1e-6, 1e3),
    st.floats(1.01, 1e9),
    st.booleans(),
)
@settings(max_examples=60, deadline=None)
def test_any_curve_reaches_plotext_as_points_inside(
    values: list[complex], lower: float, ratio: float, phase: bool
) -> None:
    given_points: list[tuple[float, float]] = []
    scatter = _figure_class.scatter

    def recorded(figure: _figure_class, x: list[float], y: list[float], **rest: object) -> None:
        limits = figure.monitor.xlim[0], figure.monitor.ylim[0]
        assert all(limits[0][0] <= a <= limits[0][1] for a in x)
        assert all(limits[1][0] <= b <= limits[1][1] for b in y)
        given_points.extend(zip(x, y, strict=True))
        scatter(figure, x, y, **rest)

    curve = curve_of(np.arange(1.0, 1 + len(values)), np.array(values, dtype=complex))
    view = FrequencyView(lower, lower * ratio, phase=phase, sensitivity=True, complementary=True)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(_figure_class, "scatter", recorded)
        plotext_canvas.plot.cache_clear()
        draw(*frequency_drawings(curve, 40, 16, view, marks=EVERYTHING, before=curve))
    assert given_points


def test_the_range_is_in_steps_of_20_db_about_0() -> None:
    window = alone(first_order(30.0), phase=False).window
    assert (window.bottom % 20, window.top % 20) == (0, 0)
    assert window.bottom < -20 * np.log10(1e3 / 30)
    assert window.top >= 20 * np.log10(30)


def test_a_range_stays_readable_whatever_the_curve() -> None:
    """A pole on the axis sends |L| to infinity, a zero on it to nothing: neither decides the range."""
    omega = np.geomspace(0.01, 1000, 3000)
    L = (1 - omega**2 + 1e-15j) / (1 - omega**2 / 100 + 1e-15j) / (1 + 1j * omega)
    steep = sampled(lambda s: 1 / s**4, arcs=[Arc(0.0, 0.0, -2 * np.pi)])
    for curve in (curve_of(omega, L), steep, delayed()):
        for phase in (False, True):
            window = alone(curve, phase=phase).window
            assert window.top - window.bottom <= (720 if phase else 160)
            assert window.bottom < (-180 if phase else 0) <= window.top


def test_the_phase_range_ignores_what_is_faint() -> None:
    """Where |L| falls to -40 dB, at 120 rad/s, the phase is -159 degrees; at the end of the band it is -663."""
    curve = sampled(lambda s: 1.2 * np.exp(-0.01 * s) / (s + 0.6), at_zero=2 + 0j, at_infinity=0j)
    assert phase_degrees(curve).min() < -600
    assert alone(curve, phase=True).window.bottom == -270


def test_limits_stand_where_they_belong() -> None:
    view = replace(FULL, phase=False)
    (drawing,) = frequency_drawings(empty(), 100, 60, view, marks=LoopMarks(None, 6.0, 12.0))
    _, level = to_axes(dots(draw(drawing), Role.LIMIT), drawing)
    one_dot = (drawing.window.top - drawing.window.bottom) / drawing.frame.canvas.dots_upward
    near_6, near_12 = np.abs(level - 6) < one_dot, np.abs(level - 12) < one_dot
    assert near_6.any()
    assert near_12.any()
    assert (near_6 | near_12).all()


def test_limits_of_peaks_come_and_go_with_their_curves() -> None:
    curve = integrating()
    for view, sensitivity, complementary in (
        (replace(WIDE, phase=False), 0, 0),
        (replace(WIDE, phase=False, sensitivity=True), 20, 0),
        (replace(WIDE, phase=False, complementary=True), 0, 20),
    ):
        rows = draw(*frequency_drawings(curve, 100, 40, view, marks=EVERYTHING))
        assert (len(dots(rows, Role.SENSITIVITY)) > 0) == (sensitivity > 0)
        assert (len(dots(rows, Role.COMPLEMENTARY)) > 0) == (complementary > 0)
        assert (len(dots(rows, Role.LIMIT)) > 0) == (sensitivity + complementary > 0)


def test_crossovers_stand_on_0_db_and_margins_on_the_curve() -> None:
    """10/s crosses 0 dB at 10 rad/s and is at -20 dB at 100 rad/s."""
    drawing = alone(integrator(10.0), phase=False, marks=LoopMarks(crossovers=(10.0,), margins=(100.0,)))
    places = {mark.glyph: (mark.x, mark.y) for mark in drawing.marks}
    assert places[Glyph.CROSSOVER] == pytest.approx((1, 0), abs=0.1)
    assert places[Glyph.MARGIN] == pytest.approx((2, -20), abs=0.1)


def test_the_cursor_stands_in_one_column_of_both_frames() -> None:
    rows = draw(*frequency_drawings(integrating(), 90, 30, WIDE, cursor=200))
    found = cells(rows, Role.CURSOR)
    assert len({column for _, column, _ in found}) == 1
    assert [sign for _, _, sign in found].count(Glyph.CURSOR) == 2
    assert {sign for _, _, sign in found} == {Glyph.CURSOR, Glyph.UPRIGHT}


def test_half_a_turn_is_marked_in_the_phase() -> None:
    drawing = alone(integrating(), phase=True)
    _, level = to_axes(dots(draw(drawing), Role.UNIT_CIRCLE), drawing)
    assert np.abs(level + 180).max() < 10


def test_captions_say_what_is_drawn() -> None:
    rows = "\n".join(text(draw(*frequency_drawings(integrating(), 90, 30, FULL))))
    assert all(name in rows for name in ("|L| dB", "|S|", "|T|", "phase °", "rad/s"))
    assert "|S|" not in "\n".join(text(draw(*frequency_drawings(integrating(), 90, 30, WIDE))))


@pytest.mark.parametrize("band", [(0, 1), (2, 1), (1, np.inf), (-1, 1)])
def test_a_band_runs_upwards_from_above_0(band: tuple[float, float]) -> None:
    with pytest.raises(ValueError, match="no band"):
        FrequencyView(*band)


def test_something_must_be_shown() -> None:
    with pytest.raises(ValueError, match="magnitude, the phase or both"):
        FrequencyView(1, 2, magnitude=False, phase=False)


def test_the_readout_names_the_loop_at_the_cursor() -> None:
    """Worked by hand: 2/(1 + j) = 1 - j, so 3.0103 dB, -45 degrees, |1 + L| = |2 - j| = sqrt(5)."""
    curve = curve_of(np.array([0.1, 1.0, 10.0]), 2 / (1 + 1j * np.array([0.1, 1.0, 10.0])))
    found = readout(curve, nearest_index(curve, 1.4))
    assert found.frequency == 1.0
    assert pytest.approx(1 - 1j) == found.L
    assert found.magnitude_db == pytest.approx(3.0103, abs=1e-4)
    assert found.phase_degrees == pytest.approx(-45)
    assert found.distance == pytest.approx(5**0.5)


def test_the_readout_of_nothing() -> None:
    assert readout(curve_of(np.ones(1), np.zeros(1, dtype=complex)), 0).magnitude_db == -np.inf
    with pytest.raises(ValueError, match="no samples"):
        nearest_index(empty(), 1.0)


def test_marks_come_from_limits_and_margins() -> None:
    limits = (LimitFinding("modulus_margin", 0.4, 0.7, True), LimitFinding("sensitivity_peak_db", 6.0, 3.0, True))
    marks = loop_marks(replace(CURRENT, limits=limits))
    assert marks.forbidden_radius == pytest.approx(0.501187, abs=1e-6)
    assert marks.sensitivity_limit_db == 6.0
    assert CURRENT.margins is not None
    assert marks.crossovers == CURRENT.margins.gain_crossovers
    assert CURRENT.margins.modulus.frequency in marks.margins


def test_a_loop_without_margins_has_no_marks() -> None:
    assert loop_marks(replace(UNDECIDED, limits=())) == LoopMarks()
