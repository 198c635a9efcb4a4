"""Reader of a tidy file of measurements: one row per place, day, quantity and series.

Columns, in any order: place, date, quantity, value, unit; if wanted, uncertainty and series (the name of a way of
measuring, so that two series of one flux can be held apart). Every fault is a finding; a row with an error is not
used.
"""

from __future__ import annotations

import csv
import datetime as dt
import re
from collections.abc import Iterator, Sequence
from difflib import get_close_matches
from pathlib import Path
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from etflux.findings import CannotRead, Finding
from etflux.variables import Unit, quantities, units

if TYPE_CHECKING:
    import pandas as pd

NEEDED = ("place", "date", "quantity", "value", "unit")
OPTIONAL = ("uncertainty", "series")
COLUMNS = (*NEEDED, *OPTIONAL)
TABLE = "measurements"
DEFAULT_SERIES = "measured"
MISSING = {"", "na", "nan", "null", "none", "-", "-9999", "-9999.0", "-6999", "m"}
# What can be had from each other: the same water as depth, as latent heat, and a day's depth written without the day.
WATER = {"water depth per day", "water depth", "radiation"}
WATER_QUANTITIES = {"water depth per day", "radiation"}
MOST_BYTES = 500_000_000
_DECIMAL_COMMA = re.compile(r"^(\s*[+-]?\d+),(\d+\s*)$")


class Measurements(NamedTuple):
    """What was read: `rows` with the columns of :data:`COLUMNS` and `row` (counted from 0), and what was found."""

    rows: pd.DataFrame
    findings: list[Finding]
    file: str


def read_measurements(path: Path | str) -> Measurements:
    """Read a tidy file of measurements.

    Parameters
    ----------
    path : path
        CSV in UTF-8, separated by commas or semicolons.

    Returns
    -------
    Measurements
        Values in the file's own units; only rows without an error.

    Raises
    ------
    CannotRead
        If the file is not there or is no text.
    """
    import pandas as pd

    path = Path(path)
    lines = _lines(path)
    findings: list[Finding] = []
    place = _columns(lines, findings)
    rows = list(_rows(lines[1:], len(lines[0]), place, findings)) if place is not None else []
    frame = pd.DataFrame(rows, columns=[*COLUMNS, "row"])
    frame["date"] = pd.to_datetime(frame["date"])
    frame[["value", "uncertainty"]] = frame[["value", "uncertainty"]].astype(float)
    findings += _repeated(frame)
    frame = frame.drop_duplicates(["place", "date", "quantity", "series"]).reset_index(drop=True)
    return Measurements(frame, [_placed(finding, path.name) for finding in findings], path.name)


def _placed(finding: Finding, name: str) -> Finding:
    """Say the line of the file: the headings are line 1."""
    return finding.at(name if finding.row is None else f"{name} line {finding.row + 2}")


def _lines(path: Path) -> list[list[str]]:
    try:
        if path.stat().st_size > MOST_BYTES:
            raise CannotRead(f"{path} is larger than {MOST_BYTES // 1_000_000} MB")
        text = path.read_text(encoding="utf-8-sig")
    except OSError as error:
        raise CannotRead(f"cannot read {path}: {error.strerror or error}") from error
    except UnicodeDecodeError as error:
        raise CannotRead(f"{path} is not text in UTF-8; save it as 'CSV UTF-8'") from error
    if "\0" in text:
        raise CannotRead(f"{path} is not a text file")
    first = text.split("\n", 1)[0]
    separator = ";" if first.count(";") > first.count(",") else ","
    try:
        lines = list(csv.reader(text.splitlines(), delimiter=separator))
    except csv.Error as error:
        raise CannotRead(f"{path} is no readable CSV: {error}") from error
    return [[_DECIMAL_COMMA.sub(r"\1.\2", cell) for cell in line] for line in lines] if separator == ";" else lines


def _columns(lines: Sequence[Sequence[str]], findings: list[Finding]) -> dict[str, int] | None:
    """Position of every column by its heading; None where a needed one is not there."""
    headings = [text.strip().lower() for text in lines[0]] if lines else []
    place: dict[str, int] = {}
    for position, heading in enumerate(headings):
        if heading in place:
            findings.append(Finding("heading-twice", TABLE, None, heading, heading))
        elif heading in COLUMNS:
            place[heading] = position
        elif heading:
            near = get_close_matches(heading, COLUMNS, n=1)
            findings.append(
                Finding("heading-unknown", TABLE, None, None, heading, detail=f"nearest is '{near[0]}'" if near else "")
            )
    missing = [name for name in NEEDED if name not in place]
    findings += [Finding("column-missing", TABLE, None, name, name) for name in missing]
    if not missing and not any(any(cell.strip() for cell in line) for line in lines[1:]):
        findings.append(Finding("measurements-none", TABLE))
    return None if missing else place


def _rows(
    lines: Sequence[Sequence[str]], columns: int, place: dict[str, int], findings: list[Finding]
) -> Iterator[dict[str, object]]:
    """Rows without an error; every fault of the others is noted."""
    for row, line in enumerate(lines):
        if not any(cell.strip() for cell in line):
            continue
        cells = {name: line[at].strip() if at < len(line) else "" for name, at in place.items()}
        beyond = any(cell.strip() for cell in line[columns:])
        found = [Finding("cells-too-many", TABLE, row, None, len(line))] if beyond else list(_faults(cells, row))
        findings += found
        if any(finding.severity == "error" for finding in found) or cells["value"].lower() in MISSING:
            continue
        yield {
            "place": cells["place"],
            "date": dt.date.fromisoformat(cells["date"]),
            "quantity": cells["quantity"],
            "value": float(cells["value"]),
            "unit": cells["unit"],
            "uncertainty": _number(cells.get("uncertainty", "")),
            "series": cells.get("series") or DEFAULT_SERIES,
            "row": row,
        }


def _faults(cells: dict[str, str], row: int) -> Iterator[Finding]:
    about = f"{cells['place']}, {cells['date']}".strip(", ")

    def fault(code: str, name: str, detail: str = "") -> Finding:
        return Finding(code, TABLE, row, name, cells.get(name) or None, about, detail)

    quantity = quantities().get(cells["quantity"])
    for name in ("place", "date", "quantity", "unit"):
        unitless = name == "unit" and quantity is not None and not quantity.unit
        if not cells[name] and not unitless:
            yield fault("value-missing", name)
    if cells["date"] and _day(cells["date"]) is None:
        yield fault("date-unreadable", "date")
    for name in ("value", "uncertainty"):
        text = cells.get(name, "")
        if text.lower() not in MISSING and not np.isfinite(_number(text)):
            yield fault("text-for-number", name)
    if _number(cells.get("uncertainty", "")) < 0.0:
        yield fault("uncertainty-negative", "uncertainty")
    if cells["quantity"] and (quantity is None or not quantity.unit and quantity.kind == "label"):
        yield fault("measured-quantity-unknown", "quantity", _nearest(cells["quantity"], quantities()))
        quantity = None
    unit = units().get(cells["unit"]) if cells["unit"] else None
    if cells["unit"] and unit is None and not (quantity is not None and not quantity.unit):
        yield fault("unit-unknown", "unit", _nearest(cells["unit"], units()))
    if unit is not None and quantity is not None and not fits(unit, quantity.unit):
        yield fault("unit-wrong", "unit", f"{quantity.name} is in {quantity.unit or 'no unit'}")


def fits(unit: Unit, of_quantity: str) -> bool:
    """Whether numbers in a unit can be turned into the quantity's: of one dimension, or both water or its heat."""
    if not of_quantity:
        return False
    wanted = units()[of_quantity].dimension
    if wanted == "radiation" and unit.dimension in WATER:
        return True
    return unit.dimension == wanted or (wanted in WATER_QUANTITIES and unit.dimension in WATER)


def _nearest(word: str, known: object) -> str:
    near = get_close_matches(word, list(known), n=1)  # type: ignore[call-overload]
    return f"nearest is '{near[0]}'" if near else ""


def _day(text: str) -> dt.date | None:
    try:
        return dt.date.fromisoformat(text)
    except ValueError:
        return None


def _number(text: str) -> float:
    try:
        return float(text)
    except ValueError:
        return np.nan


def _repeated(frame: pd.DataFrame) -> Iterator[Finding]:
    again = frame.duplicated(["place", "date", "quantity", "series"]).to_numpy()
    for row in frame[again].itertuples():
        yield Finding("row-repeated", TABLE, int(row.row), "date", str(row.date)[:10], f"{row.place}, {row.quantity}")
