"""What README shows is what the program does: its project file, its script, its report, its figures."""

from __future__ import annotations

import contextlib
import io
import re
from pathlib import Path

import pytest
from readme_picture import report

from encircle.engine import ProjectError, open_project

REPOSITORY = Path(__file__).parent.parent
README = (REPOSITORY / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (REPOSITORY / "DEVELOPERS.md").read_text(encoding="utf-8")


def fenced(language: str, part: str) -> str:
    """The one fenced block of a language that holds ``part``."""
    found = [text for text in re.findall(rf"```{language}\n(.*?)```", README, re.DOTALL) if part in text]
    assert len(found) == 1
    return str(found[0])


def test_the_first_paragraph_and_then_exactly_two_commands() -> None:
    commands = re.findall(r"```sh\n(.*?)\n```", README, re.DOTALL)
    assert len(commands) == 2
    assert all(command.startswith("python3 -m venv .venv && ") and "\n" not in command for command in commands)
    assert commands[0].endswith(".venv/bin/encircle examples/drive/drive.toml")
    assert commands[1].endswith(".venv/bin/python -m pytest")
    assert README.index("proved on the whole contour") < README.index(commands[0])


def test_the_project_file_gives_the_figures_of_the_format(tmp_path: Path) -> None:
    """The figures are those of the worked example that fixes the project file format, to the six digits given there."""
    file = tmp_path / "rewinder.toml"
    file.write_text(fenced("toml", "Rewinder drive"), encoding="utf-8")
    result = open_project(file).check()
    assert result.result == "pass"
    assert result.uncut_feedback == (("coil", "rotor"),)
    current, speed = result.loops
    assert current.margins is not None
    assert current.margins.gain_increase is not None
    assert current.margins.phase is not None
    assert current.margins.gain_increase.factor == pytest.approx(6.29286, rel=1e-6)
    assert current.margins.phase.degrees == pytest.approx(71.2641, rel=1e-6)
    assert current.margins.modulus.value == pytest.approx(0.793289, rel=1e-6)
    assert speed.margins is not None
    assert speed.margins.delay is not None
    assert speed.margins.delay.seconds == pytest.approx(0.0149343, rel=4e-6)
    assert speed.margins.complementary_peak.value == pytest.approx(1.20444, rel=4e-6)


def test_the_measured_block_has_the_keys_of_the_format(tmp_path: Path) -> None:
    (tmp_path / "flexible_mode.csv").write_text("frequency_hz,real,imag\n1,1,0\n2,1,-0.1\n", encoding="utf-8")
    diagram = '\n[signals]\ne = "r - y"\ny = "bending*e"\n[[loops]]\nname = "one"\ncut = "e"\n'
    file = tmp_path / "project.toml"
    block = fenced("toml", "between_lines")
    file.write_text(f'format = 1\ninputs = ["r"]\n{block}{diagram}', encoding="utf-8")
    assert open_project(file).loop("one").evidence in ("data", "none")
    file.write_text(f'format = 1\ninputs = ["r"]\n{block.replace("roll_off", "roll")}{diagram}', encoding="utf-8")
    with pytest.raises(ProjectError, match="roll_off"):
        open_project(file)


def test_the_script_is_five_lines_and_runs(monkeypatch: pytest.MonkeyPatch) -> None:
    script = fenced("python", "open_project")
    assert len(script.splitlines()) == 5
    monkeypatch.chdir(REPOSITORY)
    printed = io.StringIO()
    with contextlib.redirect_stdout(printed):
        exec(compile(script, "README.md", "exec"), {})
    lines = printed.getvalue().splitlines()
    assert [line.split()[:3] for line in lines[:3]] == [
        ["current", "stable", "0"],
        ["speed", "stable", "0"],
        ["position", "stable", "0"],
    ]
    assert "phase_margin_deg" in lines[3]


def test_the_report_is_the_one_that_is_printed() -> None:
    assert report() + "\n" == fenced("text", "Buffer tank")


def test_the_tour_tells_the_figures_of_the_drive() -> None:
    project = open_project(REPOSITORY / "examples" / "drive" / "drive.toml")
    for decibels, told in ((0, "46.46"), (1, "44.38")):
        margins = project.with_gain("speed", 10 ** (decibels / 20)).loop("speed").margins
        assert margins is not None
        assert margins.phase is not None
        assert told in README
        assert 0 <= margins.phase.degrees - float(told) < 0.01
    crossovers = project.loop("speed").margins
    assert crossovers is not None
    assert [round(frequency) for frequency in crossovers.gain_crossovers][::2] == [36, 202]


def test_every_word_of_the_evidence_is_explained() -> None:
    assert all(f"**{word}**" in README for word in ("proved", "declared", "data", "undecided"))


@pytest.mark.parametrize("text", [README, DEVELOPERS], ids=["README", "DEVELOPERS"])
def test_files_and_links_that_are_named_exist(text: str) -> None:
    links = re.findall(r"\]\(([^)#]+)\)", text)
    paths = re.findall(r"`((?:examples|tests|engine|tui|\.ci)/[^`\s]*)`", text)
    assert links + paths
    assert all((REPOSITORY / path).exists() for path in links + paths)


def groups(title: str) -> dict[str, int]:
    """The modules of one table of the map, each with the number of its row."""
    table = DEVELOPERS[DEVELOPERS.index(f"| {title} | modules |") :].split("\n\n")[0]
    return {name: row for row, line in enumerate(table.splitlines()) for name in re.findall(r"`([a-z_]+)`", line)}


@pytest.mark.parametrize(("title", "folder"), [("engine", "engine"), ("terminal", "tui")])
def test_the_map_of_modules_is_complete_and_true(title: str, folder: str) -> None:
    rows = groups(title)
    files = {file.stem: file for file in (REPOSITORY / folder).glob("*.py") if file.stem != "__init__"}
    assert sorted(rows) == sorted(files)
    for name, file in files.items():
        used = re.findall(
            rf"^\s*from encircle\.{folder}\.([a-z_]+) import", file.read_text(encoding="utf-8"), re.MULTILINE
        )
        assert all(rows[other] <= rows[name] for other in used), f"{name} imports from a group below its own"
