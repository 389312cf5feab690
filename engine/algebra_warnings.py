"""Warnings that need the algebra of the blocks: repeated, shared and cancelled poles on or right of the axis."""

from __future__ import annotations

from collections import Counter, defaultdict

from encircle.engine.errors import Problem
from encircle.engine.loop_system import LoopSystem
from encircle.engine.polynomial import Polynomial
from encircle.engine.transfer_function import cancelled_right_half_plane


def algebra_warnings(system: LoopSystem) -> tuple[Problem, ...]:
    """All of them, in the order of the file."""
    return (*_cancelled(system), *_copied(system), *_equal(system), *_outside(system))


def _cancelled(system: LoopSystem) -> list[Problem]:
    """A common factor on or right of the axis that the reduction of one block removed."""
    found = []
    for name, transfer in system.transfers.items():
        if cancelled_right_half_plane(transfer):
            message = (
                f"block `{name}`: numerator and denominator share a root on or right of the imaginary axis, which was "
                "cancelled; if the device has that mode, write it as two blocks"
            )
            found.append(Problem("cancelled-in-block", f"blocks.{name}", message))
    return found


def _bad(system: LoopSystem, block: str) -> bool:
    poles = system.poles[block]
    return bool(poles.right or poles.on_axis or system.declared.get(block, 0))


def _copied(system: LoopSystem) -> list[Problem]:
    uses = Counter(system.diagram.blocks)
    found = []
    for name in system.declarations.blocks:
        if uses[name] > 1 and _bad(system, name):
            message = (
                f"block `{name}` has poles on or right of the imaginary axis and is used {uses[name]} times: each use "
                f"is one more copy of its dynamics; write one device that receives two signals as {name}*(a + b)"
            )
            found.append(Problem("unstable-block-copied", f"blocks.{name}", message))
    return found


def _equal(system: LoopSystem) -> list[Problem]:
    """Equal poles on or right of the axis in two blocks."""
    holders: dict[Polynomial, list[str]] = defaultdict(list)
    for name in system.declarations.blocks:
        for factor, power in system.factors[name].denominator.items():
            if power > 0 and isinstance(factor, Polynomial) and any(factor.count_right()):
                holders[factor].append(name)
    found = []
    for factor, names in holders.items():
        if len(names) > 1:
            root = max(factor.roots(), key=lambda r: (r.real, r.imag))
            listed = ", ".join(f"`{name}`" for name in names[:-1]) + f" and `{names[-1]}`"
            every = "both" if len(names) == 2 else "all"
            message = (
                f"blocks {listed} {every} have the pole {_root_text(root)} rad/s: blocks are separate devices, so if "
                "two of them describe one device, its pole is counted twice"
            )
            found.append(Problem("equal-poles", f"blocks.{names[0]}", message))
    return found


def _root_text(root: complex) -> str:
    if root.imag == 0.0:
        return f"{root.real:.6g}"
    real = f"{root.real:.6g} " if root.real else ""
    return f"{real}+-j{abs(root.imag):.6g}"


def _outside(system: LoopSystem) -> list[Problem]:
    """Unstable blocks that stand in no feedback even with all loops closed."""
    found = []
    for node in system.order.lone_when_closed:
        name = system.diagram.blocks[node]
        count = system.poles[name].right + system.declared.get(name, 0)
        if count:
            message = (
                f"block `{name}` has {count} unstable pole{'s' if count > 1 else ''} and lies in no feedback loop: "
                "nothing in this diagram stabilises it"
            )
            found.append(Problem("unstable-outside-loops", f"blocks.{name}", message))
    return found
