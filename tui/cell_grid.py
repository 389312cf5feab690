"""A grid of character cells, each with a role, and its rows as runs of equal role."""

from __future__ import annotations

from itertools import groupby

from encircle.tui.glyphs import plain_table
from encircle.tui.roles import Role

Row = tuple[tuple[str, Role], ...]


class CellGrid:
    """Cells of one character; rows count from the top. Writing outside the grid is cut off."""

    def __init__(self, width: int, height: int) -> None:
        self.width = width
        self.height = height
        self._characters = [[" "] * width for _ in range(height)]
        self._roles = [[Role.BLANK] * width for _ in range(height)]

    def put(self, row: int, column: int, character: str, role: Role) -> None:
        """Set one cell."""
        if 0 <= row < self.height and 0 <= column < self.width:
            self._characters[row][column] = character
            self._roles[row][column] = role

    def put_free(self, row: int, column: int, character: str, role: Role, over: tuple[Role, ...] = ()) -> None:
        """Set one cell if nothing has been put there, or something of a role that may be written over."""
        if self._roles[row][column] in (Role.BLANK, *over):
            self.put(row, column, character, role)

    def write(self, row: int, column: int, text: str, role: Role) -> None:
        """Set the cells from the given one to the right."""
        for place, character in enumerate(text, column):
            self.put(row, place, character, role)

    def filled(self, row: int, column: int, length: int) -> int:
        """How many of the cells from the given one to the right are not empty."""
        start = max(column, 0)
        return sum(character != " " for character in self._characters[row][start : max(column + length, start)])

    def rows(self, *, ascii_only: bool) -> tuple[Row, ...]:
        """Each row as runs (text, role)."""
        lines = ["".join(characters) for characters in self._characters]
        if ascii_only:
            lines = [line.translate(plain_table()) for line in lines]
        return tuple(tuple(_runs(line, roles)) for line, roles in zip(lines, self._roles, strict=True))


def _runs(text: str, roles: list[Role]) -> list[tuple[str, Role]]:
    runs, start = [], 0
    for role, members in groupby(roles):
        stop = start + len(list(members))
        runs.append((text[start:stop], role))
        start = stop
    return runs
