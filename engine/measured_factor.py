"""A measured block as a factor: Y(s) = H(s) s^m with m declared integrators, finite at s = 0.

Below the first line Y = k = Re(H (jw)^m) there; at the first line the step from k to the line is a gap of width 0;
between two neighbouring lines H stays within ``between_lines`` times their distance of the chord that joins them;
above the last line |H| <= |H_last| (w_last/w)^roll_off, or nothing is assumed.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from encircle.engine.coprime_factors import CoprimeFactors, Factor, MeasuredFactor, Product, S
from encircle.engine.declarations import MeasuredBlock
from encircle.engine.factor_models import FarFactor, RelativeModel, never_zero
from encircle.engine.polynomial import Polynomial
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import UNIT

LARGEST_STEP_ANGLE = np.pi / 4.0  # a first line further off the asymptote makes the loop undecided


def measured_factors(block: MeasuredBlock, scale: float) -> CoprimeFactors:
    """N = Y/(s + a)^m, M = (s/(s + a))^m for m > 0; N = Y s^|m|, M = 1 otherwise."""
    m = block.integrators
    stand_in = Polynomial((Fraction(scale), Fraction(1)))
    powers: dict[Factor, int] = {MeasuredFactor(block.name): 1}
    below: dict[Factor, int] = {}
    if m > 0:
        powers[stand_in] = -m
        below = {S: m, stand_in: -m}
    elif m < 0:
        powers[S] = -m
    numerator = (Product(Fraction(1), powers, Fraction(0)),)
    return CoprimeFactors(numerator, numerator, below)


class MeasuredModel:
    """Y = H s^m on cells; no cell may straddle a line."""

    measured = True

    def __init__(self, block: MeasuredBlock) -> None:
        self.block = block
        self.lines, self.H = block.response.omega, block.response.H
        self._m = block.integrators
        self.constant = float((self.H[0] * (1j * self.lines[0]) ** self._m).real)
        first = self.H[0] * (1j * self.lines[0]) ** self._m
        inner_centre, inner_chord = 0.5 * (self.H[:-1] + self.H[1:]), 0.5 * (self.H[1:] - self.H[:-1])
        # places: 0 below the first line, 1 the step at it, 2 ... n the gaps, n + 1 above the last line
        self._centre = np.concatenate([[self.constant, 0.5 * (self.constant + first)], inner_centre, [0.0]])
        self._chord = np.concatenate([[0.0, 0.5 * (first - self.constant)], inner_chord, [0.0]])
        self._scale = np.maximum(np.abs(self._centre) + np.abs(self._chord), 1e-200)
        self._scale[-1] = max(abs(self.H[-1]), 1e-200)

    def first_line_is_off(self) -> bool:
        """Whether the first line lies more than 45 degrees off the asymptote (or the asymptote vanishes)."""
        first = self.H[0] * (1j * self.lines[0]) ** self._m
        return self.constant == 0.0 or abs(np.angle(first / self.constant)) > LARGEST_STEP_ANGLE

    def place(self, w: FloatArray) -> np.ndarray:
        """0 below the first line, 1 at it, i + 1 between lines i - 1 and i, n + 1 above the last."""
        place = np.searchsorted(self.lines, w, side="left") + 1
        place[w < self.lines[0]] = 0
        return place

    def on_cells(self, w: FloatArray, h: FloatArray) -> RelativeModel:
        """Value at the middle of the chord; (1 + h t/w)^m is expanded, the band is asked for apart."""
        place = self.place(w)
        inside = place >= 2
        v = never_zero(self._centre[place], self._scale[place])
        m = self._m
        x = np.where(inside, h / w, 0.0)
        v = np.where(inside, v * (1j * w) ** m, v)
        a, b = (m * x).astype(complex), (0.5 * m * (m - 1) * x * x).astype(complex)
        majorant = (1.0 + x) ** m if m >= 0 else np.where(x < 1.0, 1.0 - x, 0.0) ** m
        tail: FloatArray = majorant - 1.0 - np.abs(a) - np.abs(b) + 8.0 * UNIT * (4 + abs(m)) * majorant
        return v, a, b, np.maximum(tail, 8.0 * UNIT)

    def band(self, w: FloatArray, h: FloatArray) -> tuple[ComplexArray, FloatArray]:
        """Half the chord, and ``between_lines`` times the whole chord as radius; a bound on all of Y above the last
        line.
        """
        place = self.place(w)
        power = np.where(place >= 2, np.abs(w) ** float(self._m), 1.0)
        chord = self._chord[place] * np.where(place >= 2, (1j * w) ** self._m, 1.0)
        radius = 2.0 * self.block.between_lines * np.abs(self._chord[place])
        moved = np.abs(never_zero(self._centre[place], self._scale[place]) - self._centre[place])
        above = place == len(self.lines) + 1
        radius = np.where(above, self._bound_above(w - h), radius) + moved
        return chord, radius * power * (1.0 + 16.0 * UNIT) + 8.0 * UNIT * self._scale[place] * power

    def _bound_above(self, w: FloatArray) -> FloatArray:
        if self.block.roll_off is None:
            return np.full(len(w), np.inf)
        last = float(self.lines[-1])
        bound: FloatArray = np.abs(self.H[-1]) * (last / np.maximum(w, last)) ** float(self.block.roll_off)
        return bound

    def at_points(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """Y on the chords; 0, the middle of the disc, above the last line."""
        place = self.place(omega)
        i = np.clip(place - 2, 0, len(self.lines) - 2)
        width = self.lines[i + 1] - self.lines[i]
        slope = (self.H[i + 1] - self.H[i]) / width
        H = self.H[i] + slope * (omega - self.lines[i])
        power = (1j * omega) ** self._m
        Y, change = H * power, slope * power + self._m * H * power / omega
        below = place == 0
        Y, change = np.where(below, self.constant, Y), np.where(below, 0.0, change)
        above = place == len(self.lines) + 1
        return np.where(above, 0.0, Y), np.where(above, 0.0, change)

    def far(self, radii: FloatArray) -> FarFactor:
        """|Y| <= |H_last| w_last^n |s|^(m - n), the declared asymptote taken over to the whole arc."""
        if self.block.roll_off is None:
            return FarFactor(0.0, Fraction(self._m), np.full(len(radii), np.inf))
        last = float(self.lines[-1])
        bound = float(np.abs(self.H[-1])) * last ** float(self.block.roll_off) * (1.0 + 16.0 * UNIT)
        spread = np.where(radii >= last, bound, np.inf)
        return FarFactor(0.0, Fraction(self._m - self.block.roll_off), spread)
