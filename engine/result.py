"""Results as frozen values: what is known of each loop and of the whole diagram.

Frequencies are in the unit of the project file (``Result.frequency_unit``). A value approached only at infinity has
frequency ``None``, one at standstill frequency 0. Gain factors act on top of the loop's gain as it stands.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from encircle.engine.errors import Problem

Verdict = Literal["stable", "unstable", "undecided", "as_declared"]
Evidence = Literal["proved", "declared", "data", "none"]
Outcome = Literal["pass", "fail", "undecided"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
BoolArray = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class AxisPole:
    """A block's pole on the imaginary axis that closing the loop leaves there; ``frequency`` >= 0 stands for the
    pair.
    """

    block: str
    frequency: float


@dataclass(frozen=True, slots=True)
class HiddenPole:
    """A block's pole right of the axis that no feedback moves.

    ``pole`` in rad/s with im >= 0, ``None`` where only a count is declared.
    """

    block: str
    pole: complex | None


@dataclass(frozen=True, slots=True)
class PoleOwner:
    """Who brings poles right of the axis before the loop closes: a block, or an earlier loop that leaves them."""

    owner: str
    kind: Literal["block", "loop", "uncut feedback"]
    unstable_poles: int


@dataclass(frozen=True, slots=True)
class UndecidedStretch:
    """A stretch of frequency that prevents a count; ``upper`` is ``None`` for infinity."""

    lower: float
    upper: float | None
    why: str


@dataclass(frozen=True, slots=True)
class RealAxisCrossing:
    """A crossing of the real axis left of -1 (or the nearest one right of it, then ``turns`` is 0).

    ``turns`` counts clockwise encirclements, both half contours together. ``frequency`` is ``None`` on the arc at
    infinity, ``value`` is ``None`` where L is infinite.
    """

    frequency: float | None
    value: float | None
    turns: int


@dataclass(frozen=True, slots=True)
class GainRange:
    """An open interval of the gain factor with Z in it; ``upper`` ``None``: no change follows."""

    lower: float
    upper: float | None
    unstable_poles: int


@dataclass(frozen=True, slots=True)
class GainMargin:
    """The factor at which Z changes; ``db`` is its positive size."""

    factor: float
    db: float
    frequency: float | None


@dataclass(frozen=True, slots=True)
class PhaseMargin:
    """The smallest turn of L that changes Z, in degrees, towards lag or lead."""

    degrees: float
    direction: Literal["lag", "lead"]
    frequency: float | None


@dataclass(frozen=True, slots=True)
class DelayMargin:
    """The smallest added dead time, in seconds, that changes Z."""

    seconds: float
    frequency: float | None


@dataclass(frozen=True, slots=True)
class ModulusMargin:
    """The least |1 + L|."""

    value: float
    frequency: float | None


@dataclass(frozen=True, slots=True)
class Peak:
    """The largest |S| or |T|."""

    value: float
    db: float
    frequency: float | None


@dataclass(frozen=True, slots=True)
class Margins:
    """Distances to a change of Z; ``None`` where a side has no finite limit."""

    gain_increase: GainMargin | None
    gain_decrease: GainMargin | None
    phase: PhaseMargin | None
    delay: DelayMargin | None
    modulus: ModulusMargin
    sensitivity_peak: Peak
    complementary_peak: Peak
    gain_crossovers: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class LimitFinding:
    """One limit held against what was found; ``met`` is ``None`` when undecided."""

    name: str
    required: float
    found: float | None
    met: bool | None


@dataclass(frozen=True, slots=True)
class LoopResult:
    """All that is known of one loop with the earlier ones closed and the later ones open.

    ``windings`` is N, ``unstable_poles_before`` P, ``unstable_poles_after`` Z; each ``None`` when undecided.
    ``blocks`` names the blocks in the loop's part of the diagram, ``assumptions`` says in sentences what the count
    rests on.
    """

    name: str
    cut: str
    gain: float
    verdict: Verdict
    windings: int | None
    unstable_poles_before: int | None
    unstable_poles_after: int | None
    pole_owners: tuple[PoleOwner, ...]
    axis_poles_left: tuple[AxisPole, ...]
    evidence: Evidence
    assumptions: tuple[str, ...]
    undecided: tuple[UndecidedStretch, ...]
    real_axis_crossings: tuple[RealAxisCrossing, ...]
    gain_ranges: tuple[GainRange, ...]
    margins: Margins | None
    limits: tuple[LimitFinding, ...]
    blocks: tuple[str, ...]
    leaves_unstable: int | None
    leaves_on_axis: int | None


@dataclass(frozen=True, slots=True)
class MeasuredFile:
    """A data file that was used: its block, name, digest, number of lines and frequency span (file unit)."""

    block: str
    file: str
    sha256: str
    lines: int
    lower: float
    upper: float


@dataclass(frozen=True, slots=True)
class Result:
    """The whole diagram and every loop in closing order."""

    program: str
    title: str
    file: str
    sha256: str
    measured: tuple[MeasuredFile, ...]
    frequency_unit: Literal["Hz", "rad/s"]
    result: Outcome
    uncut_feedback: tuple[tuple[str, ...], ...]
    unstable_poles_all_open: int | None
    unstable_poles_all_closed: int | None
    hidden_unstable_poles: tuple[HiddenPole, ...]
    loops: tuple[LoopResult, ...]
    warnings: tuple[Problem, ...]


@dataclass(frozen=True, slots=True)
class Arc:
    """The turn of L on a small half circle round an axis pole, or on the arc at infinity: |L| is unbounded there.

    Angles in rad, continuous along the contour in the direction of travel (clockwise turns decrease). Only the upper
    half contour is given: at frequency 0 the arc starts on the real axis of s, at infinity (frequency ``None``) it
    ends there.
    """

    frequency: float | None
    start_angle: float
    end_angle: float


@dataclass(frozen=True, slots=True)
class LoopCurve:
    """The open-loop response along the upper half contour, sampled finely enough to be drawn.

    ``frequency`` (n,) ascending, > 0, file unit; ``L``, ``S`` = 1/(1+L), ``T`` = L/(1+L): (n,) complex; ``radius``
    (n,): half width of the band that measured blocks leave round L (0 for models). ``pieces``: (start, stop) index
    pairs of unbroken stretches: between two pieces L runs through infinity. ``lines`` (m,): frequencies of measured
    lines inside the loop. ``at_zero``/``at_infinity``: limits of L where they are finite, else ``None``.
    """

    frequency: FloatArray
    L: ComplexArray
    S: ComplexArray
    T: ComplexArray
    radius: FloatArray
    pieces: tuple[tuple[int, int], ...]
    arcs: tuple[Arc, ...]
    lines: FloatArray
    at_zero: complex | None
    at_infinity: complex | None
