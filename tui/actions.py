"""The one registry of what keys do: bindings, footer, help page and the test of every key are made from it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum


class Group(StrEnum):
    """Where an action stands on the help page."""

    LOOPS = "loops"
    GAIN = "loop gain on trial"
    CURSOR = "frequency cursor"
    PLOTS = "plots"
    PANELS = "panels"
    PROGRAM = "program"


@dataclass(frozen=True, slots=True)
class Action:
    """``keys`` in Textual's spelling, ``description`` for the help page, ``short`` for the footer (empty: not there).

    An ``urgent`` action works also while a value is being typed.
    """

    id: str
    keys: tuple[str, ...]
    description: str
    group: Group
    short: str = ""
    urgent: bool = False


ACTIONS: tuple[Action, ...] = (
    Action("outer_loop", ("down", "j"), "next loop outward", Group.LOOPS, "loop"),
    Action("inner_loop", ("up", "k"), "next loop inward", Group.LOOPS),
    Action("gain_up", ("plus", "equals_sign"), "raise the gain by 1 dB", Group.GAIN, "gain"),
    Action("gain_down", ("minus", "underscore"), "lower the gain by 1 dB", Group.GAIN),
    Action("gain_up_fine", ("full_stop", "greater_than_sign"), "raise the gain by 0.1 dB", Group.GAIN, "fine"),
    Action("gain_down_fine", ("comma", "less_than_sign"), "lower the gain by 0.1 dB", Group.GAIN),
    Action("type_gain", ("g",), "type a gain: 1.5, x1.2 or +3 dB", Group.GAIN, "type"),
    Action("put_back", ("r",), "put this loop's gain back to the file's", Group.GAIN, "put back"),
    Action("put_all_back", ("R",), "put all gains back, forget the trial", Group.GAIN, "all"),
    Action("cursor_right", ("right", "l"), "one step up in frequency", Group.CURSOR, "cursor"),
    Action("cursor_left", ("left", "h"), "one step down in frequency", Group.CURSOR),
    Action("cursor_far_right", ("shift+right", "L"), "ten steps up in frequency", Group.CURSOR),
    Action("cursor_far_left", ("shift+left", "H"), "ten steps down in frequency", Group.CURSOR),
    Action("next_mark", ("n",), "to the next crossing, crossover or margin", Group.CURSOR, "mark"),
    Action("previous_mark", ("b",), "to the one before", Group.CURSOR),
    Action("zoom_in", ("i",), "closer to −1", Group.PLOTS, "zoom"),
    Action("zoom_out", ("o",), "further from −1; at the end the whole curve", Group.PLOTS),
    Action("whole", ("w",), "the whole finite curve, or back near −1", Group.PLOTS),
    Action("folded", ("f",), "fold the whole plane into a disc: arcs at infinity are seen", Group.PLOTS, "fold"),
    Action("mirror", ("m",), "the mirrored half (negative frequencies)", Group.PLOTS, "mirror"),
    Action("phase", ("p",), "phase below the magnitude", Group.PLOTS, "phase"),
    Action("sensitivity", ("s",), "|S| beside |L|", Group.PLOTS, "S"),
    Action("complementary", ("t",), "|T| beside |L|", Group.PLOTS, "T"),
    Action("whole_band", ("a",), "all frequencies, or the band of the file", Group.PLOTS),
    Action("panel_1", ("1",), "loops and the ladder of unstable poles", Group.PANELS),
    Action("panel_2", ("2",), "room: margins against limits", Group.PANELS),
    Action("panel_3", ("3",), "turns round −1: the count and its evidence", Group.PANELS),
    Action("panel_4", ("4",), "L in the plane", Group.PANELS),
    Action("panel_5", ("5",), "L over frequency", Group.PANELS),
    Action("panel_6", ("6",), "notes: warnings, data files, hidden poles, gain ranges", Group.PANELS),
    Action("next_panel", ("tab",), "choose the next panel", Group.PANELS, "panel"),
    Action("full_size", ("enter", "z"), "the chosen panel on the whole screen, and back", Group.PANELS, "full size"),
    Action("scroll_down", ("pagedown", "space"), "further down in the chosen panel", Group.PANELS),
    Action("scroll_up", ("pageup", "backspace"), "back up", Group.PANELS),
    Action("back", ("escape",), "leave the help page, the full-size panel or the typing of a value", Group.PANELS),
    Action("help", ("question_mark", "f1"), "this page", Group.PROGRAM, "help"),
    Action("quit", ("q", "ctrl+c", "ctrl+q"), "quit; trial gains are kept for the next start", Group.PROGRAM, "quit", True),
    Action("suspend", ("ctrl+z",), "pause; fg brings the screen back", Group.PROGRAM, urgent=True),
)

_KEY_NAMES = {
    "plus": "+", "equals_sign": "=", "minus": "-", "underscore": "_", "full_stop": ".", "comma": ",",
    "greater_than_sign": ">", "less_than_sign": "<", "question_mark": "?", "pagedown": "page down", "pageup": "page up",
    "escape": "esc", "down": "↓", "up": "↑", "left": "←", "right": "→", "shift+left": "shift ←",
    "shift+right": "shift →", "f1": "F1",
}  # fmt: skip


def key_name(key: str) -> str:
    """A key as people write it."""
    return _KEY_NAMES.get(key, key.replace("+", " "))


def key_names(action: Action) -> str:
    """All keys of an action."""
    return "  ".join(key_name(key) for key in action.keys)


def in_group(group: Group) -> tuple[Action, ...]:
    """The actions of one group, in order."""
    return tuple(action for action in ACTIONS if action.group is group)


def footer_entries(actions: Iterable[Action] = ACTIONS) -> tuple[tuple[str, str], ...]:
    """Keys and words of the footer: an action without a word of its own lends its key to the one before."""
    entries: list[tuple[str, str]] = []
    paired = {"inner_loop", "gain_down", "gain_down_fine", "cursor_left", "previous_mark", "zoom_out"}
    for action in actions:
        if action.short:
            entries.append((key_name(action.keys[0]), action.short))
        elif action.id in paired:
            keys, word = entries[-1]
            entries[-1] = (keys + key_name(action.keys[0]), word)
    return tuple(entries)
