"""The curve of a loop as users see it: arrays in the file's frequency unit, pieces, arcs and limits at the ends."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from encircle.engine.crossings import unbounded_arcs
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import FloatArray, LoopCurve
from encircle.engine.sampled_curve import SampledCurve


def loop_curve(loop: OpenLoop, curve: SampledCurve, radius: FloatArray, lines: FloatArray, unit: float) -> LoopCurve:
    """``radius`` (n,) of the band at the samples; ``lines`` in rad/s; ``unit``: the file's unit in rad/s."""
    with np.errstate(all="ignore"):
        F = 1.0 + curve.L
        S = np.where(F == 0.0, np.inf, 1.0 / F)
    arcs = tuple(
        replace(found.arc, frequency=None if found.arc.frequency is None else found.arc.frequency / unit)
        for found in unbounded_arcs(loop, curve)
    )
    stops = [*(np.flatnonzero(~curve.joined) + 1).tolist(), len(curve.omega)]
    pieces = tuple(zip([0, *stops[:-1]], stops, strict=True))
    return LoopCurve(
        frequency=curve.omega / unit,
        L=curve.L,
        S=S,
        T=curve.L * S,
        radius=radius,
        pieces=pieces,
        arcs=arcs,
        lines=lines / unit,
        at_zero=_limit(loop.zero.limit),
        at_infinity=_limit(loop.infinity.limit),
    )


def _limit(value: float | None) -> complex | None:
    return None if value is None else complex(value)
