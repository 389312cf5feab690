"""What was found is kept, but never without bound."""

from __future__ import annotations

from pathlib import Path

from encircle.engine import open_project
from encircle.engine.memory import Memory

DRIVE = Path(__file__).parents[1] / "examples" / "drive" / "drive.toml"


def test_the_one_not_used_for_longest_goes_first() -> None:
    memory: Memory[str, int] = Memory(2)
    memory["a"], memory["b"] = 1, 2
    assert memory["a"] == 1  # now b is the older one
    memory["c"] = 3
    assert "b" not in memory
    assert [memory[key] for key in "ac"] == [1, 3]


def test_remembered_values_are_found_once() -> None:
    memory: Memory[str, list[int]] = Memory(3)
    calls: list[int] = []

    def find() -> list[int]:
        calls.append(1)
        return calls

    assert memory.remember("key", find) is memory.remember("key", find)
    assert len(calls) == 1


def test_inner_loops_keep_their_result_when_an_outer_gain_changes() -> None:
    project = open_project(DRIVE)
    inner, _, outer = project.loop_names
    changed = project.with_gain(outer, 2.0)
    assert changed.loop(inner) is project.loop(inner)
    assert changed.loop(outer) is not project.loop(outer)
    assert changed.with_gain(outer, 1.0).loop(outer) is project.loop(outer)
