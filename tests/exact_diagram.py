"""Exact pole counts of a declared diagram without dead time: the oracle of the random diagrams and cascades.

Each use of a block is a copy with output z = (n/m) * input. Eliminating the signals, which are sums with exact factors,
leaves input = K z; the poles of a stage are the roots of det(diag(m) - diag(n) K). Works from the same declarations as
the engine, shares no code with it, and uses exact rational arithmetic throughout.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from exact_roots import RootCount, count_roots, descending, determinant, polynomial
from flint import fmpq_poly

from encircle.engine.declarations import (
    Block,
    CoefficientBlock,
    Declarations,
    RootBlock,
    StateSpaceBlock,
    Term,
)

Sum = dict[int, Fraction]


def roots_product(roots: tuple[tuple[Fraction, Fraction], ...]) -> fmpq_poly:
    product = polynomial([1])
    for re, im in roots:
        product *= descending([1, -re]) if im == 0 else descending([1, -2 * re, re * re + im * im])
    return product


def lowest_terms(n: fmpq_poly, m: fmpq_poly) -> tuple[fmpq_poly, fmpq_poly]:
    common = n.gcd(m)
    return n // common, m // common


def fraction_of(block: Block) -> tuple[fmpq_poly, fmpq_poly]:
    """Numerator and denominator in lowest terms; a state space keeps every eigenvalue, nothing is cancelled there."""
    if isinstance(block, CoefficientBlock):
        return lowest_terms(descending(block.numerator), descending(block.denominator))
    if isinstance(block, RootBlock):
        return lowest_terms(roots_product(block.zeros) * polynomial([block.leading_gain]), roots_product(block.poles))
    assert isinstance(block, StateSpaceBlock)
    size = len(block.A)
    sI_A = [[polynomial([-block.A[i][j], int(i == j)]) for j in range(size)] for i in range(size)]
    bordered = [[*row, polynomial([b])] for row, b in zip(sI_A, block.B, strict=True)]
    bordered.append([*(polynomial([-c]) for c in block.C), polynomial([block.D])])
    return determinant(bordered), determinant(sI_A)


@dataclass(frozen=True, slots=True)
class LoopCounts:
    """Exact counts of one loop's part: poles with its cut open and closed; which copies belong to it."""

    before: RootCount
    after: RootCount
    copies: frozenset[int]


class ExactDiagram:
    """Copies and signals of a declared diagram with the factors at the cuts as they stand in the file."""

    def __init__(self, declarations: Declarations, gains: dict[str, float] | None = None) -> None:
        self.declarations = declarations
        self.gains = {loop.cut: Fraction(loop.gain) for loop in declarations.loops}
        self.gains |= {cut: Fraction(gain) for cut, gain in (gains or {}).items()}
        self.owners: list[str] = []
        self.sources: list[tuple[str, object]] = []  # of each copy: ("copy", index) or ("source", term source)
        self.sums: dict[str, list[tuple[Fraction, str, object]]] = {}
        for name, terms in declarations.signals.items():
            self.sums[name] = [self._compiled(term) for term in terms]
        self.fractions = [fraction_of(declarations.blocks[owner]) for owner in self.owners]

    def _compiled(self, term: Term) -> tuple[Fraction, str, object]:
        """The term as factor times a copy, a signal or an unnamed sum; its blocks become new copies."""
        kind: str = "signal" if isinstance(term.source, str) else "sum"
        source: object = term.source if isinstance(term.source, str) else [self._compiled(t) for t in term.source]
        for name in reversed(term.blocks):
            self.owners.append(name)
            self.sources.append((kind, source))
            kind, source = "copy", len(self.owners) - 1
        return term.coefficient, kind, source

    def _expanded(self, kind: str, source: object, closed: int) -> Sum:
        """What a consumer receives, as a sum over copies' outputs, with the first ``closed`` loops closed."""
        if kind == "copy":
            return {source: Fraction(1)}  # type: ignore[dict-item]
        if kind == "sum":
            return self._added(source, closed)  # type: ignore[arg-type]
        if source not in self.sums:
            return {}
        cuts = [loop.cut for loop in self.declarations.loops]
        factor = Fraction(1)
        if source in cuts:
            factor = self.gains[source] if cuts.index(source) < closed else Fraction(0)  # type: ignore[index,arg-type]
        if factor == 0:
            return {}
        whole = self._added(self.sums[source], closed)  # type: ignore[index]
        return {copy: factor * value for copy, value in whole.items()}

    def _added(self, terms: list[tuple[Fraction, str, object]], closed: int) -> Sum:
        total: Sum = {}
        for coefficient, kind, source in terms:
            for copy, value in self._expanded(kind, source, closed).items():
                total[copy] = total.get(copy, Fraction(0)) + coefficient * value
        return {copy: value for copy, value in total.items() if value != 0}

    def feedback(self, closed: int) -> list[Sum]:
        """Row by row, K with the first ``closed`` loops closed."""
        return [self._expanded(kind, source, closed) for kind, source in self.sources]

    def characteristic(self, closed: int, copies: frozenset[int] | None = None) -> fmpq_poly:
        """det(diag(m) - diag(n) K) over the given copies (all when left out)."""
        chosen = sorted(range(len(self.owners)) if copies is None else copies)
        K = self.feedback(closed)
        rows = []
        for b in chosen:
            n, m = self.fractions[b]
            rows.append([(m if b == c else polynomial([0])) - n * polynomial([K[b].get(c, 0)]) for c in chosen])
        return determinant(rows)

    def part(self, index: int) -> frozenset[int]:
        """Copies in feedback with the cut of loop ``index``, loops 0..index closed: it reaches them and they it."""
        cut = self.declarations.loops[index].cut
        edges = self._edges(index + 1)
        forward, backward = reach(edges, cut), reach(reverse(edges), cut)
        return frozenset(node for node in forward & backward if isinstance(node, int))

    def _edges(self, closed: int) -> dict[object, set[object]]:
        """Who hands on to whom among copies (numbers) and signals (names); open cuts hand on nothing."""
        edges: dict[object, set[object]] = {}
        open_cuts = {loop.cut for loop in self.declarations.loops[closed:]}

        def connect(kind: str, source: object, consumer: object) -> None:
            if kind == "sum":
                for _, inner_kind, inner in source:  # type: ignore[attr-defined]
                    connect(inner_kind, inner, consumer)
            elif source not in open_cuts or kind == "copy":
                edges.setdefault(source, set()).add(consumer)

        for copy, (kind, source) in enumerate(self.sources):
            connect(kind, source, copy)
        for name, terms in self.sums.items():
            for _, kind, source in terms:
                connect(kind, source, name)
        return edges

    def loop(self, index: int) -> LoopCounts:
        copies = self.part(index)
        before, after = (count_roots(self.characteristic(k, copies)) for k in (index, index + 1))
        return LoopCounts(before, after, copies)

    def has_feedback(self, index: int) -> bool:
        """Whether closing loop ``index`` changes anything: L is not zero throughout."""
        copies = self.part(index)
        return bool(copies) and self.characteristic(index, copies) != self.characteristic(index + 1, copies)

    def whole(self, closed: int) -> RootCount:
        return count_roots(self.characteristic(closed))

    def well_posed(self) -> bool:
        """No stage loses poles to infinity: every characteristic polynomial has full degree."""
        full = sum(max(n.degree(), m.degree()) for n, m in self.fractions)
        return all(self.characteristic(k).degree() == full for k in range(len(self.declarations.loops) + 1))


def reach(edges: dict[object, set[object]], start: object) -> set[object]:
    """Nodes at the end of a path of at least one step from ``start``."""
    seen: set[object] = set()
    ahead = list(edges.get(start, ()))
    while ahead:
        node = ahead.pop()
        if node not in seen:
            seen.add(node)
            ahead.extend(edges.get(node, ()))
    return seen


def reverse(edges: dict[object, set[object]]) -> dict[object, set[object]]:
    turned: dict[object, set[object]] = {}
    for source, consumers in edges.items():
        for consumer in consumers:
            turned.setdefault(consumer, set()).add(source)
    return turned
