"""The settings sheet: one setting a row, its value in the unit beside it."""

from __future__ import annotations

from functools import cache
from itertools import groupby
from pathlib import Path
from typing import Any

from etflux.case import Settings
from etflux.findings import Finding
from etflux.variables import Setting, convert, settings_table, units
from etflux.workbook.cells import Book
from etflux.workbook.county_outlines import is_none
from etflux.workbook.headings import nearest, plain, unit_of
from etflux.workbook.places import Places
from etflux.workbook.rows import as_shown
from etflux.workbook.sheet_xml import Cell
from etflux.workbook.sheets import DATE_SETTINGS, Column
from etflux.workbook.values import TAKE
from etflux.workbook.weather_files import Trouble, beside

FILE_SETTINGS = ("outlines_file",)


def read_settings(book: Book, title: str, folder: Path, places: Places) -> tuple[Settings, str, list[Finding]]:
    """Read the settings sheet of a workbook.

    Parameters
    ----------
    book : Book
    title : str
        Of the sheet in the file.
    folder : Path
        Of the workbook, for files beside it.
    places : Places
        Gets the cell of every setting's value.

    Returns
    -------
    settings : Settings
        Defaults where nothing, or nothing valid, was entered.
    system : str
        Unit system.
    findings : list of Finding
    """
    rows = [(number, list(cells)) for number, cells in groupby(book.cells(title), key=lambda cell: cell.row)]
    head = next(((number, cells) for number, cells in rows if {"setting", "value"} <= _words(cells)), None)
    if head is None:
        missing = Finding("headings-missing", "settings", detail="Setting, Value", place=title)
        return Settings(), "", [missing]
    at = {plain(cell.value): cell.column for cell in head[1]}
    values: dict[str, Any] = {}
    findings: list[Finding] = []
    for number, cells in rows:
        if number <= head[0]:
            continue
        by_column = {cell.column: cell for cell in cells}
        name, value, unit = (by_column.get(at.get(word, 0)) for word in ("setting", "value", "unit"))
        setting = _known().get(plain(name.value)) if name else None
        if setting is None:
            if value is not None:
                findings.append(_unknown(name or value, title, named=name is not None))
            continue
        where = f"{title}!{Cell(number, at['value'], None, 'blank').address}"
        if value is None:
            places.settings.setdefault(setting.name, where)
            continue
        if setting.name in values:
            findings.append(_finding("setting-twice", setting.name, setting.label, "", where))
            continue
        places.settings[setting.name] = where
        taken, code, detail = _taken(setting, value, unit, book.epoch_1904, folder)
        if code:
            findings.append(_finding(code, setting.name, as_shown(value), detail, where))
        if taken is not None:
            values[setting.name] = taken
    settings = Settings(**values)
    return settings, settings.units, findings


@cache
def _known() -> dict[str, Setting]:
    """Settings by label and by name."""
    rows = settings_table().values()
    return {plain(row.label): row for row in rows} | {plain(row.name): row for row in rows}


def _unknown(cell: Cell, title: str, named: bool) -> Finding:
    close = nearest(str(cell.value), [row.label for row in settings_table().values()]) if named else ""
    return _finding("setting-unknown", "", as_shown(cell) if named else None, close, f"{title}!{cell.address}")


def _words(cells: list[Cell]) -> set[str]:
    return {plain(cell.value) for cell in cells}


def _finding(code: str, name: str, value: Any, detail: str, place: str) -> Finding:
    return Finding(code, "settings", None, name or None, value, "", detail, place)


def _taken(
    setting: Setting, cell: Cell, unit: Cell | None, epoch_1904: bool, folder: Path
) -> tuple[Any, str, str]:  # fmt: skip
    """Value in SI, and what is to be said about it."""
    if setting.type in ("float", "int"):
        return _number(setting, cell, unit, epoch_1904)
    kind, choices = ("choice", setting.choices) if setting.choices else ("text", ())
    if setting.type == "bool":
        kind = "yes or no"
    if setting.name in DATE_SETTINGS:
        kind = "date"
    column = Column(setting.name, kind, False, False, setting.label, "", choices)  # type: ignore[arg-type]
    value, code, detail = TAKE[kind](cell, column, epoch_1904)
    if kind == "date" and value is not None:
        value = value.date().isoformat()
    if setting.name in FILE_SETTINGS and value and not is_none(value):
        path = beside(folder, value)
        if isinstance(path, Trouble):
            return None, path.code, path.detail
    return value, code, detail


def _number(setting: Setting, cell: Cell, unit: Cell | None, epoch_1904: bool) -> tuple[Any, str, str]:
    column = Column(setting.name, "number", False, False, setting.label, "")
    value, code, detail = TAKE["number"](cell, column, epoch_1904)
    if value is None:
        return None, code, detail
    if setting.unit in units():
        if unit is None:
            return None, "setting-unit-missing", f"usually {setting.unit}"
        known = unit_of(str(unit.value))
        if known is None:
            return None, "unit-unknown", f"usually {setting.unit}"
        if known.dimension != units()[setting.unit].dimension:
            return None, "unit-wrong", f"{unit.value} is a unit of {known.dimension}; usually {setting.unit}"
        kind = "difference" if setting.unit == "K" else "value"
        value = float(convert(value, known.symbol, setting.unit, kind))  # type: ignore[arg-type]
        value = float(f"{value:.10g}")
    low, high = setting.low, setting.high
    if (low is not None and value < low) or (high is not None and value > high):
        return None, "range", f"from {low:g} to {high:g} {setting.unit}".rstrip()
    if setting.type == "int":
        if not float(value).is_integer():
            return None, "number-not-whole", ""
        value = int(value)
    return value, code, detail
