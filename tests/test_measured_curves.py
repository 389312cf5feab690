"""Chord curves of measured loops: steps across the real axis, curves past the last line, contradicting declarations."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from single_loop_files import assert_consistent, opened

from encircle.engine import Project
from encircle.engine.result import LoopResult

Complex = NDArray[np.complex128]


def project(folder: Path, omega: NDArray[np.float64], H: Complex, keys: str, models: str, y: str) -> Project:
    """One measured block `block` in a loop around y, with further blocks."""
    rows = [f"{w!r},{h.real!r},{h.imag!r}" for w, h in zip(omega.tolist(), H.tolist(), strict=True)]
    (folder / "lines.csv").write_text("frequency_rad_s,real,imag\n" + "\n".join(rows) + "\n", encoding="utf-8")
    text = 'format = 1\nfrequency_unit = "rad/s"\n'
    text += f'[blocks.block]\nmeasured = "lines.csv"\n{keys}\n{models}\n[signals]\ne = "-y"\ny = "{y}"\n'
    return opened(text + '[[loops]]\nname = "loop"\ncut = "e"\n', folder)


def consistent(found: Project) -> LoopResult:
    loop = found.loop("loop")
    assert_consistent(loop)
    return loop


@pytest.mark.parametrize("angle", [-25.0, -8.0, 8.0, 25.0])
@pytest.mark.parametrize("lag", [0.0, 0.2])
def test_a_step_across_the_real_axis_is_bridged(tmp_path: Path, angle: float, lag: float) -> None:
    """H = -6/(1 + s/5) and a phase error at all lines: the asymptote is real, the first line is not.

    -6 < -1 at standstill: P = 0, and Z is odd: 1 (the phase error turns nothing across -1).
    """
    omega = np.geomspace(0.5, 400.0, 600)
    H = -6 / (1 + 0.2j * omega) ** 2 * np.exp(1j * np.radians(angle) * np.exp(-omega / 30))
    models = f'[blocks.lag]\nformula = "1/(1 + {lag}*s)"\n'
    keys = "unstable_poles = 0\nintegrators = 0\nroll_off = 2"
    loop = consistent(project(tmp_path, omega, H, keys, models, "lag*block*e"))
    assert loop.unstable_poles_after == 1
    assert loop.windings == 1
    assert loop.real_axis_crossings


def test_the_curve_goes_on_where_a_model_does_after_the_last_line(tmp_path: Path) -> None:
    """A resonance at 50 rad/s far above the last line (10 rad/s) winds twice round -1: known from the model alone."""
    omega = np.geomspace(0.05, 10.0, 400)
    H = 0.5 / (1 + 1j * omega) ** 2
    models = '[blocks.mode]\nformula = "-5*s/(s^2 + 0.5*s + 2500)"\n'
    keys = "unstable_poles = 0\nintegrators = 0\nroll_off = 2"
    found = project(tmp_path, omega, H, keys, models, "block*e + mode*e")
    loop = consistent(found)
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (0, 2, 2)
    curve = found.curve("loop")
    beyond = curve.frequency > 10.0
    assert np.abs(curve.L[beyond]).max() > 4.0
    assert curve.radius[beyond] == pytest.approx(0.5 / 101 * (10 / curve.frequency[beyond]) ** 2, rel=1e-6)


def test_a_double_integrator_rests_on_the_real_axis_below_its_first_line(tmp_path: Path) -> None:
    """L = H ~ -k/w^2 on the asymptote; the lines leave the axis upward (lead) or downward (lag)."""
    omega = np.geomspace(0.05, 300.0, 900)
    for lead, lag, unstable in ((1.0, 0.02, 0), (0.02, 1.0, 2)):
        H = 4 * (1 + 1j * omega * lead) / (1 + 1j * omega * lag) / (1j * omega) ** 2
        keys = "unstable_poles = 0\nintegrators = 2\nroll_off = 2"
        loop = consistent(project(tmp_path, omega, H, keys, "", "block*e"))
        assert (loop.unstable_poles_before, loop.unstable_poles_after) == (0, unstable)


def test_a_contradicted_declaration_is_named(tmp_path: Path) -> None:
    omega = np.geomspace(0.01, 200.0, 900)
    H = 3 / (1j * omega - 1) * (2 + 1j * omega) / (1j * omega - 2)
    keys = "unstable_poles = {}\nintegrators = 0\nroll_off = 1"
    loop = consistent(project(tmp_path, omega, -5 * H, keys.format(2), "", "-1*block*e"))
    assert (loop.unstable_poles_before, loop.unstable_poles_after) == (2, 0)
    for stated in (0, 1):
        found = project(tmp_path, omega, -5 * H, keys.format(stated), "", "-1*block*e")
        loop = consistent(found)
        assert loop.verdict == "undecided"
        (why,) = (stretch.why for stretch in loop.undecided)
        assert f"`unstable_poles = {stated}` of `block`" in why
        assert found.check().unstable_poles_all_closed is None
        assert found.check().result == "undecided"


def test_dead_time_beside_data_stops_the_list_of_ranges(tmp_path: Path) -> None:
    """Infinitely many changes follow: the list ends after the second one above 1."""
    omega = np.geomspace(0.01, 500.0, 1500)
    models = '[blocks.path]\nformula = "exp(-0.3*s)/(1 + s)"\n'
    keys = "unstable_poles = 0\nintegrators = 0\nroll_off = 2"
    H = 0.2 / (1 + 1j * omega) ** 2
    loop = consistent(project(tmp_path, omega, H, keys, models, "block*e + path*e"))
    assert [r.unstable_poles for r in loop.gain_ranges] == [0, 2]
    assert loop.gain_ranges[-1].upper is not None
    assert loop.margins is not None
    assert loop.margins.gain_increase is not None
    assert loop.margins.gain_increase.factor == loop.gain_ranges[0].upper
