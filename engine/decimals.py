"""Decimals exactly as written, held as fractions, within the range of double precision."""

from __future__ import annotations

import math
import re
from fractions import Fraction

from encircle.engine.text import quoted

MOST_CHARACTERS = 400
_ZERO = re.compile(r"[^1-9]*")


class NumberRefused(ValueError):  # noqa: N818  (named as what happened, like the sentence it carries)
    """A number that is not finite, or does not fit double precision; the text says why, as in "is infinite"."""


def exact_decimal(text: str) -> Fraction:
    """The value of a decimal such as ``-1_000.5e-3``, exactly.

    Raises NumberRefused for infinities, NaN, more than 400 characters, and values that double precision turns into
    infinity or 0. The cost does not depend on the size of the exponent.
    """
    if len(text) > MOST_CHARACTERS:
        raise NumberRefused(f"has {len(text)} characters, and a number may have {MOST_CHARACTERS} at most")
    approximate = float(text)
    if math.isnan(approximate):
        raise NumberRefused("is NaN, which is no number")
    if math.isinf(approximate):
        raise NumberRefused("is infinite, and numbers are finite" if "inf" in text else _beyond(text, "large"))
    if approximate != 0.0:
        return Fraction(text)
    mantissa = re.split("[eE]", text)[0]
    if _ZERO.fullmatch(mantissa):
        return Fraction(0)
    raise NumberRefused(_beyond(text, "small"))


def within_double(value: Fraction) -> Fraction:
    """``value`` itself; raises NumberRefused where double precision turns it into infinity or 0."""
    try:
        approximate = float(value)
    except OverflowError:
        raise NumberRefused("is too large for double precision (about 1.8e308)") from None
    if approximate == 0.0 and value != 0:
        raise NumberRefused("is too small for double precision (about 4.9e-324)")
    return value


def _beyond(text: str, size: str) -> str:
    limit = "1.8e308" if size == "large" else "4.9e-324"
    return f"is {quoted(text, 24)}, which is too {size} for double precision (about {limit})"
