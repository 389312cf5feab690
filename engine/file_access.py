"""Reading a user's file whole, within a limit on its size, with a sentence for everything that can be wrong."""

from __future__ import annotations

import os
import stat
from itertools import islice
from pathlib import Path

from encircle.engine.text import nearest_known, printable

_LISTED_FILES = 2000


class UnreadableFile(ValueError):  # noqa: N818  (named as what happened, like the sentence it carries)
    """A file that cannot be used; ``sentence`` continues the name of the file, as in "does not exist"."""

    def __init__(self, code: str, sentence: str) -> None:
        super().__init__(code, sentence)
        self.code = code
        self.sentence = sentence


def read_bytes(path: Path, most_bytes: int) -> bytes:
    """The content of a regular file of at most ``most_bytes``; raises UnreadableFile before reading a larger one."""
    try:
        status = path.stat()
        if stat.S_ISDIR(status.st_mode):
            raise UnreadableFile("not-a-file", "is a directory; name a file in it")
        if not stat.S_ISREG(status.st_mode):
            raise UnreadableFile("not-a-file", "is no regular file")
        with path.open("rb") as file:
            content = b"" if status.st_size > most_bytes else file.read(most_bytes + 1)
    except OSError as error:
        raise _unreadable(path, error) from None
    size = max(status.st_size, len(content))
    if size > most_bytes:
        sentence = f"has {size / 2**20:.1f} MiB, and at most {most_bytes / 2**20:.0f} MiB are read"
        raise UnreadableFile("file-too-large", sentence)
    return content


def decode(content: bytes) -> str:
    """UTF-8 text with line ends as ``\\n``, a byte order mark dropped; raises UnreadableFile with the line number."""
    zero = content.find(b"\0")
    if zero >= 0:
        line = content.count(b"\n", 0, zero) + 1
        raise UnreadableFile("not-text", f"is no text: line {line} holds a zero byte; save it as UTF-8 text")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        byte = content[error.start]
        sentence = f"is not UTF-8: line {line} holds the byte 0x{byte:02x}; save it as UTF-8 text"
        raise UnreadableFile("not-utf-8", sentence) from None
    return text.replace("\r\n", "\n")


def _unreadable(path: Path, error: OSError) -> UnreadableFile:
    if isinstance(error, FileNotFoundError | NotADirectoryError):
        return UnreadableFile("no-such-file", f"does not exist{nearest_known(path.name, _neighbours(path))}")
    if isinstance(error, PermissionError):
        return UnreadableFile("not-readable", "may not be read; check its permissions")
    return UnreadableFile("not-readable", f"cannot be read: {printable(error.strerror or type(error).__name__)}")


def _neighbours(path: Path) -> list[str]:
    try:
        with os.scandir(path.parent) as entries:
            return [entry.name for entry in islice(entries, _LISTED_FILES)]
    except OSError:
        return []
