"""A declared block as an exact transfer function, its polynomials kept as factors."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from fractions import Fraction
from math import isfinite
from sys import float_info

import numpy as np
from numpy.typing import NDArray

from encircle.engine.declarations import CoefficientBlock, FormulaBlock, RootBlock, StateSpaceBlock
from encircle.engine.delayed_quotient import (
    DelayedQuotient,
    DelayedSum,
    UnusableBlockError,
    check_order,
    from_polynomial,
    lowest_terms,
)
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.formula_reduction import reduce_formula
from encircle.engine.polynomial import Polynomial
from encircle.engine.polynomial_factors import Factors, S, as_factors, degree, over_common_base, separated
from encircle.engine.result import ComplexArray
from encircle.engine.state_space import state_space_polynomials

FactorList = tuple[tuple[Polynomial, int], ...]
ModelBlock = FormulaBlock | CoefficientBlock | RootBlock | StateSpaceBlock


@dataclass(frozen=True, slots=True)
class TransferFunction:
    """X(s) = gain * s^power * prod(numerator) / prod(denominator) * exp(-delay*s) * sum_i n_i(s) exp(-T_i s).

    In lowest terms, except for state space, where every eigenvalue of A stays: there ``unreduced_power`` factors s
    stand in numerator and denominator besides ``power``, and other common factors stand in both lists.

    ``gain`` is 0 for the zero block. ``power`` of s, negative for poles at 0. ``numerator`` and ``denominator`` hold
    distinct monic factors of degree >= 1 with p(0) != 0 and their multiplicities; the factors are square-free and
    pairwise coprime, and one that has roots on the imaginary axis is even in s. ``delay`` >= 0, seconds.
    ``delayed_sum`` is () where it is 1, else two or more pairs (T_i, n_i), T_i ascending from 0, n_0 monic, the n_i
    without a common factor; a zero of the whole sum at s = 0 is not taken out of ``power``. ``cancelled`` and
    ``power_cancelled`` are the common factors that the reduction removed.
    """

    gain: Fraction
    power: int
    numerator: FactorList
    denominator: FactorList
    delay: Fraction
    delayed_sum: DelayedSum
    cancelled: FactorList
    power_cancelled: int
    unreduced_power: int = 0


def transfer_function(block: ModelBlock) -> TransferFunction | None:
    """The block's transfer function; None for a formula that is irrational in s and states its unstable poles.

    Raises ProjectError, one problem that names block and key, for what the project file format refuses: a zero
    denominator, T < 0 in exp(-T*s), dead time in a denominator, an exponent above 64, an order above 100, constants
    beyond double precision, ``unstable_poles`` left out where it is needed or stated where it is not.
    """
    key = {FormulaBlock: "formula", CoefficientBlock: "denominator", RootBlock: "poles"}.get(type(block), "state_space")
    try:
        match block:
            case FormulaBlock():
                return _of_formula(block)
            case CoefficientBlock():
                return _of_coefficients(block)
            case RootBlock():
                return _of_roots(block)
        return _of_state_space(block)
    except UnusableBlockError as refusal:
        key = refusal.key or key
        message = f"`{key}` of block `{block.name}` {refusal.predicate}"
        raise ProjectError(Problem(refusal.code, f"blocks.{block.name}.{key}", message)) from None


def cancelled_right_half_plane(tf: TransferFunction) -> bool:
    """True where the reduction removed a common factor with a root on or right of the imaginary axis."""
    return tf.power_cancelled > 0 or any(factor.count_right() != (0, 0) for factor, _ in tf.cancelled)


def evaluate(tf: TransferFunction, s: ComplexArray) -> ComplexArray:
    """X(s) at any array of points s (rad/s), in plain double precision; infinite at a pole.

    Near a zero that terms of ``delayed_sum`` have in common, as at s = 0 in (1 - exp(-T s))/(T s), digits are lost.
    """
    s = np.asarray(s, complex)
    zeros, poles = _all_roots(tf.numerator, tf.power), _all_roots(tf.denominator, -tf.power)
    above, above_exponent = _product_of_differences(s, zeros)
    below, below_exponent = _product_of_differences(s, poles)
    with np.errstate(all="ignore"):
        quotient = above / below * float(tf.gain) * _delays(tf, s)
        scale = above_exponent - below_exponent
        value = quotient * np.ldexp(1.0, scale // 2) * np.ldexp(1.0, scale - scale // 2)
    return np.where(below == 0, complex(np.inf), value)


def _of_formula(block: FormulaBlock) -> TransferFunction | None:
    quotient = reduce_formula(block.formula, block.parameters)
    if quotient is None and block.unstable_poles is None:
        raise UnusableBlockError(
            "unstable-poles-missing",
            "is irrational in s, so its poles are not found: state `unstable_poles`, their number right of the axis",
        )
    if quotient is not None and block.unstable_poles is not None:
        raise UnusableBlockError(
            "unstable-poles-needless",
            "is rational in s (dead time apart), so its poles are found: remove the key `unstable_poles`",
        )
    return None if quotient is None else _in_lowest_terms(quotient)


def _of_coefficients(block: CoefficientBlock) -> TransferFunction:
    numerator, denominator = (Polynomial(tuple(reversed(c))) for c in (block.numerator, block.denominator))
    check_order(numerator.degree, "numerator")
    if not denominator:
        raise UnusableBlockError("zero-denominator", "is empty or zero: give it a coefficient other than 0")
    quotient = from_polynomial(numerator) / from_polynomial(denominator)
    return _in_lowest_terms(replace(quotient, delay=block.dead_time))


def _of_roots(block: RootBlock) -> TransferFunction:
    numerator, denominator = _root_factors(block.zeros), _root_factors(block.poles)
    check_order(degree(numerator), "zeros")
    check_order(degree(denominator), "poles")
    return _in_lowest_terms(DelayedQuotient(block.leading_gain, numerator, denominator, block.dead_time))


def _root_factors(roots: Iterable[tuple[Fraction, Fraction]]) -> Factors:
    """s - re for a real root, s^2 - 2 re s + re^2 + im^2 for a pair."""
    return Factors(Polynomial.of(re * re + im * im, -2 * re, 1) if im else Polynomial.of(-re, 1) for re, im in roots)


def _in_lowest_terms(quotient: DelayedQuotient) -> TransferFunction:
    reduced, common = lowest_terms(quotient)
    return _finished(reduced, common, Factors())


def _finished(x: DelayedQuotient, cancelled: Factors, kept: Factors) -> TransferFunction:
    """The factors sorted and powers of s apart; ``kept`` common factors go into both lists."""
    over_one_base = (over_common_base(factors + kept) for factors in (x.numerator, x.denominator))
    numerator, denominator = (separated(factors) for (factors,) in over_one_base)
    removed = separated(cancelled)
    _check_range(x, (*numerator, *denominator))
    return TransferFunction(
        gain=x.gain,
        power=numerator[S] - denominator[S],
        numerator=_without_s(numerator),
        denominator=_without_s(denominator),
        delay=x.delay,
        delayed_sum=x.delayed_sum,
        cancelled=_without_s(removed),
        power_cancelled=removed[S],
        unreduced_power=min(numerator[S], denominator[S]),
    )


def _without_s(factors: Factors) -> FactorList:
    kept = [(factor, multiplicity) for factor, multiplicity in factors.items() if factor != S]
    return tuple(sorted(kept, key=lambda item: (item[0].degree, item[0].coefficients)))


def _check_range(x: DelayedQuotient, factors: Iterable[Polynomial]) -> None:
    """Raises UnusableBlockError where a constant or root is beyond double precision, or roots cannot be told apart."""
    polynomials = [*factors, *(n for _, n in x.delayed_sum)]
    numbers = [x.gain, x.delay, *(time for time, _ in x.delayed_sum), *(c for p in polynomials for c in p.coefficients)]
    if not all(map(_fits_double, numbers)):
        raise UnusableBlockError(
            "out-of-range",
            "leads to constants beyond double precision (about 1e-308 to 1e308): "
            "change its constants, or split it into several blocks of lower order",
        )
    try:
        for polynomial in polynomials:
            polynomial.roots()
    except ArithmeticError:  # OverflowError is one
        raise UnusableBlockError(
            "roots-too-close",
            "has a group of poles or zeros too close together to be told apart: write it as a product of lower order",
        ) from None


def _fits_double(number: Fraction) -> bool:
    try:
        value = float(number)
    except OverflowError:
        return False
    return isfinite(value) and (abs(value) >= float_info.min or not number)


def _of_state_space(block: StateSpaceBlock) -> TransferFunction:
    check_order(len(block.A))
    A, B, C = [_doubles(row) for row in block.A], _doubles(block.B), _doubles(block.C)
    numerator, parts = state_space_polynomials(A, B, C, *_doubles([block.D]))
    upper = as_factors(numerator) if numerator else Factors()
    upper, lower = over_common_base(upper, sum(map(as_factors, parts), Factors()))
    common = upper & lower
    quotient = DelayedQuotient(numerator.leading, upper - common, lower - common, block.dead_time)
    return _finished(quotient, Factors(), common)


def _doubles(numbers: Iterable[Fraction]) -> list[Fraction]:
    numbers = list(numbers)
    if not all(map(_fits_double, numbers)):
        raise UnusableBlockError(
            "out-of-range", "has an entry beyond double precision (about 1e-308 to 1e308): change the units"
        )
    return [Fraction(float(number)) for number in numbers]


def _all_roots(factors: FactorList, at_zero: int) -> ComplexArray:
    found = [np.repeat(factor.roots(), multiplicity) for factor, multiplicity in factors]
    return np.concatenate([np.zeros(max(at_zero, 0), complex), *found])


def _product_of_differences(s: ComplexArray, roots: ComplexArray) -> tuple[ComplexArray, NDArray[np.int64]]:
    """prod(s - root) as value * 2^exponent, scaled in between so that high orders neither overflow nor vanish."""
    value, exponent = np.ones_like(s), np.zeros(s.shape, np.int64)
    for start in range(0, len(roots), 8):
        value = value * (s[..., None] - roots[start : start + 8]).prod(axis=-1)
        shift = np.frexp(np.maximum(np.abs(value.real), np.abs(value.imag)))[1].astype(np.int64)
        value = value * np.ldexp(1.0, -shift)
        exponent += shift
    return value, exponent


def _delays(tf: TransferFunction, s: ComplexArray) -> ComplexArray:
    """exp(-delay*s) * sum_i n_i(s) exp(-T_i s)."""
    common = np.exp(-float(tf.delay) * s)
    if not tf.delayed_sum:
        return common
    terms = [np.polyval(n.as_floats()[::-1], s) * np.exp(-float(time) * s) for time, n in tf.delayed_sum]
    return np.asarray(common * sum(terms))
