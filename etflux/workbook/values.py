"""What a cell's content means in its column, or why it means nothing. Nothing is ever guessed.

Every function takes a cell and returns the value, and a code of ``tables/findings.toml`` with a detail where there is
something to say; the value is None where the code is an error's.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Callable, Mapping
from typing import Any, NamedTuple

from etflux.workbook.headings import nearest, plain
from etflux.workbook.sheet_xml import Cell, from_serial
from etflux.workbook.sheets import FREE_TEXT, Column


class Taken(NamedTuple):
    """A value, and what is to be said about it."""

    value: Any
    code: str = ""
    detail: str = ""


MISSING_MARKS = {"na", "n/a", "nan", "null", "missing", "-", "--", "—", "–"}
LONGEST_ID, LONGEST_TEXT = 64, 500
_ID = re.compile(r"[A-Za-z0-9_.\-]+\Z")
_NUMBER_LIKE = re.compile(r"[+\-−]?[\d.,'\s]*\d[\d.,'\s]*([eE][+\-]?\d+)?\s*(%|[A-Za-z°/²³\d]{0,12})\Z")
_ISO_DATE = re.compile(r"(\d{4})-(\d{2})-(\d{2})(?:[T ]00:00(?::00(?:\.0+)?)?)?\Z")
_DAY_MONTH = re.compile(r"\d{1,4}[/.\-]\d{1,2}[/.\-]\d{1,4}\Z")
_ZONE = re.compile(r"(.*\d)\s*(Z|UTC|GMT|[+\-]\d{2}:?\d{2})\Z", re.IGNORECASE)
_CODE_LIKE = re.compile(r"[=+\-@\t\r]|.*<[A-Za-z!/]", re.DOTALL)
FIRST_YEAR, LAST_YEAR = 1850, 2200
FIRST_YEAR_OF_NUMBERS = 1950  # a plain 153 is a day of the year and not 1900-06-01


def _not_a_value(cell: Cell) -> Taken | None:
    """Cells that mean nothing in any column."""
    if cell.kind == "error":
        return Taken(None, "cell-error")
    if cell.kind == "formula":
        return Taken(None, "formula-not-calculated")
    return None


def number(cell: Cell, column: Column, epoch_1904: bool) -> Taken:
    """A number; text that looks like one is never read as one."""
    if cell.kind == "number":
        return Taken(cell.value)
    if bad := _not_a_value(cell):
        return bad
    if cell.kind == "date":
        return Taken(None, "date-for-number")
    if cell.kind == "bool":
        return Taken(None, "yes-no-for-number")
    if plain(cell.value) in MISSING_MARKS:
        return Taken(None, "missing-mark")
    if _NUMBER_LIKE.match(cell.value.strip()):
        return Taken(None, "number-as-text")
    return Taken(None, "text-for-number")


def date(cell: Cell, column: Column, epoch_1904: bool) -> Taken:
    """A calendar day: a date cell, a plain day number of the workbook, or text as 2031-07-24."""
    if bad := _not_a_value(cell):
        return bad
    if cell.kind == "bool":
        return Taken(None, "date-unreadable")
    code, when = "", cell.value
    if cell.kind == "number":
        whole = float(cell.value).is_integer()
        when, code = (from_serial(cell.value, epoch_1904) if whole else None), "date-as-number"
        if when is None:
            return Taken(None, "date-unreadable")
        if when.year < FIRST_YEAR_OF_NUMBERS:
            return Taken(None, "date-implausible", f"as a day number it is {when.date()}")
    if cell.kind == "text":
        words = cell.value.strip()
        match = _ISO_DATE.match(words)
        if not match:
            return Taken(None, "date-ambiguous" if _DAY_MONTH.match(words) else "date-unreadable")
        try:
            when, code = dt.datetime(int(match[1]), int(match[2]), int(match[3])), "date-as-text"
        except ValueError:
            return Taken(None, "date-unreadable", "there is no such day")
    if not FIRST_YEAR <= when.year < LAST_YEAR:
        return Taken(None, "date-implausible", f"it reads as {when.date()}")
    if when.time() != dt.time(0):
        return Taken(when.replace(hour=0, minute=0, second=0, microsecond=0), "date-with-time")
    return Taken(when, code)


def time(cell: Cell, column: Column, epoch_1904: bool) -> Taken:
    """A moment in UTC: a date cell, or text as 2031-07-24T06:30-05:00."""
    if bad := _not_a_value(cell):
        return bad
    if cell.kind == "date":
        when, code = cell.value, ""
    elif cell.kind == "text":
        match = _ZONE.match(cell.value.strip())
        words, zone = (match[1], match[2].upper()) if match else (cell.value.strip(), "")
        try:
            when = dt.datetime.fromisoformat(words)
            if zone and zone not in ("Z", "UTC", "GMT"):
                hours, minutes = int(zone[:3]), int(zone[0] + zone[-2:])
                when -= dt.timedelta(hours=hours, minutes=minutes)
        except (ValueError, OverflowError):
            return Taken(None, "date-ambiguous" if _DAY_MONTH.match(words.split(" ")[0]) else "date-unreadable")
        if when.tzinfo is not None:
            return Taken(None, "date-unreadable")
        code = "" if zone else "time-without-zone"
    else:
        return Taken(None, "date-unreadable")
    if not FIRST_YEAR <= when.year < LAST_YEAR:
        return Taken(None, "date-implausible", f"it reads as {when:%Y-%m-%d %H:%M}")
    return Taken(when, code)


def identifier(cell: Cell, column: Column, epoch_1904: bool) -> Taken:
    """An id as text; whole numbers become text, and county ids of four digits get their leading zero."""
    if bad := _not_a_value(cell):
        return bad
    if cell.kind == "date":
        return Taken(None, "date-for-id")
    if cell.kind == "number":
        if not float(cell.value).is_integer() or abs(cell.value) >= 1e15:
            return Taken(None, "id-characters")
        words = str(int(cell.value))
    else:
        words = str(cell.value).strip()
    if len(words) > LONGEST_ID:
        return Taken(None, "id-long")
    if cell.kind == "bool" or not _ID.match(words):
        return Taken(None, "id-characters")
    if column.name == "county_id" and len(words) == 4 and words.isdigit():
        return Taken("0" + words, "id-padded")
    return Taken(words)


def choice(cell: Cell, column: Column, epoch_1904: bool) -> Taken:
    """One of the words that the column takes."""
    if bad := _not_a_value(cell):
        return bad
    words = {plain(word): word for word in column.choices}
    said = str(cell.value)
    if cell.kind == "bool" and set(words) == {"yes", "no"}:
        said = "yes" if cell.value else "no"
    if cell.kind == "number":
        said = f"{cell.value:g}"
    found = words.get(plain(said))
    if found is None:
        return Taken(None, "choice-unknown", nearest(said, column.choices) or f"one of: {', '.join(column.choices)}")
    return Taken(found)


def yes_no(cell: Cell, column: Column, epoch_1904: bool) -> Taken:
    """Yes or no as a truth value."""
    if bad := _not_a_value(cell):
        return bad
    if cell.kind == "bool":
        return Taken(bool(cell.value))
    word = plain(cell.value)
    if word in ("yes", "no"):
        return Taken(word == "yes")
    return Taken(None, "choice-unknown", "yes or no")


def text(cell: Cell, column: Column, epoch_1904: bool) -> Taken:
    """Words, kept as they are, without control characters."""
    if bad := _not_a_value(cell):
        return bad
    words = f"{cell.value:%Y-%m-%d}" if cell.kind == "date" else str(cell.value)
    if cell.kind == "number":
        words = f"{cell.value:.15g}"
    words = "".join(sign if sign.isprintable() else " " for sign in words).strip()
    if len(words) > LONGEST_TEXT:
        return Taken(None, "text-long", f"{len(words)} characters")
    if column.name in FREE_TEXT and _CODE_LIKE.match(words):
        return Taken(words, "text-like-code")
    return Taken(words)


TAKE: Mapping[str, Callable[[Cell, Column, bool], Taken]] = {
    "number": number, "date": date, "time": time, "id": identifier, "choice": choice, "yes or no": yes_no,
    "text": text, "file": text,
}  # fmt: skip
