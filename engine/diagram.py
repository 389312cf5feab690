"""Signal equations to copies of blocks, cuts, and the constant matrix that joins them.

Every use of a block is a copy with an output of its own, every cut wire a node that passes its signal on. All purely
algebraic signals are eliminated in exact arithmetic, which leaves in_b = sum_c K[b, c] z_c between the nodes: the
inputs of the nodes as constant combinations of their outputs. The factors at the cuts are not in K; a cut node's
column counts only while its loop is closed.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeVar

from encircle.engine.declarations import Declarations, Term
from encircle.engine.errors import Problem, ProjectError

Combination = dict[int, Fraction]
Key = TypeVar("Key")
Node = TypeVar("Node")


@dataclass(frozen=True, slots=True)
class Diagram:
    """Nodes and their joints: nodes 0 ... n-1 are copies of ``blocks``, node n + k is the cut of loop k.

    ``joints[b]`` maps each node c that feeds node b to the constant factor K[b, c]. ``homes`` names, for each copy, the
    signal in whose equation it stands.
    """

    blocks: tuple[str, ...]
    homes: tuple[str, ...]
    cuts: tuple[str, ...]
    joints: tuple[Mapping[int, Fraction], ...]

    def cut_node(self, loop: int) -> int:
        """The node of loop ``loop`` (counted from 0 in closing order)."""
        return len(self.blocks) + loop

    def components(self, closed: Iterable[int]) -> list[frozenset[int]]:
        """The strongly connected parts that hold feedback while the loops ``closed`` are closed."""
        allowed = set(range(len(self.blocks))) | {self.cut_node(loop) for loop in closed}
        successors: dict[int, list[int]] = {node: [] for node in allowed}
        for node in allowed:
            for source in self.joints[node]:
                if source in allowed:
                    successors[source].append(node)
        parts = strongly_connected(successors)
        return [part for part in parts if len(part) > 1 or any(node in self.joints[node] for node in part)]

    def names(self, nodes: Iterable[int]) -> tuple[str, ...]:
        """The blocks behind some nodes, each once, in the order of the nodes."""
        found = dict.fromkeys(self.blocks[node] for node in sorted(nodes) if node < len(self.blocks))
        return tuple(found)


def build_diagram(declarations: Declarations) -> Diagram:
    """Expand the signal equations into nodes and joints.

    Raises ProjectError where algebraic feedback has no solution (naming the signals of the cycle) and where no feedback
    reaches a cut.
    """
    builder = _Builder(tuple(loop.cut for loop in declarations.loops))
    for signal, terms in declarations.signals.items():
        builder.define(signal, signal, terms)
    diagram = builder.finish()
    _refuse_unreached_cuts(diagram, [loop.name for loop in declarations.loops])
    return diagram


class _Builder:
    """Collects copies and the linear equations between signals while the terms are walked."""

    def __init__(self, cuts: tuple[str, ...]) -> None:
        self.cuts = cuts
        self.blocks: list[str] = []
        self.homes: list[str] = []
        self.sources: list[tuple[str, Fraction] | int] = []  # what feeds each copy: a signal or another copy
        self.algebraic: dict[str, dict[str, Fraction]] = {}  # signal -> coefficients of other signals
        self.driven: dict[str, Combination] = {}  # signal -> coefficients of copies' outputs
        self.unnamed = 0

    def define(self, signal: str, home: str, terms: Sequence[Term]) -> None:
        self.algebraic[signal], self.driven[signal] = {}, {}
        for term in terms:
            self._add(signal, home, term)

    def _add(self, signal: str, home: str, term: Term) -> None:
        if term.coefficient == 0:
            return
        source = term.source if isinstance(term.source, str) else self._sum(home, term.source)
        if not term.blocks:
            row = self.algebraic[signal]
            row[source] = row.get(source, Fraction(0)) + term.coefficient
            return
        feed: tuple[str, Fraction] | int = (source, Fraction(1))
        for block in reversed(term.blocks):  # the rightmost acts first
            self.blocks.append(block)
            self.homes.append(home)
            self.sources.append(feed)
            feed = len(self.blocks) - 1
        self.driven[signal][len(self.blocks) - 1] = term.coefficient

    def _sum(self, home: str, terms: Sequence[Term]) -> str:
        """A parenthesised sum becomes a signal without a name, so that what acts on it stays one copy."""
        self.unnamed += 1
        name = f"({self.unnamed})"  # cannot clash: names hold no parentheses
        self.define(name, home, terms)
        return name

    def finish(self) -> Diagram:
        values = self._solve()
        joints: list[Combination] = []
        for source in self.sources:
            joints.append({source: Fraction(1)} if isinstance(source, int) else values(source[0]))
        for cut in self.cuts:
            own = dict(self.driven[cut])
            for signal, factor in self.algebraic[cut].items():
                _accumulate(own, values(signal), factor)
            joints.append(_nonzero(own))
        return Diagram(tuple(self.blocks), tuple(self.homes), self.cuts, tuple(joints))

    def _solve(self) -> Callable[[str], Combination]:
        """What a consumer receives from each signal, as a combination of node outputs."""
        count = len(self.blocks)
        known: dict[str, Combination] = {cut: {count + k: Fraction(1)} for k, cut in enumerate(self.cuts)}
        free = [signal for signal in self.algebraic if signal not in known]
        graph = {signal: [other for other in self.algebraic[signal] if other in self.algebraic] for signal in free}
        graph = {signal: [other for other in others if other not in known] for signal, others in graph.items()}
        for part in strongly_connected(graph):  # Tarjan yields a part only after all it depends on
            known.update(self._solve_part(sorted(part, key=free.index), known))
        return lambda signal: known.get(signal, {})  # inputs are 0

    def _solve_part(self, part: list[str], known: Mapping[str, Combination]) -> dict[str, Combination]:
        """Gauss-Jordan elimination of the signals of one algebraic cycle (most parts hold one signal and no cycle)."""
        rows: list[dict[str, Fraction]] = []
        rights: list[Combination] = []
        for signal in part:
            row = {signal: Fraction(1)}
            right = dict(self.driven[signal])
            for other, factor in self.algebraic[signal].items():
                if other in part:
                    row[other] = row.get(other, Fraction(0)) - factor
                else:
                    _accumulate(right, known.get(other, {}), factor)
            rows.append(row)
            rights.append(right)
        for i, signal in enumerate(part):
            pivot = next((k for k in range(i, len(part)) if rows[k].get(signal, 0) != 0), None)
            if pivot is None:
                raise ProjectError(_unsolvable(part))
            rows[i], rows[pivot], rights[i], rights[pivot] = rows[pivot], rows[i], rights[pivot], rights[i]
            scale = 1 / rows[i][signal]
            rows[i] = {key: value * scale for key, value in rows[i].items()}
            rights[i] = {key: value * scale for key, value in rights[i].items()}
            for k in range(len(part)):
                factor = rows[k].get(signal, Fraction(0))
                if k != i and factor != 0:
                    _accumulate(rows[k], rows[i], -factor)
                    _accumulate(rights[k], rights[i], -factor)
        return {signal: _nonzero(right) for signal, right in zip(part, rights, strict=True)}


def _accumulate(target: dict[Key, Fraction], source: Mapping[Key, Fraction], factor: Fraction) -> None:
    for key, value in source.items():
        target[key] = target.get(key, Fraction(0)) + factor * value


def _nonzero(combination: Combination) -> Combination:
    return {node: value for node, value in combination.items() if value != 0}


def _unsolvable(part: Sequence[str]) -> Problem:
    named = [signal for signal in part if not signal.startswith("(")]
    text = ", ".join(named)
    return Problem(
        "algebraic-loop",
        "signals." + named[0],
        f"the algebraic feedback through {text} has no solution (its gain is exactly 1): "
        "put the dynamics of the device into this cycle, or change a factor",
    )


def strongly_connected(graph: Mapping[Node, Sequence[Node]]) -> list[frozenset[Node]]:
    """Tarjan's algorithm without recursion (R. Tarjan, SIAM J. Comput. 1 (1972) 146-160); dependencies come first."""
    index: dict[Node, int] = {}
    low: dict[Node, int] = {}
    stack: list[Node] = []
    on_stack: set[Node] = set()
    parts: list[frozenset[Node]] = []
    for root in graph:
        if root in index:
            continue
        work = [(root, iter(graph[root]))]
        index[root] = low[root] = len(index)
        stack.append(root)
        on_stack.add(root)
        while work:
            node, successors = work[-1]
            for successor in successors:
                if successor not in index:
                    index[successor] = low[successor] = len(index)
                    stack.append(successor)
                    on_stack.add(successor)
                    work.append((successor, iter(graph[successor])))
                    break
                if successor in on_stack:
                    low[node] = min(low[node], index[successor])
            else:
                work.pop()
                if work:
                    low[work[-1][0]] = min(low[work[-1][0]], low[node])
                if low[node] == index[node]:
                    parts.append(_pop_part(node, stack, on_stack))
    return parts


def _pop_part(root: Node, stack: list[Node], on_stack: set[Node]) -> frozenset[Node]:
    part = set()
    while True:
        node = stack.pop()
        on_stack.discard(node)
        part.add(node)
        if node == root:
            return frozenset(part)


def _refuse_unreached_cuts(diagram: Diagram, loops: Sequence[str]) -> None:
    """A cut must lie in feedback once the loops listed before it are closed."""
    problems = []
    for k, name in enumerate(loops):
        node = diagram.cut_node(k)
        if _reached(diagram, node, range(k + 1)):
            continue
        if not _reached(diagram, node, range(len(loops))):
            until = "at all"
        else:
            needed = next(
                (j for j in range(k + 1, len(loops)) if _reached(diagram, node, [*range(k + 1), j])),
                len(loops) - 1,
            )
            until = f"until loop `{loops[needed]}` is closed: list `{loops[needed]}` first"
        message = f"no feedback reaches the cut of `{name}` {until}"
        problems.append(Problem("cut-without-feedback", f"loops.{name}.cut", message))
    if problems:
        raise ProjectError(*problems)


def _reached(diagram: Diagram, node: int, closed: Iterable[int]) -> bool:
    return any(node in part for part in diagram.components(closed))
