"""The registry of actions, the layout, the sheet and the recounter: the machinery under the screen."""

from __future__ import annotations

import os
import subprocess
import sys
import threading
from collections import Counter
from collections.abc import Callable
from concurrent.futures import CancelledError
from typing import cast

import pytest
from fake_project import FakeProject
from hypothesis import given
from hypothesis import strategies as st

from encircle.tui import terminal_session
from encircle.tui.actions import ACTIONS, Group, footer_entries, help_entries, key_name
from encircle.tui.app import EncircleApp
from encircle.tui.palette import colour_wanted, palette
from encircle.tui.picture import Picture
from encircle.tui.recount import Recounter
from encircle.tui.roles import Role
from encircle.tui.screen_layout import arrange
from encircle.tui.sheet import Ink, Sheet, row_text, row_width, window
from encircle.tui.view import STEPS, Panel, View, choose_panel, toggle_full


def test_no_key_is_bound_twice_and_every_action_is_handled() -> None:
    keys = Counter(key for action in ACTIONS for key in action.keys)
    assert not [key for key, count in keys.items() if count > 1]
    handlers = EncircleApp(FakeProject())._handlers
    assert {action.id for action in ACTIONS} == set(handlers)
    assert set(STEPS) <= set(handlers)


def test_no_key_that_terminals_confuse_changes_a_gain() -> None:
    """An arrow key whose bytes come apart reads as escape, [ and a capital A to D: none of these acts on data."""
    gains = {key for action in ACTIONS if action.group is Group.GAIN for key in action.keys}
    assert not gains & {"escape", "left_square_bracket", "A", "B", "C", "D"}


def test_help_and_footer_are_made_from_the_registry() -> None:
    shown = " ".join(keys for group in Group for keys, _ in help_entries(group)).split()
    for action in ACTIONS:
        for key in action.keys:
            assert set(key_name(key).split()) <= set(shown)
    assert ("+-", "gain") in footer_entries()
    assert ("?", "help") in footer_entries()


@given(st.integers(1, 300), st.integers(1, 100), st.integers(1, 15), st.sampled_from(list(Panel)), st.booleans())
def test_panels_never_overlap_nor_leave_the_screen(
    width: int, height: int, loops: int, panel: Panel, full: bool
) -> None:
    view = choose_panel(View(), panel)
    view = toggle_full(view) if full else view
    places = arrange(width, height, view, loops)
    cells = [
        (x, y)
        for place in places
        for x in (place.x, place.x + place.width - 1)
        for y in range(place.y, place.y + place.height)
    ]
    assert all(place.width > 0 and place.height > 0 for place in places)
    assert all(0 <= x < width and y >= 1 for x, y in cells)
    assert all(y < max(height - 2, 2) for _, y in cells)
    for one in places:
        for other in places:
            apart = (
                one is other or one.x + one.width <= other.x or other.x + other.width <= one.x
                or one.y + one.height <= other.y or other.y + other.height <= one.y
            )  # fmt: skip
            assert apart
    assert view.panel in {place.panel for place in places}


@given(st.text(max_size=60), st.integers(1, 40), st.booleans())
def test_rows_are_exactly_as_wide_as_asked_and_harmless(text: str, width: int, ascii_only: bool) -> None:
    sheet = Sheet(width, ascii_only=ascii_only)
    sheet.row(text, (text, Ink.BAD))
    sheet.split_row([text], [text[:5]])
    sheet.heading("1", text, chosen=True)
    sheet.paragraph(text, indent=0)
    sheet.table([[(text, Ink.PLAIN), ("x", Ink.PLAIN)]], "lr", optional=(1,))
    for row in sheet.rows:
        assert row_width(row) == width
        assert all(character.isprintable() for character in row_text(row))
        if ascii_only:
            assert row_text(row).isascii()


def test_wide_characters_are_cut_by_cells_not_by_letters() -> None:
    sheet = Sheet(9)
    sheet.row("漢字漢字漢字")
    assert row_text(sheet.rows[0]) == "漢字漢字…"


def test_markup_is_text() -> None:
    sheet = Sheet(30)
    sheet.row("[bold red]x[/] $primary")
    assert row_text(sheet.rows[0]).rstrip() == "[bold red]x[/] $primary"


def test_paragraphs_break_between_words() -> None:
    sheet = Sheet(20)
    sheet.paragraph("one two three four five", hanging=3, mark=("!", Ink.DOUBT))
    assert [row_text(row).rstrip() for row in sheet.rows] == [" ! one two three", "   four five"]


def test_a_window_keeps_the_heading_and_says_what_is_left_out() -> None:
    sheet = Sheet(30)
    for number in range(11):
        sheet.row(f"row {number}")
    shown = [row_text(row).strip() for row in window(sheet.rows, 5, more_key="space")]
    assert shown == ["row 0", "row 1", "row 2", "row 3", "7 more rows: space"]
    shown = [row_text(row).strip() for row in window(sheet.rows, 5, 99, more_key="space")]
    assert shown[0] == "row 0"
    assert shown[-1] == "row 10"


def test_every_ink_and_role_has_a_style_and_only_the_sixteen_colours() -> None:
    for colour in (True, False):
        styles = palette(colour=colour)
        assert set(styles) == {*Ink, *Role}
        for style in styles.values():
            assert style.bgcolor is None
            assert style.color is None or (colour and (style.color.number or 0) < 16)
    assert palette(colour=False)[Ink.ALARM].reverse
    assert not colour_wanted({"NO_COLOR": "1"})
    assert colour_wanted({"NO_COLOR": ""})


def test_what_must_not_be_confused_differs_without_colour() -> None:
    styles = palette(colour=False)
    assert len({str(styles[ink]) for ink in (Ink.GOOD, Ink.ALARM, Ink.DOUBT)}) == 3
    assert str(styles[Role.CURVE]) != str(styles[Role.CURVE_BEFORE])
    assert str(styles[Role.CURVE]) != str(styles[Role.MIRROR])


class _Stream:
    def __init__(self, tty: bool, encoding: str = "utf-8") -> None:
        self.encoding = encoding
        self._tty = tty

    def isatty(self) -> bool:
        return self._tty


@pytest.mark.parametrize(
    ("keyboard", "display", "term", "word"),
    [
        (False, True, "xterm", "input"),
        (True, False, "xterm", "error"),
        (True, True, "dumb", "TERM"),
        (True, True, "", "TERM"),
    ],
)
def test_where_no_screen_can_be_shown_a_sentence_says_why(keyboard: bool, display: bool, term: str, word: str) -> None:
    reason = terminal_session.why_no_screen(_Stream(keyboard), _Stream(display), {"TERM": term})  # type: ignore[arg-type]
    assert reason is not None
    assert word in reason
    assert terminal_session.why_no_screen(_Stream(True), _Stream(True), {"TERM": "vt100"}) is None  # type: ignore[arg-type]


def test_the_encoding_of_the_terminal_decides_on_plain_ascii() -> None:
    assert not terminal_session.ascii_only(_Stream(True, "UTF-8"))  # type: ignore[arg-type]
    assert terminal_session.ascii_only(_Stream(True, "iso-8859-1"))  # type: ignore[arg-type]
    assert terminal_session.ascii_only(None)


def test_settings_of_the_user_are_left_alone() -> None:
    environment = {"SSH_TTY": "/dev/pts/3", "TEXTUAL_FPS": "10"}
    terminal_session.prepare(environment)
    assert environment["TEXTUAL_FPS"] == "10"
    assert environment["ESCDELAY"] == "250"
    local: dict[str, str] = {}
    terminal_session.prepare(local)
    assert "ESCDELAY" not in local


def test_textual_reads_the_settings_made_for_it() -> None:
    asked = "import encircle.tui.app, textual.constants as c; print(c.ESCAPE_DELAY, c.MAX_FPS)"
    environment = {**os.environ, "SSH_TTY": "/dev/pts/3"}
    told = subprocess.run([sys.executable, "-c", asked], env=environment, capture_output=True, text=True, check=True)
    assert told.stdout.split() == ["0.25", "240"]


def _picture() -> Picture:
    return cast(Picture, object())


def test_a_newer_request_replaces_one_that_waits_and_is_seen_by_one_that_runs() -> None:
    recounter = Recounter()
    started, gate = threading.Event(), threading.Event()
    seen: list[bool] = []
    result = _picture()

    def first(superseded: Callable[[], bool]) -> Picture:
        started.set()
        assert gate.wait(10)
        seen.append(superseded())
        return result

    running = recounter.request(first)
    assert started.wait(10)
    waiting = recounter.request(lambda _: result)
    newest = recounter.request(lambda superseded: seen.append(superseded()) or result)  # type: ignore[func-returns-value]
    gate.set()
    assert newest.result(10) is result
    assert running.result(10) is result
    with pytest.raises(CancelledError):
        waiting.result(10)
    assert seen == [True, False]
    recounter.close()


def test_a_failure_travels_to_whoever_asked_and_the_thread_goes_on() -> None:
    recounter = Recounter()

    def failing(_: Callable[[], bool]) -> Picture:
        raise ArithmeticError("spent")

    with pytest.raises(ArithmeticError, match="spent"):
        recounter.request(failing).result(10)
    result = _picture()
    assert recounter.request(lambda _: result).result(10) is result
    recounter.close()
