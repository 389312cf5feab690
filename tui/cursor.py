"""The frequency cursor: where it stands on a curve, how it steps, and its readout."""

from __future__ import annotations

import math
from collections.abc import Iterable

import numpy as np

from encircle.engine.result import LoopCurve
from encircle.tui.marks import marked_frequencies
from encircle.tui.picture import Picture
from encircle.tui.readout import nearest_index, readout
from encircle.tui.sheet import MINUS, Ink, Piece, Row, Sheet
from encircle.tui.view import View
from encircle.tui.wording import as_declared, frequency, rounded

FINE_RATIO = 10 ** (1 / 60)
FAR_STEPS = 10


def cursor_index(picture: Picture, view: View) -> int:
    """The point of the curve nearest to the cursor; at first the tightest gain crossover or the point nearest -1."""
    wanted = view.cursor if view.cursor is not None else _first_place(picture)
    return nearest_index(picture.curve, wanted)


def _first_place(picture: Picture) -> float:
    margins = picture.loop.margins
    if margins is not None and margins.phase is not None and margins.phase.frequency:
        return margins.phase.frequency
    return float(picture.curve.frequency[int(np.argmax(np.abs(picture.curve.S)))])


def stepped(curve: LoopCurve, index: int, steps: int) -> float:
    """The frequency ``steps`` steps of 1/60 decade away, but at least one point of the curve."""
    wanted = float(curve.frequency[index]) * FINE_RATIO**steps
    target = nearest_index(curve, wanted)
    if target == index:
        target += 1 if steps > 0 else -1
    return float(curve.frequency[min(max(target, 0), len(curve.frequency) - 1)])


def leaves_band(band: tuple[float, float], start: float, end: float) -> bool:
    """Whether a step from ``start`` to ``end`` goes further out of the band that is shown."""
    return (end > band[1] and end > start) or (end < band[0] and end < start)


def next_mark(picture: Picture, index: int, direction: int) -> float | None:
    """The next marked frequency up or down that falls on another point of the curve; ``None`` at the end."""
    places = {nearest_index(picture.curve, mark): mark for mark in marked_frequencies(picture.loop)}
    beyond = [place for place in places if (place - index) * direction > 0]
    return places[min(beyond, key=lambda place: abs(place - index))] if beyond else None


def readout_row(picture: Picture, view: View, gain: float, width: int, *, ascii_only: bool = False) -> Row:
    """The values at the cursor, and at the right the gain of the chosen loop, which may be ahead of what is counted."""
    index = cursor_index(picture, view)
    point = readout(picture.curve, index)
    sensitivity, complementary = abs(picture.curve.S[index]), abs(picture.curve.T[index])
    values = (
        ("", frequency(point.frequency, picture.now.frequency_unit)),
        ("|L|", _decibels(point.magnitude_db)),
        ("arg L", f"{point.phase_degrees:.1f}°".replace("-", MINUS)),
        ("|1+L|", rounded(point.distance)),
        ("|S|", _decibels(_in_decibels(sensitivity))),
        ("|T|", _decibels(_in_decibels(complementary))),
    )
    sheet = Sheet(width, ascii_only=ascii_only)
    ending = _gain(gain, picture.filed.loops[view.loop].gain)
    room = width - sum(len(piece if isinstance(piece, str) else piece[0]) for piece in ending)
    sheet.split_row(_that_fit(values, room), ending)
    return sheet.rows[0]


def _that_fit(values: Iterable[tuple[str, str]], room: int) -> list[Piece]:
    """Names and values as far as whole ones fit, the most important first."""
    pieces: list[Piece] = [("● ", Ink.STRONG)]
    used = 2
    for name, value in values:
        used += len(name) + len(value) + (3 if name else 2)
        if used > room:
            break
        pieces += [(f"{name} " if name else "", Ink.QUIET), (value, Ink.STRONG), "  "]
    return pieces


def _gain(gain: float, filed: float) -> list[Piece]:
    if gain == filed:
        return [("gain ", Ink.QUIET), (as_declared(gain), Ink.STRONG), " "]
    return [(f"gain {rounded(gain)}, file {as_declared(filed)} ", Ink.TRIAL)]


def _decibels(db: float) -> str:
    if math.isinf(db):
        return "+∞ dB" if db > 0 else f"{MINUS}∞ dB"
    return f"{db:+.2f} dB".replace("-", MINUS)


def _in_decibels(magnitude: float) -> float:
    return 20 * math.log10(magnitude) if magnitude > 0 else -math.inf
