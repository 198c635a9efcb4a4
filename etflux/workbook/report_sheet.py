"""Sheets that hold a table: headings in blocks, notes, filters, frozen panes, and many rows written quickly."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any
from xml.sax.saxutils import escape

import numpy as np
from numpy.typing import ArrayLike
from xlsxwriter.utility import xl_col_to_name
from xlsxwriter.worksheet import Worksheet

from etflux.variables import System, from_si, quantity
from etflux.workbook.report_style import BAND, BLOCK_TINT, DATE, MARKED, Look, decimals_format, note_of
from etflux.workbook.report_words import clean_text

if TYPE_CHECKING:
    from xlsxwriter.format import Format

ROWS_AT_ONCE = 2000
PAPER_CHARACTERS = 128.0  # of the ordinary font across a landscape page
PAGE_CHARACTERS = 206.0  # at the smallest print that is easily read
BOLD_CHARACTER = 0.95  # width of one in a heading
SMALL_WIDTH = 11.0  # of most columns on sheets with several short tables
PADDING = 0.72  # characters that a column needs beyond its width
EXTRA_DIGITS = 2  # in the cell beyond those shown; the tidy tables have all
_EXCEL_ZERO = np.datetime64("1899-12-30", "D")


@dataclass(frozen=True)
class Column:
    """One column of a sheet: heading, values and how they are shown."""

    heading: str
    values: np.ndarray
    block: str = ""
    note: str = ""
    format: str = ""
    width: float = 9.0


def number(
    name: str,
    values: ArrayLike,
    system: System,
    block: str = "",
    heading: str = "",
    step: float = 0.0,
    width: float = 8.3,
) -> Column:
    """Column of a quantity of the registry, in the unit people read.

    Parameters
    ----------
    name : str
        Of the registry: label, unit, decimals and note come from there.
    values : array_like
        In SI.
    system : str
        "si" or "us".
    block, heading : str
        Block it stands in; words instead of the registry's label.
    step : float
        Round to whole steps of this many units shown; 0 for none.
    width : float
        Of the column, in characters.
    """
    row = quantity(name)
    note = note_of(row)
    if heading and heading != row.label:
        note = ". ".join(part for part in (row.label, note) if part)
    shown = from_si(values, name, system)
    decimals = row.decimals_in(system)
    if step:
        shown = np.round(shown / step) * step
    unit = row.unit_in(system)
    label = heading or row.label
    title = f"{label} ({unit})" if unit else label
    width = max(width, max(len(word) for word in title.split()) * BOLD_CHARACTER)
    return Column(title, np.round(shown, decimals + EXTRA_DIGITS), block, note, decimals_format(decimals), width)


def words(heading: str, values: Any, block: str = "", note: str = "", width: float = 12.0) -> Column:
    """Column of text; None and NaN are blank."""
    return Column(heading, np.asarray(values, dtype=object), block, note, "@", width)


def dates(heading: str, values: Any, block: str = "", note: str = "") -> Column:
    """Column of days."""
    return Column(heading, np.asarray(values, dtype="datetime64[D]"), block, note, DATE, 10.5)


class TableSheet(Worksheet):  # type: ignore[misc,unused-ignore]
    """A worksheet whose long table is written row by row as it is saved.

    A cell at a time, XlsxWriter takes 9 microseconds; a season of a hundred stands has most of a million. The rows
    below the headings are therefore made here, as the text of the file, column by column: five times faster. They
    hold numbers and inline text only, so nothing in them can become a formula or a link.
    """

    def __init__(self) -> None:
        super().__init__()
        self.rows_written = True
        self._pending: tuple[int, Sequence[Column], list[Any], list[Any], np.ndarray] | None = None

    def set_rows(
        self, first_row: int, columns: Sequence[Column], formats: list[Format], marked_formats: list[Format],
        marked: np.ndarray,
    ) -> None:  # fmt: skip
        """Give the rows of the table, all below what is written in the ordinary way."""
        self._pending = (first_row, columns, formats, marked_formats, marked)
        self.rows_written = False
        self._check_dimensions(first_row + len(marked) - 1, len(columns) - 1)

    def _write_rows(self) -> None:
        super()._write_rows()
        if self._pending is None:
            return
        first_row, columns, formats, marked_formats, marked = self._pending
        plain = [made._get_xf_index() for made in formats]
        tinted = [made._get_xf_index() for made in marked_formats]
        for start in range(0, len(marked), ROWS_AT_ONCE):
            part = slice(start, start + ROWS_AT_ONCE)
            self.fh.write("".join(_row_xml(first_row + start, columns, plain, tinted, marked, part)))
        self.rows_written = True


def _row_xml(
    first: int, columns: Sequence[Column], plain: list[int], tinted: list[int], marked: np.ndarray, part: slice
) -> Iterator[str]:
    """Rows of the file's own text."""
    flags = marked[part].tolist()
    rows = range(first + 1, first + 1 + len(flags))
    cells = [
        _cells(xl_col_to_name(place), column.values[part], rows, [(plain, tinted)[flag][place] for flag in flags])
        for place, column in enumerate(columns)
    ]
    for row, *cells_of_row in zip(rows, *cells, strict=True):
        yield f'<row r="{row}">{"".join(cells_of_row)}</row>'


def _cells(letter: str, values: np.ndarray, rows: range, styles: list[int]) -> list[str]:
    if values.dtype.kind == "M":
        serial = (values.astype("datetime64[D]") - _EXCEL_ZERO).astype(float)
        values = np.where(np.isnat(values), np.nan, serial)
    if values.dtype.kind == "O":
        made = {value: _inline(clean_text(value)) for value in set(values)}
        return [
            f'<c r="{letter}{row}" s="{style}"{made[value]}'
            for value, row, style in zip(values, rows, styles, strict=True)
        ]
    return [
        f'<c r="{letter}{row}" s="{style}"><v>{value!r}</v></c>'
        if value - value == 0  # neither NaN nor infinite
        else f'<c r="{letter}{row}" s="{style}"/>'
        for value, row, style in zip(values.tolist(), rows, styles, strict=True)
    ]


def _inline(text: str) -> str:
    """End of a cell that holds text."""
    return f' t="inlineStr"><is><t xml:space="preserve">{escape(text)}</t></is></c>' if text else "/>"


def write_table(
    sheet: TableSheet,
    look: Look,
    first_row: int,
    columns: Sequence[Column],
    marked: np.ndarray | None = None,
    frozen: int = 0,
) -> int:
    """Write headings and rows of a table that ends the sheet.

    Parameters
    ----------
    sheet : TableSheet
    look : Look
    first_row : int
        Row of the heading, or of the blocks above it.
    columns : sequence of Column
    marked : ndarray of bool, optional
        Rows shown with the tint of provisional and estimated values.
    frozen : int
        Columns that stay in view.

    Returns
    -------
    int
        Row of the column headings.
    """
    heading_row = first_row
    if any(column.block for column in columns):
        _write_blocks(sheet, look, first_row, columns)
        heading_row += 1
    _write_headings(sheet, look, heading_row, columns)
    n_rows = len(columns[0].values)
    marks = np.zeros(n_rows, bool) if marked is None else np.asarray(marked, bool)
    if n_rows:
        plain = [look(num_format=column.format, **_alignment(column)) for column in columns]
        tinted = [look(num_format=column.format, bg_color=MARKED, **_alignment(column)) for column in columns]
        sheet.set_rows(heading_row + 1, columns, plain, tinted, marks)
    sheet.autofilter(heading_row, 0, heading_row + max(n_rows, 1), len(columns) - 1)
    sheet.freeze_panes(heading_row + 1, frozen)
    sheet.repeat_rows(first_row, heading_row)
    sheet.print_area(0, 0, heading_row + n_rows, len(columns) - 1)
    if frozen:
        _set_page_parts(sheet, columns, frozen)
    return heading_row


def _set_page_parts(sheet: TableSheet, columns: Sequence[Column], frozen: int) -> None:
    """Print a wide table as pages side by side, broken between blocks, who and when repeated on each.

    Squeezed into the width of one page its numbers could not be read.
    """
    repeated = sum(column.width + PADDING for column in columns[:frozen])
    breaks, widest, used = [], 0.0, repeated
    for first, last in _blocks(columns, frozen):
        wide = sum(column.width + PADDING for column in columns[first : last + 1])
        if used + wide > PAGE_CHARACTERS and used > repeated:
            breaks.append(first)
            used = repeated
        used += wide
        widest = max(widest, used)
    sheet.repeat_columns(0, frozen - 1)
    sheet.print_across()  # all of a stretch of days before the next stretch
    sheet.set_print_scale(int(max(40, min(100, 100 * PAPER_CHARACTERS / widest))))
    if breaks:
        sheet.set_v_pagebreaks(breaks)


def _blocks(columns: Sequence[Column], start: int = 0) -> Iterator[tuple[int, int]]:
    """First and last position of each run of columns of one block."""
    while start < len(columns):
        end = start
        while end + 1 < len(columns) and columns[end + 1].block == columns[start].block:
            end += 1
        yield start, end
        start = end + 1


def write_small_table(sheet: Worksheet, look: Look, first_row: int, columns: Sequence[Column]) -> int:
    """Write a short table among others, cell by cell; gives the row below it. Widths are the sheet's business."""
    _write_headings(sheet, look, first_row, columns, widths=False)
    for position, column in enumerate(columns):
        shown = look(num_format=column.format, bottom=4, border_color=BAND, **_alignment(column))
        for offset, value in enumerate(column.values):
            put(sheet, first_row + 1 + offset, position, value, shown)
    return first_row + 1 + (len(columns[0].values) if columns else 0)


def put(sheet: Worksheet, row: int, column: int, value: Any, shown: Format) -> None:
    """One cell: a finite number, a day, or text that stays text."""
    if isinstance(value, np.datetime64):
        value = float((value.astype("datetime64[D]") - _EXCEL_ZERO).astype(float)) if not np.isnat(value) else None
    if isinstance(value, (int, float, np.number)) and not isinstance(value, bool):
        if np.isfinite(value):
            sheet.write_number(row, column, float(value), shown)
        else:
            sheet.write_blank(row, column, None, shown)
    elif clean_text(value):
        sheet.write_string(row, column, clean_text(value), shown)
    else:
        sheet.write_blank(row, column, None, shown)


def _alignment(column: Column) -> dict[str, Any]:
    kind = column.values.dtype.kind
    return {"align": "left", "indent": 1} if kind == "O" else {"align": "center" if kind == "M" else "right"}


def _write_blocks(sheet: Worksheet, look: Look, row: int, columns: Sequence[Column]) -> None:
    for start, end in _blocks(columns):
        block = columns[start].block
        shown = look.block(BLOCK_TINT.get(block, BAND))
        if block and end > start:
            sheet.merge_range(row, start, row, end, block, shown)
        elif block:
            sheet.write_string(row, start, block, shown)


def _write_headings(sheet: Worksheet, look: Look, row: int, columns: Sequence[Column], widths: bool = True) -> None:
    tallest = 1
    for position, column in enumerate(columns):
        tint, over_text = BLOCK_TINT.get(column.block, BAND), column.values.dtype.kind == "O"
        sheet.write_string(row, position, column.heading, look.heading(tint, over_text))
        if column.note:
            sheet.write_comment(row, position, column.note, {"x_scale": 1.4, "y_scale": 0.7, "font_size": 9})
        if widths:
            sheet.set_column(position, position, column.width)
        tallest = max(tallest, _lines(column.heading, column.width if widths else SMALL_WIDTH))
    sheet.set_row(row, 12.5 * tallest + 3)


def _lines(text: str, width: float) -> int:
    """Lines that a heading takes when broken between words."""
    lines, room = 1, width
    for word in text.split():
        if len(word) > room and room < width:
            lines, room = lines + 1, width
        room -= len(word) + 1.0
    return lines
