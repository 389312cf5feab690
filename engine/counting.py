"""Unstable poles of the parts of a diagram for given factors at the cuts, each count proved or left open with its place."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from encircle.engine.block_poles import FactorPoles, poles_of
from encircle.engine.closing_order import PartKey
from encircle.engine.encirclement import Ending, OpenCell, count_zeros
from encircle.engine.high_frequency import FarCause, FarField, FarProduct
from encircle.engine.loop_determinant import Determinant
from encircle.engine.loop_system import LoopSystem
from encircle.engine.result import FloatArray
from encircle.engine.term_models import TermModels

FIRST_EDGE = 0.3  # the first cell ends at this part of the lowest feature
GRID_RATIO = 1.6

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
        self._known: dict[tuple[PartKey, tuple[Fraction, ...]], PartCount] = {}
        self._far = {key: _far_field(system, determinant) for key, determinant in system.determinants.items()}
        self._models: dict[tuple[PartKey, ...], TermModels] = {}
        self._edges: dict[tuple[PartKey, ...], FloatArray] = {}

    def count(self, keys: Sequence[PartKey], gains: Gains) -> list[PartCount]:
        """Counts of several parts; those not known yet are done together on common cells."""
        missing = tuple(dict.fromkeys(key for key in keys if self._address(key, gains) not in self._known))
        if missing:
            self._count_missing(missing, gains)
        return [self._known[self._address(key, gains)] for key in keys]

    def well_posed(self, key: PartKey, gains: Gains) -> bool:
        """Whether the determinant keeps its leading power at infinity (no algebraic loop without a solution)."""
        return self.ending(key, gains) is not FarCause.ILL_POSED

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
        endings = {key: self.ending(key, gains) for key in keys}
        proved = tuple(key for key in keys if isinstance(endings[key], Ending))
        for key in keys:
            if key not in proved:
                self._store(key, gains, None, (), endings[key])
        if not proved:
            return
        models = self.models(proved)
        weights = weight_matrix([self.system.determinants[key] for key in proved], gains)
        found = [ending for ending in endings.values() if isinstance(ending, Ending)]
        counting = count_zeros(
            lambda lower, upper: models.on_cells(lower, upper).combine(weights),
            found,
            self._start_edges(proved, max(ending.radius for ending in found)),
            self.system.lines,
            self.system.lowest,
        )
        self._edges.setdefault(proved, counting.edges)
        for key, count in zip(proved, counting.counts, strict=True):
            self._store(key, gains, count.zeros, count.open_cells, None)

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
            edges = np.unique(np.concatenate([edges, self.system.lines]))
            edges = np.sort(np.concatenate([edges, self.system.first_lines]))  # twice: the step at the first line
        return edges


def _geometric(start: float, stop: float) -> FloatArray:
    steps = max(1, int(np.ceil(np.log(stop / start) / np.log(GRID_RATIO))))
    grid: FloatArray = start * (stop / start) ** (np.arange(steps + 1) / steps)
    grid[-1] = stop
    return grid


def _far_field(system: LoopSystem, determinant: Determinant) -> FarField:
    products = [FarProduct(term.powers, term.delay, term.coefficient) for term in determinant.far_terms]
    return FarField(products, system.factor_models, 2.0 * system.highest)


def weight_matrix(determinants: Sequence[Determinant], gains: Gains) -> FloatArray:
    """(determinants, terms): each determinant's coefficients at its own terms, scaled so that nothing overflows."""
    total = sum(len(determinant.terms) for determinant in determinants)
    weights = np.zeros((len(determinants), total))
    start = 0
    for row, determinant in enumerate(determinants):
        exact = [term.coefficient * term.factor(gains) for term in determinant.terms]
        weights[row, start : start + len(exact)] = scaled_floats(exact)
        start += len(exact)
    return weights


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


