"""Reading a file of measurements: every fault at once, each with its line, never a traceback."""

import pytest

from etflux.compare import read_measurements
from etflux.findings import CannotRead, rules

HEAD = "place,date,quantity,value,unit,uncertainty,series\n"
GOOD = "S02-1,2031-04-02,et_mm,2.5,mm/day,0.2,lysimeter\n"


def read(tmp_path, text, encoding="utf-8"):
    path = tmp_path / "field.csv"
    path.write_bytes(text.encode(encoding))
    return read_measurements(path)


def test_a_good_file(tmp_path):
    found = read(tmp_path, HEAD + GOOD)
    assert found.findings == []
    assert found.file == "field.csv"
    (row,) = found.rows.to_dict("records")
    assert (row["place"], row["value"], row["uncertainty"], row["series"]) == ("S02-1", 2.5, 0.2, "lysimeter")
    assert str(row["date"])[:10] == "2031-04-02"


@pytest.mark.parametrize("mark", ["", "NA", "nan", "-9999"])
def test_a_missing_value_is_no_row_and_no_fault(tmp_path, mark):
    found = read(tmp_path, HEAD + GOOD.replace("2.5", mark))
    assert len(found.rows) == 0
    assert found.findings == []


def test_semicolons_byte_order_mark_and_columns_in_any_order(tmp_path):
    text = "\ufeffUnit;Value;Quantity;Date;Place\nmm/day;2,5;et_mm;2031-04-02;S02-1\n"
    found = read(tmp_path, text)
    assert found.findings == []
    assert found.rows["series"].tolist() == ["measured"]
    assert found.rows["value"].tolist() == [2.5]


@pytest.mark.parametrize(
    ("old", "new", "code", "detail"),
    [
        ("S02-1", "", "value-missing", ""),
        ("2031-04-02", "02/04/2031", "date-unreadable", ""),
        ("2031-04-02", "2031-02-30", "date-unreadable", ""),
        ("et_mm", "et_mn", "measured-quantity-unknown", "et_mm"),
        ("2.5", "two", "text-for-number", ""),
        ("2.5", "2,5", "cells-too-many", ""),
        ("mm/day", "mm/dya", "unit-unknown", "mm/day"),
        ("mm/day", "°C", "unit-wrong", "et_mm is in mm/day"),
        ("0.2", "-0.2", "uncertainty-negative", ""),
        ("0.2", "some", "text-for-number", ""),
    ],
)  # fmt: skip
def test_one_fault(tmp_path, old, new, code, detail):
    found = read(tmp_path, HEAD + GOOD + GOOD.replace(old, new).replace("04-02", "04-03"))
    assert [finding.code for finding in found.findings if finding.severity == "error"][:1] == [code]
    first = found.findings[0]
    assert first.place == "field.csv line 3"
    assert detail in first.sentence()
    assert len(found.rows) == 1


@pytest.mark.parametrize("unit", ["", "-", "1"])
def test_a_quantity_without_a_unit_needs_none(tmp_path, unit):
    found = read(tmp_path, HEAD + f"S02-1,2031-04-02,ks,0.8,{unit},,\n")
    assert found.findings == []
    assert found.rows["value"].tolist() == [0.8]


def test_all_faults_at_once(tmp_path):
    text = HEAD + "a,b,c,d,e,f,g\n" + ",,,,,,\n" + GOOD + GOOD
    codes = [finding.code for finding in read(tmp_path, text).findings]
    assert set(codes) == {
        "date-unreadable", "measured-quantity-unknown", "text-for-number", "unit-unknown", "row-repeated",
    }  # fmt: skip
    assert codes.count("text-for-number") == 2


@pytest.mark.parametrize("text", ["", "\n", "place,date\n", "place,date,quantity,value,unit\n"])
def test_nothing_to_compare(tmp_path, text):
    found = read(tmp_path, text)
    assert {finding.code for finding in found.findings} <= {"column-missing", "measurements-none"}
    assert len(found.findings) >= 1
    assert all(finding.sentence() for finding in found.findings)


def test_headings_that_are_wrong(tmp_path):
    found = read(
        tmp_path, "place,date,quantity,value,unit,unit,uncertianty\n" + "S,2031-04-02,et_mm,1,mm/day,in/day,1\n"
    )
    assert [finding.code for finding in found.findings] == ["heading-twice", "heading-unknown"]
    assert "uncertainty" in found.findings[1].sentence()


@pytest.mark.parametrize("content", [b"\xff\xfe\x00\x01", b"PK\x03\x04\x00\x00", None])
def test_files_that_are_no_text(tmp_path, content):
    path = tmp_path / "field.csv"
    if content is not None:
        path.write_bytes(content)
    with pytest.raises(CannotRead):
        read_measurements(path)


def test_every_code_has_its_words():
    for code in ("measurements-none", "measured-place-unknown", "measured-days-none", "measured-day-outside"):
        assert rules()[code].remedy.endswith(".")
