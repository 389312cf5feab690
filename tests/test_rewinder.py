"""An invented rewinder drive whose figures were worked out apart from this program, to six digits."""

from __future__ import annotations

import pytest
from project_texts import REWINDER
from single_loop_files import assert_consistent, opened

from encircle.engine import Project
from encircle.engine.result import AxisPole, Margins


@pytest.fixture(scope="module")
def rewinder(tmp_path_factory: pytest.TempPathFactory) -> Project:
    return opened(REWINDER, tmp_path_factory.mktemp("rewinder"))


def six_digits(value: float) -> object:
    return pytest.approx(value, rel=5e-6)


def test_whole_diagram(rewinder: Project) -> None:
    result = rewinder.check()
    assert result.result == "pass"
    assert [set(group) for group in result.uncut_feedback] == [{"coil", "rotor"}]
    assert (result.unstable_poles_all_open, result.unstable_poles_all_closed) == (0, 0)
    assert result.hidden_unstable_poles == ()
    assert (result.title, result.frequency_unit, result.measured) == ("Rewinder drive", "Hz", ())
    assert rewinder.band == (0.1, 20000)
    assert all("pole 0 rad/s" in warning.message for warning in result.warnings)  # three blocks integrate


def test_current_loop(rewinder: Project) -> None:
    loop = rewinder.loop("current")
    assert_consistent(loop)
    assert (loop.verdict, loop.evidence) == ("stable", "proved")
    assert (loop.windings, loop.unstable_poles_before, loop.unstable_poles_after) == (0, 0, 0)
    assert loop.axis_poles_left == (AxisPole("current_controller", 0.0),)
    assert loop.undecided == ()
    (crossing,) = loop.real_axis_crossings
    assert (crossing.frequency, crossing.value) == (six_digits(2267.25), six_digits(-0.158910))
    assert crossing.turns == 0
    first, second = loop.gain_ranges
    assert (first.lower, first.upper, first.unstable_poles) == (0.0, six_digits(6.29286), 0)
    assert (second.lower, second.upper, second.unstable_poles) == (first.upper, six_digits(59.0825), 2)
    assert {f.name: f.required for f in loop.limits} == {"gain_margin_db": 6, "phase_margin_deg": 45}
    assert all(f.met for f in loop.limits)


def test_margins_of_the_current_loop(rewinder: Project) -> None:
    margins = all_of(rewinder, "current")
    assert margins.gain_increase is not None
    assert margins.phase is not None
    assert margins.delay is not None
    side, phase, delay = margins.gain_increase, margins.phase, margins.delay
    assert (side.factor, side.db, side.frequency) == tuple(map(six_digits, (6.29286, 15.9770, 2267.25)))
    assert margins.gain_decrease is None
    assert (phase.degrees, phase.frequency) == (six_digits(71.2641), six_digits(379.181))
    assert phase.direction == "lag"
    assert (delay.seconds, delay.frequency) == (six_digits(5.22062e-4), six_digits(379.181))
    assert margins.modulus.value == six_digits(0.793289)
    assert margins.modulus.frequency == six_digits(1312.92)
    peak = margins.sensitivity_peak
    assert (peak.value, peak.db, peak.frequency) == tuple(map(six_digits, (1.26058, 2.01137, 1312.92)))
    peak = margins.complementary_peak
    assert (peak.value, peak.db, peak.frequency) == tuple(map(six_digits, (1.03100, 0.265157, 108.373)))
    assert margins.gain_crossovers == (six_digits(379.181),)


def test_speed_loop(rewinder: Project) -> None:
    loop, margins = rewinder.loop("speed"), all_of(rewinder, "speed")
    assert_consistent(loop)
    assert (loop.windings, loop.unstable_poles_before, loop.unstable_poles_after) == (0, 0, 0)
    assert loop.axis_poles_left == ()
    assert margins.gain_increase is not None
    assert margins.phase is not None
    assert margins.delay is not None
    assert margins.gain_increase.factor == six_digits(38.9593)
    assert margins.gain_increase.frequency == six_digits(337.132)
    assert margins.gain_decrease is None
    assert (margins.phase.degrees, margins.phase.frequency) == (six_digits(69.7287), six_digits(12.9695))
    assert (margins.delay.seconds, margins.delay.frequency) == (six_digits(0.0149343), six_digits(12.9695))
    assert (margins.modulus.value, margins.modulus.frequency) == (six_digits(0.943533), six_digits(112.246))
    assert margins.complementary_peak.value == six_digits(1.20444)
    assert margins.complementary_peak.frequency == six_digits(5.42974)
    required = {"gain_margin_db": 6, "phase_margin_deg": 50, "modulus_margin": 0.5}
    assert {f.name: f.required for f in loop.limits} == required
    assert all(f.met for f in loop.limits)


def all_of(project: Project, name: str) -> Margins:
    margins = project.loop(name).margins
    assert margins is not None
    return margins
