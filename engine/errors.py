"""Problems found in a user's input, collected and reported together."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Problem:
    """One mistake or one warning: a stable code, the place in the project file, one clear sentence.

    ``where`` names the table and key, e.g. ``blocks.rotor.J``; empty for the file as a whole.
    """

    code: str
    where: str
    message: str

    def __str__(self) -> str:
        return f"{self.where}: {self.message}" if self.where else self.message


class ProjectError(ValueError):
    """The input cannot be used; every mistake found is listed in ``problems``."""

    def __init__(self, *problems: Problem) -> None:
        super().__init__("\n".join(str(problem) for problem in problems))
        self.problems = problems

    def __reduce__(self) -> tuple[type[ProjectError], tuple[Problem, ...]]:
        return (type(self), self.problems)
