"""Reads a project file: TOML in, validated declarations out, every mistake found in one reading.

What can be told from syntax and names is told here; what needs algebra (recognising formulas, algebraic loops,
feedback that reaches no cut) comes later.
"""

from __future__ import annotations

import os
from collections.abc import Collection, Iterable, Mapping, Sequence
from fractions import Fraction
from pathlib import Path
from typing import Final, cast

from encircle.engine.block_declarations import Surroundings, read_block
from encircle.engine.checked_table import CheckedTable, described, key_shown
from encircle.engine.declarations import Block, Declarations, FormulaBlock, FrequencyUnit, MeasuredBlock, Term
from encircle.engine.errors import Problem, ProjectError
from encircle.engine.loop_declarations import read_limits, read_loops
from encircle.engine.mistakes import Mistakes, Place
from encircle.engine.names import NamedThing, complaint_about, repeated, twice
from encircle.engine.signal_equation import Vocabulary, names_in, parse_equation
from encircle.engine.text import listed, nearest_known, one_line, printable, quoted
from encircle.engine.tokens import FormulaError
from encircle.engine.toml_source import Source, read_source

FORMAT: Final = 1
FREQUENCY_UNITS: Final = ("Hz", "rad/s")
_MOST_NAMES: Final = 2000
_KEYS: Final = (
    "format",
    "title",
    "frequency_unit",
    "inputs",
    "band",
    "parameters",
    "blocks",
    "signals",
    "limits",
    "loops",
)
_TABLES: Final = {"blocks": "a block", "signals": "a signal", "parameters": "a shared parameter"}


def read_project(path: str | os.PathLike[str]) -> Declarations:
    """The declarations in the project file at ``path``.

    Raises ProjectError with every mistake found, each one sentence that names file, table and key.
    """
    shown = printable(os.fspath(path))
    if "\0" in os.fspath(path):
        raise ProjectError(Problem("no-such-file", "", f"{shown}: no file can have this name"))
    source = read_source(Path(path), shown)
    root = CheckedTable(Place(), source.tables, Mistakes(shown))
    _check_format(root)
    declarations = _read(root, source, shown, Path(path).parent)
    root.mistakes.raise_errors()
    return declarations


def _check_format(root: CheckedTable) -> None:
    """Note a missing format; raise at once for another format, in which nothing else can be judged."""
    if not root.has("format"):
        root.error("format-missing", "format", f"is missing; write `format = {FORMAT}` on the first line")
        return
    value = root.content["format"]
    if isinstance(value, bool) or value != FORMAT or not isinstance(value, int):
        root.error("format-unknown", "format", f"is {described(value)}, and this program reads `format = {FORMAT}`")
        root.mistakes.raise_errors()


def _read(root: CheckedTable, source: Source, file: str, folder: Path) -> Declarations:
    root.refuse_unknown(_KEYS, "a project file")
    title = root.text("title") if root.has("title") else ""
    unit = root.choice("frequency_unit", FREQUENCY_UNITS) if root.has("frequency_unit") else "Hz"
    inputs = _inputs(root)
    tables = {key: _table_of_names(root, key) for key in _TABLES}
    named = _named_things(inputs, tables)
    ambiguous = _check_names(root, named)
    parameters = _parameters(tables["parameters"])
    blocks = _blocks(tables["blocks"], Surroundings(parameters, folder))
    signals = _signals(root, tables, inputs, parameters, ambiguous)
    limits_table = root.table("limits") if root.has("limits") else None
    limits = read_limits(limits_table) if limits_table else {}
    others = {thing.name: thing.kind for thing in named if thing.kind != "a signal"}
    loops = read_loops(root, tables["signals"].content if tables["signals"] else (), others, limits)
    band = _band(root)
    _warn_unused(root, tables, blocks, signals, parameters)
    _warn_measured_poles(root, blocks)
    return Declarations(
        file=file,
        sha256=source.sha256,
        title=one_line(title or ""),
        frequency_unit=cast(FrequencyUnit, unit or "Hz"),
        inputs=inputs,
        band=band,
        parameters=parameters,
        blocks=blocks,
        signals=signals,
        loops=loops,
        warnings=tuple(root.mistakes.warnings),
    )


def _inputs(root: CheckedTable) -> tuple[str, ...]:
    values = root.array("inputs") if root.has("inputs") else None
    texts = [value for value in values or () if isinstance(value, str)]
    for place, value in enumerate(values or (), 1):
        if not isinstance(value, str):
            root.error("not-a-text", "inputs", f"entry {place} must be a name in quotes, not {described(value)}")
    return tuple(texts)


def _table_of_names(root: CheckedTable, key: str) -> CheckedTable | None:
    table = root.table(key) if root.has(key) else None
    if table and len(table.content) > _MOST_NAMES:
        table.table_error("too-many", f"{len(table.content)} entries stand here, and {_MOST_NAMES} are read")
        table.mistakes.raise_errors()
    return table


def _named_things(inputs: Iterable[str], tables: Mapping[str, CheckedTable | None]) -> list[NamedThing]:
    """Everything in the one namespace, in a fixed order."""
    named = [NamedThing(name, "an input", "inputs") for name in inputs]
    for key, kind in _TABLES.items():
        table = tables[key]
        named += [NamedThing(name, kind, f"{key}.{key_shown(name)}") for name in (table.content if table else ())]
    return named


def _check_names(root: CheckedTable, named: Sequence[NamedThing]) -> set[str]:
    """Note names that cannot be names or are given twice; the latter are returned."""
    for thing in named:
        if complaint := complaint_about(thing.name):
            _name_error(root, "bad-name", thing, f"{quoted(thing.name)} {complaint}")
    pairs = repeated(named)
    for earlier, later in pairs:
        _name_error(root, "name-twice", later, twice(earlier, later))
    return {later.name for _, later in pairs}


def _name_error(root: CheckedTable, code: str, thing: NamedThing, sentence: str) -> None:
    table = thing.where.partition(".")[0]
    title = "`inputs`" if table == "inputs" else f"[{table}]"
    root.mistakes.error(code, thing.where, Place(table, title), sentence)


def _parameters(table: CheckedTable | None) -> dict[str, Fraction]:
    return {key: table.number_or_stand_in(key) for key in table.content} if table else {}


def _blocks(table: CheckedTable | None, around: Surroundings) -> dict[str, Block]:
    blocks: dict[str, Block] = {}
    for name in table.content if table else ():
        content = table.table(name) if table else None
        block = read_block(name, content, around) if content else None
        if block is not None:
            blocks[name] = block
    return blocks


def _signals(
    root: CheckedTable,
    tables: Mapping[str, CheckedTable | None],
    inputs: tuple[str, ...],
    parameters: Mapping[str, Fraction],
    ambiguous: Collection[str],
) -> dict[str, tuple[Term, ...]]:
    """The equations; those with names given twice, which are mistakes already, are left out."""
    table, blocks = tables["signals"], tables["blocks"]
    if table is None or not table.content:
        if table is not None or not root.has("signals"):
            root.error("no-signals", "signals", "is missing: write the diagram's equations under `[signals]`")
        return {}
    vocabulary = Vocabulary(
        sources=dict.fromkeys((*table.content, *inputs)),
        blocks=dict.fromkeys(blocks.content if blocks else ()),
        parameters=parameters,
    )
    equations = {name: _equation(table, name, vocabulary, ambiguous) for name in table.content}
    return {name: terms for name, terms in equations.items() if terms is not None}


def _equation(
    table: CheckedTable, name: str, vocabulary: Vocabulary, ambiguous: Collection[str]
) -> tuple[Term, ...] | None:
    text = table.text(name)
    if text is None:
        return None
    try:
        return None if ambiguous and not set(names_in(text)).isdisjoint(ambiguous) else parse_equation(text, vocabulary)
    except FormulaError as error:
        if error.code != "unknown-name" or not _unknown_names(table, name, text, vocabulary):
            at = f", character {error.position}" if error.position else ""
            table.error(error.code, name, f"cannot be used{at}: {error.message}")
        return None


def _unknown_names(table: CheckedTable, name: str, text: str, vocabulary: Vocabulary) -> bool:
    """Note every name in the equation that is defined nowhere; False where there is none but words of formulas."""
    unknown = [used for used in names_in(text) if not vocabulary.knows(used) and complaint_about(used) is None]
    known = [*vocabulary.sources, *vocabulary.blocks, *vocabulary.parameters]
    for used in unknown:
        table.error("unknown-name", name, f"uses {quoted(used)}, which is defined nowhere{nearest_known(used, known)}")
    return bool(unknown)


def _band(root: CheckedTable) -> tuple[float, float] | None:
    table = root.table("band") if root.has("band") else None
    if table is None:
        return None
    table.refuse_unknown(("from", "to"), "the band")
    if not table.require("from", "to"):
        return None
    lower, upper = table.positive("from"), table.positive("to")
    if lower is None or upper is None:
        return None
    if lower >= upper:
        table.table_error("band-order", "`from` must be below `to`")
    return lower, upper


def _warn_unused(
    root: CheckedTable,
    tables: Mapping[str, CheckedTable | None],
    blocks: Mapping[str, Block],
    signals: Mapping[str, tuple[Term, ...]],
    parameters: Mapping[str, Fraction],
) -> None:
    """Warn of blocks that no equation uses, and of shared parameters that nothing uses."""
    used: set[str] = set()
    for name in signals:
        text = tables["signals"].content[name] if tables["signals"] else ""
        used.update(names_in(text) if isinstance(text, str) else ())
    for name in blocks:
        if name not in used:
            sentence = f"{quoted(name)} is a block that no equation uses"
            root.mistakes.warn("unused-block", f"blocks.{name}", Place("blocks", "[blocks]"), sentence)
    for block in blocks.values():
        used.update(block.parameters if isinstance(block, FormulaBlock) else ())
    for name in parameters:
        if name not in used:
            sentence = f"{quoted(name)} is a shared parameter that nothing uses"
            root.mistakes.warn("unused-parameter", f"parameters.{name}", Place("parameters", "[parameters]"), sentence)


def _warn_measured_poles(root: CheckedTable, blocks: Mapping[str, Block]) -> None:
    """Warn where several measured blocks state poles on or right of the axis: of one device they would count twice."""
    stating = [
        name
        for name, block in blocks.items()
        if isinstance(block, MeasuredBlock) and (block.integrators > 0 or block.unstable_poles > 0)
    ]
    if len(stating) > 1:
        sentence = f"{listed(stating)} each state integrators or unstable poles; poles of one device would count twice"
        root.mistakes.warn("measured-poles-repeated", "blocks", Place("blocks", "[blocks]"), sentence)
