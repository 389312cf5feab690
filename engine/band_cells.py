"""The band of L = B/A of a loop with measured blocks, cell by cell, and where it first meets -1.

On a cell A and B are enclosures that share the place t in the cell and each measured block's place in its stadium. With a
the middle of A and l = b/a, the numerator B - l A has its middle at 0, and

    L in l + (B - l A)/a + Disc(rho),  rho <= |B - l A| |1/A - 1/a|,  |1/A - 1/a| <= R_A/(|a| (|a| - R_A)),

which is exact where A is a constant. Where A is nearly 0 (poles of L on the axis) 1/L = A/B is enclosed the same way. Where
neither serves, |A + B| > 0 alone still bounds every first contact.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np

from encircle.engine.closing_order import Stage
from encircle.engine.counting import Counter, Gains, term_weights
from encircle.engine.result import ComplexArray, FloatArray
from encircle.engine.rounding import UNIT
from encircle.engine.stadium_contacts import Stadiums, distance, least_ratio, real_points, turns
from encircle.engine.term_models import Models

SAFE = 64.0 * UNIT  # relative, charged for the roundings of the closed forms


class Contact(IntEnum):
    """Rows of first contacts; each is the smaller, the sooner the band meets -1."""

    DISTANCE = 0  # |1 + L|
    INVERSE_T = 1  # |1 + 1/L|
    INCREASE = 2  # factor above 1 on L
    DECREASE = 3  # divisor above 1 of L
    LAG = 4  # rad, clockwise
    LEAD = 5  # rad


@dataclass(frozen=True, slots=True)
class CellSets:
    """Convex sets {c + p t + q t' + Disc(rho)} that hold L, or 1/L where ``inverted``, on each cell; arrays (cells,).

    ``proved`` is False where nothing but ``near_A``, ``near_B`` is known: lower bounds of |A + B|/|A| and |A + B|/|B|.
    """

    c: ComplexArray
    p: ComplexArray
    q: ComplexArray
    rho: FloatArray
    inverted: np.ndarray
    proved: np.ndarray
    near_A: FloatArray
    near_B: FloatArray

    @property
    def edges(self) -> Stadiums:
        """(4, cells) stadiums that cover the boundary: those round the sides of the parallelogram."""
        c = np.stack([self.c + self.p, self.c - self.p, self.c + self.q, self.c - self.q])
        q = np.stack([self.q, self.q, self.p, self.p])
        return Stadiums(c, q, np.broadcast_to(self.rho, c.shape))

    @property
    def size(self) -> FloatArray:
        """Half the largest extent of each set."""
        size: FloatArray = np.abs(self.p) + np.abs(self.q) + self.rho
        return size


class BandOfLoop:
    """The band of one loop for given factors at the cuts, ``factor`` more at its own."""

    def __init__(self, counter: Counter, stage: Stage, gains: Gains, factor: float = 1.0) -> None:
        determinant = counter.system.determinants[stage.part]
        self._models = counter.models((stage.part,))
        weights = term_weights(determinant, gains)
        closing = np.array([stage.loop in term.cuts for term in determinant.terms])
        self.weights = np.array([np.where(closing, 0.0, weights), factor * np.where(closing, weights, 0.0)])

    def on_cells(self, lower: FloatArray, upper: FloatArray) -> CellSets:
        """Sets that hold L on the cells [lower, upper] in rad/s, none of which straddles a measured line."""
        both = self._models.on_cells(lower, upper).combine(self.weights)
        with np.errstate(all="ignore"):
            near_A, near_B = _clearances(both)
            inverted = ~(_relative_reach(both, 0) <= _relative_reach(both, 1))
            denominator, numerator = _swapped(both, inverted)
            c, generators, rho = _quotient(numerator, denominator)
            c, p, q, rho = _two_longest(c, generators, rho)
        proved = np.isfinite(rho) & np.isfinite(c)
        return CellSets(c, p, q, rho * (1.0 + SAFE), inverted, proved, near_A, near_B)

    def radius(self, omega: FloatArray) -> FloatArray:
        """Half width of the band round its chords at frequencies (n,) in rad/s: |dL/dH| times the radius round each H."""
        both = self._models.on_cells(omega, omega).combine(self.weights)
        with np.errstate(all="ignore"):
            L = both.v[1] / both.v[0]
            width: FloatArray = (np.abs(both.u[:, 1] - L * both.u[:, 0]) / np.abs(both.v[0])).sum(axis=0)
        return width

    def at(self, omega: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """A and B on the chords at frequencies (n,), rad/s."""
        values, _ = self._models.at_points(omega)
        A, B = self.weights @ values
        return A, B


def _row(both: Models, i: int) -> Models:
    return Models(both.v[i], both.d[i], both.e[i], both.r[i], both.g[:, i], both.u[:, i])


def _size(model: Models) -> FloatArray:
    """An upper bound of the distance of a model's values from its middle."""
    bands = np.abs(model.g).sum(axis=0) + np.abs(model.u).sum(axis=0)
    size: FloatArray = (np.abs(model.d) + np.abs(model.e) + bands + model.r) * (1.0 + SAFE)
    return size


def _relative_reach(both: Models, i: int) -> FloatArray:
    """Reach of A (0) or B (1) from its middle, relative to it; below 1 it is proved not to vanish; inf for NaN."""
    model = _row(both, i)
    reach = _size(model) / np.abs(model.v)
    return np.where(np.isnan(reach), np.inf, reach)


def _swapped(both: Models, inverted: np.ndarray) -> tuple[Models, Models]:
    """Denominator and numerator of L, or of 1/L where ``inverted``."""
    A, B = _row(both, 0), _row(both, 1)

    def chosen(where_not: Models, where: Models) -> Models:
        parts = [np.where(inverted, getattr(where, name), getattr(where_not, name)) for name in "vdergu"]
        return Models(*parts)

    return chosen(A, B), chosen(B, A)


def _quotient(numerator: Models, denominator: Models) -> tuple[ComplexArray, ComplexArray, FloatArray]:
    """Centre, generators (1 + m, cells) and radius of numerator/denominator; radius inf where the latter may vanish."""
    a = denominator.v
    ratio = numerator.v / a
    d, e = numerator.d - ratio * denominator.d, numerator.e - ratio * denominator.e
    g, u = numerator.g - ratio * denominator.g, numerator.u - ratio * denominator.u
    size = np.abs(ratio)
    rounding = SAFE * (np.abs(numerator.v) + _size(numerator) + size * _size(denominator))
    r = numerator.r + size * denominator.r + rounding
    whole = np.abs(d) + np.abs(e) + np.abs(g).sum(axis=0) + np.abs(u).sum(axis=0) + r
    reach, modulus = _size(denominator), np.abs(a)
    bend = np.where(reach < modulus, reach / (modulus - reach), np.inf)
    radius = (0.5 * np.abs(e) + np.abs(u).sum(axis=0) + r + np.where(bend > 0.0, whole * bend, 0.0)) / modulus
    return ratio + 0.5 * e / a, np.concatenate([d[None], g]) / a, radius


def _two_longest(
    c: ComplexArray, generators: ComplexArray, rho: FloatArray
) -> tuple[ComplexArray, ComplexArray, ComplexArray, FloatArray]:
    """Keep the two longest generators as directions; the others widen the disc."""
    if len(generators) == 1:
        return c, np.zeros_like(c), generators[0], rho
    size = np.abs(generators)
    order = np.argsort(size, axis=0)
    longest = np.take_along_axis(generators, order[-2:], axis=0)
    rest = np.take_along_axis(size, order[:-2], axis=0).sum(axis=0)
    return c, longest[0], longest[1], rho + rest


def _clearances(both: Models) -> tuple[FloatArray, FloatArray]:
    """Lower bounds of |A + B|/|A| and |A + B|/|B|, 0 where A + B may vanish."""
    parts = [getattr(both, name).sum(axis=0) for name in "vder"]
    g, u = both.g.sum(axis=1), both.u.sum(axis=1)
    v, d, e, r = parts
    c, p, q, rho = _two_longest(v + 0.5 * e, np.concatenate([d[None], g]), 0.5 * np.abs(e) + np.abs(u).sum(axis=0) + r)
    sizes = np.array([np.abs(both.v[i]) + _size(_row(both, i)) for i in (0, 1)])
    empty = np.zeros(c.shape)
    total = CellSets(c, p, q, rho + SAFE * sizes.sum(axis=0), empty > 0, empty == 0, empty, empty)
    clear = np.where(_holds(total, 0.0), 0.0, np.maximum(distance(total.edges, 0.0).min(axis=0), 0.0))
    near = np.where(np.isfinite(clear) & np.isfinite(sizes), clear / sizes, 0.0)
    return near[0], near[1]


def _holds(sets: CellSets, point: complex) -> np.ndarray:
    """Whether a point lies inside the parallelogram of each cell."""
    z = point - sets.c
    area = (sets.p.conj() * sets.q).imag
    along_p, along_q = (z.conj() * sets.q).imag, (sets.p.conj() * z).imag
    inside: np.ndarray = (np.abs(along_p) <= np.abs(area)) & (np.abs(along_q) <= np.abs(area)) & (area != 0.0)
    return inside


def first_contacts(sets: CellSets) -> FloatArray:
    """(6, cells), rows as in ``Contact``: lower bounds of each first contact of -1 with the band; inf where it never comes."""
    with np.errstate(all="ignore"):
        found = _contacts_of_sets(sets)
        found[:, ~sets.proved] = 0.0
        return np.maximum(found, _contacts_by_clearance(sets.near_A, sets.near_B))


def _contacts_of_sets(sets: CellSets) -> FloatArray:
    """First contacts of the sets; where a set holds -1 they are the least values, 0 or 1."""
    edges = sets.edges
    near, ratio = distance(edges, -1.0).min(axis=0), least_ratio(edges).min(axis=0)
    points = real_points(edges).reshape(-1, len(sets.c))
    right = np.fmin.reduce(np.where((points > -1.0) & (points < 0.0), -1.0 / points, np.inf))
    left = np.fmin.reduce(np.where(points < -1.0, -points, np.inf))
    turned = turns(edges)
    lag, lead = turned.lag.min(axis=0), turned.lead.min(axis=0)
    plain = np.array([near, ratio, right, left, lag, lead])
    mirrored = np.array([ratio, near, left, right, lead, lag])
    found = np.where(sets.inverted, mirrored, plain)
    held = _holds(sets, -1.0) | ~(near > 0.0)
    least = np.array([0.0, 0.0, 1.0, 1.0, 0.0, 0.0])[:, None]
    return np.where(held, least, found)


def _contacts_by_clearance(near_A: FloatArray, near_B: FloatArray) -> FloatArray:
    """First contacts from |A + B|/|A| >= near_A and |A + B|/|B| >= near_B alone.

    |A + x B| >= |A + B| - |x - 1| |B| for a factor or a turn x; A/x + B likewise.
    """
    nearer = np.maximum(near_A, near_B)
    turn = np.where(nearer < 2.0, 2.0 * np.arcsin(0.5 * np.minimum(nearer, 2.0)), np.inf)
    increase = np.maximum(1.0 + near_B, np.where(near_A < 1.0, 1.0 / (1.0 - near_A), np.inf))
    decrease = np.maximum(1.0 + near_A, np.where(near_B < 1.0, 1.0 / (1.0 - near_B), np.inf))
    return np.array([near_A, near_B, increase, decrease, turn, turn])


def blocked_factors(sets: CellSets) -> FloatArray:
    """(2 sides, 2 ends, cells): factors g > 0 for which g L may reach -1, below and above 1; NaN where none.

    The window round 1 that the first contacts leave is never part of them.
    """
    contacts = first_contacts(sets)
    below, above = 1.0 / contacts[Contact.DECREASE], contacts[Contact.INCREASE]
    with np.errstate(all="ignore"):
        points = real_points(sets.edges).reshape(-1, len(sets.c))
        least, most = np.fmin.reduce(points), np.fmax.reduce(points)
        first = np.where(sets.inverted, np.maximum(-most, 0.0), -1.0 / least)
        last = np.where(sets.inverted, -least, np.where(most < 0.0, -1.0 / most, np.inf))
        meets = least < 0.0
    first = np.where(sets.proved, np.where(meets, first, np.nan), 0.0)
    last = np.where(sets.proved, np.where(meets, last, np.nan), np.inf)
    lower = np.where(first < below, [first, np.minimum(last, below)], np.nan)
    upper = np.where(last > above, [np.maximum(first, above), last], np.nan)
    return np.stack([lower, upper])


def counted_edges(counter: Counter, stage: Stage) -> FloatArray:
    """Edges of the cells on which the loop was counted, through every measured line and twice at each first line."""
    system = counter.system
    edges = np.unique(np.concatenate([[0.0], counter.cells(stage.part), system.lines]))
    return np.sort(np.concatenate([edges, system.first_lines]))

