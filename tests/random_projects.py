"""Seeded random declarations: single loops, cascades with feedback across, general diagrams.

Every block coefficient is a double (or a small binary fraction) with a leading coefficient of 1, so that the constants
for which the engine proves its counts are the declared ones to the last bit; gains stand in the equations.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

import numpy as np
from exact_roots import descending, rational
from flint import fmpq_poly

from encircle.engine.declarations import (
    Block,
    CoefficientBlock,
    Declarations,
    LoopDeclaration,
    RootBlock,
    StateSpaceBlock,
    Term,
)

Random = np.random.Generator
Source = str | tuple[Term, ...]


def term(coefficient: float | int | Fraction, blocks: Sequence[str], source: Source) -> Term:
    return Term(Fraction(coefficient), tuple(blocks), source)


def coefficients(name: str, numerator: Sequence[float], denominator: Sequence[float], dead_time: float = 0.0) -> Block:
    exact = [tuple(Fraction(float(c)) for c in row) for row in (numerator, denominator)]
    return CoefficientBlock(name, exact[0], exact[1], Fraction(dead_time), "")


def loop(name: str, cut: str, gain: float = 1.0) -> LoopDeclaration:
    return LoopDeclaration(name, cut, gain, {}, None, None)


def declared(
    blocks: Sequence[Block], signals: Mapping[str, tuple[Term, ...]], loops: Sequence[LoopDeclaration]
) -> Declarations:
    """A whole project in memory, without inputs, bands or limits."""
    return Declarations(
        file="random.toml",
        sha256="0" * 64,
        title="random",
        frequency_unit="rad/s",
        inputs=(),
        band=None,
        parameters={},
        blocks={block.name: block for block in blocks},
        signals=dict(signals),
        loops=tuple(loops),
        warnings=(),
    )


# ---- single loops ----------------------------------------------------------------------------------------------------


def first_order(rng: Random, unstable: float) -> list[float]:
    rate = 10 ** rng.uniform(-1.5, 2)
    return [1.0, -rate if rng.random() < unstable else rate]


def second_order(rng: Random, unstable: float, least_damping: float = 1e-4) -> list[float]:
    natural = 10 ** rng.uniform(-1, 2)
    damping = 10 ** rng.uniform(np.log10(least_damping), 0)
    sign = -1 if rng.random() < unstable else 1
    return [1.0, 2 * sign * damping * natural, natural**2]


def sections(rng: Random, order: int, unstable: float) -> list[list[float]]:
    """Real first- and second-order factors, monic, of the given total order."""
    result = []
    while order > 0:
        take = 2 if order >= 2 and rng.random() < 0.7 else 1
        result.append(second_order(rng, unstable) if take == 2 else first_order(rng, unstable))
        order -= take
    return result


def expanded(factors: Sequence[Sequence[float]]) -> list[float]:
    product = np.array([1.0])
    for factor in factors:
        product = np.polymul(product, factor)
    return product.tolist()


def scaled_gain(rng: Random, numerator: list[float], denominator: list[float]) -> float:
    """A gain that makes |L| some value within a factor 10 of 1 at a random frequency."""
    s = 1j * 10 ** rng.uniform(-1, 2)
    ratio = abs(np.polyval(denominator, s) / np.polyval(numerator, s))
    return float(ratio * 10 ** rng.uniform(-1, 1) * (1 if rng.random() < 0.9 else -1))


def random_single_loop(rng: Random) -> Declarations:
    """L of order 2 to 14: unstable factors, up to two integrators, damping down to 1e-4; as one block or many."""
    order = int(rng.integers(2, 15))
    integrators = int(rng.choice([0, 0, 0, 1, 1, 2]))
    poles = sections(rng, max(order - integrators, 0), 0.15) + [[1.0, 0.0]] * min(integrators, order)
    zeros = sections(rng, int(rng.integers(0, order + 1)), 0.15)
    gain = scaled_gain(rng, expanded(zeros), expanded(poles))
    if rng.random() < 0.5:
        blocks = [coefficients("whole", expanded(zeros), expanded(poles))]
    else:
        blocks = in_sections(zeros, poles)
    forward = term(gain, [block.name for block in blocks], "error")
    return declared(blocks, {"error": (term(-1, [], "output"),), "output": (forward,)}, [loop("loop", "error")])


def in_sections(zeros: list[list[float]], poles: list[list[float]]) -> list[Block]:
    """One block for each pole section; zero sections ride on them, so that a block may be improper."""
    blocks = [
        coefficients(f"section_{index}", zeros[index] if index < len(zeros) else [1.0], pole)
        for index, pole in enumerate(poles)
    ]
    return blocks + [coefficients(f"zero_{index}", zeros[index], [1.0]) for index in range(len(poles), len(zeros))]


def random_stable_loop(rng: Random) -> tuple[Declarations, fmpq_poly, fmpq_poly]:
    """A loop of order 1 to 8 that is often stable, with N and D of its L: mild gains, few unstable factors."""
    order = int(rng.integers(1, 9))
    poles = sections(rng, order, 0.06)
    zeros = sections(rng, int(rng.integers(max(0, order - 3), order + 1)), 0.04)
    if rng.random() < 0.3:
        poles[0] = [1.0, 0.0] if len(poles[0]) == 2 else [1.0, poles[0][1], 0.0]
    numerator, denominator = expanded(zeros), expanded(poles)
    gain = abs(scaled_gain(rng, numerator, denominator)) * float(rng.choice([1, 1, 0.2]))
    block = coefficients("whole", numerator, denominator)
    signals = {"error": (term(-1, [], "output"),), "output": (term(gain, ["whole"], "error"),)}
    N, D = descending(numerator) * rational(gain), descending(denominator)
    return declared([block], signals, [loop("loop", "error")]), N, D


# ---- cascades --------------------------------------------------------------------------------------------------------


def random_plant(rng: Random, name: str) -> Block:
    """A lag, an integrator, an unstable lag or a resonance."""
    kind = rng.integers(0, 6)
    if kind == 0:
        return coefficients(name, [1.0], [1.0, 0.0])
    if kind <= 3:
        return coefficients(name, [1.0], first_order(rng, 0.2))
    zero = second_order(rng, 0.05)
    return coefficients(name, zero if kind == 5 else [1.0, 10 ** rng.uniform(-1, 2)], second_order(rng, 0.1))


def random_controller(rng: Random, name: str) -> Block:
    """Proportional, proportional and integral, or a lead."""
    kind = rng.integers(0, 3)
    if kind == 0:
        return coefficients(name, [1.0], [1.0])
    if kind == 1:
        return coefficients(name, [1.0, 10 ** rng.uniform(-1, 2)], [1.0, 0.0])
    return coefficients(name, [1.0, 10 ** rng.uniform(-1, 1)], [1.0, 10 ** rng.uniform(1, 3)])


def random_cascade(rng: Random, *, frictionless: bool = False) -> Declarations:
    """Three loops, inner first; each plant pushes back on the one before it (like back-EMF), which no cut opens.

    ``frictionless``: the second plant integrates, nothing pushes it back, and the innermost controller integrates: its
    loop leaves a pole at 0.
    """
    blocks: list[Block] = []
    signals: dict[str, tuple[Term, ...]] = {}
    for k in (1, 2, 3):
        controller, plant = random_controller(rng, f"controller_{k}"), random_plant(rng, f"plant_{k}")
        if frictionless and k == 1:
            controller = coefficients("controller_1", [1.0, 10 ** rng.uniform(-1, 2)], [1.0, 0.0])
        if frictionless and k == 2:
            plant = coefficients("plant_2", [1.0], [1.0, 0.0])
        blocks += [controller, plant]
        sensed = term(-1, [], f"y{k}")
        if rng.random() < 0.3:
            blocks.append(coefficients(f"sensor_{k}", [rate := 10 ** rng.uniform(1, 3)], [1.0, rate]))
            sensed = term(-1, [f"sensor_{k}"], f"y{k}")
        command = () if k == 3 else (term(1, [], f"u{k + 1}"),)
        signals[f"e{k}"] = (*command, sensed)
        gain = 10 ** rng.uniform(-1, 2)
        signals[f"u{k}"] = (term(gain, [f"controller_{k}"], f"e{k}"),)
    for k in (1, 2, 3):
        drive = term(1, [], "u1" if k == 1 else f"y{k - 1}")
        push_back = -(10 ** rng.uniform(-2, 1))
        pushed = k == 1 if frictionless else k < 3 and rng.random() < 0.7
        inside = (drive, term(push_back, [], f"y{k + 1}")) if pushed else (drive,)
        signals[f"y{k}"] = (term(10 ** rng.uniform(-1, 1), [f"plant_{k}"], inside),)
    loops = [loop(f"loop_{k}", f"e{k}", float(rng.choice([1.0, 0.5, 3.0]))) for k in (1, 2, 3)]
    return declared(blocks, signals, loops)


# ---- general diagrams ------------------------------------------------------------------------------------------------


def dyadic(rng: Random, low: float, high: float) -> Fraction:
    """A random multiple of 1/16: exact as a double in every product that a block needs."""
    return Fraction(int(rng.integers(int(low * 16), int(high * 16) + 1)), 16)


def away_from_zero(rng: Random, high: float) -> Fraction:
    return dyadic(rng, 0.25, high) * int(rng.choice([-1, 1, 1]))


def random_block(rng: Random, name: str) -> Block:
    """Coefficients, zeros and poles, or a state space; now and then unstable, integrating or with a direct path."""
    kind = int(rng.integers(0, 4))
    if kind <= 1:
        order = int(rng.integers(1, 4))
        zeros = int(rng.integers(0, order + (rng.random() < 0.3)))
        numerator = (Fraction(int(rng.choice([-2, 1, 1, 4]))), *(away_from_zero(rng, 4) for _ in range(zeros)))
        denominator = (Fraction(1), *(dyadic(rng, 0.25, 4) for _ in range(order)))
        if rng.random() < 0.25:
            denominator = (*denominator[:-1], rng.choice([Fraction(0), -denominator[-1]]))
        return CoefficientBlock(name, numerator, denominator, Fraction(0), "")
    if kind == 2:
        poles = ((-dyadic(rng, -0.5, 3), Fraction(0)), (-dyadic(rng, -0.25, 2), dyadic(rng, 0.5, 6)))
        return RootBlock(name, ((away_from_zero(rng, 3), Fraction(0)),), poles, away_from_zero(rng, 4), Fraction(0), "")
    size = int(rng.integers(1, 3))
    A = tuple(tuple(dyadic(rng, -3, 2) for _ in range(size)) for _ in range(size))
    B, C = (tuple(away_from_zero(rng, 2) for _ in range(size)) for _ in range(2))
    return StateSpaceBlock(name, A, B, C, rng.choice([Fraction(0), Fraction(1, 2)]), Fraction(0), "")


def random_source(rng: Random, names: Sequence[str], depth: int = 0) -> Source:
    """A signal, or now and then a parenthesised sum of two."""
    if depth == 0 and rng.random() < 0.25:
        return tuple(term(away_from_zero(rng, 2), [], random_source(rng, names, 1)) for _ in range(2))
    return str(rng.choice(names))


def random_diagram(rng: Random) -> Declarations:
    """Two to six blocks in random equations with feedback everywhere, one used twice, and one to three cuts.

    A signal refers directly only to signals before it, so that no feedback is purely algebraic by its wiring.
    """
    blocks = [random_block(rng, f"block_{i}") for i in range(int(rng.integers(2, 7)))]
    names = [f"x{i}" for i in range(len(blocks) + int(rng.integers(0, 3)))]
    uses = [block.name for block in blocks]
    uses += [str(rng.choice(uses))] if rng.random() < 0.5 else []
    equations: dict[str, list[Term]] = {name: [] for name in names}
    for index, name in enumerate(names):
        for used in uses[index :: len(names)]:
            equations[name].append(term(away_from_zero(rng, 2), [used], random_source(rng, names)))
        if index and (rng.random() < 0.5 or not equations[name]):
            direct = names[max(0, index - 1 - int(rng.integers(0, 2)))]
            equations[name].append(term(away_from_zero(rng, 1.5), [], direct))
    cuts = rng.permutation(names)[: int(rng.integers(1, 4))]
    loops = [loop(f"loop_{i}", str(cut), float(rng.choice([1.0, 0.5, 2.0]))) for i, cut in enumerate(cuts)]
    return declared(blocks, {name: tuple(terms) for name, terms in equations.items()}, loops)
