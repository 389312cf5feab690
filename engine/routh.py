"""Routh's array with proven signs: the number of roots right of the imaginary axis.

Entries are decimal numbers with a bound on their error; the working precision grows until every sign in the first
column is certain, and where an entry may be exactly 0, remainders in integers decide. Source of the array: E. J. Routh,
"A Treatise on the Stability of a Given State of Motion", 1877; any textbook on linear systems.
"""

from __future__ import annotations

from collections.abc import Sequence
from decimal import MAX_EMAX, MIN_EMIN, ROUND_CEILING, ROUND_HALF_EVEN, Context, Decimal
from itertools import pairwise
from math import gcd

Row = list[tuple[Decimal, Decimal]]  # (value, bound on its error)

_ZERO = Decimal(0)
_ALMOST_ONE = Decimal("0.999999")
_UPWARD = Context(prec=9, rounding=ROUND_CEILING, Emax=MAX_EMAX, Emin=MIN_EMIN)
_DIGITS = (32, 128, 512, 2048, 8192)


def right_half_plane_roots(coefficients: Sequence[int]) -> int:
    """The number of roots with positive real part, with multiplicity, proved.

    ``coefficients``: ascending, the last not 0, of a polynomial without a pair of roots r, -r, hence without one on the
    imaginary axis; ValueError where the array meets such a pair.
    """
    if len(coefficients) < 2:
        return 0
    for digits in _DIGITS:
        changes = _sign_changes(coefficients, digits)
        if changes is not None:
            return changes
    return _by_remainders(coefficients)


def _by_remainders(coefficients: Sequence[int]) -> int:
    """The same for any array, also with zeros in the first column, in integers: slow for large ones.

    With p(jw) = j^n (f(w) - j g(w)) the index of g/f along the axis is the number of roots on the left less that on the
    right, and the signs of the remainders f, g, -rem(f, g), ... at both ends give it (F. R. Gantmacher, "The Theory of
    Matrices", ch. XV, quoted from memory).
    """
    size = len(coefficients)
    rows: list[list[int]] = [[0] * size, [0] * (size - 1)]
    for k, c in enumerate(reversed(coefficients)):
        rows[k % 2][size - 1 - k] = -c if k % 4 > 1 else c
    rows[1] = _trimmed(rows[1])
    while rows[-1]:
        rows.append(_negative_remainder(rows[-2], rows[-1]))
    if len(rows[-2]) > 1:
        raise ValueError("a polynomial with roots r and -r has no regular Routh array")
    at_plus = [row[-1] > 0 for row in rows[:-1]]
    at_minus = [positive == (len(row) % 2 == 1) for positive, row in zip(at_plus, rows, strict=False)]
    index = _changes(at_minus) - _changes(at_plus)
    return (size - 1 - index) // 2


def _negative_remainder(dividend: Sequence[int], divisor: list[int]) -> list[int]:
    """A positive multiple of -rem(dividend, divisor), without content."""
    remainder, lead = list(dividend), divisor[-1]
    while len(remainder) >= len(divisor):
        ratio, low = remainder[-1] if lead > 0 else -remainder[-1], len(remainder) - len(divisor)
        shifted = [0] * low + divisor
        remainder = _trimmed([abs(lead) * r - ratio * d for r, d in zip(remainder, shifted, strict=True)])
    content = gcd(*remainder)
    return [-r // content for r in remainder]


def _trimmed(ascending: list[int]) -> list[int]:
    size = len(ascending)
    while size and not ascending[size - 1]:
        size -= 1
    return ascending[:size]


def _changes(signs: Sequence[bool]) -> int:
    return sum(a != b for a, b in pairwise(signs))


def _sign_changes(coefficients: Sequence[int], digits: int) -> int | None:
    """Sign changes down the first column of the array; None where a sign is uncertain."""
    context = Context(prec=digits, rounding=ROUND_HALF_EVEN, Emax=MAX_EMAX, Emin=MIN_EMIN)
    unit = Decimal(5).scaleb(-digits)  # half a unit in the last place
    descending = [_rounded(c, context, unit) for c in reversed(coefficients)]
    above, row = descending[::2], descending[1::2]
    signs = [above[0][0].is_signed()]
    while row:
        value, bound = row[0]
        if not value.copy_abs() > bound:
            return None
        signs.append(value.is_signed())
        above, row = row, _next_row(above, row, context, unit)
    return _changes(signs)


def _rounded(coefficient: int, context: Context, unit: Decimal) -> tuple[Decimal, Decimal]:
    value = context.create_decimal(coefficient)
    return value, _UPWARD.multiply(value.copy_abs(), unit)


def _next_row(above: Row, row: Row, context: Context, unit: Decimal) -> Row:
    """above[i+1] - ratio * row[i+1] with ratio = above[0]/row[0]; every bound is rounded upward."""
    add, times = _UPWARD.add, _UPWARD.multiply
    (a, a_error), (b, b_error) = above[0], row[0]
    ratio = context.divide(a, b)
    size = _UPWARD.plus(ratio.copy_abs())
    # |a/b - ratio| <= (a_error + |ratio| (b_error + unit |b|)) / (|b| - b_error), with the denominator rounded down
    least = context.multiply(context.subtract(b.copy_abs(), b_error), _ALMOST_ONE)
    ratio_error = add(_UPWARD.divide(add(a_error, times(size, b_error)), least), times(size, unit))
    result: Row = []
    for i, (c, c_error) in enumerate(above[1:], 1):
        d, d_error = row[i] if i < len(row) else (_ZERO, _ZERO)
        product = context.multiply(ratio, d)
        value = context.subtract(c, product)
        error = add(c_error, times(size, d_error))
        error = add(error, times(ratio_error, add(d.copy_abs(), d_error)))
        result.append((value, add(error, times(unit, add(product.copy_abs(), value.copy_abs())))))
    return result
