"""Containment of every enclosure that counts rest on, against 40-digit arithmetic (mpmath), and sharpness of each.

Random counts do not reveal a remainder that is too small; containment does. Every family also bounds the width, and the
last tests show that halved remainders are caught.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

import mpmath
import numpy as np
import pytest

from encircle.engine import term_models
from encircle.engine.coprime_factors import DelayKernel, Factor, Powers
from encircle.engine.delay_kernel import DelayKernelModel
from encircle.engine.factor_models import FactorModel
from encircle.engine.high_frequency import FarGrowth, FarProduct
from encircle.engine.polynomial import Polynomial
from encircle.engine.sections import sections
from encircle.engine.term_models import TermModels, centres_and_halves

DIGITS = 40
CELLS = 6
FEW, MANY = 60, 700  # products per family: 5 points on each of 6 cells


@dataclass(frozen=True)
class Checked:
    """How often the exact value lay outside, how many were looked at, and the largest error in radii."""

    outside: int
    looked_at: int
    sharpest: float


def exact_polynomial(polynomial: Polynomial, s: mpmath.mpc) -> mpmath.mpc:
    total = mpmath.mpc(0)
    for coefficient in reversed(polynomial.coefficients):
        total = total * s + mpmath.mpf(coefficient.numerator) / coefficient.denominator
    return total


def exact_kernel(kernel: DelayKernel, s: mpmath.mpc) -> mpmath.mpc:
    """k! times the tail of the exponential series, by its definition."""
    z = s * mpmath.mpf(kernel.delay.numerator) / kernel.delay.denominator
    k = kernel.order
    if z == 0:
        return mpmath.mpc(1)
    with mpmath.workdps(2 * DIGITS):
        head = sum(((-z) ** m / mpmath.factorial(m) for m in range(k)), mpmath.mpc(0))
        return mpmath.factorial(k) * (mpmath.exp(-z) - head) / (-z) ** k


def exact_product(powers: Powers, delay: Fraction, s: mpmath.mpc) -> mpmath.mpc:
    value = mpmath.exp(-s * mpmath.mpf(delay.numerator) / delay.denominator)
    for factor, power in powers.items():
        single = exact_kernel(factor, s) if isinstance(factor, DelayKernel) else exact_polynomial(factor, s)
        value *= single**power
    return value


def random_section(rng: np.random.Generator) -> Polynomial:
    """First or second order, damping 1e-5 to 2, either sign, frequencies over six decades; decimals, not doubles."""
    natural = Fraction(f"{10 ** rng.uniform(-3, 3):.5g}")
    if rng.random() < 0.4:
        return Polynomial((natural * int(rng.choice([-1, 1])), Fraction(1)))
    damping = Fraction(f"{10 ** rng.uniform(-5, 0.3):.4g}") * int(rng.choice([-1, 1]))
    return Polynomial((natural**2, 2 * damping * natural, Fraction(1)))


def random_stable(rng: np.random.Generator) -> Polynomial:
    natural = Fraction(f"{10 ** rng.uniform(-3, 3):.5g}")
    if rng.random() < 0.5:
        return Polynomial((natural, Fraction(1)))
    return Polynomial((natural**2, 2 * Fraction(f"{rng.uniform(0.25, 1.5):.4g}") * natural, Fraction(1)))


def rational(rng: np.random.Generator) -> tuple[Powers, Fraction]:
    powers: dict[Factor, int] = {}
    for _ in range(int(rng.integers(1, 6))):
        powers[random_section(rng)] = int(rng.integers(1, 3))
    for _ in range(int(rng.integers(0, 6))):
        powers.setdefault(random_stable(rng), -int(rng.integers(1, 3)))
    if rng.random() < 0.5:
        powers[Polynomial((Fraction(0), Fraction(1)))] = 1
    return powers, Fraction(0)


def with_delay(rng: np.random.Generator) -> tuple[Powers, Fraction]:
    return rational(rng)[0], Fraction(f"{10 ** rng.uniform(-4, 1):.4g}")


def with_kernel(rng: np.random.Generator) -> tuple[Powers, Fraction]:
    powers = dict(rational(rng)[0])
    powers[DelayKernel(int(rng.integers(1, 4)), Fraction(f"{10 ** rng.uniform(-3, 1):.4g}"))] = 1
    return powers, Fraction(0)


def expanded(rng: np.random.Generator) -> tuple[Powers, Fraction]:
    """One factor of degree 3 to 12 known only by its coefficients, over a Hurwitz polynomial of the same degree."""
    product, below = Polynomial((Fraction(1),)), {}
    for _ in range(int(rng.integers(2, 7))):
        section, partner = random_section(rng), random_stable(rng)
        product = product * section
        below[partner] = below.get(partner, 0) - 1
    rounded = Polynomial(tuple(Fraction(float(c)) for c in product.coefficients))
    return {rounded.monic(): 1, **below}, Fraction(0)


FAMILIES = {"rational": rational, "dead time": with_delay, "delay kernel": with_kernel, "expanded": expanded}
Family = Callable[[np.random.Generator], tuple[Powers, Fraction]]


def random_cells(rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """Cells of relative width 1e-6 to 1 anywhere in six decades, one of them starting at 0."""
    lower = 10 ** rng.uniform(-3.5, 3.5, CELLS)
    upper = lower * (1.0 + 10 ** rng.uniform(-6, 0, CELLS))
    lower[0] = 0.0
    return lower, upper


def check_family(family: Family, products: int, seed: int) -> Checked:
    rng = np.random.default_rng(seed)
    outside = looked_at = 0
    sharpest = 0.0
    with mpmath.workdps(DIGITS):
        for _ in range(products):
            powers, delay = family(rng)
            models: dict[Factor, FactorModel] = {f: DelayKernelModel(f) for f in powers if isinstance(f, DelayKernel)}
            lower, upper = random_cells(rng)
            found = TermModels([(powers, delay)], models).on_cells(lower, upper)
            w, h = centres_and_halves(lower, upper)
            for cell in range(CELLS):
                radius = found.r[0, cell]
                if not np.isfinite(radius):
                    continue
                for t in (-1.0, 1.0, *rng.uniform(-1.0, 1.0, 3)):
                    exact = exact_product(powers, delay, mpmath.mpc(0, mpmath.mpf(w[cell]) + mpmath.mpf(h[cell]) * t))
                    v, d, e = (mpmath.mpc(complex(part[0, cell])) for part in (found.v, found.d, found.e))
                    error = abs(exact - (v + d * t + e * t * t))
                    looked_at += 1
                    outside += bool(error > radius)
                    sharpest = max(sharpest, float(error / mpmath.mpf(radius)))
    return Checked(outside, looked_at, sharpest)


@pytest.mark.parametrize("name", FAMILIES)
def test_products_contain_the_exact_value(name: str) -> None:
    found = check_family(FAMILIES[name], FEW, seed=len(name))
    assert found.outside == 0
    assert found.looked_at > 20 * FEW  # enclosures that are finite nearly everywhere
    assert found.sharpest > 0.02  # and not padded


@pytest.mark.heavy
@pytest.mark.parametrize("name", FAMILIES)
def test_products_contain_the_exact_value_of_20000(name: str) -> None:
    found = check_family(FAMILIES[name], MANY, seed=1000 + len(name))
    assert found.outside == 0
    assert found.looked_at > 17_000


@pytest.mark.parametrize("name", ["rational", "dead time", "delay kernel"])
def test_halved_remainders_are_caught(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """The acceptance test would notice remainders that are half of what they must be."""
    monkeypatch.setattr(term_models, "REMAINDER_SCALE", 0.5)
    assert check_family(FAMILIES[name], FEW, seed=len(name)).outside > 0


def test_radii_shrink_with_the_cube_of_the_width() -> None:
    """A second-order model: halving a cell divides the remainder by about eight."""
    powers: Powers = {random_section(np.random.default_rng(3)): 1, random_stable(np.random.default_rng(4)): -1}
    models = TermModels([(powers, Fraction(1, 50))], {})
    centre, halves = 2.0, np.array([0.08, 0.04, 0.02])
    radii = models.on_cells(centre - halves, centre + halves).r[0]
    assert radii[:-1] / radii[1:] == pytest.approx([8.0, 8.0], rel=0.15)


def test_neighbouring_cells_overlap_at_their_joint() -> None:
    """Both enclosures hold the value at the common edge: what the joints of the winding count rest on."""
    rng = np.random.default_rng(11)
    with mpmath.workdps(DIGITS):
        for _ in range(100):
            powers, delay = with_delay(rng)
            edges = np.sort(10 ** rng.uniform(-2, 2, 3))
            found = TermModels([(powers, delay)], {}).on_cells(edges[:-1], edges[1:])
            exact = exact_product(powers, delay, mpmath.mpc(0, edges[1]))
            for cell, t in ((0, 1.0), (1, -1.0)):
                v, d, e = (complex(part[0, cell]) for part in (found.v, found.d, found.e))
                assert not abs(exact - mpmath.mpc(v + d * t + e)) > found.r[0, cell] + 1e-15 * abs(v)


def test_a_wide_cell_of_dead_time_is_enclosed_by_the_unit_disc() -> None:
    powers: Powers = {Polynomial((Fraction(1), Fraction(1))): -1}
    found = TermModels([(powers, Fraction(10))], {}).on_cells(np.array([3.0]), np.array([4.0]))
    assert found.v[0, 0] == 0.0
    assert 1.0 / abs(3.5j + 1) < found.r[0, 0] < 1.6 / abs(3.5j + 1)


def test_sections_differ_from_the_polynomial_by_less_than_delta() -> None:
    """|p - prod q| <= delta prod S(|s|) anywhere in the plane; delta is a few units in the last place."""
    rng = np.random.default_rng(5)
    with mpmath.workdps(DIGITS):
        for _ in range(60):
            (polynomial, *_), _ = expanded(rng)
            if polynomial.degree < 3:
                continue
            found = sections(polynomial)
            assert found.delta < 200 * 2.0**-53
            for _ in range(5):
                s = mpmath.mpc(*rng.normal(size=2)) * 10 ** rng.uniform(-4, 4)
                product, size = mpmath.mpc(1), mpmath.mpf(1)
                for a2, a1, a0 in found.rows.tolist():
                    product *= (a2 * s + a1) * s + a0
                    size *= (abs(a2) * abs(s) + abs(a1)) * abs(s) + abs(a0)
                assert abs(exact_polynomial(polynomial, s) - product) <= found.delta * size


def test_discs_at_infinity_contain_the_exact_value() -> None:
    """gain s^m (1 + Disc) holds each product at random points with |s| >= R, Re s >= 0."""
    rng = np.random.default_rng(6)
    sharpest = 0.0
    with mpmath.workdps(DIGITS):
        for _ in range(200):
            powers, _ = rational(rng)
            polynomials = [factor for factor in powers if isinstance(factor, Polynomial)]
            growth = FarGrowth(polynomials, 1e4)
            disc = growth.of([FarProduct(powers, Fraction(0), Fraction(1))])[0] - 1.0
            order = sum(factor.degree * powers[factor] for factor in polynomials)
            for k in (0, 3, 10):
                s = growth.radii[k] * mpmath.expj(rng.uniform(-0.5, 0.5) * mpmath.pi) * (1 + rng.exponential())
                error = abs(exact_product(powers, Fraction(0), s) / s**order - 1)
                assert error <= disc[k] * (1 + 1e-12) + 1e-15
                sharpest = max(sharpest, float(error / disc[k]))
    assert sharpest > 0.3
