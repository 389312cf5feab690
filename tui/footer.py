"""The last row: keys, as many as fit, or a message until the next key."""

from __future__ import annotations

from rich.cells import cell_len

from encircle.tui.actions import footer_entries
from encircle.tui.sheet import Ink, Piece, Row, Sheet


def footer_row(width: int, *, notice: str = "", ascii_only: bool = False) -> Row:
    """The most important keys first, as many as there is room for."""
    sheet = Sheet(width, ascii_only=ascii_only)
    if notice:
        sheet.row((f" {notice}", Ink.DOUBT))
        return sheet.rows[0]
    pieces: list[Piece] = []
    used = 0
    for keys, word in footer_entries():
        used += cell_len(sheet.clean(keys)) + cell_len(word) + 3
        if used > width:
            break
        pieces += [" ", (keys, Ink.KEY), (f" {word} ", Ink.QUIET)]
    sheet.row(*pieces)
    return sheet.rows[0]
