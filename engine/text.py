"""Text from users' files made safe to show: no control character, escape sequence or direction mark survives."""

from __future__ import annotations

import difflib
from collections.abc import Iterable

SHOWN_LENGTH = 60
_COMPARED_NAMES = 500
_ESCAPED_BACKQUOTE = r"\x60"


def printable(text: str) -> str:
    """``text`` with every character that could steer a terminal written as its backslash escape.

    Escaped are control characters (C0, C1, DEL), direction overrides and other invisible format characters, lone
    surrogates, and every separator but the plain space: all that Unicode calls not printable.
    """
    if text.isprintable():
        return text
    return "".join(character if character.isprintable() else _escape(character) for character in text)


def one_line(text: str) -> str:
    """``text`` as one printable line: runs of blanks, tabs and line ends become one blank."""
    return printable(" ".join(text.split()))


def quoted(text: str, length: int = SHOWN_LENGTH) -> str:
    """``text`` in backquotes, printable, cut to ``length`` characters: for messages that repeat what a file says."""
    shortened = text if len(text) <= length else text[: length - 1] + "…"
    return f"`{printable(shortened).replace('`', _ESCAPED_BACKQUOTE)}`"


def listed(names: Iterable[str], last: str = "and") -> str:
    """The names quoted, as ``a``, ``b`` and ``c``."""
    shown = [quoted(name) for name in names]
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} {last} {shown[-1]}"


def nearest_known(name: str, known: Iterable[str]) -> str:
    """A clause that names the known name nearest to ``name``; empty where none is near."""
    if len(name) > SHOWN_LENGTH:
        return ""
    # The caps on length and number keep a hostile file from buying quadratic time.
    candidates = [other for other in known if other != name and len(other) <= SHOWN_LENGTH][:_COMPARED_NAMES]
    same = [other for other in candidates if other.casefold() == name.casefold()]
    found = same or difflib.get_close_matches(name, candidates, n=1, cutoff=0.6)
    return f"; the nearest known name is {quoted(found[0])}" if found else ""


def _escape(character: str) -> str:
    return character.encode("unicode_escape").decode("ascii")
