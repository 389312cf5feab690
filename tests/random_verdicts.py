"""Comparison of an engine's results with the exact counts of the same declarations."""

from __future__ import annotations

from dataclasses import dataclass, field

from exact_diagram import ExactDiagram, LoopCounts
from single_loop_files import assert_consistent

from encircle.engine import Project
from encircle.engine.result import LoopResult


@dataclass(slots=True)
class Tally:
    """What a batch of loops came to; ``wrong`` and ``needlessly_undecided`` name each offender."""

    wrong: list[str] = field(default_factory=list)
    needlessly_undecided: list[str] = field(default_factory=list)
    stable: int = 0  # whole diagrams
    unstable: int = 0
    undecided: int = 0  # loops
    left_on_axis: int = 0


def compare_with_exact_counts(
    project: Project, exact: ExactDiagram, number: int, tally: Tally, *, every_loop: bool = True
) -> None:
    """Compare the whole diagram, all loops open and all closed, and P, N and Z of every loop if asked to."""
    names = project.loop_names if every_loop else ()
    result = project.check(names)
    for index, loop in enumerate(result.loops):
        compare_loop(loop, exact.loop(index), f"{number}: {loop.name}", tally)
    loops = len(project.loop_names)
    for found, closed in ((result.unstable_poles_all_open, 0), (result.unstable_poles_all_closed, loops)):
        whole = exact.whole(closed)
        if found is None:
            if whole.axis == 0:
                tally.needlessly_undecided.append(f"{number}: whole diagram, {closed} loops closed")
        elif found != whole.right:
            tally.wrong.append(f"{number}: whole diagram, {closed} closed: {found}, exact {whole.right}")
    tally.stable += result.unstable_poles_all_closed == 0
    tally.unstable += bool(result.unstable_poles_all_closed)


def compare_loop(found: LoopResult, exact: LoopCounts, what: str, tally: Tally) -> None:
    Z, P = found.unstable_poles_after, found.unstable_poles_before
    assert_consistent(found)
    if Z is None:
        tally.undecided += 1
        if exact.after.axis == 0:
            tally.needlessly_undecided.append(f"{what}: Z = {exact.after.right}, {found.undecided}")
        return
    on_axis = sum(1 if pole.frequency == 0 else 2 for pole in found.axis_poles_left)
    if (Z, on_axis) != (exact.after.right, exact.after.axis):
        tally.wrong.append(f"{what}: Z = {Z} and {on_axis} on the axis, exact {exact.after}")
    if P is None:
        if exact.before.axis == 0:
            tally.needlessly_undecided.append(f"{what}: P = {exact.before.right} not decided")
    elif exact.before.right != P:
        tally.wrong.append(f"{what}: P = {P}, exact {exact.before}")
    tally.left_on_axis += on_axis > 0
