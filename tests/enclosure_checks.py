"""Containment against 40-digit arithmetic (mpmath): random models, their members, and the ratio error/radius."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import mpmath
import numpy as np

from encircle.engine.taylor_model import TaylorModel, exponents

DIGITS = 40


@dataclass(frozen=True)
class Member:
    """One number of each set of a model: the t it belongs to, and its exact value."""

    t: np.ndarray
    values: list[mpmath.mpc]


def exact(z: complex) -> mpmath.mpc:
    """A double-precision complex number without rounding."""
    return mpmath.mpc(float(np.real(z)), float(np.imag(z)))


def polynomial_values(model: TaylorModel, t: np.ndarray) -> list[mpmath.mpc]:
    """2^exponent (v + d t + e t^2) cell by cell, exactly enough."""
    scale = exponents(model)
    return [
        mpmath.ldexp(1, int(scale[i])) * (exact(model.v[i]) + exact(model.d[i]) * x + exact(model.e[i]) * x * x)
        for i, x in enumerate(mpmath.mpf(float(x)) for x in t)
    ]


def random_member(rng: np.random.Generator, model: TaylorModel) -> Member:
    """t often at an end of the cell, the disturbance on the rim of its disc."""
    n = len(model.v)
    t = np.where(rng.random(n) < 0.5, rng.choice([-1.0, 1.0], n), rng.uniform(-1.0, 1.0, n))
    turn = np.exp(2j * np.pi * rng.random(n))
    scale = exponents(model)
    values = [
        value
        + mpmath.ldexp(1, int(scale[i])) * mpmath.mpf(float(model.r[i])) * exact(turn[i]) * (1 - mpmath.mpf(10) ** -15)
        for i, value in enumerate(polynomial_values(model, t))
    ]
    return Member(t, values)


def random_model(
    rng: np.random.Generator, n: int, spread: float = 0.4, exponent: int = 0, turn: float = np.pi
) -> TaylorModel:
    """v of any size and direction within ``turn`` of 1, d and e up to ``spread`` times v, radii from 0 to 1e-3 of v."""
    size = 10.0 ** rng.uniform(-3, 3, n)
    v = size * np.exp(1j * rng.uniform(-turn, turn, n))
    reach = spread * 10.0 ** rng.uniform(-5, 0, n)
    d = v * reach * np.exp(2j * np.pi * rng.random(n))
    e = v * reach**2 * rng.random(n) * np.exp(2j * np.pi * rng.random(n))
    r = size * np.where(rng.random(n) < 0.5, 0.0, 10.0 ** rng.uniform(-16, -3, n))
    scale = rng.integers(-exponent, exponent + 1, n) if exponent else None
    return TaylorModel(v, d, e, r, scale)


def ratios(model: TaylorModel, t: np.ndarray, values: list[mpmath.mpc]) -> np.ndarray:
    """error/radius for each cell, at most 1 where the enclosure holds; 0 where the radius is infinite or NaN."""
    found = np.zeros(len(t))
    scale = exponents(model)
    for i, (nominal, value) in enumerate(zip(polynomial_values(model, t), values, strict=True)):
        if np.isfinite(model.r[i]):
            found[i] = float(abs(value - nominal) / (mpmath.ldexp(1, int(scale[i])) * mpmath.mpf(float(model.r[i]))))
    return found


def without_radius(model: TaylorModel, shrink: float = 1.0) -> TaylorModel:
    """The same cells, ``shrink`` times as wide, known exactly: only the operation's own remainder is left."""
    return model._replace(d=model.d * shrink, e=model.e * shrink**2, r=np.zeros(len(model.r)))


def operation_ratios(
    operation: Callable[..., TaylorModel],
    truth: Callable[..., mpmath.mpc],
    rng: np.random.Generator,
    *inputs: TaylorModel,
) -> tuple[np.ndarray, TaylorModel]:
    """error/radius of an operation on random members of its inputs with equal t, and the enclosing models."""
    with mpmath.workdps(DIGITS), np.errstate(all="ignore"):
        members = [random_member(rng, model) for model in inputs]
        t = members[0].t
        values = [members[0].values]
        for model, member in zip(inputs[1:], members[1:], strict=True):
            moved = polynomial_values(model, t)
            own = polynomial_values(model, member.t)
            values.append([a + b - c for a, b, c in zip(moved, member.values, own, strict=True)])
        result = operation(*inputs)
        return ratios(result, t, [truth(*row) for row in zip(*values, strict=True)]), result
