"""Certified winding numbers about 0 along the Nyquist contour, of several functions at once.

Each function F is analytic in Re s >= 0, real on the real axis, and given by enclosures on cells of the upper
imaginary axis and by its behaviour on |s| >= R. Where no enclosure contains 0, the number of zeros in Re s > 0
follows exactly from the stand-ins at the ends of the cells (lemma of this module); where one does, the count is
undecided, with the place.

Lemma. Let convex sets C_i contain F(cell i), exclude 0 and contain the stand-ins a_i (start) and b_i (end); let each
true joint value lie in discs about b_i and a_(i+1) that exclude 0. Then 2 pi winding = sum Arg(b_i/a_i) + sum
Arg(a_(i+1)/b_i), all principal arguments: chord and arc lie in the convex C_i, and a joint turns by less than pi.
(Discretisation of the argument principle: X. Ying, I. N. Katz, Numer. Math. 53 (1988) 143-163.)
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from enum import Enum

import numpy as np

from encircle.engine.result import BoolArray, ComplexArray, FloatArray
from encircle.engine.rounding import TINY, UNIT
from encircle.engine.term_models import Models

FLOOR = 1e-12  # narrowest cell, relative to its frequency or to the lowest feature
FEWEST_EVALUATIONS = 200_000  # cells evaluated before a count gives up, besides those of the start grid
CHUNK = 8192  # cells evaluated together, which bounds the memory


class Cause(Enum):
    """Why a cell could not be shown to be free of zeros."""

    TOUCHES_ZERO = "touches zero"
    BUDGET = "budget"
    DATA = "data"


@dataclass(frozen=True, slots=True)
class OpenCell:
    """A stretch [lower, upper] in rad/s on which a function may vanish, and why that stays open."""

    lower: float
    upper: float
    cause: Cause


@dataclass(frozen=True, slots=True)
class Ending:
    """Behaviour on |s| >= radius: F = lead * s^order * (1 + disc of radius below 1)."""

    radius: float
    lead: float
    order: float


@dataclass(frozen=True, slots=True)
class Count:
    """Zeros of one function in Re s > 0, or ``None`` with the open cells."""

    zeros: int | None
    open_cells: tuple[OpenCell, ...]


@dataclass(frozen=True, slots=True)
class Counting:
    """Counts of all functions, the cells that served, and how many evaluations it took."""

    counts: tuple[Count, ...]
    edges: FloatArray
    evaluations: int


Enclose = Callable[[FloatArray, FloatArray], Models]


def count_zeros(
    enclose: Enclose, endings: list[Ending], edges: FloatArray, lines: Sequence[FloatArray], lowest: float
) -> Counting:
    """Zeros in Re s > 0 of each function that ``enclose`` gives on cells, shape (functions, cells).

    ``edges`` (n + 1,) ascending from 0 to at least every ending's radius, rad/s; an edge that occurs twice makes a
    cell of width 0 (the step from an asymptote to the first measured line). ``lines``: for each half chord of the
    models, the edges at which it is traversed to its end. ``lowest``: the lowest feature, rad/s, which sets the
    absolute floor at 0.
    """
    walk = _Walk(enclose, len(endings), lowest, len(lines) > 0)
    walk.run(edges[:-1], edges[1:])
    return walk.sum_up(endings, lines)


class _Walk:
    """The active-set loop: evaluate all open cells at once, accept those that exclude 0, split the others."""

    def __init__(self, enclose: Enclose, functions: int, lowest: float, data: bool) -> None:
        self.enclose = enclose
        self.failed: list[list[OpenCell]] = [[] for _ in range(functions)]
        self.alive = np.ones(functions, bool)
        self.lowest = lowest
        self.data = data
        self.accepted: list[tuple[FloatArray, FloatArray, ComplexArray, ComplexArray, ComplexArray]] = []
        self.still_open = np.empty(0), np.empty(0)
        self.evaluations = 0

    def run(self, lower: FloatArray, upper: FloatArray) -> None:
        budget = FEWEST_EVALUATIONS + 8 * len(lower)
        while len(lower) and self.alive.any():
            last = self.evaluations + len(lower) > budget
            parts = [slice(i, i + CHUNK) for i in range(0, len(lower), CHUNK)]
            pieces = [self._level(lower[part], upper[part], last) for part in parts]
            lower = np.concatenate([piece[0] for piece in pieces])
            upper = np.concatenate([piece[1] for piece in pieces])
        self.still_open = lower, upper

    def _level(self, lower: FloatArray, upper: FloatArray, last: bool) -> tuple[FloatArray, FloatArray]:
        """One evaluation; returns the cells of the next level, none if this is the ``last`` that the budget allows."""
        models = self.enclose(lower, upper)
        self.evaluations += len(lower)
        clear, crowding = exclude_zero(models)
        clear[~self.alive] = True
        done: BoolArray = np.all(clear, axis=0)
        stuck: BoolArray = ~done & (upper - lower <= FLOOR * np.maximum(upper, self.lowest))
        if self.data and (~done).any():
            self._give_up_on_data(lower, upper, clear, ~done)
            done = np.all(clear, axis=0)
            stuck &= ~done
        if stuck.any():
            self._fail(lower, upper, ~clear & stuck, Cause.TOUCHES_ZERO)
            done |= stuck
        if last:
            self._give_up_on_budget(lower, upper, ~clear & ~done)
            done[:] = True
        self._accept(models, lower, upper, done)
        return _split(lower[~done], upper[~done], crowding[:, ~done].max(axis=0, initial=0.0))

    def _give_up_on_data(self, lower: FloatArray, upper: FloatArray, clear: BoolArray, candidates: BoolArray) -> None:
        """Splitting cannot help where the data's own width hides 0 at the centre of the cell; marks such cells
        clear.
        """
        centre = 0.5 * (lower + upper)[candidates]
        at_centre, _ = exclude_zero(self.enclose(centre, centre))
        hopeless = np.zeros_like(clear)
        hopeless[:, candidates] = ~at_centre
        hopeless &= ~clear
        if hopeless.any():
            self._fail(lower, upper, hopeless, Cause.DATA)
            clear |= hopeless
            clear[~self.alive] = True

    def _give_up_on_budget(self, lower: FloatArray, upper: FloatArray, still_open: BoolArray) -> None:
        for function in np.flatnonzero(still_open.any(axis=1)):
            cells = still_open[function]
            hull = OpenCell(float(lower[cells].min()), float(upper[cells].max()), Cause.BUDGET)
            self.failed[function].append(hull)
            self.alive[function] = False

    def _fail(self, lower: FloatArray, upper: FloatArray, where: BoolArray, cause: Cause) -> None:
        for function, cell in zip(*np.nonzero(where), strict=True):
            self.failed[function].append(OpenCell(float(lower[cell]), float(upper[cell]), cause))
            if cause is not Cause.DATA:
                self.alive[function] = False

    def _accept(self, models: Models, lower: FloatArray, upper: FloatArray, done: BoolArray) -> None:
        v, d, e, g = models.v[:, done], models.d[:, done], models.e[:, done], models.g[..., done]
        self.accepted.append((lower[done], upper[done], v - d + e, v + d + e, g))

    def sum_up(self, endings: list[Ending], lines: Sequence[FloatArray]) -> Counting:
        lower, upper, start, stop, g = (
            np.concatenate([part[i] for part in self.accepted], axis=-1) for i in range(5)
        )
        edges = self._edges(lower, upper)
        if not self.alive.any():
            return Counting(tuple(Count(None, tuple(cells)) for cells in self.failed), edges, self.evaluations)
        order = np.lexsort((upper, lower))
        lower, upper, start, stop, g = lower[order], upper[order], start[:, order], stop[:, order], g[..., order]
        turns = _turns(upper, start, stop, g, lines)
        counts = []
        for function, ending in enumerate(endings):
            cells = tuple(self.failed[function])
            zeros = None if cells else _zeros(turns[function], start[function, 0], stop[function, -1], ending)
            counts.append(Count(zeros, cells))
        return Counting(tuple(counts), edges, self.evaluations)

    def _edges(self, lower: FloatArray, upper: FloatArray) -> FloatArray:
        """Edges of all cells, also of those still open when the last function failed: a later count begins there."""
        starts = np.sort(np.concatenate([lower, self.still_open[0]]))
        return np.append(starts, max(cells.max(initial=0.0) for cells in (upper, self.still_open[1])))


def exclude_zero(models: Models) -> tuple[BoolArray, FloatArray]:
    """Whether 0 lies outside each enclosure (False also where nothing is proved), and how far the radius crowds the
    value.

    Without half chords: distance of 0 to the segment {c + d t}, c = v + e/2, against |e|/2 + r, since e t^2 = e/2 (1
    + z), |z| <= 1.
    """
    with np.errstate(all="ignore"):
        c = models.v + 0.5 * models.e
        radius = 0.5 * np.abs(models.e) + models.radius
        if len(models.g):
            distance, radius = _distance_with_chord(c, models.d, models.g, radius)
        else:
            t = np.clip(-(c / np.where(models.d == 0.0, 1.0, models.d)).real, -1.0, 1.0)  # |d|^2 might underflow
            distance = np.abs(c + models.d * t)
        slack = 8.0 * UNIT * (np.abs(c) + np.abs(models.d) + np.abs(models.g).sum(axis=0))
        crowding = radius / np.abs(c)
        return radius * (1.0 + 8.0 * UNIT) + slack < distance, crowding


def _distance_with_chord(
    c: ComplexArray, d: ComplexArray, g: ComplexArray, radius: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Lower bound of the distance of 0 to the parallelogram c + d t + g u, g the longest half chord; the others widen
    the radius.

    For any unit direction n the bound Re(conj(n) c) - |Re(conj(n) d)| - |Re(conj(n) g)| holds; the normals of the
    sides and the directions to the corners contain the best one.
    """
    size = np.abs(g)
    longest = np.take_along_axis(g, size.argmax(axis=0)[None], axis=0)[0]
    radius = radius + size.sum(axis=0) - size.max(axis=0)
    corners = [c + i * d + k * longest for i in (-1.0, 1.0) for k in (-1.0, 1.0)]
    best = np.full(c.shape, -np.inf)
    for direction in [c, 1j * d, 1j * longest, *corners]:  # one too short has no accurate normal: passed over
        length = np.abs(direction)
        n = np.where(length > TINY, direction / length, np.nan)
        bound = np.abs((n.conj() * c).real) - np.abs((n.conj() * d).real) - np.abs((n.conj() * longest).real)
        best = np.fmax(best, bound)
    return best, radius


def _split(lower: FloatArray, upper: FloatArray, crowding: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Cut each cell in 2 to 8 equal parts: radii shrink with the square of the width, or faster."""
    if len(lower) == 0:
        return lower, upper
    wanted = np.ceil(1.3 * np.sqrt(np.where(np.isfinite(crowding), crowding, 64.0)))
    parts = np.clip(wanted, 2, 8).astype(int)
    cell = np.repeat(np.arange(len(lower)), parts)
    place = np.arange(len(cell)) - np.repeat(np.cumsum(parts) - parts, parts)
    width = (upper - lower)[cell] / parts[cell]
    starts = lower[cell] + place * width
    stops = np.append(starts[1:], 0.0)
    last = place == parts[cell] - 1
    stops[last] = upper
    return starts, stops


def _turns(
    upper: FloatArray, start: ComplexArray, stop: ComplexArray, g: ComplexArray, lines: Sequence[FloatArray]
) -> FloatArray:
    """The angle by which each function turns from the first start to the last stop.

    At a line of a measured block its half chord is walked to its end and from the start of the next one: both stand-ins
    lie in the convex set of their own cell and both stand for the value at the line. The chords of other blocks run on.
    """
    turn: FloatArray = np.angle(stop / start).sum(axis=1)
    if len(g) == 0:
        turn += np.angle(start[:, 1:] / stop[:, :-1]).sum(axis=1)
        return turn
    at_line = np.array([np.isin(upper[:-1], own) for own in lines])[:, None, :]
    full_stop = stop[:, :-1] + np.where(at_line, g[..., :-1], 0.0).sum(axis=0)
    full_start = start[:, 1:] - np.where(at_line, g[..., 1:], 0.0).sum(axis=0)
    turn += np.angle(full_stop / stop[:, :-1]).sum(axis=1)
    turn += np.angle(full_start / full_stop).sum(axis=1)
    turn += np.angle(start[:, 1:] / full_start).sum(axis=1)
    return turn


def _zeros(turn: float, first: complex, last: complex, ending: Ending) -> int:
    """Half the contour turns by -pi for each zero: from the real value at 0 along the axis, then back on the large
    arc.
    """
    turn += np.angle(first) if first.real > 0 else np.angle(-first)
    quarter = 1j**ending.order if ending.order == int(ending.order) else np.exp(0.5j * np.pi * ending.order)
    turn += np.angle(ending.lead * quarter / last) - 0.5 * np.pi * ending.order
    zeros = -turn / np.pi
    if not abs(zeros - round(zeros)) < 1e-3:
        raise ArithmeticError(f"the arguments sum to {zeros} half turns, which is no whole number")
    return round(zeros)
