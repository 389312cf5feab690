"""Crossings of the real axis and of the unit circle by L, and the turns on the arcs where L is unbounded."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import Arc, BoolArray, ComplexArray, FloatArray
from encircle.engine.root_finding import bracketed_roots
from encircle.engine.sampled_curve import SampledCurve


@dataclass(frozen=True, slots=True)
class NegativeCrossing:
    """L meets the negative real axis at ``omega`` (rad/s, inf at the far end) with ``value`` < 0.

    ``turns``: clockwise turns about a point right of the value, both half contours together (0 if L only touches).
    """

    omega: float
    value: float
    turns: int


@dataclass(frozen=True, slots=True)
class UnboundedArc:
    """The turn of L on an arc where it is unbounded: ``arc`` on the upper half contour, ``turns`` of both halves.

    ``omega`` in rad/s, inf for the arc at infinity.
    """

    omega: float
    arc: Arc
    turns: int


Score = Callable[[ComplexArray, ComplexArray], FloatArray]


def roots_of(loop: OpenLoop, curve: SampledCurve, score: Score, near: BoolArray | None = None) -> FloatArray:
    """Frequencies where ``score(L, dL/d omega)`` changes sign between neighbours, refined, ascending.

    ``near`` (n,): only roots beside samples where it holds.
    """
    with np.errstate(all="ignore"):
        values = score(curve.L, curve.slope)
        change = curve.joined & (np.sign(values[1:]) != np.sign(values[:-1])) & (values[1:] != 0.0)
    if near is not None:
        change &= near[1:] | near[:-1]
    at = np.flatnonzero(change)

    def at_frequency(omega: FloatArray) -> FloatArray:
        with np.errstate(all="ignore"):  # L may underflow to 0 where it decays exponentially
            return score(*loop.at(omega))

    return bracketed_roots(at_frequency, curve.omega[at], curve.omega[at + 1])


def negative_crossings(loop: OpenLoop, curve: SampledCurve) -> list[NegativeCrossing]:
    """All crossings of the negative real axis at finite L, ascending in frequency, the ends 0 and infinity included."""
    omega = roots_of(loop, curve, lambda L, _: (L / np.abs(L)).imag)
    L, slope = loop.at(omega)
    found = [
        NegativeCrossing(float(w), float(value.real), 2 * int(np.sign(change.imag)))
        for w, value, change in zip(omega, L, slope, strict=True)
        if value.real < 0.0 and abs(value.imag) < 1e-6 * abs(value)
    ]
    at_zero, far = loop.zero.limit, loop.infinity.limit
    if at_zero is not None and at_zero < 0.0:
        found.insert(0, NegativeCrossing(0.0, at_zero, int(np.sign(curve.L[0].imag))))
    if far is not None and far < 0.0:
        found.append(NegativeCrossing(np.inf, far, -int(np.sign(curve.L[-1].imag))))
    return found


def unbounded_arcs(loop: OpenLoop, curve: SampledCurve) -> list[UnboundedArc]:
    """The arcs round axis poles and at infinity; the contour passes right of the poles, L turns by -order * pi there.

    The exact turn is the one nearest to that which joins the angles of L on both sides.
    """
    angle = np.angle(curve.L)
    arcs = []
    for pole in loop.poles:
        if pole.omega == 0.0:
            if loop.zero.order < 0:
                arcs.append(_symmetric_arc(0.0, float(angle[0]), -loop.zero.order))
            continue
        after = int(np.searchsorted(curve.omega, pole.omega))
        if 0 < after < len(angle):
            start = float(angle[after - 1])
            turn = _nearest(float(angle[after]) - start, -pole.order * np.pi)
            passes = _passes(start, start + turn)
            arcs.append(UnboundedArc(pole.omega, Arc(pole.omega, start, start + turn), 2 * passes))
    if loop.zero.order < 0 and not any(pole.omega == 0.0 for pole in loop.poles):
        arcs.insert(0, _symmetric_arc(0.0, float(angle[0]), -loop.zero.order))
    if loop.infinity.order > 0:
        arcs.append(_symmetric_arc(np.inf, float(angle[-1]), loop.infinity.order))
    return arcs


def _symmetric_arc(omega: float, angle: float, order: float) -> UnboundedArc:
    """The arc round 0 (it ends at ``angle``, having started at -angle) or at infinity (it starts there)."""
    start = -angle if omega == 0.0 else angle
    turn = _nearest(-2.0 * start, -order * np.pi)
    passes = _passes(start, start + turn)
    middle = start + 0.5 * turn
    upper = Arc(0.0, middle, start + turn) if omega == 0.0 else Arc(None, start, middle)
    return UnboundedArc(omega, upper, passes)


def _nearest(angle: float, expected: float) -> float:
    """``angle`` plus the multiple of 2 pi that brings it nearest to ``expected``."""
    return angle + 2.0 * np.pi * round((expected - angle) / (2.0 * np.pi))


def _passes(start: float, stop: float) -> int:
    """How often the angle passes an odd multiple of pi, clockwise positive."""
    return int(np.floor((start + np.pi) / (2.0 * np.pi)) - np.floor((stop + np.pi) / (2.0 * np.pi)))


def unit_crossings(loop: OpenLoop, curve: SampledCurve) -> FloatArray:
    """Gain crossovers: frequencies (rad/s) where |L| = 1, ascending."""
    return roots_of(loop, curve, lambda L, _: np.log(np.abs(L)))
