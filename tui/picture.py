"""What the screen shows at one moment, as frozen values: the file as it is, beside the file with the trial gains."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

from encircle.engine.declarations import Declarations
from encircle.engine.errors import Problem
from encircle.engine.result import ComplexArray, FloatArray, LoopCurve, LoopResult, Result


class LoopProject(Protocol):
    """What the screen asks of a project."""

    @property
    def declarations(self) -> Declarations: ...
    @property
    def loop_names(self) -> tuple[str, ...]: ...
    @property
    def gains(self) -> Mapping[str, float]: ...
    @property
    def warnings(self) -> tuple[Problem, ...]: ...
    @property
    def band(self) -> tuple[float, float]: ...
    def check(self, names: Sequence[str] | None = None) -> Result: ...
    def curve(self, name: str) -> LoopCurve: ...
    def response(self, name: str, frequency: FloatArray) -> ComplexArray: ...
    def with_gain(self, name: str, gain: float) -> LoopProject: ...


@dataclass(frozen=True, slots=True, eq=False)
class Picture:
    """One consistent set of results; a picture equals only itself.

    ``filed`` holds the results of the file as it is, ``now`` those with the trial gains; ``curve`` is that of the
    chosen loop now, ``curve_before`` the file's where it differs, else ``None``.
    """

    filed: Result
    now: Result
    chosen: int
    curve: LoopCurve
    curve_before: LoopCurve | None

    @property
    def loop(self) -> LoopResult:
        """The chosen loop now."""
        return self.now.loops[self.chosen]

    @property
    def loop_filed(self) -> LoopResult:
        """The chosen loop in the file."""
        return self.filed.loops[self.chosen]

    @property
    def changed(self) -> tuple[int, ...]:
        """Numbers of the loops whose gain is not the file's."""
        pairs = zip(self.now.loops, self.filed.loops, strict=True)
        return tuple(number for number, (now, filed) in enumerate(pairs) if now.gain != filed.gain)

    @property
    def touched(self) -> bool:
        """Whether the chosen loop or one inside it has a trial gain: then its curve may differ from the file's."""
        return any(number <= self.chosen for number in self.changed)
