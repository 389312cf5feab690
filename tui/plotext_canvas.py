"""The only module that knows plotext: dots in, characters of a canvas out.

plotext is imported on first use. Only whole dot positions inside the canvas reach it: its own line drawing takes time
and memory in proportion to how far a line leaves the window, and it stops at numbers that are not finite.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from encircle.tui.clipping import IntArray
from encircle.tui.dots import Canvas


@dataclass(frozen=True, slots=True)
class Layer:
    """Dots of one number (0...255, the layer's mark in the result), hashable: an integer array as bytes."""

    number: int
    dots: bytes

    @classmethod
    def of(cls, number: int, dots: IntArray) -> Layer:
        """From the dots (m, 2), each (from the left, from the bottom)."""
        return cls(number, np.ascontiguousarray(dots, dtype=np.intp).tobytes())

    def positions(self) -> IntArray:
        return np.frombuffer(self.dots, dtype=np.intp).reshape(-1, 2)


@dataclass(frozen=True, slots=True)
class Inked:
    """A character that plotext drew: its cell, from the left and from the bottom, and the layer that it belongs to."""

    column: int
    row: int
    character: str
    number: int


@lru_cache(maxsize=16)
def plot(canvas: Canvas, layers: tuple[Layer, ...]) -> tuple[Inked, ...]:
    """The characters that show the layers. No two layers may share a cell: plotext would keep the last one only."""
    figure = _figure(canvas)
    for layer in layers:
        x, y = layer.positions().T.tolist()
        figure.scatter(x, y, marker="braille", color=layer.number)
    figure.monitor.build_plot()
    matrix = figure.monitor.matrix
    return tuple(
        Inked(column, row, character, matrix.fullground[row][column])
        for row, characters in enumerate(matrix.marker)
        for column, character in enumerate(characters)
        if character != " "
    )


def _figure(canvas: Canvas) -> Any:
    """An independent figure of exactly this size, without frame, one unit for each dot.

    plotext's public functions share one figure, and its public size setter cuts the size down to the terminal's; both
    are avoided by its figure class, which has no public name.
    """
    from plotext._figure import _figure_class

    figure = _figure_class()
    figure._set_size(canvas.columns, canvas.rows)
    figure.monitor.set_size([canvas.columns, canvas.rows])
    figure.frame(False)
    figure.xticks([])
    figure.yticks([])
    figure.xlim(0, canvas.dots_across - 1)
    figure.ylim(0, canvas.dots_upward - 1)
    return figure
