"""The mistakes and warnings found in one project file, each a sentence that names file, table and key."""

from __future__ import annotations

from dataclasses import dataclass, field

from encircle.engine.errors import Problem, ProjectError

MOST_MISTAKES = 50


@dataclass(frozen=True, slots=True)
class Place:
    """A table of the project file: ``where`` as in ``blocks.rotor``, ``title`` as in ``[blocks.rotor]``."""

    where: str = ""
    title: str = ""

    def key(self, key: str) -> str:
        """The path of a key in this table."""
        return f"{self.where}.{key}" if self.where else key


@dataclass(slots=True)
class Mistakes:
    """A growing list; ``file`` is the project file's name as messages show it."""

    file: str
    errors: list[Problem] = field(default_factory=list)
    warnings: list[Problem] = field(default_factory=list)

    def error(self, code: str, where: str, place: Place, sentence: str) -> None:
        """Note a mistake; ``sentence`` follows the file's name and the title of its table.

        Raises ProjectError with all mistakes so far where there are so many that reading on is of no use.
        """
        self.errors.append(self._problem(code, where, place, sentence))
        if len(self.errors) == MOST_MISTAKES:
            more = f"{self.file}: reading stops after {MOST_MISTAKES} mistakes; mend these first"
            raise ProjectError(*self.errors, Problem("too-many-mistakes", "", more))

    def warn(self, code: str, where: str, place: Place, sentence: str) -> None:
        """Note something that is allowed but rarely meant."""
        self.warnings.append(self._problem(code, where, place, sentence))

    def raise_errors(self) -> None:
        """Raise ProjectError with everything found, if anything was."""
        if self.errors:
            raise ProjectError(*self.errors)

    def _problem(self, code: str, where: str, place: Place, sentence: str) -> Problem:
        start = f"{self.file}, {place.title}" if place.title else self.file
        return Problem(code, where, f"{start}: {sentence}")
