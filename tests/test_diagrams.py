"""Random general diagrams and loops with dead time against exact and certified counts."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from exact_delay import DelayTerm, zeros_right_of_axis
from exact_diagram import ExactDiagram
from exact_roots import polynomial, rational
from random_projects import (
    Random,
    coefficients,
    declared,
    expanded,
    loop,
    random_diagram,
    scaled_gain,
    sections,
    term,
)
from random_verdicts import Tally, compare_with_exact_counts
from single_loop_files import assert_consistent

from encircle.engine import Project
from encircle.engine.declarations import Declarations
from encircle.engine.result import LoopResult

DIAGRAMS = 200


def usable_diagrams(seed: int, count: int) -> list[tuple[Declarations, ExactDiagram]]:
    """Random diagrams whose stages are well posed and in which every loop feeds back at its turn."""
    rng = np.random.default_rng(seed)
    found: list[tuple[Declarations, ExactDiagram]] = []
    while len(found) < count:
        declarations = random_diagram(rng)
        exact = ExactDiagram(declarations)
        if all(exact.has_feedback(k) for k in range(len(declarations.loops))) and exact.well_posed():
            found.append((declarations, exact))
    return found


@pytest.fixture(scope="module")
def diagrams() -> list[tuple[Project, ExactDiagram]]:
    """The corpus, compiled once for all tests."""
    return [(Project(declarations), exact) for declarations, exact in usable_diagrams(1953, DIAGRAMS)]


Diagrams = list[tuple[Project, ExactDiagram]]


def test_counts_of_general_diagrams(diagrams: Diagrams) -> None:
    tally = Tally()
    for number, (project, exact) in enumerate(diagrams):
        compare_with_exact_counts(project, exact, number, tally)
    assert tally.wrong == []
    assert tally.needlessly_undecided == []
    assert tally.stable > DIAGRAMS / 10
    assert tally.unstable > DIAGRAMS / 10


def test_parts_name_their_blocks(diagrams: Diagrams) -> None:
    """The blocks of a loop's part: its copies, found here by plain reachability."""
    for project, exact in diagrams:
        for index, name in enumerate(project.loop_names):
            assert set(project.loop(name).blocks) == {exact.owners[copy] for copy in exact.part(index)}


def test_gain_ranges_hold_the_exact_count(diagrams: Diagrams) -> None:
    """At random gains inside the printed ranges the exact count is the printed one."""
    rng = np.random.default_rng(1960)
    checked = 0
    for project, _ in diagrams[:80]:
        for item in last_loop(project).gain_ranges:
            upper = 100 * max(item.lower, 1.0) if item.upper is None else item.upper
            for share in rng.uniform(0.001, 0.999, 2):
                factor = item.lower + share * (upper - item.lower)
                assert exact_count_at(project, factor) == item.unstable_poles
                checked += 1
    assert checked > 150


def test_gain_margins_end_where_the_exact_count_changes(diagrams: Diagrams) -> None:
    checked = 0
    for project, _ in diagrams:
        margins = last_loop(project).margins
        if margins is None:
            continue
        for side, direction in ((margins.gain_increase, 1), (margins.gain_decrease, -1)):
            if side is not None:
                inside, outside = side.factor * (1 - 1e-6 * direction), side.factor * (1 + 1e-6 * direction)
                assert exact_count_at(project, inside) == 0
                assert exact_count_at(project, outside) > 0
                checked += 1
    assert checked > 20


def last_loop(project: Project) -> LoopResult:
    return project.loop(project.loop_names[-1])


def exact_count_at(project: Project, factor: float) -> int:
    """Z of the last loop with its gain times ``factor``."""
    declared_loop = project.declarations.loops[-1]
    exact = ExactDiagram(project.declarations, {declared_loop.cut: declared_loop.gain * factor})
    return exact.loop(len(project.loop_names) - 1).after.right


def test_eigenvalues_agree_with_the_exact_counts(diagrams: Diagrams) -> None:
    """The oracle itself, against numpy: eigenvalues of the companion matrix of each whole diagram."""
    for project, exact in diagrams:
        closed = len(project.loop_names)
        values = [float(c.p) / float(c.q) for c in exact.characteristic(closed).coeffs()][::-1]
        roots = np.roots(values)
        clear = np.abs(roots.real) > 1e-4 * (1 + np.abs(roots))
        if clear.all():
            assert exact.whole(closed).right == int((roots.real > 0).sum())


# ---- dead time -------------------------------------------------------------------------------------------------------


def with_dead_time(rng: Random) -> tuple[Declarations, list[list[DelayTerm]]]:
    """A loop with dead time, half of them inside a second one with its own; characteristic functions stage by stage."""
    inner_n, inner_d, inner_T, k1 = delayed_block(rng)
    block = coefficients("inner", inner_n, inner_d, inner_T)
    equations = {"e1": (term(-1, [], "y1"),), "y1": (term(k1, ["inner"], "e1"),)}
    D1, N1 = polynomial(inner_d[::-1]), polynomial(inner_n[::-1]) * rational(k1)
    first = [DelayTerm(D1, Fraction(0)), DelayTerm(N1, Fraction(inner_T))]
    if rng.random() < 0.5:
        return declared([block], equations, [loop("inner", "e1")]), [first]
    outer_n, outer_d, outer_T, k2 = delayed_block(rng)
    blocks = [block, coefficients("outer", outer_n, outer_d, outer_T)]
    equations["e1"] = (term(1, [], "u"), term(-1, [], "y1"))
    equations |= {"e2": (term(-1, [], "y2"),), "u": (term(k2, [], "e2"),), "y2": (term(1, ["outer"], "y1"),)}
    D2, N2 = polynomial(outer_d[::-1]), polynomial(outer_n[::-1]) * rational(k2)
    second = [
        DelayTerm(D1 * D2, Fraction(0)),
        DelayTerm(N1 * D2, Fraction(inner_T)),
        DelayTerm(N1 * N2, Fraction(inner_T) + Fraction(outer_T)),
    ]
    return declared(blocks, equations, [loop("inner", "e1"), loop("outer", "e2")]), [first, second]


def delayed_block(rng: Random) -> tuple[list[float], list[float], float, float]:
    """Strictly proper numerator and denominator of order 1 to 5, a dead time, and a gain that makes |L| pass 1."""
    order = int(rng.integers(1, 6))
    zeros, poles = sections(rng, int(rng.integers(0, order)), 0.1), sections(rng, order, 0.12)
    numerator, denominator = expanded(zeros), expanded(poles)
    dead_time = float(Fraction(round(10 ** rng.uniform(-2, 0.3) * 4096), 4096))
    return numerator, denominator, dead_time, scaled_gain(rng, numerator, denominator)


def test_counts_with_dead_time() -> None:
    rng = np.random.default_rng(1950)
    wrong, needless, stable, many = [], [], 0, 0
    for index in range(60):
        declarations, stages = with_dead_time(rng)
        project = Project(declarations)
        for name, stage in zip(project.loop_names, stages, strict=True):
            found, exact = project.loop(name).unstable_poles_after, zeros_right_of_axis(stage)
            assert_consistent(project.loop(name))
            if found is None and exact is not None:
                needless.append((index, name, exact))
            elif found != exact:
                wrong.append((index, name, found, exact))
            stable += exact == 0
            many += exact is not None and exact > 2
    assert wrong == []
    assert needless == []
    assert stable > 10
    assert many > 5
