"""Routh's array with proven signs: the number of roots right of the imaginary axis.

Entries are decimal numbers with a bound on their error; the working precision grows until every sign in the first
column is certain. Source of the array: E. J. Routh, "A Treatise on the Stability of a Given State of Motion", 1877; any
textbook on linear systems.
"""

from __future__ import annotations

from collections.abc import Sequence
from decimal import MAX_EMAX, MIN_EMIN, ROUND_CEILING, ROUND_HALF_EVEN, Context, Decimal
from itertools import pairwise

from encircle.engine.integer_polynomial import multiply

Row = list[tuple[Decimal, Decimal]]  # (value, bound on its error)

_ZERO = Decimal(0)
_ALMOST_ONE = Decimal("0.999999")
_UPWARD = Context(prec=9, rounding=ROUND_CEILING, Emax=MAX_EMAX, Emin=MIN_EMIN)
_DIGITS = (32, 64, 128, 256, 512, 1024, 2048, 4096, 8192)


def right_half_plane_roots(coefficients: Sequence[int]) -> int:
    """The number of roots with positive real part, with multiplicity, proved.

    ``coefficients``: ascending, the last not 0, of a polynomial without a pair of roots r, -r (hence without one on the
    imaginary axis). Raises ArithmeticError where 8192 digits do not settle every sign.
    """
    if len(coefficients) < 2:
        return 0
    for digits in _DIGITS:
        for helper in _helpers(coefficients):
            changes = _sign_changes(multiply(coefficients, helper), digits)
            if changes is not None:
                return changes
    raise ArithmeticError("the signs of Routh's array are not settled with 8192 digits")


def _helpers(coefficients: Sequence[int]) -> tuple[list[int], ...]:
    """Factors 1, s + a, s + 3a, a near the geometric mean of the roots.

    A root added on the left changes no count, and removes a zero from the first column for all but finitely many a.
    """
    octave = (abs(coefficients[0]).bit_length() - abs(coefficients[-1]).bit_length()) // (len(coefficients) - 1)
    up, down = 2 ** max(octave, 0), 2 ** max(-octave, 0)
    return [1], [up, down], [3 * up, down]


def _sign_changes(coefficients: Sequence[int], digits: int) -> int | None:
    """Sign changes down the first column of the array; None where a sign is uncertain."""
    context = Context(prec=digits, rounding=ROUND_HALF_EVEN, Emax=MAX_EMAX, Emin=MIN_EMIN)
    unit = Decimal(1).scaleb(1 - digits)
    descending = [_rounded(c, context, unit) for c in reversed(coefficients)]
    above, row = descending[::2], descending[1::2]
    signs = [above[0][0].is_signed()]
    while row:
        value, bound = row[0]
        if not value.copy_abs() > bound:
            return None
        signs.append(value.is_signed())
        above, row = row, _next_row(above, row, context, unit)
    return sum(a != b for a, b in pairwise(signs))


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
