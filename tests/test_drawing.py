"""Drawings as rows of text, and what plotext is given to draw."""

from __future__ import annotations

import ast
import math
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plot_curves import ASPECT, cells, dots, text
from plotext._figure import _figure_class

import encircle.tui.drawing
from encircle.tui import plotext_canvas
from encircle.tui.clipping import Window
from encircle.tui.drawing import Caption, Curve, Drawing, Frame, Mark, Upright, draw
from encircle.tui.glyphs import BRAILLE, Glyph, plain_table, plain_text
from encircle.tui.polar_window import round_window
from encircle.tui.roles import Role
from encircle.tui.ticks import Tick

ANY_NUMBER = st.floats(allow_nan=True, allow_infinity=True)
SIZES = [(1, 1), (2, 1), (7, 3), (20, 8), (48, 24), (60, 30), (100, 35), (211, 70)]
UNIT = Window(-1, 1, -1, 1)


@pytest.fixture
def given_to_plotext(monkeypatch: pytest.MonkeyPatch) -> list[tuple[float, float]]:
    """Every point that plotext is handed, as a fraction of the limits that it was set to."""
    points: list[tuple[float, float]] = []
    scatter: Callable[..., None] = _figure_class.scatter

    def recorded(figure: _figure_class, x: list[float], y: list[float], **rest: object) -> None:
        (left, right), (bottom, top) = figure.monitor.xlim[0], figure.monitor.ylim[0]
        points.extend(((a - left) / (right - left), (b - bottom) / (top - bottom)) for a, b in zip(x, y, strict=True))
        scatter(figure, x, y, **rest)

    monkeypatch.setattr(_figure_class, "scatter", recorded)
    plotext_canvas.plot.cache_clear()
    return points


def circle_drawing(width: int, height: int, aspect: float = ASPECT) -> Drawing:
    frame = Frame(width, height, 0, 0)
    turn = np.linspace(0, 2 * np.pi, 721)
    window = round_window(0j, 1.05, 1.05, frame.canvas, aspect)
    return Drawing(frame, window, (Curve(np.cos(turn), np.sin(turn), Role.CURVE),))


@pytest.mark.parametrize("aspect", [0.45, 0.5, 0.55])
@pytest.mark.parametrize("size", [(20, 8), (48, 24), (60, 30), (100, 35), (80, 60)])
def test_circles_are_round(size: tuple[int, int], aspect: float) -> None:
    """Diameters across and upwards, in heights of a character, differ by less than 4 % or by the size of a dot."""
    found = dots(draw(circle_drawing(*size, aspect)), Role.CURVE)
    across, upward = np.ptp(found, axis=0) * (aspect / 2, 1 / 4)
    assert across == pytest.approx(upward, rel=0.04, abs=1 / 4)
    if min(size) >= 24:
        assert across == pytest.approx(upward, rel=0.04)


def test_a_circle_is_the_same_upside_down_and_left_to_right() -> None:
    """But for the dots left out at corners, each dot's mirror image is a dot or next to one."""
    found = dots(draw(circle_drawing(60, 30)), Role.CURVE)
    for image in (np.abs(found - (119, 0)), np.abs(found - (0, 119))):
        assert (np.abs(image[:, None] - found).max(axis=2).min(axis=1) <= 1).all()


@pytest.mark.parametrize("ascii_only", [False, True])
@pytest.mark.parametrize("size", SIZES)
def test_rows_fill_the_size_asked_for(size: tuple[int, int], ascii_only: bool) -> None:
    rows = text(draw(full_drawing(*size), ascii_only=ascii_only))
    assert [len(row) for row in rows] == [size[0]] * size[1]
    if ascii_only:
        assert all(row.isascii() and row.isprintable() for row in rows)


def full_drawing(width: int, height: int) -> Drawing:
    """One of everything."""
    frame = Frame.fitted(width, height, 6, 1)
    return Drawing(
        frame,
        UNIT,
        curves=(
            Curve(np.array([-1.0, 1.0]), np.array([-1.0, 1.0]), Role.CURVE),
            Curve(np.array([-1.0, 1.0]), np.zeros(2), Role.LIMIT, gap=3),
        ),
        marks=tuple(Mark(0.9 - 0.2 * place, 0.5, glyph, Role.CURSOR, "−1 ∞") for place, glyph in enumerate(Glyph)),
        uprights=(Upright(0.5, Role.CURSOR),),
        x_ticks=(Tick(-1, "-∞"), Tick(1, "1k")),
        y_ticks=(Tick(-1, "90°"), Tick(0, "0"), Tick(1, "a label far too long")),
        captions=(Caption("phase °", Role.CURVE, 1),),
        x_unit="rad/s",
    )


@given(st.lists(st.tuples(ANY_NUMBER, ANY_NUMBER), max_size=30), st.sampled_from(SIZES), st.integers(1, 4))
@settings(max_examples=60, deadline=None)
def test_any_numbers_can_be_drawn(points: list[tuple[float, float]], size: tuple[int, int], gap: int) -> None:
    x, y = np.array(points, dtype=float).reshape(-1, 2).T
    marks = tuple(Mark(a, b, Glyph.MARGIN, Role.MARGIN, "words") for a, b in points)
    drawing = Drawing(Frame.fitted(*size, 6, 1), UNIT, (Curve(x, y, Role.CURVE, gap),), marks)
    assert {len(row) for row in text(draw(drawing))} == {size[0]}


def test_plotext_draws_every_dot(given_to_plotext: list[tuple[float, float]]) -> None:
    rows = draw(circle_drawing(60, 30))
    assert len(given_to_plotext) == len(dots(rows, Role.CURVE)) > 200


def test_plotext_gets_no_point_outside(given_to_plotext: list[tuple[float, float]]) -> None:
    wild = [np.nan, np.inf, -np.inf, 1e300, -1e300, 1e5, -1e5, 0.5, -0.5, 0.0]
    x, y = np.array([(a, b) for a in wild for b in wild]).T
    draw(Drawing(Frame(60, 30, 0, 0), UNIT, (Curve(x, y, Role.CURVE),)))
    found = np.array(given_to_plotext)
    assert len(found) > 0
    assert ((found >= 0) & (found <= 1)).all()


def test_a_picture_may_be_larger_than_the_terminal() -> None:
    """plotext would cut it down to the terminal's size."""
    found = dots(draw(circle_drawing(300, 150)), Role.CURVE)
    assert found[:, 1].max() > 580


def test_the_higher_role_owns_a_shared_cell() -> None:
    level = np.array([-1.0, 1.0]), np.zeros(2)
    curves = (Curve(*level, Role.CURVE), Curve(*level, Role.UNIT_CIRCLE), Curve(*level, Role.CURVE_BEFORE))
    rows = draw(Drawing(Frame(10, 3, 0, 0), UNIT, curves))
    assert len(cells(rows, Role.CURVE)) == 10
    assert cells(rows, Role.UNIT_CIRCLE) == cells(rows, Role.CURVE_BEFORE) == []


def test_a_lower_role_adds_no_dots_to_a_shared_cell() -> None:
    """Of a row of four dots to the cell, the lower role has the second from below, the higher the third."""
    heights = [-1 + 2 * dot / 3 for dot in (1, 2)]
    lines = [(np.array([-1.0, 1.0]), np.full(2, height)) for height in heights]
    frame = Frame(10, 1, 0, 0)
    alone = text(draw(Drawing(frame, UNIT, (Curve(*lines[1], Role.CURVE),))))
    below = (Curve(*lines[0], role) for role in (Role.AXIS, Role.UNIT_CIRCLE, Role.BAND, Role.CURVE_BEFORE))
    assert all(text(draw(Drawing(frame, UNIT, (Curve(*lines[1], Role.CURVE), low)))) == alone for low in below)
    both = draw(Drawing(frame, UNIT, (Curve(*lines[1], Role.CURVE), Curve(*lines[0], Role.MIRROR))))
    assert len(dots(both, Role.CURVE)) == 40


def test_words_stand_beside_their_mark_or_nowhere() -> None:
    mark = (Mark(0, 0, Glyph.CRITICAL, Role.CRITICAL, "-1"),)
    assert "".join(text(draw(Drawing(Frame(11, 5, 0, 0), UNIT, (), mark)))).split() == ["✚", "-1"]
    assert text(draw(Drawing(Frame(1, 1, 0, 0), UNIT, (), mark))) == ["✚"]


def test_labels_never_touch_and_are_never_cut() -> None:
    ticks = tuple(Tick(position, "1000") for position in np.linspace(-1, 1, 9))
    frame = Frame(30, 10, 4, 1)
    foot = text(draw(Drawing(frame, UNIT, (), x_ticks=ticks, y_ticks=ticks, x_unit="Hz")))[-1]
    assert set(foot.split()) == {"1000", "Hz"}
    assert all("1" not in row[:4] for row in text(draw(Drawing(frame, UNIT, (), y_ticks=ticks))))


def test_no_drawing_without_a_cell() -> None:
    with pytest.raises(ValueError, match="no cell"):
        Frame.fitted(0, 5, 6, 1)


def test_plain_characters_resemble_their_dots() -> None:
    table = plain_table()
    likeness = {"⣀": "_", "⠶": "-", "⠉": "'", "⡇": "|", "⢸": "|", "⣿": "|"}
    assert {sign: table[ord(sign)] for sign in likeness} == likeness
    assert table[ord("⢎")] in "/("
    assert table[ord("⠱")] in "\\)"
    assert table[BRAILLE] == " "
    assert all(table[BRAILLE + pattern] not in " X@o*<>^v+" for pattern in range(1, 256))


def test_plain_text_spells_signs_out() -> None:
    assert plain_text("−1, ∞, 90°, ✚, λ") == "-1, inf, 90deg, X, ?"


def test_only_one_module_knows_plotext() -> None:
    package = Path(encircle.tui.drawing.__file__).parent
    knowing = {path.name for path in package.glob("*.py") if "plotext" in imported(path)}
    assert knowing == {"plotext_canvas.py"}


def imported(path: Path) -> set[str]:
    nodes = list(ast.walk(ast.parse(path.read_text(encoding="utf-8"))))
    names = {alias.name for node in nodes if isinstance(node, ast.Import) for alias in node.names}
    names |= {node.module or "" for node in nodes if isinstance(node, ast.ImportFrom)}
    return {name.split(".")[0] for name in names}


def test_plotext_is_imported_on_first_use_only() -> None:
    code = "import sys, encircle.tui.polar_plot, encircle.tui.magnitude_plot; print('plotext' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "False\n"


def test_a_circle_is_one_dot_thin() -> None:
    """By counting octants: a circle n dots wide has 4 n/sqrt(2) dots if it steps over every corner."""
    found = dots(draw(circle_drawing(60, 30)), Role.CURVE)
    across = np.ptp(found[:, 0]) + 1
    assert len(found) == pytest.approx(4 * across / math.sqrt(2), rel=0.03)
