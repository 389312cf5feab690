"""A gain as it is typed: a value, a factor on the gain as it stands, or a change in decibels."""

from __future__ import annotations

import math
import re

_NUMBER = r"(\d+[.,]?\d*(?:[eE][+-]?\d+)?|[.,]\d+(?:[eE][+-]?\d+)?)"
_VALUE = re.compile(_NUMBER)
_FACTOR = re.compile(rf"([x×*/])\s*{_NUMBER}")
_DECIBELS = re.compile(rf"([+\-−])\s*{_NUMBER}\s*(?:dB|db|DB)?")
LONGEST = 40
WANTED = "type a value (1.5), a factor (x1.2, /2) or a change (+3 dB)"


def typed_gain(text: str, now: float) -> float:
    """The gain that ``text`` asks for, ``now`` being the present one; ``ValueError`` with a sentence if it is none."""
    words = text.strip()
    gain = _asked(words, now) if len(words) <= LONGEST else None
    if gain is None:
        raise ValueError(f"no gain: {WANTED}")
    if not 0 < gain < math.inf:
        raise ValueError("a gain must be above 0 and finite")
    return gain


def _asked(words: str, now: float) -> float | None:
    if _VALUE.fullmatch(words):
        return _number(words)
    if match := _FACTOR.fullmatch(words):
        factor = _number(match[2])
        return now * factor if match[1] != "/" else (now / factor if factor else math.inf)
    if match := _DECIBELS.fullmatch(words):
        decibels = _number(match[2]) * (1 if match[1] == "+" else -1)
        return now * 10 ** (decibels / 20) if abs(decibels) <= 1000 else math.inf
    return None


def _number(words: str) -> float:
    return float(words.replace(",", "."))
