"""Crossings of the negative real axis by the chord curve of a loop with measured blocks.

The curve jumps where a block passes from its asymptote to its first line, and from its last line to the middle of the
disc above. Such a step is bridged by the straight way of A and of B, which lies in the same convex sets as the count.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from encircle.engine.band_cells import BandOfLoop
from encircle.engine.crossings import NegativeCrossing, negative_crossings
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import FloatArray
from encircle.engine.sampled_curve import SampledCurve

ON_AXIS = 1e-12  # a smaller part of L beside the real axis is rounding
AT_STEP = 1e-9  # relative distance in frequency to a step


def off_the_axis(curve: SampledCurve) -> SampledCurve:
    """The curve with stretches along the real axis moved to the side on which it leaves them."""
    resting = np.abs(curve.L.imag) <= ON_AXIS * np.abs(curve.L)
    if not resting.any() or resting.all():
        return curve
    index = np.arange(len(curve.L))
    following = np.minimum.accumulate(np.where(resting, len(index), index)[::-1])[::-1]
    last = int(index[~resting][-1])
    side = np.sign(curve.L.imag[np.minimum(following, last)])
    L = np.where(resting, curve.L.real + 0.1j * ON_AXIS * side * np.abs(curve.L), curve.L)
    return SampledCurve(curve.omega, L, curve.slope, curve.breaks)


def chord_crossings(loop: OpenLoop, band: BandOfLoop, curve: SampledCurve) -> list[NegativeCrossing]:
    """Crossings of the negative real axis by the chords and on the steps, ascending in frequency."""
    steps = _steps(loop)
    bridged, at_steps = _on_steps(band, steps)
    apart = [
        crossing
        for crossing in negative_crossings(loop, curve)
        if not np.any(np.abs(crossing.omega - bridged) <= AT_STEP * bridged)
    ]
    return sorted([*apart, *at_steps], key=lambda crossing: crossing.omega)


def _steps(loop: OpenLoop) -> FloatArray:
    """(n, 2) neighbouring frequencies between which the chord curve jumps: before and after."""
    pairs = set()
    for model in loop.system.measured_in(loop.stage.part):
        first, last = model.lines[0], model.lines[-1]
        pairs |= {(np.nextafter(first, 0.0), first), (last, np.nextafter(last, np.inf))}
    return np.array(sorted(pairs)).reshape(-1, 2)


def _on_steps(band: BandOfLoop, steps: FloatArray) -> tuple[FloatArray, list[NegativeCrossing]]:
    """Frequencies of steps across the real axis, and their crossings of its negative half.

    L(t) = B(t)/A(t) with A and B linear in t: Im(B conj A) is quadratic and changes its sign with Im L.
    """
    A, B = band.at(steps[:, 0])
    next_A, next_B = band.at(steps[:, 1])
    dA, dB = next_A - A, next_B - B
    free, linear, square = (B * A.conj()).imag, (dB * A.conj() + B * dA.conj()).imag, (dB * dA.conj()).imag
    bridged, found = [], []
    for i, omega in enumerate(steps[:, 0].tolist()):
        for t in _inner_roots(float(square[i]), float(linear[i]), float(free[i])):
            bridged.append(omega)
            value = float(((B[i] + t * dB[i]) / (A[i] + t * dA[i])).real)
            turns = 2 * int(np.sign(linear[i] + 2.0 * square[i] * t))
            if value < 0.0 and np.isfinite(value):
                found.append(NegativeCrossing(omega, value, turns))
    return np.array(bridged), found


def _inner_roots(square: float, linear: float, free: float) -> Sequence[float]:
    """Simple real roots strictly inside (0, 1); ends on the axis are no crossings of the step."""
    size = abs(square) + abs(linear) + abs(free)
    coefficients = [c if abs(c) > ON_AXIS * size else 0.0 for c in (square, linear, free)]
    roots = np.roots(coefficients) if size > 0.0 else np.empty(0)
    return [float(t.real) for t in roots if t.imag == 0.0 and AT_STEP < t.real < 1.0 - AT_STEP]
