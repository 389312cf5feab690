"""Poles of a single block on and right of the imaginary axis, counted exactly."""

from __future__ import annotations

from dataclasses import dataclass

from encircle.engine.coprime_factors import Powers
from encircle.engine.polynomial import Polynomial


@dataclass(frozen=True, slots=True)
class FactorPoles:
    """Zeros of a product of polynomial factors, with multiplicity: how many right of the axis, which, and those on it.

    ``right`` counts all; ``unstable`` (rad/s) lists a pair once, im >= 0; ``on_axis`` lists frequencies >= 0 in
    rad/s, a pair once.
    """

    right: int
    unstable: tuple[complex, ...]
    on_axis: tuple[float, ...]


def poles_of(powers: Powers) -> FactorPoles:
    """Zeros on and right of the axis of the polynomial factors with positive exponents."""
    right = 0
    unstable: list[complex] = []
    on_axis: list[float] = []
    for factor, power in powers.items():
        if power <= 0 or not isinstance(factor, Polynomial) or _plainly_stable(factor):
            continue
        right += power * factor.count_right()[0]
        for root in factor.roots():
            if root.imag >= 0.0 and root.real > 0.0:
                unstable += [complex(root)] * power
            elif root.imag >= 0.0 and root.real == 0.0:
                on_axis += [float(root.imag)] * power
    return FactorPoles(right, tuple(unstable), tuple(sorted(on_axis)))


def _plainly_stable(factor: Polynomial) -> bool:
    """First and second order with coefficients of one sign, none zero."""
    return factor.degree <= 2 and all(coefficient > 0 for coefficient in factor.coefficients)
