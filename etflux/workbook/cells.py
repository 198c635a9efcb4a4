"""The guarded reader of cells: opens an .xlsx file, refuses what is not one, and yields its cells one by one.

Sheets and shared texts are streamed with expat, which takes one pass where a spreadsheet library needs two (stored
values, formulas) and never builds the rows between a table and a stray cell far below it. Any document type
declaration is refused, so no entity can expand; the small parts are read by defusedxml under the same rule. Nothing
is ever calculated, no link followed, no macro looked at.
"""

from __future__ import annotations

import zipfile
import zlib
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath
from xml.etree.ElementTree import Element, ParseError
from xml.parsers import expat

from defusedxml.common import DefusedXmlException
from defusedxml.ElementTree import fromstring

from etflux.findings import CannotRead
from etflux.workbook.sheet_xml import BUILT_IN_DATES, Cell, SheetHandlers, TextHandlers, is_date_format, parsed


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
    unpacked_bytes: int = 500_000_000
    members: int = 5_000
    ratio: int = 400
    cells: int = 5_000_000


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

    def count(self) -> None:
        """Count a cell, row or text against the limit."""
        self.counted += 1
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
            handlers = SheetHandlers(self._texts, self.date_styles, self.epoch_1904, self.count)
            with archive.open(self.sheets[title]) as stream:
                for _ in parsed(stream, handlers):
                    yield from handlers.ready
                    handlers.ready.clear()
            yield from handlers.ready
            self.merged[title] = handlers.merged

    def _shared_texts(self, archive: zipfile.ZipFile) -> list[str]:
        if self.texts_member is None or self.texts_member not in archive.namelist():
            return []
        handlers = TextHandlers(self.count)
        with archive.open(self.texts_member) as stream:
            for _ in parsed(stream, handlers):
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
            found = [custom.get(number, number in BUILT_IN_DATES) for number in numbers]
    return found
