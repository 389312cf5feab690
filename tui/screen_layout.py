"""Where each panel stands, from the size of the terminal and what was chosen. The title has the first row; the readout
and the footer have the last two; the panels share the rest."""

from __future__ import annotations

from dataclasses import dataclass

from encircle.tui.loop_ladder import ladder_height
from encircle.tui.view import Panel, View

TITLE_ROWS, BOTTOM_ROWS = 1, 2
ROOM_HEIGHT = 12


@dataclass(frozen=True, slots=True)
class Placement:
    """A panel and its place in character cells."""

    panel: Panel
    x: int
    y: int
    width: int
    height: int


def arrange(width: int, height: int, view: View, loops: int) -> tuple[Placement, ...]:
    """The panels that are seen, top left to bottom right."""
    rows = max(height - TITLE_ROWS - BOTTOM_ROWS, 1)
    if view.full or view.panel is Panel.HELP or width < 60 or rows < 15:
        return (Placement(view.panel, 0, TITLE_ROWS, width, rows),)
    if width >= 160 and rows >= 44:
        return _wide(width, rows, loops)
    if width >= 100 and rows >= 30:
        return _middle(width, rows, view, loops)
    return _narrow(width, rows, view, loops)


def _column(x: int, y: int, width: int, *panels: tuple[Panel, int]) -> tuple[Placement, ...]:
    placed = []
    for panel, rows in panels:
        placed.append(Placement(panel, x, y, width, rows))
        y += rows
    return tuple(placed)


def _narrow(width: int, rows: int, view: View, loops: int) -> tuple[Placement, ...]:
    """Ladder above one panel of text, beside one plot."""
    left = min(max(width // 2, 36), 48)
    ladder = ladder_height(loops, rows * 45 // 100)
    return (
        *_column(0, TITLE_ROWS, left, (Panel.LOOPS, ladder), (view.text, rows - ladder)),
        Placement(view.plot, left + 1, TITLE_ROWS, width - left - 1, rows),
    )


def _middle(width: int, rows: int, view: View, loops: int) -> tuple[Placement, ...]:
    """Ladder, room and turns beside both plots; the notes take the place of the turns."""
    left = min(width * 48 // 100, 64)
    ladder = ladder_height(loops, rows * 35 // 100)
    plane = rows * 58 // 100
    last = Panel.NOTES if view.text is Panel.NOTES else Panel.TURNS
    room = ROOM_HEIGHT
    return (
        *_column(0, TITLE_ROWS, left, (Panel.LOOPS, ladder), (Panel.ROOM, room), (last, rows - ladder - room)),
        *_column(left + 1, TITLE_ROWS, width - left - 1, (Panel.PLANE, plane), (Panel.RESPONSE, rows - plane)),
    )


def _wide(width: int, rows: int, loops: int) -> tuple[Placement, ...]:
    """Everything at once: text in the left column, plots at the right."""
    left = min(width * 40 // 100, 84)
    ladder = ladder_height(loops, rows * 35 // 100)
    turns = (rows - ladder - ROOM_HEIGHT) * 55 // 100
    plane = rows * 60 // 100
    texts = ((Panel.LOOPS, ladder), (Panel.ROOM, ROOM_HEIGHT), (Panel.TURNS, turns))
    return (
        *_column(0, TITLE_ROWS, left, *texts, (Panel.NOTES, rows - ladder - ROOM_HEIGHT - turns)),
        *_column(left + 1, TITLE_ROWS, width - left - 1, (Panel.PLANE, plane), (Panel.RESPONSE, rows - plane)),
    )
