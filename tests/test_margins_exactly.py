"""Every margin of random stable loops against exact algebra: six digits, no extreme and no limit overlooked."""

from __future__ import annotations

import math

import numpy as np
import pytest
from exact_margins import ExactMargins, exact_margins
from exact_roots import count_roots
from flint import fmpq_poly
from random_projects import random_stable_loop

from encircle.engine import Project
from encircle.engine.result import LoopResult, Margins

LOOPS = 100


@pytest.fixture(scope="module")
def corpus() -> list[tuple[LoopResult, Margins, ExactMargins, fmpq_poly, fmpq_poly]]:
    """Stable loops of orders 1 to 8 with their results and their exact margins."""
    rng = np.random.default_rng(1945)
    found = []
    while len(found) < LOOPS:
        declarations, N, D = random_stable_loop(rng)
        if count_roots(N + D).right or count_roots(N + D).axis:
            continue
        loop = Project(declarations).loop("loop")
        assert loop.margins is not None
        found.append((loop, loop.margins, exact_margins(N, D), N, D))
    return found


def test_modulus_and_peaks(corpus) -> None:  # type: ignore[no-untyped-def]
    for _, margins, exact, _, _ in corpus:
        assert margins.modulus.value == pytest.approx(exact.modulus, rel=1e-6)
        assert margins.sensitivity_peak.value == pytest.approx(exact.sensitivity_peak, rel=1e-6)
        assert margins.sensitivity_peak.db == pytest.approx(20 * math.log10(exact.sensitivity_peak), abs=1e-5)
        assert margins.complementary_peak.value == pytest.approx(exact.complementary_peak, rel=1e-6)


def test_extremes_are_reached_at_their_frequencies(corpus) -> None:  # type: ignore[no-untyped-def]
    for _, margins, _, N, D in corpus:
        for found, above, below in (
            (margins.modulus, N + D, D),
            (margins.complementary_peak, N, N + D),
        ):
            if found.frequency:
                s = 1j * found.frequency
                value = abs(np.polyval(floats(above), s) / np.polyval(floats(below), s))
                assert value == pytest.approx(found.value, rel=1e-5)


def floats(p: fmpq_poly) -> list[float]:
    return [float(c.p) / float(c.q) for c in p.coeffs()][::-1]


def test_all_gain_crossovers_are_found(corpus) -> None:  # type: ignore[no-untyped-def]
    for _, margins, exact, _, _ in corpus:
        assert margins.gain_crossovers == pytest.approx(exact.crossovers, rel=1e-6)


def test_phase_and_delay(corpus) -> None:  # type: ignore[no-untyped-def]
    leads = 0
    for _, margins, exact, _, _ in corpus:
        assert (margins.phase is None) == (exact.phase is None)
        if exact.phase is not None:
            assert margins.phase.degrees == pytest.approx(abs(math.degrees(exact.phase)), rel=1e-6)
            assert margins.phase.direction == ("lag" if exact.phase > 0 else "lead")
            leads += exact.phase < 0
        assert (margins.delay is None) == (exact.delay is None)
        if exact.delay is not None:
            assert margins.delay.seconds == pytest.approx(exact.delay, rel=1e-6)
    assert leads > 2


def test_gain_ranges_and_margins(corpus) -> None:  # type: ignore[no-untyped-def]
    for loop, margins, exact, _, _ in corpus:
        found = [(r.lower, math.inf if r.upper is None else r.upper, r.unstable_poles) for r in loop.gain_ranges]
        assert [r[2] for r in found] == [r[2] for r in exact.gain_ranges]
        assert [r[:2] for r in found] == [pytest.approx(r[:2], rel=1e-6) for r in exact.gain_ranges]
        (here,) = [r for r in exact.gain_ranges if r[0] < 1 < r[1]]
        lower = None if margins.gain_decrease is None else margins.gain_decrease.factor
        upper = None if margins.gain_increase is None else margins.gain_increase.factor
        assert lower == (pytest.approx(here[0], rel=1e-6) if here[0] > 0 else None)
        assert upper == (pytest.approx(here[1], rel=1e-6) if here[1] < math.inf else None)
