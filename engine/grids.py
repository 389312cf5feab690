"""Ascending grids of frequencies."""

from __future__ import annotations

import numpy as np

from encircle.engine.result import FloatArray


def distinct(values: FloatArray) -> FloatArray:
    """The values in ascending order, each once (numpy's own function for this loads its masked arrays)."""
    ordered: FloatArray = np.sort(values)
    return ordered[np.append(True, ordered[1:] != ordered[:-1])] if len(ordered) else ordered
