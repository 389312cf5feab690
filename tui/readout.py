"""The loop at one frequency, for the readout beside the cursor."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from encircle.engine.result import LoopCurve
from encircle.tui.phase import phase_degrees


@dataclass(frozen=True, slots=True)
class Readout:
    """``frequency`` in the file's unit; ``L``; its magnitude (-inf where L is 0) and phase; ``distance`` = |1 + L|."""

    frequency: float
    L: complex
    magnitude_db: float
    phase_degrees: float
    distance: float


def readout(curve: LoopCurve, index: int) -> Readout:
    """The sample ``index`` of the curve; IndexError where it has none."""
    value = complex(curve.L[index])
    with np.errstate(divide="ignore"):
        magnitude_db = float(20 * np.log10(abs(value)))
    phase = float(phase_degrees(curve)[index])
    return Readout(float(curve.frequency[index]), value, magnitude_db, phase, abs(1 + value))


def nearest_index(curve: LoopCurve, frequency: float) -> int:
    """The sample nearest in logarithmic frequency; ``frequency`` above 0. ValueError for a curve without samples."""
    if curve.frequency.size == 0:
        raise ValueError("the curve has no samples")
    return int(np.abs(np.log(curve.frequency / frequency)).argmin())
