"""Renews what README shows of the program, screen and report: ``python tests/readme_picture.py``."""

from __future__ import annotations

import asyncio
import os
import subprocess
import sys
from pathlib import Path

from encircle.engine import open_project
from encircle.tui.app import EncircleApp

REPOSITORY = Path(__file__).parent.parent
REPORT_WIDTH = "96"
REPORT = ("check", "examples/tank/tank.toml", "--loop", "level")


async def screen(file: str, width: int, height: int, *keys: str) -> str:
    """The screen as plain text once ``keys`` have been pressed."""
    app = EncircleApp(open_project(REPOSITORY / file))
    async with app.run_test(size=(width, height)) as pilot:
        await pilot.pause(3.0)
        for key in keys:
            await pilot.press(key)
            await pilot.pause(1.0)
        lines = [
            "".join(segment.text for segment in strip).rstrip() for strip in app.screen._compositor.render_strips()
        ]
    return "\n".join(lines)


def report() -> str:
    """The printed report of the trap, at the width of README."""
    environment = os.environ | {"COLUMNS": REPORT_WIDTH, "PYTHONUTF8": "1"}
    environment.pop("LC_ALL", None)
    command = [sys.executable, "-m", "encircle.tui.command_line", *REPORT]
    finished = subprocess.run(command, cwd=REPOSITORY, env=environment, capture_output=True, text=True, check=False)
    return finished.stdout.rstrip("\n")


def replaced(text: str, mark: str, content: str) -> str:
    """README with new content between the two comments that bear the mark."""
    before, rest = text.split(f"<!-- {mark}: begin -->\n")
    _, after = rest.split(f"<!-- {mark}: end -->")
    return f"{before}<!-- {mark}: begin -->\n```text\n{content}\n```\n<!-- {mark}: end -->{after}"


def main() -> None:
    """Write README anew."""
    readme = REPOSITORY / "README.md"
    text = replaced(readme.read_text(encoding="utf-8"), "REPORT", report())
    picture = asyncio.run(screen("examples/drive/drive.toml", 120, 40, "down"))
    readme.write_text(replaced(text, "PICTURE OF THE SCREEN", picture), encoding="utf-8")


if __name__ == "__main__":
    main()
