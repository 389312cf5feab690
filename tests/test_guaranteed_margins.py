"""Guaranteed margins held against members of the band found one by one: none lies inside them, one lies near each.

A value of L is possible at a frequency if the response of the measured block that makes it lies in the block's stadium
(or in the disc above the last line); that test is exact and knows nothing of enclosures, cells or first contacts. Where
two blocks are measured, the other one is drawn at random inside its own band.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from single_loop_files import assert_consistent, opened

from encircle.engine import Project
from encircle.engine.result import LoopResult, Margins

Floats = NDArray[np.float64]
Complex = NDArray[np.complex128]

BELOW, ABOVE = 1.0 - 1e-6, 1.0 + 2e-3  # factors on a margin: no member below, one above


@dataclass(frozen=True)
class MeasuredBand:
    """All responses that a measured block may have, as the project file format says."""

    omega: Floats
    H: Complex
    integrators: int = 0
    roll_off: int = 2
    between_lines: float = 1.0

    def write(self, folder: Path, name: str) -> str:
        """Write the data file; returns the block's table."""
        rows = [f"{w!r},{h.real!r},{h.imag!r}" for w, h in zip(self.omega.tolist(), self.H.tolist(), strict=True)]
        text = "frequency_rad_s,real,imag\n" + "\n".join(rows) + "\n"
        (folder / f"{name}.csv").write_text(text, encoding="utf-8")
        return f"""
[blocks.{name}]
measured = "{name}.csv"
unstable_poles = 0
integrators = {self.integrators}
roll_off = {self.roll_off}
between_lines = {self.between_lines}
"""

    def chord(self, omega: Floats) -> tuple[Complex, Complex, Floats]:
        """Start and step of the chord at frequencies off the lines, and the radius round it."""
        power = (1j * omega) ** self.integrators
        k = (self.H[0] * (1j * self.omega[0]) ** self.integrators).real
        i = np.clip(np.searchsorted(self.omega, omega) - 1, 0, len(self.omega) - 2)
        start, step = self.H[i], self.H[i + 1] - self.H[i]
        below, above = omega < self.omega[0], omega > self.omega[-1]
        start = np.where(below, k / power, np.where(above, 0.0, start))
        step = np.where(below | above, 0.0, step)
        disc = np.abs(self.H[-1]) * (self.omega[-1] / omega) ** self.roll_off
        return start, step, np.where(above, disc, self.between_lines * np.abs(step))

    def may_be(self, omega: Floats, H: Complex) -> NDArray[np.bool_]:
        """Whether H is possible; shapes broadcast. Below the first line only the asymptote is, up to rounding."""
        start, step, radius = self.chord(omega)
        length = np.where(step == 0.0, 1.0, np.abs(step) ** 2)
        share = np.clip(((H - start) * step.conj()).real / length, 0.0, 1.0)
        inside: NDArray[np.bool_] = np.abs(start + share * step - H) <= radius + 1e-12 * np.abs(start)
        return inside

    def draw(self, rng: np.random.Generator, omega: Floats) -> Complex:
        """Members at random, most of them on the boundary."""
        start, step, radius = self.chord(omega)
        share = rng.choice([0.0, 0.5, 1.0], omega.shape) * rng.choice([1.0, rng.random()], omega.shape)
        turn = np.exp(2j * np.pi * rng.random(omega.shape))
        return np.asarray(start + share * step + radius * turn * rng.choice([1.0, rng.random()], omega.shape))


Makers = Callable[[Floats, Complex], list[Complex]]


@dataclass(frozen=True)
class Case:
    """A project, the measured block that is solved for, and the responses of it that give L at a frequency."""

    project: Project
    loop: str
    band: MeasuredBand
    makers: Makers

    def result(self) -> LoopResult:
        """The loop that is looked at."""
        found = self.project.loop(self.loop)
        assert_consistent(found)
        return found

    def margins(self) -> Margins:
        """Its margins."""
        margins = self.result().margins
        assert margins is not None
        return margins

    def possible(self, omega: Floats, L: Complex) -> bool:
        """Whether any of the values L (values, frequencies) or (values, 1) is possible at its frequency."""
        with np.errstate(all="ignore"):
            return any(bool(self.band.may_be(omega, H).any()) for H in self.makers(omega, L))


def frequencies(bands: tuple[MeasuredBand, ...]) -> Floats:
    """Points inside every gap and just beside every line, above the last and below the first."""
    edges = np.unique(np.concatenate([band.omega for band in bands]))
    inner = edges[:-1] + np.outer([1e-9, 0.5, 1 - 1e-9], np.diff(edges))
    above, below = edges[-1] * (1 + 1e-9) * np.geomspace(1.0, 1e3, 60), edges[0] * np.geomspace(1e-3, 0.99, 20)
    return np.concatenate([inner.ravel(), above, below])


def close_to(frequency: float | None) -> Floats:
    """Frequencies round the one at which a contact is said to come."""
    assert frequency is not None
    assert frequency > 0.0
    return frequency * (1 + np.concatenate([np.linspace(-1e-3, 1e-3, 41), [-1e-8, 1e-8]]))


def circle(points: int) -> Complex:
    return np.exp(1j * np.linspace(-np.pi, np.pi, points))


def check_gain_increase(case: Case, bands: tuple[MeasuredBand, ...]) -> None:
    margin = case.margins().gain_increase
    assert margin is not None
    inside = np.linspace(1.0, margin.factor * BELOW, 60)[:, None]
    assert not case.possible(frequencies(bands), -1.0 / inside + 0j)
    assert case.possible(close_to(margin.frequency), np.array([[-1.0 / (margin.factor * ABOVE) + 0j]]))


def check_gain_decrease(case: Case, bands: tuple[MeasuredBand, ...]) -> None:
    margin = case.margins().gain_decrease
    assert margin is not None
    inside = np.linspace(margin.factor / BELOW, 1.0, 60)[:, None]
    assert not case.possible(frequencies(bands), -1.0 / inside + 0j)
    assert case.possible(close_to(margin.frequency), np.array([[-1.0 / (margin.factor / ABOVE) + 0j]]))


def check_phase(case: Case, bands: tuple[MeasuredBand, ...]) -> None:
    margin = case.margins().phase
    assert margin is not None
    turn = np.radians(margin.degrees)
    inside = np.linspace(-turn * BELOW, turn * BELOW, 61)[:, None]
    assert not case.possible(frequencies(bands), -np.exp(1j * inside))
    sign = 1.0 if margin.direction == "lag" else -1.0
    assert case.possible(close_to(margin.frequency), np.array([[-np.exp(1j * sign * turn * ABOVE)]]))


def check_delay(case: Case, bands: tuple[MeasuredBand, ...]) -> None:
    margin = case.margins().delay
    assert margin is not None
    omega, near = frequencies(bands), close_to(margin.frequency)
    inside = np.linspace(0.0, margin.seconds * BELOW, 60)[:, None]
    assert not case.possible(omega, -np.exp(1j * omega * inside))
    assert case.possible(near, -np.exp(1j * near * margin.seconds * ABOVE)[None])


def check_modulus(case: Case, bands: tuple[MeasuredBand, ...]) -> None:
    margin = case.margins().modulus
    assert case.margins().sensitivity_peak.value == pytest.approx(1 / margin.value, rel=1e-12)
    inside = np.outer([0.5, BELOW], circle(91)).reshape(-1, 1)
    assert not case.possible(frequencies(bands), -1.0 + margin.value * inside)
    assert case.possible(close_to(margin.frequency), -1.0 + margin.value * ABOVE * circle(721)[:, None])


def check_complementary(case: Case, bands: tuple[MeasuredBand, ...]) -> None:
    peak = case.margins().complementary_peak
    outside = np.outer([1 / BELOW, 2.0], circle(91)).reshape(-1, 1) * peak.value
    assert not case.possible(frequencies(bands), outside / (1 - outside))
    if peak.frequency == 0.0:  # integral action: T tends to 1
        assert peak.value == pytest.approx(1.0, abs=1e-7)
        return
    T = circle(721)[:, None] * peak.value / ABOVE
    assert case.possible(close_to(peak.frequency), T / (1 - T))


CHECKS = [check_gain_increase, check_phase, check_delay, check_modulus, check_complementary]


HEADER = 'format = 1\nfrequency_unit = "rad/s"\n'


def lag_with_integrator(folder: Path) -> tuple[Case, tuple[MeasuredBand, ...]]:
    """A controller before a measured drive with one integrator: L = C H, C = 2 (1 + 1/(4 s))."""
    omega = np.geomspace(0.02, 60.0, 150)
    H = 1 / (1j * omega * (1 + 0.5j * omega) * (1 + 0.05j * omega))
    band = MeasuredBand(omega, H, integrators=1, roll_off=3)
    text = HEADER + band.write(folder, "drive") + '[blocks.controller]\nformula = "2*(1 + 1/(4*s))"\n'
    text += '[signals]\ne = "-y"\ny = "drive*controller*e"\n[[loops]]\nname = "loop"\ncut = "e"\n'

    def makers(omega: Floats, L: Complex) -> list[Complex]:
        return [L / (2 * (1 + 1 / (4j * omega)))]

    return Case(opened(text, folder), "loop", band, makers), (band,)


def measured_inside(folder: Path) -> tuple[Case, tuple[MeasuredBand, ...]]:
    """The measured block inside an inner loop closed before: L = 3 C H/(1 + H), C = (1 + s)/s/(1 + 0.02 s)."""
    omega = np.geomspace(0.02, 300.0, 900)
    band = MeasuredBand(omega, 5 / (1 + 1j * omega) / (1 + 0.02j * omega), roll_off=2)
    text = HEADER + band.write(folder, "plant") + '[blocks.outer]\nformula = "3*(1 + s)/s/(1 + 0.02*s)"\n'
    text += '[signals]\ne = "-x"\nx = "y"\nf = "outer*e - y"\ny = "plant*f"\n'
    text += '[[loops]]\nname = "inner"\ncut = "f"\n[[loops]]\nname = "outer_loop"\ncut = "e"\n'

    def makers(omega: Floats, L: Complex) -> list[Complex]:
        s = 1j * omega
        C = 3 * (1 + s) / s / (1 + 0.02 * s)
        return [L / (C - L)]

    return Case(opened(text, folder), "outer_loop", band, makers), (band,)


def two_measured(folder: Path) -> tuple[Case, tuple[MeasuredBand, ...]]:
    """Two measured blocks on different lines in series: L = 6 G H."""
    first, second = np.geomspace(0.01, 100.0, 900), np.geomspace(0.02, 200.0, 800)
    G = MeasuredBand(first, 1 / (1 + 1j * first) ** 2, roll_off=2)
    H = MeasuredBand(second, 1 / (1 + 0.5j * second), roll_off=1)
    text = HEADER + G.write(folder, "motor") + H.write(folder, "sensor")
    text += '[signals]\ne = "-y"\ny = "6*sensor*motor*e"\n[[loops]]\nname = "loop"\ncut = "e"\n'
    rng = np.random.default_rng(5)

    def makers(omega: Floats, L: Complex) -> list[Complex]:
        draws = 2000 if L.size * omega.size < 100 else 6
        return [L / (6 * G.draw(rng, omega + 0 * L.real)) for _ in range(draws)]

    return Case(opened(text, folder), "loop", H, makers), (G, H)


def used_twice(folder: Path) -> tuple[Case, tuple[MeasuredBand, ...]]:
    """One measured block used twice, both copies the same: L = 2 H^2 C, C = 1/(1 + 0.3 s)."""
    omega = np.geomspace(0.01, 100.0, 1500)
    band = MeasuredBand(omega, 1 / (1 + 1j * omega), roll_off=1)
    text = HEADER + band.write(folder, "stage") + '[blocks.filter]\nformula = "1/(1 + 0.3*s)"\n'
    text += '[signals]\ne = "-y"\ny = "2*stage*filter*stage*e"\n[[loops]]\nname = "loop"\ncut = "e"\n'

    def makers(omega: Floats, L: Complex) -> list[Complex]:
        root = np.sqrt(L * (1 + 0.3j * omega) / 2)
        return [root, -root]

    return Case(opened(text, folder), "loop", band, makers), (band,)


def beside_a_model(folder: Path) -> tuple[Case, tuple[MeasuredBand, ...]]:
    """A measured path that ends while the model beside it goes on: L = 0.9 exp(-0.2 s)/(1 + 0.1 s) + H."""
    omega = np.geomspace(0.05, 4.0, 300)
    band = MeasuredBand(omega, 1.5 / (1 + 1j * omega) ** 2, roll_off=1)
    text = HEADER + band.write(folder, "path")
    text += '[blocks.model]\nformula = "0.9*exp(-0.2*s)/(1 + 0.1*s)"\n'
    text += '[signals]\ne = "-y"\ny = "model*e + path*e"\n[[loops]]\nname = "loop"\ncut = "e"\n'

    def makers(omega: Floats, L: Complex) -> list[Complex]:
        return [L - 0.9 * np.exp(-0.2j * omega) / (1 + 0.1j * omega)]

    return Case(opened(text, folder), "loop", band, makers), (band,)


def conditionally_stable(folder: Path) -> tuple[Case, tuple[MeasuredBand, ...]]:
    """Three integrators by two models and a measured one, held by two zeros: stable only between two gains."""
    omega = np.geomspace(0.05, 500.0, 700)
    band = MeasuredBand(omega, 4 / (1j * omega) / (1 + 0.02j * omega), integrators=1, roll_off=2)
    text = HEADER + band.write(folder, "axis") + '[blocks.controller]\nformula = "(1 + s)^2/s^2"\n'
    text += '[signals]\ne = "-y"\ny = "axis*controller*e"\n[[loops]]\nname = "loop"\ncut = "e"\n'

    def makers(omega: Floats, L: Complex) -> list[Complex]:
        s = 1j * omega
        return [L * s**2 / (1 + s) ** 2]

    return Case(opened(text, folder), "loop", band, makers), (band,)


BUILDERS = [lag_with_integrator, measured_inside, two_measured, used_twice, beside_a_model]


@pytest.mark.parametrize("builder", BUILDERS)
@pytest.mark.parametrize("check", CHECKS)
def test_no_member_violates_a_margin_and_one_reaches_it(tmp_path: Path, builder, check) -> None:  # type: ignore[no-untyped-def]
    case, bands = builder(tmp_path)
    check(case, bands)


@pytest.mark.parametrize("check", [check_gain_decrease, *CHECKS])
def test_a_conditionally_stable_loop_has_both_gain_margins(tmp_path: Path, check) -> None:  # type: ignore[no-untyped-def]
    case, bands = conditionally_stable(tmp_path)
    check(case, bands)
