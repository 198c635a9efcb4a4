"""The template: what is in it, and that the rows written into it come back as they were."""

import hashlib
import os
import zipfile

import numpy as np
import pandas as pd
import pytest
from openpyxl import load_workbook

from etflux.case import TABLES, Settings
from etflux.findings import CannotWrite
from etflux.variables import settings_table
from etflux.workbook import read, template, write_template
from etflux.workbook.sheets import CHOICES, READ_FIRST, SETTINGS, packaged_rows, sheet_of, sheets

SYSTEMS = ("si", "us")
TYPES = {"number": "float64", "date": "datetime64[ns]", "time": "datetime64[ns]"}


@pytest.fixture(scope="module", params=SYSTEMS)
def blank(request, tmp_path_factory):
    """Unit system, path and openpyxl's view of an empty template."""
    path = write_template(tmp_path_factory.mktemp("blank") / "blank.xlsx", request.param)
    return request.param, path, load_workbook(path)


def same(mine, theirs):
    """Two columns hold the same: numbers to ten digits, as written into the file."""
    if mine.dtype.kind in "fi":
        return np.allclose(mine, theirs, rtol=1e-9, atol=1e-9, equal_nan=True)
    return all(a == b or (pd.isna(a) and pd.isna(b)) for a, b in zip(mine, theirs, strict=True))


@pytest.mark.parametrize("system", SYSTEMS)
def test_rows_come_back_as_they_were(system, tables, tmp_path):
    settings = {"title": "There and back", "season_start": "2031-06-01", "frost_kill_c": -3.0, "second_opinions": False,
                "missing_rain": "treat as 0", "corn_dry_down_days": 10, "profile_depth_m": 1.8}  # fmt: skip
    path = template.write(tmp_path / "filled.xlsx", system, tables, settings)
    case, findings, _ = read(path)
    assert findings == []
    for name, table in tables.items():
        back = case.table(name)
        if name in ("soils", "covers"):
            key = back.columns[0]
            back = back.set_index(key).loc[table[key]].reset_index()
        assert len(back) == len(table)
        assert isinstance(back.index, pd.RangeIndex)
        for column in table:
            assert same(table[column], back[column]), (name, column)
    for name, value in settings.items():
        found = getattr(case.settings, name)
        assert found == (pytest.approx(value) if isinstance(value, float) else value), name
    assert case.settings.units == system
    untouched = set(settings_table()) - set(settings) - {"units"}
    assert all(getattr(case.settings, name) == getattr(Settings(), name) for name in untouched)
    assert case.source["template_version"] == 1
    assert case.source["sha256"] == hashlib.sha256(path.read_bytes()).hexdigest()


def test_tables_of_the_case_have_every_column_and_its_type(good_path):
    case = read(good_path)[0]
    for name, (must, may) in TABLES.items():
        table = case.table(name)
        assert set(must) | set(may) <= set(table.columns)
        for column in sheet_of(name).columns:
            kind = table[column.name].dtype
            assert kind == TYPES.get(column.kind, "object"), (name, column.name)
    assert case.table("stands")["drained"].tolist() == [True, False, None, None]
    assert len(case.table("covers")) == len(packaged_rows("covers"))
    assert len(case.table("soils")) == len(packaged_rows("soils")) + 1


def test_packaged_soils_and_covers_survive_both_systems(blank):
    case, findings, _ = read(blank[1])
    assert not [finding for finding in findings if finding.code == "packaged-row-changed"]
    for name in ("soils", "covers"):
        for row, packaged in zip(range(len(case.table(name))), packaged_rows(name), strict=True):
            for column in sheet_of(name).columns:
                value = case.table(name)[column.name].iloc[row]
                if column.kind != "number":
                    assert value == (packaged[column.name] or None)
                elif packaged[column.name]:
                    assert value == pytest.approx(float(packaged[column.name]), rel=1e-9)
                else:
                    assert np.isnan(value)


def test_an_empty_template_asks_for_what_is_needed(blank):
    _, findings, _ = read(blank[1])
    assert {(finding.place, finding.code) for finding in findings} == {
        (title, "sheet-empty") for title in ("Stations", "Weather", "Counties", "Stands")
    }


def test_sheets_headings_and_notes(blank):
    system, _, book = blank
    assert book.sheetnames == [READ_FIRST, *(sheet.title for sheet in sheets()), SETTINGS, CHOICES]
    assert book.custom_doc_props["etflux_template"].value == 1
    assert [book[READ_FIRST].cell(2, column).value for column in (1, 2)] == ["Template version", 1]
    for sheet in sheets():
        page = book[sheet.title]
        for position, column in enumerate(sheet.columns, start=1):
            assert page.cell(3, position).value == column.heading(system)
            assert page.cell(2, position).value.endswith(column.note)
            assert column.note, (sheet.title, column.name)
        assert page.freeze_panes.endswith("4")
    assert (
        "Highest temperature (°F)"
        if system == "us"
        else "Highest temperature (°C)" in [cell.value for cell in book["Weather"][3]]
    )


def test_headings_are_told_apart_within_a_sheet():
    for sheet in sheets():
        labels = [column.label.casefold() for column in sheet.columns]
        assert len(labels) == len(set(labels)), sheet.title


def test_nothing_is_a_formula(blank, good_path):
    for path in (blank[1], good_path):
        for page in load_workbook(path):
            for row in page.iter_rows():
                assert all(cell.data_type != "f" for cell in row)


def test_drop_downs_offer_what_the_reader_takes(blank):
    _, _, book = blank
    for sheet in sheets():
        listed = book[sheet.title].data_validations.dataValidation
        rules = {next(iter(rule.sqref.ranges)).min_col: rule.formula1 for rule in listed}
        for position, column in enumerate(sheet.columns, start=1):
            wanted = bool(column.choices or column.of or column.kind == "yes or no")
            assert (position in rules) == wanted, (sheet.title, column.name)
            if wanted and not column.of:
                title, _, cells = rules[position].lstrip("=").partition("!")
                words = tuple(cell.value for (cell,) in book[title.strip("'")][cells.replace("$", "")])
                assert words == (column.choices or ("yes", "no"))
            if column.of:
                assert rules[position].startswith(f"='{sheet_of(column.of).title}'!$A$4:")


def test_print_set_up(blank):
    system, _, book = blank
    for page in book:
        assert page.page_setup.orientation == "landscape"
        assert int(page.page_setup.paperSize) == int(page.PAPERSIZE_LETTER if system == "us" else page.PAPERSIZE_A4)
        assert page.sheet_properties.pageSetUpPr.fitToPage
        assert page.page_setup.fitToWidth in (1, 2)
        assert page.page_setup.fitToHeight == 0
        assert page.oddHeader.left.text == "&A"
        assert "template" in page.oddFooter.left.text
        if page.title not in (READ_FIRST, CHOICES):
            assert page.print_title_rows == "$3:$3"


def test_dates_are_dates_and_text_stays_text(tables, tmp_path):
    tables = dict(tables)
    tables["stations"] = tables["stations"].assign(name=["=1+1", "@x"])
    path = template.write(tmp_path / "filled.xlsx", "si", tables)
    book = load_workbook(path)
    assert book["Stations"]["B4"].data_type in ("s", "inlineStr")
    assert book["Weather"]["B4"].is_date
    assert book["Weather"]["B4"].number_format == "yyyy-mm-dd"
    case, findings, _ = read(path)
    assert case.table("stations")["name"].tolist() == ["=1+1", "@x"]
    assert {finding.code for finding in findings} == {"text-like-code"}


def test_the_same_rows_give_the_same_bytes(good_path, tables, tmp_path):
    other = template.write(tmp_path / "again.xlsx", "si", tables, {"title": "Other"})
    again = template.write(tmp_path / "again2.xlsx", "si", tables, {"title": "Other"})
    assert other.read_bytes() == again.read_bytes()
    assert all(member.date_time[0] == 1980 for member in zipfile.ZipFile(other).infolist())


def test_an_existing_file_is_not_replaced_unless_told(tmp_path):
    path = tmp_path / "mine.xlsx"
    path.write_text("precious")
    with pytest.raises(CannotWrite, match="is there already"):
        write_template(path)
    assert path.read_text() == "precious"
    write_template(path, replace=True)
    assert zipfile.is_zipfile(path)
    assert [entry.name for entry in tmp_path.iterdir()] == ["mine.xlsx"]
    assert path.stat().st_mode & 0o777 == 0o666 & ~_umask()


def _umask():
    mask = os.umask(0)
    os.umask(mask)
    return mask


def test_what_cannot_be_written(tmp_path):
    with pytest.raises(CannotWrite, match="ends in .xlsx"):
        write_template(tmp_path / "mine.xls")
    with pytest.raises(CannotWrite, match="cannot write"):
        write_template(tmp_path / "nowhere" / "mine.xlsx")
    with pytest.raises(KeyError, match="no such setting"):
        template.write(tmp_path / "mine.xlsx", "si", {}, {"colour": "red"})
    with pytest.raises(KeyError, match="no column wrong"):
        template.write(tmp_path / "mine.xlsx", "si", {"stations": pd.DataFrame({"station_id": ["a"], "wrong": [1]})})
    assert list(tmp_path.iterdir()) == []


def test_a_failed_write_leaves_nothing_behind(tmp_path, monkeypatch):
    def full(self, target):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("openpyxl.workbook.workbook.Workbook.save", full)
    with pytest.raises(CannotWrite, match="No space left"):
        write_template(tmp_path / "mine.xlsx")
    assert list(tmp_path.iterdir()) == []


def test_every_setting_has_a_row_and_every_label_is_its_own(blank):
    _, _, book = blank
    labels = [cell.value for cell in book[SETTINGS]["B"][3:] if cell.value]
    assert labels == [row.label for row in settings_table().values()]
    assert len({label.casefold() for label in labels}) == len(labels)
