"""The words of formulas and signal equations: numbers, names, operators and parentheses.

Length and nesting are bounded, so that no text, however hostile, costs much time or recurses out.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Literal, cast

from encircle.engine.text import printable, quoted

Kind = Literal["number", "name", "operator", "end"]

MOST_CHARACTERS = 10_000
MOST_NESTED = 40

_WORD = re.compile(
    r"(?P<blank>[ \t\r\n]+)"
    r"|(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[A-Za-z_][A-Za-z0-9_]*)"
    r"|(?P<operator>[-+*/^()])"
)
_WRITTEN_OTHERWISE = {"−": "-", "–": "-", "·": "*", "×": "*", "÷": "/", ",": ".", "[": "(", "]": ")", "²": "^2"}


class FormulaError(ValueError):
    """A formula or equation that cannot be used.

    ``position`` counts characters from 1 (None: the text as a whole), ``message`` is one sentence, ``code`` a short
    stable word.
    """

    def __init__(self, position: int | None, message: str, code: str = "formula-syntax") -> None:
        super().__init__(position, message, code)
        self.position = position
        self.message = message
        self.code = code

    def __str__(self) -> str:
        return self.message if self.position is None else f"character {self.position}: {self.message}"


@dataclass(frozen=True, slots=True)
class Token:
    """One word and where it starts, counted from 1."""

    kind: Kind
    text: str
    position: int


def tokenise(text: str) -> list[Token]:
    """The tokens of ``text``, an ``end`` token last; raises FormulaError for characters that no token has."""
    if len(text) > MOST_CHARACTERS:
        raise FormulaError(None, f"the text has {len(text)} characters, and {MOST_CHARACTERS} are allowed", "too-long")
    tokens: list[Token] = []
    position = 0
    while position < len(text):
        word = _WORD.match(text, position)
        if word is None:
            raise FormulaError(position + 1, _strange(text[position]))
        if word.lastgroup != "blank":
            tokens.append(Token(cast(Kind, word.lastgroup), word.group(), position + 1))
        position = word.end()
    tokens.append(Token("end", "", len(text) + 1))
    return tokens


def _strange(character: str) -> str:
    shown = quoted(character)
    if not character.isascii() and character.isprintable():
        shown += f" (U+{ord(character):04X})"
    instead = _WRITTEN_OTHERWISE.get(character)
    return f"the character {shown} cannot be used" + (f"; write {quoted(instead)}" if instead else "")


class TokenStream:
    """Tokens read one after another."""

    def __init__(self, text: str) -> None:
        self._tokens = tokenise(text)
        self._index = 0
        self._nested = 0

    @property
    def next(self) -> Token:
        """The token that comes next, not taken yet."""
        return self._tokens[self._index]

    def comes(self, *operators: str) -> bool:
        """Whether the next token is one of these operators or parentheses."""
        return self.next.kind == "operator" and self.next.text in operators

    def take(self) -> Token:
        """The next token; the ``end`` token is never passed."""
        token = self.next
        if token.kind != "end":
            self._index += 1
        return token

    @contextmanager
    def nested(self) -> Iterator[None]:
        """One level deeper; raises FormulaError where that is too deep."""
        if self._nested == MOST_NESTED:
            raise FormulaError(self.next.position, f"nested more than {MOST_NESTED} deep", "too-deep")
        self._nested += 1
        yield
        self._nested -= 1

    def close(self, opening: Token) -> None:
        """Take the parenthesis that closes ``opening``."""
        if not self.comes(")"):
            if self.next.kind == "end":
                raise FormulaError(opening.position, "this parenthesis is never closed")
            raise self.unexpected()
        self.take()

    def finish(self) -> None:
        """Require that nothing is left."""
        if self.next.kind != "end":
            raise self.unexpected()

    def unexpected(self) -> FormulaError:
        """What to say of the next token, which fits nothing here."""
        return FormulaError(self.next.position, self._complaint())

    def _complaint(self) -> str:
        token, before = self.next, self._tokens[self._index - 1] if self._index else None
        after_value = before is not None and (before.kind in ("number", "name") or before.text == ")")
        if token.kind == "end":
            return "something is missing at the end" if before else "nothing is written here"
        if token.text == ")":
            return "this parenthesis closes nothing" if after_value else "something is missing before `)`"
        if after_value and before is not None:
            return f"an operator is missing between {quoted(before.text)} and {quoted(token.text)}"
        if token.text == "*" and before is not None and before.text == "*":
            return "two `*` in a row; a power is written with `^`"
        return f"something is missing before {printable(quoted(token.text))}"
