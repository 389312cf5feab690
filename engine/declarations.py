"""What a project file declares, validated and typed, before any mathematics.

Numbers are the decimals as written, held as exact fractions; ``s`` is in rad/s and times are in seconds.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from encircle.engine.errors import Problem
from encircle.engine.expression import Expression

FrequencyUnit = Literal["Hz", "rad/s"]


@dataclass(frozen=True, slots=True)
class FormulaBlock:
    """H(s) as a formula; ``parameters`` holds the block's own constants and the shared ones that it uses.

    ``unstable_poles`` is stated only for formulas that are not recognised as rational with dead time.
    """

    name: str
    formula: Expression
    text: str
    parameters: Mapping[str, Fraction]
    unstable_poles: int | None
    note: str


@dataclass(frozen=True, slots=True)
class CoefficientBlock:
    """numerator(s)/denominator(s), descending powers, with a dead time."""

    name: str
    numerator: tuple[Fraction, ...]
    denominator: tuple[Fraction, ...]
    dead_time: Fraction
    note: str


@dataclass(frozen=True, slots=True)
class RootBlock:
    """leading_gain * prod(s - z)/prod(s - p); a root is (re, im), im = 0 for real, im > 0 stands for the pair."""

    name: str
    zeros: tuple[tuple[Fraction, Fraction], ...]
    poles: tuple[tuple[Fraction, Fraction], ...]
    leading_gain: Fraction
    dead_time: Fraction
    note: str


@dataclass(frozen=True, slots=True)
class StateSpaceBlock:
    """C (sI - A)^-1 B + D, one input and one output; rows of exact numbers."""

    name: str
    A: tuple[tuple[Fraction, ...], ...]
    B: tuple[Fraction, ...]
    C: tuple[Fraction, ...]
    D: Fraction
    dead_time: Fraction
    note: str


@dataclass(frozen=True, slots=True)
class MeasuredResponse:
    """A measured frequency response, sorted.

    ``omega`` (m,) rad/s ascending, ``H`` (m,) complex, ``coherence`` (m,) or None.
    """

    file: str
    sha256: str
    omega: NDArray[np.float64]
    H: NDArray[np.complex128]
    coherence: NDArray[np.float64] | None
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class MeasuredBlock:
    """A block known by measurement with its declared asymptotes.

    ``integrators`` m: below the first line H = k/s^m; ``roll_off`` n: above the last |H| <= |H_last| (w_last/w)^n,
    None: nothing is assumed; ``between_lines``: radius round the chord of two lines as a multiple of their distance.
    """

    name: str
    response: MeasuredResponse
    unstable_poles: int
    integrators: int
    roll_off: int | None
    between_lines: float
    note: str


Block = FormulaBlock | CoefficientBlock | RootBlock | StateSpaceBlock | MeasuredBlock


@dataclass(frozen=True, slots=True)
class Term:
    """One term of a signal equation: coefficient * block * block * ... * (source).

    ``blocks`` in the order written (the rightmost acts first); ``source`` is a signal or input name, or a parenthesised
    sum.
    """

    coefficient: Fraction
    blocks: tuple[str, ...]
    source: str | tuple[Term, ...]


@dataclass(frozen=True, slots=True)
class LoopDeclaration:
    """A loop: where it is cut, the factor at the cut, its limits (shared ones merged in), what it is meant to leave."""

    name: str
    cut: str
    gain: float
    limits: Mapping[str, float]
    leaves_unstable: int | None
    leaves_on_axis: int | None


@dataclass(frozen=True, slots=True)
class Declarations:
    """A whole project file.

    ``band`` in the file's frequency unit; ``signals`` maps each signal to its equation's terms.
    """

    file: str
    sha256: str
    title: str
    frequency_unit: FrequencyUnit
    inputs: tuple[str, ...]
    band: tuple[float, float] | None
    parameters: Mapping[str, Fraction]
    blocks: Mapping[str, Block]
    signals: Mapping[str, tuple[Term, ...]]
    loops: tuple[LoopDeclaration, ...]
    warnings: tuple[Problem, ...]
