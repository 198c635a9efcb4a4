"""The workbook to fill in: made empty, or with the rows of a case (the examples are made so).

No formula is written. The same rows give the same file, byte by byte.
"""

from __future__ import annotations

import datetime as dt
import math
import os
import re
import tempfile
import zipfile
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from etflux.case import Settings
from etflux.findings import CannotWrite
from etflux.variables import Setting, System, convert, from_si, settings_table, units
from etflux.workbook import template_style as style
from etflux.workbook.sheets import (
    CHOICES,
    DATE_SETTINGS,
    READ_FIRST,
    SETTINGS,
    VERSION,
    VERSION_LABEL,
    VERSION_PROPERTY,
    YES_NO,
    Column,
    Sheet,
    packaged_rows,
    sheet_of,
    sheets,
)  # fmt: skip

if TYPE_CHECKING:
    import pandas as pd
    from openpyxl import Workbook
    from openpyxl.worksheet.worksheet import Worksheet

HEADING_ROW = 3  # above it: what a row is, and a note on every column
FIRST_ROW = HEADING_ROW + 1
LAST_LISTED = {"stands": 5000, "counties": 4000, "stations": 2000}  # rows that a drop-down of ids looks at
SETTING_COLUMNS = ("Group", "Setting", "Value", "Unit", "If blank", "What it does", "Allowed", "Source")
# Zip archives cannot name an earlier day; a fixed one keeps the file the same every time it is made.
STAMP = (1980, 1, 1, 0, 0, 0)


def write(
    path: Path | str,
    system: System = "si",
    tables: Mapping[str, pd.DataFrame] | None = None,
    settings: Mapping[str, Any] | Settings | None = None,
    replace: bool = False,
) -> Path:
    """Make a workbook to fill in, with the rows of `tables` where they are given.

    Parameters
    ----------
    path : path
        File to make (.xlsx).
    system : str
        Units of the headings: "si" or "us".
    tables : mapping of str to DataFrame, optional
        Tables of a case, SI; rows are converted to the headings' units. Soils and covers come on top of the
        packaged ones.
    settings : mapping or Settings, optional
        Values of settings, SI; those at their default are left blank.
    replace : bool
        Replace a file that is there already.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    CannotWrite
        If the file is there already and may not be replaced, is not called .xlsx, or cannot be written.
    """
    path = Path(path)
    if path.suffix.lower() != ".xlsx":
        raise CannotWrite(f"{path}: a template is an Excel workbook. Give it a name that ends in .xlsx")
    if path.exists() and not replace:
        raise CannotWrite(f"{path} is there already and was left as it is. Choose another name, or ask for --replace")
    book = _book(system, tables or {}, _given(settings, system))
    _save(book, path)
    return path


def _given(settings: Mapping[str, Any] | Settings | None, system: System) -> dict[str, Any]:
    """Settings that differ from their defaults; the unit system is always said."""
    values = dict(settings) if isinstance(settings, Mapping) else vars(settings) if settings is not None else {}
    known = settings_table()
    unknown = set(values) - set(known)
    if unknown:
        raise KeyError(f"no such setting: {', '.join(sorted(unknown))}")
    changed = {name: value for name, value in values.items() if value != known[name].default}
    return changed | {"units": system}


def _book(system: System, tables: Mapping[str, pd.DataFrame], settings: Mapping[str, Any]) -> Workbook:
    from openpyxl import Workbook
    from openpyxl.packaging.custom import IntProperty

    book = Workbook()
    book.remove(book.active)
    book.custom_doc_props.append(IntProperty(name=VERSION_PROPERTY, value=VERSION))
    book.properties.creator, book.properties.title = "etflux", "etflux template"
    book.properties.created = dt.datetime(*STAMP)
    _read_first(book.create_sheet(READ_FIRST), system)
    rows = {sheet.table: _rows(sheet, tables.get(sheet.table), system) for sheet in sheets()}
    for sheet in sheets():
        _sheet(book.create_sheet(sheet.title), sheet, rows[sheet.table], system)
    _settings(book.create_sheet(SETTINGS), settings, system)
    lists = _choices(book.create_sheet(CHOICES))
    for sheet in sheets():
        _drop_downs(book[sheet.title], sheet, lists)
    for page in book.worksheets:
        style.page(page, system, VERSION)
    return book


# --- rows ---


def _rows(sheet: Sheet, table: pd.DataFrame | None, system: System) -> list[list[Any]]:
    """Cells of a sheet's rows in its column order, in the headings' units."""
    given = _columns_of(sheet, table, system) if table is not None else []
    if sheet.need != "ready":
        return given
    mine = {row[0] for row in given}
    packaged = [_packaged(sheet, row, system) for row in packaged_rows(sheet.table)]
    return [row for row in packaged if row[0] not in mine] + given


def _columns_of(sheet: Sheet, table: pd.DataFrame, system: System) -> list[list[Any]]:
    unknown = set(table.columns) - {column.name for column in sheet.columns}
    if unknown:
        raise KeyError(f"the {sheet.title} sheet has no column {', '.join(sorted(unknown))}")
    columns = [
        _cells(column, table[column.name].tolist(), system) if column.name in table else [None] * len(table)
        for column in sheet.columns
    ]
    return [list(row) for row in zip(*columns, strict=True)]


def _cells(column: Column, values: list[Any], system: System) -> list[Any]:
    blank = [value is None or value != value for value in values]  # NaN and NaT differ from themselves
    if column.kind == "number":
        return _numbers([math.nan if none else float(value) for value, none in zip(values, blank, strict=True)],
                        column.name, system)  # fmt: skip
    return [None if none else _cell(column, value) for value, none in zip(values, blank, strict=True)]


def _cell(column: Column, value: Any) -> Any:
    if column.name in YES_NO:
        return "yes" if value else "no"
    if column.kind == "date":
        return dt.date.fromisoformat(str(value)[:10])
    if column.kind == "time":
        return dt.datetime.fromisoformat(str(value)[:19])
    return str(value)


def _numbers(values: Iterable[float], name: str, system: System) -> list[Any]:
    """Numbers in the unit of the heading, without the last digits that only the conversion made."""
    return [None if math.isnan(value) else _short(value) for value in from_si(list(values), name, system).tolist()]


def _short(value: float) -> float | int:
    short = float(f"{value:.10g}")
    return int(short) if short.is_integer() and abs(short) < 1e15 else short


def _packaged(sheet: Sheet, row: Mapping[str, str], system: System) -> list[Any]:
    return [
        None
        if not row[column.name]
        else _numbers([float(row[column.name])], column.name, system)[0]
        if column.kind == "number"
        else row[column.name]
        for column in sheet.columns
    ]


# --- sheets ---


def _sheet(page: Worksheet, sheet: Sheet, rows: list[list[Any]], system: System) -> None:
    style.tab(page, sheet.need)
    for position, column in enumerate(sheet.columns, start=1):
        note = " ".join(part for part in ("Needed." if column.needed else "", column.note) if part)
        style.put(page, HEADING_ROW - 1, position, note, "note")
        style.put(page, HEADING_ROW, position, column.heading(system), "needed" if column.needed else "optional")
    empty = [[None] * len(sheet.columns)] * (sheet.ruled_rows if not rows or sheet.need == "ready" else 0)
    for number, cells in enumerate([*rows, *empty], start=FIRST_ROW):
        for position, (column, value) in enumerate(zip(sheet.columns, cells, strict=True), start=1):
            look = "input words" if column.name == "source" else "input"
            style.put(page, number, position, value, look, style.number_format(column, value))
    style.columns(page, sheet, rows, HEADING_ROW)
    page.freeze_panes = page.cell(FIRST_ROW, style.frozen_columns(sheet) + 1)
    page.print_title_rows = f"{HEADING_ROW}:{HEADING_ROW}"


def _drop_downs(page: Worksheet, sheet: Sheet, lists: Mapping[str, str]) -> None:
    """Lists of words, and of ids that another sheet has."""
    from openpyxl.utils import get_column_letter
    from openpyxl.worksheet.datavalidation import DataValidation

    for position, column in enumerate(sheet.columns, start=1):
        if column.of:
            source = sheet_of(column.of)
            formula = f"='{source.title}'!$A${FIRST_ROW}:$A${LAST_LISTED.get(column.of, 500)}"
        elif column.kind == "yes or no":
            formula = lists["yes or no"]
        elif column.choices:
            formula = lists[column.name]
        else:
            continue
        rule = DataValidation(type="list", formula1=formula, allow_blank=True, showErrorMessage=not column.of)
        rule.errorTitle, rule.error = column.label, "Please choose from the list, or leave the cell blank."
        letter = get_column_letter(position)
        rule.add(f"{letter}{FIRST_ROW}:{letter}100000")
        page.add_data_validation(rule)


def _choices(page: Worksheet) -> dict[str, str]:
    """The sheet of words to choose from; where each list stands, by column name."""
    from openpyxl.utils import get_column_letter

    style.tab(page, "ready")
    style.put(page, 1, 1, "The words that drop-downs offer. Nothing is filled in here.", "purpose")
    lists: dict[str, tuple[str, str, tuple[str, ...]]] = {"yes or no": ("Yes or no", "", ("yes", "no"))}
    for sheet in sheets():
        for column in sheet.columns:
            if column.choices:
                lists.setdefault(column.name, (column.label, f"{sheet.title} sheet.", column.choices))
    found = {}
    for position, (name, (label, where, words)) in enumerate(lists.items(), start=1):
        style.put(page, HEADING_ROW - 1, position, where, "note")
        style.put(page, HEADING_ROW, position, label, "optional")
        for number, word in enumerate(words, start=FIRST_ROW):
            style.put(page, number, position, word, "plain")
        letter = get_column_letter(position)
        page.column_dimensions[letter].width = max(14.0, min(30.0, max(map(len, (label, *words))) + 2.0))
        found[name] = f"='{CHOICES}'!${letter}${FIRST_ROW}:${letter}${FIRST_ROW + len(words) - 1}"
    page.freeze_panes = page.cell(FIRST_ROW, 1)
    page.page_setup.fitToWidth, page.page_setup.pageOrder = 2, "overThenDown"
    return found


def _settings(page: Worksheet, given: Mapping[str, Any], system: System) -> None:
    """One row for each setting; a value only where it is not the default."""
    from openpyxl.worksheet.datavalidation import DataValidation

    style.tab(page, "ready")
    style.put(page, 1, 1, "Every choice of method. Enter a value only where you want another one than in the column "
              "'If blank'.", "purpose")  # fmt: skip
    for position, label in enumerate(SETTING_COLUMNS, start=1):
        style.put(page, HEADING_ROW, position, label, "needed" if label == "Value" else "optional")
    for number, row in enumerate(settings_table().values(), start=FIRST_ROW):
        value = setting_cell(row, given[row.name], system) if row.name in given else None
        default = _shown(setting_cell(row, row.default, system))
        texts = (row.group, row.label, value, _setting_unit(row, system), default, row.sentence,
                 _allowed(row, system), row.source)  # fmt: skip
        style.put_setting(page, number, texts, row.name in DATE_SETTINGS)
        words = ("yes", "no") if row.type == "bool" else row.choices
        if words:
            rule = DataValidation(type="list", formula1='"' + ",".join(words) + '"', allow_blank=True)
            rule.showErrorMessage = True
            rule.add(page.cell(number, 3))
            page.add_data_validation(rule)
    style.setting_columns(page)
    page.freeze_panes = page.cell(FIRST_ROW, 3)
    page.print_title_rows = f"{HEADING_ROW}:{HEADING_ROW}"


def _setting_unit(row: Setting, system: System) -> str:
    return row.us_unit if system == "us" and row.us_unit else row.unit


def setting_cell(row: Setting, value: Any, system: System) -> Any:
    """A setting's value as a person of a unit system writes it."""
    if value is None or value == "":
        return None
    if row.type == "bool":
        return "yes" if value else "no"
    if row.name in DATE_SETTINGS:
        return dt.date.fromisoformat(str(value)[:10])
    if row.type not in ("float", "int"):
        return str(value)
    unit = _setting_unit(row, system)
    return _short(float(convert(value, row.unit, unit)) if unit in units() else float(value))


def _shown(value: Any) -> Any:
    return float(f"{value:.4g}") if isinstance(value, float) else value


def _allowed(row: Setting, system: System) -> str:
    if row.type == "bool":
        return "yes, no"
    if row.choices:
        return ", ".join(row.choices)
    if row.name in DATE_SETTINGS:
        return "a date"
    if row.low is None or row.high is None:
        return "text"
    low, high = (_shown(setting_cell(row, value, system)) for value in (row.low, row.high))
    return f"{low:.10g} to {high:.10g}"


def _read_first(page: Worksheet, system: System) -> None:
    """What to do, in which order; which sheet is for what."""
    style.tab(page, "needed")
    number = style.read_first(page, VERSION_LABEL, VERSION, system)
    for sheet in sheets():
        style.put(page, number, 1, sheet.title, "link name")
        style.put(page, number, 2, style.NEEDS[sheet.need], "plain")
        style.put(page, number, 3, sheet.purpose, "wrapped")
        number += 1
    for title, purpose in ((SETTINGS, "Every choice of method, with its default."),
                           (CHOICES, "The words that drop-downs offer.")):  # fmt: skip
        style.put(page, number, 1, title, "link name")
        style.put(page, number, 2, style.NEEDS["ready"], "plain")
        style.put(page, number, 3, purpose, "wrapped")
        number += 1


# --- the file ---


def _save(book: Workbook, path: Path) -> None:
    """Write under a temporary name and rename, so that no half-written workbook is ever there."""
    try:
        handle, name = tempfile.mkstemp(prefix=".etflux-", suffix=".xlsx", dir=path.parent)
    except OSError as error:
        raise CannotWrite(f"cannot write {path}: {error.strerror or error}") from error
    os.close(handle)
    scratch = Path(name)
    try:
        book.save(scratch)
        _same_every_time(scratch)
        umask = os.umask(0)
        os.umask(umask)
        scratch.chmod(0o666 & ~umask)
        scratch.replace(path)
    except OSError as error:
        raise CannotWrite(f"cannot write {path}: {error.strerror or error}") from error
    finally:
        scratch.unlink(missing_ok=True)


def _same_every_time(path: Path) -> None:
    """Take the clock out of the file: member dates and the time of the last change."""
    with zipfile.ZipFile(path) as archive:
        members = [(name, archive.read(name)) for name in archive.namelist()]
    stamp = dt.datetime(*STAMP).strftime("%Y-%m-%dT%H:%M:%SZ").encode()
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in members:
            if name == "docProps/core.xml":
                content = re.sub(rb"(<dcterms:modified[^>]*>)[^<]*", rb"\g<1>" + stamp, content)
            info = zipfile.ZipInfo(name, STAMP)
            info.compress_type = zipfile.ZIP_DEFLATED
            archive.writestr(info, content)
