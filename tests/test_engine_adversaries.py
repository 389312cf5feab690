"""Strange but valid diagrams that once led the count or the ranges astray; expected values in closed form."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from single_loop_files import assert_consistent, opened

from encircle.engine import Project, ProjectError
from encircle.engine.coprime_factors import DelayKernel
from encircle.engine.delay_kernel import DelayKernelModel
from encircle.engine.encirclement import Cause, Ending, count_zeros, exclude_zero
from encircle.engine.result import FloatArray, GainRange, LoopResult
from encircle.engine.term_models import Models


def project(folder: Path, blocks: str, output: str, gain: float = 1.0, more: str = "") -> Project:
    """One loop round ``output``, an expression of the signal e."""
    text = f"""
format = 1
frequency_unit = "rad/s"
inputs = ["r"]
{blocks}
[signals]
e = "r - y"
y = "{output}"
{more}
[[loops]]
name = "loop"
cut = "e"
gain = {gain!r}
"""
    return opened(text, folder)


def formula_loop(folder: Path, formula: str, keys: str = "", gain: float = 1.0) -> LoopResult:
    """The only loop of L = gain * formula."""
    block = f'[blocks.P]\nformula = "{formula}"\n{keys}'
    loop = project(folder, block, "P*e", gain).loop("loop")
    assert_consistent(loop)
    return loop


@pytest.mark.parametrize("corner", [1e-8, 1.0, 1e8])
def test_high_powers_at_low_frequencies_do_not_underflow(tmp_path: Path, corner: float) -> None:
    """K (s/(s + a))^60 = -1 has the roots a r/(1 - r), r = (-1/K)^(1/60); s^60 at s = a = 1e-8 is no double."""
    K = 1.5
    r = K ** (-1 / 60) * np.exp(1j * np.pi * (2 * np.arange(60) + 1) / 60)
    loop = formula_loop(tmp_path, "K*(s/(s + a))^60", f"K = {K}\na = {corner!r}")
    assert loop.unstable_poles_after == np.sum((r / (1 - r)).real > 0)


def test_values_whose_squares_underflow_are_not_shown_to_exclude_zero() -> None:
    """The segment from -1e-170 to 3e-170 holds 0 although the square of its length is no double."""
    disc = np.zeros((1, 1))
    none = np.zeros((0, 1, 1), complex)
    models = Models(disc + 1e-170 + 0j, disc + 2e-170 + 0j, disc + 0j, disc + 1e-280, none, none)
    assert not exclude_zero(models)[0].any()


def test_edges_for_a_later_count_cover_the_whole_axis() -> None:
    """s (s^2 + 1) fails at j while cells at 0 are still being divided: those must not be lost."""

    def enclose(lower: FloatArray, upper: FloatArray) -> Models:
        w, h = 0.5 * (lower + upper), 0.5 * (upper - lower)
        v, d, e = 1j * w * (1 - w * w), 1j * h * (1 - 3 * w * w), -3j * w * h * h
        none = np.zeros((0, 1, len(w)), complex)
        return Models(v[None], d[None], e[None], (h**3 + 1e-280)[None], none, none)

    counting = count_zeros(enclose, [Ending(2.0, 1.0, 3.0)], np.array([0.0, 0.5, 2.0]), (), 1e-6)
    assert counting.counts[0].zeros is None
    assert counting.edges[0] == 0.0
    assert counting.edges[-1] == 2.0


def test_a_function_that_spends_the_budget_leaves_the_others_their_counts(monkeypatch: pytest.MonkeyPatch) -> None:
    """Nothing is known of the first function; the second is 1."""
    monkeypatch.setattr("encircle.engine.encirclement.FEWEST_EVALUATIONS", 1000)

    def enclose(lower: FloatArray, upper: FloatArray) -> Models:
        one, zero = np.ones((2, len(lower)), complex), np.zeros((2, len(lower)), complex)
        radius = np.array([np.full(len(lower), np.inf), np.zeros(len(lower))])
        return Models(
            one, zero, zero, radius, np.zeros((0, 2, len(lower)), complex), np.zeros((0, 2, len(lower)), complex)
        )

    counting = count_zeros(enclose, [Ending(2.0, 1.0, 0.0)] * 2, np.array([0.0, 0.5, 2.0]), (), 1.0)
    assert [count.zeros for count in counting.counts] == [None, 0]
    assert counting.counts[0].open_cells[0].cause is Cause.BUDGET


def test_ranges_of_a_loop_that_turns_for_ever_left_of_minus_one(tmp_path: Path) -> None:
    """L(0) = -1/2, so a real pole crosses 0 at the factor 2; at infinity L circles -2 with radius 1/2, which stays
    clear of -1/g for g > 2/3.
    """
    block = '[blocks.P]\nformula = "-2*(s + 0.5)/(s + 1) + 0.5*exp(-s)"'
    loop = project(tmp_path, block, "P*e").loop("loop")
    below, above = loop.gain_ranges
    assert (below.lower, below.upper, above.lower) == pytest.approx((2 / 3, 2.0, 2.0))
    assert above.upper is None
    assert abs(below.unstable_poles - above.unstable_poles) == 1


def test_ranges_of_a_loop_that_grows_for_ever_while_it_turns(tmp_path: Path) -> None:
    """0.1 (s^2 + s + 1) + s exp(-s) crosses the negative axis for ever, ever further left; Z by plain sampling of
    F(j w)/(j w + 1)^2, which tends to 1/10.
    """
    block = '[blocks.P]\nformula = "0.1*(s^2 + s + 1) + s*exp(-s)"'
    loop = project(tmp_path, block, "P*e").loop("loop")
    s = 1j * np.linspace(-2000.0, 2000.0, 2_000_001)

    def zeros(factor: float) -> int:
        angle = np.unwrap(np.angle((1.0 + factor * (0.1 * (s * s + s + 1.0) + s * np.exp(-s))) / (s + 1.0) ** 2))
        return round((angle[0] - angle[-1]) / (2.0 * np.pi))

    assert loop.unstable_poles_after == zeros(1.0)
    assert [r.unstable_poles for r in loop.gain_ranges] == [zeros(0.16), zeros(2.0)]
    assert loop.gain_ranges[-1].upper is None


def test_a_held_signal_counts_as_dead_time(tmp_path: Path) -> None:
    """(1 - exp(-T s))/(T s) turns for ever: the list of ranges stops after the second change above 1."""
    loop = formula_loop(tmp_path, "3*(1 - exp(-T*s))/(T*s)/(s + 1)", "T = 0.1")
    assert len([r for r in loop.gain_ranges if r.lower > 1.0]) == 1
    assert loop.gain_ranges[-1].upper is not None


@pytest.mark.parametrize("order", [1, 2, 3])
def test_kernels_on_wide_cells(order: int) -> None:
    """psi_1 = (1 - exp(-z))/z, psi_(k+1) = (1 - psi_k) (k + 1)/z, from the definition of the phi functions."""
    model = DelayKernelModel(DelayKernel(order, Fraction(1)))
    rng = np.random.default_rng(4)
    w = 10.0 ** rng.uniform(0.0, 9.0, 400)
    h = w * 10.0 ** rng.uniform(-9.0, -0.01, 400)
    v, a, b, eps = model.on_cells(w, h)
    for t in (-1.0, -0.3, 0.5, 1.0):
        z = 1j * (w + h * t)
        psi = (1.0 - np.exp(-z)) / z
        for k in range(1, order):
            psi = (k + 1) * (1.0 - psi) / z
        assert np.all(np.abs(psi - v * (1.0 + a * t + b * t * t)) <= np.abs(v) * eps * (1.0 + 1e-9) + 1e-9 / np.abs(z))
    assert np.all(np.abs(v) * (1.0 + eps) <= 4.0 * order / np.maximum(w - h, order) + 1.0 * (w - h < 10.0))


def test_a_held_measured_response(tmp_path: Path) -> None:
    """A measured lag behind a hold: nothing at high frequency comes near -1."""
    w = np.geomspace(0.01, 100.0, 200)
    H = 1.0 / (1j * w + 1.0)
    lines = [f"{a!r},{b!r},{c!r}" for a, b, c in zip(w.tolist(), H.real.tolist(), H.imag.tolist(), strict=True)]
    (tmp_path / "lag.csv").write_text("\n".join(["frequency_rad_s,real,imag", *lines]), encoding="utf-8")
    blocks = """[blocks.P]
measured = "lag.csv"
unstable_poles = 0
integrators = 0
roll_off = 1
[blocks.hold]
formula = "(1 - exp(-0.1*s))/(0.1*s)"
"""
    loop = project(tmp_path, blocks, "hold*P*e").loop("loop")
    assert_consistent(loop)
    assert loop.verdict == "stable"
    assert loop.margins is not None
    assert loop.margins.gain_increase is not None
    assert 20.0 < loop.margins.gain_increase.factor < 60.0


def test_no_range_has_fewer_unstable_poles_than_none(tmp_path: Path) -> None:
    """1/(sqrt(s) - 1) has a pole at 1 that is not stated; from k = 1 on the count would be -1."""
    loop = formula_loop(tmp_path, "0.5/(sqrt(s) - 1)", "unstable_poles = 0")
    assert loop.gain_ranges == (GainRange(0.0, pytest.approx(2.0), 0),)


def test_feedback_whose_determinant_vanishes_is_refused_by_name(tmp_path: Path) -> None:
    blocks = '[blocks.P]\nformula = "1/(s + 1)"\n[blocks.two]\nformula = "2"'
    with pytest.raises(ProjectError, match="`x`"):
        project(tmp_path, blocks, "P*x", more='x = "0.5*two*x + e"')


def test_gains_that_multiply_to_less_than_any_double(tmp_path: Path) -> None:
    blocks = '[blocks.P]\nformula = "1e-300/(s + 1)"\n[blocks.Q]\nformula = "1e-300/(s + 2)"'
    loop = project(tmp_path, blocks, "P*Q*e").loop("loop")
    assert_consistent(loop)
    assert loop.verdict == "stable"


def test_many_integrators_beside_an_irrational_block(tmp_path: Path) -> None:
    """s^12 = -(1 + 1e-6 s)^(-1/2): the twelve roots of s^12 = -1 hardly move, and six of them lie right."""
    blocks = '[blocks.P]\nformula = "1/sqrt(1 + 1e-6*s)"\nunstable_poles = 0\n[blocks.I]\nformula = "1/s^12"'
    loop = project(tmp_path, blocks, "P*I*e").loop("loop")
    assert_consistent(loop)
    assert loop.unstable_poles_after == 6


@pytest.mark.parametrize("gain", [0.1, 0.3])
def test_a_gain_is_the_decimal_that_was_written(gain: float, tmp_path: Path) -> None:
    """-(10 s + 20)/(s + 1) times 0.1 tends to exactly -1 at infinity: no solution there; 0.3 has one."""
    block = '[blocks.P]\nformula = "-10*(s + 2)/(s + 1)"'
    if gain == 0.1:
        with pytest.raises(ProjectError, match=r"project\.toml: .*1 \+ L = 0 at infinite frequency"):
            project(tmp_path, block, "P*e", gain)
    else:
        assert project(tmp_path, block, "P*e", gain).loop("loop").unstable_poles_after == 0


def test_paths_whose_highest_powers_cancel_are_undecided_not_refused(tmp_path: Path) -> None:
    """s (s+2)/(s+3) - s (s+4)/(s+5) tends to 0, although each path grows: 1 + L has a solution at infinity."""
    blocks = '[blocks.A]\nformula = "s*(s + 2)/(s + 3)"\n[blocks.B]\nformula = "s*(s + 4)/(s + 5)"'
    loop = project(tmp_path, blocks, "A*e - B*e").loop("loop")
    assert loop.verdict == "undecided"
    assert "cancel exactly" in loop.undecided[0].why


def test_uncut_feedback_without_a_solution_at_infinity_is_refused(tmp_path: Path) -> None:
    """z = (s+2)/(s+1) z + e: 1 - 1 = 0 at infinity, and no cut opens it."""
    blocks = '[blocks.A]\nformula = "(s + 2)/(s + 1)"\n[blocks.B]\nformula = "1/(s + 1)"'
    with pytest.raises(ProjectError, match="feedback through"):
        project(tmp_path, blocks, "B*z", more='z = "A*z + e"')


def test_infinitely_many_crossings_are_said_to_be_incomplete(tmp_path: Path) -> None:
    """-2 (s + 0.5)/(s + 1) + 0.5 exp(-s) circles -2 for ever at radius 1/2, always left of -1: N = 1 all the same."""
    block = '[blocks.P]\nformula = "-2*(s + 0.5)/(s + 1) + 0.5*exp(-s)"'
    found = project(tmp_path, block, "P*e")
    loop = found.loop("loop")
    assert loop.windings is not None
    listed = sum(crossing.turns for crossing in loop.real_axis_crossings)
    said = any(warning.code == "crossings-incomplete" for warning in found.check().warnings)
    assert said == (listed != loop.windings)
