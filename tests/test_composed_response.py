"""Irrational formulas on cells: containment in 40-digit arithmetic, width, cells at 0, cuts, published counts."""

from __future__ import annotations

import itertools
import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from enclosure_checks import DIGITS, ratios
from exact_formula import exact_value, formula_block

from encircle.engine import hyperbolic, rounding, taylor_model
from encircle.engine.composed_response import Composed, Enclosure, power_on_cells, values_and_slopes
from encircle.engine.errors import ProjectError
from encircle.engine.taylor_model import TaylorModel, distance_from_zero_lower

PARAMETERS = {"T": "0.37", "a": "2.5", "b": "0.04", "x": "0.3"}

# (formula, power of s at 0, highest frequency at which cells of 2 % width are still proved)
FORMULAS = [
    ("sqrt(s)", Fraction(1, 2), 1e12),
    ("1/(1 + sqrt(s*T))", Fraction(0), 1e12),
    ("s^0.7/(s + a)^2", Fraction(7, 10), 1e12),
    ("a/s^0.5 + T*s^0.8", Fraction(-1, 2), 1e12),
    ("(1 + s*T)^-0.35", Fraction(0), 1e12),
    ("((s + a)/(s + b))^0.25", Fraction(0), 1e12),
    ("sqrt(s*(s + a))", Fraction(1, 2), 1e12),
    ("sqrt((a + T*s)*(b + x*s))", Fraction(0), 1e12),
    ("sqrt(s^2 + a*s)", Fraction(1, 2), 1e12),
    ("exp(-sqrt(s*T))", Fraction(0), 1e4),
    ("exp(-T*sqrt(s*(s + a)))", Fraction(0), 30.0),
    ("exp(-T*s)/(1 + sqrt(s))", Fraction(0), 100.0),
    ("(1 - exp(-T*s))/(T*s)/(1 + sqrt(s))", Fraction(0), 100.0),
    ("(1 - exp(-sqrt(s*T)))/sqrt(s)", Fraction(0), 1e4),
    ("tanh(sqrt(s*T))/sqrt(s*T)", Fraction(0), 1e8),
    ("sqrt(s*T)/tanh(sqrt(s*T))", Fraction(0), 1e8),
    ("sinh(sqrt(s))/sqrt(4*s)", Fraction(0), 400.0),
    ("1/cosh(sqrt(s*T))", Fraction(0), 1000.0),
    ("cosh(x*sqrt(s))/cosh(sqrt(s))", Fraction(0), 400.0),
    ("sinh(x*sqrt(s + a))/sinh(sqrt(s + a))", Fraction(0), 400.0),
    ("tanh(T*s + a)", Fraction(0), 100.0),
    ("sinh(T*s)/s", Fraction(0), 5.0),
    ("cosh(sqrt(s^2 + 1))", Fraction(0), 5.0),
    ("sqrt(1 + sqrt(s))*exp(-b*s)", Fraction(0), 100.0),
    ("(sqrt(s) + 1)^5/(s + a)^2.5", Fraction(0), 1e10),
    ("s^-0.5*(a + s)^0.5*exp(-0.1*s^0.4)", Fraction(-1, 2), 1e6),
    ("sqrt(2)*exp(-2)*pi^0.5/(s^1.5 + s + pi)", Fraction(0), 1e10),
    ("1/(1 + (b*s)^0.9)^3", Fraction(0), 1e12),
    ("(-s)^0.5*sqrt(s)/(s + 1)", Fraction(1), 1e10),
    ("1/(sqrt(s) + exp(-T*s))", Fraction(0), 30.0),
    ("((s + 1)^3*(s + a)^2)^0.37", Fraction(0), 0.5),
    ("(s^3)^0.5 + 1", Fraction(0), 1e8),
    ("sqrt(s^1.5/(s + 1))", Fraction(3, 4), 1e8),
    ("sqrt(2)*tanh(sqrt(2*s + 2))/sqrt(s + 1)", Fraction(0), 1e8),
]
NAMES = [text for text, _, _ in FORMULAS]


def composed(text: str) -> Composed:
    used = {name: value for name, value in PARAMETERS.items() if name in text.replace("exp", "").replace("tanh", "")}
    return Composed(formula_block(text, **used))


def random_cells(rng: np.random.Generator, count: int, highest: float) -> tuple[np.ndarray, np.ndarray]:
    """Centres from 1e-6 rad/s up, half widths from 1e-12 to 0.4 of them."""
    centre = 10.0 ** rng.uniform(-6, math.log10(highest) + 1, count)
    return centre, centre * 10.0 ** rng.uniform(-12, -0.4, count)


def cell_ratios(
    text: str, enclosure: Enclosure | TaylorModel, centre: np.ndarray, half: np.ndarray, t: np.ndarray, power: Fraction
) -> np.ndarray:
    """error/radius of H/s^power at j(centre + half t)."""
    block = formula_block(text, **PARAMETERS)
    with mpmath.workdps(DIGITS):
        values = []
        for c, h, x in zip(centre, half, t, strict=True):
            s = mpmath.mpc(0, mpmath.mpf(float(c)) + mpmath.mpf(float(h)) * mpmath.mpf(float(x)))
            divisor = mpmath.power(s, mpmath.mpf(power.numerator) / power.denominator)
            values.append(exact_value(block, s) / divisor)
        return ratios(TaylorModel(*enclosure), t, values)


def _check(text: str, highest: float, count: int) -> None:
    rng = np.random.default_rng([17, NAMES.index(text), count])
    H = composed(text)
    centre, half = random_cells(rng, count, highest)
    t = np.where(rng.random(count) < 0.4, rng.choice([-1.0, 1.0], count), rng.uniform(-1, 1, count))
    for enclose, power in ((H.on_cells, Fraction(0)), (H.regular_on_cells, H.power_at_zero)):
        found = cell_ratios(text, enclose(centre, half), centre, half, t, power)
        assert found.max() <= 1.0, f"{text} leaves its enclosure at {centre[found.argmax()]}, {half[found.argmax()]}"
        assert found.max() > 1e-3 or enclose == H.regular_on_cells, f"{text} is padded"


@pytest.mark.parametrize(("text", "power", "highest"), FORMULAS, ids=NAMES)
def test_formulas_are_contained(text: str, power: Fraction, highest: float) -> None:
    assert composed(text).power_at_zero == power
    _check(text, highest, 34)


@pytest.mark.heavy
@pytest.mark.parametrize(("text", "power", "highest"), FORMULAS, ids=NAMES)
def test_formulas_are_contained_often(text: str, power: Fraction, highest: float) -> None:
    _check(text, highest, 400)


@pytest.mark.parametrize(("text", "power", "highest"), FORMULAS, ids=NAMES)
def test_narrow_cells_are_proved_and_the_radius_shrinks_with_the_third_power(
    text: str, power: Fraction, highest: float
) -> None:
    centre = np.logspace(-6, math.log10(highest), 40)
    H = composed(text)
    wide, narrow = (TaylorModel(*H.on_cells(centre, share * centre)) for share in (0.02, 0.01))
    factor = wide.r / np.ldexp(narrow.r, taylor_model.exponents(narrow) - taylor_model.exponents(wide))
    truncation = wide.r > 1e-8 * np.abs(wide.v)
    assert np.isfinite(wide.r).all()
    assert (wide.r < 0.2 * np.abs(wide.v)).all()
    assert np.all(factor[truncation] > 6.5)
    point = TaylorModel(*H.on_cells(centre, 0.0 * centre))
    assert np.all(point.r < 1e-9 * np.abs(point.v))


@pytest.mark.parametrize(("text", "power", "highest"), FORMULAS, ids=NAMES)
def test_the_cell_at_zero(text: str, power: Fraction, highest: float) -> None:
    """A cell that touches s = 0: contained, and the regular part is finite and proved to stay off 0."""
    rng = np.random.default_rng(23)
    half = 10.0 ** rng.uniform(-9, -3, 12)
    centre = half * np.where(rng.random(12) < 0.5, 1.0, 1.0 - 2.0**-50)  # widened halves exceed the centre
    H = composed(text)
    t = np.concatenate([rng.uniform(-1, 1, 6), -1 + 10.0 ** rng.uniform(-12, -1, 6)])
    regular = TaylorModel(*H.regular_on_cells(centre, half))
    assert cell_ratios(text, regular, centre, half, t, power).max() <= 1.0
    assert np.all(regular.r < 0.2 * np.abs(regular.v))
    assert np.all(distance_from_zero_lower(regular) > 0)
    whole = TaylorModel(*H.on_cells(centre, half))
    if power < 0:
        assert np.all(whole.r == np.inf)
    else:
        assert cell_ratios(text, whole, centre, half, t, Fraction(0)).max() <= 1.0
    if power > 0:
        assert not (distance_from_zero_lower(whole) > 0).any()


@pytest.mark.parametrize(("text", "power", "highest"), FORMULAS, ids=NAMES)
def test_plain_values_and_slopes(text: str, power: Fraction, highest: float) -> None:
    omega = np.logspace(-5, math.log10(highest), 25)
    H = composed(text)
    block = formula_block(text, **PARAMETERS)
    values, slopes = values_and_slopes(H.formula, omega)
    with mpmath.workdps(DIGITS):
        for w, value, slope in zip(omega, values, slopes, strict=True):
            s, step = mpmath.mpc(0, mpmath.mpf(float(w))), mpmath.mpf(float(w)) * mpmath.mpf(10) ** -12
            truth = exact_value(block, s)
            change = (exact_value(block, s + 1j * step) - exact_value(block, s - 1j * step)) / (2 * step)
            assert abs(value - complex(truth)) <= 1e-10 * abs(truth)
            assert abs(slope - complex(change)) <= 1e-7 * abs(change) + 1e-10 * abs(complex(truth)) / w
    assert H.at_points(omega) == pytest.approx(values)


def test_halved_remainders_are_found_out(monkeypatch: pytest.MonkeyPatch) -> None:
    """The containment test must fail when every remainder is half of what it ought to be."""
    for module in (taylor_model, hyperbolic):
        monkeypatch.setattr(module, "outward", lambda radius: 0.5 * rounding.outward(radius))
    rng = np.random.default_rng(29)
    centre, half = random_cells(rng, 60, 1e6)
    worst = 0.0
    for text in ("sqrt(s)", "exp(-sqrt(s*T))", "1/(1 + sqrt(s*T))"):
        enclosure = composed(text).on_cells(centre, half)
        worst = max(worst, cell_ratios(text, enclosure, centre, half, rng.choice([-1.0, 1.0], 60), Fraction(0)).max())
    assert worst > 1.0


# -- cuts and singular points


def test_cells_on_the_cut_are_not_proved() -> None:
    """sqrt(1 + s^2) on s = j w, w > 1, lies on the cut; below 1 it is real and proved."""
    H = composed("sqrt(1 + s^2)")
    centre = np.array([0.5, 0.99, 1.0, 1.5, 20.0])
    radius = H.on_cells(centre, 0.001 * centre)[3]
    assert np.isfinite(radius[:2]).all()
    assert np.all(radius[2:] == np.inf)


def test_values_on_the_cut_are_the_limit_from_the_right() -> None:
    """From Re s > 0, sqrt(1 + s^2) tends to +j sqrt(w^2 - 1) for w > 1."""
    values = composed("sqrt(1 + s^2)").at_points(np.array([0.6, 1.25, 3.0]))
    assert values == pytest.approx([0.8, 0.75j, 1j * math.sqrt(8.0)], rel=1e-8)


def test_a_cell_that_straddles_a_cut_is_not_proved() -> None:
    """(1 + j w)^3 crosses the negative real axis where 3 atan w = pi, at w = sqrt 3; beyond it the root turns round."""
    H = composed("((s + 1)^3)^0.5")
    centre = np.array([1.0, 1.7, math.sqrt(3.0), 1.8, 3.0])
    assert list(np.isfinite(H.on_cells(centre, np.full(5, 0.01))[3])) == [True, True, False, True, True]
    beyond = H.at_points(np.array([3.0]))[0]
    assert beyond == pytest.approx(-((1 + 3j) ** 1.5), rel=1e-12)


def test_hyperbolic_functions_have_no_cut_of_their_argument() -> None:
    """cosh(sqrt(1 + s^2)) is entire; cells beyond w = 1 are proved although the root lies on its cut."""
    H = composed("cosh(sqrt(s^2 + 1))")
    centre = np.array([0.5, 1.5, 4.0])
    v, _, _, r, exponent = H.on_cells(centre, 0.01 * centre)
    truth = [math.cosh(math.sqrt(0.75)), math.cos(math.sqrt(1.25)), math.cos(math.sqrt(15.0))]
    assert np.ldexp(v.real, exponent) == pytest.approx(truth, rel=1e-12)
    assert np.all(r < 1e-3)


def test_poles_on_the_axis_are_not_proved() -> None:
    """tanh(s) has a pole at j pi/2: no cell that holds it is proved, narrow neighbours are."""
    H = composed("tanh(s)")
    centre = np.array([1.2, math.pi / 2, 1.9])
    assert list(np.isfinite(H.on_cells(centre, np.full(3, 0.01))[3])) == [True, False, True]


def test_power_on_cells_is_contained_and_touches_zero() -> None:
    rng = np.random.default_rng(31)
    for alpha in (0.5, 0.3, 1.0, 1.7, 2.0):
        centre = 10.0 ** rng.uniform(-4, 4, 40)
        half = centre * np.where(rng.random(40) < 0.3, 1.0, 10.0 ** rng.uniform(-3, -0.3, 40))
        t = np.where(half == centre, rng.uniform(-0.999, 1, 40), rng.choice([-1.0, 1.0], 40))
        model = TaylorModel(*power_on_cells(alpha, 0.7, centre, half))
        with mpmath.workdps(DIGITS):
            cells = zip(centre, half, t, strict=True)
            points = [mpmath.mpc(0, mpmath.mpf(c) + mpmath.mpf(h) * mpmath.mpf(x)) for c, h, x in cells]
            values = [mpmath.power(s / (s + mpmath.mpf(0.7)), mpmath.mpf(alpha)) for s in points]
            assert ratios(model, t, values).max() <= 1.0
        assert np.isfinite(model.r[half < 0.4 * centre]).all()
        assert not (distance_from_zero_lower(model)[half == centre] > 0).any()


def test_cells_of_absurd_size_or_nan_are_unproved_without_a_crash() -> None:
    H = composed("exp(-sqrt(s*T))/(1 + sqrt(s))")
    centre = np.array([1e-320, 1e-300, 1e300, np.nan, np.inf])
    v, d, e, r, exponent = H.on_cells(centre, 0.1 * centre)
    assert np.isfinite(v).all()
    assert np.isfinite(d).all()
    assert np.isfinite(e).all()
    assert exponent.dtype == np.int64
    assert np.isinf(r[3:]).all()


def test_huge_constants_do_not_overflow() -> None:
    """1e200 squared and divided again, cosh of 1e4: exponents are carried apart from the values."""
    H = Composed(formula_block("(1e200*sqrt(s))^2*(1e200*s)/(1e300*s)^2 + 0*s"))
    assert H.at_points(np.array([4.0])) == pytest.approx([1.0], rel=1e-12)
    ratio = Composed(formula_block("cosh(9999*sqrt(s))/cosh(10000*sqrt(s))"))
    v, _, _, r, exponent = ratio.on_cells(np.array([2.0]), np.array([1e-6]))
    assert v[0] * 2.0 ** exponent[0] == pytest.approx(np.exp(-(1 + 1j)), rel=1e-10)
    assert r[0] < 1e-3 * abs(v[0])


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("sqrt(s)/(2 - 2)", "divides by zero"),
        ("sqrt(s)*sqrt(-2)", "not positive"),
        ("sqrt(s)*exp(1000)", "double precision"),
    ],
)
def test_impossible_constants_are_refused(text: str, message: str) -> None:
    with pytest.raises(ProjectError, match=message) as refusal:
        Composed(formula_block(text))
    assert refusal.value.problems[0].where == "blocks.block.formula"


def test_features_are_the_corners_of_the_formula() -> None:
    assert composed("1/(1 + sqrt(s*T))").features == pytest.approx([1 / 0.37], rel=1e-6)
    assert composed("exp(-sqrt(s*T))").features == pytest.approx([1 / 0.37], rel=1e-6)
    assert composed("((s + a)/(s + b))^0.25").features == pytest.approx([0.04, 2.5], rel=1e-6)
    assert composed("sqrt(s)").features == ()
    assert composed("exp(-T*sqrt(s*(s + a)))").features == pytest.approx([2.19, 2.5], rel=0.05)
    assert composed("s*exp(-T*s) + sqrt(s)").features == pytest.approx([1.0, 1 / 0.37], rel=1e-6)


# -- counts with closed-form answers


def windings(H: Composed, gain: float) -> int:
    """Z of 1 + gain H, H bounded at 0 and below 1/gain on |s| >= 1e4: the turns of convex cells, both half axes."""
    edges = np.concatenate([[0.0], np.logspace(-3, 4, 60)])
    lower, upper = edges[:-1], edges[1:]
    starts: dict[float, tuple[complex, complex]] = {}
    for _ in range(40):
        centre, half = 0.5 * (lower + upper), 0.5 * (upper - lower)
        model = TaylorModel(*H.on_cells(centre, rounding.inflated_half(centre, half)))
        with np.errstate(all="ignore"):
            one_plus = taylor_model.add_constant(taylor_model.scale(model, gain), 1.0)
            proved = distance_from_zero_lower(one_plus) > 0
        scale = np.ldexp(1.0, taylor_model.exponents(one_plus))
        first, last = ((one_plus.v + sign * one_plus.d + one_plus.e) * scale for sign in (-1.0, 1.0))
        starts.update({w: (a, b) for w, a, b in zip(lower[proved], first[proved], last[proved], strict=True)})
        lower, upper, centre = lower[~proved], upper[~proved], centre[~proved]
        lower, upper = np.concatenate([lower, centre]), np.concatenate([centre, upper])
        if not len(lower):
            break
    assert not len(lower), "undecided"
    ends = [starts[w] for w in sorted(starts)]
    turn = sum(np.angle(b / a) for a, b in ends)
    turn += sum(np.angle(following[0] / before[1]) for before, following in itertools.pairwise(ends))
    turn += np.angle(1.0 / ends[-1][1]) - np.angle(1.0 / ends[0][0])
    return round(-turn / np.pi)


def test_critical_gain_of_one_dimensional_conduction() -> None:
    """1 + K exp(-sqrt s) first touches 0 at K = e^pi.

    On s = j w, sqrt s = (1 + j) sqrt(w/2), so exp(-sqrt s) is real and negative first at sqrt(w/2) = pi, w = 2 pi^2,
    with modulus e^-pi: elementary, and the first eigenvalue of boundary control of the half line; common textbook
    example of a distributed lag (from memory).
    """
    H = composed("exp(-sqrt(s))")
    assert H.at_points(np.array([2 * math.pi**2])) == pytest.approx([-math.exp(-math.pi)], rel=1e-12)
    critical = math.exp(math.pi)
    assert [windings(H, gain) for gain in (1.0, 23.1406, 23.1407, 40.0)] == [0, 0, 2, 2]
    assert 23.1406 < critical < 23.1407
    for closeness in (1e-9, 1e-11):
        assert windings(H, critical * (1 - closeness)) == 0
        assert windings(H, critical * (1 + closeness)) == 2


def test_critical_gain_of_a_finite_slab() -> None:
    """1 + K/cosh(sqrt s) first touches 0 at K = cosh pi: cosh(pi + j pi) = -cosh pi at w = 2 pi^2."""
    H = composed("1/cosh(sqrt(s))")
    critical = math.cosh(math.pi)
    for closeness in (1e-3, 1e-8):
        assert windings(H, critical * (1 - closeness)) == 0
        assert windings(H, critical * (1 + closeness)) == 2


def test_temperature_inside_a_slab_decays_with_depth() -> None:
    """cosh(x sqrt s)/cosh(sqrt s) at low frequency: 1 - (1 - x^2) s/2 (series of cosh)."""
    value = composed("cosh(x*sqrt(s))/cosh(sqrt(s))").at_points(np.array([1e-4]))[0]
    assert value - 1 == pytest.approx(-0.5j * (1 - 0.09) * 1e-4, rel=1e-3)
