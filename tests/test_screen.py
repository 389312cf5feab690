"""The screen driven by keys at three sizes, judged by the plain text that stands on it."""

from __future__ import annotations

import threading
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import pytest
from fake_project import LOOPS, FakeProject
from screen_text import press, settled, shown_rows, shown_text
from textual.pilot import Pilot

from encircle.engine.result import Result
from encircle.tui.actions import ACTIONS
from encircle.tui.app import EncircleApp
from encircle.tui.trial import Trial
from encircle.tui.trial_store import TrialStore

SIZES = [(80, 24), (120, 40), (200, 60)]
HEADINGS = {
    "1": "Loops, inside to outside",
    "2": "Room: current",
    "3": "Turns round −1: current",
    "4": "L of current, near −1",
    "5": "L of current over frequency",
    "6": "Notes",
}


@pytest.mark.parametrize("size", SIZES)
async def test_every_key_of_the_registry_acts_and_leaves_a_whole_screen(size: tuple[int, int]) -> None:
    app = EncircleApp(FakeProject())
    async with app.run_test(size=size) as pilot:
        await settled(pilot)
        for action in ACTIONS:
            if action.id in ("quit", "suspend"):
                continue
            for key in action.keys if size == (120, 40) else action.keys[:1]:
                rows = await press(pilot, key)
                assert len(rows) == size[1]
                assert all(len(row) == size[0] for row in rows)
                assert "Rewinder drive" in rows[0]
                if action.id == "type_gain":
                    await press(pilot, "escape")
                if action.id == "help":
                    await press(pilot, key)
    assert app.return_code is None


@pytest.mark.parametrize("size", SIZES)
async def test_every_panel_is_reached_with_one_key_and_fills_the_screen_with_two(size: tuple[int, int]) -> None:
    async with EncircleApp(FakeProject()).run_test(size=size) as pilot:
        await settled(pilot)
        for key, heading in HEADINGS.items():
            rows = await press(pilot, key)
            assert any(f"►{key} {heading}" in row for row in rows)
            rows = await press(pilot, "enter")
            assert rows[1].startswith(f"►{key} {heading}")
            assert sum("─" * 8 in row for row in rows) == 1
            rows = await press(pilot, "escape")
            assert any("1 Loops" in row for row in rows)


async def test_the_middle_size_shows_everything_at_once() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        text = shown_text(pilot.app)  # type: ignore[arg-type]
        for key, heading in HEADINGS.items():
            assert heading in text or key == "6"
        for figure in ("15.97 dB", "71.27°", "522.4 µs", "0.7932", "2267 Hz", "P 0  +  N 0  =  Z 0", "proved"):
            assert figure in text


async def test_stepping_outward_and_inward_shows_each_loop_and_stops_at_the_ends() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        for key, name in (("j", "speed"), ("down", "position"), ("j", "position"), ("k", "speed"), ("up", "current")):
            text = "\n".join(await press(pilot, key))
            assert f"Room: {name}" in text
            assert f"Turns round −1: {name}" in text
            assert f"L of {name} over frequency" in text


async def test_a_gain_change_recounts_the_loop_and_those_outside_and_shows_what_changed() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        before = await press(pilot, "j")
        speed_before = next(row for row in before if "3" in row[:4] and "position" in row)
        rows = await press(pilot, "plus", "plus", "full_stop")
        text = "\n".join(rows)
        assert "TRIAL" in rows[0]
        assert "+2.10 dB" in text
        assert "file dim" in text
        assert "file 69.68°" in text
        assert "gain 1.274, file 1" in text
        assert "position" in speed_before
        assert next(row for row in rows if row.startswith("► 2*"))
        rows = await press(pilot, "j")  # the loop outside has the inner gain in its margins
        assert "file dim" in "\n".join(rows)
        rows = await press(pilot, "k", "k")  # the loop inside has not
        assert "file dim" not in "\n".join(rows)
        rows = await press(pilot, "R")
        assert "TRIAL" not in rows[0]


async def test_steps_up_and_down_come_back_to_the_gain_of_the_file_exactly() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        start = shown_text(pilot.app)  # type: ignore[arg-type]
        await press(pilot, "plus", *(["comma"] * 10))
        assert shown_text(pilot.app) == start  # type: ignore[arg-type]


async def test_an_unstable_trial_is_unmistakable_without_colour() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        rows = await press(pilot, "g", "7", "enter")
        assert "FAIL" in rows[0]
        assert "unstable: current" in rows[0]
        loop = next(row for row in rows if row.startswith("► 1*"))
        assert "┬┬" in loop
        assert "UNSTABLE" in loop
        assert "0 → 2" in loop
        assert any("MISSED gain both" in row for row in rows)
        assert any("P 0  +  N +2  =  Z 2" in row for row in rows)


@pytest.mark.parametrize(
    ("typed", "gain"), [("2", "gain 2, file 1"), ("x1.5", "gain 1.500, file 1"), ("+6 dB", "gain 1.995, file 1")]
)
async def test_a_typed_gain_is_taken(typed: str, gain: str) -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await press(pilot, "j", "g")
        rows = await press(pilot, *typed.replace(" ", ""), "enter")
        assert gain.split(",")[0][:8] in "\n".join(rows)
        assert "file 1" in rows[-2]
        rows = await press(pilot, "r")
        assert "gain 1 " in rows[-2]


async def test_a_mistyped_gain_is_refused_with_a_sentence_and_changes_nothing() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        rows = await press(pilot, "g", "b", "a", "d", "enter")
        assert "no gain: type a value" in rows[-1]
        assert "TRIAL" not in rows[0]
        rows = await press(pilot, "g", "0", "enter")
        assert "above 0" in rows[-1]
        rows = await press(pilot, "j")
        assert "above 0" not in rows[-1]


async def test_keys_typed_into_the_entry_do_nothing_else() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        rows = await press(pilot, "g", "j", "f", "down", "tab", "pagedown", "question_mark", "escape")
        text = "\n".join(rows)
        assert "Room: current" in text
        assert "near −1" in text
        assert "Keys and terms" not in text


async def test_the_cursor_moves_along_both_plots_and_jumps_to_marks() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        readings = [rows[-2] for rows in [shown_rows(pilot.app)]]  # type: ignore[arg-type]
        for keys in (["right"], ["l"], ["L"], ["shift+right"]):
            readings.append((await press(pilot, *keys))[-2])
        frequencies = [_frequency(reading) for reading in readings]
        assert frequencies == sorted(set(frequencies))
        back = _frequency((await press(pilot, "h", "left", "H", "shift+left"))[-2])
        assert back == pytest.approx(frequencies[0], rel=0.02)
        assert _frequency((await press(pilot, "n"))[-2]) == pytest.approx(1319, rel=0.01)  # the modulus margin
        assert _frequency((await press(pilot, "n"))[-2]) == pytest.approx(2267, rel=0.01)  # the gain margin
        rows = await press(pilot, "n")
        assert "no marked frequency further up" in rows[-1]
        assert _frequency((await press(pilot, "b"))[-2]) == pytest.approx(1319, rel=0.01)


def _frequency(readout: str) -> float:
    return float(readout.split()[1])


async def test_switches_of_the_plots_change_what_is_drawn() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        seen = {shown_text(pilot.app)}  # type: ignore[arg-type]
        for key in ("m", "i", "o", "o", "w", "f", "p", "s", "t", "a"):
            seen.add("\n".join(await press(pilot, key)))
        assert len(seen) == 10  # in and out again is the only state seen twice
        text = "\n".join(await press(pilot))
        assert "|S|" in text
        assert "whole plane folded" in text


async def test_zooming_out_far_ends_with_the_whole_curve_and_in_comes_back() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        assert "whole curve" in "\n".join(await press(pilot, *(["o"] * 10)))
        assert "near −1" in "\n".join(await press(pilot, "i"))


async def test_help_names_every_key_and_fits_one_page_at_the_middle_size() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        rows = await press(pilot, "question_mark")
        assert "Keys and terms" in rows[1]
        assert "more rows" not in "\n".join(rows)
        rows = await press(pilot, "plus", "f1")  # no gain is changed unseen
        assert "TRIAL" not in rows[0]
        assert "Keys and terms" not in rows[1]


async def test_help_scrolls_where_it_does_not_fit() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(80, 24)) as pilot:
        rows = await press(pilot, "question_mark")
        assert "more rows: space" in rows[-3]
        rows = await press(pilot, *(["space"] * 9))
        assert "engineer decide" in "\n".join(rows)
        assert "more rows" not in "\n".join(rows)
        rows = await press(pilot, "up", "backspace", "pageup", "pageup", "pageup", "pageup", "pageup")
        assert "next loop outward" in "\n".join(rows)


async def test_the_screen_follows_resizing() -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        for width, height in [*SIZES, (61, 20), (40, 12), (12, 5), (250, 80)]:
            await pilot.resize_terminal(width, height)
            rows = await press(pilot)
            assert len(rows) == height
            assert all(len(row) == width for row in rows)
        assert "Notes" in "\n".join(rows)


async def test_quit_keys_leave_at_once() -> None:
    for key in ("q", "ctrl+c", "ctrl+q"):
        app = EncircleApp(FakeProject())
        async with app.run_test(size=(80, 24)) as pilot:
            await press(pilot, "g") if key != "q" else await settled(pilot)
            await pilot.press(key)
        assert app.return_code == 0
        assert app.return_value == 0


async def test_hostile_names_are_shown_harmlessly() -> None:
    hostile = "\x1b[31m[bold]x[/bold]\u202e\x07"
    names = (hostile, "[@click=app.quit]a[/]", "\x9b2J\u0000")
    project = FakeProject(
        title=f"title {hostile}\n", file="a\x1b]0;x\x07.toml", names=names, note=hostile, warning=hostile * 3,
        gains=dict.fromkeys(names, 1.0),
    )  # fmt: skip
    async with EncircleApp(project).run_test(size=(200, 60)) as pilot:
        rows = await press(pilot, "g", "escape", "plus")
        text = "".join(rows)
        assert all(character.isprintable() for character in text)
        assert "\\x1b[31m[bold]x[/bold]\\u202e" in text
        assert "[@click=app.quit]a[/]" in text
        await press(pilot, "j", "enter", "question_mark")


async def test_a_failed_count_is_told_and_the_last_good_picture_stays() -> None:
    async with EncircleApp(FakeProject(failing=True)).run_test(size=(120, 40)) as pilot:
        await settled(pilot)  # the file's own count comes first: a key would overtake it
        rows = await press(pilot, "plus")
        assert "COUNT FAILED" in rows[-1]
        assert "ArithmeticError" in rows[-1]
        assert "\\x1b[31m" in rows[-1]
        assert "71.27°" in "\n".join(rows)
        rows = await press(pilot, "right")
        assert "COUNT FAILED" in rows[-1]
        rows = await press(pilot, "r")
        assert "COUNT FAILED" not in "\n".join(rows)


class SlowProject(FakeProject):
    """Counts only when it is let."""

    gate = threading.Event()
    counted: list[float] = []  # noqa: RUF012  (shared on purpose: copies made by with_gain report here)

    def check(self, names: Sequence[str] | None = None) -> Result:
        if self.gains["current"] != 1:
            assert self.gate.wait(10)
            self.counted.append(self.gains["current"])
        return super().check(names)


async def test_while_a_long_count_runs_keys_are_answered_and_only_the_newest_is_shown() -> None:
    project = SlowProject()
    project.gate.clear()
    project.counted.clear()
    async with EncircleApp(project).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        for key in ("plus", "plus", "plus", "plus", "f"):
            await pilot.press(key)
        rows = shown_rows(pilot.app)  # type: ignore[arg-type]
        assert "counting" in rows[0]
        assert "folded" in "\n".join(rows)
        project.gate.set()
        rows = await press(pilot)
        assert "+4.00 dB" in "\n".join(rows)
        assert "counting" not in rows[0]
        assert len(project.counted) == 2  # the first, under way when the others came, and the newest


async def test_a_trial_outlives_the_screen_and_can_be_dropped(tmp_path: Path) -> None:
    store = TrialStore("rewinder.toml", "0" * 64, tmp_path)
    async with EncircleApp(FakeProject(), store=store).run_test(size=(120, 40)) as pilot:
        await press(pilot, "plus", "j", "minus")
    async with EncircleApp(FakeProject(), store=store).run_test(size=(120, 40)) as pilot:
        await settled(pilot)
        rows = shown_rows(pilot.app)  # type: ignore[arg-type]
        assert (
            "TRIAL gains of last time are in force again: current +1.00 dB, speed −1.00 dB. R forgets them" in rows[-1]
        )
        assert "TRIAL" in rows[0]
        rows = await press(pilot, "R")
        assert "TRIAL" not in rows[0]
        assert store.kept(tuple(LOOPS)) == Trial()


async def test_a_trial_that_cannot_be_kept_is_told(tmp_path: Path) -> None:
    (tmp_path / "trials").write_text("a file where the folder should be")
    store = TrialStore("rewinder.toml", "0" * 64, tmp_path)
    async with EncircleApp(FakeProject(), store=store).run_test(size=(120, 40)) as pilot:
        rows = await press(pilot, "plus")
        assert "cannot be kept" in rows[-1]


async def test_an_undecided_loop_says_where_and_why() -> None:
    async with EncircleApp(FakeProject(undecided=True)).run_test(size=(120, 40)) as pilot:
        text = "\n".join(await press(pilot, "j", "j"))
        assert "UNDECIDED 210.0 Hz to 225.0 Hz: lines are 2 Hz apart" in text
        assert "P 1  +  N ?  =  Z ?" in text
        assert "no margins: the count is undecided" in text


async def test_plain_ascii_where_nothing_else_can_be_shown() -> None:
    async with EncircleApp(FakeProject(title="Größe"), ascii_only=True).run_test(size=(120, 40)) as pilot:
        for keys in ([], ["plus"], ["question_mark"]):
            text = "".join(await press(pilot, *keys))
            assert text.isascii()


async def test_one_key_makes_one_frame(monkeypatch: pytest.MonkeyPatch) -> None:
    async with EncircleApp(FakeProject()).run_test(size=(120, 40)) as pilot:
        await press(pilot, "j")
        frames = _count_frames(pilot, monkeypatch)
        await press(pilot, "plus")
        assert frames == [1]


def _count_frames(pilot: Pilot[int], monkeypatch: pytest.MonkeyPatch) -> list[int]:
    """How often the app hands something to the terminal from now on."""
    frames = [0]
    display = pilot.app._display

    def counted(screen: object, renderable: object) -> None:
        frames[0] += renderable is not None
        display(screen, renderable)  # type: ignore[arg-type]

    monkeypatch.setattr(pilot.app, "_display", counted)
    return frames


def test_the_fake_project_replaces_gains() -> None:
    assert replace(FakeProject(), title="x").with_gain("speed", 2.0).gains["speed"] == 2.0
