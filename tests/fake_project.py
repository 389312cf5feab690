"""A hand-made project for the tests of the screen: three nested loops, sampled with numpy, no proof behind them.

The current and speed loops are those of the "Rewinder drive" of the project file format's example, with its figures;
the position loop is an unstable one that waits for its gain. Names and notes can be made hostile.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from types import MappingProxyType

import numpy as np

from encircle.engine.declarations import CoefficientBlock, Declarations, LoopDeclaration
from encircle.engine.errors import Problem
from encircle.engine.result import (
    AxisPole,
    ComplexArray,
    DelayMargin,
    FloatArray,
    GainMargin,
    GainRange,
    LimitFinding,
    LoopCurve,
    LoopResult,
    Margins,
    ModulusMargin,
    Peak,
    PhaseMargin,
    PoleOwner,
    RealAxisCrossing,
    Result,
    UndecidedStretch,
)

FREQUENCY = np.geomspace(0.05, 40000, 1200)
LIMITS: Mapping[str, float] = {"gain_margin_db": 6.0, "phase_margin_deg": 45.0}


def current_loop(s: ComplexArray, gains: Mapping[str, float]) -> ComplexArray:
    controller = 8.0 + 3200 / s
    amplifier = np.exp(-90e-6 * s) / (1 + 20e-6 * s)
    coil = 1 / (3.4e-3 * s + 0.82)
    rotor = 1 / (1.8e-3 * s)
    return gains["current"] * controller * amplifier * coil / (1 + coil * rotor * 0.41**2)


def speed_loop(s: ComplexArray, gains: Mapping[str, float]) -> ComplexArray:
    inner = current_loop(s, gains)
    torque = inner / (1 + inner) * 0.41
    return gains["speed"] * torque * (0.35 + 9.0 / s) / (1.8e-3 * s) / (1 + 4e-4 * s)


def position_loop(s: ComplexArray, gains: Mapping[str, float]) -> ComplexArray:
    inner = speed_loop(s, gains)
    return gains["position"] * inner / (1 + inner) * 90 * (1 + 400 / s) / s


LOOPS = {"current": current_loop, "speed": speed_loop, "position": position_loop}


@dataclass(frozen=True)
class FakeProject:
    """Results of the three loops for any gains; ``failing`` makes every count raise, ``slow`` is called before each."""

    gains: Mapping[str, float] = field(default_factory=lambda: MappingProxyType(dict.fromkeys(LOOPS, 1.0)))
    title: str = "Rewinder drive"
    file: str = "rewinder.toml"
    names: tuple[str, ...] = tuple(LOOPS)
    note: str = "gains as on the drive"
    warning: str = "parameter ke is used by nothing"
    failing: bool = False
    undecided: bool = False

    @property
    def loop_names(self) -> tuple[str, ...]:
        return self.names

    @property
    def warnings(self) -> tuple[Problem, ...]:
        return (Problem("unused", "parameters.ke", self.warning),)

    @property
    def band(self) -> tuple[float, float]:
        return (0.1, 20000.0)

    @property
    def declarations(self) -> Declarations:
        block = CoefficientBlock("coil", (1,), (1, 1), 0, self.note)  # type: ignore[arg-type]
        loops = tuple(LoopDeclaration(name, f"{name}_error", 1.0, LIMITS, None, None) for name in self.names)
        return Declarations(
            self.file, "0" * 64, self.title, "Hz", (), self.band, {}, {"coil": block}, {}, loops, self.warnings
        )

    def with_gain(self, name: str, gain: float) -> FakeProject:
        return replace(self, gains=MappingProxyType({**self.gains, name: gain}))

    def check(self, names: Sequence[str] | None = None) -> Result:
        if self.failing and any(gain != 1 for gain in self.gains.values()):
            raise ArithmeticError("the budget of cells is \x1b[31mspent[/bold]")
        loops = self._results
        failed = any(loop.verdict == "unstable" or any(f.met is False for f in loop.limits) for loop in loops)
        return Result(
            "encircle test", self.title, self.file, "0" * 64, (), "Hz", "fail" if failed else "pass",
            (("coil", "rotor"),), 0, max(loop.unstable_poles_after or 0 for loop in loops), (), loops, self.warnings,
        )  # fmt: skip

    def curve(self, name: str) -> LoopCurve:
        L = self.response(name, FREQUENCY)
        empty = np.zeros(len(L))
        return LoopCurve(FREQUENCY, L, 1 / (1 + L), L / (1 + L), empty, ((0, len(L)),), (), empty[:0], None, 0j)

    def response(self, name: str, frequency: FloatArray) -> ComplexArray:
        kind = list(LOOPS)[self.names.index(name)]
        gains = {key: self.gains[given] for key, given in zip(LOOPS, self.names, strict=True)}
        return np.asarray(LOOPS[kind](2j * np.pi * frequency, gains), dtype=np.complex128)

    @cached_property
    def _results(self) -> tuple[LoopResult, ...]:
        results = tuple(self._result(name) for name in self.names)
        return (*results[:-1], _undecided(results[-1])) if self.undecided else results

    def _result(self, name: str) -> LoopResult:
        curve = self.curve(name)
        crossing = _phase_crossing(curve)
        factor = -1 / crossing[1]
        after = 0 if factor > 1 else 2
        margins = _margins(curve, crossing) if after == 0 else None
        nearest = RealAxisCrossing(*crossing, 0) if after == 0 else RealAxisCrossing(*crossing, 2)
        axis = (AxisPole("current_controller", 0.0),) if name == self.names[0] else ()
        return LoopResult(
            name, f"{name}_error", self.gains[name], "stable" if after == 0 else "unstable", after, 0, after, (),
            axis, "proved", (), (), (nearest,), (GainRange(0, factor, 0), GainRange(factor, None, 2)),
            margins, _limits(margins), ("coil", "rotor"), None, None,
        )  # fmt: skip


def _phase_crossing(curve: LoopCurve) -> tuple[float, float]:
    """Frequency and value of the crossing of the negative real axis with the largest |L| (straight between samples)."""
    L, f = curve.L, curve.frequency
    turn = np.flatnonzero((np.sign(L.imag[:-1]) != np.sign(L.imag[1:])) & (L.real[:-1] < 0))
    part = L.imag[turn] / (L.imag[turn] - L.imag[turn + 1])
    value = L.real[turn] + part * (L.real[turn + 1] - L.real[turn])
    best = int(np.argmin(value))
    return float(f[turn[best]] + part[best] * (f[turn[best] + 1] - f[turn[best]])), float(value[best])


def _margins(curve: LoopCurve, crossing: tuple[float, float]) -> Margins:
    f, L = curve.frequency, curve.L
    over = np.flatnonzero(np.diff(np.sign(np.abs(L) - 1)))
    phase = np.angle(-L[over], deg=True) % 360
    best = int(np.argmin(phase))
    nearest, peak = int(np.argmin(np.abs(1 + L))), int(np.argmax(np.abs(curve.T)))
    factor = -1 / crossing[1]
    modulus = float(np.abs(1 + L[nearest]))
    return Margins(
        GainMargin(factor, 20 * math.log10(factor), crossing[0]),
        None,
        PhaseMargin(float(phase[best]), "lag", float(f[over[best]])),
        DelayMargin(float(phase[best] / 360 / f[over[best]]), float(f[over[best]])),
        ModulusMargin(modulus, float(f[nearest])),
        Peak(1 / modulus, -20 * math.log10(modulus), float(f[nearest])),
        Peak(float(abs(curve.T[peak])), 20 * math.log10(abs(curve.T[peak])), float(f[peak])),
        tuple(float(value) for value in f[over]),
    )


def _limits(margins: Margins | None) -> tuple[LimitFinding, ...]:
    found = {} if margins is None or margins.gain_increase is None or margins.phase is None else {
        "gain_margin_db": margins.gain_increase.db, "phase_margin_deg": margins.phase.degrees,
    }  # fmt: skip
    return tuple(
        LimitFinding(name, required, found.get(name), name in found and found[name] >= required)
        for name, required in LIMITS.items()
    )


def _undecided(loop: LoopResult) -> LoopResult:
    """The same loop without a count."""
    limits = tuple(LimitFinding(limit.name, limit.required, None, None) for limit in loop.limits)
    stretch = UndecidedStretch(210.0, 225.0, "lines are 2 Hz apart; 0.5 Hz would decide")
    return replace(
        loop, verdict="undecided", windings=None, unstable_poles_before=1, unstable_poles_after=None,
        pole_owners=(PoleOwner("rotor", "block", 1),), evidence="none", undecided=(stretch,), real_axis_crossings=(),
        gain_ranges=(), margins=None, limits=limits,
    )  # fmt: skip
