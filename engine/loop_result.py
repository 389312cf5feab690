"""From a stage and its counts to what is reported of the loop."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from encircle.engine.axis_poles import LeftFactor, axis_poles_left
from encircle.engine.closing_order import PartKey, Stage
from encircle.engine.counting import Counter, Gains, PartCount
from encircle.engine.crossings import NegativeCrossing, UnboundedArc
from encircle.engine.data_study import study_data
from encircle.engine.declarations import MeasuredBlock
from encircle.engine.gain_map import FactorRange
from encircle.engine.limits import judge
from encircle.engine.loop_study import LoopStudy, study
from encircle.engine.loop_system import LoopSystem
from encircle.engine.margins import frequency_of
from encircle.engine.open_loop import OpenLoop
from encircle.engine.result import (
    AxisPole,
    Evidence,
    GainRange,
    LoopResult,
    PoleOwner,
    RealAxisCrossing,
    UndecidedStretch,
)
from encircle.engine.undecided import explain, joined
from encircle.engine.verdict import loop_verdict


@dataclass(frozen=True, slots=True)
class StageCounts:
    """P and Z of a loop's part, the poles left on the axis, and who owns the poles of P."""

    before: int | None
    after: int | None
    left: tuple[LeftFactor, ...]
    owners: tuple[PoleOwner, ...]
    undecided: tuple[UndecidedStretch, ...]


def count_stage(counter: Counter, stage: Stage, gains: Gains, unit: float) -> StageCounts:
    """Count the part with the cut closed and what it consisted of with the cut open."""
    keys = [stage.part, *stage.inner]
    part, *inner = counter.count(keys, gains)
    after = _decided(counter, stage.part, part)
    befores = [_decided(counter, key, count) for key, count in zip(stage.inner, inner, strict=True)]
    lone = [(node, _poles_of_copy(counter.system, node)) for node in stage.lone]
    before = None if None in befores else sum(b for b in befores if b is not None) + sum(n for _, n in lone)
    stretches = explain(counter, stage.part, gains, part, unit) if after is None else ()
    owners = _owners(counter.system, stage, befores, lone)
    return StageCounts(before, after, axis_poles_left(counter.system, stage), owners, stretches)


def _decided(counter: Counter, key: PartKey, count: PartCount) -> int | None:
    """The count, unless a measured block contradicts its declared asymptote or the stated unstable poles the data."""
    off = any(model.first_line_is_off() for model in counter.system.measured_in(key))
    contradicted = count.unstable is not None and count.unstable < 0
    return None if off or contradicted else count.unstable


def _poles_of_copy(system: LoopSystem, node: int) -> int:
    block = system.diagram.blocks[node]
    return system.poles[block].right + system.declared.get(block, 0)


def _owners(
    system: LoopSystem, stage: Stage, befores: Sequence[int | None], lone: Sequence[tuple[int, int]]
) -> tuple[PoleOwner, ...]:
    owners = []
    for key, latest, count in zip(stage.inner, stage.latest, befores, strict=True):
        if count and latest is not None:
            owners.append(PoleOwner(system.declarations.loops[latest].name, "loop", count))
        elif count:
            owners.append(PoleOwner(", ".join(system.blocks_in(key)), "uncut feedback", count))
    blocks: dict[str, int] = {}
    for node, count in lone:
        if count:
            blocks[system.diagram.blocks[node]] = blocks.get(system.diagram.blocks[node], 0) + count
    return (*owners, *(PoleOwner(block, "block", count) for block, count in blocks.items()))


def loop_result(
    counter: Counter, stage: Stage, gains: Gains, unit: float
) -> tuple[LoopResult, OpenLoop, LoopStudy | None]:
    """Everything reported of one loop, its open-loop response, and the study of its curve (decided loops only)."""
    system = counter.system
    declared = system.declarations.loops[stage.loop]
    counts = count_stage(counter, stage, gains, unit)
    windings = None if counts.after is None or counts.before is None else counts.after - counts.before
    on_axis = sum(left.count for left in counts.left) if counts.after is not None else 0
    later = _contained_later(system, stage, counts)
    verdict = loop_verdict(counts.after, on_axis, declared.leaves_unstable, declared.leaves_on_axis, later)
    loop = OpenLoop(counter, stage, gains)
    examine = study_data if loop.measured else study
    studied = examine(counter, loop, gains, counts.after, windings, unit) if counts.after is not None else None
    margins = studied.margins if studied and verdict in ("stable", "as_declared") else None
    undecided = counts.undecided
    if verdict == "undecided" and counts.after is not None:
        undecided = joined([*undecided, *_axis_stretches(system, counts.left, unit)])
    result = LoopResult(
        name=declared.name,
        cut=declared.cut,
        gain=float(gains[stage.loop]),
        verdict=verdict,
        windings=windings,
        unstable_poles_before=counts.before,
        unstable_poles_after=counts.after,
        pole_owners=counts.owners,
        axis_poles_left=_axis_poles(system, counts.left, unit) if counts.after is not None else (),
        evidence=_evidence(system, stage, counts.after),
        assumptions=_assumptions(system, stage),
        undecided=undecided,
        real_axis_crossings=_crossings(studied, unit) if studied else (),
        gain_ranges=tuple(_range(r) for r in studied.ranges) if studied else (),
        margins=margins,
        limits=judge(declared.limits, verdict, margins),
        blocks=system.blocks_in(stage.part),
        leaves_unstable=declared.leaves_unstable,
        leaves_on_axis=declared.leaves_on_axis,
    )
    return result, loop, studied


def _contained_later(system: LoopSystem, stage: Stage, counts: StageCounts) -> bool:
    """Whether a later loop's part contains the copies whose poles stay on the axis."""
    later = [other.part[0] for other in system.order.stages if other.loop > stage.loop]
    return all(any(left.node in part for part in later) for left in counts.left)


def _axis_poles(system: LoopSystem, left: Sequence[LeftFactor], unit: float) -> tuple[AxisPole, ...]:
    blocks = system.diagram.blocks
    return tuple(AxisPole(blocks[item.node], omega / unit) for item in left for omega in item.on_axis)


def _axis_stretches(system: LoopSystem, left: Sequence[LeftFactor], unit: float) -> list[UndecidedStretch]:
    stretches = []
    for pole in _axis_poles(system, left, unit):
        why = (
            f"the pole of `{pole.block}` on the axis is not moved by this loop nor by a later one: "
            "state `leaves_on_axis` if that is meant"
        )
        stretches.append(UndecidedStretch(pole.frequency, pole.frequency, why))
    return stretches


def _evidence(system: LoopSystem, stage: Stage, after: int | None) -> Evidence:
    if after is None:
        return "none"
    if system.measured_in(stage.part):
        return "data"
    return "declared" if any(block in system.declared for block in system.blocks_in(stage.part)) else "proved"


def _assumptions(system: LoopSystem, stage: Stage) -> tuple[str, ...]:
    """What the count rests on besides the models themselves."""
    sentences = [
        f"`{name}` has {system.declared[name]} unstable poles, as stated"
        for name in system.blocks_in(stage.part)
        if name in system.declared
    ]
    sentences += [_band_assumption(model.block) for model in system.measured_in(stage.part)]
    return tuple(sentences)


def _band_assumption(block: MeasuredBlock) -> str:
    m, n = block.integrators, block.roll_off
    below = {0: "constant"}.get(m, f"k/s^{m}" if m > 0 else f"k*s^{-m}")
    above = "nothing is assumed above the last" if n is None else f"above the last |H| falls at least as 1/w^{n}"
    return (
        f"`{block.name}`: between two lines H stays within {block.between_lines:g} times their distance of the chord "
        f"that joins them; below the first line it is {below}; {above}"
    )


def _range(found: FactorRange) -> GainRange:
    return GainRange(found.lower, found.upper, found.unstable)


def _crossings(studied: LoopStudy, unit: float) -> tuple[RealAxisCrossing, ...]:
    """Those left of -1 in the order of the contour, and the nearest one in (-1, 0)."""
    entries: list[tuple[float, RealAxisCrossing]] = []
    for crossing in studied.crossings:
        if crossing.value < -1.0:
            entries.append((crossing.omega, _finite(crossing, crossing.turns, unit)))
    for arc in studied.arcs:
        if arc.turns:
            entries.append((arc.omega, _on_arc(arc, unit)))
    inside = [crossing for crossing in studied.crossings if -1.0 < crossing.value < 0.0]
    if inside:
        nearest = min(inside, key=lambda crossing: crossing.value)
        entries.append((nearest.omega, _finite(nearest, 0, unit)))
    return tuple(entry for _, entry in sorted(entries, key=lambda item: item[0]))


def _finite(crossing: NegativeCrossing, turns: int, unit: float) -> RealAxisCrossing:
    return RealAxisCrossing(frequency_of(crossing.omega, unit), crossing.value, turns)


def _on_arc(arc: UnboundedArc, unit: float) -> RealAxisCrossing:
    frequency = None if np.isinf(arc.omega) else arc.omega / unit
    return RealAxisCrossing(frequency, None, arc.turns)
