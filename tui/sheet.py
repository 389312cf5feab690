"""Styled rows of text, the common form of every panel: what a stretch stands for, not which colour it has.

Every text enters through one door that makes it harmless: control characters, escape sequences and direction marks
from files come out as visible escapes, and nothing is ever read as markup.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from enum import StrEnum

from rich.cells import cell_len, set_cell_size

from encircle.engine.text import printable
from encircle.tui.roles import Role
from encircle.tui.wording import without_unicode


class Ink(StrEnum):
    """What a stretch of text stands for."""

    PLAIN = "plain"
    QUIET = "quiet"
    STRONG = "strong"
    HEADING = "heading"
    KEY = "key"
    CHOSEN = "chosen"
    GOOD = "good"
    BAD = "bad"
    ALARM = "alarm"
    DOUBT = "doubt"
    TRIAL = "trial"


Run = tuple[str, Ink]
Piece = Run | str
Row = tuple[tuple[str, Ink | Role], ...]

RIGHT, LEFT = "r", "l"
MINUS = "−"
_BLANKS = str.maketrans("\t\n\r", "   ")


class Sheet:
    """Collects the rows of one panel, ``width`` cells wide."""

    def __init__(self, width: int, *, ascii_only: bool = False) -> None:
        self.width = max(width, 1)
        self.ascii_only = ascii_only
        self._rows: list[Row] = []

    @property
    def rows(self) -> tuple[Row, ...]:
        """All rows so far; each fills the width exactly."""
        return tuple(self._rows)

    def clean(self, text: str) -> str:
        """``text`` with nothing in it that could steer the terminal or that it cannot show."""
        safe = text if text.isprintable() else printable(text.translate(_BLANKS))
        return _plain_ascii(safe) if self.ascii_only else safe

    def row(self, *pieces: Piece) -> None:
        """One row, cut with an ellipsis where it is too long."""
        self._rows.append(fitted(self.runs(pieces), self.width, self.ascii_only))

    def split_row(self, left: Sequence[Piece], right: Sequence[Piece]) -> None:
        """One row with ``right`` flush right; ``left`` is cut where both do not fit."""
        ending = self.runs(right)
        room = max(self.width - row_width(ending), 0)
        start = fitted(self.runs(left), room, self.ascii_only) if room else ()
        self._rows.append(fitted([*start, *ending], self.width, self.ascii_only))

    def heading(self, key: str, title: str, *, chosen: bool = False) -> None:
        """A panel's first row: its key, its title, and a rule to the right edge; an arrow marks the chosen panel."""
        mark = "►" if chosen else " "
        shown = f"{key} {title} "
        rest = max(self.width - cell_len(self.clean(shown)) - 1, 0)
        ink = Ink.CHOSEN if chosen else Ink.HEADING
        self.row((mark, Ink.CHOSEN), (f"{key} ", Ink.KEY), (f"{title} ", ink), ("─" * rest, Ink.QUIET))

    def paragraph(
        self, text: str, ink: Ink = Ink.PLAIN, *, indent: int = 1, hanging: int | None = None, mark: Run | None = None
    ) -> None:
        """Running text, broken between words; ``hanging`` indents the second and later rows, ``mark`` stands before.

        The mark's text is part of the first row and has an ink of its own.
        """
        later = indent if hanging is None else hanging
        first = self.clean(f"{mark[0]} " if mark else "")
        lines = _broken(first + self.clean(text), self.width - max(indent, later))
        for number, line in enumerate(lines):
            if number:
                self.row(" " * later, (line, ink))
            else:
                self.row(" " * indent, (line[: len(first)], mark[1] if mark else ink), (line[len(first) :], ink))

    def table(
        self,
        lines: Sequence[Sequence[Run]],
        align: str,
        *,
        gap: int = 2,
        optional: Sequence[int] = (),
        reverse: Iterable[int] = (),
    ) -> None:
        """Rows of cells in columns, ``align`` one letter each; ``optional`` columns leave, in order, where room lacks.

        Rows numbered in ``reverse`` take the ink of their first cell over their whole width.
        """
        cells = [self.runs(line) for line in lines]
        widths = [max((cell_len(line[k][0]) for line in cells), default=0) for k in range(len(align))]
        kept = _columns_that_fit(widths, gap, self.width - 1, optional)
        marked = frozenset(reverse)
        for number, line in enumerate(cells):
            runs = _aligned(line, widths, align, kept, gap)
            if number in marked:
                runs = [(text, line[0][1]) for text, _ in runs]
            self.row((" ", Ink.PLAIN), *runs)

    def blank(self) -> None:
        """An empty row."""
        self.row("")

    def runs(self, pieces: Iterable[Piece]) -> list[Run]:
        """Pieces made harmless."""
        return [self._run(piece) for piece in pieces]

    def _run(self, piece: Piece) -> Run:
        text, ink = (piece, Ink.PLAIN) if isinstance(piece, str) else piece
        return self.clean(text), ink


def padded(text: str, width: int) -> str:
    """``text`` in exactly ``width`` cells: filled with blanks or cut with an ellipsis."""
    return set_cell_size(text, width) if cell_len(text) <= width else f"{set_cell_size(text, width - 1)}…"


def row_width(row: Iterable[tuple[str, Ink | Role]]) -> int:
    """Terminal cells that a row takes."""
    return sum(cell_len(text) for text, _ in row)


def row_text(row: Row) -> str:
    """The row without its inks."""
    return "".join(text for text, _ in row)


def fitted(runs: Sequence[tuple[str, Ink | Role]], width: int, ascii_only: bool = False) -> Row:
    """Exactly ``width`` cells: filled with blanks, or cut with an ellipsis."""
    total = row_width(runs)
    if total <= width:
        return _merged([*runs, (" " * (width - total), Ink.PLAIN)])
    ellipsis = "~" if ascii_only else "…"
    kept: list[tuple[str, Ink | Role]] = []
    room = width - 1
    for text, ink in runs:
        if cell_len(text) > room:
            kept.append((set_cell_size(text, room) + ellipsis, ink))
            break
        kept.append((text, ink))
        room -= cell_len(text)
    return _merged(kept)


def window(rows: tuple[Row, ...], height: int, offset: int = 0, *, more_key: str = "") -> tuple[Row, ...]:
    """``height`` rows from ``offset`` on, the heading always on top; what is left out is said in the last row."""
    head, body = rows[:1], rows[1:]
    room = height - len(head)
    if len(body) <= room or room <= 0:
        return rows[:height]
    offset = min(max(offset, 0), len(body) - room + 1)
    left = len(body) - offset - (room - 1)
    if left <= 0:
        return (*head, *body[offset : offset + room])
    width = row_width(body[0])
    note = fitted([(f"  {left} more rows: {more_key}", Ink.QUIET)], width)
    return (*head, *body[offset : offset + room - 1], note)


def _merged(runs: Iterable[tuple[str, Ink | Role]]) -> Row:
    """Neighbouring runs of one ink joined, empty ones left out."""
    merged: list[tuple[str, Ink | Role]] = []
    for text, ink in runs:
        if not text:
            continue
        if merged and merged[-1][1] is ink:
            merged[-1] = (merged[-1][0] + text, ink)
        else:
            merged.append((text, ink))
    return tuple(merged)


def _columns_that_fit(widths: Sequence[int], gap: int, room: int, optional: Sequence[int]) -> list[int]:
    kept = [k for k, width in enumerate(widths) if width]
    for column in optional:
        if sum(widths[k] for k in kept) + gap * (len(kept) - 1) <= room:
            break
        if column in kept:
            kept.remove(column)
    return kept


def _aligned(line: Sequence[Run], widths: Sequence[int], align: str, kept: Sequence[int], gap: int) -> list[Run]:
    runs: list[Run] = []
    for place, column in enumerate(kept):
        text, ink = line[column]
        blanks = " " * (widths[column] - cell_len(text))
        cell = (blanks, Ink.PLAIN), (text, ink)
        runs.extend(cell if align[column] == RIGHT else reversed(cell))
        if place + 1 < len(kept):
            runs.append((" " * gap, Ink.PLAIN))
    return runs


def _broken(text: str, width: int) -> list[str]:
    """Lines of whole words where they fit; longer words are cut."""
    width = max(width, 8)
    lines = [""]
    for word in text.split():
        while cell_len(word) > width:
            head = set_cell_size(word, width).rstrip()
            lines.append(head)
            word = word[len(head) :]
        joined = f"{lines[-1]} {word}".strip()
        if cell_len(joined) <= width:
            lines[-1] = joined
        else:
            lines.append(word)
    return lines if lines[0] or len(lines) == 1 else lines[1:]


_ONE_CELL_ASCII = str.maketrans("►│┴┬─▲▼→←↑↓⇧●", ">|^v-^v><^v^@")


def _plain_ascii(text: str) -> str:
    return without_unicode(text.translate(_ONE_CELL_ASCII)).encode("ascii", "backslashreplace").decode("ascii")
