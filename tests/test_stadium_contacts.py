"""First contacts of single stadiums with -1, against points laid densely over the stadium."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from encircle.engine.stadium_contacts import Stadiums, distance, least_ratio, real_part, turns

Complex = NDArray[np.complex128]

COUNT = 300
CLOSE = 4e-3  # the points lie this close together


def stadiums(seed: int) -> Stadiums:
    """Random ones near -1, 0 and the unit circle that leave -1 out; every fourth is a disc, every fourth a segment."""
    rng = np.random.default_rng(seed)
    c = rng.normal(scale=1.2, size=4 * COUNT) + 1j * rng.normal(scale=1.2, size=4 * COUNT)
    q = rng.exponential(0.4, 4 * COUNT) * np.exp(2j * np.pi * rng.random(4 * COUNT))
    rho = rng.exponential(0.3, 4 * COUNT)
    kind = rng.integers(0, 4, 4 * COUNT)
    sets = Stadiums(c, np.where(kind == 0, 0.0, q), np.where(kind == 1, 0.0, rho))
    return sets.where(distance(sets, -1.0) > 0.02)


def boundary(sets: Stadiums) -> Complex:
    """(points, sets) along both circles and both sides."""
    turn = np.exp(1j * np.linspace(-np.pi, np.pi, 1601))[:, None]
    ends = [end + sets.rho * turn for end in (sets.c + sets.q, sets.c - sets.q)]
    normal = 1j * sets.rho * np.exp(1j * np.angle(sets.q))
    along = np.linspace(-1.0, 1.0, 801)[:, None] * sets.q
    return np.concatenate([*ends, sets.c + normal + along, sets.c - normal + along])


def inside(sets: Stadiums, points: Complex) -> NDArray[np.bool_]:
    """Whether points (..., sets) belong to the sets, by the definition."""
    length = np.where(sets.q == 0.0, 1.0, np.abs(sets.q) ** 2)
    t = np.clip(((points - sets.c) * sets.q.conj()).real / length, -1.0, 1.0)
    belongs: NDArray[np.bool_] = np.abs(sets.c + t * sets.q - points) <= sets.rho + 1e-9
    return belongs


def test_distance() -> None:
    sets = stadiums(1)
    assert distance(sets, -1.0) == pytest.approx(np.abs(boundary(sets) + 1.0).min(axis=0), abs=CLOSE)


def test_least_ratio_is_exact_where_it_matters_and_a_bound_elsewhere() -> None:
    sets = stadiums(2)
    points = boundary(sets)
    sampled = (np.abs(1 + points) / np.abs(points)).min(axis=0)
    found = least_ratio(sets)
    assert np.all(found <= sampled + 1e-12)
    assert found.min() == pytest.approx(sampled.min(), rel=1e-3)
    alone = np.array([least_ratio(sets.where(np.arange(len(sets.rho)) == i))[0] for i in range(len(sets.rho))])
    assert alone == pytest.approx(sampled, rel=2e-2)


def test_real_part() -> None:
    sets = stadiums(3)
    axis = np.linspace(-6.0, 6.0, 12001)[:, None]
    belongs = inside(sets, axis + 0j)
    least, most = real_part(sets)
    meets = belongs.any(axis=0)
    assert np.all(~np.isnan(least[meets]))
    first, last = axis[belongs.argmax(axis=0), 0], axis[::-1][belongs[::-1].argmax(axis=0), 0]
    assert least[meets] == pytest.approx(first[meets], abs=1e-3)
    assert most[meets] == pytest.approx(last[meets], abs=1e-3)
    found = ~np.isnan(least)
    assert np.all(inside(sets, least + 0j)[found])
    assert np.all(inside(sets, most + 0j)[found])


def test_turns() -> None:
    sets = stadiums(4)
    angle = np.linspace(1e-4, 2 * np.pi, 12001)[:, None]
    for found, direction in zip(turns(sets), (1.0, -1.0), strict=True):
        belongs = inside(sets, -np.exp(1j * direction * angle))
        meets = belongs.any(axis=0)
        assert np.all(np.isfinite(found[meets]))
        assert found[meets] == pytest.approx(angle[belongs.argmax(axis=0), 0][meets], abs=1e-3)
        finite = np.isfinite(found)
        assert np.all(inside(sets, -np.exp(1j * direction * np.where(finite, found, 0.0)))[finite])


def test_both_margins_of_a_disc_by_hand() -> None:
    """|z + 2| <= 0.5: divided by 1.5 it touches -1; |z + 0.5| <= 0.1: times 1/0.6."""
    sets = Stadiums(np.array([-2.0 + 0j, -0.5 + 0j]), np.zeros(2, complex), np.array([0.5, 0.1]))
    assert real_part(sets).most == pytest.approx([-1.5, -0.4])
    assert real_part(sets).least == pytest.approx([-2.5, -0.6])
    assert distance(sets, -1.0) == pytest.approx([0.5, 0.4])
