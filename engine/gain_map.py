"""How Z of a loop's part depends on a factor on top of its gain: ranges from 0 upward, each with a proved count.

Delta = A + g B changes its count only where g = -1/L is real and positive: at crossings of the negative real axis, at
w = 0 and at w = infinity (D-subdivision: Yu. I. Neimark; E. N. Gryazina, B. T. Polyak, Automatica 42 (2006) 13-26; cited
from memory). One count is proved inside every interval between neighbouring candidates, and each change is held against
the turns of the crossings that make it: where they disagree, a crossing was missed.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from encircle.engine.crossings import NegativeCrossing

SAME = 1e-9  # candidates closer than this (relative) are one
MOST_CANDIDATES = 1000  # those nearest to 1 are kept

Count = Callable[[Sequence[float]], list[int | None]]


@dataclass(frozen=True, slots=True)
class FactorRange:
    """Z between two factors; the frequencies (rad/s, inf at the far end) belong to the ends, ``None`` where no change is."""

    lower: float
    upper: float | None
    unstable: int
    lower_omega: float | None
    upper_omega: float | None


@dataclass(frozen=True, slots=True)
class _Candidate:
    factor: float
    omega: float | None
    turns: int


class MissedCrossing(ArithmeticError):
    """The crossings found do not explain the proved counts: the curve was sampled too coarsely."""


def gain_ranges(
    crossings: Sequence[NegativeCrossing], endless: bool, limit: float | None, count: Count, present: int
) -> tuple[FactorRange, ...]:
    """Ranges of the factor with Z in each, from 0 to infinity or to where the list may stop; ranges left open are left out.

    ``count`` proves Z for several factors at once (``None``: undecided). ``endless``: infinitely many changes follow (dead
    time), and the list stops after the second change above 1. ``limit``: from this factor on the loop is undecided at
    infinity. ``present``: Z at factor 1. Raises MissedCrossing where crossings and counts disagree.
    """
    candidates = _candidates(crossings, limit)
    closed = endless or limit is not None
    if endless:
        candidates = _up_to_second_change(candidates)
    if limit is not None and (not candidates or candidates[-1].factor < limit):
        candidates.append(_Candidate(limit, math.inf, 0))
    edges = [_Candidate(0.0, None, 0), *candidates]
    uppers: list[_Candidate | None] = [*candidates] if closed and candidates else [*candidates, None]
    probes = [_probe(low.factor, up.factor if up else None) for low, up in zip(edges, uppers, strict=False)]
    counts = count(probes)
    _check(counts, candidates, probes, present)
    return _merge(edges, uppers, counts)


def _candidates(crossings: Sequence[NegativeCrossing], limit: float | None) -> list[_Candidate]:
    """Critical factors, ascending, coincident ones joined; at most those nearest to 1."""
    found: list[_Candidate] = []
    for crossing in sorted(crossings, key=lambda c: -1.0 / c.value):
        factor = -1.0 / crossing.value
        if limit is not None and factor >= limit * (1.0 - SAME):
            continue
        if found and factor - found[-1].factor <= SAME * factor:
            last = found[-1]
            found[-1] = _Candidate(last.factor, last.omega, last.turns + crossing.turns)
        else:
            found.append(_Candidate(factor, crossing.omega, crossing.turns))
    kept = sorted(found, key=lambda c: abs(math.log(c.factor)))[:MOST_CANDIDATES]
    return sorted(kept, key=lambda c: c.factor)


def _up_to_second_change(candidates: list[_Candidate]) -> list[_Candidate]:
    changes = [i for i, candidate in enumerate(candidates) if candidate.factor > 1.0 and candidate.turns != 0]
    return candidates[: changes[1] + 1] if len(changes) > 1 else candidates


def _probe(low: float, up: float | None) -> float:
    """A factor inside an interval; 1 where it lies inside, since its count is known."""
    if low < 1.0 and (up is None or up > 1.0):
        return 1.0
    if up is None:
        return 2.0 * low
    return 0.5 * up if low == 0.0 else math.sqrt(low) * math.sqrt(up)


def _check(
    counts: Sequence[int | None],
    candidates: Sequence[_Candidate],
    probes: Sequence[float],
    present: int,
) -> None:
    for probe, found in zip(probes, counts, strict=True):
        if probe == 1.0 and found != present:
            raise MissedCrossing("the count at the present gain differs from the one proved before")
    for before, after, candidate in zip(counts, counts[1:], candidates, strict=False):
        if before is not None and after is not None and after - before != candidate.turns:
            raise MissedCrossing(f"Z changes from {before} to {after} at the factor {candidate.factor}")


def _merge(
    edges: Sequence[_Candidate], uppers: Sequence[_Candidate | None], counts: Sequence[int | None]
) -> tuple[FactorRange, ...]:
    """Join neighbouring ranges with the same Z."""
    ranges: list[FactorRange] = []
    for low, up, found in zip(edges, uppers, counts, strict=False):
        if found is None:
            continue
        upper, upper_omega = (up.factor, up.omega) if up else (None, None)
        last = ranges[-1] if ranges else None
        if last and last.unstable == found and last.upper == low.factor:
            ranges[-1] = FactorRange(last.lower, upper, found, last.lower_omega, upper_omega)
        else:
            ranges.append(FactorRange(low.factor, upper, found, low.omega, upper_omega))
    return tuple(ranges)
