"""From what a stretch stands for to how the terminal shows it.

Only the sixteen colours of the user's own palette are used, on the user's own background. Nothing is told by colour
alone: what matters also differs in words, in marks, or in bold and reverse, and with ``NO_COLOR`` only those are left.
"""

from __future__ import annotations

import os
from collections.abc import Mapping

from rich.style import Style

from encircle.tui.roles import Role
from encircle.tui.sheet import Ink

# colour, attributes: attributes alone must tell apart what a reader must not confuse
_LOOKS: Mapping[Ink | Role, tuple[str, str]] = {
    Ink.PLAIN: ("", ""),
    Ink.QUIET: ("", "dim"),
    Ink.STRONG: ("", "bold"),
    Ink.HEADING: ("", ""),
    Ink.KEY: ("cyan", "bold"),
    Ink.CHOSEN: ("cyan", "bold"),
    Ink.GOOD: ("green", ""),
    Ink.BAD: ("red", "bold"),
    Ink.ALARM: ("red", "bold reverse"),
    Ink.DOUBT: ("yellow", "bold underline"),
    Ink.TRIAL: ("magenta", "bold"),
    Role.BLANK: ("", ""),
    Role.GRID: ("", "dim"),
    Role.AXIS: ("", "dim"),
    Role.LABEL: ("", ""),
    Role.UNIT_CIRCLE: ("blue", ""),
    Role.LIMIT: ("red", ""),
    Role.FORBIDDEN: ("red", ""),
    Role.BAND: ("yellow", "dim"),
    Role.MIRROR: ("green", "dim"),
    Role.CURVE_BEFORE: ("magenta", "dim"),
    Role.SENSITIVITY: ("cyan", ""),
    Role.COMPLEMENTARY: ("blue", ""),
    Role.CURVE: ("green", "bold"),
    Role.DIRECTION: ("green", "bold"),
    Role.MARGIN: ("yellow", "bold"),
    Role.CROSSOVER: ("yellow", "bold"),
    Role.CURSOR: ("", "bold"),
    Role.CRITICAL: ("red", "bold"),
}


def palette(*, colour: bool) -> Mapping[Ink | Role, Style]:
    """A style for every ink and role; without ``colour`` only bold, dim, underline and reverse."""
    return {name: Style.parse(f"{attributes} {hue if colour else ''}".strip() or "none")
            for name, (hue, attributes) in _LOOKS.items()}  # fmt: skip


def colour_wanted(environment: Mapping[str, str] = os.environ) -> bool:
    """False where the user has set ``NO_COLOR`` to anything but nothing."""
    return not environment.get("NO_COLOR")
