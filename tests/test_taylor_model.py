"""The containment property of every operation on Taylor models, against 40-digit arithmetic (mpmath), and its width."""

from __future__ import annotations

import cmath
from collections.abc import Callable
from typing import NamedTuple

import mpmath
import numpy as np
import pytest
from enclosure_checks import operation_ratios, polynomial_values, random_model, without_radius

from encircle.engine import hyperbolic, rounding, taylor_model
from encircle.engine.taylor_model import TaylorModel

WIDTH = 2.0**-53


class Operation(NamedTuple):
    """An operation on models, its truth for numbers, how many models it takes, and the directions v may have."""

    on_models: Callable[..., TaylorModel]
    on_numbers: Callable[..., mpmath.mpc]
    arity: int = 1
    turn: float = np.pi


def _power(alpha: float) -> Operation:
    """v within +-pi/2 and less than 0.9 of it wide: the principal branch on all of the cell."""
    return Operation(
        lambda q: taylor_model.real_power(q, alpha), lambda z: mpmath.power(z, mpmath.mpf(alpha)), 1, np.pi / 2
    )


def _scaled(z: mpmath.mpc) -> mpmath.mpc:
    return z * mpmath.mpc(1.5, -0.3) * 32


def _sinhc(z: mpmath.mpc) -> mpmath.mpc:
    return mpmath.sinh(mpmath.sqrt(z)) / mpmath.sqrt(z)


FAMILIES = {
    "sums and products": {
        "add": Operation(taylor_model.add, lambda a, b: a + b, 2),
        "multiply": Operation(taylor_model.multiply, lambda a, b: a * b, 2),
        "scale": Operation(lambda q: taylor_model.scale(q, 1.5 - 0.3j, 0.0, 5), _scaled),
        "add constant": Operation(lambda q: taylor_model.add_constant(q, -1.0), lambda a: a - 1),
        "rotate": Operation(lambda q: taylor_model.rotate(q, cmath.exp(0.7j)), lambda a: a * mpmath.expj(0.7)),
    },
    "reciprocals": {
        "reciprocal": Operation(taylor_model.reciprocal, lambda a: 1 / a),
        "minus third power": Operation(lambda q: taylor_model.integer_power(q, -3), lambda a: a**-3),
    },
    "exponential": {"exponential": Operation(taylor_model.exponential, mpmath.exp)},
    "powers": {f"power {alpha}": _power(alpha) for alpha in (0.5, -0.5, 0.3, 1.7, 2.5, -2.3, 3.7, 7.5)},
    "whole powers": {
        "square": Operation(lambda q: taylor_model.integer_power(q, 2), lambda a: a**2),
        "seventh power": Operation(lambda q: taylor_model.integer_power(q, 7), lambda a: a**7),
    },
    "hyperbolic functions": {
        "cosh sqrt z": Operation(hyperbolic.cosh_of_root, lambda z: mpmath.cosh(mpmath.sqrt(z))),
        "sinh sqrt z/sqrt z": Operation(hyperbolic.sinhc_of_root, _sinhc),
        "tanh sqrt z/sqrt z": Operation(hyperbolic.tanhc_of_root, lambda z: _sinhc(z) / mpmath.cosh(mpmath.sqrt(z))),
        "(exp x - 1)/x": Operation(hyperbolic.exponential_quotient, lambda x: mpmath.expm1(x) / x),
    },
}
OPERATIONS = {name: operation for family in FAMILIES.values() for name, operation in family.items()}
SHARPEST = 0.3  # every operation comes that close to its radius on cells without radius of their own


def _inputs(operation: Operation, rng: np.random.Generator, count: int, exponent: int = 0) -> list[TaylorModel]:
    return [
        random_model(rng, count, 0.9 if operation.turn < np.pi else 0.6, exponent, operation.turn)
        for _ in range(operation.arity)
    ]


def _check_family(family: str, checks: int) -> None:
    """Cells with radii, cells whose only width is the operation's, cells of almost no width, cells scaled by 2^+-400
    (by less for exponentials)."""
    operations = FAMILIES[family]
    count = checks // (4 * len(operations))
    for place, (name, operation) in enumerate(operations.items()):
        rng = np.random.default_rng([2024, place, checks])
        scaled = 2 if family == "exponential" else 12 if family == "hyperbolic functions" else 400
        for inputs in (
            _inputs(operation, rng, count),
            [without_radius(model) for model in _inputs(operation, rng, count)],
            [without_radius(model, 1e-9) for model in _inputs(operation, rng, count)],
            _inputs(operation, rng, count, scaled),
        ):
            found, result = operation_ratios(operation.on_models, operation.on_numbers, rng, *inputs)
            assert found.max() <= 1.0, f"{name} leaves its enclosure"
            assert found.max() > 1e-3, f"{name} is padded"
            assert np.isfinite(result.r).mean() > 0.9, f"{name} proves too little"


@pytest.mark.parametrize("family", FAMILIES)
def test_every_operation_contains_the_truth(family: str) -> None:
    _check_family(family, 2000)


@pytest.mark.heavy
@pytest.mark.parametrize("family", FAMILIES)
def test_every_operation_contains_the_truth_often(family: str) -> None:
    _check_family(family, 20000)


@pytest.mark.parametrize("name", OPERATIONS)
def test_halved_remainders_are_found_out(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """The same check must fail when every remainder is half of what it ought to be."""
    for module in (taylor_model, hyperbolic):
        monkeypatch.setattr(module, "outward", lambda radius: 0.5 * rounding.outward(radius))
    operation, rng = OPERATIONS[name], np.random.default_rng(7)
    inputs = _inputs(operation, rng, 60)
    found, _ = operation_ratios(operation.on_models, operation.on_numbers, rng, *inputs)
    assert found.max() > 1.0


@pytest.mark.parametrize("name", [name for name in OPERATIONS if not name.startswith(("add", "scale", "rotate"))])
def test_own_remainder_is_sharp_and_of_third_order(name: str) -> None:
    """Halving the cell divides the remainder by 8; it is attained up to a factor of 3."""
    operation, rng = OPERATIONS[name], np.random.default_rng(11)
    inputs = [without_radius(model) for model in _inputs(operation, rng, 60)]
    found, _ = operation_ratios(operation.on_models, operation.on_numbers, rng, *inputs)
    assert found.max() > SHARPEST
    with np.errstate(all="ignore"):
        wide, narrow = (
            operation.on_models(*[without_radius(model, shrink) for model in inputs]) for shrink in (1e-2, 5e-3)
        )
    truncation = wide.r > 1e5 * WIDTH * np.abs(wide.v)
    assert truncation.any()
    shift = 0 if wide.exponent is None or narrow.exponent is None else narrow.exponent - wide.exponent
    factor = wide.r / np.ldexp(narrow.r, shift)
    assert np.all((factor[truncation] > 7.0) & (factor[truncation] < 9.5))


# -- distance from zero, arguments


def _sampled_set(model: TaylorModel) -> np.ndarray:
    """Points of each set, shape (cells, many), in double precision."""
    t = np.linspace(-1, 1, 81)[:, None]
    rim = np.exp(2j * np.pi * np.arange(24) / 24)
    body = model.v[:, None, None] + model.d[:, None, None] * t + model.e[:, None, None] * t * t
    return (body + model.r[:, None, None] * rim).reshape(len(model.v), -1)


def _wide_models(count: int) -> TaylorModel:
    rng = np.random.default_rng(5)
    model = random_model(rng, count, 1.2)
    return model._replace(r=np.abs(model.v) * rng.choice([0.0, 1e-3, 0.2], count))


def test_distance_from_zero_is_a_lower_bound_and_close() -> None:
    model = _wide_models(2000)
    least = np.abs(_sampled_set(model)).min(axis=1)
    lower = taylor_model.distance_from_zero_lower(model)
    assert np.all(lower <= least * (1 + 1e-12))
    straight = model._replace(e=np.zeros(2000, complex))
    bound = taylor_model.distance_from_zero_lower(straight)
    gap = np.abs(_sampled_set(straight)).min(axis=1) - bound
    assert np.all((gap <= 0.03 * np.abs(model.v) + np.abs(model.d) / 20)[bound > 0])
    assert (lower > 0).mean() > 0.5


def test_distance_from_zero_is_exact_for_a_right_triangle() -> None:
    """The segment from -4 + 3j to 4 + 3j passes 0 at distance 3; from 3 + 4j to 9 + 4j at distance 5."""
    v, d, zero = np.array([3j, 6 + 4j]), np.array([4 + 0j, 3 + 0j]), np.zeros(2, complex)
    lower = taylor_model.distance_from_zero_lower(TaylorModel(v, d, zero, np.array([0.5, 0.0])))
    assert lower == pytest.approx([2.5, 5.0], abs=1e-12)


def test_arguments_are_contained() -> None:
    model = _wide_models(2000)
    with np.errstate(all="ignore"):
        lower, upper = taylor_model.argument_range(model)
    turned = np.angle(model.v)[:, None] + np.angle(_sampled_set(model) / model.v[:, None])
    proved = np.isfinite(lower)
    assert proved.mean() > 0.5
    assert np.all(lower[proved] <= turned.min(axis=1)[proved] + 1e-12)
    assert np.all(upper[proved] >= turned.max(axis=1)[proved] - 1e-12)
    narrow = without_radius(model, 1e-6)
    low, high = taylor_model.argument_range(narrow)
    assert np.all(high - low < 5e-6)


# -- edges: zero, infinity, NaN, denormal numbers

ZERO, NAN, INFINITE = 0j, complex("nan"), complex("inf")


def _single(v: complex, d: complex = 0j, e: complex = 0j, r: float = 0.0) -> TaylorModel:
    return TaylorModel(np.array([v]), np.array([d]), np.array([e]), np.array([r]))


EDGES = {
    "value 0": _single(0j, 0.1 + 0j),
    "touches 0": _single(1 + 0j, 1 + 0j),
    "all zero": _single(0j),
    "radius as large as the value": _single(1 + 0j, r=1.0),
    "denormal value, larger radius": _single(5e-324 + 0j, r=1e-320),
    "NaN": _single(NAN),
    "NaN radius": _single(1 + 0j, r=float("nan")),
    "infinite value": _single(INFINITE),
    "infinite radius": _single(1 + 0j, r=np.inf),
}


@pytest.mark.parametrize("edge", EDGES)
def test_reciprocals_and_powers_prove_nothing_at_edges(edge: str) -> None:
    with np.errstate(all="ignore"):
        models = [taylor_model.reciprocal(EDGES[edge]), taylor_model.real_power(EDGES[edge], 0.5)]
        for model in models:
            assert not (model.r < np.inf).any()
            assert not (taylor_model.distance_from_zero_lower(model) > 0).any()
        assert not (taylor_model.distance_from_zero_lower(EDGES[edge]) > 0).any()


@pytest.mark.parametrize("edge", ["NaN", "NaN radius", "infinite value", "infinite radius"])
@pytest.mark.parametrize("name", OPERATIONS)
def test_what_is_not_finite_stays_unproved(name: str, edge: str) -> None:
    operation = OPERATIONS[name]
    with np.errstate(all="ignore"):
        model = operation.on_models(*[EDGES[edge]] * operation.arity)
        assert not (taylor_model.distance_from_zero_lower(model) > 0).any()


def test_a_zero_cell_is_not_taken_for_excluded_by_underflow() -> None:
    """Products of denormal numbers underflow; the radius must still hold the truth."""
    model = _single(1e-200 + 0j, 1e-200 + 0j)
    square = taylor_model.multiply(model, model)
    assert not (taylor_model.distance_from_zero_lower(square) > 0).any()
    found, _ = operation_ratios(
        taylor_model.multiply, lambda a, b: a * b, np.random.default_rng(1), _single(3e-170 + 0j), _single(7e-170 + 0j)
    )
    assert found.max() <= 1.0


def test_exponentials_far_outside_double_precision() -> None:
    """exp(+-1e5) and exp(-1e20): scaled by powers of two, or a tiny disc about 0."""
    v = np.array([1e5 + 2j, -1e5 + 2j, -1e20 + 0j, 1e20 + 0j])
    q = TaylorModel(v, 0 * v + 0.01j, 0 * v, np.zeros(4))
    with np.errstate(all="ignore"):
        model = taylor_model.exponential(q)
    assert model.exponent is not None
    assert model.exponent[0] == pytest.approx(1e5 / np.log(2.0), abs=2)
    assert taylor_model.distance_from_zero_lower(model)[0] > 0
    assert taylor_model.distance_from_zero_lower(model)[1] > 0
    assert model.exponent[2] < -(2**40)
    assert model.r[2] <= 1.0
    assert model.r[3] == np.inf
    with mpmath.workdps(40):
        truth = mpmath.exp(mpmath.mpc(1e5, 2))
        nominal = polynomial_values(model, np.zeros(4))[0]
        assert abs(truth - nominal) <= mpmath.ldexp(mpmath.mpf(model.r[0]), int(model.exponent[0]))


def test_a_wide_cell_of_a_decaying_exponential_becomes_a_small_disc() -> None:
    """Re q between -9000 and -11000: |exp q| <= exp(-9000), although the swing exp(1000) itself overflows."""
    q = TaylorModel(np.array([-10000.0 + 3j]), np.array([1000.0 - 900j]), np.zeros(1, complex), np.zeros(1))
    with np.errstate(all="ignore"):
        model = taylor_model.exponential(q)
    assert model.v[0] == 0
    assert np.log2(model.r[0]) + taylor_model.exponents(model)[0] == pytest.approx(-9000 / np.log(2.0), abs=0.01)


def test_cells_do_not_influence_each_other() -> None:
    """One cell alone and among others, also scaled ones: the same set but for rounding."""
    rng = np.random.default_rng(3)
    z = random_model(rng, 40, exponent=8)
    together = hyperbolic.tanhc_of_root(z)
    assert z.exponent is not None
    for i in range(40):
        alone = hyperbolic.tanhc_of_root(TaylorModel(*[part[i : i + 1] for part in z]))
        shift = taylor_model.exponents(together)[i] - taylor_model.exponents(alone)[0]
        assert abs(together.v[i] * 2.0**shift - alone.v[0]) <= together.r[i] * 2.0**shift
        assert together.r[i] * 2.0**shift == pytest.approx(alone.r[0], rel=1e-9)


def test_elementary_functions_of_this_machine_are_checked(monkeypatch: pytest.MonkeyPatch) -> None:
    rounding.check_elementary_functions()
    assert rounding.agrees(np.sqrt, ([2.0],), [1.4142135623730951])
    assert not rounding.agrees(np.sqrt, ([2.0],), [1.4142135623730951 * (1 + 2e-15)])
    wrong = {"sin": (np.sin, ([1.0],), [0.84147])}
    monkeypatch.setattr(rounding, "_REFERENCE", wrong)
    rounding.check_elementary_functions.cache_clear()
    with pytest.raises(ArithmeticError, match="sin"):
        rounding.check_elementary_functions()
    rounding.check_elementary_functions.cache_clear()
