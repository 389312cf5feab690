"""One table of the project file, its values read by type; a mistake is noted and the value is then None."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from encircle.engine.decimals import NumberRefused, within_double
from encircle.engine.mistakes import Mistakes, Place
from encircle.engine.text import listed, nearest_known, quoted
from encircle.engine.toml_source import RefusedDecimal

_MOST_ENTRIES = 1000
# No round number, so that no formula comes to divide by 0 because of it.
_STAND_IN = Fraction(618034, 1000003)
_BARE = frozenset("ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789_-")


def key_shown(key: str) -> str:
    """A key as it stands in a path like ``blocks.rotor.J``: bare where TOML allows it, else quoted and shortened."""
    return key if key and len(key) <= 60 and _BARE.issuperset(key) else quoted(key)


def described(value: object) -> str:
    """What a value is, for a sentence that says what it should have been."""
    match value:
        case bool():
            return f"the truth value `{str(value).lower()}`"
        case int() | Fraction():
            return f"the number {quoted(_number_text(value), 24)}"
        case str():
            return f"the text {quoted(value)}"
        case dict():
            return "a table"
        case list():
            return "an array"
        case RefusedDecimal():
            return "a number out of range"
        case _:
            return "a date or time"


def _number_text(value: int | Fraction) -> str:
    try:
        approximate = float(value)
    except OverflowError:
        return "beyond 1.8e308"
    return str(int(value)) if value.denominator == 1 and abs(approximate) < 1e15 else repr(approximate)


@dataclass(frozen=True, slots=True)
class CheckedTable:
    """A table and where it stands."""

    place: Place
    content: Mapping[str, object]
    mistakes: Mistakes

    def error(self, code: str, key: str, sentence: str) -> None:
        """Note a mistake in the value of ``key``; ``sentence`` follows the key's name."""
        shown = key_shown(key)
        self.mistakes.error(code, self.place.key(shown), self.place, f"{quoted(key)} {sentence}")

    def table_error(self, code: str, sentence: str) -> None:
        """Note a mistake of the table as a whole."""
        self.mistakes.error(code, self.place.where, self.place, sentence)

    def has(self, key: str) -> bool:
        """Whether the key is given."""
        return key in self.content

    def require(self, *keys: str) -> bool:
        """Whether all these keys are given; each missing one is a mistake."""
        missing = [key for key in keys if key not in self.content]
        for key in missing:
            self.error("key-missing", key, "is missing and must be stated")
        return not missing

    def refuse_unknown(self, known: Collection[str], what: str) -> None:
        """Note every key that is not in ``known``; ``what`` names the table's kind, as in "a loop"."""
        for key in self.content:
            if key not in known:
                instead = nearest_known(key, known) or f"; the keys are {listed(known)}"
                self.error("unknown-key", key, f"is no key of {what}{instead}")

    def number(self, key: str) -> Fraction | None:
        """A finite number, exactly as written."""
        return self.number_in(key, self.content.get(key), "")

    def number_or_stand_in(self, key: str) -> Fraction:
        """A finite number; where it cannot be used, which is noted, another one so that reading can go on."""
        value = self.number(key)
        return _STAND_IN if value is None else value

    def positive(self, key: str) -> float | None:
        """A number above 0, in double precision."""
        value = self.number(key)
        if value is not None and value <= 0:
            self.error("not-positive", key, f"is {described(value)} and must be above 0")
            return None
        return None if value is None else float(value)

    def not_negative(self, key: str, default: Fraction) -> Fraction:
        """A number from 0 upward; ``default`` where the key is left out."""
        value = self.number(key) if self.has(key) else default
        if value is not None and value < 0:
            self.error("negative", key, f"is {described(value)} and must be 0 or more")
        return default if value is None else value

    def whole(self, key: str, least: int, most: int) -> int | None:
        """A whole number within limits."""
        value = self.content.get(key)
        if isinstance(value, bool) or not isinstance(value, int):
            instead = "without point or exponent" if isinstance(value, Fraction) else f"not {described(value)}"
            self.error("not-a-whole-number", key, f"must be a whole number, {instead}")
            return None
        if not least <= value <= most:
            self.error("out-of-range", key, f"is {described(value)} and must lie from {least} to {most}")
            return None
        return value

    def text(self, key: str) -> str | None:
        """A text."""
        value = self.content.get(key)
        if isinstance(value, str):
            return value
        self.error("not-a-text", key, f"must be a text in quotes, not {described(value)}")
        return None

    def choice(self, key: str, choices: Sequence[str]) -> str | None:
        """One of a few texts."""
        value = self.text(key)
        if value is None or value in choices:
            return value
        known = listed(choices, "or")
        self.error("not-a-choice", key, f"is {quoted(value)} and must be {known}{nearest_known(value, choices)}")
        return None

    def array(self, key: str) -> list[object] | None:
        """An array of anything, up to a thousand entries."""
        value = self.content.get(key)
        if not isinstance(value, list):
            self.error("not-an-array", key, f"must be an array in brackets, not {described(value)}")
        elif len(value) > _MOST_ENTRIES:
            self.error("too-many", key, f"has {len(value)} entries, and at most {_MOST_ENTRIES} are read")
        else:
            return value
        return None

    def numbers(self, key: str) -> tuple[Fraction, ...] | None:
        """An array of finite numbers."""
        values = self.array(key)
        return None if values is None else self.numbers_in(key, values, "")

    def numbers_in(self, key: str, values: Sequence[object], prefix: str) -> tuple[Fraction, ...] | None:
        """The numbers of an array that stands in ``key``; ``prefix`` says which, as in "row 2, "."""
        found = [self.number_in(key, value, f"{prefix}entry {place} ") for place, value in enumerate(values, 1)]
        numbers = tuple(value for value in found if value is not None)
        return numbers if len(numbers) == len(found) else None

    def table(self, key: str, title: str | None = None) -> CheckedTable | None:
        """The table that stands in ``key``; ``title`` names it in messages."""
        value = self.content.get(key)
        if not isinstance(value, dict):
            self.error("not-a-table", key, f"must be a table, not {described(value)}")
            return None
        where = self.place.key(key_shown(key))
        return CheckedTable(Place(where, title or f"[{where}]"), value, self.mistakes)

    def number_in(self, key: str, value: object, entry: str) -> Fraction | None:
        """A finite number that stands somewhere in ``key``; ``entry`` says where, as in "entry 2 "."""
        if isinstance(value, RefusedDecimal):
            self.error("number-range", key, f"{entry}{value.reason}")
        elif isinstance(value, bool) or not isinstance(value, int | Fraction):
            self.error("not-a-number", key, f"{entry}must be a number, not {described(value)}")
        else:
            try:
                return within_double(Fraction(value))
            except NumberRefused as refusal:
                self.error("number-range", key, f"{entry}{refusal}")
        return None
