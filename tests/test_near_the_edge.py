"""Loops whose closed-loop poles lie on the axis or next to it: decided down to tiny distances, never wrong.

K/(s (s + a)(s + b)) has its limit at K = a b (a + b), w = sqrt(a b), by the Routh array of the cubic (a standard worked
example, from memory).
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from single_loop_files import opened

from encircle.engine.result import LoopResult

PAIRS = [(1.0, 2.0), (2.0, 10.0), (7.0, 11.0), (0.001, 3000.0)]


def cubic(a: float, b: float, K: float, folder: Path, unit: str = "rad/s") -> LoopResult:
    text = f"""
format = 1
frequency_unit = "{unit}"
[blocks.plant]
zeros = []
poles = [0, {-a!r}, {-b!r}]
leading_gain = {K!r}
[signals]
e = "-y"
y = "plant*e"
[[loops]]
name = "loop"
cut = "e"
"""
    return opened(text, folder).loop("loop")


@pytest.mark.parametrize(("a", "b"), PAIRS)
@pytest.mark.parametrize("distance", [1e-2, 1e-4, 1e-6, 1e-8])
def test_loops_next_to_their_limit_are_decided(a: float, b: float, distance: float, tmp_path: Path) -> None:
    limit = a * b * (a + b)
    stable = cubic(a, b, limit * (1.0 - distance), tmp_path)
    unstable = cubic(a, b, limit * (1.0 + distance), tmp_path)
    assert (stable.unstable_poles_after, unstable.unstable_poles_after) == (0, 2)
    assert (stable.evidence, unstable.evidence) == ("proved", "proved")
    assert stable.margins is not None
    assert stable.margins.gain_increase is not None
    assert stable.margins.gain_increase.factor - 1.0 == pytest.approx(distance, rel=2e-2)


@pytest.mark.parametrize(("a", "b"), PAIRS)
@pytest.mark.parametrize("distance", [1e-10, 1e-12, 1e-13])
def test_loops_at_their_limit_are_never_counted_wrong(a: float, b: float, distance: float, tmp_path: Path) -> None:
    limit = a * b * (a + b)
    assert cubic(a, b, limit * (1.0 - distance), tmp_path).unstable_poles_after in (0, None)
    assert cubic(a, b, limit * (1.0 + distance), tmp_path).unstable_poles_after in (2, None)


@pytest.mark.parametrize(("unit", "text"), [("rad/s", "1.414 rad/s"), ("Hz", "0.2251 Hz")])
def test_a_pole_on_the_axis_is_named_with_its_frequency(unit: str, text: str, tmp_path: Path) -> None:
    """K = 6 with a = 1, b = 2: s^3 + 3 s^2 + 2 s + 6 = (s + 3)(s^2 + 2)."""
    loop = cubic(1.0, 2.0, 6.0, tmp_path, unit)
    assert loop.verdict == "undecided"
    assert loop.evidence == "none"
    assert any(f"pole on the axis near {text}" in stretch.why for stretch in loop.undecided)
    stretch = loop.undecided[0]
    assert stretch.upper is not None
    per_unit = 2.0 * math.pi if unit == "Hz" else 1.0
    assert stretch.lower * per_unit <= math.sqrt(2.0) <= stretch.upper * per_unit
