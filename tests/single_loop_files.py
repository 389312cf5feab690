"""Small project files written for a test: one block in one loop, characteristic equation 1 + L = 0."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

from encircle.engine import Project, open_project
from encircle.engine.result import LoopResult


@dataclass(frozen=True, slots=True)
class SingleLoop:
    """L = sign * gain * numerator/denominator * exp(-dead_time*s), descending powers, rad/s."""

    numerator: Sequence[float]
    denominator: Sequence[float]
    dead_time: float = 0.0
    gain: float = 1.0
    sign: int = 1

    def text(self) -> str:
        """The project file."""
        minus = "-" if self.sign < 0 else ""
        return f"""
format = 1
frequency_unit = "rad/s"
inputs = ["command"]
[blocks.plant]
numerator = {[float(x) for x in self.numerator]}
denominator = {[float(x) for x in self.denominator]}
dead_time = {self.dead_time!r}
[signals]
error = "command - output"
output = "{minus}plant * error"
[[loops]]
name = "loop"
cut = "error"
gain = {self.gain!r}
"""

    def opened(self, folder: Path) -> Project:
        """Write the file into ``folder`` and open it."""
        return opened(self.text(), folder)


def opened(text: str, folder: Path) -> Project:
    """Write ``text`` as a project file into ``folder`` and open it."""
    path = folder / "project.toml"
    path.write_text(text, encoding="utf-8")
    return open_project(path)


def assert_consistent(loop: LoopResult) -> None:
    """What holds in every result: N = Z - P, crossings sum to N, the range around 1 has Z, nulls where undecided."""
    N, P, Z = loop.windings, loop.unstable_poles_before, loop.unstable_poles_after
    if Z is None:
        assert loop.verdict in ("undecided", "unstable")
        assert loop.undecided
        assert loop.real_axis_crossings == ()
        assert loop.gain_ranges == ()
        assert loop.margins is None
        return
    if P is not None:
        assert N == Z - P
        assert sum(crossing.turns for crossing in loop.real_axis_crossings) == N
    here = [r for r in loop.gain_ranges if r.lower < 1.0 and (r.upper is None or r.upper > 1.0)]
    assert [r.unstable_poles for r in here] == [Z]
    for left, right in pairwise(loop.gain_ranges):
        assert left.upper is not None
        assert left.upper <= right.lower
