"""Loop determinants as sums of products of coprime factors.

With loops 1 ... k closed, Delta_k = det(M - N K_k) on a strongly connected part of the diagram is
sum over S of det(-K[S, S]) * prod_{b in S} N_b * prod_{b not in S} M_b. It is analytic and bounded by a power of s in
Re s >= 0, has no poles to detour around, and its zeros there are the poles of the whole part, hidden ones included,
because every M_b enters once and nothing is cancelled (D. Q. Mayne, Automatica 9 (1973) 201-207; M. Vidyasagar, Control
System Synthesis: A Factorization Approach, MIT Press 1985; both cited from memory). Splitting by the factor g at cut k,
Delta_k = A + g B with A = Delta_{k-1} of the same copies, so L_k = g B / A.

A factor that every term holds (a pole that closing does not move) is divided out of all terms and kept in ``removed``.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product as cartesian
from math import prod

from encircle.engine.coprime_factors import CoprimeFactors, Factor, Powers, Product
from encircle.engine.diagram import Diagram
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.minors import minor_coefficients

MOST_TERMS = 8192


@dataclass(frozen=True, slots=True)
class Term:
    """coefficient * prod(gain of each loop in ``cuts``) * prod(factor ** power) * exp(-delay s)."""

    coefficient: Fraction
    cuts: frozenset[int]
    powers: Powers
    delay: Fraction

    def factor(self, gains: Sequence[Fraction]) -> Fraction:
        """The product of the factors at the cuts that this term passes."""
        return prod((gains[loop] for loop in self.cuts), start=Fraction(1))


@dataclass(frozen=True, slots=True)
class Determinant:
    """Delta of one strongly connected part (``nodes``) with the loops ``closed`` closed.

    ``far_terms`` is the same sum written for |s| >= R. ``removed``: factors divided out of all terms, with their
    powers.
    """

    nodes: frozenset[int]
    closed: frozenset[int]
    terms: tuple[Term, ...]
    far_terms: tuple[Term, ...]
    removed: Mapping[Factor, int]


class DeterminantBuilder:
    """Expands determinants of parts of one diagram; minors of a part are found once and serve all its stages."""

    def __init__(self, diagram: Diagram, factors: Mapping[str, CoprimeFactors], movable: Iterable[Factor]) -> None:
        self._diagram = diagram
        self._factors = factors
        self._movable = tuple(movable)
        self._minors: dict[frozenset[int], dict[int, Fraction]] = {}
        everything = diagram.components(range(len(diagram.cuts)))
        self._final_part = {node: part for part in everything for node in part}

    def build(self, nodes: frozenset[int], closed: Iterable[int]) -> Determinant:
        """Delta of the part ``nodes`` with the loops ``closed`` closed.

        Raises ProjectError where the expansion grows beyond ``MOST_TERMS``.
        """
        inside = frozenset(loop for loop in closed if self._diagram.cut_node(loop) in nodes)
        sets = self._sets(nodes, inside)
        terms = _merge(self._expand(nodes, sets, at_infinity=False))
        far_terms = _merge(self._expand(nodes, sets, at_infinity=True))
        removed = _common(terms, self._movable)
        return Determinant(nodes, inside, _divide(terms, removed), _divide(far_terms, removed), removed)

    def _sets(self, nodes: frozenset[int], closed: frozenset[int]) -> dict[int, Fraction]:
        """The nonzero minors on subsets of ``nodes`` that use no open cut."""
        final = self._final_part[next(iter(nodes))]
        if final not in self._minors:
            self._minors[final] = minor_coefficients(self._diagram.joints, final)
        open_cuts = {self._diagram.cut_node(loop) for loop in range(len(self._diagram.cuts)) if loop not in closed}
        allowed = sum(1 << node for node in nodes if node not in open_cuts)
        return {mask: value for mask, value in self._minors[final].items() if not mask & ~allowed}

    def _expand(self, nodes: frozenset[int], sets: Mapping[int, Fraction], at_infinity: bool) -> Iterable[Term]:
        blocks = self._diagram.blocks
        copies = sorted(node for node in nodes if node < len(blocks))
        count = 0
        for mask, coefficient in sets.items():
            cuts = frozenset(node - len(blocks) for node in nodes if node >= len(blocks) and mask >> node & 1)
            numerators: list[tuple[Product, ...]] = []
            fixed: dict[Factor, int] = defaultdict(int)
            for node in copies:
                found = self._factors[blocks[node]]
                if mask >> node & 1:
                    numerators.append(found.numerator_at_infinity if at_infinity else found.numerator)
                else:
                    _raise_all(fixed, found.denominator)
            for choice in cartesian(*numerators):
                count += 1
                if count > MOST_TERMS:
                    raise ProjectError(_too_many())
                yield _term(coefficient, cuts, fixed, choice)


def _term(coefficient: Fraction, cuts: frozenset[int], fixed: Powers, choice: Sequence[Product]) -> Term:
    powers: dict[Factor, int] = defaultdict(int, fixed)
    delay = Fraction(0)
    for product in choice:
        coefficient *= product.gain
        delay += product.delay
        _raise_all(powers, product.powers)
    return Term(coefficient, cuts, {factor: power for factor, power in powers.items() if power}, delay)


def _raise_all(target: dict[Factor, int], powers: Powers) -> None:
    for factor, power in powers.items():
        target[factor] += power


def _merge(terms: Iterable[Term]) -> list[Term]:
    """Add terms that differ only in their coefficient; drop those that cancel exactly."""
    found: dict[tuple[frozenset[int], frozenset[tuple[Factor, int]], Fraction], Term] = {}
    for term in terms:
        key = (term.cuts, frozenset(term.powers.items()), term.delay)
        if key in found:
            term = Term(found[key].coefficient + term.coefficient, term.cuts, term.powers, term.delay)
        found[key] = term
    return [term for term in found.values() if term.coefficient != 0]


def _common(terms: Sequence[Term], movable: Sequence[Factor]) -> dict[Factor, int]:
    """The power of each movable factor that all terms hold."""
    found = {factor: min((term.powers.get(factor, 0) for term in terms), default=0) for factor in movable}
    return {factor: power for factor, power in found.items() if power > 0}


def _divide(terms: Sequence[Term], removed: Powers) -> tuple[Term, ...]:
    return tuple(
        Term(term.coefficient, term.cuts, _lowered(term.powers, removed), term.delay) if removed else term
        for term in terms
    )


def _lowered(powers: Powers, removed: Powers) -> dict[Factor, int]:
    lowered = dict(powers)
    for factor, power in removed.items():
        lowered[factor] = lowered.get(factor, 0) - power
    return {factor: power for factor, power in lowered.items() if power}


def _too_many() -> Problem:
    return Problem(
        "too-many-terms",
        "signals",
        f"the determinant of a loop has more than {MOST_TERMS} terms: combine blocks that always act together",
    )
