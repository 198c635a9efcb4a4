"""From rows of cells to columns of a table in SI units, with everything that is wrong on the way said at its cell."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from itertools import chain, groupby
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.findings import Finding, rules
from etflux.variables import to_si
from etflux.workbook.cells import Book
from etflux.workbook.headings import Headings, match, recognised
from etflux.workbook.places import Origin
from etflux.workbook.sheet_xml import Cell, position
from etflux.workbook.sheets import Column, Sheet
from etflux.workbook.values import TAKE

if TYPE_CHECKING:
    import pandas as pd

Row = tuple[int, list[Cell]]
TOLD_EVERY = 5000
HEADING_WITHIN = 15  # rows that are not blank in which the headings are looked for


@dataclass
class Block:
    """Rows of one table from one sheet or file: columns in SI units, the file's row numbers, what was found."""

    sheet: Sheet
    origin: Origin
    columns: dict[str, Any] = field(default_factory=dict)
    rows: list[int] = field(default_factory=list)
    findings: list[Finding] = field(default_factory=list)
    understood: bool = False

    def say(
        self, code: str, row: int | None = None, quantity: str | None = None, value: Any = None, detail: str = "",
        place: str = "",
    ) -> None:  # fmt: skip
        """Add a finding; its place follows from row (of the block) and quantity unless given."""
        if not place and row is not None:
            place = self.origin.place(self.rows[row], quantity)
        self.findings.append(
            Finding(code, self.sheet.table, row, quantity, value, "", detail, place or self.origin.name)
        )


def read_sheet(book: Book, title: str, sheet: Sheet, system: str, tell: Callable[[str], None] | None = None) -> Block:
    """Read one sheet of a workbook.

    Parameters
    ----------
    book : Book
    title : str
        The sheet's title in the file.
    sheet : Sheet
        What it should hold.
    system : str
        Unit system of the settings; "" when they do not say.
    tell : callable, optional
        Called with what is being read, again every few thousand rows.

    Returns
    -------
    Block
    """
    block = Block(sheet, Origin(title))
    rows = _rows(book, title, tell or (lambda step: None))
    found = find_headings(sheet, rows)
    if found is None:
        for _ in rows:
            pass
        return block
    number, heading_cells, rows = found
    if not recognised(sheet, (cell.value for cell in heading_cells)):
        block.say("headings-missing", detail=", ".join(column.label for column in sheet.columns if column.needed))
        return block
    headings = match(sheet, ((cell.column, cell.value) for cell in heading_cells if cell.kind == "text"), system)
    take_headings(block, number, headings)
    ignored = {cell.column for cell in heading_cells}
    blank = read_rows(block, headings, rows, ignored, book.epoch_1904)
    merged = _merged(block, book.merged.get(title, []))
    say_blank(block, [(row, name) for row, name in blank if not _inside(block, row, name, merged)])
    return block


def _rows(book: Book, title: str, tell: Callable[[str], None]) -> Iterator[Row]:
    """Rows of a sheet with a cell that is not blank, in the file's order."""
    for count, (number, cells) in enumerate(groupby(book.cells(title), key=lambda cell: cell.row)):
        if count % TOLD_EVERY == 0:
            tell(f"reading {title}" + (f", row {number:,}" if count else ""))
        yield number, list(cells)


def find_headings(sheet: Sheet, rows: Iterator[Row]) -> tuple[int, list[Cell], Iterator[Row]] | None:
    """The row that has most of a sheet's headings among the first ones, and the rows after it; None without rows."""
    head: list[Row] = []
    for row in rows:
        head.append(row)
        if len(head) == HEADING_WITHIN:
            break
    if not head:
        return None
    counts = [recognised(sheet, (cell.value for cell in cells if cell.kind == "text")) for _, cells in head]
    best = counts.index(max(counts))
    return (*head[best], chain(head[best + 1 :], rows))


def take_headings(block: Block, number: int, headings: Headings) -> None:
    """Note where the headings stand and what is wrong with them."""
    origin = block.origin
    origin.heading_row = number
    origin.columns = {name: heading.position for name, heading in headings.found.items()}
    origin.texts = {name: heading.text for name, heading in headings.found.items()}
    origin.units = {name: heading.unit for name, heading in headings.found.items()}
    block.understood = True
    at = {heading.position: name for name, heading in headings.found.items()}
    other = [problem for problem in headings.problems if problem[1] == "unit-other-system"]
    for place, code, value, detail in headings.problems:
        if code == "unit-other-system":  # said once for a sheet: either one heading is odd, or the setting is
            if (place, code, value, detail) != other[0]:
                continue
            detail += f"; and {len(other) - 1} more headings" if len(other) > 1 else ""
        texts = {"": str(value)} if place else {}
        where = Origin(origin.name, columns={"": place or 1}, texts=texts, is_sheet=origin.is_sheet).place(number, "")
        block.say(code, None, at.get(place or 0), value, detail, where)


def read_rows(
    block: Block, headings: Headings, rows: Iterable[Row], ignored: set[int], epoch_1904: bool, from_file: bool = False
) -> list[tuple[int, str]]:
    """Take the rows below the headings into columns.

    A row counts when one of its cells stands under a known heading. Cells under no heading at all are said once;
    `ignored` are the columns that have some heading. In a CSV file (`from_file`) dates are always text. Returns the
    row (of the block) and column of the cells that must not be blank and are.
    """
    taken: dict[int, tuple[list[Any], Column]] = {
        heading.position: ([], heading.column) for heading in headings.found.values()
    }
    remarks: dict[tuple[str, str], list[Any]] = {}
    strays: list[str] = []
    blank: list[tuple[int, str]] = []
    for number, cells in rows:
        if not any(cell.column in taken for cell in cells):
            strays += [cell.address for cell in cells if cell.column not in ignored]
            continue
        block.rows.append(number)
        index = len(block.rows) - 1
        for values, _ in taken.values():
            values.append(None)
        there = set()
        for cell in cells:
            place = taken.get(cell.column)
            if place is None:
                if cell.column not in ignored:
                    strays.append(cell.address)
                continue
            values, column = place
            there.add(column.name)
            if cell.kind == "number" and column.kind == "number":
                values[-1] = cell.value
                continue
            value, code, detail = TAKE[column.kind](cell, column, epoch_1904)
            values[-1] = value
            if code and not (from_file and code in ("date-as-text", "text-like-code")):
                shown = as_shown(cell)
                if rules()[code].severity == "note":
                    remarks.setdefault((column.name, code), []).append((index, shown, detail))
                else:
                    block.say(code, index, column.name, shown, detail)
        for _, column in taken.values():
            if column.filled and column.name not in there:
                blank.append((index, column.name))
    _remark(block, remarks)
    if strays:
        more = f"and {len(strays) - 1} more" if len(strays) > 1 else ""
        block.say("cells-without-heading", None, None, None, more, f"{block.origin.name}!{strays[0]}")
    for name, heading in headings.found.items():
        block.columns[name] = _column(heading.column, heading.unit, taken[heading.position][0])
    return blank


def _remark(block: Block, remarks: dict[tuple[str, str], list[Any]]) -> None:
    """Say a note once for a column, at its first cell, with the count."""
    for (name, code), cells in remarks.items():
        index, shown, detail = cells[0]
        count = f"and {len(cells) - 1} more in this column" if len(cells) > 1 else ""
        block.say(code, index, name, shown, "; ".join(part for part in (detail, count) if part))


Corners = tuple[tuple[int, int], tuple[int, int]]


def say_blank(block: Block, cells: list[tuple[int, str]]) -> None:
    """Say which cells must not be blank."""
    for row, name in cells:
        block.say("value-missing", row, name)


def as_shown(cell: Cell) -> Any:
    """A cell's value as its sheet shows it."""
    if cell.kind == "date":
        return f"{cell.value:%Y-%m-%d %H:%M}".removesuffix(" 00:00")
    if cell.kind == "number" and float(cell.value).is_integer():
        return int(cell.value)
    return None if cell.kind == "formula" else cell.value


def _inside(block: Block, row: int, name: str, ranges: list[Corners]) -> bool:
    line, column = block.rows[row], block.origin.columns[name]
    return any(top <= line <= bottom and left <= column <= right for (top, left), (bottom, right) in ranges)


def _merged(block: Block, ranges: list[str]) -> list[Corners]:
    """Merged cells in the table hide values: an error at the first cell of each; their corners."""
    found = []
    columns, origin = set(block.origin.columns.values()), block.origin
    last = max(block.rows, default=origin.heading_row)
    for reference in ranges:
        corners = [position(corner) for corner in reference.split(":")]
        (top, left), (bottom, right) = corners[0], corners[-1]
        found.append((corners[0], corners[-1]))
        inside = top <= last and bottom >= origin.heading_row and any(left <= column <= right for column in columns)
        if inside:
            first = reference.split(":")[0].replace("$", "")
            block.say("merged-cells", None, None, reference, "", f"{origin.name}!{first}")
    return found


def _column(column: Column, unit: str, values: list[Any]) -> Any:
    if column.kind == "number":
        numbers = np.array([np.nan if value is None else value for value in values], dtype=float)
        if not column.quantity.unit:
            return numbers
        return to_si(numbers, column.name, unit) if unit else np.full(len(values), np.nan)
    return values


def frame(sheet: Sheet, blocks: list[Block]) -> pd.DataFrame:
    """Table of a case from the blocks that were read, every column of the sheet there, in order.

    Parameters
    ----------
    sheet : Sheet
    blocks : list of Block

    Returns
    -------
    DataFrame
        RangeIndex; numbers float, dates ``datetime64[ns]``, the rest objects; blanks NaN, NaT or None.
    """
    import pandas as pd

    found = {}
    for column in sheet.columns:
        if column.kind == "number":
            pieces = [block.columns.get(column.name, np.full(len(block.rows), np.nan)) for block in blocks]
            found[column.name] = np.concatenate(pieces) if pieces else np.empty(0)
            continue
        cells = [cell for block in blocks for cell in block.columns.get(column.name, [None] * len(block.rows))]
        if column.kind in ("date", "time"):
            found[column.name] = np.array([np.datetime64("NaT") if cell is None else cell for cell in cells],
                                          dtype="datetime64[ns]")  # fmt: skip
        else:
            found[column.name] = np.array(cells, dtype=object) if cells else np.empty(0, dtype=object)
    return pd.DataFrame(found)
