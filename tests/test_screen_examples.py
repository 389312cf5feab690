"""The main job on each example, driven by keys: see every loop, try a gain, see what it does outside, put it back."""

from __future__ import annotations

from pathlib import Path

import pytest
from screen_text import press, settled, shown_rows

from encircle.engine import open_project
from encircle.tui.app import EncircleApp

EXAMPLES = Path(__file__).parent.parent / "examples"


@pytest.mark.parametrize(
    ("file", "outcome", "seen"),
    [
        ("drive/drive.toml", "PASS", ["least room", "stable", "proved"]),
        (
            "bearing/bearing.toml",
            "PASS",
            ["as declared", "1 → 1", "1 → 0", "P 1  +  N −1  =  Z 0", "data", "clockwise"],
        ),
        ("tank/tank.toml", "FAIL", ["UNSTABLE", "1 → 1", "HIDDEN unstable pole: vessel", "MISSED"]),
        ("tank/tank_mended.toml", "PASS", ["stable", "no unstable pole"]),
    ],
)
async def test_every_loop_of_an_example_is_seen_with_its_reasons(file: str, outcome: str, seen: list[str]) -> None:
    project = open_project(EXAMPLES / file)
    async with EncircleApp(project).run_test(size=(200, 60)) as pilot:
        await settled(pilot)
        pages = ["\n".join(shown_rows(pilot.app))]  # type: ignore[arg-type]
        for name in project.loop_names[1:]:
            pages.append("\n".join(await press(pilot, "j")))
            assert f"Room: {name}" in pages[-1]
        assert outcome in pages[0].splitlines()[0]
        for text in seen:
            assert any(text in page for page in pages), text


async def test_the_loop_with_the_least_room_is_tried_to_its_limit_and_put_back() -> None:
    """In the drive example a third more speed gain breaks the 45° of the speed loop: its README says so."""
    async with EncircleApp(open_project(EXAMPLES / "drive/drive.toml")).run_test(size=(120, 40)) as pilot:
        before = await press(pilot, "j")
        assert any("met    phase" in row for row in before)
        rows = await press(pilot, "plus", "plus", "plus")
        text = "\n".join(rows)
        assert "TRIAL" in rows[0]
        assert "FAIL" in rows[0]
        assert "MISSED phase" in text
        assert "▼" in text
        assert "file 46.46°" in text
        outside = await press(pilot, "j")
        assert any("file" in row and ("▲" in row or "▼" in row) for row in outside)
        back = await press(pilot, "k", "r")
        assert "PASS" in back[0]
        assert [row for row in back if "met    phase" in row] == [row for row in before if "met    phase" in row]
