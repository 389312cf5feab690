"""Roots of many bracketed functions at once."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from encircle.engine.result import FloatArray

MOST_STEPS = 100


def bracketed_roots(
    function: Callable[[FloatArray], FloatArray], left: FloatArray, right: FloatArray, accuracy: float = 4e-15
) -> FloatArray:
    """A root of ``function`` in each bracket [left, right], whose ends give values of opposite sign, all (n,).

    Inverse quadratic interpolation where it is safe, else bisection (T. R. Chandrupatla, "A new hybrid
    quadratic/bisection algorithm for finding the zero of a nonlinear function without using derivatives", Adv. Eng.
    Software 28 (1997) 145-149; cited from memory). Returns the best point of each final bracket, relative width
    ``accuracy``. The function is called with points in the order of the brackets.
    """
    if not len(left):
        return left.copy()
    a, b = right.astype(float), left.astype(float)  # a: newest point, b: the other side, c: the one before
    fa, fb = function(a), function(b)
    c, fc = b.copy(), fb.copy()
    t = np.full(len(a), 0.5)
    with np.errstate(all="ignore"):
        for _ in range(MOST_STEPS):
            x = a + t * (b - a)
            fx = function(x)
            same = np.sign(fx) == np.sign(fa)
            c, fc = np.where(same, a, b), np.where(same, fa, fb)
            b, fb = np.where(same, b, a), np.where(same, fb, fa)
            a, fa = x, fx
            best = np.where(np.abs(fa) < np.abs(fb), a, b)
            limit = 0.5 * accuracy * np.abs(best) / np.abs(b - a)
            if bool(((limit > 0.5) | (fa == 0.0)).all()):
                break
            t = np.clip(_step(a, b, c, fa, fb, fc), limit, 1.0 - limit)
    return np.where(np.abs(fa) <= np.abs(fb), a, b)


def _step(
    a: FloatArray, b: FloatArray, c: FloatArray, fa: FloatArray, fb: FloatArray, fc: FloatArray
) -> FloatArray:
    """The next point as a part of the way from a to b: eqs. of Chandrupatla's figure 2."""
    xi = (a - b) / (c - b)
    phi = (fa - fb) / (fc - fb)
    safe = (phi * phi < xi) & ((1.0 - phi) ** 2 < 1.0 - xi)
    quadratic = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
    usable = safe & np.isfinite(quadratic)
    return np.where(usable, quadratic, 0.5)
