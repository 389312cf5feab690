"""What stands on the screen, as plain rows of text, and how tests wait for it."""

from __future__ import annotations

from typing import Any

from textual.events import Key
from textual.pilot import Pilot

from encircle.tui.app import EncircleApp

_CHARACTERS = {"plus": "+", "minus": "-", "full_stop": ".", "comma": ",", "question_mark": "?"}
_NAMES = {character: name for name, character in _CHARACTERS.items()}


def shown_rows(app: EncircleApp) -> list[str]:
    """The composed screen, one string a row."""
    return ["".join(segment.text for segment in strip) for strip in app.screen._compositor.render_strips()]


def shown_text(app: EncircleApp) -> str:
    """The composed screen as one string."""
    return "\n".join(shown_rows(app))


async def settled(pilot: Pilot[Any]) -> None:
    """Until no count is under way and every message has been handled."""
    app = _app(pilot)
    await pilot.pause()
    for _ in range(500):
        if not app.counting:
            break
        await pilot.pause()
    assert not app.counting


async def press(pilot: Pilot[Any], *keys: str) -> list[str]:
    """Send keys as a terminal would, wait until all have had their effect, and read the screen."""
    app = _app(pilot)
    for key in keys:
        character = " " if key == "space" else key if len(key) == 1 else None
        app.post_message(Key(_NAMES.get(key, key), character or _CHARACTERS.get(key)))
    await settled(pilot)
    return shown_rows(app)


def _app(pilot: Pilot[Any]) -> EncircleApp:
    assert isinstance(pilot.app, EncircleApp)
    return pilot.app
