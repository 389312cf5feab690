"""Which limit of a loop leaves the least room."""

from __future__ import annotations

import math

from encircle.engine.result import LimitFinding, LoopResult
from encircle.tui.wording import LIMIT_WORDS


def room(finding: LimitFinding) -> float:
    """Distance from what was found to the limit, as a fraction of the limit; below 0 where it is missed.

    Infinite where no finite limit exists; a limit that cannot be judged, or has nothing to be judged on, has no room.
    """
    if finding.found is None:
        return math.inf if finding.met else -math.inf
    distance = finding.found - finding.required
    return (-distance if LIMIT_WORDS[finding.name].ceiling else distance) / finding.required


def tightest_limit(loop: LoopResult) -> LimitFinding | None:
    """The limit with the least room, a missed one before all others; ``None`` where no limit is set."""
    return min(loop.limits, key=lambda finding: (finding.met is not False, room(finding)), default=None)


def missed_limits(loop: LoopResult) -> tuple[LimitFinding, ...]:
    """The limits that are not met."""
    return tuple(finding for finding in loop.limits if finding.met is False)
