"""Seeded loops for the benchmark: as project files for encircle, and as plain numbers for the sampled count."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np

POINTS = 2000
GRID = 1j * np.geomspace(1e-3, 1e5, POINTS)


@dataclass(frozen=True, slots=True)
class Block:
    """numerator(s)/denominator(s) * exp(-dead_time s), descending powers."""

    numerator: tuple[float, ...]
    denominator: tuple[float, ...]
    dead_time: float = 0.0

    def response(self, s: np.ndarray) -> np.ndarray:
        """At s, shape (n,)."""
        value = np.polyval(self.numerator, s) / np.polyval(self.denominator, s)
        return value * np.exp(-self.dead_time * s) if self.dead_time else value


@dataclass(frozen=True, slots=True)
class Cascade:
    """``loops[k]``: the blocks that loop k adds; each loop's command is the error of the next one outside."""

    loops: tuple[tuple[Block, ...], ...]

    def project_file(self) -> str:
        """The text of a project file."""
        tables, signals, closing = [], [], []
        for k, blocks in enumerate(self.loops):
            names = [f"block_{k}_{i}" for i in range(len(blocks))]
            tables += [_table(name, block) for name, block in zip(names, blocks, strict=True)]
            source = f"y_{k - 1}" if k else "e_0"
            command = f"e_{k + 1}" if k + 1 < len(self.loops) else "command"
            signals += [f'e_{k} = "{command} - y_{k}"', f'y_{k} = "{" * ".join(names)} * {source}"']
            closing.append(f'[[loops]]\nname = "loop_{k}"\ncut = "e_{k}"\n')
        head = 'format = 1\nfrequency_unit = "rad/s"\ninputs = ["command"]\n'
        return "\n".join([head, *tables, "[signals]", *signals, "", *closing])

    def sampled_counts(self, gains: Sequence[float]) -> list[int]:
        """Z of every loop by unwrapping 1 + L over a logarithmic grid of ``POINTS`` frequencies: plain, and no proof.

        What does not depend on the grid (unstable poles of the blocks, integrators) is not timed: it is looked up.
        """
        inside: np.ndarray | float = 1.0
        unstable, counts = 0, []
        for gain, blocks in zip(gains, self.loops, strict=True):
            L = gain * inside
            for block in blocks:
                L = L * block.response(GRID)
            turn = np.unwrap(np.angle(1 + L))
            poles, integrators = _poles(blocks)
            unstable += poles
            windings = round(-(turn[-1] - turn[0]) / np.pi + integrators / 2)  # the arc round 0 turns L by -pi/2 each
            unstable += windings
            counts.append(unstable)
            inside = L / (1 + L)
        return counts


@cache
def _poles(blocks: tuple[Block, ...]) -> tuple[int, int]:
    """Poles right of the axis, and at 0."""
    roots = np.concatenate([np.roots(block.denominator) for block in blocks])
    return int((roots.real > 0).sum()), int((roots == 0).sum())


def one_loop(seed: int) -> Cascade:
    """Controller, amplifier with dead time, plant of order 5 to 9 with a resonance, sometimes unstable."""
    rng = np.random.default_rng(seed)
    plant = [_lag(rng) for _ in range(int(rng.integers(2, 5)))]
    if seed % 3 == 0:
        plant.append(Block((1.0,), (1.0, -float(rng.uniform(0.2, 2.0)))))
    return Cascade((_tuned((_controller(rng), _amplifier(rng), _resonance(rng), *plant), 10.0),))


def three_loops(seed: int) -> Cascade:
    """Current, speed and position of something: three loops a factor of about ten apart, order 11 to 14."""
    rng = np.random.default_rng(1000 + seed)
    inner = _tuned((_controller(rng), _amplifier(rng), _lag(rng, 50.0), _lag(rng, 500.0)), 1000.0)
    middle = _tuned((_controller(rng), _resonance(rng), _lag(rng, 300.0), Block((1.0,), (0.1, 0.0))), 100.0)
    outer = _tuned((Block((1.0,), (1.0, 0.0)), _lag(rng, 200.0), _lag(rng, 400.0)), 10.0)
    return Cascade((inner, middle, outer))


def _table(name: str, block: Block) -> str:
    lines = [f"[blocks.{name}]", f"numerator = {list(block.numerator)}", f"denominator = {list(block.denominator)}"]
    return "\n".join([*lines, *([f"dead_time = {block.dead_time}"] if block.dead_time else []), ""])


def _controller(rng: np.random.Generator) -> Block:
    return Block((1.0, float(rng.uniform(0.5, 3.0))), (1.0, 0.0))


def _amplifier(rng: np.random.Generator) -> Block:
    return Block((1.0,), (float(rng.uniform(1e-5, 1e-4)), 1.0), float(rng.uniform(1e-5, 2e-4)))


def _lag(rng: np.random.Generator, corner: float = 30.0) -> Block:
    return Block((1.0,), (1 / float(corner * rng.uniform(0.5, 2.0)), 1.0))


def _resonance(rng: np.random.Generator) -> Block:
    pole, zero = float(rng.uniform(80, 300)), float(rng.uniform(80, 300))
    damping = float(rng.uniform(0.01, 0.1))
    return Block((1 / zero**2, 2 * damping / zero, 1.0), (1 / pole**2, 2 * damping / pole, 1.0))


def _tuned(blocks: tuple[Block, ...], crossover: float) -> tuple[Block, ...]:
    """The first block's gain set so that |L| is 1 near ``crossover``, rad/s."""
    s = np.array([1j * crossover])
    size = float(np.abs(np.prod([block.response(s)[0] for block in blocks])))
    first = Block(tuple(value / size for value in blocks[0].numerator), blocks[0].denominator, blocks[0].dead_time)
    return (first, *blocks[1:])
