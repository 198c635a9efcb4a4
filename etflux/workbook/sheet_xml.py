"""Cells out of a sheet's XML: addresses, day numbers, and the handlers that decode a stream of it.

A document type declaration is refused wherever it stands, so that no entity can expand.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Callable, Iterator, Mapping
from typing import IO, Any, Literal, NamedTuple
from xml.parsers import expat

from defusedxml.common import DefusedXmlException

CellKind = Literal["blank", "number", "text", "date", "bool", "error", "formula"]
LAST_ROW, LAST_COLUMN = 1_048_576, 16_384
LAST_SERIAL = 2_958_466  # the day after 9999-12-31
CHUNK = 1 << 16
Count = Callable[[], None]  # called for every cell, row and text, to stop at a limit


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


BUILT_IN_DATES = {*range(14, 23), *range(27, 37), *range(45, 48), *range(50, 59)}
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


class Handlers:
    """What expat calls; subclasses collect."""

    def start(self, name: str, attributes: dict[str, str]) -> None:
        raise NotImplementedError

    def end(self, name: str) -> None:
        raise NotImplementedError

    def text(self, words: str) -> None:
        raise NotImplementedError


def parsed(stream: IO[bytes], handlers: Handlers) -> Iterator[None]:
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


class TextHandlers(Handlers):
    """Shared texts: the runs of each entry joined, phonetic hints left out."""

    def __init__(self, count: Count) -> None:
        self.texts: list[str] = []
        self._count = count
        self._parts: list[str] = []
        self._in_text = self._in_hint = False

    def start(self, name: str, attributes: dict[str, str]) -> None:
        tag = name.rpartition(":")[2]
        if tag == "si":
            self._count()
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


class SheetHandlers(Handlers):
    """Cells of a sheet, decoded as they end; ranges of merged cells."""

    def __init__(self, texts: list[str], date_styles: list[bool], epoch_1904: bool, count: Count) -> None:
        self.ready: list[Cell] = []
        self.merged: list[str] = []
        self._date_styles, self._epoch_1904, self._count = date_styles, epoch_1904, count
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
            self._count()
            self._row = int(attributes.get("r", self._row + 1))
            self._column = 0
            if not 1 <= self._row <= LAST_ROW:
                raise ValueError("row outside a sheet")
        elif tag == "rPh":
            self._in_hint = True
        elif tag == "mergeCell":
            self._count()
            self.merged.append(attributes.get("ref", ""))

    def _begin_cell(self, attributes: dict[str, str]) -> None:
        self._count()
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
        if self._style < len(self._date_styles) and self._date_styles[self._style]:
            date = from_serial(number, self._epoch_1904)
            if date is not None:
                return date, "date"
        if number - number != 0.0:
            raise ValueError("not a finite number")
        return number, "number"

    def _iso(self, text: str) -> tuple[Any, CellKind]:
        return dt.datetime.fromisoformat(text.strip().removesuffix("Z")).replace(tzinfo=None), "date"
