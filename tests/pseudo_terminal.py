"""The program in a real pseudo-terminal whose screen pyte keeps."""

from __future__ import annotations

import fcntl
import os
import pty
import select
import signal
import struct
import sys
import termios
import time
from collections.abc import Callable, Mapping
from typing import Any

import pyte

PATIENCE = 60.0  # s: only a program that hangs takes so long


class PseudoTerminal:
    """A child process on a terminal of its own; everything it writes is kept and drawn."""

    def __init__(self, *arguments: str, columns: int = 80, lines: int = 24, **environment: str) -> None:
        self.screen = pyte.Screen(columns, lines)
        self.written = b""
        self._closed = False
        self._stream = pyte.ByteStream(self.screen)
        self.child, self._master = pty.fork()
        if self.child == 0:
            os.execve(sys.executable, [sys.executable, *arguments], {**_bare_environment(), **environment})
        fcntl.ioctl(self._master, termios.TIOCSWINSZ, struct.pack("HHHH", lines, columns, 0, 0))
        self.settings = termios.tcgetattr(self._master)

    def settings_now(self) -> list[Any]:
        """The terminal's settings; echo and line mode are restored when the program has left well."""
        return termios.tcgetattr(self._master)

    def text(self) -> str:
        """What stands on the screen."""
        return "\n".join(self.screen.display)

    def send(self, keys: str) -> None:
        """Type."""
        os.write(self._master, keys.encode())

    def signal(self, number: signal.Signals) -> None:
        """Send a signal to the child."""
        os.kill(self.child, number)

    def resize(self, columns: int, lines: int) -> None:
        """Another window size, as a terminal emulator would tell it."""
        self.screen.resize(lines, columns)
        fcntl.ioctl(self._master, termios.TIOCSWINSZ, struct.pack("HHHH", lines, columns, 0, 0))
        self.signal(signal.SIGWINCH)

    def read(self, seconds: float) -> bytes:
        """What is written within so many seconds, or until the line goes quiet at the end of the child."""
        if self._closed:
            time.sleep(seconds)
            return b""
        before = len(self.written)
        ending = time.monotonic() + seconds
        while (left := ending - time.monotonic()) > 0:
            if select.select([self._master], [], [], left)[0]:
                try:
                    data = os.read(self._master, 65536)
                except OSError:  # the child has closed its side
                    break
                self.written += data
                self._stream.feed(data)
        return self.written[before:]

    def wait_until(self, holds: Callable[[], bool], what: str) -> None:
        """Read until something holds; the test fails where it never does, saying ``what`` was waited for."""
        ending = time.monotonic() + PATIENCE
        while not holds():
            told = f"{what} never came; last written: {self.written[-200:]!r}; the screen was:\n{self.text()}"
            assert time.monotonic() < ending, told
            self.read(0.05)

    def wait_for(self, text: str) -> None:
        """Read until a text stands on the screen."""
        self.wait_until(lambda: text in self.text(), text)

    def wait_until_stopped(self) -> None:
        """Read until the child has been stopped, as by ctrl+z."""
        self.wait_until(lambda: os.waitpid(self.child, os.WNOHANG | os.WUNTRACED)[0] != 0, "a stop")

    def status(self) -> int:
        """The exit status, as a shell would tell it; what was still written is read."""
        found: list[int] = []

        def ended() -> bool:
            child, status = os.waitpid(self.child, os.WNOHANG)
            if child:
                found.append(os.waitstatus_to_exitcode(status))
            return bool(found)

        self.wait_until(ended, "the end")
        self.read(0.2)
        return found[0]

    def close(self) -> None:
        """Hang up."""
        if not self._closed:
            self._closed = True
            os.close(self._master)


def _bare_environment() -> Mapping[str, str]:
    """As on a fresh remote login."""
    kept = {name: os.environ[name] for name in ("PATH", "HOME", "PYTHONPATH", "VIRTUAL_ENV") if name in os.environ}
    return {**kept, "TERM": "xterm-256color", "LANG": "C.UTF-8"}
