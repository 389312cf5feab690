"""Words and numbers as people read them: shared by the printed report and the screen.

Numbers are rounded to the safe side: what must be large is rounded down, what must be small is rounded up.
"""

from __future__ import annotations

import unicodedata
from dataclasses import dataclass
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Context, Decimal
from typing import Literal

from encircle.engine.result import Evidence, LimitFinding, Outcome, Verdict

Direction = Literal["down", "up", "nearest"]

SIGNIFICANT_DIGITS = 4
_MOST_DIGITS = 17  # tells any two doubles apart
_ROUNDING = {"down": ROUND_FLOOR, "up": ROUND_CEILING, "nearest": ROUND_HALF_EVEN}

CAUTION = (
    "A verdict on a model is no clearance to energise a machine: local codes, the applicable standard and a licensed "
    "or responsible engineer decide."
)

VERDICT_WORDS: dict[Verdict, str] = {
    "stable": "stable",
    "unstable": "UNSTABLE",
    "undecided": "undecided",
    "as_declared": "as declared",
}

OUTCOME_WORDS: dict[Outcome, str] = {"pass": "PASS", "fail": "FAIL", "undecided": "UNDECIDED"}

EVIDENCE_WORDS: dict[Evidence, str] = {
    "proved": "the count holds on the whole contour",
    "declared": "the count holds on the whole contour, resting on pole counts that the file states",
    "data": "the count rests on measured lines and holds under the stated assumption between them",
    "none": "no evidence for a count",
}


@dataclass(frozen=True, slots=True)
class LimitWords:
    """How a limit reads: its quantity, its unit ("frequency" for the file's unit), and whether it is a ceiling."""

    quantity: str
    unit: str
    ceiling: bool = False

    @property
    def direction(self) -> Direction:
        """The safe side for what was found."""
        return "up" if self.ceiling else "down"


LIMIT_WORDS: dict[str, LimitWords] = {
    "gain_margin_db": LimitWords("gain, either way", "dB"),
    "gain_increase_db": LimitWords("gain increase", "dB"),
    "gain_decrease_db": LimitWords("gain decrease", "dB"),
    "phase_margin_deg": LimitWords("phase margin", "deg"),
    "delay_margin_s": LimitWords("delay margin", "s"),
    "modulus_margin": LimitWords("modulus margin", ""),
    "sensitivity_peak_db": LimitWords("peak of |S|", "dB", ceiling=True),
    "complementary_peak_db": LimitWords("peak of |T|", "dB", ceiling=True),
    "crossover_min": LimitWords("lowest crossover", "frequency"),
    "crossover_max": LimitWords("highest crossover", "frequency", ceiling=True),
}

_ASCII = str.maketrans(
    {"→": "->", "≥": ">=", "≤": "<=", "°": " deg", "µ": "u", "−": "-", "×": "x", "…": "...", "±": "+/-", "·": "*",
     "–": "-", "—": "-", "∞": "infinity", "ω": "w", "’": "'", "“": '"', "”": '"', "─": "-", "│": "|", "√": "sqrt"}
)  # fmt: skip


def rounded(value: float | Decimal, direction: Direction = "nearest", digits: int = SIGNIFICANT_DIGITS) -> str:
    """``value`` to so many significant digits, towards the safe side named by ``direction``."""
    decimal = value if isinstance(value, Decimal) else Decimal(repr(float(value)))
    if decimal.is_zero():
        return "0"
    plain = -5 < decimal.adjusted() < 6
    kept = max(digits, decimal.adjusted() + 1) if plain else digits
    number = Context(prec=kept, rounding=_ROUNDING[direction]).plus(decimal)
    if not plain:
        return format(number, f".{digits - 1}e")
    places = max(kept - 1 - number.adjusted(), 0)
    return format(number, f".{places}f")


def rounded_towards_one(factor: float) -> str:
    """A bound of a range of gain factors, rounded towards 1, the gain as it stands; never printed as 1 itself."""
    direction: Direction = "up" if factor < 1 else "down"
    for digits in range(SIGNIFICANT_DIGITS, _MOST_DIGITS):
        text = rounded(factor, direction, digits)
        if factor == 1 or float(text) != 1:
            return text
    return repr(factor)


def as_declared(value: float | Decimal) -> str:
    """A number of the project file, as short as it was written there."""
    return format(float(value), ".12g")


def signed(count: int) -> str:
    """A winding count with its sign; clockwise is positive."""
    return f"{count:+d}".replace("-", "−") if count else "0"


def count_or_unknown(count: int | None) -> str:
    """A pole count, or a question mark when it is undecided."""
    return "?" if count is None else str(count)


def plural(count: int, noun: str) -> str:
    """``1 pole``, ``2 poles``."""
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def decibels(db: float, direction: Direction) -> str:
    """A size in dB."""
    return f"{rounded(db, direction)} dB"


def degrees(angle: float, direction: Direction = "down") -> str:
    """An angle in degrees."""
    return f"{rounded(angle, direction)}°"


def frequency(value: float | None, unit: str) -> str:
    """A frequency in the file's unit; ``None`` is infinity."""
    return "infinity" if value is None else f"{rounded(value)} {unit}"


def seconds(duration: float, direction: Direction = "down", digits: int = SIGNIFICANT_DIGITS) -> str:
    """A time in s, ms, µs or ns, whichever reads best."""
    scaled, unit = _readable_time(duration)
    return f"{rounded(scaled, direction, digits)} {unit}"


def _readable_time(duration: float) -> tuple[Decimal, str]:
    """The time in the unit that reads best; decimal, for a product of doubles may lose the last digit."""
    exact = Decimal(repr(float(duration)))
    for factor, unit in ((1, "s"), (1000, "ms"), (1_000_000, "µs")):
        if exact * factor >= 1 or exact == 0:
            return exact * factor, unit
    return exact * 1_000_000_000, "ns"


def limit_required(finding: LimitFinding, frequency_unit: str) -> str:
    """``at least 45°``."""
    words = LIMIT_WORDS[finding.name]
    value, unit = _value_and_unit(finding.required, words, frequency_unit)
    return f"{'at most' if words.ceiling else 'at least'} {as_declared(value)}{unit}"


def limit_found(finding: LimitFinding, frequency_unit: str) -> str:
    """What was found, rounded to the safe side, with as many digits as the comparison with the limit needs."""
    if finding.found is None:
        return {True: "no finite limit", False: "none", None: "undecided"}[finding.met]
    words = LIMIT_WORDS[finding.name]
    value, unit = _value_and_unit(finding.found, words, frequency_unit)
    return f"{rounded(value, words.direction, _digits_beside(finding, words))}{unit}"


def limit_status(finding: LimitFinding) -> str:
    """``met``, ``MISSED`` or ``undecided``."""
    return {True: "met", False: "MISSED", None: "undecided"}[finding.met]


def _digits_beside(finding: LimitFinding, words: LimitWords) -> int:
    """Enough digits that the printed number stands on the same side of the limit as the exact one."""
    found, required = float(finding.found or 0.0), float(finding.required)
    side = found <= required if words.ceiling else found >= required
    for digits in range(SIGNIFICANT_DIGITS, _MOST_DIGITS):
        printed = float(rounded(found, words.direction, digits))
        if (printed <= required if words.ceiling else printed >= required) == side:
            return digits
    return _MOST_DIGITS


def _value_and_unit(value: float, words: LimitWords, frequency_unit: str) -> tuple[float | Decimal, str]:
    if words.unit == "s":
        scaled, unit = _readable_time(value)
        return scaled, f" {unit}"
    if words.unit == "deg":
        return value, "°"
    unit = frequency_unit if words.unit == "frequency" else words.unit
    return value, f" {unit}" if unit else ""


def complex_pair(pole: complex) -> str:
    """A pole in rad/s; im > 0 stands for the pair."""
    real = rounded(pole.real)
    return f"{real} rad/s" if pole.imag == 0 else f"{real} ± {rounded(abs(pole.imag))}j rad/s"


def without_unicode(text: str) -> str:
    """The same text for terminals that carry ASCII only."""
    return text.translate(_ASCII)


def display_width(text: str) -> int:
    """Terminal cells that ``text`` takes: 0 for combining marks, 2 for wide characters."""
    return sum(_cells(character) for character in text)


def _cells(character: str) -> int:
    if unicodedata.combining(character):
        return 0
    return 2 if unicodedata.east_asian_width(character) in "WF" else 1
