"""The project file as TOML: its bytes read within limits, its decimals kept exactly as written."""

from __future__ import annotations

import hashlib
import re
import tomllib
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path

from encircle.engine.decimals import NumberRefused, exact_decimal
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.file_access import UnreadableFile, decode, read_bytes
from encircle.engine.text import printable, quoted

MOST_BYTES = 2**20
_MOST_KEY_PARTS = 16
_MOST_DIGITS = 4300  # of a whole number: the interpreter's own limit for decimal digits

# A dotted key of very many parts costs the TOML reader quadratic time. Possessive repeats keep this search linear.
_PART = r"""(?:[A-Za-z0-9_-]++|"[^"\n]*+"|'[^'\n]*+')"""
_LONG_KEY = re.compile(rf"(?<![A-Za-z0-9_-]){_PART}(?:[ \t]*+\.[ \t]*+{_PART}){{{_MOST_KEY_PARTS}}}")
_LONG_NUMBER = re.compile(rf"[0-9_]{{{_MOST_DIGITS + 1}}}")
_IN_LINE = re.compile(r"Duplicate inline table key '(.*)'")
_AT_LINE = re.compile(r"\s*\(at line (\d+), column \d+\)$")


@dataclass(frozen=True, slots=True)
class RefusedDecimal:
    """A decimal that cannot be used; ``reason`` continues the name of its key, as in "is NaN, which is no number"."""

    reason: str


@dataclass(frozen=True, slots=True)
class Source:
    """A project file read: its digest (hexadecimal SHA-256) and its tables."""

    sha256: str
    tables: dict[str, object]


def read_source(path: Path, file: str) -> Source:
    """The file's tables, decimals as Fraction or RefusedDecimal; ``file`` names it in messages.

    Raises ProjectError for a file that cannot be read or is no TOML, with the line where it is known.
    """
    try:
        content = read_bytes(path, MOST_BYTES)
        text = decode(content)
    except UnreadableFile as error:
        raise ProjectError(Problem(error.code, "", f"{file}: the project file {error.sentence}")) from None
    return Source(hashlib.sha256(content).hexdigest(), _parse(text, file))


def _parse(text: str, file: str) -> dict[str, object]:
    _refuse_match(_LONG_KEY, text, file, f"a key has more than {_MOST_KEY_PARTS} parts")
    _refuse_match(_LONG_NUMBER, text, file, f"a number has more than {_MOST_DIGITS} digits")
    try:
        return tomllib.loads(text, parse_float=_decimal)
    except tomllib.TOMLDecodeError as error:
        raise ProjectError(_syntax_problem(str(error), text, file)) from None
    except RecursionError:
        raise ProjectError(Problem("too-deep", "", f"{file}: arrays or tables are nested too deep")) from None
    except ValueError as error:  # impossible dates and the like, which the reader passes on as they come
        raise ProjectError(Problem("not-toml", "", f"{file}: a value is no TOML: {printable(str(error))}")) from None


def _refuse_match(pattern: re.Pattern[str], text: str, file: str, sentence: str) -> None:
    match = pattern.search(text)
    if match:
        line = text.count("\n", 0, match.start()) + 1
        raise ProjectError(Problem("too-long", "", f"{file}, line {line}: {sentence}"))


def _decimal(text: str) -> Fraction | RefusedDecimal:
    try:
        return exact_decimal(text)
    except NumberRefused as refusal:
        return RefusedDecimal(str(refusal))


def _syntax_problem(complaint: str, text: str, file: str) -> Problem:
    at_line = _AT_LINE.search(complaint)
    if at_line is None:
        return Problem("not-toml", "", f"{file}, last line: this is no TOML: {_first_low(complaint)}")
    number = int(at_line.group(1))
    complaint = complaint[: at_line.start()]
    start = f"{file}, line {number}"
    twice = _given_twice(complaint, text.split("\n")[number - 1])
    if twice:
        return Problem("name-twice", "", f"{start}: {twice}")
    return Problem("not-toml", "", f"{start}: this is no TOML: {_first_low(complaint)}")


def _given_twice(complaint: str, line: str) -> str:
    """A sentence on a key or table given twice, where that is the complaint; ``line`` is where its value ends."""
    key, equals, _ = line.partition("=")
    in_line = _IN_LINE.fullmatch(complaint)
    if in_line:
        return f"{quoted(in_line.group(1))} is given twice in one table"
    if complaint.startswith("Cannot declare"):
        return f"the table {quoted(line.strip())} is given twice"
    if complaint.startswith("Cannot overwrite"):
        return f"{quoted(key.strip()) if equals else 'the key of the value that ends here'} is given twice in one table"
    return ""


def _first_low(complaint: str) -> str:
    """The reader's complaint without its place, fit to stand inside a sentence."""
    shown = printable(complaint.removesuffix(" (at end of document)"))
    return shown[:1].lower() + shown[1:200]
