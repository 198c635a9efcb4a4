"""The look of the results workbook: fonts, colours, number formats, and the page."""

from __future__ import annotations

import math
from collections.abc import Mapping
from functools import cache
from typing import TYPE_CHECKING, Any

from etflux.variables import Quantity, System, quantity

if TYPE_CHECKING:
    from xlsxwriter.format import Format
    from xlsxwriter.workbook import Workbook
    from xlsxwriter.worksheet import Worksheet

FONT = {"font_name": "Arial", "font_size": 9}
INK, SOFT, RULE, FAINT, BAND, MARKED = "#22303C", "#5B6770", "#9AA5AD", "#DDE2E5", "#E4E9EC", "#F6F0DC"
DATE = "yyyy-mm-dd"

# One quiet tint per block of columns; every block is also named in words, so the tint alone carries nothing.
BLOCK_TINT: Mapping[str, str] = {
    "Sky": "#DDE7F0", "Plant": "#E2EAD6", "Soil": "#EDE1D3", "Water in": "#D5E6E8", "Water out": "#E6E0EE",
    "To do": "#F2E3BB",
}  # fmt: skip

# Lines and bars: dark to light, so that they keep their order in grey and to colour-blind eyes (blue against yellow
# carries the difference, never red against green); lines also differ in their dashes.
SERIES = ("#1D3557", "#D98E2B", "#3A8F8B", "#A493C4", "#7A5C3E", "#C9C27A")
DASHES = ("solid", "long_dash", "solid", "dash", "long_dash_dot", "round_dot")
REST, LOSS = "#9AA5AD", "#B9D4E8"


@cache
def series_look(position: int, name: str) -> tuple[str, str]:
    """Colour and dash of a source of water."""
    if name == "rest":
        return REST, "round_dot"
    if name == "sprinkler loss":
        return LOSS, "square_dot"
    return SERIES[position % len(SERIES)], DASHES[position % len(DASHES)]


def decimals_format(decimals: int) -> str:
    """Number format with a number of decimals.

    Examples
    --------
    >>> decimals_format(2), decimals_format(0)
    ('0.00', '#,##0')
    """
    return "0." + "0" * decimals if decimals else "#,##0"


def number_format(name: str, system: System) -> str:
    """Number format of a quantity in the unit that people read."""
    return decimals_format(quantity(name).decimals_in(system))


def note_of(row: Quantity) -> str:
    """Printed symbol and sentence of a quantity, for the note on a heading."""
    return ". ".join(part for part in (row.symbol, row.note.rstrip(".")) if part)


class Look:
    """The formats of one workbook, each made once."""

    def __init__(self, book: Workbook) -> None:
        self._book = book
        self._made: dict[tuple[tuple[str, Any], ...], Format] = {}

    def __call__(self, **properties: Any) -> Format:
        """Return the format with these properties on top of the ordinary text."""
        key = tuple(sorted(properties.items()))
        if key not in self._made:
            ordinary = {**FONT, "font_color": INK, "valign": "vcenter"}
            self._made[key] = self._book.add_format({**ordinary, **properties})
        return self._made[key]

    def title(self) -> Format:
        """Title of a sheet."""
        return self(bold=True, font_size=14)

    def lead(self) -> Format:
        """Sentence under a title."""
        return self(font_color=SOFT, text_wrap=False)

    def wrapped(self, **properties: Any) -> Format:
        """Running text."""
        return self(text_wrap=True, valign="top", **properties)

    def heading(self, tint: str = BAND, over_text: bool = False) -> Format:
        """Head of a column: to the left over text, in the middle over numbers."""
        side: dict[str, Any] = {"align": "left", "indent": 1} if over_text else {"align": "center"}
        return self(bold=True, bg_color=tint, text_wrap=True, bottom=1, border_color=RULE, **side)

    def block(self, tint: str) -> Format:
        """Head of a block of columns."""
        return self(bold=True, bg_color=tint, align="center", left=1, right=1, border_color=RULE)


def lines_of(text: str, width: float, font_size: float = 9.0) -> int:
    """Lines that running text takes in a cell of some width, in characters of the ordinary size.

    Examples
    --------
    >>> lines_of("word " * 40, 50)
    4
    """
    return max(1, math.ceil(len(text.strip()) * 0.88 * font_size / 9.0 / width))


def set_page(sheet: Worksheet, system: System, footer: str, landscape: bool = True) -> None:
    """Page that prints at the width of the paper, with what it is and which run above and below."""
    if landscape:
        sheet.set_landscape()
    sheet.set_paper(1 if system == "us" else 9)  # Letter, A4
    sheet.set_margins(left=0.4, right=0.4, top=0.6, bottom=0.6)
    sheet.fit_to_pages(1, 0)
    sheet.set_header("&L&8&A&R&8Planning estimate, not a warning product or an official forecast")
    sheet.set_footer(f"&L&8{_plain(footer)}&R&8Page &P of &N")
    sheet.hide_gridlines(1)


def _plain(text: str) -> str:
    """Text whose ampersands a header does not take for codes, short enough for one."""
    return text[:180].replace("&", "&&")
