"""Growth at infinity: containment on |s| >= R, Re s >= 0, against 40-digit arithmetic, and what must be known or
unknown.
"""

from __future__ import annotations

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from exact_formula import exact_value, formula_block

from encircle.engine import growth
from encircle.engine.composed_response import Composed
from encircle.engine.growth import Growth
from encircle.engine.real_interval import RealInterval

PARAMETERS = {"T": "0.37", "a": "2.5", "x": "0.3"}
DIGITS = 80  # differences of roots at large |s| cancel
RADII = np.array([30.0, 1e3, 1e6])


def at_infinity(text: str, radii: np.ndarray = RADII) -> Growth:
    used = {name: value for name, value in PARAMETERS.items() if name in text.replace("exp", "").replace("tanh", "")}
    return Composed(formula_block(text, **used)).at_infinity(radii)


def random_outer_points(rng: np.random.Generator, radius: float, count: int) -> list[mpmath.mpc]:
    """Points with |s| >= radius and Re s >= 0, half of them on the imaginary axis, most near the arc |s| = radius."""
    size = radius * 10.0 ** (rng.uniform(0, 4, count) * (rng.random(count) < 0.5) + rng.uniform(0, 0.1, count))
    quarter_turns = np.where(rng.random(count) < 0.5, rng.choice([-1.0, 1.0], count), rng.uniform(-1, 1, count))
    points = []
    for w, turn in zip(size, quarter_turns, strict=True):
        axis = mpmath.mpc(0, math.copysign(1.0, turn))
        points.append(mpmath.mpf(w) * (axis if abs(turn) == 1.0 else mpmath.expj(mpmath.pi / 2 * turn)))
    return points


def ratio(found: Growth, place: int, s: mpmath.mpc, value: mpmath.mpc) -> float:
    """error/bound at one point for the radius number ``place``; 0 where the bound is infinite."""
    if not np.isfinite(found.bound[place]):
        return 0.0
    bound, radius = mpmath.mpf(float(found.bound[place])), mpmath.mpf(float(found.radius[place]))
    allowed = bound * (abs(s) / radius) ** _exact(found.order)
    allowed += mpmath.mpf(10) ** -76 * abs(value)  # the oracle's own rounding
    for power, coefficient in found.terms:
        middle = (coefficient.lower + coefficient.upper) / 2
        term = mpmath.power(s, _exact(power))
        value -= _exact(middle) * term
        allowed += _exact(coefficient.upper - middle) * abs(term)
        allowed += mpmath.mpf(10) ** -76 * abs(term) * abs(_exact(middle))
    return float(abs(value) / allowed) if value else 0.0


def _exact(value: Fraction) -> mpmath.mpf:
    return mpmath.mpf(value.numerator) / value.denominator


def worst_ratio(text: str, count: int) -> float:
    found = at_infinity(text)
    block = formula_block(text, **PARAMETERS)
    rng = np.random.default_rng([41, count])
    with mpmath.workdps(DIGITS):
        return max(
            ratio(found, place, s, exact_value(block, s))
            for place, radius in enumerate(RADII)
            for s in random_outer_points(rng, radius, count)
        )


# formula, coefficient and power of the leading term
LEADING = [
    ("sqrt(s*T)", math.sqrt(0.37), Fraction(1, 2)),
    ("1/(1 + sqrt(s))", 1.0, Fraction(-1, 2)),
    ("s^0.7/(s + a)^2", 1.0, Fraction(-13, 10)),
    ("sqrt(s*(s + a))", 1.0, Fraction(1)),
    ("sqrt(s^2 + s + 1)", 1.0, Fraction(1)),
    ("(3 + T*s)^-0.35*(1 + s)^1.2", 0.37**-0.35, Fraction(17, 20)),
    ("tanh(sqrt(s*T))", 1.0, Fraction(0)),
    ("tanh(sqrt(s*T))/sqrt(s*T)", 0.37**-0.5, Fraction(-1, 2)),
    ("sqrt(s)/tanh(sqrt(s))", 1.0, Fraction(1, 2)),
    ("sqrt(s)*sinh(sqrt(s + a))/cosh(sqrt(s + a))", 1.0, Fraction(1, 2)),
    ("1 + 0.5*exp(-T*s)", 1.0, Fraction(0)),
    ("s + exp(-sqrt(s))*s^2", 1.0, Fraction(1)),
    ("sqrt(s + 1) - sqrt(s)", 0.5, Fraction(-1, 2)),
    ("exp(1/s) - 1", 1.0, Fraction(-1)),
    ("sinh(a/s)", 2.5, Fraction(-1)),
    ("exp(2 - 1/sqrt(s))", math.exp(2.0), Fraction(0)),
    ("(1 - exp(-T*s))/(T*s)/(1 + sqrt(s))", 1 / 0.37, Fraction(-3, 2)),
    ("1/(sqrt(s) + exp(-T*s))", 1.0, Fraction(-1, 2)),
    ("((s + 1)^1.5)^0.2", 1.0, Fraction(3, 10)),
    ("sqrt(s^2/(s + 1))*(s + a)^-0.25", 1.0, Fraction(1, 4)),
]
# formula, a bound of |H| at |s| = 1e6, the power with which it holds
BOUNDED = [
    ("exp(-T*s)", 1.0, Fraction(0)),
    ("s*exp(-T*s)", 1e6, Fraction(1)),
    ("exp(-T*s)/(1 + sqrt(s))", 1e-3, Fraction(-1, 2)),
    ("exp(-T*sqrt(s*(s + a)))", math.exp(-0.37 * 1.25), Fraction(0)),
    ("exp(-sqrt(s*T))", 1e-180, Fraction(-8)),
    ("1/cosh(sqrt(s))", 1e-300, Fraction(-8)),
    ("cosh(x*sqrt(s))/cosh(sqrt(s))", 1e-200, Fraction(-8)),
    ("sinh(x*sqrt(s + a))/sinh(sqrt(s + a))", 1e-200, Fraction(-8)),
    ("1/(s + exp(sqrt(s)))", 1e-300, Fraction(-8)),
    ("(sinh(sqrt(s)) + cosh(sqrt(s)))/cosh(2*sqrt(s))", 1e-300, Fraction(-8)),
    ("exp(-s - sqrt(s))", 1e-300, Fraction(-8)),
]
UNKNOWN = [
    "tanh(s)",
    "1/(1 + exp(-s))",
    "exp(s*0.1)",
    "exp(sqrt(s) - s)",
    "exp(-s^1.5)",
    "sqrt(1 - s)",
    "sqrt(s^2 + 1)",
    "((s + 1)^3)^0.9",
    "1/(sqrt(s) - sqrt(s + 1) + sqrt(s + 1) - sqrt(s) + exp(-s))",
    "cosh(sqrt(s^2 + 1))",
]


@pytest.mark.parametrize(("text", "coefficient", "power"), LEADING)
def test_leading_terms(text: str, coefficient: float, power: Fraction) -> None:
    lead = at_infinity(text).leading
    assert lead is not None
    assert lead.coefficient == pytest.approx(coefficient, rel=1e-12)
    assert lead.power == power
    oscillating = 1.01 if text.startswith("(1 - exp") else 0.51 if "0.5*exp" in text else 0.01
    assert lead.spread[2] < oscillating
    assert lead.spread[2] <= lead.spread[1] <= lead.spread[0] or np.isinf(lead.spread[0])


@pytest.mark.parametrize(("text", "bound", "power"), BOUNDED)
def test_bounds(text: str, bound: float, power: Fraction) -> None:
    size = at_infinity(text).size
    assert size.power == power
    assert size.size[2] <= bound * 1.01 + 1e-299
    assert at_infinity(text).leading is None


@pytest.mark.parametrize("text", UNKNOWN)
def test_what_cannot_be_proved_is_unknown(text: str) -> None:
    assert at_infinity(text).unknown


@pytest.mark.parametrize("text", [row[0] for row in [*LEADING, *BOUNDED]])
def test_growth_is_contained(text: str) -> None:
    worst = worst_ratio(text, 15)
    assert worst <= 1.0
    assert worst > 1e-9 or "sqrt(s*T)" in text


@pytest.mark.heavy
@pytest.mark.parametrize("text", [row[0] for row in [*LEADING, *BOUNDED]])
def test_growth_is_contained_often(text: str) -> None:
    assert worst_ratio(text, 300) <= 1.0


def test_halved_remainders_of_series_are_found_out(monkeypatch: pytest.MonkeyPatch) -> None:
    series = growth._series
    monkeypatch.setattr(growth, "_series", lambda x, c, tail, order: series(x, c, 0.05 * tail, order))
    texts = ("1/(1 + sqrt(s))", "exp(2 - 1/sqrt(s))", "1/(sqrt(s) + exp(-T*s))")
    assert max(worst_ratio(text, 40) for text in texts) > 1.0


# -- the arithmetic itself, on random series with random rests


def _random_growth(rng: np.random.Generator) -> Growth:
    powers = sorted({Fraction(int(k), 4) for k in rng.integers(-8, 9, 3)}, reverse=True)
    terms = [(p, RealInterval.exact(Fraction(int(rng.integers(1, 400)), 100))) for p in powers]
    order = powers[0] - Fraction(int(rng.integers(0, 8)), 4)
    bound = 0.3 * float(terms[0][1]) * RADII ** float(powers[0]) * rng.choice([0.0, 1.0])
    return Growth(RADII, tuple(terms), bound, order)


def _member(rng: np.random.Generator, x: Growth, place: int, s: mpmath.mpc) -> mpmath.mpc:
    value = mpmath.mpc(0)
    for power, coefficient in x.terms:
        value += _exact(coefficient.lower) * mpmath.power(s, _exact(power))
    rim = mpmath.mpf(float(x.bound[place])) * (abs(s) / mpmath.mpf(float(x.radius[place]))) ** _exact(x.order)
    return value + rim * mpmath.expj(float(rng.uniform(0, 6.3)))


def test_sums_products_and_powers_of_random_series() -> None:
    rng = np.random.default_rng(43)
    worst = dict.fromkeys(("sum", "product", "square", "reciprocal", "power"), 0.0)
    with mpmath.workdps(DIGITS):
        for _ in range(60):
            x, y = _random_growth(rng), _random_growth(rng)
            place = int(rng.integers(0, 3))
            s = random_outer_points(rng, float(RADII[place]), 1)[0]
            a, b = _member(rng, x, place, s), _member(rng, y, place, s)
            alpha = Fraction(int(rng.integers(-9, 10)), 4)
            results = {
                "sum": (x + y, a + b),
                "product": (x * y, a * b),
                "square": (x.power(Fraction(2)), a * a),
                "reciprocal": (x.power(Fraction(-1)), 1 / a),
                "power": (x.power(alpha), _continued_power(x, s, a, alpha)),
            }
            for name, (found, value) in results.items():
                worst[name] = max(worst[name], ratio(found, place, s, value))
    assert all(1e-2 < found <= 1.0 for found in worst.values()), worst


def _continued_power(x: Growth, s: mpmath.mpc, value: mpmath.mpc, alpha: Fraction) -> mpmath.mpc:
    """(c s^p)^alpha (value/(c s^p))^alpha: the branch that follows the leading term."""
    power, coefficient = x.terms[0]
    lead = _exact(coefficient.lower) * mpmath.power(s, _exact(power))
    return (
        mpmath.power(_exact(coefficient.lower), _exact(alpha))
        * mpmath.power(s, _exact(power * alpha))
        * mpmath.power(value / lead, _exact(alpha))
    )


def test_decay_is_a_bound_and_nearly_attained() -> None:
    """exp(-rate x^p) <= bound (x/R)^-8 for x >= R, with equality somewhere."""
    radius = np.array([1.0, 30.0, 1e4])
    for rate, p in ((0.5, 0.5), (3.0, 0.25), (1e-3, 0.9)):
        bound = growth._decay(radius, np.full(3, rate), p).bound
        x = radius[:, None] * np.logspace(0, 12, 4000)
        share = np.exp(-rate * x**p) * (x / radius[:, None]) ** 8 / bound[:, None]
        assert np.all(share <= 1.0)
        assert np.all(share.max(axis=1) > 0.99)


def test_cut_of_the_root_is_told_from_the_arguments() -> None:
    """sqrt(s (s + 1)) keeps off the negative axis, sqrt(s^2 + 1) and sqrt(s^2 (s + 1)) do not."""
    one, s = RealInterval.exact(1), (Fraction(1), RealInterval.exact(1))
    shifted = Growth(RADII, (s, (Fraction(0), one)), np.zeros(3), Fraction(-9))
    square = Growth(RADII, ((Fraction(2), one), (Fraction(0), one)), np.zeros(3), Fraction(-9))
    assert growth.off_negative_axis(Fraction(1), [(shifted, Fraction(1))]).all()
    assert growth.off_negative_axis(Fraction(0), [(shifted, Fraction(1)), (shifted, Fraction(1))]).all()
    assert not growth.off_negative_axis(Fraction(0), [(square, Fraction(1))]).any()
    assert not growth.off_negative_axis(Fraction(2), [(shifted, Fraction(1))]).any()
    assert growth.off_negative_axis(Fraction(2), [(shifted, Fraction(-1))]).all()
    assert not growth.off_negative_axis(Fraction(2), []).any()


def test_zero_and_absurd_radii() -> None:
    zero = at_infinity("sqrt(s) - sqrt(s)")
    assert zero.terms == ()
    assert not zero.bound.any()
    far = at_infinity("exp(-sqrt(s))/(1 + sqrt(s))", np.array([1e-300, 1e300]))
    assert np.isinf(far.bound[0]) or far.bound[0] >= 1.0
    assert far.bound[1] < 1e-200
