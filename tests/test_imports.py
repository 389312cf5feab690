"""The walls of the house: which module may import which, and what the command line loads before it answers."""

from __future__ import annotations

import ast
import importlib.util
import json
import subprocess
import sys
from collections.abc import Iterator
from functools import cache
from graphlib import TopologicalSorter
from pathlib import Path

import pytest

DRIVE_FILE = Path(__file__).parent.parent / "examples" / "drive" / "drive.toml"
SCREEN_LIBRARIES = {"textual", "rich", "plotext"}
PACKAGES = ("encircle.engine", "encircle.tui")
# Modules of the command line that must not reach the screen.
REPORT_MODULES = (
    "arguments",
    "check_table",
    "command_line",
    "commands",
    "loop_report",
    "margin_table",
    "output",
    "plain_text",
    "result_json",
    "wording",
)


@cache
def modules(package: str) -> dict[str, ast.Module]:
    """Every module of a package by its full name, as a syntax tree."""
    spec = importlib.util.find_spec(package)
    assert spec is not None
    assert spec.submodule_search_locations is not None
    folder = Path(spec.submodule_search_locations[0])
    trees = {file.stem: ast.parse(file.read_text(encoding="utf-8")) for file in folder.glob("*.py")}
    assert len(trees) > 5
    return {package if stem == "__init__" else f"{package}.{stem}": tree for stem, tree in trees.items()}


def imported(tree: ast.AST) -> Iterator[str]:
    """Every module that a tree imports, inside functions too."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are written with the full name of the package"
            if node.module not in PACKAGES:  # `from encircle.engine import x` means the module x, not the package
                yield node.module or ""
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


def neighbours(package: str) -> dict[str, set[str]]:
    """For every module of a package, those of the same package that it imports."""
    known = modules(package)
    return {name: {other for other in imported(tree) if other in known} - {name} for name, tree in known.items()}


def top_level(name: str) -> str:
    return name.partition(".")[0]


@pytest.mark.parametrize("package", PACKAGES)
def test_imports_run_one_way(package: str) -> None:
    TopologicalSorter(neighbours(package)).prepare()  # raises CycleError, which names the circle


def test_no_module_of_the_engine_goes_through_its_face() -> None:
    known = modules("encircle.engine")
    inside = {name: tree for name, tree in known.items() if name != "encircle.engine"}
    used = {other for tree in inside.values() for other in imported(tree) if other.startswith("encircle.engine")}
    assert all(other in known or other.rpartition(".")[0] in known.keys() - {"encircle.engine"} for other in used)


@pytest.mark.parametrize("name", sorted(modules("encircle.engine")))
def test_the_engine_knows_nothing_of_screens_and_needs_little(name: str) -> None:
    used = set(imported(modules("encircle.engine")[name]))
    assert not any(other.startswith("encircle.tui") for other in used)
    outside = {top_level(other) for other in used} - set(sys.stdlib_module_names)
    assert outside <= {"encircle", "numpy", "scipy"}
    assert not {top_level(other) for other in used} & {"argparse", "curses", "logging", "getopt", "readline"}


def called(tree: ast.AST) -> set[str]:
    """The plain names that a tree calls."""
    return {node.func.id for node in ast.walk(tree) if isinstance(node, ast.Call) and isinstance(node.func, ast.Name)}


@pytest.mark.parametrize("package", PACKAGES)
def test_no_text_is_ever_run_as_a_program(package: str) -> None:
    for name, tree in modules(package).items():
        assert not called(tree) & {"eval", "exec", "compile", "__import__", "input", "breakpoint"}, name


def test_the_engine_prints_nothing() -> None:
    for name, tree in modules("encircle.engine").items():
        assert "print" not in called(tree), name
        assert "sys" not in set(imported(tree)) or not {"stdout", "stderr"} & attributes(tree), name


def attributes(tree: ast.AST) -> set[str]:
    return {node.attr for node in ast.walk(tree) if isinstance(node, ast.Attribute)}


def test_plotext_stands_behind_one_module_and_oracles_stand_in_tests_only() -> None:
    users: dict[str, set[str]] = {}
    for package in PACKAGES:
        for name, tree in modules(package).items():
            for other in map(top_level, imported(tree)):
                users.setdefault(other, set()).add(name)
    assert len(users.get("plotext", set())) == 1
    assert not users.keys() & {"flint", "mpmath", "hypothesis", "pytest", "pyte"}


@pytest.mark.parametrize("name", REPORT_MODULES)
def test_the_report_does_no_mathematics_and_draws_no_screen(name: str) -> None:
    tree = modules("encircle.tui")[f"encircle.tui.{name}"]
    outside = {top_level(other) for other in imported(tree)} - set(sys.stdlib_module_names)
    assert outside <= {"encircle"}


def loaded_after(statements: str) -> set[str]:
    """The modules in memory once a fresh interpreter has run the statements; their output is thrown away."""
    script = f"""
import io, json, sys
answer, sys.stdout = sys.stdout, io.StringIO()
{statements}
json.dump(sorted(sys.modules), answer)
"""
    finished = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True, timeout=120)
    return set(json.loads(finished.stdout))


def test_the_engine_alone_loads_no_screen() -> None:
    loaded = loaded_after("import encircle.engine; encircle.engine.open_project")
    assert "numpy" in loaded
    assert not loaded & (SCREEN_LIBRARIES | {"argparse", "encircle.tui"})


@pytest.mark.parametrize("form", ["", ', "--json"'])
def test_check_loads_numpy_and_little_else(form: str) -> None:
    loaded = loaded_after(
        "from encircle.tui.command_line import main\n"
        f'assert main(["check", {str(DRIVE_FILE)!r}{form}]) in (0, 1, 3), "no verdict was reached"'
    )
    assert {"numpy", "encircle.engine", "encircle.tui.command_line"} <= loaded
    assert not loaded & (SCREEN_LIBRARIES | {"argparse", "scipy", "importlib.metadata", "asyncio", "email", "http"})


def test_help_does_not_wait_for_numpy() -> None:
    loaded = loaded_after('from encircle.tui.command_line import main\nmain(["--help"])')
    assert not loaded & (SCREEN_LIBRARIES | {"numpy", "argparse"})


def test_the_entry_loads_nothing_before_it_listens_to_ctrl_c() -> None:
    started = loaded_after("")
    loaded = loaded_after("import encircle.tui.command_line")
    assert {name for name in loaded - started if not name.startswith("__editable__")} <= {
        "encircle",
        "encircle.tui",
        "encircle.tui.command_line",
        "__future__",
        "importlib.machinery",
        "importlib.util",
    }
