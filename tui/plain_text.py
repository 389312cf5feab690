"""Plain text for terminals and files: width, colour and characters as the reader's end can carry them."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Literal, TextIO

from encircle.engine.text import printable
from encircle.tui.wording import display_width, without_unicode

Style = Literal["title", "good", "bad", "doubt", "quiet"]

_USED_CHARACTERS = "→−×°µ±∞─"
_SGR: dict[Style, str] = {"title": "1", "good": "32", "bad": "1;31", "doubt": "33", "quiet": "2"}


@dataclass(frozen=True, slots=True)
class Layout:
    """What the reader's end can carry: columns, colour, characters beyond ASCII."""

    width: int = 80
    colour: bool = False
    unicode: bool = True

    def text(self, raw: str) -> str:
        """``raw`` with nothing in it that could steer the terminal or that it cannot show."""
        safe = printable(raw)
        return safe if self.unicode else without_unicode(safe)

    def paint(self, text: str, style: Style | None) -> str:
        """``text`` in colour, where colour is wanted; it must say the same without."""
        return f"\x1b[{_SGR[style]}m{text}\x1b[0m" if self.colour and style and text else text

    def wrapped(self, raw: str, indent: int = 0, hanging: int | None = None, mark: str = "") -> list[str]:
        """``raw`` broken into lines; ``hanging`` indents the second and later ones, ``mark`` stands in the margin."""
        first, rest = mark.ljust(indent), " " * (indent if hanging is None else hanging)
        lines = _broken(self.text(raw), max(self.width - len(first), 20), max(self.width - len(rest), 20))
        return [(rest if number else first) + line for number, line in enumerate(lines)]

    def holds(self, lines: Iterable[str]) -> bool:
        """Whether no line is too wide."""
        return all(display_width(line) <= self.width for line in lines)

    def rule(self) -> str:
        """A line across."""
        return self.paint(("─" if self.unicode else "-") * self.width, "quiet")


def layout_for(stream: TextIO | None) -> Layout:
    """The layout that suits where the text goes; NO_COLOR, TERM, LC_ALL and COLUMNS are heeded."""
    terminal = stream is not None and stream.isatty()
    dull = bool(os.environ.get("NO_COLOR")) or os.environ.get("TERM", "dumb") in ("", "dumb")
    return Layout(width=_columns(stream), colour=terminal and not dull, unicode=carries_unicode(stream))


def carries_unicode(stream: TextIO | None) -> bool:
    """Whether the stream's encoding holds the characters of the report, and LC_ALL does not ask for ASCII."""
    if stream is None or os.environ.get("LC_ALL") in ("C", "POSIX"):
        return False
    try:
        _USED_CHARACTERS.encode(stream.encoding or "ascii")
    except UnicodeEncodeError:
        return False
    return True


def _columns(stream: TextIO | None) -> int:
    """COLUMNS, or the terminal's width, or 100 for files and pipes; 40 to 120."""
    stated = os.environ.get("COLUMNS", "")
    columns = int(stated) if stated.isdecimal() and len(stated) < 6 else 0
    if not columns and stream is not None and stream.isatty():
        with contextlib.suppress(OSError, ValueError):
            columns = os.get_terminal_size(stream.fileno()).columns
    return min(max(columns or 100, 40), 120)


def _broken(text: str, first_width: int, width: int) -> list[str]:
    """Lines of whole words where they fit; longer words are cut."""
    lines: list[str] = [""]
    for word in text.split():
        room = first_width if len(lines) == 1 else width
        joined = f"{lines[-1]} {word}".lstrip()
        if display_width(joined) <= room:
            lines[-1] = joined
            continue
        lines.extend(_cut(word, width))
    return lines if lines[0] else lines[1:] or [""]


def _cut(word: str, width: int) -> list[str]:
    """A word in pieces of at most ``width`` cells."""
    pieces = [""]
    for char in word:
        if display_width(pieces[-1] + char) > width:
            pieces.append("")
        pieces[-1] += char
    return pieces


def padded(text: str, width: int, right: bool = False) -> str:
    """``text`` filled with blanks to ``width`` terminal cells."""
    blanks = " " * max(width - display_width(text), 0)
    return blanks + text if right else text + blanks


def aligned(rows: Sequence[Sequence[str]], right: frozenset[int] = frozenset(), gap: int = 2) -> list[str]:
    """Rows of cells as lines of columns; columns numbered in ``right`` are flush right."""
    widths = [max(display_width(cell) for cell in column) for column in zip(*rows, strict=True)]
    lines = ((" " * gap).join(padded(cell, widths[k], k in right) for k, cell in enumerate(cells)) for cells in rows)
    return [line.rstrip() for line in lines]
