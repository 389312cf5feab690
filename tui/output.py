"""Standard output and standard error that may be closed, full or read by somebody who has left."""

from __future__ import annotations

import contextlib
import os
import sys
from typing import TextIO


class OutputError(OSError):
    """The report was reached but could not be delivered."""


def show(text: str) -> None:
    """Write ``text`` to standard output; a reader who has left, or no standard output at all, is no fault.

    Raises ``OutputError`` where the text could not be written for another reason (a full disk).
    """
    stream = sys.stdout
    if stream is None or stream.closed:
        return
    try:
        stream.write(_encodable(text, stream))
        stream.flush()
    except BrokenPipeError:
        _silence(stream)
    except OSError as error:
        _silence(stream)
        raise OutputError(f"the report could not be written: {(error.strerror or str(error)).lower()}") from error


def complain(*messages: str) -> None:
    """Write each message as one harmless line to standard error, if there is one."""
    from encircle.engine.text import one_line

    stream = sys.stderr
    if stream is None or stream.closed:
        return
    try:
        for message in messages:
            stream.write(_encodable(one_line(message) + "\n", stream))
        stream.flush()
    except OSError:
        _silence(stream)  # nobody is left to be told


def _encodable(text: str, stream: TextIO) -> str:
    """``text`` with the characters that the stream's encoding lacks written as backslash escapes."""
    encoding = stream.encoding or "utf-8"
    return text.encode(encoding, "backslashreplace").decode(encoding)


def _silence(stream: TextIO) -> None:
    """Send what is still buffered to nowhere, so that Python does not stumble over it when it exits."""
    with contextlib.suppress(OSError, ValueError):  # a stream that is no file has no descriptor to redirect
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, stream.fileno())
        os.close(nowhere)
