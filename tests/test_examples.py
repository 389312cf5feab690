"""The examples tell what their README says; the numbers by plain numpy on a dense grid, apart from the engine."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from encircle.engine import Project, open_project
from encircle.engine.result import LoopResult, Margins

EXAMPLES = Path(__file__).parent.parent / "examples"
FILES = sorted(EXAMPLES.glob("*/*.toml"))


@pytest.fixture(scope="module")
def projects() -> dict[str, Project]:
    return {path.stem: open_project(path) for path in FILES}


def margins_of(loop: LoopResult) -> Margins:
    assert loop.margins is not None
    return loop.margins


def test_every_example_is_here(projects: dict[str, Project]) -> None:
    assert set(projects) == {"drive", "bearing", "tank", "tank_mended"}


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_every_example_says_that_it_is_invented_and_warns(path: Path) -> None:
    readme = (path.parent / "README.md").read_text(encoding="utf-8")
    assert "invented" in path.read_text(encoding="utf-8").lower()
    assert "invented" in readme
    assert "Local codes" in readme


def counts(project: Project) -> list[tuple[str, str, int | None, int | None, int | None]]:
    """Name, verdict, P, N and Z of each loop."""
    return [
        (loop.name, loop.verdict, loop.unstable_poles_before, loop.windings, loop.unstable_poles_after)
        for loop in project.check().loops
    ]


# ---- drive -----------------------------------------------------------------------------------------------------------


def drive_speed_loop(omega: np.ndarray) -> np.ndarray:
    """L of the drive's speed loop, its equations written out: two inertias, a shaft, back-EMF, the current loop."""
    s = 1j * omega
    controller = (21 + 9000 / s) * np.exp(-93.75e-6 * s)
    motor, slide, shaft = 1 / (1.1e-3 * s + 2e-5), 1 / (1.9e-3 * s + 4e-5), 0.04 + 750 / s
    mechanics = motor * (1 + shaft * slide) / (1 + shaft * (motor + slide))  # torque to motor speed
    winding = 1 / (4.2e-3 * s + 0.9)
    plant = winding / (1 + winding * 0.62 * 0.62 * mechanics)  # voltage to current
    closed = plant * controller / (1 + plant * controller / (1 + 15e-6 * s))
    return (1.2 + 40 / s) * closed * 0.62 * mechanics / (1 + 6e-4 * s)


def test_drive(projects: dict[str, Project]) -> None:
    drive = projects["drive"]
    assert counts(drive) == [(name, "stable", 0, 0, 0) for name in ("current", "speed", "position")]
    result = drive.check()
    assert result.result == "pass"
    assert [set(group) for group in result.uncut_feedback] == [{"winding", "motor", "slide", "shaft"}]
    assert all(loop.evidence == "proved" and loop.axis_poles_left == () for loop in result.loops)


def test_speed_loop_of_the_drive_is_tightest_at_the_shaft(projects: dict[str, Project]) -> None:
    omega = 2 * np.pi * np.geomspace(0.5, 5000, 400_001)
    L = drive_speed_loop(omega)
    some = slice(None, None, 50_000)
    found = projects["drive"].response("speed", omega[some] / (2 * np.pi))
    np.testing.assert_allclose(found, L[some], rtol=1e-9)
    margins = margins_of(projects["drive"].loop("speed"))
    passes = np.flatnonzero(np.diff(np.sign(np.abs(L) - 1)))
    assert margins.gain_crossovers == pytest.approx(omega[passes] / (2 * np.pi), rel=1e-4)
    assert len(passes) == 3
    room = np.degrees(np.abs(np.angle(-L[passes])))
    assert margins.phase is not None
    assert margins.phase.degrees == pytest.approx(room.min(), abs=0.01)
    assert margins.phase.frequency == pytest.approx(margins.gain_crossovers[2], rel=1e-9)
    assert 45 < margins.phase.degrees < 48
    assert margins.modulus.value == pytest.approx(np.abs(1 + L).min(), rel=1e-6)


def test_a_quarter_more_gain_breaks_the_phase_limit_of_the_drive(projects: dict[str, Project]) -> None:
    louder = projects["drive"].with_gain("speed", 1.25).loop("speed")
    assert {limit.name for limit in louder.limits if not limit.met} == {"phase_margin_deg"}


def test_drive_without_friction_leaves_a_pole_at_standstill(tmp_path: Path) -> None:
    text = (EXAMPLES / "drive" / "drive.toml").read_text(encoding="utf-8")
    for friction in ("friction = 2e-5", "friction = 4e-5"):
        assert friction in text
        text = text.replace(friction, "friction = 0")
    (tmp_path / "drive.toml").write_text(text, encoding="utf-8")
    frictionless = open_project(tmp_path / "drive.toml")
    assert [(pole.frequency) for pole in frictionless.loop("current").axis_poles_left] == [0.0]
    assert frictionless.loop("speed").axis_poles_left == ()
    assert frictionless.check().result == "pass"


# ---- bearing ---------------------------------------------------------------------------------------------------------


def test_bearing(projects: dict[str, Project]) -> None:
    bearing = projects["bearing"]
    assert counts(bearing) == [("current", "as_declared", 1, 0, 1), ("position", "stable", 1, -1, 0)]
    assert [loop.evidence for loop in bearing.check().loops] == ["proved", "data"]
    assert bearing.check().result == "pass"
    margins = margins_of(bearing.loop("position"))
    assert margins.gain_increase is not None
    assert margins.gain_decrease is not None


def test_bearing_meets_the_zone_limit_narrowly(projects: dict[str, Project]) -> None:
    """ISO 14839-3:2006, zone limit A/B of the peak of |S|: 9.5 dB, factor 3 (from memory of its table)."""
    (limit,) = projects["bearing"].loop("position").limits
    assert (limit.name, limit.required) == ("sensitivity_peak_db", 9.5)
    assert limit.found is not None
    curve = projects["bearing"].curve("position")
    drawn = 20 * np.log10(np.abs(curve.S).max())
    assert drawn + 0.5 < limit.found < 9.5


def test_bearing_without_its_declaration_is_unstable(tmp_path: Path) -> None:
    shutil.copy(EXAMPLES / "bearing" / "flexible_mode.csv", tmp_path)
    text = (EXAMPLES / "bearing" / "bearing.toml").read_text(encoding="utf-8")
    lines = [line for line in text.splitlines() if not line.startswith("leaves_unstable")]
    (tmp_path / "bearing.toml").write_text("\n".join(lines), encoding="utf-8")
    assert open_project(tmp_path / "bearing.toml").loop("current").verdict == "unstable"


@pytest.mark.parametrize(("between_lines", "verdict", "met"), [(2, "stable", False), (8, "undecided", None)])
def test_a_wider_band_costs_the_limit_and_then_the_verdict(
    between_lines: int, verdict: str, met: bool | None, tmp_path: Path
) -> None:
    shutil.copy(EXAMPLES / "bearing" / "flexible_mode.csv", tmp_path)
    text = (EXAMPLES / "bearing" / "bearing.toml").read_text(encoding="utf-8")
    wider = text.replace("roll_off = 2", f"roll_off = 2\nbetween_lines = {between_lines}")
    (tmp_path / "bearing.toml").write_text(wider, encoding="utf-8")
    position = open_project(tmp_path / "bearing.toml").loop("position")
    assert position.verdict == verdict
    assert [limit.met for limit in position.limits] == [met]
    assert all("would decide" in stretch.why for stretch in position.undecided)
    assert bool(position.undecided) == (verdict == "undecided")


def test_the_measurement_is_made_again_byte_for_byte(tmp_path: Path) -> None:
    shutil.copy(EXAMPLES / "bearing" / "make_measurement.py", tmp_path)
    subprocess.run([sys.executable, str(tmp_path / "make_measurement.py")], check=True)
    made = (tmp_path / "flexible_mode.csv").read_bytes()
    assert made == (EXAMPLES / "bearing" / "flexible_mode.csv").read_bytes()


# ---- tank ------------------------------------------------------------------------------------------------------------


def test_the_trap_in_the_tank(projects: dict[str, Project]) -> None:
    tank = projects["tank"]
    assert counts(tank) == [("flow", "stable", 0, 0, 0), ("level", "unstable", 1, 0, 1)]
    result = tank.check()
    assert [(pole.block, pole.pole) for pole in result.hidden_unstable_poles] == [("vessel", pytest.approx(0.0015))]
    assert result.result == "fail"


def test_the_level_curve_looks_like_a_textbook(projects: dict[str, Project]) -> None:
    """L = k full_flow T_flow exp(-12 s)/(s (2 s + 1)): the pole is not to be seen in it."""
    omega = np.geomspace(1e-4, 10, 41)
    s = 1j * omega
    flow = (0.55 + 0.5 / s) * np.exp(-0.5 * s) / (0.9 * s + 1)
    inner = flow / (1 + flow / (0.3 * s + 1))
    expected = 0.55 * 0.04 * inner * np.exp(-12 * s) / (s * (2 * s + 1))
    np.testing.assert_allclose(projects["tank"].response("level", omega), expected, rtol=1e-9)


def test_the_mended_tank(projects: dict[str, Project]) -> None:
    mended = projects["tank_mended"]
    assert counts(mended) == [("flow", "stable", 0, 0, 0), ("level", "stable", 1, -1, 0)]
    assert mended.check().result == "pass"
    assert margins_of(mended.loop("level")).gain_decrease is not None
