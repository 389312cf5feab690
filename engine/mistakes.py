"""The mistakes and warnings found in one project file, each a sentence that names file, table and key."""

from __future__ import annotations

from dataclasses import dataclass, field

from encircle.engine.errors import Problem, ProjectError

MOST_LISTED = 50


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
    _more_errors: int = 0
    _more_warnings: int = 0

    @property
    def full(self) -> bool:
        """Whether further errors are only counted."""
        return len(self.errors) >= MOST_LISTED

    def error(self, code: str, where: str, place: Place, sentence: str) -> None:
        """Note a mistake; ``sentence`` follows the file's name and the title of its table."""
        if self.full:
            self._more_errors += 1
        else:
            self.errors.append(self._problem(code, where, place, sentence))

    def warn(self, code: str, where: str, place: Place, sentence: str) -> None:
        """Note something that is allowed but rarely meant."""
        if len(self.warnings) >= MOST_LISTED:
            self._more_warnings += 1
        else:
            self.warnings.append(self._problem(code, where, place, sentence))

    def all_warnings(self) -> tuple[Problem, ...]:
        """Every warning, and how many were only counted."""
        return (*self.warnings, *self._rest("warnings", self._more_warnings))

    def raise_errors(self) -> None:
        """Raise ProjectError with everything found, if anything was."""
        if self.errors:
            raise ProjectError(*self.errors, *self._rest("mistakes", self._more_errors))

    def _problem(self, code: str, where: str, place: Place, sentence: str) -> Problem:
        start = f"{self.file}, {place.title}" if place.title else self.file
        return Problem(code, where, f"{start}: {sentence}")

    def _rest(self, what: str, count: int) -> tuple[Problem, ...]:
        return (Problem("more", "", f"{self.file}: {count} further {what} are not listed"),) if count else ()
