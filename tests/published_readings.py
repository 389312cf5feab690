"""Where each published figure of check_values.json is found in a loop's result.

``READINGS`` has a line for each named figure of each entry. Figures that no loop result holds are listed with their
reason in ``NOT_LOOP_FIGURES``; nothing else is left out.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq, minimize_scalar
from single_loop_files import SingleLoop

from encircle.engine import Project
from encircle.engine.result import LoopResult


@dataclass(frozen=True, slots=True)
class Opened:
    """One opened system: the project, its only loop's result, and the gain that the file gives it."""

    project: Project
    loop: LoopResult
    system: SingleLoop

    def L(self, omega: float) -> complex:
        return complex(self.project.response("loop", np.array([omega]))[0])


Reading = tuple[str, Callable[[Opened], float | None]]


def margins(case: Opened) -> Any:
    assert case.loop.margins is not None
    return case.loop.margins


def gain_increase(case: Opened) -> float:
    """Factor; infinite where no finite limit exists."""
    side = margins(case).gain_increase
    return math.inf if side is None else side.factor


def gain_increase_db(case: Opened) -> float:
    assert margins(case).gain_increase.db == pytest.approx(20 * math.log10(margins(case).gain_increase.factor))
    return margins(case).gain_increase.db


def gain_decrease(case: Opened) -> float:
    return margins(case).gain_decrease.factor


def phase_crossover(case: Opened) -> float | None:
    """The frequency at which the upper gain limit is reached."""
    return margins(case).gain_increase.frequency


def phase(case: Opened) -> float:
    return margins(case).phase.degrees


def crossover(case: Opened) -> float:
    (only,) = margins(case).gain_crossovers
    assert only == pytest.approx(margins(case).phase.frequency)
    return only


def crossover_khz(case: Opened) -> float:
    return crossover(case) / (2e3 * math.pi)


def modulus(case: Opened) -> float:
    assert 1 / margins(case).modulus.value == pytest.approx(margins(case).sensitivity_peak.value)
    return margins(case).modulus.value


def sensitivity_peak(case: Opened) -> float:
    return margins(case).sensitivity_peak.value


def complementary_peak(case: Opened) -> float:
    return margins(case).complementary_peak.value


def delay(case: Opened) -> float:
    return margins(case).delay.seconds


def phase_at(omega: float) -> Callable[[Opened], float]:
    """180 deg + arg L at ``omega``: the phase room at that crossover, whether or not it is the smallest."""
    return lambda case: abs(math.remainder(math.degrees(np.angle(-case.L(omega))), 360.0))


def phase_at_unit_gain(lower: float, upper: float) -> Callable[[Opened], float]:
    """The signed phase room at the unit crossing between two frequencies; also defined where the loop is unstable."""

    def read(case: Opened) -> float:
        assert case.loop.verdict == "unstable"
        assert case.loop.margins is None
        omega = brentq(lambda w: abs(case.L(w)) - 1, lower, upper, xtol=1e-14)
        return math.degrees(np.angle(-case.L(omega)))

    return read


def Z(case: Opened) -> float | None:
    return case.loop.unstable_poles_after


def limits(case: Opened) -> list[float]:
    """All gains K at which Z changes, in the entry's own gain (factor times the file's gain)."""
    return [r.lower * case.system.gain for r in case.loop.gain_ranges[1:]]


def only_limit(case: Opened) -> float:
    (only,) = limits(case)
    return only


def only_limit_negative(case: Opened) -> float:
    return -only_limit(case)


def upper_limit(case: Opened) -> float:
    """The gain K at which a stable loop becomes unstable."""
    return gain_increase(case) * case.system.gain


def upper_limit_negative(case: Opened) -> float:
    return -upper_limit(case)


def lower_limit_frequency(case: Opened) -> float | None:
    return margins(case).gain_decrease.frequency


def lower_limit(case: Opened) -> float:
    return gain_decrease(case) * case.system.gain


def stable_from(case: Opened) -> float:
    """Where the stable range starts, with the sign of the entry's K; it must have Z = 0."""
    assert case.loop.gain_ranges[0].unstable_poles == 0
    return case.system.sign * case.loop.gain_ranges[0].lower


def no_stable_range(case: Opened) -> float:
    """0 when no gain K > 0 is stable."""
    assert all(r.unstable_poles > 0 for r in case.loop.gain_ranges)
    assert case.loop.gain_ranges[0].lower == 0.0
    return 0.0


def at(factor: float, read: Callable[[Opened], Any]) -> Callable[[Opened], float]:
    return lambda case: factor * read(case)


def inverse(read: Callable[[Opened], Any], factor: float = 1.0) -> Callable[[Opened], float]:
    return lambda case: factor / read(case)


def sensitivity_integral(case: Opened) -> float:
    """Integral of ln|S| over the axis."""
    integral, _ = quad(
        lambda x: -math.log(abs(1 + case.L(math.exp(x)))) * math.exp(x), math.log(1e-6), math.log(1e7), limit=500
    )
    return integral


def largest_L(case: Opened) -> float:
    peak = minimize_scalar(lambda w: -abs(case.L(w)), bounds=(5e3, 2e4), method="bounded", options={"xatol": 1e-6})
    return -peak.fun / case.system.gain


READINGS: dict[str, dict[str, Reading]] = {
    "A01": {
        "gain margin (factor)": ("", gain_increase),
        "phase margin": ("", phase),
        "stability margin min|1+L|": ("", modulus),
        "phase crossover": ("", phase_crossover),
        "gain crossover": ("", crossover),
    },
    "A02": {
        "gain margin (factor)": ("", gain_increase),
        "phase margin": ("", phase),
        "stability margin min|1+L|": ("", modulus),
        "1/|L(10j)| (not a margin)": ("", lambda case: 1 / abs(case.L(10.0))),
        "gain crossover": ("", crossover),
    },
    "A04": {
        "phase crossover": ("", phase_crossover),
        "L there": ("", inverse(gain_increase, -1.0)),
        "phase margin": ("", phase),
        "min|1+L|": ("", modulus),
    },
    "A05": {
        "ultimate gain Ku": ("", upper_limit),
        "ultimate period Pu": ("", inverse(phase_crossover, 2 * math.pi)),
        "w180": ("", phase_crossover),
    },
    "A06": {
        "GM": ("", gain_increase),
        "PM": ("", phase),
        "Ms": ("", sensitivity_peak),
        "Mt": ("", complementary_peak),
        "w180": ("", phase_crossover),
        "wc": ("", crossover),
    },
    "A14": {"GM": ("", gain_increase_db), "PM": ("", phase)},
    "A15": {"GM": ("", gain_increase_db), "PM": ("", phase)},
    "A16": {
        "PM without delay, K=31.5": ("no delay", phase),
        "PM with delay, K=31.5": ("", phase_at_unit_gain(0.3, 3.0)),
        "PM with delay, K=16": ("K=16", phase),
        "GM with delay, K=16": ("K=16", gain_increase),
    },
    "A17": {
        "K=10 GM": ("", gain_increase_db),
        "K=10 PM": ("", phase),
        "K=100 GM": ("K=100", lambda case: 20 * math.log10(only_limit(case))),
        "K=100 PM": ("K=100", phase_at_unit_gain(1.0, 30.0)),
    },
    "A18": {
        "PM of 40/(s(s+2))": ("plain", phase),
        "PM compensated": ("lead", phase),
        "GM compensated": ("lead", gain_increase),
        "wc compensated": ("lead", crossover),
    },
    "A19": {
        "GM": ("", gain_increase_db),
        "PM": ("", phase),
        "phase crossover": ("", phase_crossover),
        "gain crossover": ("", crossover),
    },
    "A20": {
        "crossing at w = sqrt 6: L": ("", inverse(gain_increase, -1.0)),
        "GM": ("", gain_increase_db),
        "PM": ("", phase),
    },
    "A21": {
        "wc (phase -180)": ("", phase_crossover),
        "AR/Kc there": ("", inverse(gain_increase)),
        "Kcu": ("", upper_limit),
    },
    "A22": {
        "GM": ("", gain_increase),
        "PM": ("", phase),
        "Ms": ("", sensitivity_peak),
        "Mt": ("", complementary_peak),
        "allowed delay error / theta": ("", delay),
        "wc*theta": ("", crossover),
        "w180*theta": ("", phase_crossover),
    },
    "A25": {
        f"n={n} {name}": (f"n={n}", read)
        for n in (3, 4, 5, 6, 8)
        for name, read in (("ultimate gain", upper_limit), ("frequency", phase_crossover))
    },
    "A26": {
        "PM at zeta = 0.5 (from the curve)": ("zeta=0.5", phase),
        "PM at zeta = 0.7071 (from the curve)": ("zeta=0.7071", phase),
        "Mt at zeta = 0.5": ("zeta=0.5", complementary_peak),
    },
    "A27": {
        "MO PM": ("MO", phase),
        "MO wc*T": ("MO", crossover),
        "SO PM": ("SO", phase),
        "SO wc*T": ("SO", crossover),
        "SO Ms": ("SO", sensitivity_peak),
        "MO Ms": ("MO", sensitivity_peak),
    },
    "A28": {
        "uncompensated fc": ("uncompensated", crossover_khz),
        "uncompensated PM (book: less than 5 deg)": ("uncompensated", phase),
        "lead loop fc": ("", crossover_khz),
        "lead loop PM (design value)": ("", phase),
        "with PI zero at 500 Hz: PM": ("with PI", phase),
    },
    "A30": {"GM": ("", gain_increase), "phase crossover": ("", phase_crossover), "PM": ("", phase)},
    "A31": {
        "GM": ("", gain_increase_db),
        "PM": ("", phase),
        "wc": ("", crossover),
        "delay margin": ("", at(1e3, delay)),
        "w where |L| = 1/12.68": ("gain 12.68", crossover),
        "phase crossover": ("", phase_crossover),
        "phase left at |L| = 1/1.5": ("gain 1.5", phase),
        "phase left at |L| = 1/6": ("gain 6", phase),
    },
    "A32": {"GM": ("", gain_increase), "PM": ("", phase), "Ms": ("", sensitivity_peak)},
    "A33": {
        "K1: lower gain factor (w = 0)": ("K1", gain_decrease),
        "K1: upper gain factor (w = inf)": ("K1", gain_increase),
        "K1: PM": ("K1", phase),
        "K1: Ms (at w = inf) = 1/|1+L(inf)|": ("K1", sensitivity_peak),
        "K2: lower gain factor (w = 0)": ("K2", gain_decrease),
        "K2: upper gain factor (w = inf)": ("K2", gain_increase),
        "K2: PM (at two of three crossovers)": ("K2", phase),
        "K2: PM at w = 1": ("K2", phase_at(1.0)),
        "K2: min|1+L|": ("K2", modulus),
    },
    "A34": {"lower gain factor": ("", gain_decrease), "PM": ("", phase), "min|1+L|": ("", modulus)},
    "B01": {"upper limit K": ("", upper_limit), "frequency at the limit": ("", phase_crossover)},
    "B02": {"upper limit K": ("", upper_limit), "frequency at the limit": ("", phase_crossover)},
    "B03": {"upper limit K": ("", upper_limit), "frequency at the limit": ("", phase_crossover)},
    "B04": {
        "upper limit K": ("", upper_limit),
        "frequency": ("", phase_crossover),
        "lower limit K": ("K < 0", upper_limit_negative),
    },
    "B05": {"upper limit K": ("", upper_limit), "frequency sqrt(2/3)": ("", phase_crossover)},
    "B06": {"upper limit K": ("", upper_limit), "frequency": ("", phase_crossover)},
    "B07": {"lower limit K": ("K=10", lower_limit), "frequency": ("K=10", lower_limit_frequency)},
    "B09": {"lower limit K": ("K=10", lower_limit), "frequency": ("K=10", lower_limit_frequency)},
    "B11": {"lower limit K": ("", lower_limit)},
    "B12": {"lower limit K": ("", lower_limit), "frequency": ("", lower_limit_frequency)},
    "B13": {"lower limit K": ("", lower_limit), "frequency": ("", lower_limit_frequency)},
    "B14": {"lower limit K": ("", lower_limit), "frequency": ("", lower_limit_frequency)},
    "B15": {"lower limit K": ("", lower_limit)},
    "B16": {"lower limit K": ("K=10", lower_limit)},
    "B18": {
        f"theta={theta} {name}": (f"theta={theta}", read)
        for theta in (0.2, 0.5, 0.9)
        for name, read in (("upper limit K", upper_limit), ("frequency", phase_crossover))
    },
    "B19": {
        "case 2: lower limit K": ("case 2, K < 0", upper_limit_negative),
        "case 2: upper limit K": ("case 2, K < 0", stable_from),
        "case 1: Z at K = 0.01": ("case 1", Z),
        "case 2: Z at K = -0.5": ("case 2, K < 0", Z),
        "case 2: Z at K = +0.01": ("case 2, K > 0", Z),
    },
    "B21": {"Z for T1=0.25,T2=1 (stable)": ("lead", Z), "Z for T1=1,T2=0.25": ("lag", Z)},
    "B22": {
        "upper limit K (w = 0)": ("", upper_limit),
        "lower limit K": ("K < 0", upper_limit_negative),
        "w at lower limit sqrt 5": ("K < 0", phase_crossover),
    },
    "B23": {
        f"a={a} {name}": (f"a={a}", read)
        for a in ("1", "0", "-0.5")
        for name, read in (
            ("zeta", phase_crossover),
            ("upper limit b (closed form)", upper_limit),
            ("upper limit b (bisection on root counts)", upper_limit),
        )
    },
    "B24": {
        "upper limit K (margin search)": ("K=1.0", upper_limit),
        "frequency": ("K=1.0", phase_crossover),
        "Z at K = 1.570": ("K=1.57", Z),
        "Z at K = 1.572": ("K=1.572", Z),
    },
    "B25": {
        f"tau={tau} theta={theta} {name}": (f"tau={tau} theta={theta}", read)
        for tau, theta in ((1, 0.8), (1, 1), (5, 1), (10, 1), (1, 5))
        for name, read in (("Ku", upper_limit), ("wu", phase_crossover))
    },
    "B29": {
        "upper limit of a stable range with K > 0": ("", no_stable_range),
        "Z at K = 1000": ("K=1000", Z),
    },
    "D10": {
        "exact stability limit R > L/(rC)": ("1/R = 0.05", inverse(upper_limit)),
        "peak |Zo|": ("1/R = 0.05", largest_L),
        "Middlebrook |Zo| < |Zin| demands R >": ("1/R = 0.05", largest_L),
    },
    "D11": {
        "integral, p = 1": ("", sensitivity_integral),
        "pi": ("", lambda case: math.pi * 1.0 * (case.loop.unstable_poles_before or 0)),
    },
}
for _entry in ("A08", "A09", "A10", "A11"):
    READINGS[_entry] = READINGS["A06"]
READINGS["A23"] = READINGS["A22"]

REASONS: dict[tuple[str, str], tuple[str, ...]] = {
    ("A28", "a component formula of the circuit, no figure of a loop"): ("f0", "Q0", "Tu0", "fz", "fp", "Gc0"),
    ("A31", "a disk margin is not among the margins of a loop"): ("||S-1/2||", "alpha"),
    ("A32", "a disk margin is not among the margins of a loop"): (
        "disk margin alpha (skew 0)", "disk gain low", "disk gain high", "disk phase", "frequency of the minimum",
    ),
    ("D02", "a closed-loop pole or a singular value of two channels, no figure of one loop"): (
        "poles at x = 0.10: fast", "poles at x = 0.10: slow", "peak sigma_max(T)", "peak sigma_max(S) (at w = 1/a)",
    ),
}  # fmt: skip
NOT_LOOP_FIGURES = {(entry, name): reason for (entry, reason), names in REASONS.items() for name in names}
IN_OWN_TESTS = {"B28", "D02"}  # two blocks, two loops: test_hidden_cancellation, test_satellite
