"""Living with the terminal: whether the screen can be shown at all, and leaving it whole whatever happens.

Imported before Textual, which reads these settings once, when it is imported.
"""

from __future__ import annotations

import asyncio
import os
import signal
from collections.abc import Callable, Mapping, MutableMapping
from typing import TextIO

# Over a slow line the bytes of an arrow key may arrive apart; read too soon they are an Escape and letters.
SLOW_ESCAPE_MS = "250"
LEAVING_SIGNALS = (signal.SIGHUP, signal.SIGTERM)


def prepare(environment: MutableMapping[str, str] = os.environ) -> None:
    """Settings for Textual that the user has not made: patience with Escape over SSH, no waiting for a frame."""
    environment.setdefault("TEXTUAL_FPS", "240")
    environment.setdefault("TEXTUAL_ANIMATIONS", "none")
    if environment.get("SSH_TTY") or environment.get("SSH_CONNECTION"):
        environment.setdefault("ESCDELAY", SLOW_ESCAPE_MS)


def why_no_screen(
    keyboard: TextIO | None, display: TextIO | None, environment: Mapping[str, str] = os.environ
) -> str | None:
    """A sentence where the screen cannot be shown, else ``None``. Textual draws on standard error."""
    if keyboard is None or not keyboard.isatty():
        return "the screen needs a terminal on standard input; `encircle check FILE` needs none"
    if display is None or not display.isatty():
        return "the screen needs a terminal on standard error; `encircle check FILE` needs none"
    if environment.get("TERM", "") in ("dumb", ""):
        return "TERM says that this terminal cannot place its cursor; `encircle check FILE` needs no such terminal"
    return None


def ascii_only(display: TextIO | None) -> bool:
    """Whether the terminal's encoding lacks the characters of the plots."""
    encoding = (getattr(display, "encoding", None) or "ascii").lower().replace("-", "").replace("_", "")
    return encoding not in ("utf8", "utf8sig", "utf16", "utf32")


def leave_on_signals(leave: Callable[[int], None]) -> Callable[[], None]:
    """Call ``leave`` with 128 + n when the line drops or the process is told to end; returns how to stop listening.

    The handlers also undo an inherited "ignore", with which a dropped line would leave a process that never ends.
    """
    loop = asyncio.get_running_loop()
    for number in LEAVING_SIGNALS:
        loop.add_signal_handler(number, leave, 128 + number)

    def stop_listening() -> None:
        for number in LEAVING_SIGNALS:
            loop.remove_signal_handler(number)

    return stop_listening


def forget_lost_terminal(*streams: TextIO | None) -> None:
    """Send what is still buffered for a terminal that is gone to nowhere: Python would end with a status of its own."""
    for stream in filter(None, streams):
        try:
            stream.flush()
        except OSError:
            nowhere = os.open(os.devnull, os.O_WRONLY)
            os.dup2(nowhere, stream.fileno())
            os.close(nowhere)


prepare()
