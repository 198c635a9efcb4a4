"""A filled workbook, and the CSV files beside it, to a case; everything that is wrong with them, each at its cell."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.case import Case, Settings
from etflux.findings import Finding
from etflux.workbook import profile_files
from etflux.workbook.cells import Book, Limits, open_book
from etflux.workbook.county_outlines import MEASURED, with_outlines
from etflux.workbook.headings import nearest, plain
from etflux.workbook.places import Places
from etflux.workbook.rows import Block, frame, read_sheet
from etflux.workbook.settings_sheet import read_settings
from etflux.workbook.sheets import (
    CHOICES,
    FREE_TEXT,
    READ_FIRST,
    SETTINGS,
    VERSION,
    VERSION_LABEL,
    VERSION_PROPERTY,
    Sheet,
    packaged_rows,
    sheet_of,
    sheets,
)  # fmt: skip
from etflux.workbook.weather_files import Trouble, beside, read_file, sha256

if TYPE_CHECKING:
    import pandas as pd

    Progress = Callable[[str, float], None]

SUBJECTS = {  # what a row of each table is about
    "stations": ("station", "station_id"), "weather": ("station", "station_id"), "rain_gauges": ("county", "county_id"),
    "counties": ("county", "county_id"), "rest": ("county", "county_id"), "soils": ("soil", "soil_id"),
    "covers": ("cover", "cover_id"), "stands": ("stand", "stand_id"), "irrigation_events": ("stand", "stand_id"),
    "irrigation_rules": ("rule", "rule_id"), "observations": ("stand", "stand_id"),
    "mixing_depths": ("county", "county_id"), "profiles": ("site", "site_id"), "wind": ("county", "county_id"),
    "background_air": ("day", "date"),
}  # fmt: skip


def read(
    path: Path | str, limits: Limits | None = None, progress: Progress | None = None
) -> tuple[Case | None, list[Finding], Places]:
    """Read a filled workbook.

    Parameters
    ----------
    path : path
        An .xlsx (or .xlsm) file; it is not changed.
    limits : Limits, optional
        Larger ones for larger workbooks.
    progress : callable, optional
        Called with what is being read and the share done.

    Returns
    -------
    case : Case or None
        What could be understood, cells with errors blank; None if the file has no sheet of the template. With errors
        among the findings it serves only for further checks.
    findings : list of Finding
        Each with its place.
    places : Places
        Where every row of the case stands.

    Raises
    ------
    CannotRead
        If the file is not a workbook that can be read.
    """
    path = Path(path)
    tell = progress or (lambda step, share: None)
    book = open_book(path, limits)
    places = Places(titles={sheet.table: sheet.title for sheet in sheets()} | {"settings": SETTINGS})
    titles, findings = _titles(book)
    if not titles.keys() - {"settings"}:
        known = ", ".join(sheet.title for sheet in sheets() if sheet.need == "needed")
        return None, [Finding("sheets-missing", "workbook", detail=known, place=path.name)], places
    places.titles |= titles
    version, said = _version(book)
    findings += said
    settings, system, said = Settings(), "", [Finding("settings-missing", "settings", place=SETTINGS)]
    if "settings" in titles:
        settings, system, said = read_settings(book, titles["settings"], path.parent, places)
    findings += said
    blocks: dict[str, list[Block]] = {}
    for number, sheet in enumerate(sheets()):
        if sheet.table in titles:
            told = partial(_tell, tell, number / len(sheets()))
            blocks[sheet.table] = [read_sheet(book, titles[sheet.table], sheet, system, told)]
    files, said = _weather_files(blocks, path.parent, system, places)
    findings += said
    balloons, said = _profile_files(settings, blocks, path.parent, limits, places)
    findings += said
    tell("reading done", 1.0)
    findings += _missing(blocks, places)
    tables, said = _tables(blocks, places)
    findings += said
    unread = {(found.row, found.quantity) for found in findings if found.table == "counties" and found.row is not None}
    tables["counties"], drawn, said = with_outlines(settings, tables["counties"], path.parent, unread)
    findings = _without_needless(findings + [places.placed(finding) for finding in said], tables["counties"])
    source = {"path": str(path), "sha256": sha256(path), "template_version": version, "weather_files": files}
    source["profile_files"] = balloons
    if drawn and settings.outlines_file:
        file = beside(path.parent, settings.outlines_file)
        source["outlines_file"] = {} if isinstance(file, Trouble) else {settings.outlines_file: sha256(file)}
    return Case(settings, tables, source, drawn), findings, places


def _without_needless(findings: list[Finding], counties: pd.DataFrame) -> list[Finding]:
    """Findings without those on a column of areas or places that is not there: said once, or not when all is filled."""
    labels = {column.label: column.name for column in sheet_of("counties").columns if column.name in MEASURED}
    gone = {
        labels[found.value]: bool(counties[labels[found.value]].notna().all())
        for found in findings
        if (found.table, found.code) == ("counties", "column-missing") and found.value in labels
    }
    return [
        found
        for found in findings
        if found.table != "counties"
        or not (found.code == "column-missing" and gone.get(labels.get(found.value, "")))
        and not (found.code == "value-missing" and found.quantity in gone)
    ]


def _tell(tell: Progress, share: float, step: str) -> None:
    tell(step, share)


def _titles(book: Book) -> tuple[dict[str, str], list[Finding]]:
    """Title in the file of every sheet that is known, by table; notes on the others."""
    known = {plain(sheet.title): sheet.table for sheet in sheets()} | {plain(SETTINGS): "settings"}
    found: dict[str, str] = {}
    others = []
    for title in book.sheets:
        table = known.get(plain(title))
        if table and table not in found:
            found[table] = title
        elif plain(title) not in (plain(READ_FIRST), plain(CHOICES)):
            others.append(title)
    free = [sheet.title for sheet in sheets() if sheet.table not in found]
    return found, [
        Finding("sheet-unknown", "workbook", None, None, title, "", nearest(title, free), title) for title in others
    ]


def _version(book: Book) -> tuple[int | None, list[Finding]]:
    """Version of the template: the property, or the cell that anyone can see."""
    said: Any = book.properties.get(VERSION_PROPERTY)
    title = next((title for title in book.sheets if plain(title) == plain(READ_FIRST)), None)
    if said is None and title is not None:
        cells = list(book.cells(title))
        label = next((cell for cell in cells if plain(cell.value) == plain(VERSION_LABEL)), None)
        beside_it = [cell.value for cell in cells if label and (cell.row, cell.column) == (label.row, label.column + 1)]
        said = beside_it[0] if beside_it else None
    try:
        version = int(float(said))
    except (TypeError, ValueError, OverflowError):
        return None, [Finding("template-version-unknown", "workbook", place=title or READ_FIRST)]
    if version > VERSION:
        return version, [Finding("template-version-newer", "workbook", None, None, version, place=title or READ_FIRST)]
    return version, []


def _weather_files(
    blocks: dict[str, list[Block]], folder: Path, system: str, places: Places
) -> tuple[dict[str, str], list[Finding]]:
    """Read every CSV file that stations name, once each; hash of each."""
    if not blocks.get("stations"):
        return {}, []
    station = blocks["stations"][0]
    named: dict[str, list[int]] = {}
    for row, name in enumerate(station.columns.get("weather_file", [])):
        if name:
            named.setdefault(name, []).append(row)
    hashes: dict[str, str] = {}
    for name, at in named.items():
        path = beside(folder, name)
        if isinstance(path, Trouble):
            for row in at:
                station.say(path.code, row, "weather_file", name, path.detail)
            continue
        ids = [station.columns["station_id"][row] for row in at]
        ids = [station_id for station_id in ids if station_id is not None]
        if ids:
            block = read_file(path, name, ids, system)
            blocks.setdefault("weather", []).append(block)
            places.files |= dict.fromkeys(ids, name)
            hashes[name] = sha256(path)
    return hashes, []


def _profile_files(
    settings: Settings, blocks: dict[str, list[Block]], folder: Path, limits: Limits | None, places: Places
) -> tuple[dict[str, str], list[Finding]]:
    """Read every file of soundings that the settings name, for the days of the weather; hash of each."""
    cells = [cell for block in blocks.get("weather", []) for cell in block.columns.get("date", []) if cell is not None]
    if not settings.profile_files or not cells:
        return {}, []
    days = np.array(cells, dtype="datetime64[D]")
    first = max(days.min(), np.datetime64(settings.season_start or days.min(), "D"))
    last = min(days.max(), np.datetime64(settings.season_end or days.max(), "D"))
    hashes: dict[str, str] = {}
    said = []
    for name in profile_files.names(settings.profile_files):
        path = beside(folder, name)
        if isinstance(path, Trouble):
            where = places.of("settings", None, "profile_files")
            said.append(Finding(path.code, "settings", None, "profile_files", name, "", path.detail, where))
            continue
        blocks.setdefault("profiles", []).append(profile_files.read_file(path, name, first, last, limits))
        hashes[name] = sha256(path)
    return hashes, said


def _missing(blocks: dict[str, list[Block]], places: Places) -> list[Finding]:
    """Needed sheets that are not there, or have no rows."""
    found = []
    for sheet in sheets():
        if sheet.need != "needed":
            continue
        read_blocks = blocks.get(sheet.table)
        if not read_blocks:
            found.append(Finding("sheet-missing", sheet.table, place=sheet.title))
        elif not any(block.rows for block in read_blocks) and not any(
            finding.severity == "error" for block in read_blocks for finding in block.findings
        ):
            found.append(Finding("sheet-empty", sheet.table, place=places.titles[sheet.table]))
    return found


def _tables(blocks: dict[str, list[Block]], places: Places) -> tuple[dict[str, pd.DataFrame], list[Finding]]:
    """Tables of the case, places of their rows, and the findings with the rows counted in the whole table."""
    import pandas as pd

    tables, findings = {}, []
    for sheet in sheets():
        own = blocks.get(sheet.table, [])
        table = frame(sheet, own)
        places.rows[sheet.table] = [(block.origin, row) for block in own for row in block.rows]
        places.origins[sheet.table] = [block.origin for block in own]
        offset = 0
        for block in own:
            for finding in block.findings:
                row = None if finding.row is None else finding.row + offset
                subject = "" if row is None else subject_of(sheet.table, table, row)
                findings.append(replace(finding, row=row, subject=subject))
            offset += len(block.rows)
        if sheet.need == "ready":
            packaged = _packaged(sheet)
            faulty = {(found.row, found.quantity) for found in findings if found.table == sheet.table}
            findings += _changed(sheet, table, packaged, faulty)
            rest = packaged[~packaged[sheet.columns[0].name].isin(table[sheet.columns[0].name])]
            pieces = [piece for piece in (table, rest) if len(piece)]
            table = pd.concat(pieces, ignore_index=True) if pieces else packaged
        tables[sheet.table] = table
    return tables, [places.placed(finding) for finding in findings]


def subject_of(table: str, rows: pd.DataFrame, row: int) -> str:
    """What a row is about, in words: "station N2, 2031-07-03"."""
    word, key = SUBJECTS[table]
    named = rows[key].iloc[row]
    parts = [f"{word} {named}"] if named is not None else []
    for name, digits in (("date", 10), ("time", 16)):
        if name in rows and rows[name].notna().iloc[row]:
            parts.append(str(rows[name].iloc[row])[:digits])
    return ", ".join(parts)


def _packaged(sheet: Sheet) -> pd.DataFrame:
    """The package's own rows with the types of a case's table."""
    import pandas as pd

    rows = packaged_rows(sheet.table)
    found = {}
    for column in sheet.columns:
        words = [row[column.name] or None for row in rows]
        if column.kind == "number":
            found[column.name] = np.array([np.nan if word is None else float(word) for word in words])
        else:
            found[column.name] = np.array(words, dtype=object)
    return pd.DataFrame(found)


def _changed(
    sheet: Sheet, table: pd.DataFrame, packaged: pd.DataFrame, said: set[tuple[int | None, str | None]]
) -> list[Finding]:
    """Notes on rows of the package that the workbook has with other values; nothing on cells with faults."""
    key = sheet.columns[0].name
    row_of = {name: row for row, name in enumerate(packaged[key])}
    known = [(row, row_of[name]) for row, name in enumerate(table[key]) if name in row_of]
    found = []
    for column in sheet.columns[1:]:
        mine, theirs = table[column.name].tolist(), packaged[column.name].tolist()
        if column.name in FREE_TEXT or all(_blank(value) for value in mine):
            continue
        for row, place in known:
            if (row, column.name) in said or _alike(mine[row], theirs[place]):
                continue
            detail = f"packaged: {'blank' if _blank(theirs[place]) else theirs[place]}"
            shown = None if _blank(mine[row]) else mine[row]
            about = subject_of(sheet.table, table, row)
            found.append(Finding("packaged-row-changed", sheet.table, row, column.name, shown, about, detail))
    return found


def _blank(value: Any) -> bool:
    return value is None or value != value


def _alike(mine: Any, theirs: Any) -> bool:
    """Whether two cells say the same, numbers as far as a change of units leaves them."""
    if _blank(mine) or _blank(theirs):
        return _blank(mine) and _blank(theirs)
    return math.isclose(mine, theirs, rel_tol=1e-6) if isinstance(mine, float) else bool(mine == theirs)
