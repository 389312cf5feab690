"""The band of L = B/A of a loop with measured blocks, cell by cell, and where it first meets -1.

On a cell A and B are enclosures that share the place t in the cell and each measured block's place in its stadium. With
a the middle of A and l = b/a, the numerator B - l A has its middle at 0, and

    L in l + (B - l A)/a + Disc(rho),  rho <= |B - l A| |1/A - 1/a|,  |1/A - 1/a| <= R_A/(|a| min|A|),

which is exact where A is a constant. Where A is nearly 0 (poles of L on the axis) 1/L = A/B is enclosed the same way.
Where neither serves, |A + B| > 0 alone still bounds every first contact.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np

from encircle.engine.closing_order import Stage
from encircle.engine.counting import Counter, Gains, term_weights
from encircle.engine.result import BoolArray, ComplexArray, FloatArray
from encircle.engine.rounding import UNIT
from encircle.engine.stadium_contacts import RealPart, Stadiums, distance, least_ratio, real_part, turns
from encircle.engine.term_models import Models

SAFE = 64.0 * UNIT  # relative, charged for the roundings of the closed forms


class Contact(IntEnum):
    """Rows of first contacts; each is the smaller, the sooner the band meets -1."""

    INCREASE = 0  # factor above 1 on L
    DECREASE = 1  # divisor above 1 of L
    DISTANCE = 2  # |1 + L|
    INVERSE_T = 3  # |1 + 1/L|
    LAG = 4  # rad, clockwise
    LEAD = 5  # rad


@dataclass(frozen=True, slots=True)
class ConvexSets:
    """{c + p t + q t' + Disc(rho), |t|, |t'| <= 1}, arrays (cells,)."""

    c: ComplexArray
    p: ComplexArray
    q: ComplexArray
    rho: FloatArray

    @property
    def edges(self) -> Stadiums:
        """(4, cells) stadiums that cover the boundary: those round the sides of the parallelogram."""
        c = np.stack([self.c + self.p, self.c - self.p, self.c + self.q, self.c - self.q])
        q = np.stack([self.q, self.q, self.p, self.p])
        return Stadiums(c, q, np.broadcast_to(self.rho, c.shape))

    @property
    def size(self) -> FloatArray:
        """An upper bound of the distance of members from the centre."""
        size: FloatArray = np.abs(self.p) + np.abs(self.q) + self.rho
        return size

    def hold(self, point: complex) -> BoolArray:
        """Whether a point lies inside the parallelogram."""
        z = point - self.c
        area = (self.p.conj() * self.q).imag
        along_p, along_q = (z.conj() * self.q).imag, (self.p.conj() * z).imag
        inside: BoolArray = (np.abs(along_p) <= np.abs(area)) & (np.abs(along_q) <= np.abs(area)) & (area != 0.0)
        return inside

    def scaled(self, factor: FloatArray) -> ConvexSets:
        """The sets times real factors (cells,)."""
        return ConvexSets(self.c * factor, self.p * factor, self.q * factor, self.rho * np.abs(factor))


@dataclass(frozen=True, slots=True)
class CellSets:
    """Sets that hold L, or 1/L where ``inverted``, on each cell; arrays (cells,).

    ``proved`` is False where nothing but ``near_A``, ``near_B`` is known: lower bounds of |A + B|/|A| and |A + B|/|B|.
    """

    sets: ConvexSets
    inverted: BoolArray
    proved: BoolArray
    near_A: FloatArray
    near_B: FloatArray

    def where(self, mask: BoolArray) -> CellSets:
        """Those of the cells for which ``mask`` holds."""
        sets = ConvexSets(self.sets.c[mask], self.sets.p[mask], self.sets.q[mask], self.sets.rho[mask])
        return CellSets(sets, self.inverted[mask], self.proved[mask], self.near_A[mask], self.near_B[mask])

    def scaled(self, factor: float) -> CellSets:
        """Sets of factor times L; what |A + B| alone says of them is given up."""
        none = np.zeros(len(self.proved))
        sets = self.sets.scaled(np.where(self.inverted, 1.0 / factor, factor))
        return CellSets(sets, self.inverted, self.proved, none, none)


class BandOfLoop:
    """The band of one loop for given factors at the cuts."""

    def __init__(self, counter: Counter, stage: Stage, gains: Gains) -> None:
        determinant = counter.system.determinants[stage.part]
        self._models = counter.models((stage.part,))
        weights = term_weights(determinant, gains)
        closing = np.array([stage.loop in term.cuts for term in determinant.terms])
        self._weights = np.array([np.where(closing, 0.0, weights), np.where(closing, weights, 0.0)])

    def scaled(self, factor: float) -> BandOfLoop:
        """The band of factor times L."""
        band = object.__new__(BandOfLoop)
        band._models, band._weights = self._models, self._weights * np.array([[1.0], [factor]])
        return band

    def on_cells(self, lower: FloatArray, upper: FloatArray) -> CellSets:
        """Sets that hold L on the cells [lower, upper] in rad/s, none of which straddles a measured line."""
        both = self._models.on_cells(lower, upper).combine(self._weights)
        with np.errstate(all="ignore"):
            near_A, near_B = _clearances(both)
            inverted = ~(_bend(_row(both, 0)) <= _bend(_row(both, 1)))
            denominator, numerator = _swapped(both, inverted)
            sets = _quotient(numerator, denominator)
        proved = np.isfinite(sets.rho) & np.isfinite(sets.c)
        return CellSets(sets, inverted, proved, near_A, near_B)

    def radius(self, omega: FloatArray) -> FloatArray:
        """Half width of the band round its chords at frequencies (n,), rad/s: |dL/dH| times the radius round each H."""
        both = self._models.on_cells(omega, omega).combine(self._weights)
        with np.errstate(all="ignore"):
            L = both.v[1] / both.v[0]
            width: FloatArray = (np.abs(both.u[:, 1] - L * both.u[:, 0]) / np.abs(both.v[0])).sum(axis=0)
        return width

    def at(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """A and B on the chords at frequencies (n,), rad/s."""
        values, _ = self._models.at_points(omega)
        A, B = self._weights @ values
        return A, B


def _row(both: Models, i: int) -> Models:
    return Models(both.v[i], both.d[i], both.e[i], both.r[i], both.g[:, i], both.u[:, i])


def _size(model: Models) -> FloatArray:
    """An upper bound of the distance of a model's values from its middle."""
    bands = np.abs(model.g).sum(axis=0) + np.abs(model.u).sum(axis=0)
    size: FloatArray = (np.abs(model.d) + np.abs(model.e) + bands + model.r) * (1.0 + SAFE)
    return size


def _bend(model: Models) -> FloatArray:
    """An upper bound of |a/A - 1| for a model of A with the middle a; inf where A may vanish."""
    reach = _size(model)
    least = np.fmax(np.abs(model.v) - reach, _distance_from_zero(model))
    return np.where(least > 0.0, reach / least, np.inf)


def _distance_from_zero(model: Models) -> FloatArray:
    """A lower bound of the modulus; 0 where the model may vanish."""
    radius = 0.5 * np.abs(model.e) + np.abs(model.u).sum(axis=0) + model.r + SAFE * (np.abs(model.v) + _size(model))
    sets = _two_longest(model.v + 0.5 * model.e, np.concatenate([model.d[None], model.g]), radius)
    least = distance(sets.edges, 0.0).min(axis=0)
    return np.where(~sets.hold(0.0) & (least > 0.0), least, 0.0)


def _swapped(both: Models, inverted: BoolArray) -> tuple[Models, Models]:
    """Denominator and numerator of L, or of 1/L where ``inverted``."""
    A, B = _row(both, 0), _row(both, 1)

    def chosen(where_not: Models, where: Models) -> Models:
        parts = [np.where(inverted, getattr(where, name), getattr(where_not, name)) for name in "vdergu"]
        return Models(*parts)

    return chosen(A, B), chosen(B, A)


def _quotient(numerator: Models, denominator: Models) -> ConvexSets:
    """Sets of numerator/denominator; radius inf where the latter may vanish."""
    a = denominator.v
    ratio = numerator.v / a
    d, e = numerator.d - ratio * denominator.d, numerator.e - ratio * denominator.e
    g, u = numerator.g - ratio * denominator.g, numerator.u - ratio * denominator.u
    size = np.abs(ratio)
    rounding = SAFE * (np.abs(numerator.v) + _size(numerator) + size * _size(denominator))
    r = numerator.r + size * denominator.r + rounding
    whole = np.abs(d) + np.abs(e) + np.abs(g).sum(axis=0) + np.abs(u).sum(axis=0) + r
    bend = _bend(denominator)
    radius = (0.5 * np.abs(e) + np.abs(u).sum(axis=0) + r + np.where(bend > 0.0, whole * bend, 0.0)) / np.abs(a)
    return _two_longest(ratio + 0.5 * e / a, np.concatenate([d[None], g]) / a, radius * (1.0 + SAFE))


def _two_longest(c: ComplexArray, generators: ComplexArray, rho: FloatArray) -> ConvexSets:
    """Keep the two longest generators as directions; the others widen the disc."""
    if len(generators) == 2:
        return ConvexSets(c, generators[0], generators[1], rho)
    size = np.abs(generators)
    order = np.argsort(size, axis=0)
    longest = np.take_along_axis(generators, order[-2:], axis=0)
    rest = np.take_along_axis(size, order[:-2], axis=0).sum(axis=0)
    return ConvexSets(c, longest[0], longest[1], rho + rest)


def _clearances(both: Models) -> tuple[FloatArray, FloatArray]:
    """Lower bounds of |A + B|/|A| and |A + B|/|B|, 0 where A + B may vanish."""
    sizes = np.array([np.abs(both.v[i]) + _size(_row(both, i)) for i in (0, 1)])
    v, d, e, r = (getattr(both, name).sum(axis=0) for name in "vder")
    rounded = r + SAFE * sizes.sum(axis=0)
    clear = _distance_from_zero(Models(v, d, e, rounded, both.g.sum(axis=1), both.u.sum(axis=1)))
    near = np.where(np.isfinite(clear) & np.isfinite(sizes), clear / sizes, 0.0)
    return near[0], near[1]


def gain_contacts(cells: CellSets) -> FloatArray:
    """(2, cells): the rows INCREASE and DECREASE of ``first_contacts`` alone."""
    with np.errstate(all="ignore"):
        edges = cells.sets.edges
        held = cells.sets.hold(-1.0) | ~(distance(edges, -1.0).min(axis=0) > 0.0) | ~cells.proved
        return np.maximum(np.where(held, 1.0, _gains_of_edges(cells, edges)), _by_clearance(cells)[:2])


def first_contacts(cells: CellSets) -> FloatArray:
    """(6, cells), rows as in ``Contact``: lower bounds of first contacts of -1 with the band; inf where none comes."""
    with np.errstate(all="ignore"):
        edges = cells.sets.edges
        near = distance(edges, -1.0).min(axis=0)
        held = cells.sets.hold(-1.0) | ~(near > 0.0) | ~cells.proved
        ratio = np.zeros(len(held))
        for alike in (cells.inverted & ~held, ~cells.inverted & ~held):
            ratio[alike] = least_ratio(edges.columns(alike)).min(axis=0)
        lag, lead = (turn.min(axis=0) for turn in turns(edges))
        plain, mirrored = np.array([near, ratio, lag, lead]), np.array([ratio, near, lead, lag])
        others = np.where(cells.inverted, mirrored, plain)
        found = np.vstack([_gains_of_edges(cells, edges), others])
        least = np.array([1.0, 1.0, 0.0, 0.0, 0.0, 0.0])[:, None]
        return np.maximum(np.where(held, least, found), _by_clearance(cells))


def _gains_of_edges(cells: CellSets, edges: Stadiums) -> FloatArray:
    """Factor and divisor above 1 at which sets that do not hold -1 first meet it."""
    part = real_part(edges)
    right = np.where(part.least > -1.0, np.where(part.least < 0.0, -1.0 / part.least, np.inf), np.inf).min(axis=0)
    left = np.where(part.most < -1.0, -part.most, np.inf).min(axis=0)
    return np.where(cells.inverted, [left, right], [right, left])


def _by_clearance(cells: CellSets) -> FloatArray:
    """First contacts from |A + B|/|A| >= near_A and |A + B|/|B| >= near_B alone.

    |A + x B| >= |A + B| - |x - 1| |B| for a factor or a turn x; A/x + B likewise.
    """
    near_A, near_B = cells.near_A, cells.near_B
    nearer = np.maximum(near_A, near_B)
    turn = np.where(nearer < 2.0, 2.0 * np.arcsin(0.5 * np.minimum(nearer, 2.0)), np.inf)
    increase = np.maximum(1.0 + near_B, np.where(near_A < 1.0, 1.0 / (1.0 - near_A), np.inf))
    decrease = np.maximum(1.0 + near_A, np.where(near_B < 1.0, 1.0 / (1.0 - near_B), np.inf))
    return np.array([increase, decrease, near_A, near_B, turn, turn])


def blocked_factors(cells: CellSets) -> FloatArray:
    """(2 sides, 2 ends, cells): factors g > 0 for which g L may reach -1, below and above 1; NaN where none.

    The window round 1 that the first contacts leave is never part of them.
    """
    contacts = gain_contacts(cells)
    below, above = 1.0 / contacts[Contact.DECREASE], contacts[Contact.INCREASE]
    parts = real_part(cells.sets.edges)
    part = RealPart(np.fmin.reduce(parts.least), np.fmax.reduce(parts.most))
    with np.errstate(all="ignore"):
        first = np.where(cells.inverted, np.maximum(-part.most, 0.0), -1.0 / part.least)
        last = np.where(cells.inverted, -part.least, np.where(part.most < 0.0, -1.0 / part.most, np.inf))
        meets = part.least < 0.0
    first = np.where(cells.proved, np.where(meets, first, np.nan), 0.0)
    last = np.where(cells.proved, np.where(meets, last, np.nan), np.inf)
    lower = np.where(first < below, [first, np.minimum(last, below)], np.nan)
    upper = np.where(last > above, [np.maximum(first, above), last], np.nan)
    return np.stack([lower, upper])
