"""The table in a CSV file: separator found out, notes set aside, rows of equal length with their line numbers."""

from __future__ import annotations

import csv
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from encircle.engine.text import one_line, quoted

MOST_LINES: Final = 500_000
_MOST_FIELDS = 4_000_000
_LONGEST_LINE = 10_000
_MOST_NOTES = 100
_NOTE_LENGTH = 200

# In the order in which they are tried; None stands for runs of blanks.
SEPARATORS: Final[tuple[str | None, ...]] = (";", "\t", ",", None)
_SEPARATOR_NAMES = {";": "semicolons", "\t": "tabs", ",": "commas", None: "blanks"}
_FIELD_BETWEEN_BLANKS = re.compile(r'"([^"]*)"|(\S+)')


class ResponseFileError(ValueError):
    """A file of measured data that cannot be used; ``sentence`` names the file and, where there is one, the line."""

    def __init__(self, code: str, sentence: str) -> None:
        super().__init__(code, sentence)
        self.code = code
        self.sentence = sentence

    def __str__(self) -> str:
        return self.sentence


@dataclass(frozen=True, slots=True)
class Lines:
    """A file's lines that are neither blank nor notes, each with its number from 1; ``file`` names it in messages."""

    file: str
    texts: tuple[str, ...]
    numbers: tuple[int, ...]
    notes: tuple[str, ...]

    def error(self, code: str, index: int, sentence: str) -> ResponseFileError:
        """A mistake on the line with this index."""
        return ResponseFileError(code, f"{quoted(self.file)}, line {self.numbers[index]}: {sentence}")


def split_lines(text: str, file: str) -> Lines:
    """The lines of a file; those that start with ``#`` are kept as notes, the first hundred of them.

    Raises ResponseFileError for a file that holds nothing else, too many lines or a line that is too long.
    """
    text = text.replace("\r", "\n")  # lines of very old files end so; those of others have no such character left
    if text.count("\n") > MOST_LINES:
        raise ResponseFileError("too-many-lines", f"{quoted(file)} has more than {MOST_LINES} lines")
    stripped = [line.strip() for line in text.split("\n")]
    longest = max(range(len(stripped)), key=lambda index: len(stripped[index]))
    if len(stripped[longest]) > _LONGEST_LINE:
        sentence = f"{quoted(file)}, line {longest + 1}: the line has more than {_LONGEST_LINE} characters"
        raise ResponseFileError("too-long", sentence)
    notes = [line[1:] for line in stripped if line.startswith("#")]
    numbers = tuple(number for number, line in enumerate(stripped, 1) if line and not line.startswith("#"))
    if not numbers:
        raise ResponseFileError("no-data", f"{quoted(file)} holds no data")
    texts = tuple(stripped[number - 1] for number in numbers)
    return Lines(file, texts, numbers, tuple(one_line(note)[:_NOTE_LENGTH] for note in notes[:_MOST_NOTES]))


def split_row(lines: Lines, index: int, separator: str | None) -> list[str]:
    """The fields of one line, blanks round them removed, quotes taken off."""
    line = lines.texts[index]
    if '"' not in line:
        return line.split() if separator is None else [field.strip() for field in line.split(separator)]
    if separator is None:
        return [match.group(1) or match.group(2) or "" for match in _FIELD_BETWEEN_BLANKS.finditer(line)]
    try:
        fields = next(csv.reader([line], delimiter=separator, skipinitialspace=True, strict=True))
    except csv.Error:
        raise lines.error("bad-quotes", index, "the quotes in this line do not match") from None
    return [field.strip() for field in fields]


def columns_below(lines: Lines, separator: str | None, width: int, positions: Sequence[int]) -> list[list[str]]:
    """The fields of the columns at these positions, header left out; blanks round them may remain.

    Raises ResponseFileError for a line that has not ``width`` fields.
    """
    texts = lines.texts[1:]
    if len(texts) * width > _MOST_FIELDS:
        sentence = f"{quoted(lines.file)} has {len(texts)} lines of {width} fields, and {_MOST_FIELDS} fields are read"
        raise ResponseFileError("too-many-fields", sentence)
    if any('"' in text for text in texts):
        rows = [split_row(lines, index, separator) for index in range(1, len(lines.texts))]
        _require_width(lines, [len(row) for row in rows], width, separator)
        return [[row[position] for row in rows] for position in positions]
    counts = [len(text.split()) if separator is None else text.count(separator) + 1 for text in texts]
    _require_width(lines, counts, width, separator)
    fields = (separator or " ").join(texts).split(separator)  # all lines have equal width: one split serves them all
    return [fields[position::width] for position in positions]


def _require_width(lines: Lines, counts: Sequence[int], width: int, separator: str | None) -> None:
    for index, count in enumerate(counts, 1):
        if count != width:
            raise lines.error("unequal-rows", index, _unequal(count, width, separator))


def _unequal(found: int, width: int, separator: str | None) -> str:
    sentence = f"{found} fields where the header has {width}, separated by {_SEPARATOR_NAMES[separator]}"
    if separator == "," and found > width:
        return sentence + "; with decimal commas the separator must be another"
    return sentence
