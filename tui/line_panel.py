"""A widget of ready rows: it keeps its strips and repaints only the rows that have changed."""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache

from rich.segment import Segment
from rich.style import Style
from textual.geometry import Region
from textual.strip import Strip
from textual.widget import Widget

from encircle.tui.roles import Role
from encircle.tui.sheet import Ink, Row


class LinePanel(Widget):
    """Shows rows that are as wide as itself; below the last row it is blank."""

    DEFAULT_CSS = "LinePanel { position: absolute; display: none; }"

    def __init__(self, styles: Mapping[Ink | Role, Style], id: str) -> None:
        super().__init__(id=id)
        self._placed: Region | None = None
        self._rows: tuple[Row, ...] = ()
        self._strip = lru_cache(maxsize=512)(lambda row: _strip(row, styles))

    @property
    def rows(self) -> tuple[Row, ...]:
        """What is shown."""
        return self._rows

    def place(self, place: Region | None) -> None:
        """Stand at a place, or leave the screen. Styles change only where they must: each change lays out anew."""
        if place == self._placed:
            return
        self._placed = place
        self.display = place is not None
        if place is not None:
            self.styles.offset = place.offset
            self.styles.width, self.styles.height = place.size

    def show(self, rows: tuple[Row, ...]) -> None:
        """Take new rows and repaint where they differ from the old ones."""
        before, self._rows = self._rows, rows
        height = max(len(before), len(rows))
        changed = [y for y in range(height) if _at(before, y) != _at(rows, y)]
        if changed:
            self.refresh(*(Region(0, y, max(self.size.width, 1), 1) for y in changed))

    def render_line(self, y: int) -> Strip:
        """Row ``y`` of the widget."""
        if y >= len(self._rows):
            return Strip.blank(self.size.width)
        return self._strip(self._rows[y])


def _at(rows: tuple[Row, ...], y: int) -> Row | None:
    return rows[y] if y < len(rows) else None


def _strip(row: Row, styles: Mapping[Ink | Role, Style]) -> Strip:
    return Strip([Segment(text, styles[ink]) for text, ink in row])
