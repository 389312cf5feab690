"""Margins of a rational loop L = N/D by exact algebra and certified real roots (python-flint), without any grid.

On the axis |p(jw)|^2 = E(x)^2 + x O(x)^2 with x = w^2, where E and O hold the even and odd coefficients with
alternating signs. Extremes and crossings are then real roots of polynomials in x.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from itertools import pairwise

from exact_roots import count_roots, precision
from flint import acb, acb_poly, fmpq, fmpq_poly

BITS = 256


@dataclass(frozen=True, slots=True)
class ExactMargins:
    """Frequencies in rad/s; ``phase`` signed, positive towards lag, in rad; ranges as (lower, upper, Z)."""

    modulus: float
    sensitivity_peak: float
    complementary_peak: float
    crossovers: tuple[float, ...]
    phase: float | None
    delay: float | None
    gain_ranges: tuple[tuple[float, float, int], ...]


def even_and_odd(p: fmpq_poly) -> tuple[fmpq_poly, fmpq_poly]:
    signed = [c if i % 4 < 2 else -c for i, c in enumerate(p.coeffs())]
    return fmpq_poly(signed[0::2] or [0]), fmpq_poly(signed[1::2] or [0])


def square(p: fmpq_poly) -> fmpq_poly:
    """|p(jw)|^2 as a polynomial in x = w^2."""
    E, O = even_and_odd(p)  # noqa: E741
    return E * E + fmpq_poly([0, 1]) * O * O


def positive_roots(p: fmpq_poly) -> list[acb]:
    """Distinct positive real roots, certified."""
    if p.degree() < 1:
        return []
    with precision(BITS):
        return [root for root, _ in p.complex_roots() if root.imag == 0 and root.real > 0]


def extremes(above: fmpq_poly, below: fmpq_poly) -> list[float]:
    """sqrt(above/below) at standstill, at infinity and where it is stationary in x > 0; inf where below = 0."""
    places = positive_roots(above.derivative() * below - above * below.derivative())
    with precision(BITS):
        values = [float(abs(acb_poly(above)(x) / acb_poly(below)(x)).mid()) for x in places]
    values.append(ratio(above.coeffs()[0], below.coeffs()[0]))
    if above.degree() <= below.degree():
        values.append(ratio(above.coeffs()[-1], below.coeffs()[-1]) if above.degree() == below.degree() else 0.0)
    return [math.sqrt(value) for value in values]


def ratio(a: fmpq, b: fmpq) -> float:
    quotient = a / b if b != 0 else None
    return math.inf if quotient is None else float(quotient.p) / float(quotient.q)


def at_frequency(N: fmpq_poly, D: fmpq_poly, x: acb) -> acb:
    """L(j sqrt(x))."""
    s = acb(0, 1) * x.sqrt()
    return acb_poly(N)(s) / acb_poly(D)(s)


def gain_ranges(N: fmpq_poly, D: fmpq_poly) -> tuple[tuple[float, float, int], ...]:
    """Factors K > 0 at which D + K N may have a root on the axis, and Z between them; equal neighbours are merged."""
    (En, On), (Ed, Od) = even_and_odd(N), even_and_odd(D)
    with precision(BITS):
        candidates = [-(1 / at_frequency(N, D, x)).real for x in positive_roots(On * Ed - En * Od)]
        limits = sorted(float(K.mid()) for K in candidates if K > 0)
    for numerator, denominator in ends(N, D):
        if numerator != 0 and -denominator / numerator > 0:
            limits.append(ratio(-denominator, numerator))
    edges = [0.0, *sorted(limits), math.inf]
    ranges: list[tuple[float, float, int]] = []
    for lower, upper in pairwise(edges):
        middle = lower * 2 + 1 if upper == math.inf else (lower + upper) / 2
        Z = count_roots(D + N * fmpq(*middle.as_integer_ratio())).right
        if ranges and ranges[-1][2] == Z:
            ranges[-1] = (ranges[-1][0], upper, Z)
        else:
            ranges.append((lower, upper, Z))
    return tuple(ranges)


def ends(N: fmpq_poly, D: fmpq_poly) -> Iterable[tuple[fmpq, fmpq]]:
    """Constant terms (standstill) and, where the degrees are equal, leading ones (infinity)."""
    yield N.coeffs()[0], D.coeffs()[0]
    if N.degree() == D.degree():
        yield N.coeffs()[-1], D.coeffs()[-1]


def exact_margins(N: fmpq_poly, D: fmpq_poly) -> ExactMargins:
    """All margins of a stable loop with numerator and denominator N, D, deg N <= deg D."""
    closed = D + N
    modulus = min(extremes(square(closed), square(D)))
    crossings = positive_roots(square(N) - square(D))
    with precision(BITS):
        frequencies = [float(x.sqrt().real.mid()) for x in crossings]
        turns = [float((-at_frequency(N, D, x)).arg().mid()) for x in crossings]
    delays = [(turn if turn > 0 else turn + 2 * math.pi) / w for turn, w in zip(turns, frequencies, strict=True)]
    if N.degree() == D.degree() and abs(N.coeffs()[-1]) >= abs(D.coeffs()[-1]):
        delays.append(0.0)
    return ExactMargins(
        modulus=modulus,
        sensitivity_peak=1 / modulus,
        complementary_peak=max(extremes(square(N), square(closed))),
        crossovers=tuple(sorted(frequencies)),
        phase=min(turns, key=abs, default=None),
        delay=min(delays, default=None),
        gain_ranges=gain_ranges(N, D),
    )
