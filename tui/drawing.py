"""A plot as a frozen value, and its picture as rows of text whose stretches carry roles instead of colours."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from encircle.tui.cell_grid import CellGrid, Row
from encircle.tui.clipping import FloatArray, IntArray, Window
from encircle.tui.dots import DOTS_ACROSS, DOTS_UPWARD, Canvas, line_dots
from encircle.tui.glyphs import Glyph, plain_text
from encircle.tui.plotext_canvas import Layer, plot
from encircle.tui.roles import BY_PRIORITY, PRIORITY, Role
from encircle.tui.ticks import Tick

__all__ = ["Caption", "Curve", "Drawing", "Frame", "Mark", "Role", "Row", "Upright", "draw"]

# In a cell that two curves share, the dots of both are shown only if their roles stand in the same group; else those of
# the lower role are left out, so that what matters keeps a clear outline.
GROUPS = (
    {Role.GRID, Role.AXIS},
    {Role.UNIT_CIRCLE, Role.LIMIT, Role.FORBIDDEN},
    {Role.BAND},
    {Role.CURVE_BEFORE},
    {Role.MIRROR, Role.SENSITIVITY, Role.COMPLEMENTARY, Role.CURVE},
)
GROUP = np.array([next((number for number, group in enumerate(GROUPS) if role in group), -1) for role in BY_PRIORITY])
# The middle line of a braille cell at gaps of 1, 2 and 3 dots, for samples beside captions.
SAMPLES = {1: "⠒⠒", 2: "⠂⠂", 3: "⠂⠐", 4: "⠂ "}


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """A polyline through (x, y), each (n,); numbers that are not finite break it. Every ``gap``-th dot is drawn."""

    x: FloatArray
    y: FloatArray
    role: Role
    gap: int = 1


@dataclass(frozen=True, slots=True)
class Mark:
    """A sign at a point, with words beside it where there is room. Outside the window it is not shown."""

    x: float
    y: float
    glyph: Glyph
    role: Role
    words: str = ""


@dataclass(frozen=True, slots=True)
class Upright:
    """A vertical line through the empty cells at x."""

    x: float
    role: Role


@dataclass(frozen=True, slots=True)
class Caption:
    """What a curve is, with a sample of its dots; ``gap`` as in the curve, 0 for no sample."""

    text: str
    role: Role
    gap: int = 0


@dataclass(frozen=True, slots=True)
class Frame:
    """Where a drawing stands: its size, of which ``gutter`` columns at the left and ``foot`` rows below hold labels."""

    width: int
    height: int
    gutter: int
    foot: int

    @classmethod
    def fitted(cls, width: int, height: int, gutter: int, foot: int) -> Frame:
        """Without gutter or foot where they would take more than a third of a small plot."""
        if width < 1 or height < 1:
            raise ValueError(f"a plot of {width} by {height} characters has no cell to draw in")
        return cls(width, height, gutter if width >= 3 * gutter else 0, foot if height >= 3 * foot else 0)

    @property
    def canvas(self) -> Canvas:
        return Canvas(self.width - self.gutter, self.height - self.foot)


@dataclass(frozen=True, slots=True, eq=False)
class Drawing:
    """All that a plot shows; where things meet, roles decide what is seen (see ``Role``).

    ``x_unit`` stands at the right end of the foot. ``lattice``: a point wherever two ticks meet.
    """

    frame: Frame
    window: Window
    curves: tuple[Curve, ...]
    marks: tuple[Mark, ...] = ()
    uprights: tuple[Upright, ...] = ()
    x_ticks: tuple[Tick, ...] = ()
    y_ticks: tuple[Tick, ...] = ()
    captions: tuple[Caption, ...] = ()
    x_unit: str = ""
    lattice: bool = True


def draw(*drawings: Drawing, ascii_only: bool = False) -> tuple[Row, ...]:
    """The pictures from top to bottom: for each row its runs of text and role, together exactly as wide as the drawing.

    With ``ascii_only`` every character is below 0x80.
    """
    return tuple(row for drawing in drawings for row in _Picture(drawing, ascii_only).rows())


class _Picture:
    """One drawing on its way into the cells. Rows of the grid count from the top, those of the canvas from below."""

    def __init__(self, drawing: Drawing, ascii_only: bool) -> None:
        self.drawing = drawing
        self.frame = drawing.frame
        self.canvas = drawing.frame.canvas
        self.ascii_only = ascii_only
        self.grid = CellGrid(self.frame.width, self.frame.height)

    def rows(self) -> tuple[Row, ...]:
        self._put_curves()
        self._put_captions()
        self._put_lattice()
        self._put_uprights()
        self._put_marks()
        self._put_labels()
        return self.grid.rows(ascii_only=self.ascii_only)

    def _spelled(self, text: str) -> str:
        return plain_text(text) if self.ascii_only else text

    def _cell(self, x: float, y: float) -> tuple[int, int]:
        """Row and column of the grid at a point, which must lie in the window."""
        column, row = self.canvas.cell(x, y, self.drawing.window)
        return self.canvas.rows - 1 - row, self.frame.gutter + column

    def _put_curves(self) -> None:
        for inked in plot(self.canvas, _layers(self.drawing, self.canvas)):
            row, column = self.canvas.rows - 1 - inked.row, self.frame.gutter + inked.column
            self.grid.put(row, column, inked.character, BY_PRIORITY[inked.number])

    def _put_captions(self) -> None:
        """In the corner of the canvas that hides least, upper corners and the right side first."""
        runs = [(self._captioned(caption), caption.role) for caption in self.drawing.captions]
        length = sum(len(text) for text, _ in runs)
        if not runs or length > self.canvas.columns - 2:
            return
        left, right = self.frame.gutter + 1, self.frame.width - length - 1
        corners = [(row, column) for row in (0, self.canvas.rows - 1) for column in (right, left)]
        row, column = min(corners, key=lambda corner: self.grid.filled(corner[0], corner[1], length))
        for text, role in runs:
            self.grid.write(row, column, text, role)
            column += len(text)

    def _captioned(self, caption: Caption) -> str:
        sample = SAMPLES[caption.gap] + " " if caption.gap else ""
        return f"{sample}{self._spelled(caption.text)}  "

    def _put_lattice(self) -> None:
        """A point wherever two ticks meet and nothing else stands."""
        if not self.drawing.lattice:
            return
        columns = [self._cell(tick.position, self.drawing.window.bottom)[1] for tick in self.drawing.x_ticks]
        for tick in self.drawing.y_ticks:
            row, _ = self._cell(self.drawing.window.left, tick.position)
            for column in columns:
                self.grid.put_free(row, column, Glyph.LATTICE, Role.GRID)

    def _put_uprights(self) -> None:
        for upright in self.drawing.uprights:
            if self.drawing.window.contains(upright.x, self.drawing.window.bottom):
                _, column = self._cell(upright.x, self.drawing.window.bottom)
                for row in range(self.canvas.rows):
                    self.grid.put_free(row, column, Glyph.UPRIGHT, upright.role, over=(Role.GRID, Role.AXIS))

    def _put_marks(self) -> None:
        marks = sorted(self.drawing.marks, key=lambda mark: PRIORITY[mark.role])
        shown = [mark for mark in marks if self.drawing.window.contains(mark.x, mark.y)]
        for mark in shown:
            self.grid.put(*self._cell(mark.x, mark.y), mark.glyph, mark.role)
        for mark in shown:
            if mark.words:
                self._put_words(mark)

    def _put_words(self, mark: Mark) -> None:
        """Beside the mark, on the first side that is free, else nowhere."""
        text = self._spelled(mark.words)
        row, column = self._cell(mark.x, mark.y)
        beneath, before = column - len(text) // 2, column - len(text)
        places = [(row + 1, beneath), (row - 1, beneath), (row + 1, before), (row + 1, column + 1)]
        places += [(row - 1, before), (row - 1, column + 1), (row, before), (row, column + 1)]
        for place in places:
            if self._is_free(*place, len(text)):
                self.grid.write(*place, text, mark.role)
                return

    def _is_free(self, row: int, column: int, length: int) -> bool:
        inside = 0 <= row < self.canvas.rows and self.frame.gutter <= column <= self.frame.width - length
        return inside and self.grid.filled(row, column, length) == 0

    def _put_labels(self) -> None:
        """In the gutter, but for labels wider than it, and in the foot."""
        for tick in self.drawing.y_ticks:
            text = self._spelled(tick.label)
            if len(text) < self.frame.gutter:
                row, _ = self._cell(self.drawing.window.left, tick.position)
                self.grid.write(row, self.frame.gutter - 1 - len(text), text, Role.LABEL)
        if self.frame.foot:
            self._put_foot()

    def _put_foot(self) -> None:
        """The unit at the right end, then the labels that leave a blank on both sides."""
        row = self.frame.height - 1
        unit = self._spelled(self.drawing.x_unit)
        self.grid.write(row, self.frame.width - len(unit), unit, Role.LABEL)
        for tick in self.drawing.x_ticks:
            text = self._spelled(tick.label)
            _, column = self._cell(tick.position, self.drawing.window.bottom)
            start = min(max(column - (len(text) - 1) // 2, 0), self.frame.width - len(text))
            if text and self.grid.filled(row, start - 1, len(text) + 2) == 0:
                self.grid.write(row, start, text, Role.LABEL)


def _layers(drawing: Drawing, canvas: Canvas) -> tuple[Layer, ...]:
    """The dots of all curves, shared out so that each cell belongs to the highest role in it."""
    curves = drawing.curves
    if not curves:
        return ()
    lines = line_dots([(curve.x, curve.y) for curve in curves], drawing.window, canvas)
    lines = [line[:: curve.gap] for curve, line in zip(curves, lines, strict=True)]
    dots = np.concatenate(lines)
    rank = np.repeat([PRIORITY[curve.role] for curve in curves], [len(line) for line in lines])
    cell = dots[:, 0] // DOTS_ACROSS * canvas.rows + dots[:, 1] // DOTS_UPWARD
    owner = np.zeros(canvas.columns * canvas.rows, dtype=np.intp)
    np.maximum.at(owner, cell, rank)
    shown = GROUP[rank] == GROUP[owner[cell]]
    return _by_owner(dots[shown], owner[cell][shown])


def _by_owner(dots: IntArray, owner: IntArray) -> tuple[Layer, ...]:
    return tuple(Layer.of(int(number), dots[owner == number]) for number in np.unique(owner))
