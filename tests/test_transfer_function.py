"""Declared blocks as exact transfer functions: reduction, refusals, state space, against closed forms and flint."""

from __future__ import annotations

import math
from fractions import Fraction
from itertools import islice
from operator import add, mul, sub, truediv

import flint
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from encircle.engine.characteristic_polynomial import characteristic_polynomials
from encircle.engine.declarations import CoefficientBlock, FormulaBlock, RootBlock, StateSpaceBlock
from encircle.engine.errors import ProjectError
from encircle.engine.expression import Expression, Name, Negative, Number, Operation
from encircle.engine.formula import parse_formula
from encircle.engine.modular_arithmetic import primes
from encircle.engine.polynomial import Polynomial
from encircle.engine.transfer_function import TransferFunction, cancelled_right_half_plane, evaluate, transfer_function

S = Polynomial.of(0, 1)
quick = settings(max_examples=40, deadline=None)


def formula_block(text: str, unstable_poles: int | None = None, **parameters: str) -> FormulaBlock:
    values = {name: Fraction(value) for name, value in parameters.items()}
    return FormulaBlock("plant", parse_formula(text), text, values, unstable_poles, "")


def rational(text: str, **parameters: str) -> TransferFunction:
    found = transfer_function(formula_block(text, **parameters))
    assert found is not None
    return found


def constant(text: str) -> Fraction:
    found = rational(text)
    assert (found.power, found.numerator, found.denominator, found.delay, found.delayed_sum) == (0, (), (), 0, ())
    return found.gain


def linear(root: int | Fraction) -> Polynomial:
    """s - root."""
    return Polynomial.of(-root, 1)


def state_space(
    A: list[list[float]], B: list[float], C: list[float], D: float = 0.0, dead_time: str = "0"
) -> TransferFunction:
    rows = tuple(tuple(map(Fraction, row)) for row in A)
    vectors = tuple(map(Fraction, B)), tuple(map(Fraction, C))
    found = transfer_function(StateSpaceBlock("plant", rows, *vectors, Fraction(D), Fraction(dead_time), ""))
    assert found is not None
    return found


def refusal(block: FormulaBlock | CoefficientBlock | RootBlock | StateSpaceBlock) -> tuple[str, str, str]:
    with pytest.raises(ProjectError) as caught:
        transfer_function(block)
    (problem,) = caught.value.problems
    return problem.code, problem.where, problem.message


class TestConstants:
    @pytest.mark.parametrize(
        ("text", "value"),
        [
            ("2^3^2", 512),
            ("-2^2", -4),
            ("2^-2^2", Fraction(1, 16)),
            ("2 - 3 - 4", -5),
            ("-(2 - 3 + (4 - 5))", 2),
            ("12/3/2", 2),
            ("0.1 + 0.2", Fraction(3, 10)),
            ("sqrt(2.25)", Fraction(3, 2)),
            ("4^0.5", 2),
            ("(4/9)^1.5", Fraction(8, 27)),
            ("4^-0.5", Fraction(1, 2)),
            ("0^2.5", 0),
            ("s^0", 1),
            ("exp(0*s)", 1),
            ("sqrt(s^2/s^2*4)", 2),
            ("2^(3*s/s)", 8),
        ],
    )
    def test_exact(self, text: str, value: Fraction | int) -> None:
        assert rational(text).gain == value

    @pytest.mark.parametrize(
        ("text", "value"),
        [
            ("sqrt(2)", math.sqrt(2)),
            ("pi", math.pi),
            ("exp(1)", math.e),
            ("sinh(0.5)", math.sinh(0.5)),
            ("cosh(0.5)", math.cosh(0.5)),
            ("tanh(0.5)", math.tanh(0.5)),
            ("2^0.3", 2**0.3),
        ],
    )
    def test_irrational_constants_are_the_nearest_doubles(self, text: str, value: float) -> None:
        assert constant(text) == Fraction(value)

    def test_parameters_are_the_decimals_as_written(self) -> None:
        assert rational("k*s", k="0.1").gain == Fraction(1, 10)


class TestReduction:
    def test_decimals_cancel_exactly(self) -> None:
        found = rational("(s^2 - 0.01)/(s - 0.1)")
        assert found.numerator == ((linear(Fraction(-1, 10)), 1),)
        assert found.denominator == ()
        assert found.cancelled == ((linear(Fraction(1, 10)), 1),)
        assert cancelled_right_half_plane(found)

    def test_a_near_miss_does_not_cancel(self) -> None:
        found = rational("(s^2 - 0.0100000000000000001)/(s - 0.1)")
        assert found.cancelled == ()
        assert found.denominator == ((linear(Fraction(1, 10)), 1),)

    @pytest.mark.parametrize(
        ("text", "warned"),
        [
            ("(s + 1)/(s + 1)", False),
            ("(s - 1)/(s - 1)", True),
            ("(s^2 + 4)/((s^2 + 4)*(s + 1))", True),
            ("s/(s*(s + 1))", True),
            ("0/(s - 1)", True),
            ("0/(s + 1)", False),
            ("(s^3 + s^2 + 4*s + 4)/(s^2 + 4)", True),
        ],
    )
    def test_warning_for_common_factors_on_or_right_of_the_axis(self, text: str, warned: bool) -> None:
        assert cancelled_right_half_plane(rational(text)) is warned

    def test_integrators(self) -> None:
        found = rational("kp + ki/s", kp="8", ki="3200")
        assert (found.gain, found.power, found.numerator, found.denominator) == (8, -1, ((linear(-400), 1),), ())
        cancelled = rational("s^2*(s + 1)/s^3")
        assert (cancelled.power, cancelled.power_cancelled) == (-1, 2)

    def test_factors_stay_factors(self) -> None:
        found = rational("(s + 1)^20*(s + 2)/((s + 3)^40*(s^2 + s + 1))")
        assert dict(found.numerator) == {linear(-1): 20, linear(-2): 1}
        assert found.denominator == ((linear(-3), 40), (Polynomial.of(1, 1, 1), 1))

    def test_factors_are_square_free_coprime_and_axis_roots_apart(self) -> None:
        found = rational("1/((s + 1)*(s^2 + 2*s + 1)*(s^3 + s^2 + 4*s + 4))")
        assert found.denominator == ((linear(-1), 4), (Polynomial.of(4, 0, 1), 1))

    def test_least_common_denominator_cancels_nothing(self) -> None:
        found = rational("1/(s - 1) + 1/(s^2 - 1)")
        assert found.numerator == ((linear(-2), 1),)
        assert dict(found.denominator) == {linear(1): 1, linear(-1): 1}
        assert found.cancelled == ()

    def test_fraction_in_a_fraction_leaves_no_trace(self) -> None:
        found = rational("(1/(s - 1))/(1 + 2/(s - 1))")
        assert (found.numerator, found.denominator, found.cancelled) == ((), ((linear(-1), 1),), ())

    def test_partial_fractions_that_vanish(self) -> None:
        found = rational("1/(s - 1) - 1/(s - 1)")
        assert (found.gain, found.denominator) == (0, ())
        assert cancelled_right_half_plane(found)

    def test_zero_and_improper_blocks(self) -> None:
        assert rational("0*s").gain == 0
        differentiator = rational("Td*s", Td="0.5")
        assert (differentiator.gain, differentiator.power) == (Fraction(1, 2), 1)

    @quick
    @given(st.data())
    def test_random_formulas_agree_with_their_value_at_rational_points(self, data: st.DataObject) -> None:
        tree = data.draw(_trees())
        point = Fraction(data.draw(st.integers(-40, 40)), 7)
        try:
            expected = _value(tree, point)
        except ZeroDivisionError:
            return
        found = transfer_function(FormulaBlock("plant", tree, "", {}, None, ""))
        assert found is not None
        denominator = _product(found.denominator, point) * point ** max(-found.power, 0)
        if denominator:
            numerator = _product(found.numerator, point) * point ** max(found.power, 0)
            assert found.gain * numerator / denominator == expected


_ARITHMETIC = {"+": add, "-": sub, "*": mul, "/": truediv}


def _trees() -> st.SearchStrategy[Expression]:
    s = st.just(Name("s"))
    leaves = st.one_of(s, st.integers(-3, 3).map(lambda n: Number(Fraction(n))))
    lags = st.builds(Operation, st.just("+"), s, leaves)

    def deeper(inner: st.SearchStrategy[Expression]) -> st.SearchStrategy[Expression]:
        powers = st.integers(-2, 3).map(lambda n: Number(Fraction(n)))
        return st.one_of(
            st.builds(Operation, st.sampled_from(["+", "-", "*", "/"]), inner, inner),
            st.builds(Operation, st.just("/"), inner, lags),
            st.builds(Operation, st.just("^"), inner, powers),
            st.builds(Negative, inner),
        )

    return st.recursive(leaves, deeper, max_leaves=12)


def _value(tree: Expression, s: Fraction) -> Fraction:
    match tree:
        case Number(value):
            return value
        case Name():
            return s
        case Negative(operand):
            return -_value(operand, s)
        case Operation(operator, left, right):
            a, b = _value(left, s), _value(right, s)
            return a ** int(b) if operator == "^" else _ARITHMETIC[operator](a, b)
    raise TypeError(tree)


def _product(factors: tuple[tuple[Polynomial, int], ...], s: Fraction) -> Fraction:
    return math.prod((factor.evaluate(s) ** n for factor, n in factors), start=Fraction(1))


class TestDeadTime:
    def test_zero_order_hold(self) -> None:
        found = rational("(1 - exp(-T*s))/(T*s)", T="0.1")
        assert (found.gain, found.power) == (10, -1)
        assert found.delayed_sum == ((0, Polynomial.of(1)), (Fraction(1, 10), Polynomial.of(-1)))

    def test_common_dead_time_goes_outside(self) -> None:
        found = rational("exp(-0.2*s)/(s + 1) + 2*exp(-0.5*s)/(s + 2)")
        assert found.delay == Fraction(1, 5)
        assert found.delayed_sum == ((0, Polynomial.of(2, 1)), (Fraction(3, 10), Polynomial.of(2, 2)))
        assert dict(found.denominator) == {linear(-1): 1, linear(-2): 1}

    def test_dead_times_add_up_and_can_vanish(self) -> None:
        assert rational("exp(-0.1*s)*exp(-0.2*s)").delay == Fraction(3, 10)
        assert rational("exp(-0.1*s)^3").delay == Fraction(3, 10)
        assert rational("exp(-s) - exp(-s) + 1").delayed_sum == ()
        assert rational("(1 + exp(-s))*(1 - exp(-s))").delayed_sum == ((0, Polynomial.of(1)), (2, Polynomial.of(-1)))

    def test_power_of_a_sum(self) -> None:
        found = rational("(1 - exp(-s))^3")
        assert [n.coefficients[0] for _, n in found.delayed_sum] == [1, -3, 3, -1]
        assert [time for time, _ in found.delayed_sum] == [0, 1, 2, 3]

    def test_common_factor_of_the_sum_cancels(self) -> None:
        found = rational("((s - 1)*(s + 2) + (s - 1)*exp(-s))/((s - 1)*(s + 3))")
        assert found.delayed_sum == ((0, Polynomial.of(2, 1)), (1, Polynomial.of(1)))
        assert found.denominator == ((linear(-3), 1),)
        assert found.cancelled == ((linear(1), 1),)

    def test_constant_in_the_exponent(self) -> None:
        found = rational("exp(2 - 3*s)")
        assert (found.gain, found.delay) == (Fraction(math.exp(2)), 3)
        assert rational("exp(-T*s^2/s)", T="0.25").delay == Fraction(1, 4)

    def test_beside_coefficients_and_roots(self) -> None:
        one, half = Fraction(1), Fraction(1, 2)
        for block in (
            CoefficientBlock("plant", (Fraction(0), one), (one, half), half, ""),
            RootBlock("plant", (), ((-half, Fraction(0)),), one, half, ""),
        ):
            found = transfer_function(block)
            assert found is not None
            assert (found.gain, found.delay, found.denominator) == (1, half, ((linear(-half), 1),))


class TestIrrationalFormulas:
    @pytest.mark.parametrize(
        "text",
        ["sqrt(s)", "1/(1 + s)^0.3", "tanh(s)", "cosh(0.1*s)", "sinh(s)/s", "exp(-sqrt(s))", "exp(-s^2)", "exp(1/s)"],
    )
    def test_are_left_to_their_declaration(self, text: str) -> None:
        assert transfer_function(formula_block(text, unstable_poles=0)) is None
        code, where, message = refusal(formula_block(text))
        assert (code, where) == ("unstable-poles-missing", "blocks.plant.formula")
        assert "`unstable_poles`" in message

    def test_needless_declaration(self) -> None:
        code, _, message = refusal(formula_block("1/(s + 1)", unstable_poles=0))
        assert code == "unstable-poles-needless"
        assert "remove" in message


class TestRefusals:
    @pytest.mark.parametrize(
        ("text", "code"),
        [
            ("1/0", "zero-denominator"),
            ("1/(s - s)", "zero-denominator"),
            ("0^-1", "zero-denominator"),
            ("0^-0.5", "zero-denominator"),
            ("1/(1 - exp(-s))", "delay-in-denominator"),
            ("(1 + exp(-s))^-2", "delay-in-denominator"),
            ("exp(s)", "negative-dead-time"),
            ("exp(0.1*s - s*0.05)", "negative-dead-time"),
            ("1/exp(-s)", "negative-dead-time"),
            ("exp(-s)^-1", "negative-dead-time"),
            ("2^65", "exponent-above-64"),
            ("s^-65", "exponent-above-64"),
            ("s^64.5", "exponent-above-64"),
            ("2^s", "exponent-not-constant"),
            ("s^sqrt(s)", "exponent-not-constant"),
            ("(s + 1)^60*(s + 2)^41", "order-above-100"),
            ("1/((s + 1)^60*(s + 2)^41)", "order-above-100"),
            ("((s^64)^64)^64", "order-above-100"),
            ("((2^64)^64)^64", "too-many-digits"),
            ("((1.0000000001^64)^64)^64", "too-many-digits"),
            ("(2^64)^17", "out-of-range"),
            ("1e-300*1e-300*s", "out-of-range"),
            ("exp(1000)", "out-of-range"),
            ("exp(-1000)", "out-of-range"),
            ("(s + 1e10)^40 + s", "out-of-range"),
            ("sqrt(-1)", "not-real"),
            ("(-8)^0.3", "not-real"),
            ("((1 + exp(-s))*(1 + exp(-1.01*s)))^64", "too-many-dead-times"),
        ],
    )
    def test_formulas(self, text: str, code: str) -> None:
        found, where, message = refusal(formula_block(text))
        assert found == code
        assert where == "blocks.plant.formula"
        assert message.startswith("`formula` of block `plant` ")

    @pytest.mark.parametrize(
        ("text", "code"), [("sqrt(s)/0", "zero-denominator"), ("sqrt(s)/(1 - exp(-s))", "delay-in-denominator")]
    )
    def test_irrational_formulas_are_searched_too(self, text: str, code: str) -> None:
        assert refusal(formula_block(text, unstable_poles=0))[0] == code

    def test_advice_for_dead_time_in_a_denominator(self) -> None:
        assert "draw that feedback as signals" in refusal(formula_block("1/(1 + exp(-s))"))[2]

    def test_coefficients(self) -> None:
        zero, one = Fraction(0), Fraction(1)
        for denominator in ((), (zero,), (zero, zero)):
            code, where, _ = refusal(CoefficientBlock("plant", (one,), denominator, zero, ""))
            assert (code, where) == ("zero-denominator", "blocks.plant.denominator")
        long, code = (one,) * 102, "order-above-100"
        for key, both in {"numerator": (long, (one,)), "denominator": ((one,), long)}.items():
            assert refusal(CoefficientBlock("plant", *both, zero, ""))[:2] == (code, f"blocks.plant.{key}")

    def test_roots(self) -> None:
        one, roots = Fraction(1), tuple((Fraction(-k), Fraction(0)) for k in range(101))
        for key, both in {"zeros": (roots, ()), "poles": ((), roots)}.items():
            found = refusal(RootBlock("plant", *both, one, Fraction(0), ""))
            assert found[:2] == ("order-above-100", f"blocks.plant.{key}")

    def test_state_space(self) -> None:
        zeros = (Fraction(0),) * 101
        too_many = StateSpaceBlock("plant", (zeros,) * 101, zeros, zeros, Fraction(0), Fraction(0), "")
        assert refusal(too_many)[:2] == ("order-above-100", "blocks.plant.state_space")
        huge = StateSpaceBlock("plant", ((Fraction(10) ** 400,),), zeros[:1], zeros[:1], Fraction(0), Fraction(0), "")
        assert refusal(huge)[0] == "out-of-range"

    def test_state_space_of_sizes_too_different(self) -> None:
        sizes = [[Fraction(10) ** ((i * j) % 601 - 300) for j in range(60)] for i in range(60)]
        ones = (Fraction(1),) * 60
        block = StateSpaceBlock("plant", tuple(map(tuple, sizes)), ones, ones, Fraction(0), Fraction(0), "")
        assert refusal(block)[0] == "too-many-digits"

    def test_poles_too_close_to_tell_apart(self) -> None:
        expanded = math.prod((linear(-1 - Fraction(k, 10**30)) for k in range(12)), start=Polynomial.of(1))
        block = CoefficientBlock("plant", (Fraction(1),), expanded.coefficients[::-1], Fraction(0), "")
        assert refusal(block)[0] == "roots-too-close"

    def test_a_formula_as_deep_as_one_likes(self) -> None:
        tree: Expression = Name("s")
        for _ in range(2_000):
            tree = Negative(Operation("+", Operation("*", tree, Number(Fraction(1))), Number(Fraction(1))))
        found = transfer_function(FormulaBlock("plant", tree, "", {}, None, ""))
        assert found is not None
        assert (found.gain, found.power) == (1, 1)


class TestRoots:
    def test_pairs(self) -> None:
        zero, one = Fraction(0), Fraction(1)
        poles = ((-one, Fraction(2)), (zero, Fraction(3)), (zero, zero), (-one, zero), (-one, zero))
        found = transfer_function(RootBlock("plant", ((one, zero),), poles, Fraction(7), zero, ""))
        assert found is not None
        assert (found.gain, found.power, found.numerator) == (7, -1, ((linear(1), 1),))
        assert dict(found.denominator) == {Polynomial.of(5, 2, 1): 1, Polynomial.of(9, 0, 1): 1, linear(-1): 2}

    def test_a_zero_on_a_pole_cancels(self) -> None:
        root = (Fraction(1), Fraction(0))
        found = transfer_function(RootBlock("plant", (root,), (root, root), Fraction(1), Fraction(0), ""))
        assert found is not None
        assert (found.denominator, found.cancelled) == (((linear(1), 1),), ((linear(1), 1),))


class TestStateSpace:
    def test_every_eigenvalue_counts(self) -> None:
        """An unstable mode that the input does not reach stays, in numerator and denominator."""
        found = state_space([[-1.0, 0.0], [0.0, 2.0]], [1.0, 0.0], [1.0, 1.0])
        assert (found.gain, found.numerator) == (1, ((linear(2), 1),))
        assert dict(found.denominator) == {linear(-1): 1, linear(2): 1}
        assert found.cancelled == ()

    def test_modes_at_zero_stay_too(self) -> None:
        found = state_space([[0.0, 0.0], [0.0, 0.0]], [1.0, 1.0], [1.0, 0.0])
        assert (found.power, found.unreduced_power, found.power_cancelled) == (-1, 1, 0)

    def test_no_output_at_all(self) -> None:
        found = state_space([[3.0]], [0.0], [1.0])
        assert (found.gain, found.numerator, found.denominator) == (0, (), ((linear(3), 1),))

    def test_gain_without_states(self) -> None:
        assert state_space([], [], [], 2.5).gain == Fraction(5, 2)

    def test_companion_form(self) -> None:
        """x'' = -2 x - 3 x' + u, y = x + 5 u': (5 s^2 + 15 s + 11)/(s^2 + 3 s + 2) with a direct term."""
        found = state_space([[0.0, 1.0], [-2.0, -3.0]], [0.0, 1.0], [1.0, 0.0], 5.0, "0.1")
        assert (found.gain, found.delay) == (5, Fraction(1, 10))
        assert found.numerator == ((Polynomial.of(Fraction(11, 5), 3, 1), 1),)
        assert found.denominator == ((Polynomial.of(2, 3, 1), 1),)

    def test_entries_are_doubles_first(self) -> None:
        one, zero = Fraction(1), Fraction(0)
        found = transfer_function(StateSpaceBlock("plant", ((one / 10,),), (one,), (one,), zero, zero, ""))
        assert found is not None
        assert found.denominator == ((linear(Fraction(0.1)), 1),)

    @pytest.mark.parametrize("order", [1, 2, 3, 7, 20, 40])
    def test_determinants_against_flint(self, order: int) -> None:
        """det(sI - A) and det(sI - A + BC) - (1 - D) det(sI - A), the matrix determinant lemma."""
        rng = np.random.default_rng(order)
        A = rng.normal(size=(order, order)) * 10 ** rng.uniform(-3, 3, (order, order))
        A[rng.uniform(size=A.shape) < 0.5] = 0
        B, C, D = rng.normal(size=order), rng.normal(size=order), float(rng.normal())
        found = state_space(A.tolist(), B.tolist(), C.tolist(), D)
        exact = [[Fraction(a) for a in row] for row in A.tolist()]
        fed_back = np.multiply.outer([Fraction(b) for b in B.tolist()], [Fraction(c) for c in C.tolist()])
        closed = (np.array(exact, dtype=object) - fed_back).tolist()
        characteristic = _characteristic(exact)
        assert _whole(found.denominator, -found.power + found.unreduced_power, 1) == characteristic
        expected = _characteristic(closed) - characteristic.scaled_by(1 - Fraction(D))
        assert _whole(found.numerator, found.unreduced_power, found.gain) == expected

    def test_parts_that_do_not_feed_back_are_factors(self) -> None:
        blocks = [[[0, 1], [-k, -1]] for k in range(1, 20)]
        matrix = np.zeros((38, 38), int)
        for k, block in enumerate(blocks):
            matrix[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] = block
            matrix[2 * k + 1, : 2 * k] = k  # driven by all parts before it
        assert sorted(characteristic_polynomials(matrix.tolist())) == [[k, 1, 1] for k in range(1, 20)]

    def test_nilpotent_and_structurally_singular(self) -> None:
        shift = [[int(j == (i + 1) % 6) for j in range(6)] for i in range(6)]
        assert characteristic_polynomials(shift) == [[-1, 0, 0, 0, 0, 0, 1]]
        ones = [[1] * 5 for _ in range(5)]
        assert characteristic_polynomials(ones) == [[0, 0, 0, 0, -5, 1]]

    def test_a_prime_that_divides_a_pivot_is_left_out(self) -> None:
        first, second = islice(primes(), 2)
        matrix = [[1, 2, 3], [first, 4, 5], [second, 8, 6]]
        assert characteristic_polynomials(matrix) == [[int(c) for c in flint.fmpz_mat(matrix).charpoly().coeffs()]]


def _characteristic(rows: list[list[Fraction]]) -> Polynomial:
    matrix = flint.fmpq_mat(len(rows), len(rows), [flint.fmpq(a.numerator, a.denominator) for row in rows for a in row])
    return Polynomial(tuple(Fraction(int(c.p), int(c.q)) for c in matrix.charpoly().coeffs()))


def _whole(factors: tuple[tuple[Polynomial, int], ...], power: int, gain: Fraction | int) -> Polynomial:
    return math.prod((factor**n for factor, n in factors), start=Polynomial.monomial(power)).scaled_by(Fraction(gain))


class TestEvaluate:
    omega = np.logspace(-3, 6, 50)

    @pytest.mark.parametrize(
        ("text", "function"),
        [
            ("kp + ki/s", lambda s: 8 + 3200 / s),
            ("exp(-0.001*s)*(s + 3)/(s^2 + s + 99)", lambda s: np.exp(-0.001 * s) * (s + 3) / (s**2 + s + 99)),
            ("(1 + exp(-2*s))/(s + 1)^3", lambda s: (1 + np.exp(-2 * s)) / (s + 1) ** 3),
            ("s^3", lambda s: s**3),
            ("0", lambda s: 0 * s),
        ],
    )
    def test_plain_values(self, text: str, function: object) -> None:
        s = 1j * self.omega
        found = evaluate(rational(text, **({"kp": "8", "ki": "3200"} if "kp" in text else {})), s)
        np.testing.assert_allclose(found, function(s), rtol=1e-12)  # type: ignore[operator]

    def test_high_order_neither_overflows_nor_vanishes(self) -> None:
        s = 1j * self.omega.reshape(5, 10)
        low_pass = rational("1000^60/(s + 1000)^60")
        np.testing.assert_allclose(evaluate(low_pass, s), np.exp(-60 * np.log1p(s / 1000)), rtol=1e-11)

    def test_infinite_at_poles(self) -> None:
        values = evaluate(rational("1/(s*(s^2 + 4))"), np.array([0, 2j, 1.0]))
        assert np.isinf(values[:2]).all()
        assert values[2] == pytest.approx(0.2)

    def test_state_space_resolvent(self) -> None:
        rng = np.random.default_rng(5)
        A, B, C = rng.normal(size=(12, 12)), rng.normal(size=12), rng.normal(size=12)
        s = 1j * np.logspace(-2, 2, 20)
        expected = [C @ np.linalg.solve(point * np.eye(12) - A, B) + 0.5 for point in s]
        found = evaluate(state_space(A.tolist(), B.tolist(), C.tolist(), 0.5), s)
        np.testing.assert_allclose(found, expected, rtol=1e-11)
