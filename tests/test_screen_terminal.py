"""The screen in a real pseudo-terminal: it opens, answers, survives what terminals do, and leaves them whole."""

from __future__ import annotations

import re
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from pseudo_terminal import PseudoTerminal

EXAMPLE = str(Path(__file__).parent.parent / "examples" / "tank" / "tank_mended.toml")
START = ("-c", "import sys; from encircle.tui.command_line import main; sys.exit(main())", EXAMPLE)
COLOUR = re.compile(rb"\x1b\[[0-9;]*\b(3[0-7]|4[0-7]|9[0-7]|10[0-7]|38|48)\b[0-9;]*m")
LEFT_ALTERNATE_SCREEN = b"\x1b[?1049l"
SHOWED_CURSOR = b"\x1b[?25h"


@pytest.fixture
def terminal(tmp_path: Path) -> Iterator[PseudoTerminal]:
    opened = PseudoTerminal(*START, columns=120, lines=40, XDG_STATE_HOME=str(tmp_path))
    opened.wait_for("PASS")
    yield opened
    opened.close()


def test_it_opens_answers_pauses_follows_the_window_and_quits(terminal: PseudoTerminal) -> None:
    for heading in ("Loops, inside to outside", "Room: flow", "Turns round −1: flow", "L of flow, near −1"):
        terminal.wait_for(heading)
    assert b"\x1b[?1000h" not in terminal.written  # the mouse stays the user's
    terminal.send("j++")
    terminal.wait_for("+2.00 dB")
    terminal.wait_until(lambda: terminal.read(0.5) == b"", "silence")
    assert terminal.read(1.0) == b""  # nothing is sent while nothing changes
    terminal.send("\x1a")  # ctrl+z; then, as fg does:
    terminal.wait_until_stopped()
    assert LEFT_ALTERNATE_SCREEN in terminal.written
    terminal.screen.reset()
    terminal.signal(signal.SIGCONT)
    terminal.wait_for("Room: level")
    terminal.resize(80, 24)
    terminal.wait_until(lambda: "loop" in terminal.screen.display[23], "a footer in row 24")
    terminal.send("\x03")
    assert terminal.status() == 0
    assert LEFT_ALTERNATE_SCREEN in terminal.written
    assert SHOWED_CURSOR in terminal.written
    assert terminal.settings_now() == terminal.settings


def test_told_to_end_it_leaves_the_terminal_whole_and_keeps_the_trial(tmp_path: Path, terminal: PseudoTerminal) -> None:
    terminal.send("+")
    terminal.wait_for("+1.00 dB")
    _end(terminal, signal.SIGHUP)
    again = PseudoTerminal(*START, columns=120, lines=40, XDG_STATE_HOME=str(tmp_path))
    again.wait_for("TRIAL gains of last time are in force again: flow +1.00 dB")
    _end(again, signal.SIGTERM)
    again.close()


def _end(terminal: PseudoTerminal, number: signal.Signals) -> None:
    terminal.signal(number)
    assert terminal.status() == 128 + number
    assert LEFT_ALTERNATE_SCREEN in terminal.written
    assert SHOWED_CURSOR in terminal.written
    assert terminal.settings_now() == terminal.settings


def test_a_dropped_line_ends_the_process(tmp_path: Path) -> None:
    opened = PseudoTerminal(*START, columns=80, lines=24, XDG_STATE_HOME=str(tmp_path))
    opened.wait_for("PASS")
    opened.close()
    assert opened.status() == 129


def test_no_color_means_no_colour_and_a_plain_encoding_plain_ascii(tmp_path: Path) -> None:
    plain = {"NO_COLOR": "1", "PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"}
    opened = PseudoTerminal(*START, columns=80, lines=24, XDG_STATE_HOME=str(tmp_path), **plain)
    opened.wait_for("PASS")
    opened.send("+j-g\x1b")
    opened.wait_for("gain 0.8913")
    opened.send("?")
    opened.wait_for("Keys and terms")
    opened.send("q")
    assert opened.status() == 0
    opened.close()
    assert not COLOUR.search(opened.written)
    assert opened.written.isascii()
    assert b"\\u" not in opened.written


def test_without_a_terminal_a_sentence_is_printed() -> None:
    ended = subprocess.run(
        [sys.executable, *START], stdin=subprocess.DEVNULL, capture_output=True, text=True, check=False
    )
    assert ended.returncode == 2
    assert ended.stderr == (
        "encircle: the screen needs a terminal on standard input; `encircle check FILE` needs none\n"
    )
