"""Which blocks own the poles that a stage leaves on the axis, and the unstable poles that no feedback moves."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from encircle.engine.block_poles import poles_of
from encircle.engine.closing_order import PartKey, Stage
from encircle.engine.coprime_factors import Factor
from encircle.engine.loop_system import LoopSystem


@dataclass(frozen=True, slots=True)
class LeftFactor:
    """One factor s or s^2 + w^2 ... that closing does not move: the copy that owns it and its frequencies in rad/s."""

    node: int
    factor: Factor
    on_axis: tuple[float, ...]

    @property
    def count(self) -> int:
        """A pair counts two."""
        return sum(1 if omega == 0.0 else 2 for omega in self.on_axis)


def left_on_axis(system: LoopSystem, key: PartKey) -> tuple[LeftFactor, ...]:
    """The poles on the axis that a part keeps although it is in feedback, each with the copy that owns it."""
    left = []
    for factor, power in system.determinants[key].removed.items():
        on_axis = poles_of({factor: 1}).on_axis
        if on_axis:
            left += [LeftFactor(node, factor, on_axis) for node in _owners(system, key, factor, power)]
    return tuple(left)


def axis_poles_left(system: LoopSystem, stage: Stage) -> tuple[LeftFactor, ...]:
    """As ``left_on_axis`` for a loop's part; owners are sought first among what the open cut left on the axis."""
    kept = {(left.node, left.factor) for key in stage.inner for left in left_on_axis(system, key)}
    loose = set(stage.lone)
    left = []
    for factor, power in system.determinants[stage.part].removed.items():
        on_axis = poles_of({factor: 1}).on_axis
        if not on_axis:
            continue
        holders = _holders(system, stage.part, factor)
        preferred = [node for node in holders if node in loose or (node, factor) in kept]
        ordered = preferred + [node for node in holders if node not in preferred]
        left += [LeftFactor(node, factor, on_axis) for node in ordered[:power]]
    return tuple(left)


def hidden_right(system: LoopSystem, keys: Iterable[PartKey]) -> list[tuple[str, complex]]:
    """Blocks and poles (rad/s, im >= 0) right of the axis that stand in feedback but are moved by none."""
    found = []
    for key in keys:
        for factor, power in system.determinants[key].removed.items():
            for node in _owners(system, key, factor, power):
                block = system.diagram.blocks[node]
                found += [(block, pole) for pole in poles_of({factor: 1}).unstable]
    return found


def _owners(system: LoopSystem, key: PartKey, factor: Factor, power: int) -> list[int]:
    return _holders(system, key, factor)[:power]


def _holders(system: LoopSystem, key: PartKey, factor: Factor) -> list[int]:
    """Copies whose denominator holds the factor, as often as it does."""
    blocks = system.diagram.blocks
    copies = sorted(node for node in key[0] if node < len(blocks))
    return [node for node in copies for _ in range(system.factors[blocks[node]].denominator.get(factor, 0))]
