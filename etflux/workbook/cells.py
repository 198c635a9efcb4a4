"""The guarded reader of cells: opens an .xlsx file, refuses what is not one, and yields its cells one by one.

Sheets and shared texts are streamed with expat, which takes one pass where a spreadsheet library needs two (stored
values, formulas) and never builds the rows between a table and a stray cell far below it. Any document type
declaration is refused, so no entity can expand; the small parts are read by defusedxml under the same rule. Nothing
is ever calculated, no link followed, no macro looked at.
"""

from __future__ import annotations

import datetime as dt
import re
import zipfile
import zlib
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath
from typing import IO, Any, Literal, NamedTuple
from xml.etree.ElementTree import Element, ParseError
from xml.parsers import expat

from defusedxml.common import DefusedXmlException
from defusedxml.ElementTree import fromstring

from etflux.findings import CannotRead

CellKind = Literal["blank", "number", "text", "date", "bool", "error", "formula"]
LAST_ROW, LAST_COLUMN = 1_048_576, 16_384
LAST_SERIAL = 2_958_466  # the day after 9999-12-31
CHUNK = 1 << 16


@dataclass(frozen=True)
class Limits:
    """What a workbook may take, before and while it is read.

    Parameters
    ----------
    file_bytes, unpacked_bytes : int
        Size of the file, and of everything in it.
    members : int
        Files within the file.
    ratio : int
        Unpacked over packed size of any member above 1 MB.
    cells : int
        Cells and rows of all sheets that are read, and texts.
    """

    file_bytes: int = 200_000_000
    unpacked_bytes: int = 1_000_000_000
    members: int = 5_000
    ratio: int = 400
    cells: int = 5_000_000


class Cell(NamedTuple):
    """One cell. `kind` "formula" is one without a stored value; "error" has the error's text as its value."""

    row: int
    column: int
    value: Any
    kind: CellKind

    @property
    def address(self) -> str:
        """Column letters and row number."""
        return f"{letters(self.column)}{self.row}"


def letters(column: int) -> str:
    """Letters of a column counted from 1.

    Examples
    --------
    >>> letters(1), letters(28), letters(16384)
    ('A', 'AB', 'XFD')
    """
    found = ""
    while column:
        column, rest = divmod(column - 1, 26)
        found = chr(65 + rest) + found
    return found


_REFERENCE = re.compile(r"\$?([A-Za-z]{1,3})\$?([0-9]{1,7})\Z")


def position(reference: str) -> tuple[int, int]:
    """Row and column of an address, counted from 1; ValueError if it is none.

    Examples
    --------
    >>> position("AB7")
    (7, 28)
    """
    match = _REFERENCE.match(reference)
    if not match:
        raise ValueError(f"{reference!r} is not a cell's address")
    column = 0
    for letter in match[1].upper():
        column = 26 * column + ord(letter) - 64
    row = int(match[2])
    if not (1 <= row <= LAST_ROW and column <= LAST_COLUMN):
        raise ValueError(f"{reference!r} is outside a sheet")
    return row, column


def from_serial(serial: float, epoch_1904: bool) -> dt.datetime | None:
    """Date and time of a spreadsheet's day number; None if it stands for none.

    Examples
    --------
    >>> from_serial(48053.25, False)
    datetime.datetime(2031, 7, 24, 6, 0)
    >>> from_serial(60.0, False) is None  # 29 February 1900, which never was
    True
    """
    if not 0.0 <= serial < LAST_SERIAL - (1462 if epoch_1904 else 0):
        return None
    day = int(serial)
    seconds = round((serial - day) * 86400.0)
    if epoch_1904:
        start = dt.datetime(1904, 1, 1)
    elif day == 60:
        return None
    else:
        start = dt.datetime(1899, 12, 31 if day < 60 else 30)
    try:
        return start + dt.timedelta(days=day, seconds=seconds)
    except OverflowError:
        return None


# --- opening ---

_OLE = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"
_SAVE_AS = "Open it in a spreadsheet program and save it as .xlsx."


@contextmanager
def _told(path: Path) -> Iterator[None]:
    """Turn what goes wrong inside a damaged or hostile file into one sentence with a remedy."""
    try:
        yield
    except DefusedXmlException as error:
        raise CannotRead(
            f"{path.name} declares a document type or entities, which no spreadsheet program writes. {_SAVE_AS}"
        ) from error
    except (
        zipfile.BadZipFile, zlib.error, EOFError, ParseError, expat.ExpatError, KeyError, IndexError, ValueError,
        OverflowError, NotImplementedError,
    ) as error:  # fmt: skip
        raise CannotRead(f"{path.name} is damaged or was cut short. Copy it again from where it came from.") from error
    except RuntimeError as error:
        raise CannotRead(f"{path.name} is locked by a password. Save a copy without one.") from error
    except OSError as error:
        raise CannotRead(f"cannot read {path}: {error.strerror or error}") from error


@dataclass
class Book:
    """An opened workbook: its sheets by title in their order, custom properties, epoch.

    `cells` streams one sheet; `merged` of a sheet is known once its cells have been read.
    """

    path: Path
    limits: Limits
    epoch_1904: bool
    sheets: Mapping[str, str]
    properties: Mapping[str, str]
    date_styles: list[bool]
    texts_member: str | None
    merged: dict[str, list[str]] = field(default_factory=dict)
    counted: int = 0
    _texts: list[str] | None = None

    def count(self, number: int = 1) -> None:
        """Count cells, rows and texts against the limit."""
        self.counted += number
        if self.counted > self.limits.cells:
            raise CannotRead(
                f"{self.path.name} has more than {self.limits.cells:,} cells. Delete the rows and columns that look "
                "empty but are not, or move long records to CSV files beside it."
            )

    def cells(self, title: str) -> Iterator[Cell]:
        """Every cell of a sheet that is not blank, row by row."""
        with _told(self.path), zipfile.ZipFile(self.path) as archive:
            if self._texts is None:
                self._texts = self._shared_texts(archive)
            handlers = _SheetHandlers(self, self._texts)
            with archive.open(self.sheets[title]) as stream:
                for _ in _stream(stream, handlers):
                    yield from handlers.ready
                    handlers.ready.clear()
            yield from handlers.ready
            self.merged[title] = handlers.merged

    def _shared_texts(self, archive: zipfile.ZipFile) -> list[str]:
        if self.texts_member is None or self.texts_member not in archive.namelist():
            return []
        handlers = _TextHandlers(self)
        with archive.open(self.texts_member) as stream:
            for _ in _stream(stream, handlers):
                pass
        return handlers.texts


def open_book(path: Path | str, limits: Limits | None = None) -> Book:
    """Open a workbook after looking at what kind of file it is and how large it would become.

    Parameters
    ----------
    path : path
    limits : Limits, optional

    Returns
    -------
    Book

    Raises
    ------
    CannotRead
        With what to do about it.
    """
    path, limits = Path(path), limits or Limits()
    with _told(path):
        if not path.exists():
            raise CannotRead(f"{path} is not there. Check the name and the folder.")
        if not path.is_file():
            raise CannotRead(f"{path} is not a file.")
        _refuse_other_kinds(path, limits)
        with zipfile.ZipFile(path) as archive:
            names = set(archive.namelist())
            _refuse_other_archives(path, archive, names)
            _refuse_large(path, archive, limits)
            return _contents(path, archive, names, limits)


def _refuse_other_kinds(path: Path, limits: Limits) -> None:
    size = path.stat().st_size
    if size > limits.file_bytes:
        raise CannotRead(
            f"{path.name} has {size:,} bytes, more than {limits.file_bytes:,}. Move long records to CSV files."
        )
    if not size:
        raise CannotRead(f"{path.name} is empty. Copy it again from where it came from.")
    with path.open("rb") as stream:
        head = stream.read(4096)
        if head.startswith(_OLE):
            if "EncryptedPackage".encode("utf-16-le") in head + stream.read(limits.file_bytes):
                raise CannotRead(f"{path.name} is locked by a password. Save a copy without one.")
            raise CannotRead(f"{path.name} is in the old .xls format. {_SAVE_AS}")
    if head.startswith(b"PK"):
        return
    if b"\0" not in head and not head.startswith((b"%PDF", b"\x1f\x8b", b"\xff\xd8")):
        raise CannotRead(f"{path.name} is a text file (CSV?) and not a workbook, whatever its name says. {_SAVE_AS}")
    raise CannotRead(f"{path.name} is not a workbook. {_SAVE_AS}")


def _refuse_other_archives(path: Path, archive: zipfile.ZipFile, names: set[str]) -> None:
    if "mimetype" in names and archive.read("mimetype")[:40].startswith(b"application/vnd.oasis.opendocument"):
        raise CannotRead(f"{path.name} is an OpenDocument file. {_SAVE_AS}")
    if "xl/workbook.bin" in names:
        raise CannotRead(f"{path.name} is in the binary .xlsb format. {_SAVE_AS}")
    if "_rels/.rels" not in names:
        raise CannotRead(f"{path.name} is an archive but not a workbook. {_SAVE_AS}")


def _refuse_large(path: Path, archive: zipfile.ZipFile, limits: Limits) -> None:
    members = archive.infolist()
    unpacked = sum(member.file_size for member in members)
    swollen = any(
        member.file_size > 1_000_000 and member.file_size > limits.ratio * max(member.compress_size, 1)
        for member in members
    )
    if len(members) > limits.members or unpacked > limits.unpacked_bytes or swollen:
        raise CannotRead(
            f"{path.name} would unpack to {unpacked:,} bytes in {len(members):,} parts, which no season needs. Copy "
            "its tables to a new template, values only."
        )


def _contents(path: Path, archive: zipfile.ZipFile, names: set[str], limits: Limits) -> Book:
    """Sheets and what is needed to read their cells."""
    main = next(
        (target for kind, target in _relations(archive, "").values() if kind == "officeDocument"), "xl/workbook.xml"
    )
    if main not in names:
        raise CannotRead(f"{path.name} is an archive but not a workbook. {_SAVE_AS}")
    relations = _relations(archive, main)
    of_kind = dict(relations.values())
    book = fromstring(archive.read(main), forbid_dtd=True)
    sheets, epoch_1904 = {}, False
    for element in book.iter():
        tag = _local(element.tag)
        if tag == "workbookPr":
            epoch_1904 = element.get("date1904", "0") in ("1", "true")
        if tag == "sheet":
            key = next((value for name, value in element.attrib.items() if _local(name) == "id"), "")
            kind, target = relations.get(key, ("", ""))
            if kind == "worksheet":
                sheets[element.get("name", "")] = target
    styles = of_kind.get("styles")
    custom = "docProps/custom.xml"
    return Book(
        path,
        limits,
        epoch_1904,
        sheets,
        _properties(fromstring(archive.read(custom), forbid_dtd=True)) if custom in names else {},
        _date_styles(fromstring(archive.read(styles), forbid_dtd=True)) if styles in names else [],
        of_kind.get("sharedStrings"),
    )


def _relations(archive: zipfile.ZipFile, member: str) -> dict[str, tuple[str, str]]:
    """Kind and target of every relation of a member, by id; links out of the file are left out."""
    folder = PurePosixPath(member).parent
    name = str(folder / "_rels" / f"{PurePosixPath(member).name}.rels") if member else "_rels/.rels"
    if name not in archive.namelist():
        return {}
    found = {}
    for element in fromstring(archive.read(name), forbid_dtd=True):
        if element.get("TargetMode") == "External":
            continue
        target = element.get("Target", "")
        inside = target.lstrip("/") if target.startswith("/") else _joined(folder, target)
        found[element.get("Id", "")] = (element.get("Type", "").rpartition("/")[2], inside)
    return found


def _joined(folder: PurePosixPath, target: str) -> str:
    parts: list[str] = []
    for part in (folder / target).parts:
        if part == ".." and parts:
            parts.pop()
        elif part not in (".", ".."):
            parts.append(part)
    return "/".join(parts)


def _local(name: str) -> str:
    return name.rpartition("}")[2]


def _properties(root: Element) -> dict[str, str]:
    return {element.get("name", ""): "".join(element.itertext()).strip() for element in root}


_BUILT_IN_DATES = {*range(14, 23), *range(27, 37), *range(45, 48), *range(50, 59)}
_NOT_CODE = re.compile(r'"[^"]*"|\\.|_.|\*.|\[(?!h+\]|m+\]|s+\])[^\]]*\]', re.IGNORECASE)


def is_date_format(code: str) -> bool:
    """Whether a number format shows a date or a time.

    Examples
    --------
    >>> is_date_format("yyyy-mm-dd"), is_date_format('0.0" m/s"'), is_date_format("[Red]0")
    (True, False, False)
    """
    first = code.partition(";")[0]
    bare = _NOT_CODE.sub("", first)
    return "General" not in bare and any(letter in "dmyhs" for letter in bare.lower())


def _date_styles(root: Element) -> list[bool]:
    """Whether each style of the cells shows a date."""
    custom: dict[int, bool] = {}
    found: list[bool] = []
    for part in root:
        if _local(part.tag) == "numFmts":
            for row in part:
                custom[int(row.get("numFmtId", "0"))] = is_date_format(row.get("formatCode", ""))
        if _local(part.tag) == "cellXfs":
            numbers = [int(row.get("numFmtId", "0")) for row in part]
            found = [custom.get(number, number in _BUILT_IN_DATES) for number in numbers]
    return found


# --- streaming ---


class _Handlers:
    """What expat calls; subclasses collect."""

    def start(self, name: str, attributes: dict[str, str]) -> None:
        raise NotImplementedError

    def end(self, name: str) -> None:
        raise NotImplementedError

    def text(self, words: str) -> None:
        raise NotImplementedError


def _stream(stream: IO[bytes], handlers: _Handlers) -> Iterator[None]:
    """Feed a part of the file to its handlers, a chunk at a time."""
    parser = expat.ParserCreate()
    parser.buffer_text = True
    parser.StartElementHandler = handlers.start
    parser.EndElementHandler = handlers.end
    parser.CharacterDataHandler = handlers.text
    parser.StartDoctypeDeclHandler = _refuse_doctype
    while chunk := stream.read(CHUNK):
        parser.Parse(chunk, False)
        yield
    parser.Parse(b"", True)
    yield


def _refuse_doctype(*declaration: Any) -> None:
    raise DefusedXmlException("document type declaration")


class _TextHandlers(_Handlers):
    """Shared texts: the runs of each entry joined, phonetic hints left out."""

    def __init__(self, book: Book) -> None:
        self.texts: list[str] = []
        self._book = book
        self._parts: list[str] = []
        self._in_text = self._in_hint = False

    def start(self, name: str, attributes: dict[str, str]) -> None:
        tag = name.rpartition(":")[2]
        if tag == "si":
            self._book.count()
            self._parts = []
        elif tag == "t":
            self._in_text = not self._in_hint
        elif tag == "rPh":
            self._in_hint = True

    def end(self, name: str) -> None:
        tag = name.rpartition(":")[2]
        if tag == "si":
            self.texts.append("".join(self._parts))
        elif tag == "t":
            self._in_text = False
        elif tag == "rPh":
            self._in_hint = False

    def text(self, words: str) -> None:
        if self._in_text:
            self._parts.append(words)


class _SheetHandlers(_Handlers):
    """Cells of a sheet, decoded as they end; ranges of merged cells."""

    def __init__(self, book: Book, texts: list[str]) -> None:
        self.ready: list[Cell] = []
        self.merged: list[str] = []
        self._book, self._texts = book, texts
        self._row = self._column = 0
        self._type, self._style, self._formula = "n", 0, False
        self._value: list[str] | None = None  # None until a value's element begins
        self._listening = self._in_hint = False
        self._decode: Mapping[str, Callable[[str], tuple[Any, CellKind]]] = {
            "n": self._number,
            "s": lambda text: (texts[int(text)], "text"),
            "b": lambda text: (text.strip() in ("1", "true"), "bool"),
            "e": lambda text: (text.strip(), "error"),
            "d": self._iso,
        }

    def start(self, name: str, attributes: dict[str, str]) -> None:
        tag = name.rpartition(":")[2]
        if tag == "c":
            self._begin_cell(attributes)
        elif tag == "v":
            self._value, self._listening = [], True
        elif tag == "t" and self._type == "inlineStr" and not self._in_hint:
            self._value, self._listening = self._value or [], True
        elif tag == "f":
            self._formula = True
        elif tag == "row":
            self._book.count()
            self._row = int(attributes.get("r", self._row + 1))
            self._column = 0
            if not 1 <= self._row <= LAST_ROW:
                raise ValueError("row outside a sheet")
        elif tag == "rPh":
            self._in_hint = True
        elif tag == "mergeCell":
            self._book.count()
            self.merged.append(attributes.get("ref", ""))

    def _begin_cell(self, attributes: dict[str, str]) -> None:
        self._book.count()
        reference = attributes.get("r")
        if reference:
            self._row, self._column = position(reference)
        else:
            self._column += 1
        self._type = attributes.get("t", "n")
        self._style = int(attributes.get("s", "0"))
        self._formula, self._value = False, None

    def end(self, name: str) -> None:
        tag = name.rpartition(":")[2]
        if tag in ("v", "t"):
            self._listening = False
        elif tag == "c":
            self._end_cell()
        elif tag == "rPh":
            self._in_hint = False

    def text(self, words: str) -> None:
        if self._listening and self._value is not None:
            self._value.append(words)

    def _end_cell(self) -> None:
        text = "".join(self._value) if self._value is not None else ""
        kind: CellKind
        if self._type in ("str", "inlineStr"):
            if self._value is None and self._formula:
                value, kind = None, "formula"
            else:
                value, kind = text, "text"
        elif not text.strip():
            value, kind = None, "formula" if self._formula else "blank"
        else:
            value, kind = self._decode[self._type](text)
        if kind == "text" and not str(value).strip():
            kind = "blank"
        if kind != "blank":
            self.ready.append(Cell(self._row, self._column, value, kind))
        self._type = "n"

    def _number(self, text: str) -> tuple[Any, CellKind]:
        number = float(text)
        if self._style < len(self._book.date_styles) and self._book.date_styles[self._style]:
            date = from_serial(number, self._book.epoch_1904)
            if date is not None:
                return date, "date"
        if number - number != 0.0:
            raise ValueError("not a finite number")
        return number, "number"

    def _iso(self, text: str) -> tuple[Any, CellKind]:
        return dt.datetime.fromisoformat(text.strip().removesuffix("Z")).replace(tzinfo=None), "date"
