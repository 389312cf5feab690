"""The one page that explains every key and every term; made from the registry of actions."""

from __future__ import annotations

from encircle.tui.actions import Group, help_entries
from encircle.tui.sheet import Ink, Row, Sheet, fitted, padded
from encircle.tui.terms import TERMS
from encircle.tui.wording import CAUTION

TITLE = "Keys and terms"
TWO_COLUMNS_FROM = 110
_KEYS_COLUMN = 56
_KEY_WIDTH = 21
_TERM_WIDTH = 12


def help_rows(width: int, *, ascii_only: bool = False) -> tuple[Row, ...]:
    """The page: keys beside terms where there is room for both, else keys above terms."""
    head = Sheet(width, ascii_only=ascii_only)
    head.heading("?", TITLE, chosen=True)
    if width < TWO_COLUMNS_FROM:
        body = (*_keys(width, ascii_only), *_terms(width, ascii_only))
    else:
        left = _KEYS_COLUMN
        body = _beside(_keys(left, ascii_only), left, _terms(width - left, ascii_only), width - left)
    return (*head.rows, *body)


def _beside(left: tuple[Row, ...], left_width: int, right: tuple[Row, ...], right_width: int) -> tuple[Row, ...]:
    length = max(len(left), len(right))
    left += (fitted((), left_width),) * (length - len(left))
    right += (fitted((), right_width),) * (length - len(right))
    return tuple((*one, *other) for one, other in zip(left, right, strict=True))


def _keys(width: int, ascii_only: bool) -> tuple[Row, ...]:
    sheet = Sheet(width, ascii_only=ascii_only)
    for group in Group:
        sheet.row((f" {group.value}", Ink.STRONG))
        for keys, words in help_entries(group):
            _entry(sheet, keys, words, _KEY_WIDTH, Ink.KEY)
    return sheet.rows


def _terms(width: int, ascii_only: bool) -> tuple[Row, ...]:
    sheet = Sheet(width, ascii_only=ascii_only)
    sheet.row((" terms", Ink.STRONG))
    for term, meaning in TERMS:
        _entry(sheet, term, meaning, _TERM_WIDTH, Ink.STRONG)
    sheet.paragraph(CAUTION, Ink.DOUBT)
    return sheet.rows


def _entry(sheet: Sheet, name: str, text: str, name_width: int, ink: Ink) -> None:
    """A name and its text; the text goes on under itself."""
    lines = Sheet(sheet.width - name_width - 2, ascii_only=sheet.ascii_only)
    lines.paragraph(text, indent=0)
    for number, line in enumerate(lines.rows):
        shown = "" if number else sheet.clean(name)
        sheet.row("  ", (padded(shown, name_width), ink), *[(run, Ink.PLAIN) for run, _ in line])
