"""Clipping of polylines and their thinning to dots."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from encircle.tui.clipping import Window, clip
from encircle.tui.dots import Canvas, line_dots

WINDOW = Window(-2.0, 2.0, -1.0, 3.0)
CANVAS = Canvas(40, 20)
ANY_NUMBER = st.floats(allow_nan=True, allow_infinity=True)
NEARBY = st.floats(-5, 5, allow_nan=False)


def line(points: list[tuple[float, float]]) -> tuple[np.ndarray, np.ndarray]:
    x, y = np.array(points, dtype=float).reshape(-1, 2).T
    return x, y


@given(st.lists(st.tuples(ANY_NUMBER, ANY_NUMBER), max_size=40))
@settings(max_examples=150, deadline=None)
def test_nothing_outside_the_window_is_left(points: list[tuple[float, float]]) -> None:
    segments = clip(*line(points), WINDOW)
    for part in (segments.x0, segments.y0, segments.x1, segments.y1):
        assert ((part >= 0) & (part <= 1)).all()


@given(st.tuples(NEARBY, NEARBY), st.tuples(NEARBY, NEARBY))
@settings(max_examples=150, deadline=None)
def test_what_is_left_is_the_part_inside(a: tuple[float, float], b: tuple[float, float]) -> None:
    """Against the definition: a point of the segment is inside exactly if it lies between the clipped ends."""
    segments = clip(*line([a, b]), WINDOW)
    t = np.linspace(0, 1, 201)
    x, y = WINDOW.fractions(a[0] + t * (b[0] - a[0]), a[1] + t * (b[1] - a[1]))
    inside = (np.abs(x - 0.5) < 0.5 - 1e-9) & (np.abs(y - 0.5) < 0.5 - 1e-9)
    if len(segments.x0) == 0:
        assert not inside.any()
        return
    low_x, high_x = sorted((segments.x0[0], segments.x1[0]))
    low_y, high_y = sorted((segments.y0[0], segments.y1[0]))
    covered = (x >= low_x - 1e-9) & (x <= high_x + 1e-9) & (y >= low_y - 1e-9) & (y <= high_y + 1e-9)
    assert (covered | ~inside).all()
    ends = np.array([(segments.x0[0], segments.y0[0]), (segments.x1[0], segments.y1[0])])
    assert distance_to_course(ends, np.stack(WINDOW.fractions(*line([a, b])), axis=1)).max() < 1e-9


def test_a_crossing_of_the_edge_is_where_the_line_meets_it() -> None:
    """Worked by hand: from (0, 0) to (4, 2) the right edge x = 2 is met at y = 1, the middle of the window's height."""
    segments = clip(*line([(0, 0), (4, 2)]), WINDOW)
    assert (segments.x0[0], segments.y0[0]) == pytest.approx((0.5, 0.25))
    assert (segments.x1[0], segments.y1[0]) == pytest.approx((1.0, 0.5))


def test_a_line_through_the_window_between_outer_points_is_kept() -> None:
    segments = clip(*line([(-100, 1), (100, 1)]), WINDOW)
    assert (segments.x0[0], segments.x1[0]) == pytest.approx((0, 1))


@pytest.mark.parametrize("wild", [np.nan, np.inf, -np.inf])
def test_numbers_that_are_not_finite_break_the_line(wild: float) -> None:
    segments = clip(*line([(0, 0), (1, 0), (wild, 0), (1, 1), (0, 1)]), WINDOW)
    assert len(segments.x0) == 2


def test_a_far_end_keeps_its_direction() -> None:
    """(1e300, 1e300) lies on the diagonal, which leaves this window through its corner."""
    segments = clip(*line([(0, 0), (1e300, 1e300)]), Window(-1, 1, -1, 1))
    assert (segments.x1[0], segments.y1[0]) == pytest.approx((1, 1), abs=1e-6)


@pytest.mark.parametrize("far", [1e12, 1e100, 1.7e308])
def test_the_near_end_of_a_far_segment_stays_in_place(far: float) -> None:
    """A difference of such numbers forgets the near end altogether."""
    for ends in ([(far, -far), (0.5, 0.25)], [(0.5, 0.25), (-far, 0.1 * far)]):
        segments = clip(*line(ends), Window(-1, 1, -1, 1))
        found = np.array([(segments.x0[0], segments.y0[0]), (segments.x1[0], segments.y1[0])])
        assert np.abs(found - (0.75, 0.625)).max(axis=1).min() < 1e-6


def test_a_point_alone_is_seen() -> None:
    assert len(line_dots([line([(0, 0)])], WINDOW, CANVAS)[0]) == 1


@pytest.mark.parametrize("edges", [(1, 1, 0, 1), (2, 1, 0, 1), (0, 1, 0, np.nan), (-np.inf, 1, 0, 1)])
def test_no_window_without_an_inside(edges: tuple[float, float, float, float]) -> None:
    with pytest.raises(ValueError, match="no window"):
        Window(*edges)


@given(st.lists(st.tuples(ANY_NUMBER, ANY_NUMBER), max_size=40), st.integers(1, 120), st.integers(1, 40))
@settings(max_examples=150, deadline=None)
def test_dots_are_distinct_and_on_the_canvas(points: list[tuple[float, float]], columns: int, rows: int) -> None:
    canvas = Canvas(columns, rows)
    dots = line_dots([line(points)], WINDOW, canvas)[0]
    assert len(np.unique(dots, axis=0)) == len(dots)
    assert (dots >= 0).all()
    assert (dots < (canvas.dots_across, canvas.dots_upward)).all()


@given(st.lists(st.tuples(st.floats(-2, 2), st.floats(-1, 3)), min_size=2, max_size=12))
@settings(max_examples=60, deadline=None)
def test_a_line_inside_is_unbroken_and_within_a_dot_of_its_course(points: list[tuple[float, float]]) -> None:
    x, y = line(points)
    (dots,) = line_dots([(x, y)], WINDOW, CANVAS)
    across, upward = WINDOW.fractions(x, y)
    course = np.stack([across * (CANVAS.dots_across - 1), upward * (CANVAS.dots_upward - 1)], axis=1)
    assert distance_to_course(dots, course).max() <= 0.75
    assert reached_from({(int(x), int(y)) for x, y in dots}) == len(dots)


def distance_to_course(points: np.ndarray, course: np.ndarray) -> np.ndarray:
    """Of each point (n, 2) from the polyline through ``course`` (m, 2)."""
    a, d = course[:-1], np.diff(course, axis=0)
    away = points[:, None] - a
    t = np.clip((away * d).sum(axis=2) / np.maximum((d**2).sum(axis=1), 1e-300), 0, 1)
    return np.asarray(np.linalg.norm(t[:, :, None] * d - away, axis=2).min(axis=1))


def reached_from(dots: set[tuple[int, int]]) -> int:
    """How many dots can be reached from one of them in steps to neighbours."""
    steps = [(dx, dy) for dx in (-1, 0, 1) for dy in (-1, 0, 1)]
    waiting, seen = [next(iter(dots))], {next(iter(dots))}
    while waiting:
        x, y = waiting.pop()
        found = {dot for dx, dy in steps if (dot := (x + dx, y + dy)) in dots and dot not in seen}
        seen |= found
        waiting += found
    return len(seen)


def test_thinning_keeps_extremes_and_crossings() -> None:
    """A spike one sample wide in 100,000 samples, and the crossings of the window's upper edge on both its sides."""
    x = np.linspace(-2, 2, 100_001)
    y = np.zeros_like(x)
    y[70_000] = 2.9
    y[20_000] = 50.0
    (dots,) = line_dots([(x, y)], WINDOW, CANVAS)
    across, upward = WINDOW.fractions(x[[70_000, 20_000]], [2.9, 3.0])
    wanted = np.rint(np.stack([across * (CANVAS.dots_across - 1), upward * (CANVAS.dots_upward - 1)], axis=1))
    assert {tuple(dot) for dot in wanted} <= {tuple(dot) for dot in dots.astype(float)}
    assert len(dots) < 4 * CANVAS.dots_across


def test_lines_worked_on_together_stay_apart() -> None:
    lines = [line([(-2, 0), (2, 0)]), line([]), line([(2, 0), (2, 3), (1, 3)]), line([(5, 5), (6, 6)]), line([(0, 0)])]
    together = line_dots(lines, WINDOW, CANVAS)
    apart = [line_dots([each], WINDOW, CANVAS)[0] for each in lines]
    assert [len(dots) for dots in together][1::2] == [0, 0]
    assert all(np.array_equal(a, b) for a, b in zip(together, apart, strict=True))


def test_a_line_that_fills_an_area_is_thinned() -> None:
    x = np.linspace(-2, 2, 4_001)
    (dots,) = line_dots([(x, 1 + 2 * (-1.0) ** np.arange(x.size))], WINDOW, Canvas(120, 40))
    assert 1000 < len(dots) <= 3000
