"""What the user has chosen to look at, as one frozen value, and the steps that keys make on it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from enum import Enum
from functools import partial
from typing import Literal

from encircle.tui.polar_plot import PolarView

Kind = Literal["whole", "near", "folded"]
LEAST_ZOOM, MOST_ZOOM = -6, 20


class Panel(Enum):
    """The panels, valued by the key that chooses them."""

    LOOPS = "1"
    ROOM = "2"
    TURNS = "3"
    PLANE = "4"
    RESPONSE = "5"
    NOTES = "6"
    HELP = "?"

    @property
    def is_plot(self) -> bool:
        """Whether the panel is a plot, not text."""
        return self in (Panel.PLANE, Panel.RESPONSE)


@dataclass(frozen=True, slots=True)
class View:
    """The chosen loop and panel, the cursor and the switches.

    ``cursor`` is a frequency in the file's unit, ``None`` while it has not been placed;
    ``text`` and ``plot`` are the panels shown where there is room for one of each only.
    """

    loop: int = 0
    panel: Panel = Panel.PLANE
    text: Panel = Panel.ROOM
    plot: Panel = Panel.PLANE
    full: bool = False
    scroll: int = 0
    cursor: float | None = None
    plane: PolarView = field(default_factory=lambda: PolarView(kind="near"))
    phase: bool = True
    sensitivity: bool = False
    complementary: bool = False
    whole_band: bool = False


def choose_panel(view: View, panel: Panel) -> View:
    """Choose a panel; it takes the place of its kind where not all have room."""
    view = replace(view, panel=panel, scroll=0)
    if panel.is_plot:
        return replace(view, plot=panel)
    return view if panel in (Panel.LOOPS, Panel.HELP) else replace(view, text=panel)


def step_back(view: View) -> View:
    """Leave the help page, else the full-size panel."""
    if view.panel is Panel.HELP:
        return leave_help(view)
    return replace(view, full=False, scroll=0)


def toggle_help(view: View) -> View:
    """Open the help page, or leave it."""
    return leave_help(view) if view.panel is Panel.HELP else choose_panel(view, Panel.HELP)


def leave_help(view: View) -> View:
    """Back to the plot that was there."""
    return choose_panel(view, view.plot)


def toggle_full(view: View) -> View:
    """The chosen panel alone on the screen, or with the others."""
    return leave_help(view) if view.panel is Panel.HELP else replace(view, full=not view.full, scroll=0)


def next_panel(view: View) -> View:
    """The panel after the chosen one."""
    order = [panel for panel in Panel if panel is not Panel.HELP]
    place = order.index(view.panel) if view.panel in order else -1
    return choose_panel(view, order[(place + 1) % len(order)])


def zoom(view: View, step: int) -> View:
    """Closer to -1 or further from it; beyond the last step out comes the whole curve."""
    plane = view.plane
    if plane.kind == "near":
        level = plane.zoom + step
        kind: Kind = "whole" if level < LEAST_ZOOM else "near"
        return replace(view, plane=replace(plane, kind=kind, zoom=min(max(level, LEAST_ZOOM), MOST_ZOOM)))
    level = LEAST_ZOOM if plane.kind == "whole" else plane.zoom
    return replace(view, plane=replace(plane, kind="near", zoom=level)) if step > 0 else view


def toggle_plane(view: View, kind: Kind) -> View:
    """The folded or the whole plane, or back to the neighbourhood of -1."""
    wanted: Kind = "near" if view.plane.kind == kind else kind
    return replace(view, plane=replace(view.plane, kind=wanted))


def toggle_mirror(view: View) -> View:
    """The mirrored half curve on or off."""
    return replace(view, plane=replace(view.plane, mirror=not view.plane.mirror))


STEPS: Mapping[str, Callable[[View], View]] = {
    "next_panel": next_panel,
    "full_size": toggle_full,
    "help": toggle_help,
    "back": step_back,
    "zoom_in": lambda view: zoom(view, 1),
    "zoom_out": lambda view: zoom(view, -1),
    "folded": lambda view: toggle_plane(view, "folded"),
    "whole": lambda view: toggle_plane(view, "whole"),
    "mirror": toggle_mirror,
    "phase": lambda view: replace(view, phase=not view.phase),
    "sensitivity": lambda view: replace(view, sensitivity=not view.sensitivity),
    "complementary": lambda view: replace(view, complementary=not view.complementary),
    "whole_band": lambda view: replace(view, whole_band=not view.whole_band),
    **{f"panel_{panel.value}": partial(choose_panel, panel=panel) for panel in Panel if panel is not Panel.HELP},
}
