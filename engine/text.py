"""Text from files made harmless before it reaches a terminal."""

from __future__ import annotations


def printable(text: str) -> str:
    """``text`` with every character that could steer a terminal written as its backslash escape.

    Escaped are control characters (C0, C1, DEL), direction overrides and other invisible format characters, lone
    surrogates, and every separator but the plain space: all that Unicode calls not printable.
    """
    if text.isprintable():
        return text
    return "".join(char if char.isprintable() else _escaped(char) for char in text)


def _escaped(char: str) -> str:
    return char.encode("unicode_escape").decode("ascii")
