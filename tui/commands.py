"""The commands: ``encircle FILE`` opens the screen, ``encircle check FILE`` prints what is known and exits.

What each command needs is imported when it runs, so that none waits for the other's libraries.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

from encircle.tui.arguments import HELP, Arguments, UsageError, parse_arguments
from encircle.tui.output import OutputError, complain, show

if TYPE_CHECKING:
    from encircle.engine.errors import Problem
    from encircle.engine.result import Result

EXIT_STATUS = {"pass": 0, "fail": 1, "undecided": 3}
UNUSABLE_INPUT = 2
INTERNAL_FAULT = 70


def run(words: Sequence[str]) -> int:
    """Do what the words of the command line ask for; the exit status of the process."""
    try:
        return _run_reporting_faults(words)
    except OutputError as error:
        complain(f"encircle: {error}")
        return UNUSABLE_INPUT


def _run_reporting_faults(words: Sequence[str]) -> int:
    """A fault of the program becomes a sentence and a status of its own: Python's, 1, would read as `fail`."""
    try:
        return _run(words)
    except OutputError:
        raise
    except Exception as error:
        _refuse("internal-fault", _fault(error), "--json" in words)
        return INTERNAL_FAULT


def _run(words: Sequence[str]) -> int:
    try:
        arguments = parse_arguments(words)
    except UsageError as error:
        return _refuse("usage", str(error), "--json" in words)
    if arguments.action in ("help", "version"):
        show(HELP if arguments.action == "help" else _version() + "\n")
        return 0
    return _check(arguments) if arguments.action == "check" else _screen(arguments)


def _version() -> str:
    from encircle.engine.version import VERSION

    return f"encircle {VERSION}"


def _check(arguments: Arguments) -> int:
    """Print the report, or the errors; the exit status says the result."""
    from encircle.engine import ProjectError, open_project

    try:
        project = open_project(arguments.file)
        _require_loops(arguments.loops, project.loop_names)
        result = project.check(arguments.loops or None)
    except ProjectError as error:
        return _report_problems(error.problems, arguments.json)
    show(_result_text(result, arguments.json))
    return EXIT_STATUS[result.result]


def _result_text(result: Result, as_json: bool) -> str:
    if as_json:
        from encircle.tui.result_json import result_json

        return result_json(result) + "\n"
    from encircle.tui.check_table import check_table
    from encircle.tui.plain_text import layout_for

    return check_table(result, layout_for(sys.stdout))


def _screen(arguments: Arguments) -> int:
    """Open the screen, where there is a terminal that can carry it."""
    from encircle.engine import ProjectError, open_project
    from encircle.tui.terminal_session import why_no_screen

    obstacle = why_no_screen(sys.stdin, sys.stderr)
    if obstacle is not None:
        return _refuse("no-terminal", obstacle, False)
    try:
        project = open_project(arguments.file)
    except ProjectError as error:
        return _report_problems(error.problems, False)
    from encircle.tui.app import run_screen

    return run_screen(project)


def _require_loops(wanted: Iterable[str], known: Sequence[str]) -> None:
    """Every name given with --loop must be a loop of the project."""
    from encircle.engine.errors import Problem, ProjectError
    from encircle.engine.text import listed, nearest_known, quoted

    unknown = [
        f"encircle: no loop is named {quoted(name)}{nearest_known(name, known)}; the loops are {listed(known)}"
        for name in wanted
        if name not in known
    ]
    if unknown:
        raise ProjectError(*(Problem("unknown-loop", "--loop", message) for message in unknown))


def _refuse(code: str, message: str, as_json: bool) -> int:
    """Report what is no fault of the project file, under the program's name."""
    from encircle.engine.errors import Problem

    return _report_problems([Problem(code, "", f"encircle: {message}")], as_json)


def _report_problems(problems: Sequence[Problem], as_json: bool) -> int:
    """One message a line on standard error, and the errors object on standard output when JSON was asked for."""
    complain(*(problem.message for problem in problems))
    if as_json:
        from encircle.tui.result_json import errors_json

        show(errors_json(problems) + "\n")
    return UNUSABLE_INPUT


def _fault(error: Exception) -> str:
    """A fault of the program in one line, with the place where it happened."""
    trace = error.__traceback__
    while trace is not None and trace.tb_next is not None:
        trace = trace.tb_next
    place = f" at {os.path.basename(trace.tb_frame.f_code.co_filename)}:{trace.tb_lineno}" if trace else ""
    words = f": {error}" if str(error) else ""
    return f"internal fault, no verdict was reached ({type(error).__name__}{place}{words})"
