"""Measured frequency responses from CSV files.

A header row names the columns: ``frequency_hz`` or ``frequency_rad_s``; then ``real`` and ``imag``, or ``magnitude``
or ``magnitude_db`` with ``phase_deg`` or ``phase_rad``; optionally ``coherence``. Every mistake gives the file's line.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import NDArray

from encircle.engine.declarations import MeasuredResponse
from encircle.engine.file_access import UnreadableFile, decode, read_bytes
from encircle.engine.response_table import (
    SEPARATORS,
    Lines,
    ResponseFileError,
    columns_below,
    split_lines,
    split_row,
)
from encircle.engine.text import listed, nearest_known, quoted

__all__ = ["KNOWN_COLUMNS", "MOST_BYTES", "ResponseFileError", "read_response"]

MOST_BYTES: Final = 32 * 2**20
_FREQUENCIES: Final = ("frequency_hz", "frequency_rad_s")
_PAIRS: Final = (
    ("real", "imag"),
    ("magnitude", "phase_deg"),
    ("magnitude", "phase_rad"),
    ("magnitude_db", "phase_deg"),
    ("magnitude_db", "phase_rad"),
)
KNOWN_COLUMNS: Final = (*_FREQUENCIES, *dict.fromkeys(key for pair in _PAIRS for key in pair), "coherence")
_MOST_FIELDS = 10_000  # no line holds more
_SHOWN_FIELDS = 12
_LARGEST_COHERENCE = 1.0001  # single-precision files round 1 upward

_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")

_NUMERIC = frozenset("0123456789+-.eE \t")

_Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class _Choice:
    """The columns to use: known name to position in the header."""

    frequency: str
    pair: tuple[str, str]
    positions: Mapping[str, int]


def read_response(path: Path, file: str, columns: Mapping[str, str]) -> MeasuredResponse:
    """The response in the file at ``path``, sorted by frequency.

    ``file`` names it in messages and in the result; ``columns`` gives the header that stands for a known column.
    Raises ResponseFileError, one sentence with the file's line number where there is one.
    """
    try:
        content = read_bytes(path, MOST_BYTES)
        text = decode(content)
    except UnreadableFile as error:
        raise ResponseFileError(error.code, f"the file {quoted(file)} {error.sentence}") from None
    lines = split_lines(text, file)
    separator, width, choice = _header(lines, columns)
    if len(lines.texts) < 3:
        raise lines.error("too-few-lines", len(lines.texts) - 1, "the file ends with fewer than two lines of data")
    values = _values(lines, separator, width, choice)
    omega, H = _omega(lines, values, choice), _response(lines, values, choice)
    order = _ascending(lines, omega)
    coherence = _coherence(lines, values["coherence"])[order] if "coherence" in values else None
    return _frozen(file, hashlib.sha256(content).hexdigest(), omega[order], H[order], coherence, lines.notes)


def _frozen(
    file: str, sha256: str, omega: _Floats, H: NDArray[np.complex128], coherence: _Floats | None, notes: tuple[str, ...]
) -> MeasuredResponse:
    for array in (omega, H, coherence):
        if array is not None:
            array.setflags(write=False)
    return MeasuredResponse(file, sha256, omega, H, coherence, notes)


def _header(lines: Lines, columns: Mapping[str, str]) -> tuple[str | None, int, _Choice]:
    """Separator, number of fields and chosen columns: the first separator whose fields name all columns needed.

    Where none does, the complaint is that of the separator with which most columns are known, then most fields found.
    """
    complaints: list[tuple[float, ResponseFileError]] = []
    for separator in SEPARATORS:
        fields = lines.texts[0].split(separator)
        try:
            fields = split_row(lines, 0, separator)
            return separator, len(fields), _choose(lines, fields, columns)
        except ResponseFileError as error:
            known = sum(columns.get(key, key) in fields for key in KNOWN_COLUMNS)
            complaints.append((known + len(fields) / (1 + _MOST_FIELDS), error))
    raise max(complaints, key=lambda complaint: complaint[0])[1]


def _choose(lines: Lines, fields: Sequence[str], columns: Mapping[str, str]) -> _Choice:
    _require_header(lines, fields)
    positions = _positions(lines, fields, columns)
    frequency = _most_mapped(lines, [(key,) for key in _FREQUENCIES if key in positions], columns, "frequency")
    pairs = [pair for pair in _PAIRS if pair[0] in positions and pair[1] in positions]
    pair = _most_mapped(lines, pairs, columns, "response")
    if not frequency or not pair:
        raise lines.error("column-missing", 0, _missing(fields, bool(frequency)))
    unused = [key for key in columns if key not in (*frequency, *pair, "coherence")]
    if unused:
        raise lines.error("column-unused", 0, f"`columns` maps {listed(unused)}, which is not needed; remove it")
    return _Choice(frequency[0], (pair[0], pair[1]), positions)


def _require_header(lines: Lines, fields: Sequence[str]) -> None:
    if all(_NUMBER.fullmatch(field.replace(",", ".")) for field in fields):
        sentence = "a header row must name the columns before the first line of data, and must not start with `#`"
        raise lines.error("no-header", 0, sentence)


def _positions(lines: Lines, fields: Sequence[str], columns: Mapping[str, str]) -> dict[str, int]:
    """Where the known columns stand in the header."""
    if len(set(columns.values())) < len(columns):
        raise lines.error("column-twice", 0, "`columns` names one column for two purposes")
    positions: dict[str, int] = {}
    for key in KNOWN_COLUMNS:
        header = columns.get(key, key)
        if fields.count(header) > 1:
            raise lines.error("column-twice", 0, f"the header names {quoted(header)} twice")
        if header in fields:
            positions[key] = fields.index(header)
        elif key in columns:
            near = nearest_known(header, fields)
            raise lines.error("column-missing", 0, f"the header has no column {quoted(header)} for `{key}`{near}")
    return positions


def _most_mapped(
    lines: Lines, choices: Sequence[tuple[str, ...]], columns: Mapping[str, str], what: str
) -> tuple[str, ...]:
    """The one choice, or the one that ``columns`` asks for where the header offers several; empty for none."""
    mapped = [sum(key in columns for key in choice) for choice in choices]
    best = [choice for choice, count in zip(choices, mapped, strict=True) if count == max(mapped)]
    if len(best) > 1:
        offered = listed(dict.fromkeys(key for choice in best for key in choice))
        sentence = f"the header gives the {what} more than once ({offered}); say in `columns` which to use"
        raise lines.error("column-ambiguous", 0, sentence)
    return best[0] if best else ()


def _missing(fields: Sequence[str], has_frequency: bool) -> str:
    if not has_frequency:
        return f"the header has no column `frequency_hz` or `frequency_rad_s`; {_map_others(fields)}"
    pairs = "`real` with `imag`, or `magnitude` or `magnitude_db` with `phase_deg` or `phase_rad`"
    return f"the header has no columns {pairs}; {_map_others(fields)}"


def _map_others(fields: Sequence[str]) -> str:
    return f"its columns are {listed(fields[:_SHOWN_FIELDS])}; say in `columns` which is which"


def _values(lines: Lines, separator: str | None, width: int, choice: _Choice) -> dict[str, _Floats]:
    """The numbers of the columns to use."""
    keys = [choice.frequency, *choice.pair, *(["coherence"] if "coherence" in choice.positions else [])]
    columns = columns_below(lines, separator, width, [choice.positions[key] for key in keys])
    if separator != ",":
        columns = _points_for_commas(lines, columns)
    return {key: _numbers(lines, column, key) for key, column in zip(keys, columns, strict=True)}


def _points_for_commas(lines: Lines, columns: list[list[str]]) -> list[list[str]]:
    """Decimal commas written as points; raises ResponseFileError where a file uses both."""
    with_comma = _first(columns, ",")
    if with_comma is None:
        return columns
    with_point = _first(columns, ".")
    if with_point is not None:
        index = max(with_comma, with_point)
        raise lines.error("mixed-decimals", index + 1, "decimal points and decimal commas are mixed in this file")
    return [[field.replace(",", ".") for field in column] for column in columns]


def _first(columns: Sequence[Sequence[str]], character: str) -> int | None:
    """The index of the first row that holds the character."""
    found = (next((index for index, field in enumerate(column) if character in field), None) for column in columns)
    return min((index for index in found if index is not None), default=None)


def _numbers(lines: Lines, column: Sequence[str], key: str) -> _Floats:
    """The column's values; only what is written with digits, sign, point and exponent is a number."""
    try:
        if not _NUMERIC.issuperset("".join(column)):
            raise ValueError
        values = np.fromiter(map(float, column), dtype=np.float64, count=len(column))
    except ValueError:
        index = next(index for index, field in enumerate(column) if not _NUMBER.fullmatch(field.strip()))
        sentence = f"`{key}` is {quoted(column[index])}, which is no finite number"
        raise lines.error("not-a-number", index + 1, sentence) from None
    _require(lines, np.isfinite(values), "number-range", f"`{key}` is too large for double precision")
    return values


def _require(lines: Lines, fine: NDArray[np.bool_], code: str, sentence: str) -> None:
    """Raise for the first row that is not fine."""
    if not fine.all():
        raise lines.error(code, int(np.argmin(fine)) + 1, sentence)


def _omega(lines: Lines, values: Mapping[str, _Floats], choice: _Choice) -> _Floats:
    """Frequencies in rad/s, as the lines stand."""
    with np.errstate(over="ignore"):
        omega = values[choice.frequency] * (2 * np.pi if choice.frequency == "frequency_hz" else 1.0)
    _require(lines, omega > 0, "frequency-not-positive", "the frequency must be above 0")
    _require(lines, np.isfinite(omega), "number-range", "the frequency is too large for double precision")
    return omega


def _response(lines: Lines, values: Mapping[str, _Floats], choice: _Choice) -> NDArray[np.complex128]:
    first, second = (values[key] for key in choice.pair)
    if choice.pair == ("real", "imag"):
        return np.asarray(first + 1j * second, dtype=np.complex128)
    magnitude = first
    if choice.pair[0] == "magnitude_db":
        with np.errstate(over="ignore"):
            magnitude = 10.0 ** (first / 20.0)
        _require(lines, np.isfinite(magnitude), "number-range", "`magnitude_db` is too large for double precision")
    _require(lines, magnitude >= 0, "negative", "`magnitude` must not be below 0; a change of sign is a phase")
    phase = np.deg2rad(second) if choice.pair[1] == "phase_deg" else second
    return np.asarray(magnitude * np.exp(1j * phase), dtype=np.complex128)


def _coherence(lines: Lines, coherence: _Floats) -> _Floats:
    fine = (coherence >= 0) & (coherence <= _LARGEST_COHERENCE)
    _require(lines, fine, "out-of-range", "`coherence` must lie from 0 to 1")
    return coherence


def _ascending(lines: Lines, omega: _Floats) -> NDArray[np.intp]:
    """The order by frequency; raises ResponseFileError for a frequency given twice."""
    order = np.argsort(omega, kind="stable")
    repeats = np.flatnonzero(np.diff(omega[order]) == 0)
    if len(repeats):
        later = repeats[np.argmin(order[repeats + 1])]
        first, second = int(order[later]), int(order[later + 1])
        earlier_line = lines.numbers[first + 1]
        raise lines.error("frequency-twice", second + 1, f"the frequency of line {earlier_line} is given again")
    return order
