"""The verdict on a loop and on the whole project."""

from __future__ import annotations

from collections.abc import Iterable

from encircle.engine.result import LoopResult, Outcome, Verdict


def loop_verdict(
    unstable: int | None,
    on_axis: int,
    leaves_unstable: int | None,
    leaves_on_axis: int | None,
    contained_later: bool,
) -> Verdict:
    """The first that fits of unstable, undecided, stable, as_declared.

    ``unstable`` is Z, ``on_axis`` the number a of poles left on the axis; ``contained_later``: a later loop's part
    contains those poles.
    """
    if unstable is not None and unstable > 0 and unstable != leaves_unstable:
        return "unstable"
    if unstable is None:
        return "undecided"
    if on_axis > 0 and leaves_on_axis is None and not contained_later:
        return "undecided"
    if on_axis > 0 and leaves_on_axis is not None and on_axis != leaves_on_axis:
        return "undecided"
    if unstable == 0 and (on_axis == 0 or leaves_on_axis is None):
        return "stable"
    return "as_declared"


def outcome(loops: Iterable[LoopResult], unstable_all_closed: int | None) -> Outcome:
    """``fail`` if anything fails, else ``undecided`` if anything cannot be decided, else ``pass``."""
    loops = tuple(loops)
    findings = [limit.met for loop in loops for limit in loop.limits]
    if any(loop.verdict == "unstable" for loop in loops) or False in findings or (unstable_all_closed or 0) > 0:
        return "fail"
    if any(loop.verdict == "undecided" for loop in loops) or None in findings or unstable_all_closed is None:
        return "undecided"
    return "pass"
