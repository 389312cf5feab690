"""Exact polynomials: ring identities, common divisors, Routh counts and roots, against python-flint and textbooks."""

from __future__ import annotations

from decimal import Context, Decimal
from fractions import Fraction
from math import prod

import flint
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from encircle.engine import polynomial_roots, routh
from encircle.engine.polynomial import Polynomial

UNIT_ROUNDOFF = 2.0**-53

fractions = st.builds(Fraction, st.integers(-1000, 1000), st.integers(1, 1000))
polynomials = st.lists(fractions, max_size=7).map(lambda c: Polynomial(tuple(c)))
nonzero = polynomials.filter(bool)
small = st.integers(-6, 6)

quick = settings(max_examples=25, deadline=None)


def product(*factors: Polynomial) -> Polynomial:
    return prod(factors, start=Polynomial.of(1))


def from_roots(real: list[Fraction], pairs: list[tuple[Fraction, Fraction]]) -> Polynomial:
    """Real roots and conjugate pairs (re, im)."""
    lines = [Polynomial.of(-r, 1) for r in real]
    return product(*lines, *(Polynomial.of(re * re + im * im, -2 * re, 1) for re, im in pairs))


def in_flint(p: Polynomial) -> flint.fmpq_poly:
    return flint.fmpq_poly([flint.fmpq(c.numerator, c.denominator) for c in p.coefficients])


def from_flint(p: flint.fmpq_poly) -> Polynomial:
    return Polynomial(tuple(Fraction(int(c.p), int(c.q)) for c in p.coeffs()))


class TestArithmetic:
    @quick
    @given(polynomials, polynomials, polynomials)
    def test_ring(self, a: Polynomial, b: Polynomial, c: Polynomial) -> None:
        assert (a + b) * c == a * c + b * c
        assert a * b == from_flint(in_flint(a) * in_flint(b))
        assert a - a == Polynomial(())
        assert a - b == -(b - a)

    @quick
    @given(polynomials, nonzero)
    def test_division_leaves_a_smaller_remainder(self, a: Polynomial, b: Polynomial) -> None:
        quotient, remainder = divmod(a, b)
        assert quotient * b + remainder == a
        assert remainder.degree < b.degree

    @quick
    @given(polynomials, polynomials, fractions)
    def test_evaluation_is_a_homomorphism(self, a: Polynomial, b: Polynomial, s: Fraction) -> None:
        assert (a * b).evaluate(s) == a.evaluate(s) * b.evaluate(s)
        assert a.reflected().evaluate(s) == a.evaluate(-s)
        assert (a * b).derivative() == a.derivative() * b + a * b.derivative()

    @quick
    @given(nonzero, nonzero)
    def test_exact_quotient(self, a: Polynomial, b: Polynomial) -> None:
        assert (a * b).exact_quotient(b) == a
        if b.degree > 0:
            assert (a * b + Polynomial.of(1)).exact_quotient(b) is None

    @quick
    @given(nonzero, st.integers(0, 5))
    def test_powers(self, a: Polynomial, n: int) -> None:
        assert a**n == product(*[a] * n)

    def test_normal_form(self) -> None:
        assert Polynomial.of(1, 2, 0, 0) == Polynomial.of(1, 2)
        assert hash(Polynomial.of(1, 2, 0)) == hash(Polynomial.of(1, 2))
        assert Polynomial.of(0).degree == -1
        assert Polynomial.of(0, 0, 3).order_at_zero() == 2
        assert Polynomial.of(0, 0, 3, 1).shifted_down(2) == Polynomial.of(3, 1)
        assert Polynomial.of(1, 4).monic() == Polynomial.of(Fraction(1, 4), 1)
        assert Polynomial.monomial(3) == Polynomial.of(0, 0, 0, 1)

    def test_impossible_requests(self) -> None:
        with pytest.raises(ZeroDivisionError):
            divmod(Polynomial.of(1), Polynomial(()))
        with pytest.raises(ValueError, match="negative"):
            Polynomial.of(1, 1) ** -1
        with pytest.raises(ValueError, match="zero polynomial"):
            Polynomial(()).roots()
        with pytest.raises(ValueError, match="zero polynomial"):
            Polynomial(()).count_right()
        with pytest.raises(OverflowError):
            Polynomial.of(Fraction(10) ** 400, 1).as_floats()


class TestCommonDivisors:
    @quick
    @given(nonzero, nonzero, nonzero)
    def test_agrees_with_flint(self, a: Polynomial, b: Polynomial, common: Polynomial) -> None:
        expected = from_flint(in_flint(a * common).gcd(in_flint(b * common)))
        assert (a * common).gcd(b * common) == expected.monic()

    @quick
    @given(nonzero, nonzero, nonzero, nonzero)
    def test_of_several(self, a: Polynomial, b: Polynomial, c: Polynomial, common: Polynomial) -> None:
        one_by_one = (a * common).gcd(b * common).gcd(c * common)
        assert (a * common).gcd(Polynomial(()), b * common, c * common) == one_by_one

    def test_large_coefficients_need_many_primes(self) -> None:
        rng = np.random.default_rng(1)
        a, b, common = (Polynomial.of(*map(int, rng.integers(-(2**60), 2**60, 20)), 1) for _ in range(3))
        assert (a * common).gcd(b * common) == common

    def test_factors_that_meet_modulo_the_first_prime_are_told_apart(self) -> None:
        first_prime = 2**31 - 1  # a Mersenne prime (Euler 1772)
        assert Polynomial.of(1, 1).gcd(Polynomial.of(1 + first_prime, 1) * Polynomial.of(2, 1)) == Polynomial.of(1)
        common = Polynomial.of(5, 3, 1)
        a, b = common * Polynomial.of(7, 1), common * Polynomial.of(7 + first_prime, 1)
        assert a.gcd(b) == common

    @quick
    @given(st.lists(st.tuples(nonzero, st.integers(1, 3)), min_size=1, max_size=3))
    def test_square_free_factors(self, parts: list[tuple[Polynomial, int]]) -> None:
        p = product(*(factor**n for factor, n in parts))
        factors = p.square_free_factors()
        assert product(*(factor**n for factor, n in factors)) == p.monic()
        assert len({n for _, n in factors}) == len(factors)
        everything = in_flint(product(*(factor for factor, _ in factors)))
        assert everything.gcd(everything.derivative()) == 1

    @quick
    @given(st.lists(small.filter(bool), max_size=4), st.lists(st.tuples(small, small.filter(bool)), max_size=3))
    def test_symmetric_factor(self, real: list[int], pairs: list[tuple[int, int]]) -> None:
        p = from_roots(list(map(Fraction, real)), [(Fraction(a), Fraction(b)) for a, b in pairs])
        symmetric = p.symmetric_factor()
        assert symmetric == from_flint(in_flint(p).gcd(in_flint(p.reflected()))).monic()
        assert symmetric.reflected() == symmetric


class TestCountRight:
    @settings(max_examples=100, deadline=None)
    @given(
        st.lists(small, max_size=6),
        st.lists(st.tuples(small, small.filter(bool)), max_size=4),
        fractions.filter(bool),
    )
    def test_planted_roots(self, real: list[int], pairs: list[tuple[int, int]], factor: Fraction) -> None:
        p = from_roots(list(map(Fraction, real)), [(Fraction(a), Fraction(b)) for a, b in pairs]).scaled_by(factor)
        parts = real + [re for re, _ in pairs for _ in range(2)]
        assert p.count_right() == (sum(part > 0 for part in parts), sum(part == 0 for part in parts))

    @settings(max_examples=50, deadline=None)
    @given(st.lists(st.integers(-50, 50), min_size=2, max_size=20).filter(lambda c: c[-1] != 0))
    def test_agrees_with_certified_roots(self, coefficients: list[int]) -> None:
        """python-flint isolates complex roots in balls; real parts that reach 0 are left to the planted roots above."""
        balls = [(ball, n) for ball, n in flint.fmpz_poly(coefficients).complex_roots() if not ball.real.contains(0)]
        touching = len(coefficients) - 1 - sum(n for _, n in balls)
        right, on_axis = Polynomial.of(*coefficients).count_right()
        if touching == on_axis:
            assert right == sum(n for ball, n in balls if ball.real > 0)
        else:
            assert on_axis < touching

    @pytest.mark.parametrize(
        ("descending", "expected", "source"),
        [
            ((1, 2, 3, 4, 5), (2, 0), "K. Ogata, Modern Control Engineering, ch. 5, fourth-order example"),
            ((1, 2, 1, 2), (0, 2), "K. Ogata, same chapter, zero in the first column: roots +-j"),
            ((1, 0, -3, 2), (2, 0), "K. Ogata, same chapter: (s - 1)^2 (s + 2)"),
            ((1, 2, 24, 48, -25, -50), (1, 2), "K. Ogata, same chapter, row of zeros: roots +-1, +-5j, -2"),
            ((1, 1, 10, 72, 152, 240), (2, 0), "R. C. Dorf, R. H. Bishop, Modern Control Systems, ch. 6"),
            (
                (1, 1, 12, 22, 39, 59, 48, 38, 20),
                (2, 4),
                "N. S. Nise, Control Systems Engineering, ch. 6, row of zeros",
            ),
            ((1, 4, 3, 2, 1, 4, 4), (2, 0), "G. F. Franklin et al., Feedback Control of Dynamic Systems, ch. 3"),
        ],
    )
    def test_textbook_arrays(self, descending: tuple[int, ...], expected: tuple[int, int], source: str) -> None:
        """Counts quoted from memory; the polynomials are what the sources print."""
        assert Polynomial.of(*reversed(descending)).count_right() == expected, source

    def test_hurwitz_bound_of_a_cubic(self) -> None:
        """s^3 + a s^2 + b s + c is stable for a, c > 0 and a b > c (Hurwitz 1895); a b = c lies on the axis."""
        a, b = Fraction(3, 10), Fraction(7, 10)
        tiny = Fraction(1, 10**60)
        assert Polynomial.of(a * b, b, a, 1).count_right() == (0, 2)
        assert Polynomial.of(a * b - tiny, b, a, 1).count_right() == (0, 0)
        assert Polynomial.of(a * b + tiny, b, a, 1).count_right() == (2, 0)

    def test_multiple_axis_and_symmetric_roots(self) -> None:
        p = Polynomial.of(4, 0, 1) ** 3 * Polynomial.of(-1, 0, 1) ** 2 * Polynomial.monomial(2) * Polynomial.of(1, 1)
        assert p.count_right() == (2, 8)

    def test_order_100(self) -> None:
        stable = from_roots([], [(Fraction(-k, 1000), Fraction(k)) for k in range(1, 51)])
        assert stable.count_right() == (0, 0)
        assert stable.reflected().count_right() == (100, 0)

    def test_a_zero_in_the_first_column_is_no_obstacle(self) -> None:
        """s^4 + s^3 + 2 s^2 + 2 s + 3, a common exercise: its third row starts with 0; flint finds two roots right."""
        assert Polynomial.of(3, 2, 2, 1, 1).count_right() == (2, 0)
        assert sum(ball.real > 0 for ball, _ in flint.fmpz_poly([3, 2, 2, 1, 1]).complex_roots()) == 2

    @settings(max_examples=50, deadline=None)
    @given(st.lists(st.integers(-1, 1), min_size=2, max_size=12).filter(lambda c: c[-1] != 0))
    def test_sparse_polynomials(self, coefficients: list[int]) -> None:
        """Most have zeros in the first column; every real part is at least 1e-3 in size or exactly 0."""
        roots = [(complex(ball), n) for ball, n in flint.fmpz_poly(coefficients).complex_roots()]
        expected = sum(n for z, n in roots if z.real > 1e-9), sum(n for z, n in roots if abs(z.real) <= 1e-9)
        assert Polynomial.of(*coefficients).count_right() == expected

    def test_integers_decide_as_the_array_does(self) -> None:
        rng = np.random.default_rng(3)
        for degree in range(1, 20):
            coefficients = [*map(int, rng.integers(10, 1000, degree)), 1]
            assert routh._by_remainders(coefficients) == routh._sign_changes(coefficients, 50)

    @pytest.mark.parametrize("spread", [(0.0, 0.0), (1e-4, 0.0), (0.0, 1e-4), (1e-4, 1e-4)])
    def test_bounds_hold_in_the_array_and_are_not_idle(self, spread: tuple[float, float]) -> None:
        """A row in 6 digits from two rows known to within ``spread``, against exact fractions at the ends of it."""
        rng, closest = np.random.default_rng(11), 0.0
        context, unit = Context(prec=6), Decimal("5e-6")
        for _ in range(200):
            rows, exact = zip(*(_uncertain_row(rng, size) for size in spread), strict=True)
            found = routh._next_row(rows[0], rows[1], context, unit)
            for (value, bound), true in zip(found, _exact_row(*exact), strict=True):
                assert abs(Fraction(value) - true) <= Fraction(bound)
                closest = max(closest, float(abs(Fraction(value) - true) / Fraction(bound)))
        assert closest > 0.3

    def test_a_sign_within_its_bound_is_no_sign(self) -> None:
        """1 + 1e-40 needs more than 32 digits to differ from 1."""
        close = [10**40, 10**40 + 1, 10**40, 10**40]
        assert routh._sign_changes(close, 32) is None
        assert routh._sign_changes(close, 128) == 0
        assert routh.right_half_plane_roots(close) == 0

    def test_pairs_are_not_counted_by_the_array(self) -> None:
        with pytest.raises(ValueError, match="no regular Routh array"):
            routh.right_half_plane_roots([1, 0, 1])


def _uncertain_row(rng: np.random.Generator, size: float) -> tuple[routh.Row, list[Fraction]]:
    """Entries near 1 with bounds, and true values at an end of each: neighbours nearly cancel in the next row."""
    values = [Decimal(int(c)).scaleb(-5) for c in rng.integers(99_000, 101_000, 3)]
    bounds = [abs(value) * Decimal(repr(size)) for value in values]
    signs = rng.choice([-1, 1], 3).tolist()
    true = [Fraction(v) + sign * Fraction(b) for v, b, sign in zip(values, bounds, signs, strict=True)]
    return list(zip(values, bounds, strict=True)), true


def _exact_row(above: list[Fraction], row: list[Fraction]) -> list[Fraction]:
    padded = [*row[1:], Fraction(0)]
    return [c - above[0] / row[0] * d for c, d in zip(above[1:], padded, strict=False)]


def componentwise_error(p: Polynomial, roots: np.ndarray) -> float:
    """The largest relative error of a coefficient of prod(s - root), computed exactly from the doubles."""
    real = [Fraction(float(r.real)) for r in roots if r.imag == 0]
    pairs = [(Fraction(float(r.real)), Fraction(float(r.imag))) for r in roots if r.imag > 0]
    again = from_roots(real, pairs)
    return max(
        float(abs(a / b - 1)) if b else float(abs(a))
        for a, b in zip(again.coefficients, p.monic().coefficients, strict=True)
    )


class TestRoots:
    @settings(max_examples=60, deadline=None)
    @given(st.lists(st.integers(-(10**6), 10**6), min_size=2, max_size=12).filter(lambda c: c[-1] != 0))
    def test_agree_with_certified_roots(self, coefficients: list[int]) -> None:
        found = list(Polynomial.of(*coefficients).roots())
        for ball, multiplicity in flint.fmpz_poly(coefficients).complex_roots():
            expected = complex(ball)
            for _ in range(multiplicity):
                nearest = min(found, key=lambda root: abs(root - expected))
                found.remove(nearest)
                assert abs(nearest - expected) <= 4 * UNIT_ROUNDOFF * abs(expected)
        assert not found

    def test_conjugate_symmetry_real_and_axis_roots_are_exact(self) -> None:
        p = from_roots(
            [Fraction(-1), Fraction(3, 7), Fraction(-2, 9)],
            [(Fraction(0), Fraction(5)), (Fraction(-1, 3), Fraction(2))],
        )
        roots = p.roots()
        assert sorted(roots[roots.imag == 0].real) == [-1.0, -2 / 9, 3 / 7]
        assert {5j, -5j} <= set(roots[roots.real == 0].tolist())
        assert set(roots.tolist()) == set(roots.conj().tolist())

    def test_twenty_integers(self) -> None:
        """J. H. Wilkinson's polynomial (1959): its roots move by units when a coefficient is rounded."""
        p = from_roots([Fraction(k) for k in range(1, 21)], [])
        assert p.roots().tolist() == list(range(1, 21))

    def test_multiplicities(self) -> None:
        p = Polynomial.of(1, 1) ** 5 * Polynomial.of(5, 2, 1) ** 3 * Polynomial.monomial(2)
        expected = [0] * 2 + [-1] * 5 + [-1 + 2j] * 3 + [-1 - 2j] * 3
        assert sorted(p.roots().tolist(), key=lambda z: (abs(z), -z.imag)) == expected

    def test_close_pairs(self) -> None:
        gap = Fraction(1, 10**12)
        p = product(Polynomial.of(1, 1), Polynomial.of(1 + gap, 1), Polynomial.of(1 - gap, 1), Polynomial.of(2, 1))
        assert np.allclose(p.roots().real, [-1 + 1e-12, -1, -1 - 1e-12, -2], rtol=2e-16, atol=0)
        complex_pair = from_roots([Fraction(-1)], [(Fraction(-1), gap)])
        assert sorted(complex_pair.roots().imag) == [-1e-12, 0.0, 1e-12]
        very_close = from_roots([Fraction(-2)], [(Fraction(-1), Fraction(1, 10**20))])
        assert sorted(very_close.roots().imag) == pytest.approx([-1e-20, 0.0, 1e-20], rel=1e-6, abs=0)

    def test_a_group_that_needs_more_bits(self) -> None:
        """Five roots 1e-9 apart: near them p is 1e-45 of its terms."""
        roots = [-1 - Fraction(k, 10**9) for k in range(5)]
        assert from_roots(roots, []).roots().tolist() == [float(root) for root in roots]
        start = np.array([float(root) * (1 + 1e-14) for root in roots], complex)
        found = polynomial_roots._iterate(from_roots(roots, []).integers(), start)
        assert found.real.tolist() == [float(root) for root in roots]

    def test_roots_nearer_than_doubles_can_tell(self) -> None:
        gap = Fraction(1, 10**45)
        assert product(Polynomial.of(1, 1), Polynomial.of(1 + gap, 1), Polynomial.of(3, 1)).roots().tolist() == [
            -1,
            -1,
            -3,
        ]

    def test_light_damping_keeps_the_sign_and_size_of_the_real_part(self) -> None:
        p = from_roots([Fraction(-3)], [(Fraction(-1, 10**9), Fraction(100)), (Fraction(1, 10**8), Fraction(40))])
        assert sorted(p.roots().real) == pytest.approx([-3, -1e-9, -1e-9, 1e-8, 1e-8], rel=1e-15)

    def test_features_over_twelve_decades(self) -> None:
        p = from_roots(
            [-(Fraction(10) ** k) for k in range(-6, 7)],
            [(-(Fraction(10) ** k), 3 * Fraction(10) ** k) for k in range(-6, 7)],
        )
        assert componentwise_error(p, p.roots()) < 4 * p.degree * UNIT_ROUNDOFF

    @pytest.mark.parametrize(("decades", "order"), [(0, 40), (3, 100), (6, 100)])
    def test_high_orders_componentwise(self, decades: int, order: int) -> None:
        rng = np.random.default_rng(decades)
        radii = 10 ** rng.uniform(-decades, decades, order // 2)
        damping = rng.uniform(0.01, 1, order // 2)
        pairs = [(Fraction(float(-r * z)), Fraction(float(r))) for r, z in zip(radii, damping, strict=True)]
        p = from_roots([], pairs)
        assert componentwise_error(p, p.roots()) < 4 * p.degree * UNIT_ROUNDOFF

    def test_beyond_the_companion_matrix(self) -> None:
        """Coefficients that do not fit doubles: Newton's polygon starts the iteration."""
        p = from_roots([-(Fraction(10) ** k) * m for k in range(5, 26) for m in (1, 3)], [])
        with pytest.raises(OverflowError):
            p.as_floats()
        assert np.allclose(
            np.sort(-p.roots().real), np.sort([float(m * 10**k) for k in range(5, 26) for m in (1, 3)]), rtol=4e-16
        )

    def test_start_on_the_newton_polygon_reaches_the_same_roots(self) -> None:
        coefficients = from_roots([Fraction(-1), Fraction(-1000)], [(Fraction(-1, 10), Fraction(7))]).integers()
        start = polynomial_roots._polygon_start([polynomial_roots._octave(c) for c in coefficients])
        found = polynomial_roots._iterate(coefficients, start)
        assert np.allclose(np.sort_complex(found), [-1000, -1, -0.1 - 7j, -0.1 + 7j], rtol=1e-15, atol=1e-15)

    def test_twelve_decades_and_more_between_three_roots(self) -> None:
        p = from_roots([-Fraction(1, 10**25), Fraction(-3), -(Fraction(10) ** 25)], [])
        assert p.roots().tolist() == [-1e-25, -3.0, -1e25]

    def test_a_tight_group_of_many_is_refused(self) -> None:
        p = from_roots([-1 - Fraction(k, 10**30) for k in range(12)], [])
        with pytest.raises(ArithmeticError, match="did not settle"):
            p.roots()
        assert p.reflected().count_right() == (12, 0)

    def test_the_array_is_shared_and_so_read_only(self) -> None:
        p = Polynomial.of(1, 2, 3, 4)
        assert p.roots() is p.roots()
        with pytest.raises(ValueError, match="read-only"):
            p.roots()[0] = 0

    def test_beyond_double_precision(self) -> None:
        with pytest.raises(OverflowError):
            Polynomial.of(Fraction(10) ** 400, 1).roots()
