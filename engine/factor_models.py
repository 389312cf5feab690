"""Factors that are no polynomials, as relative Taylor models v (1 + a t + b t^2 + eps) on cells of the imaginary
axis.
"""

from __future__ import annotations

from fractions import Fraction
from typing import NamedTuple, Protocol

import numpy as np

from encircle.engine.result import ComplexArray, FloatArray

RelativeModel = tuple[ComplexArray, ComplexArray, ComplexArray, FloatArray]


class FarFactor(NamedTuple):
    """A factor that is no polynomial on |s| >= R, for an array of R: |factor - lead s^order| <= spread |s|^order.

    A factor of which only a bound is known has lead 0. ``spread`` does not grow with R; inf where nothing is known.
    """

    lead: float
    order: Fraction
    spread: FloatArray


class FactorModel(Protocol):
    """What a factor of a product must answer; w, h (cells,) are centres and half widths in rad/s."""

    @property
    def measured(self) -> bool:
        """Whether the factor has a band: then ``band`` is asked for too."""

    def on_cells(self, w: FloatArray, h: FloatArray) -> RelativeModel:
        """v, a, b complex and eps >= 0 with factor = v (1 + a t + b t^2 + z), |z| <= eps, |t| <= 1; v is never 0."""

    def band(self, w: FloatArray, h: FloatArray) -> tuple[ComplexArray, FloatArray]:
        """Half the chord between the two measured lines round each cell, and the radius round the chord."""

    def at_points(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """Values and derivatives with respect to omega (per rad/s)."""

    def far(self, radii: FloatArray) -> FarFactor:
        """The factor on |s| >= R, Re s >= 0, for an array of R."""


def never_zero(v: ComplexArray, scale: FloatArray) -> ComplexArray:
    """Move values that vanish by a hair of their scale; relative radii must be formed with the value returned."""
    return np.where(np.abs(v) < 1e-60 * scale, 1e-60 * scale + 0j, v)
