"""Random loops and cascades against exact root counts: never a wrong number, undecided only at exact axis roots."""

from __future__ import annotations

import numpy as np
import pytest
from exact_diagram import ExactDiagram
from random_projects import random_cascade, random_single_loop
from random_verdicts import Tally, compare_with_exact_counts

from encircle.engine import Project
from encircle.engine.declarations import Declarations

BATCH = 250
heavy = pytest.mark.heavy


def batches(count: int, heavy_count: int) -> list[object]:
    """Seeds of batches, the later ones only in the heavy run."""
    light = [pytest.param(seed, id=f"batch{seed}") for seed in range(count)]
    return light + [pytest.param(seed, id=f"batch{seed}", marks=heavy) for seed in range(count, heavy_count)]


def run(declarations: list[Declarations], in_full: int) -> Tally:
    """Count every diagram all open and all closed; look at each loop of every ``in_full``-th in full."""
    tally = Tally()
    for number, each in enumerate(declarations):
        compare_with_exact_counts(Project(each), ExactDiagram(each), number, tally, every_loop=number % in_full == 0)
    assert tally.wrong == []
    assert tally.needlessly_undecided == []
    assert tally.stable > len(declarations) / 10
    assert tally.unstable > len(declarations) / 10
    return tally


@pytest.mark.parametrize("seed", batches(8, 80))
def test_single_loops(seed: int) -> None:
    """Orders 2 to 14, unstable and integrating open loops, damping down to 1e-4 (2,000 loops; 20,000 heavy)."""
    rng = np.random.default_rng([1877, seed])
    run([random_single_loop(rng) for _ in range(BATCH)], in_full=10)


@pytest.mark.parametrize("seed", batches(2, 20))
def test_cascades(seed: int) -> None:
    """Three loops with feedback across that no cut opens (500 cascades; 5,000 heavy)."""
    rng = np.random.default_rng([1932, seed])
    run([random_cascade(rng) for _ in range(BATCH)], in_full=4)


def test_cascades_that_leave_a_pole_on_the_axis() -> None:
    """A motor without friction seen from its current loop, in 40 random shapes."""
    rng = np.random.default_rng(1890)
    tally = run([random_cascade(rng, frictionless=True) for _ in range(40)], in_full=1)
    assert tally.left_on_axis >= 40


@heavy
@pytest.mark.parametrize("seed", range(100, 110))
def test_every_loop_in_full(seed: int) -> None:
    """1,250 single loops and 1,250 cascades, every stage of each."""
    rng = np.random.default_rng([1945, seed])
    make = random_single_loop if seed % 2 else random_cascade
    run([make(rng) for _ in range(BATCH)], in_full=1)
