"""Unstable poles of the parts of a diagram for given factors at the cuts, each count proved or left open with its
place.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from encircle.engine.block_poles import FactorPoles, poles_of
from encircle.engine.closing_order import PartKey
from encircle.engine.encirclement import Ending, OpenCell, count_zeros
from encircle.engine.grids import distinct
from encircle.engine.high_frequency import FarCause, FarField, FarGrowth, FarProduct
from encircle.engine.loop_determinant import Determinant
from encircle.engine.loop_system import LoopSystem
from encircle.engine.memory import Memory
from encircle.engine.polynomial import Polynomial
from encircle.engine.result import FloatArray
from encircle.engine.term_models import TermModels

FIRST_EDGE = 0.3  # the first cell ends at this part of the lowest feature
GRID_RATIO = 1.6
MOST_COUNTS = 20_000  # counts kept
MOST_TOGETHER = 64  # settings of the gains counted at once, which bounds the memory

Gains = Sequence[Fraction]


@dataclass(frozen=True, slots=True)
class PartCount:
    """Poles of one part: strictly right of the axis (``None``: open), and those of blocks that are left on the axis.

    ``open_cells`` and ``far`` say where and why nothing is proved.
    """

    unstable: int | None
    hidden: FactorPoles
    open_cells: tuple[OpenCell, ...]
    far: FarCause | None


class Counter:
    """Counts with a memory: a part is counted once for each setting of the factors at its own closed cuts."""

    def __init__(self, system: LoopSystem) -> None:
        self.system = system
        self._known: Memory[tuple[PartKey, tuple[Fraction, ...]], PartCount] = Memory(MOST_COUNTS)
        self._far = _far_fields(system)
        self._models: dict[tuple[PartKey, ...], TermModels] = {}
        self._edges: dict[tuple[PartKey, ...], FloatArray] = {}
        self._last_edges: dict[PartKey, FloatArray] = {}

    def count(self, keys: Sequence[PartKey], gains: Gains) -> list[PartCount]:
        """Counts of several parts; those not known yet are done together on common cells."""
        missing = tuple(dict.fromkeys(key for key in keys if self._address(key, gains) not in self._known))
        if missing:
            self._count_missing(missing, gains)
        return [self._known[self._address(key, gains)] for key in keys]

    def count_at_factors(self, key: PartKey, loop: int, gains: Gains, factors: Sequence[float]) -> list[int | None]:
        """Poles right of the axis of one part for several factors on top of the gain of one loop, done together."""
        settings = [_with_factor(gains, loop, factor) for factor in factors]
        missing = [setting for setting in settings if self._address(key, setting) not in self._known]
        for i in range(0, len(missing), MOST_TOGETHER):
            self._count_settings(key, missing[i : i + MOST_TOGETHER])
        counts = [self._known[self._address(key, setting)].unstable for setting in settings]
        return [None if count is None or count < 0 else count for count in counts]  # fewer than none: a false statement

    def cells(self, key: PartKey) -> FloatArray:
        """Edges of the cells on which a part was last counted, rad/s."""
        return self._last_edges.get(key, np.empty(0))

    def ending(self, key: PartKey, gains: Gains) -> Ending | FarCause:
        """Behaviour of a part's determinant at infinity."""
        determinant = self.system.determinants[key]
        return self._far[key].ending([term.factor(gains) for term in determinant.far_terms])

    def leads(self, key: PartKey) -> list[tuple[Fraction, Fraction]]:
        """Lead (0 where only a bound is known) and order at infinity of each far term of a part."""
        return self._far[key].leads

    def models(self, keys: tuple[PartKey, ...]) -> TermModels:
        """The terms of some parts, compiled once."""
        if keys not in self._models:
            terms = [term for key in keys for term in self.system.determinants[key].terms]
            compiled = TermModels([(term.powers, term.delay) for term in terms], self.system.factor_models)
            self._models[keys] = compiled
        return self._models[keys]

    def _address(self, key: PartKey, gains: Gains) -> tuple[PartKey, tuple[Fraction, ...]]:
        return key, tuple(gains[loop] for loop in sorted(key[1]))

    def _count_missing(self, keys: tuple[PartKey, ...], gains: Gains) -> None:
        self._count_together([(key, gains) for key in keys])

    def _count_settings(self, key: PartKey, settings: Sequence[Gains]) -> None:
        self._count_together([(key, gains) for gains in settings])

    def _count_together(self, tasks: Sequence[tuple[PartKey, Gains]]) -> None:
        """Count several parts, or one part for several gains, on common cells."""
        proved: list[tuple[PartKey, Gains, Ending]] = []
        for key, gains in tasks:
            ending = self.ending(key, gains)
            if isinstance(ending, Ending):
                proved.append((key, gains, ending))
            else:
                self._store(key, gains, None, (), ending)
        if not proved:
            return
        keys = tuple(dict.fromkeys(key for key, _, _ in proved))
        models = self.models(keys)
        weights = self._weights(keys, [(key, gains) for key, gains, _ in proved])
        endings = [ending for _, _, ending in proved]
        counting = count_zeros(
            lambda lower, upper: models.on_cells(lower, upper).combine(weights),
            endings,
            self._start_edges(keys, max(ending.radius for ending in endings)),
            models.lines,
            self.system.lowest,
        )
        self._edges.setdefault(keys, counting.edges)
        self._last_edges.update(dict.fromkeys(keys, counting.edges))
        for (key, gains, _), count in zip(proved, counting.counts, strict=True):
            self._store(key, gains, count.zeros, count.open_cells, None)

    def _weights(self, keys: tuple[PartKey, ...], tasks: Sequence[tuple[PartKey, Gains]]) -> FloatArray:
        """(tasks, terms of all keys): each task's coefficients at the terms of its own part."""
        starts = np.cumsum([0, *(len(self.system.determinants[key].terms) for key in keys)])
        weights = np.zeros((len(tasks), int(starts[-1])))
        for row, (key, gains) in enumerate(tasks):
            place = keys.index(key)
            weights[row, starts[place] : starts[place + 1]] = term_weights(self.system.determinants[key], gains)
        return weights

    def _store(
        self, key: PartKey, gains: Gains, zeros: int | None, cells: tuple[OpenCell, ...], far: object
    ) -> None:
        hidden = poles_of(self.system.determinants[key].removed)
        stated = sum(self.system.declared.get(block, 0) for block in self._copies(key))
        unstable = None if zeros is None else zeros + hidden.right + stated
        cause = far if isinstance(far, FarCause) else None
        self._known[self._address(key, gains)] = PartCount(unstable, hidden, cells, cause)

    def _copies(self, key: PartKey) -> list[str]:
        blocks = self.system.diagram.blocks
        return [blocks[node] for node in key[0] if node < len(blocks)]

    def _start_edges(self, keys: tuple[PartKey, ...], radius: float) -> FloatArray:
        """The cells of an earlier count of the same parts, or a geometric grid; always through every measured line."""
        known = self._edges.get(keys)
        if known is not None:
            if known[-1] >= radius:
                return known
            return np.concatenate([known, _geometric(known[-1], radius)[1:]])
        start = FIRST_EDGE * self.system.lowest
        edges = np.concatenate([[0.0], _geometric(start, max(radius, 2.0 * start))])
        if len(self.system.lines):
            edges = distinct(np.concatenate([edges, self.system.lines]))
            edges = np.sort(np.concatenate([edges, self.system.first_lines]))  # twice: the step at the first line
        return edges


def _geometric(start: float, stop: float) -> FloatArray:
    steps = max(1, int(np.ceil(np.log(stop / start) / np.log(GRID_RATIO))))
    grid: FloatArray = start * (stop / start) ** (np.arange(steps + 1) / steps)
    grid[-1] = stop
    return grid


def _far_fields(system: LoopSystem) -> dict[PartKey, FarField]:
    """Every part's determinant on the arc at infinity."""
    products = {
        key: [FarProduct(term.powers, term.delay, term.coefficient) for term in determinant.far_terms]
        for key, determinant in system.determinants.items()
    }
    factors = (f for found in products.values() for product in found for f in product.powers)
    growth = FarGrowth((f for f in factors if isinstance(f, Polynomial)), 2.0 * system.highest)
    return {key: FarField(found, system.factor_models, growth) for key, found in products.items()}


def term_weights(determinant: Determinant, gains: Gains) -> FloatArray:
    """The coefficients of a determinant's terms for given factors at the cuts, scaled so that nothing overflows."""
    return np.array(scaled_floats([term.coefficient * term.factor(gains) for term in determinant.terms]))


def _with_factor(gains: Gains, loop: int, factor: float) -> tuple[Fraction, ...]:
    changed = list(gains)
    changed[loop] = gains[loop] * Fraction(factor)
    return tuple(changed)


def scaled_floats(exact: Sequence[Fraction]) -> list[float]:
    """Doubles proportional to exact numbers; divided by a power of two where they would leave the range of doubles."""
    try:
        plain = [float(value) for value in exact]
        if all(1e-250 < abs(value) < 1e250 for value in plain):
            return plain
    except OverflowError:
        pass
    largest = max(abs(value) for value in exact)
    shift = largest.numerator.bit_length() - largest.denominator.bit_length()
    scale = Fraction(2) ** -shift
    return [float(value * scale) for value in exact]


