"""Gains on trial: which loops' gains differ from the file's, stepped in tenths of a decibel or typed."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from encircle.tui.picture import LoopProject

MOST_TENTHS = 2400  # 240 dB either way: far beyond any use, far from overflow


@dataclass(frozen=True, slots=True)
class TrialGain:
    """A gain as a starting value and steps of 0.1 dB on it, so that steps up and down come back exactly."""

    start: float
    tenths: int = 0

    @property
    def gain(self) -> float:
        """The factor at the cut."""
        return self.start * 10 ** (self.tenths / 200) if self.tenths else self.start


@dataclass(frozen=True, slots=True)
class Trial:
    """The trial gains by name of loop; a loop that stands as in the file is not listed."""

    gains: Mapping[str, TrialGain] = field(default_factory=lambda: MappingProxyType({}))

    def stepped(self, name: str, filed: float, tenths: int) -> Trial:
        """The gain of a loop changed by so many tenths of a decibel; ``filed`` is its gain in the file."""
        now = self.gains.get(name, TrialGain(filed))
        steps = min(max(now.tenths + tenths, -MOST_TENTHS), MOST_TENTHS)
        return self._with(name, filed, TrialGain(now.start, steps))

    def typed(self, name: str, filed: float, gain: float) -> Trial:
        """The gain of a loop set to a value above 0."""
        return self._with(name, filed, TrialGain(gain))

    def put_back(self, name: str) -> Trial:
        """The loop as in the file."""
        return Trial(MappingProxyType({other: gain for other, gain in self.gains.items() if other != name}))

    def gain(self, name: str, filed: float) -> float:
        """The gain of a loop now."""
        return self.gains[name].gain if name in self.gains else filed

    def _with(self, name: str, filed: float, gain: TrialGain) -> Trial:
        if gain.gain == filed or not (0 < gain.gain < math.inf):
            return self.put_back(name) if gain.gain == filed else self
        return Trial(MappingProxyType({**self.gains, name: gain}))


def applied(project: LoopProject, trial: Trial) -> LoopProject:
    """The project of the file with the trial gains at its cuts."""
    for name, gain in trial.gains.items():
        project = project.with_gain(name, gain.gain)
    return project
