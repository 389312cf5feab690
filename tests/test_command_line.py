"""The command line: what it takes, what it refuses and how, exit statuses, and outputs that fail."""

from __future__ import annotations

import json
import os
import pty
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pytest
from result_values import CURRENT, DRIVE, MISSING, SPEED, UNDECIDED

import encircle.engine
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.result import Result
from encircle.engine.version import VERSION
from encircle.tui.arguments import Arguments, UsageError, parse_arguments
from encircle.tui.command_line import main

DRIVE_FILE = Path(__file__).parent.parent / "examples" / "drive" / "drive.toml"
COMMAND = (sys.executable, "-m", "encircle.tui.command_line")
ESCAPE = "\x1b"


@dataclass
class StandInProject:
    """A project whose result is given beforehand."""

    result: Result
    loop_names: tuple[str, ...] = ("current", "speed")

    def check(self, names: Sequence[str] | None = None) -> Result:
        loops = tuple(loop for loop in self.result.loops if names is None or loop.name in names)
        return replace(self.result, loops=loops)


Opening = Callable[[Result | Exception], None]


@pytest.fixture
def opening(monkeypatch: pytest.MonkeyPatch) -> Opening:
    """Let every file open as this result, or fail with this error."""

    def prepare(outcome: Result | Exception) -> None:
        def open_project(path: str) -> StandInProject:
            if isinstance(outcome, Exception):
                raise outcome
            return StandInProject(outcome)

        monkeypatch.setattr(encircle.engine, "open_project", open_project)

    return prepare


def run(*words: str, **options: Any) -> subprocess.CompletedProcess[str]:
    settings = {"capture_output": True, "text": True, "timeout": 60, "stdin": subprocess.DEVNULL} | options
    return subprocess.run([*COMMAND, *words], check=False, **settings)


def assert_no_traceback(finished: subprocess.CompletedProcess[str]) -> None:
    assert "Traceback" not in (finished.stderr or "")
    assert "Exception ignored" not in (finished.stderr or "")


# --- words ------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("words", "meaning"),
    [
        (["drive.toml"], Arguments("screen", "drive.toml")),
        (["./check"], Arguments("screen", "./check")),
        (["--", "check"], Arguments("screen", "check")),
        (["--", "-odd.toml"], Arguments("screen", "-odd.toml")),
        (["check", "drive.toml"], Arguments("check", "drive.toml")),
        (["check", "./check"], Arguments("check", "./check")),
        (["check", "check"], Arguments("check", "check")),
        (["check", "--json", "a"], Arguments("check", "a", json=True)),
        (["--json", "check", "a"], Arguments("check", "a", json=True)),
        (["check", "a", "--loop", "x", "--loop=y", "--loop", "x"], Arguments("check", "a", loops=("x", "y"))),
        (["check", "--", "--json"], Arguments("check", "--json")),
        (["--help"], Arguments("help")),
        (["check", "-h"], Arguments("help")),
        (["nonsense", "--version"], Arguments("version")),
    ],
)
def test_words_are_understood(words: list[str], meaning: Arguments) -> None:
    assert parse_arguments(words) == meaning


@pytest.mark.parametrize(
    ("words", "part"),
    [
        ([], "name a project file"),
        (["check"], "a file named check is opened as ./check"),
        ([""], "name a project file"),
        (["a", "b"], "b is one word too many"),
        (["check", "a", "b"], "b is one word too many"),
        (["--jsn", "a"], "--jsn is not known"),
        (["check", "a", "--loop"], "needs the name of a loop"),
        (["check", "a", "--loop", "--json"], "needs the name of a loop"),
        (["check", "a", "--loop="], "needs the name of a loop"),
        (["a", "--json"], "belong to the report: encircle check FILE"),
        (["a", "--loop", "x"], "belong to the report: encircle check FILE"),
        (["check", "a\0b"], "null character"),
    ],
)
def test_words_that_mean_nothing_are_refused_in_one_sentence(
    words: list[str], part: str, capsys: pytest.CaptureFixture[str]
) -> None:
    with pytest.raises(UsageError, match=part):
        parse_arguments(words)
    assert main(words) == 2
    captured = capsys.readouterr()
    assert part in captured.err
    assert captured.err.startswith("encircle: ")
    assert captured.err.count("\n") == 1


# --- check ------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("result", "status"),
    [
        (DRIVE, 0),
        (replace(DRIVE, result="fail", loops=(MISSING,)), 1),
        (replace(DRIVE, result="undecided", loops=(UNDECIDED,)), 3),
    ],
)
def test_the_exit_status_is_the_result(
    result: Result, status: int, opening: Opening, capsys: pytest.CaptureFixture[str]
) -> None:
    opening(result)
    assert main(["check", "rewinder.toml"]) == status
    printed = capsys.readouterr()
    assert printed.out.startswith("Rewinder drive\n")
    assert printed.err == ""
    assert main(["check", "rewinder.toml", "--json"]) == status
    assert json.loads(capsys.readouterr().out)["result"] == result.result


def test_loop_narrows_the_report(opening: Opening, capsys: pytest.CaptureFixture[str]) -> None:
    opening(DRIVE)
    assert main(["check", "x", "--json", "--loop", "speed"]) == 0
    assert [loop["name"] for loop in json.loads(capsys.readouterr().out)["loops"]] == [SPEED.name]
    assert main(["check", "x", "--loop", "current"]) == 0
    assert "speed_error" not in capsys.readouterr().out


def test_an_unknown_loop_is_named_with_the_nearest_and_all_known_ones(
    opening: Opening, capsys: pytest.CaptureFixture[str]
) -> None:
    opening(DRIVE)
    assert main(["check", "x", "--loop", "sped", "--loop", f"q{ESCAPE}"]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 2
    assert lines[0].startswith("encircle: no loop is named `sped`; the nearest known name is `speed`")
    assert lines[0].endswith("the loops are `current` and `speed`")
    assert ESCAPE not in lines[1]


def test_every_mistake_is_a_line_and_an_entry(opening: Opening, capsys: pytest.CaptureFixture[str]) -> None:
    problems = (
        Problem("a-code", "blocks.a", "f.toml, [blocks.a]: one"),
        Problem("b", "", f"f.toml: two {ESCAPE}[2J\nx"),
    )
    opening(ProjectError(*problems))
    assert main(["check", "f.toml"]) == 2
    assert capsys.readouterr().err.splitlines() == ["f.toml, [blocks.a]: one", "f.toml: two \\x1b[2J x"]
    assert main(["check", "f.toml", "--json"]) == 2
    captured = capsys.readouterr()
    assert json.loads(captured.out) == {
        "format": 1,
        "errors": [
            {"code": "a-code", "where": "blocks.a", "message": "f.toml, [blocks.a]: one"},
            {"code": "b", "where": "", "message": f"f.toml: two {ESCAPE}[2J\nx"},
        ],
    }
    assert captured.err.count("\n") == 2


def test_a_misused_option_is_an_errors_object_too(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", "--json"]) == 2
    assert json.loads(capsys.readouterr().out)["errors"][0]["code"] == "usage"


def test_a_fault_of_the_program_is_no_verdict(opening: Opening, capsys: pytest.CaptureFixture[str]) -> None:
    opening(ZeroDivisionError("division by zero"))
    assert main(["check", "x", "--json"]) == 70
    captured = capsys.readouterr()
    assert captured.err.startswith(
        "encircle: internal fault, no verdict was reached (ZeroDivisionError at test_command"
    )
    assert json.loads(captured.out)["errors"][0]["code"] == "internal-fault"


def test_a_number_that_is_not_finite_is_a_fault_and_nothing_is_printed(
    opening: Opening, capsys: pytest.CaptureFixture[str]
) -> None:
    opening(replace(DRIVE, loops=(replace(CURRENT, gain=float("nan")),)))
    assert main(["check", "x", "--json"]) == 70
    assert "errors" in json.loads(capsys.readouterr().out)


def test_ctrl_c_ends_with_130(opening: Opening, capfd: pytest.CaptureFixture[str]) -> None:
    opening(DRIVE)

    def interrupted(path: str) -> None:
        raise KeyboardInterrupt

    encircle.engine.open_project = interrupted  # type: ignore[assignment]  # undone by the fixture
    assert main(["check", "x"]) == 130
    assert capfd.readouterr().err == "encircle: interrupted\n"


# --- whole processes --------------------------------------------------------------------------------------------------


def test_help_and_version() -> None:
    shown = run("--help")
    assert shown.returncode == 0
    assert all(word in shown.stdout for word in ("encircle FILE", "encircle check FILE", "--json", "--loop NAME"))
    assert "no clearance to energise a machine" in " ".join(shown.stdout.split())
    assert max(map(len, shown.stdout.splitlines())) <= 110
    assert run("--version").stdout == f"encircle {VERSION}\n"


@pytest.mark.parametrize("kind", ["missing", "directory", "forbidden", "binary", "empty name"])
def test_files_that_cannot_be_read_are_one_sentence(kind: str, tmp_path: Path) -> None:
    file = tmp_path / "project.toml"
    if kind == "directory":
        file.mkdir()
    elif kind in ("forbidden", "binary"):
        file.write_bytes(b"\x00\xff\xfe" * 50)
    if kind == "forbidden":
        file.chmod(0)
    finished = run("check", "" if kind == "empty name" else str(file))
    assert finished.returncode == 2
    assert finished.stdout == ""
    assert finished.stderr.count("\n") == 1
    assert_no_traceback(finished)


def test_the_drive_example_checks_alike_as_text_and_as_json() -> None:
    text, written = run("check", str(DRIVE_FILE)), run("check", str(DRIVE_FILE), "--json")
    result = json.loads(written.stdout)
    assert text.returncode == written.returncode == {"pass": 0, "fail": 1, "undecided": 3}[result["result"]]
    assert all(loop["name"] in text.stdout for loop in result["loops"])
    assert [loop["name"] for loop in result["loops"]] == ["current", "speed", "position"]
    assert "no clearance to energise a machine" in " ".join(text.stdout.split())
    assert ESCAPE not in text.stdout


def test_a_reader_who_leaves_changes_neither_status_nor_peace() -> None:
    whole = run("check", str(DRIVE_FILE), "--json")
    reading, writing = os.pipe()
    os.close(reading)
    finished = run("check", str(DRIVE_FILE), "--json", capture_output=False, stdout=writing, stderr=subprocess.PIPE)
    os.close(writing)
    assert finished.returncode == whole.returncode
    assert finished.stderr == ""


def test_closed_outputs_change_neither_status_nor_peace() -> None:
    whole = run("check", str(DRIVE_FILE))
    script = f'{" ".join(COMMAND)} check "{DRIVE_FILE}"'
    closed = subprocess.run(["sh", "-c", f"{script} >&-"], stderr=subprocess.PIPE, text=True, check=False, timeout=60)
    assert (closed.returncode, closed.stderr) == (whole.returncode, "")
    missing = subprocess.run(["sh", "-c", f"{' '.join(COMMAND)} check nowhere 2>&-"], check=False, timeout=60)
    assert missing.returncode == 2


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="there is no /dev/full here")
def test_a_full_disk_is_told() -> None:
    with open("/dev/full", "w") as full:
        finished = run("--help", capture_output=False, stdout=full, stderr=subprocess.PIPE)
    assert finished.returncode == 2
    assert finished.stderr == "encircle: the report could not be written: no space left on device\n"


def test_an_encoding_without_arrows_gets_ascii() -> None:
    finished = run("check", str(DRIVE_FILE), env=os.environ | {"PYTHONIOENCODING": "ascii"})
    assert finished.stdout.isascii()
    assert "->" in finished.stdout
    assert_no_traceback(finished)
    assert run("check", str(DRIVE_FILE), env=os.environ | {"LC_ALL": "C"}).stdout == finished.stdout


def test_ctrl_c_in_a_process(tmp_path: Path) -> None:
    fifo = tmp_path / "script.py"
    fifo.write_text(
        "import sys, time, encircle.engine\n"
        "from encircle.tui.command_line import main\n"
        "def slow(path):\n    print('started', flush=True)\n    time.sleep(60)\n"
        "encircle.engine.open_project = slow\n"
        "sys.exit(main(['check', 'x']))\n"
    )
    process = subprocess.Popen([sys.executable, str(fifo)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline() == "started\n"
    process.send_signal(signal.SIGINT)
    _, complaint = process.communicate(timeout=30)
    assert (process.returncode, complaint) == (130, "encircle: interrupted\n")


# --- terminals --------------------------------------------------------------------------------------------------------


def run_in_terminal(*words: str, **environment: str) -> tuple[int, str]:
    """Run in a pseudo-terminal of 80 columns; the exit status and all that was written."""
    master, slave = pty.openpty()
    settings = {key: value for key, value in os.environ.items() if key not in ("NO_COLOR", "COLUMNS", "LC_ALL")}
    process = subprocess.Popen([*COMMAND, *words], stdin=slave, stdout=slave, stderr=slave, env=settings | environment)
    os.close(slave)
    written = b""
    deadline = time.monotonic() + 60
    while time.monotonic() < deadline:
        try:
            chunk = os.read(master, 65536)
        except OSError:  # Linux reports the end of a terminal as an input error
            break
        if not chunk:
            break
        written += chunk
    os.close(master)
    return process.wait(timeout=30), written.decode()


def test_without_a_terminal_the_screen_refuses_and_names_the_report() -> None:
    finished = run(str(DRIVE_FILE))
    assert finished.returncode == 2
    assert finished.stdout == ""
    assert "the screen needs a terminal" in finished.stderr
    assert "`encircle check FILE`" in finished.stderr
    assert finished.stderr.count("\n") == 1


@pytest.mark.parametrize("term", ["dumb", ""])
def test_a_terminal_that_cannot_move_its_cursor_is_refused(term: str) -> None:
    status, written = run_in_terminal(str(DRIVE_FILE), TERM=term)
    assert status == 2
    assert "encircle check" in written
    assert ESCAPE not in written


def test_colour_only_on_terminals_that_want_it() -> None:
    status, coloured = run_in_terminal("check", str(DRIVE_FILE), TERM="xterm-256color")
    assert f"{ESCAPE}[1m" in coloured
    for wish in ({"NO_COLOR": "1", "TERM": "xterm-256color"}, {"TERM": "dumb"}):
        same_status, plain = run_in_terminal("check", str(DRIVE_FILE), **wish)
        assert ESCAPE not in plain
        assert same_status == status
