"""Principal minors of I - X K as sums over disjoint cycles, in exact arithmetic.

det(I - X K) = sum over sets of disjoint cycles of prod(-cycle gain) (S. J. Mason, "Feedback theory - further
properties of signal flow graphs", Proc. IRE 44 (1956); cited from memory). Grouped by the set S of nodes that the
cycles visit: coefficient[S] = det(-K[S, S]), so every block of S enters once with its numerator and every other with
its denominator.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from encircle.engine.errors import Problem, ProjectError

MOST_SETS = 4096
"""More combinations of disjoint cycles than this are refused: the diagram is too dense to be expanded."""


def minor_coefficients(joints: Sequence[Mapping[int, Fraction]], part: frozenset[int]) -> dict[int, Fraction]:
    """det(-K[S, S]) for every set S of nodes of ``part`` where it is not zero; S as a bit mask, the empty set included.

    Raises ProjectError when there are more than ``MOST_SETS`` combinations.
    """
    cycles = _simple_cycles(joints, part)
    coefficients: dict[int, Fraction] = {0: Fraction(1)}
    for start in sorted(part):  # a set of disjoint cycles is built in the order of the cycles' smallest nodes
        extended = dict(coefficients)
        for mask, gain in cycles.get(start, {}).items():
            for chosen, coefficient in coefficients.items():
                if not chosen & mask:
                    union = chosen | mask
                    extended[union] = extended.get(union, Fraction(0)) - coefficient * gain
        coefficients = extended
        if len(coefficients) > MOST_SETS:
            raise ProjectError(_too_dense())
    return {mask: value for mask, value in coefficients.items() if value != 0}


def _simple_cycles(joints: Sequence[Mapping[int, Fraction]], part: frozenset[int]) -> dict[int, dict[int, Fraction]]:
    """Gains of the simple cycles, by smallest node and set of nodes (cycles on the same nodes are added)."""
    consumers: dict[int, list[tuple[int, Fraction]]] = {node: [] for node in part}
    for node in part:
        for source, factor in joints[node].items():
            if source in part:
                consumers[source].append((node, factor))
    found: dict[int, dict[int, Fraction]] = {}
    visits = 0
    for start in sorted(part):
        gains: dict[int, Fraction] = {}
        stack = [(start, 1 << start, Fraction(1))]
        while stack:
            node, mask, gain = stack.pop()
            visits += 1
            if visits > 64 * MOST_SETS:
                raise ProjectError(_too_dense())
            for consumer, factor in consumers[node]:
                if consumer == start:
                    gains[mask] = gains.get(mask, Fraction(0)) + gain * factor
                elif consumer > start and not mask >> consumer & 1:
                    stack.append((consumer, mask | 1 << consumer, gain * factor))
        found[start] = gains
    return found


def _too_dense() -> Problem:
    return Problem(
        "too-dense",
        "signals",
        f"the feedback of this diagram has more than {MOST_SETS} combinations of separate cycles: "
        "combine blocks that always act together, or split the project",
    )
