"""Trial gains: steps that come back exactly, typed values, and what is kept for the next start."""

from __future__ import annotations

import json
import os
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from encircle.tui.gain_entry import typed_gain
from encircle.tui.trial import Trial, TrialGain, applied
from encircle.tui.trial_store import TrialFileError, TrialStore, state_folder

NAMES = ("current", "speed")


@given(st.floats(1e-6, 1e6), st.lists(st.integers(-100, 100), max_size=30))
def test_steps_that_add_up_to_nothing_leave_nothing(filed: float, steps: list[int]) -> None:
    trial = Trial()
    for step in [*steps, -sum(steps)]:
        trial = trial.stepped("current", filed, step)
    assert trial == Trial()


def test_ten_fine_steps_are_one_coarse_step_of_one_decibel() -> None:
    trial = Trial()
    for _ in range(10):
        trial = trial.stepped("speed", 2.0, 1)
    assert trial == Trial().stepped("speed", 2.0, 10)
    assert trial.gain("speed", 2.0) == pytest.approx(2.0 * 10 ** (1 / 20), rel=1e-15)
    assert trial.gain("current", 3.0) == 3.0


def test_steps_stop_far_from_overflow() -> None:
    trial = Trial()
    for _ in range(1000):
        trial = trial.stepped("speed", 1.0, 10)
    assert trial.gain("speed", 1.0) == pytest.approx(1e12)


def test_a_typed_value_is_the_start_of_later_steps_and_the_file_s_value_ends_the_trial() -> None:
    trial = Trial().typed("speed", 1.0, 3.0).stepped("speed", 1.0, 10).stepped("speed", 1.0, -10)
    assert trial.gain("speed", 1.0) == 3.0
    assert trial.typed("speed", 1.0, 1.0) == Trial()
    assert trial.put_back("speed") == Trial()


def test_a_trial_is_applied_cut_by_cut() -> None:
    class Recorder:
        def __init__(self, gains: dict[str, float]) -> None:
            self.gains = gains

        def with_gain(self, name: str, gain: float) -> Recorder:
            return Recorder({**self.gains, name: gain})

    trial = Trial().typed("current", 1.0, 2.0).typed("speed", 1.0, 0.5)
    changed = applied(Recorder({"current": 1.0, "speed": 1.0}), trial)  # type: ignore[arg-type]
    assert changed.gains == {"current": 2.0, "speed": 0.5}


@pytest.mark.parametrize(
    ("text", "gain"),
    [
        ("1.5", 1.5), (" 2 ", 2.0), ("1,5", 1.5), (".5", 0.5), ("1e-3", 1e-3), ("x1.2", 2.4), ("*1.2", 2.4),
        ("×1.2", 2.4), ("/4", 0.5), ("+20 dB", 20.0), ("+20", 20.0), ("-20dB", 0.2), ("−20 dB", 0.2), ("+0", 2.0),
    ],
)  # fmt: skip
def test_gains_as_people_type_them(text: str, gain: float) -> None:
    assert typed_gain(text, 2.0) == pytest.approx(gain)


@pytest.mark.parametrize(
    "text", ["", "abc", "1.2.3", "nan", "inf", "0", "/0", "x0", "1e999", "+1e9 dB", "__import__", "9" * 500]
)
def test_what_is_no_gain_is_refused_with_a_sentence(text: str) -> None:
    with pytest.raises(ValueError, match="gain"):
        typed_gain(text, 2.0)


def test_a_kept_trial_comes_back_exactly_and_only_for_the_same_content(tmp_path: Path) -> None:
    trial = Trial().typed("speed", 1.0, 0.1 + 0.2).stepped("speed", 1.0, 7).stepped("current", 1.0, -3)
    TrialStore("drive.toml", "a" * 64, tmp_path).keep(trial)
    assert TrialStore("drive.toml", "a" * 64, tmp_path).kept(NAMES) == trial
    assert TrialStore("drive.toml", "b" * 64, tmp_path).kept(NAMES) == Trial()
    assert TrialStore("other.toml", "a" * 64, tmp_path).kept(NAMES) == Trial()
    assert TrialStore("drive.toml", "a" * 64, tmp_path).kept(("current",)).gains == {"current": TrialGain(1.0, -3)}


def test_an_empty_trial_leaves_no_file_and_no_unfinished_one(tmp_path: Path) -> None:
    store = TrialStore("drive.toml", "a" * 64, tmp_path)
    store.keep(Trial().stepped("speed", 1.0, 1))
    assert list(store.path.parent.iterdir()) == [store.path]
    store.keep(Trial())
    assert list(store.path.parent.iterdir()) == []
    store.keep(Trial())


def test_a_write_that_fails_leaves_the_former_trial(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    store = TrialStore("drive.toml", "a" * 64, tmp_path)
    former = Trial().stepped("speed", 1.0, 1)
    store.keep(former)

    def full_disk(*_: object, **__: object) -> int:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "write_text", full_disk)
    with pytest.raises(OSError, match="No space left"):
        store.keep(Trial().stepped("speed", 1.0, 2))
    monkeypatch.undo()
    assert store.kept(NAMES) == former
    assert list(store.path.parent.iterdir()) == [store.path]


@pytest.mark.parametrize(
    "content",
    [
        "", "{", "[]", "null", '{"format": 2, "gains": {}}',
        '{"format": 1, "gains": {"speed": {"start": -1, "tenths": 0}}}',
        '{"format": 1, "gains": {"speed": {"start": NaN, "tenths": 0}}}', '{"format": 1, "gains": {"speed": 3}}',
        '{"format": 1, "gains": {"speed": {"start": 1, "tenths": 1e99}}}', "[" * 100_000, " " * 2_000_000,
    ],
)  # fmt: skip
def test_a_damaged_trial_is_refused_naming_its_file(tmp_path: Path, content: str) -> None:
    store = TrialStore("drive.toml", "a" * 64, tmp_path)
    store.path.parent.mkdir(parents=True)
    store.path.write_text(content)
    with pytest.raises(TrialFileError, match="json"):
        store.kept(NAMES)


def test_the_kept_file_names_its_project_for_people(tmp_path: Path) -> None:
    store = TrialStore(os.fsdecode(b"dri\xffve.toml"), "a" * 64, tmp_path)
    store.keep(Trial().stepped("speed", 1.0, 1))
    assert json.loads(store.path.read_text())["project"].endswith("ve.toml")


def test_the_state_folder_follows_the_xdg_base_directory_specification(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("HOME", "/home/someone")
    assert state_folder({"XDG_STATE_HOME": "/var/state"}) == Path("/var/state/encircle")
    assert state_folder({}) == Path("/home/someone/.local/state/encircle")
    assert state_folder({"XDG_STATE_HOME": "relative"}) == Path("/home/someone/.local/state/encircle")
