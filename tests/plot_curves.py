"""Open-loop curves made with numpy, and the way back from rows of text to dots, for the tests of the plots."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence

import numpy as np

from encircle.engine.result import Arc, ComplexArray, FloatArray, LoopCurve
from encircle.tui.roles import Role

Row = Sequence[tuple[str, Role]]
ASPECT = 0.5


def curve_of(
    frequency: FloatArray,
    L: ComplexArray,
    *,
    arcs: Iterable[Arc] = (),
    pieces: tuple[tuple[int, int], ...] | None = None,
    radius: FloatArray | None = None,
    at_zero: complex | None = None,
    at_infinity: complex | None = None,
) -> LoopCurve:
    """A curve with S and T to match."""
    with np.errstate(all="ignore"):
        S, T = 1 / (1 + L), L / (1 + L)
    whole = ((0, len(L)),) if len(L) else ()
    band = np.zeros(len(L)) if radius is None else radius
    return LoopCurve(
        frequency, L, S, T, band, whole if pieces is None else pieces, tuple(arcs), np.empty(0), at_zero, at_infinity
    )


def sampled(
    loop: Callable[[ComplexArray], ComplexArray],
    lower: float = 1e-2,
    upper: float = 1e3,
    count: int = 600,
    **rest: object,
) -> LoopCurve:
    """L(j omega) on a logarithmic grid."""
    omega = np.geomspace(lower, upper, count)
    return curve_of(omega, loop(1j * omega), **rest)  # type: ignore[arg-type]


def integrating(lower: float = 1e-2) -> LoopCurve:
    """L = 2/(s (s + 1) (s/5 + 1))."""
    return sampled(lambda s: 2 / (s * (s + 1) * (s / 5 + 1)), lower, arcs=[Arc(0.0, 0.0, -np.pi / 2)], at_infinity=0j)


def first_order(gain: float = 2.0) -> LoopCurve:
    """L = gain/(s + 1): the half circle below the real axis from ``gain`` to 0, run through clockwise."""
    return sampled(lambda s: gain / (s + 1), at_zero=complex(gain), at_infinity=0j)


def resonant() -> LoopCurve:
    """L = 1/(s (s^2 + 1)): poles at 0 and +-j, where the curve runs through infinity."""
    omega = np.concatenate([np.geomspace(1e-2, 1 - 1e-4, 300), np.geomspace(1 + 1e-4, 1e2, 300)])
    arcs = [Arc(0.0, 0.0, -np.pi / 2), Arc(1.0, -np.pi / 2, -3 * np.pi / 2)]
    return curve_of(omega, 1 / (1j * omega * (1 - omega**2)), arcs=arcs, pieces=((0, 300), (300, 600)), at_infinity=0j)


def delayed() -> LoopCurve:
    """L = 1.2 exp(-0.3 s)/(s + 0.6)."""
    return sampled(lambda s: 1.2 * np.exp(-0.3 * s) / (s + 0.6), count=1500, at_zero=2 + 0j, at_infinity=0j)


def banded() -> LoopCurve:
    """A measured third-order loop with a band of 15 % round L."""
    omega = np.geomspace(1e-2, 1e2, 300)
    s = 1j * omega
    L = 2.5 / ((s + 1) * (s / 3 + 1) * (s / 9 + 1))
    return curve_of(omega, L, radius=0.15 * np.abs(L), at_zero=2.5 + 0j, at_infinity=0j)


def empty() -> LoopCurve:
    """A curve without samples."""
    return curve_of(np.empty(0), np.empty(0, dtype=complex))


CURVES = {
    "integrating": integrating,
    "first order": first_order,
    "resonant": resonant,
    "delayed": delayed,
    "banded": banded,
    "empty": empty,
}


def text(rows: Iterable[Row]) -> list[str]:
    """Rows without their roles."""
    return ["".join(piece for piece, _ in row) for row in rows]


def cells(rows: Sequence[Row], role: Role) -> list[tuple[int, int, str]]:
    """Row from the top, column and character of every cell of a role."""
    found = []
    for number, row in enumerate(rows):
        column = 0
        for piece, its_role in row:
            found += [(number, column + place, sign) for place, sign in enumerate(piece) if its_role == role]
            column += len(piece)
    return [cell for cell in found if cell[2] != " "]


def dots(rows: Sequence[Row], role: Role) -> FloatArray:
    """The braille dots (m, 2) of a role, from the left and from the bottom of all rows.

    Numbering of the dots: The Unicode Standard, chapter "Symbols", section "Braille Patterns".
    """
    offsets = [(0, 3), (0, 2), (0, 1), (1, 3), (1, 2), (1, 1), (0, 0), (1, 0)]
    found = []
    for row, column, sign in cells(rows, role):
        pattern = ord(sign) - 0x2800
        if 0 <= pattern < 256:
            base = (2 * column, 4 * (len(rows) - 1 - row))
            found += [(base[0] + dx, base[1] + dy) for bit, (dx, dy) in enumerate(offsets) if pattern >> bit & 1]
    return np.array(found, dtype=float).reshape(-1, 2)
