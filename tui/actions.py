"""The one registry of what keys do: bindings, footer, help page and the test of every key are made from it."""

from __future__ import annotations

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

    Where the footer lacks room those of high ``rank`` leave it. An action that is ``paired`` is the other way of the
    one before and shares its line. An ``urgent`` action works also while a value is being typed.
    """

    id: str
    keys: tuple[str, ...]
    description: str
    group: Group
    short: str = ""
    rank: int = 2
    paired: bool = False
    urgent: bool = False


ACTIONS: tuple[Action, ...] = (
    Action("outer_loop", ("down", "j"), "next loop outward", Group.LOOPS, "loop", 0),
    Action("inner_loop", ("up", "k"), "inward", Group.LOOPS, paired=True),
    Action("gain_up", ("plus", "equals_sign"), "gain 1 dB up", Group.GAIN, "gain", 0),
    Action("gain_down", ("minus", "underscore"), "down", Group.GAIN, paired=True),
    Action("gain_up_fine", ("full_stop", "greater_than_sign"), "gain 0.1 dB up", Group.GAIN, "fine"),
    Action("gain_down_fine", ("comma", "less_than_sign"), "down", Group.GAIN, paired=True),
    Action("type_gain", ("g",), "type a gain: 1.5, x1.2 or +3 dB", Group.GAIN, "type"),
    Action("put_back", ("r",), "gain back to the file's", Group.GAIN, "put back"),
    Action("put_all_back", ("R",), "all gains back, trial forgotten", Group.GAIN, "all"),
    Action("cursor_right", ("right", "l"), "a step up in frequency", Group.CURSOR, "cursor", 0),
    Action("cursor_left", ("left", "h"), "down", Group.CURSOR, paired=True),
    Action("cursor_far_right", ("shift+right", "L"), "ten steps up", Group.CURSOR),
    Action("cursor_far_left", ("shift+left", "H"), "down", Group.CURSOR, paired=True),
    Action("next_mark", ("n",), "to the next mark", Group.CURSOR, "mark", 1),
    Action("previous_mark", ("b",), "the one before", Group.CURSOR, paired=True),
    Action("zoom_in", ("i",), "closer to −1", Group.PLOTS, "zoom", 1),
    Action("zoom_out", ("o",), "further away", Group.PLOTS, paired=True),
    Action("whole", ("w",), "whole curve, or near −1", Group.PLOTS, "whole"),
    Action("folded", ("f",), "whole plane folded into a disc", Group.PLOTS, "fold"),
    Action("mirror", ("m",), "mirrored half on or off", Group.PLOTS, "mirror"),
    Action("phase", ("p",), "phase on or off", Group.PLOTS, "phase"),
    Action("sensitivity", ("s",), "|S| on or off", Group.PLOTS, "|S|"),
    Action("complementary", ("t",), "|T| on or off", Group.PLOTS, "|T|"),
    Action("whole_band", ("a",), "all frequencies, or the band", Group.PLOTS),
    Action("panel_1", ("1",), "loops and their unstable poles", Group.PANELS, "…6 panels", 0),
    Action("panel_2", ("2",), "room: margins against limits", Group.PANELS),
    Action("panel_3", ("3",), "turns round −1: the count", Group.PANELS),
    Action("panel_4", ("4",), "L in the plane", Group.PANELS),
    Action("panel_5", ("5",), "L over frequency", Group.PANELS),
    Action("panel_6", ("6",), "notes: warnings, data, the rest", Group.PANELS),
    Action("next_panel", ("tab",), "the next panel", Group.PANELS),
    Action("full_size", ("enter", "z"), "panel at full size, and back", Group.PANELS, "full size", 1),
    Action("scroll_down", ("space", "pagedown"), "scroll down", Group.PANELS),
    Action("scroll_up", ("backspace", "pageup"), "up", Group.PANELS, paired=True),
    Action("back", ("escape",), "leave help, full size, typing", Group.PANELS, urgent=True),
    Action("help", ("question_mark", "f1"), "this page", Group.PROGRAM, "help", 0),
    Action("quit", ("q", "ctrl+c", "ctrl+q"), "quit; the trial is kept", Group.PROGRAM, "quit", 0, urgent=True),
    Action("suspend", ("ctrl+z",), "pause; fg comes back", Group.PROGRAM, urgent=True),
)

_KEY_NAMES = {
    "plus": "+", "minus": "-", "equals_sign": "=", "underscore": "_", "full_stop": ".", "comma": ",",
    "greater_than_sign": ">", "less_than_sign": "<", "question_mark": "?", "pagedown": "pgdn", "pageup": "pgup",
    "backspace": "bksp", "escape": "esc", "down": "↓", "up": "↑", "left": "←", "right": "→", "shift+left": "⇧←",
    "shift+right": "⇧→", "f1": "F1",
}  # fmt: skip


def key_name(key: str) -> str:
    """A key as people write it."""
    return _KEY_NAMES.get(key, key.replace("+", " "))


def key_names(action: Action) -> str:
    """All keys of an action."""
    return " ".join(key_name(key) for key in action.keys)


def help_entries(group: Group) -> tuple[tuple[str, str], ...]:
    """Keys and words of one group, an action and its other way together."""
    entries: list[tuple[str, str]] = []
    for action in ACTIONS:
        if action.group is not group:
            continue
        if action.paired:
            keys, words = entries.pop()
            entries.append((f"{keys}  {key_names(action)}", f"{words} / {action.description}"))
        else:
            entries.append((key_names(action), action.description))
    return tuple(entries)


def footer_entries() -> tuple[tuple[str, str], ...]:
    """First keys and short words, an action and its other way together; the least important last."""
    shown = sorted((action for action in ACTIONS if action.short), key=lambda action: action.rank)
    return tuple((_footer_keys(action), action.short) for action in shown)


def _footer_keys(action: Action) -> str:
    following = ACTIONS[ACTIONS.index(action) + 1 :][:1]
    both = (action, *(other for other in following if other.paired))
    return "".join(key_name(one.keys[0]) for one in both)
