"""Files that are not workbooks, are damaged, or are made to hurt: one sentence with a remedy, quickly."""

import datetime as dt
import hashlib
import io
import random
import re
import shutil
import subprocess
import time
import tracemalloc
import zipfile

import pandas as pd
import pytest
from openpyxl import Workbook, load_workbook

from etflux.findings import CannotRead
from etflux.workbook import check, read
from etflux.workbook.cells import Limits, open_book

SHEET = "xl/worksheets/sheet2.xml"  # Stations
OLE = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"


def rewritten(content, change):
    """The archive with some members changed: a mapping of name to a function of the bytes, or new bytes."""
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as new:
        for name in old.namelist():
            if name in change and change[name] is None:
                continue
            new.writestr(name, change[name](old.read(name)) if name in change else old.read(name))
        for name in change.keys() - set(old.namelist()):
            new.writestr(name, change[name](b""))
    return out.getvalue()


def with_doctype(content):
    head = b'<!DOCTYPE x [<!ENTITY a "ha"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;">]>'
    start = content.index(b"?>") + 2 if content.startswith(b"<?xml") else 0
    return content[:start] + head + content[start:]


def external_entity(content):
    head = b'<!DOCTYPE x [<!ENTITY a SYSTEM "file:///etc/hostname">]>'
    return head + content[content.index(b"?>") + 2 :] if content.startswith(b"<?xml") else head + content


def bomb(size):
    """A sheet of blanks that packs a thousand to one."""
    return lambda content: content + b" " * size


def archive(**members):
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as new:
        for name, content in members.items():
            new.writestr(name.replace("__", "/").replace("_dot_", "."), content)
    return out.getvalue()


def locked_member(content):
    """Set the flag of an encrypted member in every header."""
    mutable = bytearray(content)
    for mark, at in ((b"PK\x03\x04", 6), (b"PK\x01\x02", 8)):
        place = mutable.find(mark)
        while place >= 0:
            mutable[place + at] |= 1
            place = mutable.find(mark, place + 4)
    return bytes(mutable)


def many_members(content):
    return rewritten(content, {f"junk/{number}": lambda _: b"x" for number in range(6000)})


HOSTILE = {
    "empty file": (lambda good: b"", "is empty"),
    "cut short": (lambda good: good[: len(good) // 2], "cut short"),
    "cut short within a member": (lambda good: good[:3000] + good[3500:], "cut short"),
    "flipped bytes": (lambda good: good[:2000] + b"\xff" * 400 + good[2400:], "cut short"),
    "password": (lambda good: OLE + b"\0" * 600 + "EncryptedPackage".encode("utf-16-le") + b"\0" * 600, "password"),
    "old xls": (lambda good: OLE + b"\0" * 2000, "old .xls"),
    "csv by another name": (lambda good: b"Station id,Date\nN1,2031-06-01\n", "text file"),
    "utf-8 text by another name": (lambda good: "Straße;Größe\n".encode(), "text file"),
    "pdf by another name": (lambda good: b"%PDF-1.7\n" + b"\x00\x01" * 40, "is not a workbook"),
    "picture by another name": (lambda good: b"\x89PNG\r\n\x1a\n" + bytes(range(256)), "is not a workbook"),
    "zip of something": (lambda good: archive(readme_dot_txt="hello"), "not a workbook"),
    "OpenDocument": (
        lambda good: archive(mimetype="application/vnd.oasis.opendocument.spreadsheet", content_dot_xml="<x/>"),
        "OpenDocument",
    ),
    "xlsb": (lambda good: archive(xl__workbook_dot_bin="x", _rels___dot_rels="<x/>"), "xlsb"),
    "document of words": (
        lambda good: archive(_rels___dot_rels="<Relationships/>", word__document_dot_xml="<x/>"),
        "not a workbook",
    ),
    "locked members": (locked_member, "password"),
    "workbook part missing": (lambda good: rewritten(good, {"xl/workbook.xml": None}), "not a workbook"),
    "sheet part missing": (lambda good: rewritten(good, {SHEET: None}), "cut short"),
    "sheet not XML": (lambda good: rewritten(good, {SHEET: lambda old: old[:-40]}), "cut short"),
    "styles not XML": (lambda good: rewritten(good, {"xl/styles.xml": lambda old: b"<"}), "cut short"),
    "row number too high": (
        lambda good: rewritten(good, {SHEET: lambda old: old.replace(b'<row r="4"', b'<row r="4000000"')}), "cut short",
    ),
    "nonsense address": (
        lambda good: rewritten(good, {SHEET: lambda old: old.replace(b'r="A4"', b'r="ABCD4"')}), "cut short",
    ),
    "entities in a sheet": (lambda good: rewritten(good, {SHEET: with_doctype}), "declares"),
    "entities in the workbook part": (lambda good: rewritten(good, {"xl/workbook.xml": with_doctype}), "declares"),
    "entities in the relations": (lambda good: rewritten(good, {"_rels/.rels": with_doctype}), "declares"),
    "entities in the properties": (lambda good: rewritten(good, {"docProps/custom.xml": with_doctype}), "declares"),
    "file of the machine as an entity": (lambda good: rewritten(good, {SHEET: external_entity}), "declares"),
    "zip bomb": (lambda good: rewritten(good, {SHEET: bomb(60_000_000)}), "would unpack"),
    "too many members": (many_members, "would unpack"),
}  # fmt: skip


@pytest.mark.parametrize("name", HOSTILE)
def test_cannot_be_read_and_says_why(name, bare_bytes, tmp_path):
    make, words = HOSTILE[name]
    path = tmp_path / "filled.xlsx"
    path.write_bytes(make(bare_bytes))
    before = hashlib.sha256(path.read_bytes()).hexdigest()
    with pytest.raises(CannotRead, match=words) as told:
        check(path)
    assert "filled.xlsx" in str(told.value)
    assert str(told.value).count(".") >= 2, "a remedy is part of it"
    assert hashlib.sha256(path.read_bytes()).hexdigest() == before


def test_not_there_and_not_a_file(tmp_path):
    with pytest.raises(CannotRead, match="is not there"):
        check(tmp_path / "none.xlsx")
    with pytest.raises(CannotRead, match="is not a file"):
        check(tmp_path)


def test_limits_can_be_changed(good_path):
    with pytest.raises(CannotRead, match="more than 200 cells"):
        read(good_path, Limits(cells=200))
    with pytest.raises(CannotRead, match="more than 1,000"):
        read(good_path, Limits(file_bytes=1000))
    with pytest.raises(CannotRead, match="would unpack"):
        read(good_path, Limits(unpacked_bytes=1000))
    assert read(good_path, Limits(cells=50_000))[1] == []


def sheet_of_rows(count, cell=b""):
    rows = b"".join(b'<row r="%d">%s</row>' % (number, cell) for number in range(1000, 1000 + count))
    return lambda old: old.replace(b"</sheetData>", rows + b"</sheetData>")


def test_rows_that_only_look_empty_are_counted(bare_bytes, tmp_path):
    path = tmp_path / "long.xlsx"
    path.write_bytes(rewritten(bare_bytes, {SHEET: sheet_of_rows(60_000, b'<c s="1"/>')}))
    with pytest.raises(CannotRead, match="look empty but are not"):
        read(path, Limits(cells=100_000))
    assert read(path)[1] == []


def test_a_stray_cell_in_the_last_row_costs_nothing(bare_bytes, tmp_path):
    book = load_workbook(io.BytesIO(bare_bytes))
    book["Weather"]["XFD1048576"].value = "x"
    path = tmp_path / "stray.xlsx"
    book.save(path)
    check(path)
    tracemalloc.start()
    start = time.perf_counter()
    check(path)
    seconds = time.perf_counter() - start
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 60_000_000
    assert seconds < 10.0  # an eager reader takes minutes


def test_links_macros_and_other_parts_are_not_looked_at(bare_bytes, tmp_path):
    link = (
        b'<Relationship Id="rId99" TargetMode="External" Target="http://192.0.2.1/x"'
        b' Type="http://schemas.openxmlformats.org/officeDocument/2006/relationships/externalLinkPath"/></Relationships>'
    )
    path = tmp_path / "linked.xlsm"
    path.write_bytes(
        rewritten(
            bare_bytes,
            {
                "xl/_rels/workbook.xml.rels": lambda old: old.replace(b"</Relationships>", link),
                "xl/vbaProject.bin": lambda old: OLE + b"macro",
                "xl/externalLinks/externalLink1.xml": lambda old: b"<not closed",
            },
        )
    )
    assert check(path) == []


def test_prefixed_strict_and_inline_forms_are_read(tmp_path):
    """What other writers make of the same sheet: a prefix, inline texts, no addresses, ISO dates, booleans."""
    book = Workbook()
    book.active.title = "Stations"
    path = tmp_path / "plain.xlsx"
    book.save(path)
    sheet = (
        '<x:worksheet xmlns:x="http://purl.oclc.org/ooxml/spreadsheetml/main"><x:sheetData><x:row>'
        '<x:c t="inlineStr"><x:is><x:r><x:t>Station </x:t></x:r><x:rPh><x:t>hint</x:t></x:rPh><x:t>id</x:t></x:is>'
        "</x:c>"
        '<x:c t="str"><x:f>A1</x:f><x:v>Name</x:v></x:c><x:c t="b"><x:v>1</x:v></x:c>'
        '<x:c t="d"><x:v>2031-06-01T00:00:00Z</x:v></x:c><x:c t="e"><x:v>#REF!</x:v></x:c>'
        "<x:c><x:f>1+1</x:f></x:c><x:c><x:v>1e3</x:v></x:c>"
        '<x:c t="str"><x:f>A2</x:f><x:v></x:v></x:c></x:row></x:sheetData></x:worksheet>'
    )
    path.write_bytes(rewritten(path.read_bytes(), {"xl/worksheets/sheet1.xml": lambda old: sheet.encode()}))
    cells = list(open_book(path).cells("Stations"))
    assert [cell.address for cell in cells] == ["A1", "B1", "C1", "D1", "E1", "F1", "G1"]
    assert [cell.kind for cell in cells] == ["text", "text", "bool", "date", "error", "formula", "number"]
    assert [str(cell.value) for cell in cells[:5]] == ["Station id", "Name", "True", "2031-06-01 00:00:00", "#REF!"]
    assert cells[6].value == 1000.0


def test_formulas_with_a_stored_value_count_as_the_value(bare_bytes, tmp_path):
    path = tmp_path / "calculated.xlsx"
    book = load_workbook(io.BytesIO(bare_bytes))
    book["Stations"]["E4"].value = "=200+50"
    book.save(path)
    stored = re.compile(rb"200\+50</f><v ?/?>(</v>)?")
    path.write_bytes(rewritten(path.read_bytes(), {SHEET: lambda old: stored.sub(b"200+50</f><v>251</v>", old)}))
    case, findings, _ = read(path)
    assert findings == []
    assert case.table("stations")["elevation_m"].iloc[0] == 251.0


@pytest.fixture(scope="module")
def shared_bytes(bare_bytes):
    """The good workbook as a writer with shared texts makes it."""
    import xlsxwriter

    out = io.BytesIO()
    copy = xlsxwriter.Workbook(out)
    day = copy.add_format({"num_format": "d mmm yyyy"})
    moment = copy.add_format({"num_format": "yyyy-mm-dd hh:mm"})
    for page in load_workbook(io.BytesIO(bare_bytes)):
        sheet = copy.add_worksheet(page.title)
        for row in page.iter_rows():
            for cell in row:
                if cell.is_date:
                    look = moment if cell.value.hour else day
                    sheet.write_datetime(cell.row - 1, cell.column - 1, cell.value, look)
                elif cell.value is not None:
                    sheet.write(cell.row - 1, cell.column - 1, cell.value)
    copy.set_custom_property("etflux_template", 1)
    copy.close()
    return out.getvalue()


def test_shared_texts_are_read(shared_bytes, tmp_path):
    path = tmp_path / "shared.xlsx"
    path.write_bytes(shared_bytes)
    with zipfile.ZipFile(path) as archived:
        assert b"<si>" in archived.read("xl/sharedStrings.xml")
    assert check(path) == []


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({SHEET: lambda old: old.replace(b't="s"><v>', b't="s"><v>9999')}, "cut short"),
        ({SHEET: lambda old: old.replace(b't="s"><v>', b't="s"><v>x')}, "cut short"),
        ({"xl/sharedStrings.xml": with_doctype}, "declares"),
        ({"xl/sharedStrings.xml": lambda old: old[:-200]}, "cut short"),
        ({"xl/sharedStrings.xml": bomb(60_000_000)}, "would unpack"),
    ],
    ids=["index too high", "index no number", "entities", "cut", "bomb"],
)
def test_damaged_shared_texts(change, words, shared_bytes, tmp_path):
    path = tmp_path / "shared.xlsx"
    path.write_bytes(rewritten(shared_bytes, change))
    with pytest.raises(CannotRead, match=words):
        check(path)


@pytest.mark.skipif(shutil.which("soffice") is None, reason="LibreOffice is not installed")
def test_what_libreoffice_saves_again_is_read_the_same(good_path, tables, tmp_path):
    profile = f"-env:UserInstallation=file://{tmp_path}/profile"
    subprocess.run(
        ["soffice", profile, "--headless", "--convert-to", "xlsx", "--outdir", str(tmp_path / "out"), str(good_path)],
        check=True, capture_output=True, timeout=120,
    )  # fmt: skip
    case, findings, _ = read(tmp_path / "out" / good_path.name)
    assert findings == []
    ours = read(good_path)[0]
    for name in tables:
        pd.testing.assert_frame_equal(case.table(name), ours.table(name))


@pytest.mark.parametrize("seed", range(12))
def test_damaged_bytes_never_end_in_a_traceback(seed, bare_bytes, tmp_path):
    """Bytes changed at random, in the archive or within its members: findings, or one sentence."""
    rng = random.Random(seed)
    if seed % 2:
        content = bytearray(bare_bytes)
        for _ in range(rng.choice([1, 3, 10])):
            content[rng.randrange(len(content))] = rng.randrange(256)
        content = bytes(content)
    else:
        junk = [b"<c/>", b'"', b'<row r="3"/>', b"<v>99999</v>", b"&#0;", b'<c r="ZZZ9"/>', b'<mergeCell ref="A:B"/>']

        def spoil(old):
            place = rng.randrange(len(old))
            return old[:place] + rng.choice(junk) + old[place + rng.randrange(30) :]

        content = rewritten(bare_bytes, {rng.choice([SHEET, "xl/workbook.xml", "xl/styles.xml"]): spoil})
    path = tmp_path / "spoilt.xlsx"
    path.write_bytes(content)
    try:
        told = [finding.sentence() for finding in check(path)]
    except CannotRead as error:
        told = [str(error)]
    assert all(told)


ANYTHING = [
    None, "", "x", "=A1", "#REF!", -1, 0, 1e300, -1e300, 12.5, True, dt.date(2031, 6, 3), dt.datetime(1900, 1, 1),
    dt.datetime(9999, 12, 31), "2031-06-03", "3/4/2031", "N1", "A1", "corn", "12,5", "1e5", "yes", "nan", "\u202e",
    "a" * 70, "é", 48000, 153, "2031-06-20T05:30+99:99", "V8", "cut", "water", "rainfed", dt.time(5, 30), 1e15,
]  # fmt: skip


@pytest.mark.parametrize("seed", range(25))
def test_any_value_anywhere_never_ends_in_a_traceback(seed, bare_bytes, tmp_path):
    rng = random.Random(seed)
    book = load_workbook(io.BytesIO(bare_bytes))
    for _ in range(rng.choice([1, 5, 20])):
        page = book[rng.choice([title for title in book.sheetnames if title != "Read first"])]
        row, column = rng.randint(3, page.max_row), rng.randint(1, page.max_column)
        value, kind = rng.choice(ANYTHING), rng.choice(["cell", "column", "row", "delete"])
        if kind == "delete":
            page.delete_cols(column)
        rows = range(4, page.max_row + 1) if kind == "column" else [row]
        columns = range(1, page.max_column + 1) if kind == "row" else [column]
        for place in rows:
            for number in columns:
                page.cell(place, number).value = rng.choice(ANYTHING) if kind == "row" else value
    path = tmp_path / "any.xlsx"
    book.save(path)
    for finding in check(path):
        assert finding.place
        assert finding.sentence()
