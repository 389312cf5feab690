"""Names: their spelling, the words that are taken, and the one namespace of a project.

Blocks, signals, inputs and shared parameters live in one namespace. ``s``, ``pi``, the functions of formulas and the
block keys name nothing else.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Final

from encircle.engine.formula import FUNCTIONS
from encircle.engine.text import quoted

FORMULA_KEYS: Final = ("formula", "unstable_poles", "note")
COEFFICIENT_KEYS: Final = ("numerator", "denominator", "dead_time", "note")
ROOT_KEYS: Final = ("zeros", "poles", "leading_gain", "dead_time", "note")
STATE_SPACE_KEYS: Final = ("state_space", "dead_time", "note")
MEASURED_KEYS: Final = (
    "measured",
    "unstable_poles",
    "integrators",
    "roll_off",
    "between_lines",
    "columns",
    "note",
)
BLOCK_KEYS: Final = tuple(
    dict.fromkeys((*FORMULA_KEYS, *COEFFICIENT_KEYS, *ROOT_KEYS, *STATE_SPACE_KEYS, *MEASURED_KEYS))
)

_LONGEST = 80
_SPELLING = re.compile(r"[A-Za-z_][A-Za-z0-9_]*")


def complaint_about(name: str) -> str | None:
    """Why ``name`` cannot be a name, as a clause that follows it; None if it can."""
    if not _SPELLING.fullmatch(name):
        return "is no name: names are made of letters A to Z, a to z, digits and `_`, and start with no digit"
    if len(name) > _LONGEST:
        return f"has {len(name)} characters, and a name may have {_LONGEST}"
    if name == "s":
        return "is the Laplace variable and names nothing else"
    if name == "pi":
        return "is the number 3.14159… and names nothing else"
    if name in FUNCTIONS:
        return "is a function of formulas and names nothing else"
    if name in BLOCK_KEYS:
        return "is a key of blocks and names nothing else"
    return None


@dataclass(frozen=True, slots=True)
class NamedThing:
    """A name given in the file: what it names, as in "a block", and where."""

    name: str
    kind: str
    where: str


def repeated(things: Iterable[NamedThing]) -> list[tuple[NamedThing, NamedThing]]:
    """Every thing whose name an earlier one has, with that earlier one."""
    first: dict[str, NamedThing] = {}
    return [(first[thing.name], thing) for thing in things if first.setdefault(thing.name, thing) is not thing]


def twice(earlier: NamedThing, later: NamedThing) -> str:
    """A sentence on a name given twice."""
    if earlier.kind == later.kind:
        return f"{quoted(later.name)} names {later.kind} twice; give each its own name"
    return f"{quoted(later.name)} names {later.kind}, and {earlier.kind} already ({earlier.where}); rename one of them"
