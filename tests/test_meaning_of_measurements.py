"""What measured blocks mean: chord and radius between lines, asymptotes outside them, guaranteed margins.

The measured curve L itself is the block here, so that the band round it can be worked out with plain numpy.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import brentq
from single_loop_files import assert_consistent, opened

from encircle.engine import Project
from encircle.engine.result import LoopResult

Complex = NDArray[np.complex128]


def lags(omega: NDArray[np.float64]) -> Complex:
    """4/(s + 1)^3: stable, with a limit at twice the gain, sqrt(3) rad/s."""
    return np.asarray(4 / (1 + 1j * omega) ** 3)


def write_lines(path: Path, omega: NDArray[np.float64], H: Complex) -> None:
    rows = [f"{w!r},{h.real!r},{h.imag!r}" for w, h in zip(omega.tolist(), H.tolist(), strict=True)]
    path.write_text("frequency_rad_s,real,imag\n" + "\n".join(rows) + "\n", encoding="utf-8")


def measured(folder: Path, omega: NDArray[np.float64], H: Complex, keys: str = "") -> Project:
    """A project whose loop holds one measured block with the given lines."""
    write_lines(folder / "lines.csv", omega, H)
    keys = keys or "integrators = 0\nroll_off = 3"
    if "unstable_poles" not in keys:
        keys += "\nunstable_poles = 0"
    block = f'[blocks.block]\nmeasured = "lines.csv"\n{keys}\n'
    text = f'format = 1\nfrequency_unit = "rad/s"\n{block}[signals]\ne = "-y"\ny = "block*e"\n'
    return opened(text + '[[loops]]\nname = "loop"\ncut = "e"\n', folder)


def distances(H: Complex, point: complex, between_lines: float = 1.0) -> NDArray[np.float64]:
    """Distance of a point from each chord, less its radius: negative inside the band."""
    start, step = H[:-1], H[1:] - H[:-1]
    share = np.clip(((point - start) * step.conj()).real / np.abs(step) ** 2, 0, 1)
    return np.asarray(np.abs(start + share * step - point) - between_lines * np.abs(step))


def clearance(H: Complex, point: complex, between_lines: float = 1.0) -> float:
    """Least distance of the point from the band: gaps, the step at the first line, the disc above the last line."""
    lines = np.concatenate([[H[0].real], H])
    return min(distances(lines, point, between_lines).min(), abs(point) - abs(H[-1]))


def decided(loop: LoopResult) -> LoopResult:
    assert_consistent(loop)
    assert loop.margins is not None
    return loop


DENSE = np.geomspace(0.01, 200.0, 1500)


def test_a_dense_measurement_decides_and_says_what_it_rests_on(tmp_path: Path) -> None:
    project = measured(tmp_path, DENSE, lags(DENSE))
    loop = decided(project.loop("loop"))
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (0, 0, 0)
    assert loop.evidence == "data"
    assert loop.assumptions
    (file,) = project.check().measured
    assert (file.block, file.lines, file.lower, file.upper) == ("block", 1500, DENSE[0], DENSE[-1])


def test_an_unstable_loop_is_counted_from_data_too(tmp_path: Path) -> None:
    """At K = 3 the lags have a pair right of the axis."""
    loop = measured(tmp_path, DENSE, 3 * lags(DENSE)).loop("loop")
    assert (loop.windings, loop.unstable_poles_after, loop.verdict) == (2, 2, "unstable")


def test_declared_unstable_poles_are_P(tmp_path: Path) -> None:
    """2/(s - 1) measured: data cannot show its pole; stated, the loop winds once against the clock.

    Stated as 0 it would leave Z = -1: the statement contradicts the data.
    """
    H = 2 / (1j * DENSE - 1)
    loop = measured(tmp_path, DENSE, H, keys="integrators = 0\nroll_off = 1\nunstable_poles = 1").loop("loop")
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (1, -1, 0)
    lost = measured(tmp_path, DENSE, H, keys="integrators = 0\nroll_off = 1\nunstable_poles = 0").loop("loop")
    assert (lost.verdict, lost.unstable_poles_after) == ("undecided", None)


def test_modulus_is_the_least_distance_of_the_band(tmp_path: Path) -> None:
    H = lags(DENSE)
    margins = decided(measured(tmp_path, DENSE, H).loop("loop")).margins
    assert margins is not None
    assert margins.modulus.value == pytest.approx(clearance(H, -1.0), rel=1e-5)
    assert margins.sensitivity_peak.value == pytest.approx(1 / clearance(H, -1.0), rel=1e-5)
    assert margins.modulus.value < np.abs(1 + H).min()


def test_between_lines_scales_the_band(tmp_path: Path) -> None:
    H = lags(DENSE)
    keys = "integrators = 0\nroll_off = 3\nbetween_lines = 2.5"
    margins = decided(measured(tmp_path, DENSE, H, keys=keys).loop("loop")).margins
    assert margins is not None
    assert margins.modulus.value == pytest.approx(clearance(H, -1.0, 2.5), rel=1e-5)


def test_gain_margin_is_the_first_contact_of_the_band(tmp_path: Path) -> None:
    """-1/g enters the band of L at the guaranteed factor g."""
    H = lags(DENSE)
    margins = decided(measured(tmp_path, DENSE, H).loop("loop")).margins
    assert margins is not None
    assert margins.gain_increase is not None
    contact = brentq(lambda g: clearance(H, -1 / g), 1.0, 2.0, xtol=1e-12)
    assert margins.gain_increase.factor == pytest.approx(contact, rel=1e-5)
    assert contact < 2.0


def test_phase_margin_is_the_first_contact_of_the_turned_band(tmp_path: Path) -> None:
    H = lags(DENSE)
    margins = decided(measured(tmp_path, DENSE, H).loop("loop")).margins
    assert margins is not None
    assert margins.phase is not None
    turned = brentq(lambda phi: clearance(H * np.exp(-1j * phi), -1.0), 0.0, 0.48, xtol=1e-12)
    assert margins.phase.direction == "lag"
    assert margins.phase.degrees == pytest.approx(np.degrees(turned), rel=1e-4)


def test_gain_ranges_may_leave_gaps(tmp_path: Path) -> None:
    """Between the ranges lie the gains at which -1/g is inside the band."""
    loop = decided(measured(tmp_path, DENSE, lags(DENSE)).loop("loop"))
    first, second = loop.gain_ranges[:2]
    assert (first.unstable_poles, second.unstable_poles) == (0, 2)
    assert first.upper is not None
    assert first.upper < 2.0 < second.lower


def test_a_coarse_measurement_names_the_stretch_and_what_would_decide(tmp_path: Path) -> None:
    omega = np.array([0.01, 0.3, 1.0, 2.2, 5.0, 30.0, 200.0])
    loop = measured(tmp_path, omega, lags(omega)).loop("loop")
    assert loop.verdict == "undecided"
    assert loop.evidence == "none"
    assert loop.undecided
    near = [u for u in loop.undecided if u.lower <= 1.75 and (u.upper is None or u.upper >= 1.0)]
    assert any("block" in u.why and any(c.isdigit() for c in u.why) for u in near)
    assert_consistent(loop)


def test_without_roll_off_nothing_is_assumed_above_the_last_line(tmp_path: Path) -> None:
    loop = measured(tmp_path, DENSE, lags(DENSE), keys="integrators = 0").loop("loop")
    assert loop.verdict == "undecided"
    assert any(u.upper is None and "roll_off" in u.why for u in loop.undecided)


def test_roll_off_with_a_last_line_above_1_does_not_decide(tmp_path: Path) -> None:
    """|L| = 4 at the last line and falling from there passes 1 unseen."""
    omega = np.geomspace(0.01, 0.1, 200)
    loop = measured(tmp_path, omega, lags(omega)).loop("loop")
    assert loop.verdict == "undecided"
    assert any(u.lower >= 0.1 * (1 - 1e-9) for u in loop.undecided)


def test_integrators_lead_the_curve_below_the_first_line(tmp_path: Path) -> None:
    """2/(s (s + 1)^2) has K = 2 on the limit: half of it is stable, an arc closes the curve at standstill."""
    H = 1 / (1j * DENSE * (1 + 1j * DENSE) ** 2)
    loop = decided(measured(tmp_path, DENSE, H, keys="integrators = 1\nroll_off = 3").loop("loop"))
    assert (loop.unstable_poles_before, loop.windings, loop.unstable_poles_after) == (0, 0, 0)
    assert loop.margins is not None
    assert loop.margins.gain_increase is not None
    assert 1.9 < loop.margins.gain_increase.factor < 2.0


def test_a_zero_at_standstill_is_declared_as_minus_one(tmp_path: Path) -> None:
    """3 s/(s + 1)^2: below the first line H = 3 s."""
    H = 3j * DENSE / (1 + 1j * DENSE) ** 2
    loop = decided(measured(tmp_path, DENSE, H, keys="integrators = -1\nroll_off = 1").loop("loop"))
    assert (loop.unstable_poles_before, loop.unstable_poles_after) == (0, 0)


def test_a_first_line_far_off_its_asymptote_leaves_the_loop_undecided(tmp_path: Path) -> None:
    """4/(s+1)^3 from 0.5 rad/s on has turned by 80 degrees: flat below is not believable."""
    omega = DENSE[DENSE > 0.5]
    loop = measured(tmp_path, omega, lags(omega)).loop("loop")
    assert loop.verdict == "undecided"
    assert any("45" in u.why for u in loop.undecided)


def test_lines_need_not_be_sorted(tmp_path: Path) -> None:
    order = np.random.default_rng(3).permutation(DENSE.size)
    sorted_loop = measured(tmp_path, DENSE, lags(DENSE)).loop("loop")
    shuffled = measured(tmp_path, DENSE[order], lags(DENSE)[order]).loop("loop")
    assert shuffled == sorted_loop


def test_each_measured_block_uses_its_own_lines(tmp_path: Path) -> None:
    """Two lags measured on different grids in series, with a model between them: P = 0, Z = 0, a limit near 8."""
    for name, omega in (("a", DENSE), ("b", np.geomspace(0.02, 300.0, 1300))):
        write_lines(tmp_path / f"{name}.csv", omega, 1 / (1 + 1j * omega))
    text = 'format = 1\nfrequency_unit = "rad/s"\n'
    for name in "ab":
        text += f'[blocks.{name}]\nmeasured = "{name}.csv"\nunstable_poles = 0\nintegrators = 0\nroll_off = 1\n'
    text += '[blocks.c]\nformula = "1/(s + 1)"\n[signals]\ne = "-y"\ny = "a*c*b*e"\n'
    text += '[[loops]]\nname = "loop"\ncut = "e"\n'
    project = opened(text, tmp_path)
    loop = decided(project.loop("loop"))
    assert loop.unstable_poles_after == 0
    assert loop.margins is not None
    assert loop.margins.gain_increase is not None
    assert 7.5 < loop.margins.gain_increase.factor < 8.0
    assert project.warnings == ()


def test_several_measured_blocks_with_integrators_draw_a_warning(tmp_path: Path) -> None:
    H = 1 / (1j * DENSE * (1 + 1j * DENSE))
    measured(tmp_path, DENSE, H, keys="integrators = 1\nroll_off = 2")
    body = (tmp_path / "project.toml").read_text(encoding="utf-8")
    start, end = body.index("[blocks.block]"), body.index("[signals]")
    second = body[start:end].replace("blocks.block", "blocks.twin")
    body = body.replace("[signals]", second + "[signals]").replace("block*e", "block*e + 0.5*twin*e")
    found = opened(body, tmp_path)
    assert any("block" in str(w) and "twin" in str(w) for w in found.warnings)


def test_coherence_changes_no_verdict(tmp_path: Path) -> None:
    plain = measured(tmp_path, DENSE, lags(DENSE)).loop("loop")
    lines = (tmp_path / "lines.csv").read_text(encoding="utf-8").splitlines()
    lines = [lines[0] + ",coherence", *(line + ",0.1" for line in lines[1:])]
    (tmp_path / "lines.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    with_coherence = opened((tmp_path / "project.toml").read_text(encoding="utf-8"), tmp_path).loop("loop")
    assert with_coherence == plain


def test_a_curve_stays_inside_its_band(tmp_path: Path) -> None:
    """The drawn curve is the chord; its radius is the line distance (models have none)."""
    curve = measured(tmp_path, DENSE, lags(DENSE)).curve("loop")
    assert curve.lines == pytest.approx(DENSE)
    inside = (curve.frequency > DENSE[0]) & (curve.frequency < DENSE[-1])
    gap = np.searchsorted(DENSE, curve.frequency[inside], side="right") - 1
    step = np.abs(np.diff(lags(DENSE)))
    assert np.all(curve.radius[inside] <= np.maximum(step[gap], step[np.maximum(gap - 1, 0)]) * (1 + 1e-9))
    assert np.all(curve.radius[inside] > 0)
