"""The stages of closing: for each loop its part of the diagram, and what that part consisted of before the loop
closed.
"""

from __future__ import annotations

from dataclasses import dataclass

from encircle.engine.diagram import Diagram

PartKey = tuple[frozenset[int], frozenset[int]]
"""The nodes of a strongly connected part and the loops closed inside it."""


@dataclass(frozen=True, slots=True)
class Stage:
    """Loop k with loops 1 ... k closed: its part, and the parts and lone copies that the open cut leaves of it.

    ``latest`` names, for each inner part, the last loop closed inside it (``None``: feedback without a cut).
    """

    loop: int
    part: PartKey
    inner: tuple[PartKey, ...]
    latest: tuple[int | None, ...]
    lone: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class ClosingOrder:
    """All stages, and the parts of the whole diagram with all loops open and with all closed (lone copies apart)."""

    stages: tuple[Stage, ...]
    all_open: tuple[PartKey, ...]
    all_closed: tuple[PartKey, ...]
    lone_when_open: tuple[int, ...]
    lone_when_closed: tuple[int, ...]

    def parts(self) -> list[PartKey]:
        """Every part whose determinant is needed, each once."""
        keys = [stage.part for stage in self.stages]
        keys += [key for stage in self.stages for key in stage.inner]
        return list(dict.fromkeys([*keys, *self.all_open, *self.all_closed]))


def closing_order(diagram: Diagram) -> ClosingOrder:
    """Find the strongly connected parts at every stage."""
    loops = len(diagram.cuts)
    levels = [[_key(diagram, part, range(k)) for part in diagram.components(range(k))] for k in range(loops + 1)]
    stages = []
    for loop in range(loops):
        node = diagram.cut_node(loop)
        part = next(key for key in levels[loop + 1] if node in key[0])
        inner = tuple(key for key in levels[loop] if key[0] <= part[0])
        latest = tuple(max(key[1], default=None) for key in inner)
        stages.append(Stage(loop, part, inner, latest, _lone(diagram, part[0], inner)))
    everything = frozenset(range(len(diagram.blocks)))
    return ClosingOrder(
        tuple(stages),
        tuple(levels[0]),
        tuple(levels[loops]),
        _lone(diagram, everything, tuple(levels[0])),
        _lone(diagram, everything, tuple(levels[loops])),
    )


def _key(diagram: Diagram, part: frozenset[int], closed: range) -> PartKey:
    return part, frozenset(loop for loop in closed if diagram.cut_node(loop) in part)


def _lone(diagram: Diagram, nodes: frozenset[int], parts: tuple[PartKey, ...]) -> tuple[int, ...]:
    covered = frozenset(node for part, _ in parts for node in part)
    return tuple(sorted(node for node in nodes - covered if node < len(diagram.blocks)))
