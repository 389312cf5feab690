"""The words of the command line, read by hand: a library for this would cost more time than the rest of the start."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal

Action = Literal["screen", "check", "help", "version"]

HELP = """\
encircle counts, with proof, the encirclements of -1 for nested feedback loops.

  encircle FILE                    open the screen on a project file
  encircle check FILE              print every loop's verdict, counts, evidence and margins
      --json                       print them as a JSON object instead
      --loop NAME                  report on this loop only (may be repeated)
  encircle --help, -h              this page
  encircle --version               the version

A file whose name is check or begins with - is given as ./check, ./-name.

Exit status of check
  0  pass: every loop is stable or as declared, every limit is met, no unstable pole is left
  1  fail: a loop is unstable, a limit is missed, or an unstable pole is left
  3  undecided: nothing fails, something cannot be decided
  2  the input cannot be used; one message a line on standard error, with --json also on standard output
 70  a fault of the program itself: no verdict was reached          130  interrupted by ctrl+c

NO_COLOR switches colour off; LC_ALL=C keeps the report to ASCII; COLUMNS sets its width.

A verdict on a model is no clearance to energise a machine: local codes, the applicable standard and a
licensed or responsible engineer decide.
"""


class UsageError(ValueError):
    """The command line cannot be understood; the message is one sentence."""


@dataclass(frozen=True, slots=True)
class Arguments:
    """What was asked for; ``loops`` empty means all of them."""

    action: Action
    file: str = ""
    json: bool = False
    loops: tuple[str, ...] = ()


@dataclass(slots=True)
class _Words:
    """Options and plain words as they come in; ``check`` is a command only in first place and before ``--``."""

    plain: list[str] = field(default_factory=list)
    loops: list[str] = field(default_factory=list)
    json: bool = False
    literal: bool = False
    command: bool = False


def parse_arguments(words: Sequence[str]) -> Arguments:
    """Raises ``UsageError``."""
    options = list(words[: words.index("--")] if "--" in words else words)
    if "--help" in options or "-h" in options:
        return Arguments("help")
    if "--version" in options:
        return Arguments("version")
    return _command(_sorted_words(words))


def _sorted_words(words: Sequence[str]) -> _Words:
    """Plain words apart from options."""
    found = _Words()
    remaining = iter(words)
    for word in remaining:
        if found.literal or not word.startswith("-"):
            _take_plain(word, found)
        elif word == "--":
            found.literal = True
        elif word == "--json":
            found.json = True
        elif word == "--loop" or word.startswith("--loop="):
            found.loops.append(_loop_name(word, next(remaining, "") if word == "--loop" else word[len("--loop=") :]))
        else:
            raise UsageError(f"the option {word} is not known; encircle --help lists the options")
    return found


def _take_plain(word: str, found: _Words) -> None:
    if word == "check" and not (found.plain or found.command or found.literal):
        found.command = True
    else:
        found.plain.append(word)


def _loop_name(option: str, name: str) -> str:
    if not name or name.startswith("--"):
        raise UsageError(f"{option.rstrip('=')} needs the name of a loop after it: --loop NAME")
    return name


def _command(found: _Words) -> Arguments:
    """The words as one of the two commands."""
    usage = "encircle check FILE" if found.command else "encircle FILE"
    if not found.plain or not found.plain[0]:
        advice = "; a file named check is opened as ./check" if found.command else ", or encircle check FILE"
        raise UsageError(f"name a project file: {usage}{advice}")
    if len(found.plain) > 1:
        raise UsageError(f"one project file at a time: {usage}; {found.plain[1]} is one word too many")
    if "\0" in found.plain[0]:
        raise UsageError("the name of a file cannot hold a null character")
    if not found.command and (found.json or found.loops):
        raise UsageError("--json and --loop belong to the report: encircle check FILE")
    return Arguments(
        "check" if found.command else "screen", found.plain[0], found.json, tuple(dict.fromkeys(found.loops))
    )
