"""The rows of every panel at its place: one function from frozen values to text."""

from __future__ import annotations

from dataclasses import dataclass

from encircle.engine.declarations import Declarations
from encircle.tui.help_page import help_rows
from encircle.tui.loop_ladder import ladder_rows
from encircle.tui.margins_panel import margins_rows
from encircle.tui.notes_panel import notes_rows
from encircle.tui.picture import Picture
from encircle.tui.plot_panels import plane_rows, response_rows
from encircle.tui.screen_layout import Placement
from encircle.tui.sheet import Row, window
from encircle.tui.view import Panel, View
from encircle.tui.windings_panel import windings_rows

MORE_KEY = "space"


@dataclass(frozen=True, slots=True)
class Showing:
    """All that a panel may need: the results, the choices, the file, and whether only ASCII can be shown."""

    picture: Picture
    view: View
    declarations: Declarations
    band: tuple[float, float]
    ascii_only: bool = False


def signature(place: Placement, showing: Showing) -> tuple[object, ...]:
    """Equal as long as the panel's rows are: texts do not follow the cursor and the switches of the plots."""
    view = showing.view
    if place.panel.is_plot:
        return place, showing.picture, view
    return place, showing.picture, view.panel is place.panel, view.scroll


def panel_rows(place: Placement, showing: Showing) -> tuple[Row, ...]:
    """The rows of one panel, at most as many as its place has."""
    picture, view = showing.picture, showing.view
    chosen = view.panel is place.panel
    if place.panel is Panel.LOOPS:
        return ladder_rows(
            picture, place.width, place.height, key=place.panel.value, chosen=chosen, ascii_only=showing.ascii_only
        )
    if place.panel is Panel.PLANE:
        return plane_rows(picture, view, place.width, place.height, chosen=chosen, ascii_only=showing.ascii_only)
    if place.panel is Panel.RESPONSE:
        return response_rows(
            picture, view, showing.band, place.width, place.height, chosen=chosen, ascii_only=showing.ascii_only
        )
    rows = text_rows(place.panel, place.width, showing)
    return window(rows, place.height, view.scroll if chosen else 0, more_key=MORE_KEY)


def text_rows(panel: Panel, width: int, showing: Showing) -> tuple[Row, ...]:
    """All rows of a panel of text, however many."""
    picture = showing.picture
    chosen = showing.view.panel is panel
    unit = picture.now.frequency_unit
    if panel is Panel.ROOM:
        filed = picture.loop_filed if picture.touched else picture.loop
        return margins_rows(
            picture.loop, filed, unit, width, key=panel.value, chosen=chosen, ascii_only=showing.ascii_only
        )
    if panel is Panel.TURNS:
        return windings_rows(picture.loop, unit, width, key=panel.value, chosen=chosen, ascii_only=showing.ascii_only)
    if panel is Panel.NOTES:
        return notes_rows(
            picture.now,
            picture.loop,
            showing.declarations,
            width,
            key=panel.value,
            chosen=chosen,
            ascii_only=showing.ascii_only,
        )
    return help_rows(width, ascii_only=showing.ascii_only)
