"""Which column a heading means, and in which unit; the same for sheets and for CSV files."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import cache
from typing import Any

from etflux.variables import Unit, units
from etflux.workbook.sheets import Column, Sheet

_WITH_UNIT = re.compile(r"(.*\S)\s*[(\[]([^()\[\]]*)[)\]]$", re.DOTALL)
NO_UNIT = {"", "-", "–", "1"}


@dataclass(frozen=True)
class Heading:
    """A heading of the file at a position counted from 1, the column it means, and the unit its numbers have."""

    position: int
    text: str
    column: Column
    unit: str = ""


@dataclass
class Headings:
    """Headings that were understood, by column name; and what was wrong: (position or None, code, value, detail)."""

    found: dict[str, Heading] = field(default_factory=dict)
    problems: list[tuple[int | None, str, Any, str]] = field(default_factory=list)


def plain(text: object) -> str:
    """Words in lower case with single spaces, for comparing.

    Examples
    --------
    >>> plain("  Highest\\n temperature ")
    'highest temperature'
    """
    return " ".join(str(text).split()).casefold()


def nearest(word: str, known: Iterable[str], cutoff: float = 0.6) -> str:
    """The known word that is most like another, as a phrase; empty if none is.

    Examples
    --------
    >>> nearest("silt_lom", ["loam", "silt_loam"])
    "the nearest known is 'silt_loam'"
    """
    spelled = {plain(name): name for name in known}
    close = get_close_matches(plain(word), spelled, n=1, cutoff=cutoff)
    return f"the nearest known is {spelled[close[0]]!r}" if close else ""


@cache
def _known_units() -> Mapping[str, Unit | None]:
    """Units by spelling, and by spelling in lower case where that is not ambiguous (None)."""
    found: dict[str, Unit | None] = {}
    for spelling, unit in units().items():
        key = plain(spelling)
        found[key] = unit if found.get(key, unit) is unit else None
    return found | dict(units())


def unit_of(text: str) -> Unit | None:
    """Unit of a spelling; None if it is not known.

    Examples
    --------
    >>> unit_of("degF").symbol, unit_of("MJ/m2/Day").symbol, unit_of("furlong")
    ('°F', 'MJ/m²/day', None)
    """
    words = " ".join(text.split())
    return _known_units().get(words) or _known_units().get(plain(words))


def parted(text: object) -> tuple[str, str | None]:
    """Label and unit of a heading; None without brackets.

    Examples
    --------
    >>> parted("Wind speed (m/s)"), parted("Rain")
    (('Wind speed', 'm/s'), ('Rain', None))
    """
    words = " ".join(str(text).split())
    match = _WITH_UNIT.match(words)
    return (match[1], match[2].strip()) if match else (words, None)


@cache
def _names(sheet: Sheet) -> Mapping[str, Column]:
    """Columns of a sheet by every name that a heading may call them."""
    found: dict[str, Column] = {}
    for column in sheet.columns:
        for name in (column.label, column.quantity.label, column.name):
            found.setdefault(plain(name), column)
    return found


def recognised(sheet: Sheet, texts: Iterable[object]) -> int:
    """How many of some texts are headings of a sheet."""
    names = _names(sheet)
    return sum(plain(parted(text)[0]) in names or plain(text) in names for text in texts)


def match(sheet: Sheet, texts: Iterable[tuple[int, object]], system: str) -> Headings:
    """Columns and units that the headings of a sheet mean.

    Parameters
    ----------
    sheet : Sheet
    texts : iterable of (position, text)
    system : str
        Unit system of the settings; a column in the other one is doubtful.

    Returns
    -------
    Headings
        Needed columns that are missing are among the problems, with no position.
    """
    names, result = _names(sheet), Headings()
    for position, text in texts:
        label, unit = parted(text)
        column = names.get(plain(label)) or names.get(plain(text))
        if column is None:
            missing = [name.label for name in sheet.columns]
            result.problems.append((position, "heading-unknown", text, nearest(label, missing)))
        elif column.name in result.found:
            result.problems.append((position, "heading-twice", text, ""))
        else:
            by_name = plain(label) == column.name
            known, trouble = _unit(column, unit, system, by_name)
            result.found[column.name] = Heading(position, str(text), column, known)
            if trouble:
                result.problems.append((position, trouble[0], text, trouble[1]))
    for column in sheet.columns:
        if column.needed and column.name not in result.found:
            result.problems.append((None, "column-missing", column.label, ""))
    return result


def _unit(column: Column, unit: str | None, system: str, by_name: bool) -> tuple[str, tuple[str, str] | None]:
    """Symbol of a column's unit ("" when there is none or it cannot be told), and what is wrong with it."""
    row = column.quantity
    if column.kind != "number":
        return "", None
    if not row.unit:
        return "", None if unit is None or unit in NO_UNIT else ("unit-unknown", f"{column.label} has no unit")
    if unit is None:
        return (row.unit, None) if by_name else ("", ("unit-missing", f"usual are {_usual(column)}"))
    known = unit_of(unit)
    if known is None:
        return "", ("unit-unknown", f"usual are {_usual(column)}")
    if known.dimension != units()[row.unit].dimension:
        return "", ("unit-wrong", f"{unit} is a unit of {known.dimension}; usual are {_usual(column)}")
    mine, other = (row.unit, row.us_unit) if system == "si" else (row.us_unit, row.unit)
    if system and other and known.symbol == other and other != mine and not by_name:
        return known.symbol, ("unit-other-system", f"the settings say {'SI' if system == 'si' else 'US'} units")
    return known.symbol, None


def _usual(column: Column) -> str:
    row = column.quantity
    return " or ".join(dict.fromkeys(unit for unit in (row.unit, row.us_unit) if unit))
