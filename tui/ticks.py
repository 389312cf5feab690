"""Readable positions and labels for axes."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

DECIBEL_STEPS = (1.0, 2.0, 5.0, 10.0, 20.0, 40.0, 80.0, 160.0, 320.0)
DEGREE_STEPS = (5.0, 10.0, 15.0, 30.0, 45.0, 90.0, 180.0, 360.0, 720.0, 1440.0)
PREFIXES = ((1e12, "T"), (1e9, "G"), (1e6, "M"), (1e3, "k"))


@dataclass(frozen=True, slots=True)
class Tick:
    """A position on an axis and what stands there; without a label it only carries the grid."""

    position: float
    label: str = ""


def linear_ticks(lower: float, upper: float, most: int) -> tuple[Tick, ...]:
    """At most ``most`` ticks at multiples of 1, 2 or 5 times a power of ten in [lower, upper]."""
    coarsest = float(10.0 ** np.ceil(np.log10(upper - lower)))
    steps = sorted(coarsest * factor for factor in _one_two_five(-4, 1))
    return _multiples(lower, upper, most, steps)


def decibel_ticks(lower: float, upper: float, most: int) -> tuple[Tick, ...]:
    """At most ``most`` ticks at multiples of a step usual for decibels."""
    return _multiples(lower, upper, most, DECIBEL_STEPS)


def degree_ticks(lower: float, upper: float, most: int) -> tuple[Tick, ...]:
    """At most ``most`` ticks at multiples of a step that divides the circle."""
    return _multiples(lower, upper, most, DEGREE_STEPS)


def logarithmic_ticks(lower: float, upper: float, most: int) -> tuple[Tick, ...]:
    """At most ``most`` ticks in [lower, upper], both above 0: at 1, 2, 5 or 1, 3 times powers of ten, else at powers.

    Positions are powers of ten's exponents: log10 of the value that the label names.
    """
    first, last = int(np.floor(np.log10(lower))), int(np.ceil(np.log10(upper)))
    for factors in ((1.0, 2.0, 5.0), (1.0, 3.0), (1.0,)):
        values = [factor * 10.0**decade for decade in range(first, last + 1) for factor in factors]
        inside = [value for value in values if lower * (1 - 1e-9) <= value <= upper * (1 + 1e-9)]
        if len(inside) <= most:
            return tuple(Tick(float(np.log10(value)), frequency_label(value)) for value in inside)
    stride = -(-len(inside) // max(most, 1))
    chosen = [value for value in inside if round(np.log10(value)) % stride == 0]
    return tuple(Tick(float(np.log10(value)), frequency_label(value)) for value in chosen)


def frequency_label(value: float) -> str:
    """A positive number in few characters: 0.05, 10, 2k, 1M; powers where digits would not help (1e-5)."""
    if value < 1e-3 or value >= 1e15:
        return f"{value:.3g}".replace("e-0", "e-").replace("e+", "e")
    for size, prefix in PREFIXES:
        if value >= size * (1 - 1e-9):
            return f"{value / size:.4g}{prefix}"
    return f"{value:.4g}"


def _one_two_five(lowest: int, highest: int) -> Iterable[float]:
    return (factor * 10.0**decade for decade in range(lowest, highest) for factor in (1.0, 2.0, 5.0))


def _multiples(lower: float, upper: float, most: int, steps: Iterable[float]) -> tuple[Tick, ...]:
    """Ticks at the multiples of the smallest step that gives at most ``most``; the last step is taken if none does."""
    for step in steps:
        first, last = int(np.ceil(lower / step - 1e-9)), int(np.floor(upper / step + 1e-9))
        if last - first + 1 <= most:
            break
    return tuple(Tick(number * step, _linear_label(number * step, step)) for number in range(first, last + 1))


def _linear_label(value: float, step: float) -> str:
    """Just the decimals that the number needs."""
    if abs(value) >= 1e4 or (value != 0 and step < 1e-3):
        return f"{value:.3g}".replace("e+0", "e").replace("e-0", "e-")
    return f"{value:.6g}"
