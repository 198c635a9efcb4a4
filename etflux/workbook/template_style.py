"""The look of the template: fonts, colours, widths and the page."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from copy import copy
from functools import cache
from typing import TYPE_CHECKING, Any
from weakref import WeakKeyDictionary

from etflux.variables import System
from etflux.workbook.sheets import Column, Need, Sheet

if TYPE_CHECKING:
    from openpyxl import Workbook
    from openpyxl.worksheet.worksheet import Worksheet

# Dark blue on pale yellow keeps apart in grey and to colour-blind eyes; "Needed." is also said in words.
INK, SOFT, DEEP, PALE, INPUT, RULE = "22303C", "5B6770", "1D3F5E", "DCE5EC", "FFFBEA", "C9CFD4"
TABS: Mapping[str, str] = {"needed": DEEP, "useful": "D98E2B", "air": "7FB2D6", "ready": "B4BAC0"}
NEEDS: Mapping[Need, str] = {
    "needed": "fill in",
    "useful": "if you have it",
    "air": "for the air above",
    "ready": "filled in already",
}
DATE_FORMAT, TIME_FORMAT = "yyyy-mm-dd", "yyyy-mm-dd hh:mm"
STEPS = (
    "1.  Fill in Stations, Weather, Counties and Stands: dark headings are needed, pale ones may stay blank.",
    "2.  Add what you have on the sheets after them. What is missing is estimated by published methods and marked.",
    "3.  Check:  etflux check FILE.xlsx   tells everything that is wrong or doubtful, with its cell.",
    "4.  Run:  etflux run FILE.xlsx   writes the brief, a results workbook and tables to a folder.",
)
RULES = (
    "The unit in a heading holds for its column. You may change it, for instance °C to °F; columns may be moved or "
    "left out, and columns of your own are ignored.",
    "Blank means missing, also for rain: write 0 for a dry day.",
    "Ids are letters, digits and _ . - without spaces, and are the same on every sheet.",
    "Dates are entered as dates (2031-07-24), numbers as numbers, without units in the cell.",
    "Values pasted from other programs: paste values only, and no merged cells.",
)
WIDTH_READ_FIRST = (22, 20, 96)
LEAST_WIDTH = {"date": 12.0, "time": 17.0, "text": 22.0, "file": 20.0, "id": 13.0, "choice": 13.0}
NUMBER_WIDTH, SOURCE_WIDTH, WIDEST = 10.5, 80.0, 32.0
# Letters to a unit of width, of 9 and of 8 points.
LETTERS, SMALL_LETTERS = 1.12, 1.25
PAGE_WIDTH = 215.0  # wider sheets print on two pages side by side, ids on both


@cache
def _looks() -> dict[str, dict[str, Any]]:
    from openpyxl.styles import Alignment, Border, Font, PatternFill, Side

    line = Side(style="thin", color=RULE)
    box = Border(left=line, right=line, top=line, bottom=line)

    def font(size: int = 9, color: str = INK, **more: Any) -> Font:
        return Font(name="Arial", size=size, color=color, **more)

    def fill(color: str) -> PatternFill:
        return PatternFill("solid", start_color=color)

    top = Alignment(vertical="top", wrap_text=True)
    middle = Alignment(vertical="center", wrap_text=True)
    return {
        "title": {"font": font(16, DEEP, bold=True)},
        "strong": {"font": font(10, INK, bold=True)},
        "purpose": {"font": font(10, INK, bold=True), "alignment": Alignment(vertical="center")},
        "note": {"font": font(8, SOFT), "alignment": Alignment(vertical="bottom", wrap_text=True)},
        "needed": {"font": font(9, "FFFFFF", bold=True), "fill": fill(DEEP), "alignment": middle, "border": box},
        "optional": {"font": font(9, INK, bold=True), "fill": fill(PALE), "alignment": middle, "border": box},
        "input": {"font": font(), "fill": fill(INPUT), "border": box, "alignment": Alignment(vertical="top")},
        "input words": {"font": font(), "fill": fill(INPUT), "border": box, "alignment": top},
        "plain": {"font": font(), "alignment": Alignment(vertical="top", wrap_text=True, horizontal="left")},
        "soft": {"font": font(9, SOFT), "alignment": top},
        "wrapped": {"font": font(), "alignment": top},
        "link name": {"font": font(9, INK, bold=True), "alignment": top},
    }


# A look is worked out once for a workbook; its cells then share it, which is ten times as fast.
_PAINTED: WeakKeyDictionary[Workbook, dict[tuple[str, str], Any]] = WeakKeyDictionary()


def put(page: Worksheet, row: int, column: int, value: Any, look: str, number_format: str = "General") -> None:
    """Write one cell; text stays text even if it begins like a formula."""
    cell = page.cell(row, column)
    if value not in (None, ""):
        cell.value = value
        if isinstance(value, str):
            cell.data_type = "s"
    painted = _PAINTED.setdefault(page.parent, {})
    if (look, number_format) not in painted:
        for name, what in _looks()[look].items():
            setattr(cell, name, what)
        cell.number_format = number_format
        painted[look, number_format] = cell._style
    cell._style = copy(painted[look, number_format])


def number_format(column: Column, value: Any) -> str:
    """Dates as dates; long fractions that a change of units made are shown short."""
    if column.kind == "date":
        return DATE_FORMAT
    if column.kind == "time":
        return TIME_FORMAT
    if isinstance(value, float) and len(f"{value:.10g}".partition(".")[2]) > 4:
        return "0.000"
    return "General"


def tab(page: Worksheet, need: Need) -> None:
    """Colour of the sheet's tab, by whether it must be filled in."""
    page.sheet_properties.tabColor = TABS[need]


def frozen_columns(sheet: Sheet) -> int:
    """Columns that stay in sight: the ids and the date at the left."""
    count = 0
    for column in sheet.columns[:2]:
        if column.kind not in ("id", "date"):
            break
        count += 1
    return max(count, 1)


def columns(page: Worksheet, sheet: Sheet, rows: list[list[Any]], heading_row: int) -> None:
    """Widths by what the cells hold; heights by the longest note and heading; what a row is, on top."""
    from openpyxl.utils import get_column_letter

    lines_note = lines_heading = 1
    total = 0.0
    for position, column in enumerate(sheet.columns):
        heading = column.heading("us")
        width = _width(column, heading, [row[position] for row in rows])
        page.column_dimensions[get_column_letter(position + 1)].width = width
        note = f"Needed. {column.note}" if column.needed else column.note
        lines_note = max(lines_note, _lines(note, width * SMALL_LETTERS))
        lines_heading = max(lines_heading, _lines(heading, width * LETTERS))
        total += width
    page.row_dimensions[1].height = 20.0
    page.row_dimensions[heading_row - 1].height = 10.5 * lines_note + 3.0
    page.row_dimensions[heading_row].height = 12.0 * lines_heading + 4.0
    if total > PAGE_WIDTH:
        two_pages(page)
    put(page, 1, 2 if total > PAGE_WIDTH else 1, sheet.purpose, "purpose")
    _row_heights(page, sheet, rows, heading_row)


def two_pages(page: Worksheet) -> None:
    """Print a wide sheet on two pages side by side, with the first column on both."""
    page.page_setup.fitToWidth = 2
    page.page_setup.pageOrder = "overThenDown"
    page.print_title_cols = "A:A"


def _width(column: Column, heading: str, values: list[Any]) -> float:
    if column.name == "source":
        return SOURCE_WIDTH if values else LEAST_WIDTH["text"]
    longest = max((len(_as_shown(value)) for value in values), default=0)
    if column.kind == "number":
        longest = min(longest, 10)
    words = max(map(len, heading.split())) / LETTERS
    return max(LEAST_WIDTH.get(column.kind, NUMBER_WIDTH), min(longest + 2.0, WIDEST), words + 1.5)


def _row_heights(page: Worksheet, sheet: Sheet, rows: list[list[Any]], heading_row: int) -> None:
    """Room for sources that take several lines."""
    for number, cells in enumerate(rows, start=heading_row + 1):
        lines = max(
            (_lines(str(value), SOURCE_WIDTH * LETTERS)
             for column, value in zip(sheet.columns, cells, strict=True) if column.name == "source" and value),
            default=1,
        )  # fmt: skip
        if lines > 1:
            page.row_dimensions[number].height = 12.0 * lines + 1.0


SETTING_WIDTHS = (12, 32, 18, 11, 15, 46, 20, 40)
_SETTING_LOOKS = ("soft", "link name", "input words", "plain", "plain", "plain", "plain", "soft")


def setting_columns(page: Worksheet) -> None:
    """Widths of the settings sheet."""
    for letter, width in zip("ABCDEFGH", SETTING_WIDTHS, strict=True):
        page.column_dimensions[letter].width = width
    page.row_dimensions[1].height = 20.0


def put_setting(page: Worksheet, number: int, texts: tuple[Any, ...], is_date: bool) -> None:
    """One row of the settings sheet, as high as its longest text."""
    lines = 1
    for position, (text, look, width) in enumerate(zip(texts, _SETTING_LOOKS, SETTING_WIDTHS, strict=True), start=1):
        put(page, number, position, text, look, DATE_FORMAT if position == 3 and is_date else "General")
        lines = max(lines, _lines(_as_shown(text), width * LETTERS))
    page.row_dimensions[number].height = 12.0 * lines + 2.0


def _as_shown(value: Any) -> str:
    return "" if value is None else value.isoformat()[:10] if isinstance(value, dt.date) else str(value)


def _lines(text: str, width: float) -> int:
    """Lines that words take in a width.

    Examples
    --------
    >>> _lines("one two three", 8)
    2
    """
    lines, used = 1, 0.0
    for word in text.split():
        if used and used + 1 + len(word) > width:
            lines, used = lines + 1, float(len(word))
        else:
            used += len(word) + (1 if used else 0)
    return lines


def read_first(page: Worksheet, version_label: str, version: int, system: System) -> int:
    """Head of the first sheet; the row where the list of sheets goes on."""
    for letter, width in zip("ABC", WIDTH_READ_FIRST, strict=True):
        page.column_dimensions[letter].width = width
    put(page, 1, 1, "Crop water use and the moisture it adds to the air", "title")
    page.row_dimensions[1].height = 26.0
    put(page, 2, 1, version_label, "plain")
    put(page, 2, 2, version, "plain")
    put(page, 3, 1, "Units", "plain")
    put(page, 3, 2, "US customary" if system == "us" else "SI", "plain")
    number = 5
    for title, lines in (("What to do", STEPS), ("How to fill in", RULES)):
        put(page, number, 1, title, "strong")
        for line in lines:
            number += 1
            page.merge_cells(start_row=number, end_row=number, start_column=1, end_column=3)
            put(page, number, 1, line, "wrapped")
            page.row_dimensions[number].height = 12.5 * _lines(line, 170.0) + 2.0
        number += 2
    put(page, number, 1, "Sheets", "strong")
    number += 1
    for position, (text, look) in enumerate(
        (("Sheet", "optional"), ("", "optional"), ("What a row is", "optional")), 1
    ):
        put(page, number, position, text, look)
    page.sheet_view.showGridLines = False
    return number + 1


def page(sheet: Worksheet, system: System, version: int) -> None:
    """Print set-up: landscape, as wide as the page, heading repeated, named and numbered."""
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.paperSize = sheet.PAPERSIZE_LETTER if system == "us" else sheet.PAPERSIZE_A4
    sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight = sheet.page_setup.fitToWidth or 1, 0
    sheet.sheet_properties.pageSetUpPr.fitToPage = True
    for side in ("left", "right"):
        setattr(sheet.page_margins, side, 0.4)
    sheet.page_margins.top = sheet.page_margins.bottom = 0.7
    sheet.oddHeader.left.text, sheet.oddHeader.right.text = "&A", "&F"
    sheet.oddFooter.left.text, sheet.oddFooter.right.text = f"etflux template {version}", "&P of &N"
