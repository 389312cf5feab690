"""What a stretch of a plot's text stands for. Colours and styles are chosen elsewhere, from these roles."""

from __future__ import annotations

from enum import StrEnum


class Role(StrEnum):
    """Roles in ascending priority: where two share a character cell, the later one gives the cell its colour."""

    BLANK = "blank"
    GRID = "grid"
    AXIS = "axis"
    LABEL = "label"
    UNIT_CIRCLE = "unit_circle"
    LIMIT = "limit"
    FORBIDDEN = "forbidden"
    BAND = "band"
    MIRROR = "mirror"
    CURVE_BEFORE = "curve_before"
    SENSITIVITY = "sensitivity"
    COMPLEMENTARY = "complementary"
    CURVE = "curve"
    DIRECTION = "direction"
    MARGIN = "margin"
    CROSSOVER = "crossover"
    CURSOR = "cursor"
    CRITICAL = "critical"


BY_PRIORITY: tuple[Role, ...] = tuple(Role)
PRIORITY: dict[Role, int] = {role: rank for rank, role in enumerate(Role)}
