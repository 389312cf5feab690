"""Ratios that hold on any machine, measured in one run: ``python tests/benchmarks/run.py [--json]``.

Each figure is the median over seeded loops of a ratio of two processor times, each the least of several runs taken in
turn, so that other work on the machine disturbs neither.
"""

from __future__ import annotations

import asyncio
import json
import math
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from fractions import Fraction
from functools import partial
from pathlib import Path

from nested_loops import Cascade, one_loop, three_loops

from encircle.engine import open_project
from encircle.engine.counting import Counter
from encircle.engine.loop_system import LoopSystem, compile_system
from encircle.engine.project_file import read_project
from encircle.tui.app import EncircleApp
from encircle.tui.recount import picture_of
from encircle.tui.trial import Trial, applied

DRIVE_FILE = Path(__file__).parents[2] / "examples" / "drive" / "drive.toml"
SEEDS = range(12)
REPEATS = 15
STEPS = 12  # gain steps on the screen, of 1 dB

Work = Callable[[], object]


@dataclass(frozen=True, slots=True)
class Figure:
    """``ratio`` of ``work`` to ``reference``, both in milliseconds of processor time; ``goal`` where there is one."""

    name: str
    ratio: float
    work_ms: float
    reference_ms: float
    goal: float | None


def best(works: Sequence[Work], repeats: int) -> list[float]:
    """The least processor time of each work in seconds, child processes included, all of them run in turn."""
    least = [math.inf] * len(works)
    for _ in range(repeats):
        for k, work in enumerate(works):
            start = processor_time()
            work()
            least[k] = min(least[k], processor_time() - start)
    return least


def processor_time() -> float:
    """Seconds of this process and, once they have ended, of its children."""
    children = resource.getrusage(resource.RUSAGE_CHILDREN)
    return time.process_time() + children.ru_utime + children.ru_stime


def figure(name: str, pairs: Sequence[tuple[float, float]], goal: float | None) -> Figure:
    """The median ratio over pairs of durations."""
    work, reference = (1e3 * statistics.median(side) for side in zip(*pairs, strict=True))
    return Figure(name, statistics.median(a / b for a, b in pairs), work, reference, goal)


def counting_figures(name: str, make: Callable[[int], Cascade]) -> list[Figure]:
    """The certified count of all loops to the sampled one, from nothing and after a gain change."""
    cold, warm = [], []
    for seed in SEEDS:
        cascade = make(seed)
        fresh, changed, sampled = best(counting_works(cascade), REPEATS)
        cold.append((fresh, sampled))
        warm.append((changed, sampled))
    return [
        figure(f"{name}: certified count / sampled count, from nothing", cold, 6.0),
        figure(f"{name}: certified count / sampled count, after a gain change", warm, 2.5),
    ]


def counting_works(cascade: Cascade) -> list[Work]:
    """A count with a new memory, one with the innermost gain changed, and the sampled one with the same gains."""
    system = compiled(cascade)
    parts = [stage.part for stage in system.order.stages]
    gains = [Fraction(1)] * len(parts)
    kept = Counter(system)
    kept.count(parts, gains)
    changes = new_gains()
    return [
        lambda: Counter(system).count(parts, gains),
        lambda: kept.count(parts, [next(changes), *gains[1:]]),
        lambda: cascade.sampled_counts([1.0] * len(parts)),
    ]


def new_gains() -> Iterator[Fraction]:
    """Gains near 1, none twice, so that nothing is answered from memory."""
    k = 0
    while True:
        k += 1
        yield Fraction(1 + 0.4 * ((k * 0.618034) % 1.0))


def compiled(cascade: Cascade) -> LoopSystem:
    """The cascade through a project file, as users' loops come."""
    with tempfile.TemporaryDirectory() as folder:
        file = Path(folder) / "loops.toml"
        file.write_text(cascade.project_file(), encoding="utf-8")
        return compile_system(read_project(file))


def disagreements() -> int:
    """How many of the benchmark's loops the sampled count gets wrong."""
    wrong = 0
    for cascade in [*map(one_loop, SEEDS), *map(three_loops, SEEDS)]:
        system = compiled(cascade)
        gains = [Fraction(1)] * len(cascade.loops)
        proved = Counter(system).count([stage.part for stage in system.order.stages], gains)
        sampled = cascade.sampled_counts([1.0] * len(gains))
        wrong += sum(count.unstable != guess for count, guess in zip(proved, sampled, strict=True))
    return wrong


def process_figure() -> Figure:
    """``encircle check`` of the drive example to importing numpy, as whole processes with their bytecode at hand."""
    script = Path(sys.executable).with_name("encircle")
    command = [str(script)] if script.exists() else [sys.executable, "-m", "encircle.tui.command_line"]
    with tempfile.TemporaryDirectory() as bytecode:
        environment = os.environ | {"PYTHONPYCACHEPREFIX": bytecode}
        environment.pop("PYTHONDONTWRITEBYTECODE", None)
        works = [
            partial(silently, [*command, "check", str(DRIVE_FILE)], environment),
            partial(silently, [sys.executable, "-c", "import numpy"], environment),
        ]
        best(works, 1)  # writes the bytecode, as an installation does
        check, numpy = best(works, REPEATS)
    return figure("encircle check of the drive example / python -c 'import numpy'", [(check, numpy)], 3.0)


def silently(command: Sequence[str], environment: Mapping[str, str]) -> None:
    """Run a process to its good end."""
    subprocess.run(command, stdout=subprocess.DEVNULL, check=True, env=environment)


async def gain_step_figure() -> Figure:
    """One gain step of the innermost loop on a 120x40 screen to the same step without drawing."""
    project = open_project(DRIVE_FILE)
    app = EncircleApp(project)
    drawn, computed = [], []
    async with app.run_test(size=(120, 40)) as pilot:
        await pilot.pause(1.0)
        name = project.loop_names[0]
        for step in range(1, STEPS + 1):
            start = processor_time()
            app.action_act("gain_down")
            await pilot.pause()
            middle = processor_time()
            other = Trial().typed(name, 1.0, 10 ** (-step / 20) * 1.0001)  # as near as can be, yet not in memory
            picture_of(project, applied(project, other), 0, lambda: False)
            computed.append(processor_time() - middle)
            drawn.append(middle - start)
    pairs = list(zip(drawn, computed, strict=True))
    return figure("one gain step, every panel redrawn / the same step without drawing", pairs, None)


def main() -> int:
    """Print the table, or the JSON object; 1 where a goal is missed."""
    figures = [
        *counting_figures("one loop", one_loop),
        *counting_figures("three nested loops", three_loops),
        process_figure(),
        asyncio.run(gain_step_figure()),
    ]
    missed = [entry for entry in figures if entry.goal is not None and entry.ratio > entry.goal]
    wrong = disagreements()
    if "--json" in sys.argv[1:]:
        json.dump(
            {"figures": [asdict(entry) for entry in figures], "sampled_counts_wrong": wrong}, sys.stdout, indent=2
        )
        print()
    else:
        for entry in figures:
            goal = "" if entry.goal is None else f"  goal {entry.goal:g}{'  MISSED' if entry in missed else ''}"
            print(f"{entry.ratio:6.2f}  {entry.work_ms:8.2f} ms /{entry.reference_ms:8.2f} ms  {entry.name}{goal}")
        print(f"the sampled count was wrong for {wrong} of {4 * len(SEEDS)} loops")
    return 1 if missed else 0


if __name__ == "__main__":
    raise SystemExit(main())
