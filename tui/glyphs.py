"""Characters of the plots: marks, and the plain ASCII that stands for each where Unicode is not to be had."""

from __future__ import annotations

from enum import StrEnum
from functools import cache

import numpy as np
from numpy.typing import NDArray

BRAILLE = 0x2800
# Bit of each dot of a braille character (Unicode chapter "Braille Patterns"), rows from the top, left and right.
BRAILLE_BITS = ((0x01, 0x08), (0x02, 0x10), (0x04, 0x20), (0x40, 0x80))


class Glyph(StrEnum):
    """Marks that stand on a plot; each is one character wide."""

    CRITICAL = "✚"
    CURSOR = "●"
    CROSSOVER = "○"
    MARGIN = "◇"
    RIGHT = "▸"
    UP = "▴"
    LEFT = "◂"
    DOWN = "▾"
    LATTICE = "·"
    UPRIGHT = "┊"


PLAIN_GLYPHS = {
    Glyph.CRITICAL: "X",
    Glyph.CURSOR: "@",
    Glyph.CROSSOVER: "o",
    Glyph.MARGIN: "*",
    Glyph.RIGHT: ">",
    Glyph.UP: "^",
    Glyph.LEFT: "<",
    Glyph.DOWN: "v",
    Glyph.LATTICE: "+",
    Glyph.UPRIGHT: "|",
}

PLAIN_WORDS = {"∞": "inf", "°": "deg", "−": "-"}

# The ink of plain characters on the 2 by 4 dots of a cell, rows from the top.
PLAIN_INK = {
    "'": ("##", "#.", "..", ".."),
    "`": ("#.", "##", "..", ".."),
    '"': ("##", "##", "..", ".."),
    "-": ("..", "##", "##", ".."),
    ".": ("..", "..", ".#", "##"),
    ",": ("..", "..", "##", "#."),
    "_": ("..", "..", "..", "##"),
    ":": ("##", "..", "..", "##"),
    "/": (".#", ".#", "#.", "#."),
    "\\": ("#.", "#.", ".#", ".#"),
    "(": (".#", "#.", "#.", ".#"),
    ")": ("#.", ".#", ".#", "#."),
    "|": ("##", "##", "##", "##"),
}


def plain_text(text: str) -> str:
    """A label in ASCII; it may grow longer. What has no spelling of its own becomes a question mark."""
    for word, spelling in PLAIN_WORDS.items():
        text = text.replace(word, spelling)
    return text.translate(plain_table()).encode("ascii", "replace").decode("ascii")


@cache
def plain_table() -> dict[int, str]:
    """For ``str.translate``: every mark and every braille character to one ASCII character."""
    table = {ord(glyph): plain for glyph, plain in PLAIN_GLYPHS.items()}
    likeness = _braille_dots() @ _ink_directions().T
    nearest = likeness.argmax(axis=1)
    characters = list(PLAIN_INK)
    table |= {BRAILLE + pattern: characters[nearest[pattern]] for pattern in range(1, 256)}
    table[BRAILLE] = " "
    return table


def _braille_dots() -> NDArray[np.float64]:
    """The dots (256, 8) of every braille pattern, row by row from the top."""
    bits = np.array(BRAILLE_BITS).ravel()
    return np.asarray((np.arange(256)[:, None] & bits) != 0, dtype=float)


def _ink_directions() -> NDArray[np.float64]:
    """The ink of each plain character as a unit vector: the largest projection is the best likeness."""
    ink = np.array([[dot == "#" for row in rows for dot in row] for rows in PLAIN_INK.values()], dtype=float)
    return np.asarray(ink / np.linalg.norm(ink, axis=1, keepdims=True))
