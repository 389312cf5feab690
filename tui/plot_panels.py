"""The two plots of the chosen loop as panels."""

from __future__ import annotations

from encircle.tui.cursor import cursor_index
from encircle.tui.drawing import draw
from encircle.tui.loop_marks import loop_marks
from encircle.tui.magnitude_plot import FrequencyView, frequency_drawings
from encircle.tui.picture import Picture
from encircle.tui.polar_plot import polar_drawing
from encircle.tui.sheet import Row, Sheet
from encircle.tui.view import Panel, View


def plane_rows(
    picture: Picture, view: View, width: int, height: int, *, chosen: bool = False, ascii_only: bool = False
) -> tuple[Row, ...]:
    """L in the plane under a heading."""
    heading = _heading(Panel.PLANE, _plane_title(picture, view), width, chosen, ascii_only)
    if height < 2:
        return heading
    plot = polar_drawing(
        picture.curve,
        width,
        height - 1,
        view.plane,
        marks=loop_marks(picture.loop),
        before=picture.curve_before,
        cursor=cursor_index(picture, view),
    )
    return (*heading, *draw(plot, ascii_only=ascii_only))


def response_rows(
    picture: Picture,
    view: View,
    band: tuple[float, float],
    width: int,
    height: int,
    *,
    chosen: bool = False,
    ascii_only: bool = False,
) -> tuple[Row, ...]:
    """Magnitude and phase over frequency under a heading."""
    heading = _heading(Panel.RESPONSE, _response_title(picture, view), width, chosen, ascii_only)
    if height < 2:
        return heading
    cursor = cursor_index(picture, view)
    plots = frequency_drawings(
        picture.curve,
        width,
        height - 1,
        _frequency_view(picture, view, band, cursor),
        marks=loop_marks(picture.loop),
        before=picture.curve_before,
        cursor=cursor,
    )
    return (*heading, *draw(*plots, ascii_only=ascii_only))


def _heading(panel: Panel, title: str, width: int, chosen: bool, ascii_only: bool) -> tuple[Row, ...]:
    sheet = Sheet(width, ascii_only=ascii_only)
    sheet.heading(panel.value, title, chosen=chosen)
    return sheet.rows


def _plane_title(picture: Picture, view: View) -> str:
    part = {"near": "near −1", "whole": "whole curve", "folded": "whole plane folded"}[view.plane.kind]
    return f"L of {picture.loop.name}, {part}{_against_file(picture)}"


def _response_title(picture: Picture, view: View) -> str:
    return f"L of {picture.loop.name} over frequency{_against_file(picture)}"


def _against_file(picture: Picture) -> str:
    return ", file dim" if picture.curve_before is not None else ""


def _frequency_view(picture: Picture, view: View, band: tuple[float, float], cursor: int) -> FrequencyView:
    """The band of the file, or all frequencies: asked for, or because the cursor stands outside the band."""
    frequencies = picture.curve.frequency
    place = frequencies[cursor]
    whole = view.whole_band or not band[0] <= place <= band[1]
    lower, upper = (float(frequencies[0]), float(frequencies[-1])) if whole else band
    return FrequencyView(
        lower,
        upper,
        unit=picture.now.frequency_unit,
        phase=view.phase,
        sensitivity=view.sensitivity,
        complementary=view.complementary,
    )
