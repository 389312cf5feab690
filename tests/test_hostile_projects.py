"""Project files made to do harm: refused or shown harmlessly, without much memory and without recursing out."""

from __future__ import annotations

import os
import tracemalloc
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from project_texts import REWINDER, changed, one_problem, problems_of, read_text

from encircle.engine.declarations import Declarations
from encircle.engine.errors import ProjectError
from encircle.engine.mistakes import MOST_MISTAKES
from encircle.engine.project_file import read_project
from encircle.engine.text import nearest_known, one_line, printable, quoted
from encircle.engine.toml_source import MOST_BYTES


def test_a_file_of_200_megabytes_is_refused_unread(tmp_path: Path) -> None:
    path = tmp_path / "rewinder.toml"
    with path.open("wb") as file:
        file.write(REWINDER.encode())
        file.truncate(200_000_000)
    tracemalloc.start()
    with pytest.raises(ProjectError, match=r"has 190\.7 MiB, and at most 1 MiB are read"):
        read_project(path)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 1_000_000


def test_a_measured_file_of_200_megabytes_is_refused_unread(tmp_path: Path) -> None:
    with (tmp_path / "huge.csv").open("wb") as file:
        file.truncate(200_000_000)
    keys = 'measured = "huge.csv"\nintegrators = 1\nunstable_poles = 0\n'
    problem = one_problem(changed(('formula = "1/(J*s)"\nJ = 1.8e-3\n', keys)), tmp_path)
    assert (problem.code, problem.where) == ("file-too-large", "blocks.rotor.measured")


@pytest.mark.parametrize(
    ("content", "code", "said"),
    [
        (b"\x7fELF\x02\x01\x01\x00\x00", "not-text", "line 1 holds a zero byte"),
        (REWINDER.encode("utf-16"), "not-text", "zero byte"),
        (REWINDER.replace("drive", "dr\xefve").encode("latin-1"), "not-utf-8", "line 2 holds the byte 0xef"),
        (b"", "format-missing", "`format` is missing"),
        (REWINDER.encode() + b"x = " + b"[" * 100_000, "too-deep", "nested too deep"),
        (REWINDER.encode() + b"x = " + b"{a=" * 100_000, "too-deep", "nested too deep"),
        (b"a" + b".a" * 400_000 + b" = 1\n", "too-long", "line 1: a key has more than 16 parts"),
        (b"\n[" + b"'a' . " * 100_000 + b"a]\n", "too-long", "line 2: a key has more than 16 parts"),
        (b"format = " + b"1" * 500_000, "too-long", "line 1: a number has more than 4300 digits"),
        (b"format = 0x" + b"f" * 500_000, "format-unknown", "beyond 1.8e308"),
        (b"format = 1979-02-31\n", "not-toml", "line 1"),
        (REWINDER.replace("1/(J*s)", "1/(\x1b[31mJ*s)").encode(), "not-toml", "line 30: this is no TOML: illegal"),
        (REWINDER.encode() + b"[signals", "not-toml", "last line"),
        (REWINDER.encode() + b"J == 3", "not-toml", "line 63"),
    ],
)
def test_what_is_no_project_at_all(content: bytes, code: str, said: str, tmp_path: Path) -> None:
    found = problems_of(content, tmp_path)[0]
    assert found.code == code
    assert said in found.message


def test_a_byte_order_mark_and_foreign_line_ends_are_fine(tmp_path: Path) -> None:
    found = read_text(("\ufeff" + REWINDER).replace("\n", "\r\n").encode(), tmp_path)
    assert found.blocks == read_text(REWINDER, tmp_path).blocks


@pytest.mark.parametrize(
    "formula",
    [
        "__import__('os').system('touch owned')",
        "exec(s)",
        "().__class__.__bases__",
        "9^9^9^9^9^9",
        "(" * 4000 + "s" + ")" * 4000,
        "(((((1+s)^64)^64)^64)^64)^64",
        "exp(exp(exp(exp(9))))*s",
        "s" + "+s" * 4999,
        "1" + "0" * 400,
        "s*(1e308" + "*1e308" * 100 + ")",
        r"s \u001b]0;owned\u0007",
        r"s\u202e+1",
    ],
)
def test_formulas_are_never_run_and_never_tower(formula: str, tmp_path: Path) -> None:
    problems = problems_of(changed(("1/(J*s)", formula)), tmp_path)
    assert any(problem.where == "blocks.rotor.formula" for problem in problems)
    assert not Path("owned").exists()


def test_texts_that_are_kept_are_printable(tmp_path: Path) -> None:
    evil = r"\u001b[2J\u202e[bold red]a\u0007\n\tb"
    text = changed(
        ('"Rewinder drive"', f'"{evil}"'),
        ("gains as on the drive, 12 March", evil),
        ('"1/(J*s)"', '"""1/\n(J*s)"""'),
    )
    found = read_text(text, tmp_path)
    assert found.title == r"\x1b[2J\u202e[bold red]a\x07 b"
    assert found.blocks["current_controller"].note == found.title
    assert getattr(found.blocks["rotor"], "text") == "1/ (J*s)"  # noqa: B009  (mypy: blocks are of several kinds)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("[blocks.rotor]", r'[blocks."ro\u001b[31mtor\u202e"]'),
        ('title = "Rewinder drive"', r'"\u001b]0;owned\u0007" = 1'),
        ("J = 1.8e-3", r'"J\u001b[2J" = 1.8e-3'),
        ("J = 1.8e-3", r'J = "\u001b[2J\u2066"'),
        ('inputs = ["speed_command"', r'inputs = ["speed_command", "\u001b[2J"'),
        ('"coil * (', r'"coil\u001b * ('),
        ("gain_margin_db = 6", r'"gain\u009b" = 6'),
        ('name = "speed"', r'name = "a\u0085b"'),
        ('cut = "speed_error"', r'cut = "\u001b"'),
        ('frequency_unit = "Hz"', r'frequency_unit = "\u001b[7m"'),
        ('name = "speed"', 'name = "' + "n" * 100_000 + '"'),
        ("[blocks.rotor]", "[blocks." + "n" * 100_000 + "]"),
    ],
)
def test_messages_repeat_names_harmlessly_and_shortly(old: str, new: str, tmp_path: Path) -> None:
    """``problems_of`` holds every message printable and short."""
    assert problems_of(changed((old, new)), tmp_path)


def test_reading_stops_after_many_mistakes(tmp_path: Path) -> None:
    many = "".join(f'x{number} = "y{number}"\n' for number in range(1500))
    problems = problems_of(changed(("[signals]\n", "[signals]\n" + many)), tmp_path)
    assert len(problems) == MOST_MISTAKES + 1
    assert "reading stops after 50 mistakes" in problems[-1].message


def test_tables_with_very_many_names_are_refused(tmp_path: Path) -> None:
    many = "".join(f"x{number} = 1\n" for number in range(30_000))
    assert "30002 entries" in one_problem(changed(("[parameters]\n", "[parameters]\n" + many)), tmp_path).message


@pytest.mark.parametrize(
    ("old", "new", "where"),
    [
        ("[3.4e-3, 0.82]", "[" + "1," * 1001 + "]", "blocks.coil.denominator"),
        ('inputs = ["speed_command"', 'inputs = ["speed_command"' + ',"a"' * 1000, "inputs"),
        ('[[loops]]\nname = "speed"', "[[loops]]\n" * 1000 + 'name = "speed"', "loops"),
    ],
)
def test_very_long_arrays_are_refused(old: str, new: str, where: str, tmp_path: Path) -> None:
    problems = problems_of(changed((old, new)), tmp_path)
    assert any(problem.code == "too-many" and problem.where == where for problem in problems)


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="this system has no named pipes")
def test_a_pipe_is_refused_without_waiting(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "rewinder.toml")
    with pytest.raises(ProjectError, match="no regular file"):
        read_project(tmp_path / "rewinder.toml")


def test_a_name_with_a_zero_byte_is_no_file() -> None:
    with pytest.raises(ProjectError, match=r"a\\x00b: no file can have this name"):
        read_project("a\0b")


def test_limits_are_generous() -> None:
    """A state space of order 100 with 17 digits a number takes about 250 kB."""
    assert MOST_BYTES >= 4 * 250_000


def attempt(content: bytes, folder: Path) -> Declarations | ProjectError:
    """What becomes of a file: declarations or a refusal, and nothing else."""
    try:
        return read_text(content, folder)
    except ProjectError as error:
        return error


VALUES = ["1", "-1", "0", "inf", "nan", "true", '"x"', "[]", "[1]", "[[1, 2]]", "{}", "{ a = 1 }", "2024-01-01", '"s"']


@settings(max_examples=150, deadline=None)
@given(line=st.integers(min_value=0, max_value=60), value=st.sampled_from(VALUES), drop=st.booleans())
def test_any_value_in_any_place_is_read_or_refused(
    line: int, value: str, drop: bool, tmp_path_factory: pytest.TempPathFactory
) -> None:
    lines = REWINDER.splitlines()
    key, equals, _ = lines[line].partition("=")
    lines[line] = "" if drop else f"{key}= {value}" if equals else f"{lines[line]}\n{value}"
    found = attempt("\n".join(lines).encode(), tmp_path_factory.mktemp("any"))
    if isinstance(found, ProjectError):
        assert all(problem.message.isprintable() and problem.code for problem in found.problems)


@settings(max_examples=150, deadline=None)
@given(
    content=st.binary(max_size=80) | st.text(max_size=80).map(lambda text: text.encode("utf-8", "surrogatepass")),
    place=st.integers(min_value=0, max_value=len(REWINDER)),
)
def test_any_bytes_anywhere_are_read_or_refused(
    content: bytes, place: int, tmp_path_factory: pytest.TempPathFactory
) -> None:
    whole = REWINDER.encode()
    found = attempt(whole[:place] + content + whole[place:], tmp_path_factory.mktemp("any"))
    if isinstance(found, ProjectError):
        assert all(problem.message.isprintable() for problem in found.problems)


# ---- text ------------------------------------------------------------------------------------------------------------


@given(st.text())
def test_printable_text_stays_and_the_rest_is_escaped(text: str) -> None:
    """Reference: escapes as Python itself writes and reads them (codec unicode_escape)."""
    shown = printable(text)
    assert shown.isprintable()
    if text.isprintable():
        assert shown == text
    elif "\\" not in text and all(ord(character) < 256 or not character.isprintable() for character in text):
        assert shown.encode("latin-1").decode("unicode_escape") == text
    assert one_line(text).isprintable()
    assert len(quoted(text)) <= 2 + 10 * 60


def test_quotes_cannot_be_closed_from_inside() -> None:
    assert quoted("a`b") == r"`a\x60b`"
    assert quoted("n" * 100) == "`" + "n" * 59 + "…`"


def test_the_nearest_known_name() -> None:
    assert nearest_known("sped", ["speed", "voltage"]) == "; the nearest known name is `speed`"
    assert nearest_known("hz", ["Hz", "rad/s"]) == "; the nearest known name is `Hz`"
    assert nearest_known("torque", ["speed", "voltage"]) == ""
    assert nearest_known("n" * 100, ["n" * 99]) == ""
