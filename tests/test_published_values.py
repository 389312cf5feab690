"""Margins, limits and windings against published systems; sources stand in check_values.json beside each figure."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from published_readings import IN_OWN_TESTS, NOT_LOOP_FIGURES, READINGS, Opened, margins, sensitivity_integral
from published_systems import ENTRIES, SYSTEMS, system
from single_loop_files import SingleLoop, assert_consistent, opened

from encircle.engine.result import GainRange

FIGURES = [
    pytest.param(
        entry["id"], figure, id=f"{entry['id']}: {figure['name']}" + (" (from memory)" if entry["from_memory"] else "")
    )
    for entry in ENTRIES.values()
    for figure in entry["expected"]
    if entry["id"] not in IN_OWN_TESTS and (entry["id"], figure["name"]) not in NOT_LOOP_FIGURES
]


@pytest.fixture(scope="module")
def case(tmp_path_factory: pytest.TempPathFactory) -> Callable[[str, str], Opened]:
    """Open a system once for all figures read from it."""
    opened_before: dict[tuple[str, str], Opened] = {}

    def open_case(entry: str, label: str) -> Opened:
        if (entry, label) not in opened_before:
            loop = system(entry, label)
            project = loop.opened(tmp_path_factory.mktemp(entry))
            opened_before[entry, label] = Opened(project, project.loop("loop"), loop)
        return opened_before[entry, label]

    return open_case


@pytest.mark.parametrize(("entry", "figure"), FIGURES)
def test_figure(entry: str, figure: dict[str, Any], case: Callable[[str, str], Opened]) -> None:
    label, read = READINGS[entry][figure["name"]]
    found = read(case(entry, label))
    expected = float(figure["expected"])
    assert found == pytest.approx(expected, rel=figure["test_tol_rel"], abs=1e-6 if expected == 0 else 0)
    if figure.get("agreement") == "yes" and is_number(figure["published"]) and math.isfinite(expected):
        assert found == pytest.approx(float(figure["published"]), abs=figure["published_tol_abs"] * (1 + 1e-9))


def is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def test_no_figure_is_forgotten() -> None:
    named = {(e["id"], f["name"]) for e in ENTRIES.values() for f in e["expected"]}
    read = {(entry, name) for entry, readings in READINGS.items() for name in readings}
    own = {pair for pair in named if pair[0] in IN_OWN_TESTS}
    assert read | own | set(NOT_LOOP_FIGURES) == named
    assert not read & set(NOT_LOOP_FIGURES)


WINDINGS = [
    (entry, label)
    for entry, values in ENTRIES.items()
    if "winding" in values
    for label in ([""] if "system" in values else SYSTEMS[entry])
]


@pytest.mark.parametrize(("entry", "label"), WINDINGS)
def test_windings(entry: str, label: str, case: Callable[[str, str], Opened]) -> None:
    loop, expected = case(entry, label).loop, ENTRIES[entry]["winding"]
    assert (loop.windings, loop.unstable_poles_before, loop.unstable_poles_after) == (
        expected["N_cw"], expected["P"], expected["Z"],
    )  # fmt: skip
    assert loop.evidence == "proved"
    assert loop.verdict == ("stable" if expected["Z"] == 0 else "unstable")
    assert_consistent(loop)


def merged(ranges: tuple[GainRange, ...]) -> list[tuple[float, float, int]]:
    """Gain ranges with touching neighbours of equal Z made one."""
    result: list[tuple[float, float, int]] = []
    for item in ranges:
        upper = math.inf if item.upper is None else item.upper
        if result and result[-1][2] == item.unstable_poles and result[-1][1] == item.lower:
            result[-1] = (result[-1][0], upper, item.unstable_poles)
        else:
            result.append((item.lower, upper, item.unstable_poles))
    return result


def with_gain_off_limits(loop: SingleLoop, edges: list[float]) -> SingleLoop:
    """The loop at a gain that lies on none of the published limits."""
    gain = next(g for g in (1.0, 0.7, 2.3) if all(abs(g - edge) > 0.01 for edge in edges))
    return replace(loop, gain=gain)


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize("entry", [e for e, values in ENTRIES.items() if "gain_intervals" in values])
def test_unstable_poles_in_every_gain_interval(entry: str, sign: int, tmp_path: Path) -> None:
    """The published intervals of K, split at 0; K < 0 is the same loop with the minus in its equation."""
    expected = []
    for interval in ENTRIES[entry]["gain_intervals"]:
        ends = sorted(sign * float(interval[key]) for key in ("k_from", "k_to"))
        if ends[1] > 0:
            expected.append((max(ends[0], 0.0), ends[1], interval["Z"], interval["P"]))
    expected.sort()
    loop = with_gain_off_limits(system(entry, "" if sign > 0 else "K < 0"), [end for e in expected for end in e[:2]])
    found = loop.opened(tmp_path).loop("loop")
    assert_consistent(found)
    assert found.unstable_poles_before == expected[0][3]
    ranges = merged(found.gain_ranges)
    assert [r[2] for r in ranges] == [e[2] for e in expected]
    for (lower, upper, _), (k_from, k_to, _, _) in zip(ranges, expected, strict=True):
        assert lower * loop.gain == pytest.approx(k_from, rel=1e-6)
        assert upper * loop.gain == pytest.approx(k_to, rel=1e-6)


def test_lower_limits_at_standstill_and_upper_limits_at_infinity(case: Callable[[str, str], Opened]) -> None:
    """A33, B11, B22: limits that lie on no logarithmic grid of frequencies."""
    k1 = margins(case("A33", "K1"))
    assert k1.gain_decrease.frequency == 0.0
    assert k1.gain_increase.frequency is None
    assert k1.sensitivity_peak.frequency is None
    assert margins(case("B11", "")).gain_decrease.frequency == 0.0
    assert margins(case("B22", "")).gain_increase.frequency == 0.0


def test_never_asymptotically_stable(case: Callable[[str, str], Opened]) -> None:
    """B19, K/(s^2 + 1): the closed loop keeps its poles on the axis, so no count is given."""
    loop = case("B19", "case 3").loop
    assert loop.verdict == "undecided"
    assert loop.unstable_poles_after is None
    assert_consistent(loop)


def test_sensitivity_integral_without_unstable_poles(case: Callable[[str, str], Opened]) -> None:
    """D11, second loop: the integral of ln|S| is 0 (Freudenberg, Looze 1985)."""
    assert sensitivity_integral(case("D11", "P = 0")) == pytest.approx(0.0, abs=1e-4)


def test_infinitely_many_limits_with_dead_time(case: Callable[[str, str], Opened]) -> None:
    """B24: Z grows by a pair at K = pi/2 + 2 pi n; the list stops after the second change above 1."""
    loop = case("B24", "K=1.0").loop
    assert [r.unstable_poles for r in loop.gain_ranges] == [0, 2]
    edges = [r.upper for r in loop.gain_ranges]
    assert edges == pytest.approx([math.pi / 2, 5 * math.pi / 2], rel=1e-9)


HIDDEN = """
format = 1
[blocks.controller]
numerator = [1.0, -2.0]
denominator = [1.0, -1.0]
[blocks.plant]
numerator = [1.0, -1.0]
denominator = [1.0, -2.0]
[signals]
error = "-output"
output = "plant * controller * error"
[[loops]]
name = "loop"
cut = "error"
"""


def test_hidden_cancellation(tmp_path: Path) -> None:
    """B28: L = 1 shows nothing; both poles right of the axis are still there."""
    expected = {figure["name"]: figure["expected"] for figure in ENTRIES["B28"]["expected"]}
    project = opened(HIDDEN, tmp_path)
    loop = project.loop("loop")
    assert loop.unstable_poles_after == expected["closed-loop RHP poles (full system)"]
    assert loop.windings == expected["windings of the cancelled L"]
    assert loop.unstable_poles_before == 2
    assert loop.verdict == "unstable"
    hidden = {(pole.block, pole.pole) for pole in project.check().hidden_unstable_poles}
    assert hidden == {("controller", 1 + 0j), ("plant", 2 + 0j)}


SATELLITE = """
format = 1
frequency_unit = "rad/s"
[parameters]
a = 10.0
[blocks.first_rate]
formula = "1/s"
[blocks.second_rate]
formula = "1/s"
[signals]
x1 = "first_rate*(a*x2 + u1)"
x2 = "second_rate*(u2 - a*x1)"
y1 = "x1 + a*x2"
y2 = "x2 - a*x1"
u1 = "-y1"
u2 = "-y2"
[[loops]]
name = "first"
cut = "u1"
gain = {first}
[[loops]]
name = "second"
cut = "u2"
gain = {second}
"""


def test_satellite(tmp_path: Path) -> None:
    """D02: each loop alone has 90 deg, L = 1/s, and opposite gain errors of 10 % end it (Doyle 1978)."""
    expected = {figure["name"]: figure["expected"] for figure in ENTRIES["D02"]["expected"]}
    second = opened(SATELLITE.format(first=1.0, second=1.0), tmp_path)
    loop = second.loop("second")
    assert loop.margins is not None
    assert loop.margins.phase is not None
    assert loop.margins.phase.degrees == pytest.approx(expected["loop-at-a-time L_i: PM"], rel=1e-6)
    omega = np.geomspace(0.01, 100.0, 50)
    np.testing.assert_allclose(second.response("second", omega), 1 / (1j * omega), rtol=1e-9)
    critical = expected["critical opposite gain error"]
    for factor, Z_expected in ((0.9999, 0), (1.0001, 1)):
        x = critical * factor
        result = opened(SATELLITE.format(first=1 + x, second=1 - x), tmp_path).check()
        assert result.loops[1].unstable_poles_after == Z_expected
        assert result.unstable_poles_all_closed == Z_expected
