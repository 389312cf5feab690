"""Positions and labels of ticks."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from encircle.tui.ticks import Tick, decibel_ticks, degree_ticks, frequency_label, linear_ticks, logarithmic_ticks

PREFIX = {"k": 1e3, "M": 1e6, "G": 1e9, "T": 1e12}


def value(label: str) -> float:
    return float(label[:-1]) * PREFIX[label[-1]] if label[-1] in PREFIX else float(label)


def labels(ticks: tuple[Tick, ...]) -> list[str]:
    return [tick.label for tick in ticks]


@pytest.mark.parametrize(
    ("number", "label"),
    [
        (0.001, "0.001"),
        (0.05, "0.05"),
        (1, "1"),
        (2.5, "2.5"),
        (10, "10"),
        (500, "500"),
        (1000, "1k"),
        (20_000, "20k"),
        (1e6, "1M"),
        (5e9, "5G"),
        (1e-5, "1e-5"),
        (1e18, "1e18"),
    ],
)
def test_frequencies_have_short_labels(number: float, label: str) -> None:
    assert frequency_label(number) == label


def test_a_narrow_band_has_ticks_at_1_2_5() -> None:
    assert labels(logarithmic_ticks(50, 1000, 8)) == ["50", "100", "200", "500", "1k"]


def test_a_band_of_three_decades_has_ticks_at_1_3() -> None:
    assert labels(logarithmic_ticks(1, 1000, 8)) == ["1", "3", "10", "30", "100", "300", "1k"]


def test_a_wide_band_has_ticks_at_powers_of_ten() -> None:
    assert labels(logarithmic_ticks(1, 1e5, 6)) == ["1", "10", "100", "1k", "10k", "100k"]


def test_a_very_wide_band_leaves_decades_out() -> None:
    assert labels(logarithmic_ticks(1e-6, 1e6, 5)) == ["1e-6", "0.001", "1", "1k", "1M"]


def test_decibels_go_in_twenties() -> None:
    assert labels(decibel_ticks(-60, 40, 6)) == ["-60", "-40", "-20", "0", "20", "40"]


def test_degrees_divide_the_circle() -> None:
    assert labels(degree_ticks(-270, 0, 4)) == ["-270", "-180", "-90", "0"]
    assert labels(degree_ticks(-720, 0, 4)) == ["-720", "-360", "0"]


def test_linear_labels_have_no_useless_digits() -> None:
    assert labels(linear_ticks(-1.6, 1.2, 7)) == ["-1.5", "-1", "-0.5", "0", "0.5", "1"]


BOUNDS = st.tuples(st.floats(-1e6, 1e6), st.floats(1e-3, 1e6))


@given(BOUNDS, st.integers(2, 30))
def test_linear_ticks_say_where_they_stand(bounds: tuple[float, float], most: int) -> None:
    lower, length = bounds
    ticks = linear_ticks(lower, lower + length, most)
    assert len(ticks) <= most
    assert all(lower - 1e-6 * length <= tick.position <= lower + length * (1 + 1e-6) for tick in ticks)
    assert all(abs(float(tick.label) - tick.position) <= 0.01 * abs(tick.position) for tick in ticks)


@given(st.floats(-9, 9), st.floats(0.05, 12), st.integers(2, 30))
def test_logarithmic_ticks_say_where_they_stand(start: float, decades: float, most: int) -> None:
    ticks = logarithmic_ticks(10**start, 10 ** (start + decades), most)
    assert len(ticks) <= most
    assert all(start - 1e-6 <= tick.position <= start + decades + 1e-6 for tick in ticks)
    assert all(math.isclose(value(tick.label), 10**tick.position, rel_tol=1e-9) for tick in ticks)
