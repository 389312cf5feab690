"""How Z of a loop's part depends on a factor on top of its gain: ranges from 0 upward, each with a proved count.

Delta = A + g B changes its count only where g = -1/L is real and positive: at crossings of the negative real axis, at
w = 0 and at w = infinity (D-subdivision: Yu. I. Neimark; E. N. Gryazina, B. T. Polyak, Automatica 42 (2006) 13-26;
cited from memory). One count is proved inside every interval between neighbouring candidates, and each change is held
against the turns of the crossings that make it: where they disagree, a crossing was missed.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from encircle.engine.crossings import NegativeCrossing

SAME = 1e-9  # candidates closer than this (relative) are one
DIVISIONS = 16  # parts into which a range is divided to locate a change by counts
MOST_CANDIDATES = 1100  # those nearest to 1 are kept: more than a report lists, so that it can say so

Count = Callable[[Sequence[float]], list[int | None]]


@dataclass(frozen=True, slots=True)
class FactorRange:
    """Z between two factors; the frequencies (rad/s, inf at the far end) belong to the ends, ``None`` where no change
    is.
    """

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


class MissedCrossingError(ArithmeticError):
    """The crossings found do not explain the proved counts: the curve was sampled too coarsely."""


@dataclass(frozen=True, slots=True)
class Reach:
    """How far the candidates go: beyond ``lower`` and ``upper`` the loop is undecided at infinity.

    ``complete``: with dead time that turns L for ever, all changes up to this factor are known (``None``: all there
    are).
    """

    lower: float | None
    upper: float | None
    complete: float | None


def gain_ranges(
    crossings: Sequence[NegativeCrossing], reach: Reach, count: Count, present: int, strict: bool = True
) -> tuple[FactorRange, ...]:
    """Ranges of the factor with Z in each, from 0 to infinity or to where the list may stop; open ones are left out.

    ``count`` proves Z for several factors at once (``None``: undecided), ``present`` is Z at factor 1. With
    infinitely many changes the list stops after the second change above 1. Where crossings and counts disagree,
    ``strict`` raises MissedCrossingError; otherwise the counts alone locate the changes.
    """
    candidates, from_zero = _candidates(crossings, reach)
    candidates, open_above = _ends(candidates, reach)
    start = [_Candidate(0.0, None, 0)] if from_zero and reach.lower is None else []
    if reach.lower is not None:
        start = [_Candidate(reach.lower, math.inf, 0)]
    edges = [*start, *candidates]
    uppers: list[_Candidate | None] = [*edges[1:], None]
    if not open_above:
        edges, uppers = edges[:-1], uppers[:-1]
    probes = [_probe(low.factor, up.factor if up else None) for low, up in zip(edges, uppers, strict=True)]
    counts = count(probes)
    if strict:
        _check(counts, edges, probes, present)
        return _merge(edges, uppers, counts)
    return _merge(*_located(edges, uppers, probes, counts, count))


def _candidates(crossings: Sequence[NegativeCrossing], reach: Reach) -> tuple[list[_Candidate], bool]:
    """Critical factors, ascending, coincident ones joined, at most those nearest to 1; and whether none below is left
    out.
    """
    lowest, highest = reach.lower or 0.0, reach.upper if reach.upper is not None else math.inf
    if reach.complete is not None:
        highest = min(highest, reach.complete)
    found: list[_Candidate] = []
    for crossing in sorted(crossings, key=lambda c: -1.0 / c.value):
        factor = -1.0 / crossing.value
        if not lowest * (1.0 + SAME) < factor < highest * (1.0 - SAME):
            continue
        if found and factor - found[-1].factor <= SAME * factor:
            last = found[-1]
            found[-1] = _Candidate(last.factor, last.omega, last.turns + crossing.turns)
        else:
            found.append(_Candidate(factor, crossing.omega, crossing.turns))
    kept = sorted(found, key=lambda c: abs(math.log(c.factor)))[:MOST_CANDIDATES]
    kept.sort(key=lambda c: c.factor)
    return kept, not kept or kept[0] is found[0]


def _ends(candidates: list[_Candidate], reach: Reach) -> tuple[list[_Candidate], bool]:
    """Where the list stops above, and whether a last range without an upper end follows."""
    changes = [i for i, candidate in enumerate(candidates) if candidate.factor > 1.0 and candidate.turns != 0]
    if reach.complete is not None and len(changes) > 1:
        return candidates[: changes[1] + 1], False
    if reach.upper is not None:
        return [*candidates, _Candidate(reach.upper, math.inf, 0)], False
    return candidates, True


def _probe(low: float, up: float | None) -> float:
    """A factor inside an interval; 1 where it lies inside, since its count is known."""
    if low < 1.0 and (up is None or up > 1.0):
        return 1.0
    if up is None:
        return 2.0 * low
    return 0.5 * up if low == 0.0 else math.sqrt(low) * math.sqrt(up)


def _check(
    counts: Sequence[int | None], edges: Sequence[_Candidate], probes: Sequence[float], present: int
) -> None:
    for probe, found in zip(probes, counts, strict=True):
        if probe == 1.0 and found != present:
            raise MissedCrossingError("the count at the present gain differs from the one proved before")
    for before, after, edge in zip(counts, counts[1:], edges[1:], strict=False):
        if before is not None and after is not None and after - before != edge.turns:
            raise MissedCrossingError(f"Z changes from {before} to {after} at the factor {edge.factor}")


def _located(
    edges: Sequence[_Candidate],
    uppers: Sequence[_Candidate | None],
    probes: Sequence[float],
    counts: Sequence[int | None],
    count: Count,
) -> tuple[list[_Candidate], list[_Candidate | None], list[int | None]]:
    """The same ranges, with the changes that a candidate does not explain located by counts between its two probes."""
    starts, ends, found = [edges[0]], [uppers[0]], [counts[0]]
    for i in range(1, len(edges)):
        before, after = counts[i - 1], counts[i]
        if before is not None and after is not None and after - before != edges[i].turns:
            for factor, unstable in _changes(probes[i - 1], probes[i], before, count):
                change = _Candidate(factor, edges[i].omega, unstable - (found[-1] or 0))
                ends[-1] = change
                starts.append(change)
                ends.append(uppers[i])
                found.append(unstable)
        else:
            starts.append(edges[i])
            ends.append(uppers[i])
            found.append(after)
    return starts, ends, found


def _changes(low: float, high: float, before: int, count: Count) -> list[tuple[float, int]]:
    """Factors in (low, high) at which Z changes, each with the Z that follows, by repeated division in equal ratios."""
    changes: list[tuple[float, int]] = []
    start = low
    while (step := _first_change(start, high, before, count)) is not None:
        start, before = step
        changes.append(step)
    return changes


def _first_change(low: float, high: float, before: int, count: Count) -> tuple[float, int] | None:
    after: int | None = None
    while high - low > SAME * high:
        factors = [low * (high / low) ** (k / DIVISIONS) for k in range(1, DIVISIONS + 1)]
        place = next((k for k, z in enumerate(count(factors)) if z is not None and z != before), None)
        if place is None:
            return None
        after = count([factors[place]])[0]
        low, high = factors[place - 1] if place else low, factors[place]
    return None if after is None else (high, after)


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
