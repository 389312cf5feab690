"""A project file and the problems found in changed copies of it, for the tests of the file format."""

from __future__ import annotations

from pathlib import Path

import pytest

from encircle.engine.declarations import Declarations
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.project_file import read_project

REWINDER = """\
format = 1
title = "Rewinder drive"
frequency_unit = "Hz"
inputs = ["speed_command", "load_torque"]

[band]
from = 0.1
to = 20000

[parameters]
kt = 0.41
ke = 0.41

[blocks.current_controller]
formula = "kp + ki/s"
kp = 8.0
ki = 3200.0
note = "gains as on the drive, 12 March"

[blocks.amplifier]
formula = "exp(-T*s) / (1 + tau*s)"
T = 90e-6
tau = 20e-6

[blocks.coil]
numerator = [1.0]
denominator = [3.4e-3, 0.82]

[blocks.rotor]
formula = "1/(J*s)"
J = 1.8e-3

[blocks.speed_controller]
formula = "kp + ki/s"
kp = 0.35
ki = 9.0

[blocks.speed_filter]
formula = "1/(1 + tf*s)"
tf = 4e-4

[signals]
current_error   = "current_command - current"
voltage         = "amplifier * current_controller * current_error"
current         = "coil * (voltage - ke*speed)"
speed           = "rotor * (kt*current - load_torque)"
current_command = "speed_controller * speed_error"
speed_error     = "speed_command - speed_filter*speed"

[limits]
gain_margin_db = 6
phase_margin_deg = 45

[[loops]]
name = "current"
cut = "current_error"

[[loops]]
name = "speed"
cut = "speed_error"
gain = 1.0
limits = { phase_margin_deg = 50, modulus_margin = 0.5 }
"""

# The coil and what can stand in its place: one table of keys.
COIL = "numerator = [1.0]\ndenominator = [3.4e-3, 0.82]\n"
ROTOR = 'formula = "1/(J*s)"\nJ = 1.8e-3\n'


def changed(*changes: tuple[str, str]) -> str:
    """The project with texts replaced, each of which must stand in it."""
    text = REWINDER
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    return text


def read_text(text: str | bytes, folder: Path) -> Declarations:
    """The declarations of a project file with this content."""
    path = folder / "rewinder.toml"
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return read_project(path)


def problems_of(text: str | bytes, folder: Path) -> tuple[Problem, ...]:
    """The mistakes in it, each a printable line that names the file."""
    with pytest.raises(ProjectError) as caught:
        read_text(text, folder)
    for problem in caught.value.problems:
        assert problem.message.isprintable()
        assert problem.where.isprintable()
        assert "rewinder.toml" in problem.message
        assert len(problem.message) < 600
    return caught.value.problems


def one_problem(text: str | bytes, folder: Path) -> Problem:
    """The only mistake in it."""
    problems = problems_of(text, folder)
    assert len(problems) == 1, problems
    return problems[0]
