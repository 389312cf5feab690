"""The loops of a project file in closing order, with the limits that they must meet."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import Final

from encircle.engine.checked_table import CheckedTable
from encircle.engine.declarations import LoopDeclaration
from encircle.engine.mistakes import Place
from encircle.engine.text import nearest_known, quoted

LIMITS: Final = (
    "gain_margin_db",
    "gain_increase_db",
    "gain_decrease_db",
    "phase_margin_deg",
    "modulus_margin",
    "sensitivity_peak_db",
    "complementary_peak_db",
    "delay_margin_s",
    "crossover_min",
    "crossover_max",
)
_LOOP_KEYS: Final = ("name", "cut", "gain", "limits", "leaves_unstable", "leaves_on_axis")
_LONGEST_NAME = 80
_MOST_LEFT = 1000


def read_limits(table: CheckedTable) -> dict[str, float]:
    """The limits in a table, each a size above 0."""
    table.refuse_unknown(LIMITS, "limits")
    found = {key: table.positive(key) for key in table.content if key in LIMITS}
    return {key: value for key, value in found.items() if value is not None}


def read_loops(
    root: CheckedTable, signals: Collection[str], others: Mapping[str, str], shared: Mapping[str, float]
) -> tuple[LoopDeclaration, ...]:
    """The loops of the array ``loops``.

    ``others`` says of each name that is no signal what it is; ``shared`` holds the limits of every loop, which a
    loop's own replace key by key.
    """
    if isinstance(root.content.get("loops"), dict):
        root.error("not-an-array", "loops", "is an array of tables; write each loop as `[[loops]]` in double brackets")
        return ()
    values = root.array("loops") if root.has("loops") else []
    if values == []:
        root.error("no-loops", "loops", "is missing: write one `[[loops]]` with `name` and `cut` for each loop")
    tables = [_table(root, place, value) for place, value in enumerate(values or (), 1)]
    loops = [_loop(table, signals, others, shared) for table in tables if table is not None]
    found = tuple(loop for loop in loops if loop is not None)
    _refuse_repeats([table for table in tables if table is not None])
    return found


def _table(root: CheckedTable, place: int, value: object) -> CheckedTable | None:
    where = f"loops.{place}"
    if not isinstance(value, dict):
        root.mistakes.error("not-a-table", where, Place(where, f"[[loops]] number {place}"), "this is no table")
        return None
    name = value.get("name")
    called = f" ({quoted(name)})" if isinstance(name, str) else ""
    return CheckedTable(Place(where, f"[[loops]] number {place}{called}"), value, root.mistakes)


def _loop(
    table: CheckedTable, signals: Collection[str], others: Mapping[str, str], shared: Mapping[str, float]
) -> LoopDeclaration | None:
    table.refuse_unknown(_LOOP_KEYS, "a loop")
    stated = table.require("name", "cut")
    name = _name(table) if table.has("name") else None
    cut = _cut(table, signals, others) if table.has("cut") else None
    gain = table.positive("gain") if table.has("gain") else 1.0
    own = table.table("limits", f"{table.place.title}, limits") if table.has("limits") else None
    limits = {**shared, **(read_limits(own) if own else {})}
    left = [table.whole(key, 0, _MOST_LEFT) if table.has(key) else None for key in _LOOP_KEYS[-2:]]
    if not stated or name is None or cut is None or gain is None:
        return None
    return LoopDeclaration(name, cut, gain, limits, left[0], left[1])


def _name(table: CheckedTable) -> str | None:
    name = table.text("name")
    if name is None:
        return None
    if not name.strip() or not name.isprintable():
        table.error("bad-name", "name", f"is {quoted(name)}; a loop needs a name in printable characters")
        return None
    if len(name) > _LONGEST_NAME:
        table.error("bad-name", "name", f"has {len(name)} characters, and a loop's name may have {_LONGEST_NAME}")
        return None
    return name


def _cut(table: CheckedTable, signals: Collection[str], others: Mapping[str, str]) -> str | None:
    cut = table.text("cut")
    if cut is None or cut in signals:
        return cut
    if cut in others:
        table.error("cut-no-signal", "cut", f"is {quoted(cut)}, which is {others[cut]}; a loop is cut at a signal")
    else:
        near = nearest_known(cut, signals)
        table.error("unknown-name", "cut", f"is {quoted(cut)}, and no signal has that name{near}")
    return None


def _refuse_repeats(tables: Collection[CheckedTable]) -> None:
    for key, what in (("name", "the name"), ("cut", "the cut")):
        first: dict[str, CheckedTable] = {}
        for table in tables:
            value = table.content.get(key)
            if isinstance(value, str) and first.setdefault(value, table) is not table:
                earlier = first[value].place.title
                table.error(f"{key}-twice", key, f"is {quoted(value)}, {what} of {earlier} already")
