"""Long weather records in CSV files beside the workbook: found safely, read by the same rules as a sheet."""

from __future__ import annotations

import csv
import hashlib
import io
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path, PurePosixPath, PureWindowsPath

from etflux.workbook.headings import match, nearest, recognised
from etflux.workbook.places import Origin
from etflux.workbook.rows import Block, Row, find_headings, read_rows, say_blank, take_headings
from etflux.workbook.sheet_xml import Cell
from etflux.workbook.sheets import sheet_of

LARGEST_BYTES = 20_000_000
_NUMBER = re.compile(r"[+\-]?(\d+\.?\d*|\.\d+)([eE][+\-]?\d{1,3})?\Z")
_COMMA_NUMBER = re.compile(r"[+\-]?\d+,\d+\Z")


@dataclass(frozen=True)
class Trouble:
    """Why a file cannot be taken: a code and a detail."""

    code: str
    detail: str = ""


def beside(folder: Path, name: str) -> Path | Trouble:
    """File that a relative name means, if it lies inside a folder and is a file.

    Parameters
    ----------
    folder : Path
        Of the workbook.
    name : str
        As a person wrote it; both kinds of slash are understood.

    Returns
    -------
    Path or Trouble
        Trouble for absolute names, names that climb out, links that leave the folder, and what is no file.
    """
    parts = PurePosixPath(name.replace("\\", "/"))
    if parts.is_absolute() or PureWindowsPath(name).drive or ".." in parts.parts or not parts.parts:
        return Trouble("file-outside-folder")
    try:
        home = folder.resolve()
        path = home.joinpath(*parts.parts)
        if not path.resolve().is_relative_to(home):
            return Trouble("file-outside-folder", "a link leads out of it")
        if not path.exists():
            there = [entry.name for entry in home.iterdir() if entry.suffix.lower() == path.suffix.lower()]
            return Trouble("file-missing", nearest(parts.name, there))
        if not path.is_file():
            return Trouble("file-unreadable", "it is not a file")
    except (OSError, RuntimeError, ValueError) as error:
        return Trouble("file-unreadable", str(error))
    return path


def read_file(path: Path, name: str, stations: list[str], system: str) -> Block:
    """Read one CSV file of weather.

    Parameters
    ----------
    path : Path
        Inside the workbook's folder.
    name : str
        As the workbook names it.
    stations : list of str
        Stations that name this file. One: its rows need no station id.
    system : str
        Unit system of the settings.

    Returns
    -------
    Block
        Of the weather table; `station_id` filled in.
    """
    sheet = sheet_of("weather")
    block = Block(sheet, Origin(name, is_sheet=False))
    text = _text(path, block)
    if text is None:
        return block
    delimiter = _delimiter(text)
    lines = list(_lines(text, delimiter, block))
    comma = delimiter == ";" and any(_COMMA_NUMBER.match(word.strip()) for _, words in lines for word in words)
    rows = ((number, _cells(number, words)) for number, words in lines)
    found = find_headings(sheet, (row for row in rows if row[1]))
    if found is None:
        block.say("file-empty")
        return block
    number, heading_cells, rest = found
    if not recognised(sheet, (cell.value for cell in heading_cells)):
        block.say("headings-missing", detail=", ".join(column.label for column in sheet.columns if column.needed))
        return block
    headings = match(sheet, ((cell.column, cell.value) for cell in heading_cells), system)
    if len(stations) == 1:
        headings.problems = [row for row in headings.problems if row[1:3] != ("column-missing", "Station id")]
    take_headings(block, number, headings)
    numeric = {heading.position for heading in headings.found.values() if heading.column.kind == "number"}
    rows_in = _numbers(rest, numeric, comma)
    say_blank(block, read_rows(block, headings, rows_in, {cell.column for cell in heading_cells}, False, True))
    _stations(block, stations)
    return block


def sha256(path: Path) -> str:
    """Hash of a file's bytes."""
    digest = hashlib.sha256()
    with path.open("rb") as stream:
        while chunk := stream.read(1 << 20):
            digest.update(chunk)
    return digest.hexdigest()


def _text(path: Path, block: Block) -> str | None:
    """Content as text: UTF-8, else UTF-16 by its mark, else Latin-1 with a note."""
    try:
        if path.stat().st_size > LARGEST_BYTES:
            block.say("file-unreadable", detail=f"more than {LARGEST_BYTES:,} bytes")
            return None
        content = path.read_bytes()
    except OSError as error:
        block.say("file-unreadable", detail=str(error.strerror or error))
        return None
    if content[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return content.decode("utf-16", errors="replace")
    if b"\0" in content or content.startswith(b"PK"):
        block.say("file-unreadable", detail="it is not a text file")
        return None
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError:
        block.say("file-encoding", detail="read as Latin-1")
        return content.decode("latin-1")


def _delimiter(text: str) -> str:
    """Comma, semicolon or tab: whichever the first lines have most of."""
    head = "\n".join(text.splitlines()[:15])
    bare = re.sub(r'"[^"]*"', "", head)
    if "\t" in bare and bare.count("\t") >= max(bare.count(";"), 1):
        return "\t"
    return ";" if bare.count(";") >= max(1, head.count("\n")) else ","


def _lines(text: str, delimiter: str, block: Block) -> Iterator[tuple[int, list[str]]]:
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter)
    try:
        for words in reader:
            yield reader.line_num, words
    except csv.Error as error:
        block.say("file-unreadable", detail=f"line {reader.line_num}: {error}")


def _cells(number: int, words: list[str]) -> list[Cell]:
    return [Cell(number, place, word.strip(), "text") for place, word in enumerate(words, start=1) if word.strip()]


def _numbers(rows: Iterator[Row], positions: set[int], comma: bool) -> Iterator[Row]:
    """Words in columns of numbers become numbers where they are one in the file's decimal sign; others stay text."""
    for line, cells in rows:
        found = []
        for cell in cells:
            pattern = _COMMA_NUMBER if comma and "," in cell.value else _NUMBER
            if cell.column in positions and pattern.match(cell.value) and not (comma and "." in cell.value):
                cell = Cell(line, cell.column, float(cell.value.replace(",", ".")), "number")
            found.append(cell)
        yield line, found


def _stations(block: Block, stations: list[str]) -> None:
    """Fill the station in, or check that the file's own ids are those that name it."""
    if not block.understood:
        return
    if "station_id" not in block.origin.columns:
        block.columns["station_id"] = [stations[0]] * len(block.rows)
        return
    for row, station_id in enumerate(block.columns["station_id"]):
        if station_id is not None and station_id not in stations:
            block.say("file-other-station", row, "station_id", station_id, f"named by {', '.join(stations)}")
            block.columns["station_id"][row] = None
