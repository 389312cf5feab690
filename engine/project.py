"""A project: its loops in closing order, what is known of each, and what a change of gain does."""

from __future__ import annotations

import math
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from pathlib import Path

import numpy as np

from encircle.engine.algebra_warnings import algebra_warnings
from encircle.engine.axis_poles import hidden_right
from encircle.engine.band_cells import BandOfLoop
from encircle.engine.closing_order import PartKey, Stage
from encircle.engine.counting import Counter
from encircle.engine.declarations import Declarations, MeasuredBlock
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.grids import distinct
from encircle.engine.high_frequency import FarCause
from encircle.engine.loop_curve import loop_curve
from encircle.engine.loop_result import loop_result
from encircle.engine.loop_study import LoopStudy, sample_loop
from encircle.engine.loop_system import LoopSystem, compile_system
from encircle.engine.memory import Memory
from encircle.engine.open_loop import OpenLoop
from encircle.engine.project_file import read_project
from encircle.engine.result import (
    ComplexArray,
    FloatArray,
    HiddenPole,
    LoopCurve,
    LoopResult,
    MeasuredFile,
    Result,
)
from encircle.engine.text import one_line
from encircle.engine.verdict import outcome
from encircle.engine.version import VERSION
from encircle.engine.well_posedness import loses_degree

Address = tuple[int, tuple[Fraction, ...]]
MOST_RESULTS = 200  # loop results and curves kept, each


@dataclass(slots=True)
class _Shared:
    """What all settings of the gains of one project have in common, and what was found so far."""

    system: LoopSystem
    counter: Counter
    warnings: tuple[Problem, ...]
    loops: Memory[Address, tuple[LoopResult, OpenLoop, LoopStudy | None]] = field(
        default_factory=lambda: Memory(MOST_RESULTS)
    )
    curves: Memory[Address, LoopCurve] = field(default_factory=lambda: Memory(MOST_RESULTS))


def _decimal(gain: float) -> Fraction:
    """A gain as the shortest decimal that stands for it: 0.1 is one tenth, as it was written."""
    return Fraction(repr(float(gain)))


def open_project(path: str | os.PathLike[str]) -> Project:
    """Read a project file and compile its diagram.

    Raises ProjectError listing every mistake found, each sentence naming the file.
    """
    declarations = read_project(path)
    try:
        return Project(declarations)
    except ProjectError as error:
        name = one_line(Path(declarations.file).name)
        raise ProjectError(*(replace(p, message=f"{name}: {p.message}") for p in error.problems)) from None


class Project:
    """One project with the factors at its cuts as they stand; immutable, results are found when asked for and kept."""

    def __init__(self, declarations: Declarations) -> None:
        system = compile_system(declarations)
        warnings = (*declarations.warnings, *algebra_warnings(system))
        self._shared = _Shared(system, Counter(system), warnings)
        self._gains = tuple(_decimal(loop.gain) for loop in declarations.loops)
        self._refuse_ill_posed()

    @property
    def declarations(self) -> Declarations:
        """What the project file says."""
        return self._shared.system.declarations

    @property
    def loop_names(self) -> tuple[str, ...]:
        """In closing order, innermost first."""
        return tuple(loop.name for loop in self.declarations.loops)

    @property
    def gains(self) -> Mapping[str, float]:
        """The factor at each cut as it stands."""
        return {name: float(gain) for name, gain in zip(self.loop_names, self._gains, strict=True)}

    @property
    def warnings(self) -> tuple[Problem, ...]:
        """What the project file leaves doubtful."""
        return self._shared.warnings

    @property
    def band(self) -> tuple[float, float]:
        """What plots show at first, in the file's frequency unit: declared, or a decade beyond all features."""
        if self.declarations.band is not None:
            return self.declarations.band
        system = self._shared.system
        return 0.1 * system.lowest / self._unit, 10.0 * system.highest / self._unit

    def with_gain(self, name: str, gain: float) -> Project:
        """The same project with another factor at one cut; inner loops keep what is known of them.

        Raises KeyError for an unknown loop and ValueError unless the factor is finite and above 0.
        """
        if not (math.isfinite(gain) and gain > 0.0):
            raise ValueError(f"the gain of a loop must be finite and above 0, not {gain}")
        position = self._position(name)
        changed = object.__new__(Project)
        changed._shared = self._shared
        changed._gains = (*self._gains[:position], _decimal(gain), *self._gains[position + 1 :])
        return changed

    def loop(self, name: str) -> LoopResult:
        """What is known of one loop with the earlier ones closed; KeyError for an unknown name."""
        return self._study(self._stage(name))[0]

    def curve(self, name: str) -> LoopCurve:
        """The open-loop response of one loop for drawing; KeyError for an unknown name."""
        stage = self._stage(name)
        address = self._address(stage)
        if address not in self._shared.curves:
            _, loop, studied = self._study(stage)
            sampled = studied.curve if studied else sample_loop(self._shared.counter, loop)
            lines = self._lines(stage)
            band = BandOfLoop(self._shared.counter, stage, self._gains)
            radius = band.radius(sampled.omega) if loop.measured else np.zeros(len(sampled.omega))
            self._shared.curves[address] = loop_curve(loop, sampled, radius, lines, self._unit)
        return self._shared.curves[address]

    def response(self, name: str, frequency: FloatArray) -> ComplexArray:
        """L of one loop at frequencies (n,) in the file's unit, > 0."""
        _, loop, _ = self._study(self._stage(name))
        return loop.at(np.asarray(frequency, dtype=float) * self._unit)[0]

    def check(self, names: Sequence[str] | None = None) -> Result:
        """The whole diagram and every loop (or only those named; the outcome speaks of the loops listed)."""
        system = self._shared.system
        self._shared.counter.count(system.order.parts(), self._gains)  # all parts on common cells
        loops = tuple(self.loop(name) for name in (self.loop_names if names is None else names))
        all_closed = self._count(system.order.all_closed, system.order.lone_when_closed)
        declarations = self.declarations
        return Result(
            program=f"encircle {VERSION}",
            title=declarations.title,
            file=declarations.file,
            sha256=declarations.sha256,
            measured=self._measured(),
            frequency_unit=declarations.frequency_unit,
            result=outcome(loops, all_closed),
            uncut_feedback=tuple(system.blocks_in(key) for key in system.order.all_open),
            unstable_poles_all_open=self._count(system.order.all_open, system.order.lone_when_open),
            unstable_poles_all_closed=all_closed,
            hidden_unstable_poles=self._hidden(),
            loops=loops,
            warnings=(*self.warnings, *self._incomplete_crossings(loops)),
        )

    def _incomplete_crossings(self, loops: Sequence[LoopResult]) -> list[Problem]:
        """A word where the listed crossings do not sum to the proved N, as where there are infinitely many."""
        found = []
        for loop in loops:
            _, _, studied = self._study(self._stage(loop.name))
            if studied and not studied.complete:
                message = (
                    f"loop `{loop.name}`: the crossings of the real axis that are listed do not sum to N (there may be "
                    "infinitely many); the count itself is proved"
                )
                found.append(Problem("crossings-incomplete", f"loops.{loop.name}", message))
        return found

    @property
    def _unit(self) -> float:
        """The file's frequency unit in rad/s."""
        return 2.0 * math.pi if self.declarations.frequency_unit == "Hz" else 1.0

    def _position(self, name: str) -> int:
        try:
            return self.loop_names.index(name)
        except ValueError:
            raise KeyError(name) from None

    def _stage(self, name: str) -> Stage:
        return self._shared.system.order.stages[self._position(name)]

    def _address(self, stage: Stage) -> Address:
        return stage.loop, tuple(self._gains[loop] for loop in sorted(stage.part[1]))

    def _study(self, stage: Stage) -> tuple[LoopResult, OpenLoop, LoopStudy | None]:
        address = self._address(stage)
        return self._shared.loops.remember(
            address, lambda: loop_result(self._shared.counter, stage, self._gains, self._unit)
        )

    def _count(self, keys: Sequence[PartKey], lone: Sequence[int]) -> int | None:
        """Unstable poles of the whole diagram: of all parts and of the copies in no feedback."""
        counts = [count.unstable for count in self._shared.counter.count(keys, self._gains)]
        system = self._shared.system
        off = any(model.first_line_is_off() for key in keys for model in system.measured_in(key))
        if off or any(count is None or count < 0 for count in counts):
            return None
        blocks = [system.diagram.blocks[node] for node in lone]
        alone = sum(system.poles[block].right + system.declared.get(block, 0) for block in blocks)
        return alone + sum(count for count in counts if count is not None)

    def _hidden(self) -> tuple[HiddenPole, ...]:
        system = self._shared.system
        found = [HiddenPole(block, pole) for block, pole in hidden_right(system, system.order.all_closed)]
        for node in system.order.lone_when_closed:
            block = system.diagram.blocks[node]
            found += [HiddenPole(block, pole) for pole in system.poles[block].unstable]
            found += [HiddenPole(block, None)] * system.declared.get(block, 0)
        return tuple(found)

    def _measured(self) -> tuple[MeasuredFile, ...]:
        found = []
        for block in self.declarations.blocks.values():
            if isinstance(block, MeasuredBlock):
                data = block.response
                span = float(data.omega[0]) / self._unit, float(data.omega[-1]) / self._unit
                found.append(MeasuredFile(block.name, data.file, data.sha256, len(data.omega), *span))
        return tuple(found)

    def _lines(self, stage: Stage) -> FloatArray:
        found = [model.lines for model in self._shared.system.measured_in(stage.part)]
        return distinct(np.concatenate(found)) if found else np.empty(0)

    def _refuse_ill_posed(self) -> None:
        """Refuse algebraic loops without a solution at any stage, naming the signals of the cycle."""
        system, counter = self._shared.system, self._shared.counter
        for key in system.order.parts():
            determinant = system.determinants[key]
            if counter.ending(key, self._gains) is FarCause.ILL_POSED and loses_degree(determinant, self._gains):
                signals = [system.diagram.homes[node] for node in sorted(key[0]) if node < len(system.diagram.blocks)]
                named = ", ".join(f"`{signal}`" for signal in dict.fromkeys(signals))
                message = (
                    f"the feedback through {named} tends to 1 + L = 0 at infinite frequency without dead time, so it "
                    "has no solution there: put the dynamics that the devices have at high frequency into their blocks"
                )
                raise ProjectError(Problem("algebraic-loop", "signals", message))
