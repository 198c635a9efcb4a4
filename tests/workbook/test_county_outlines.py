"""Outlines beside the workbook and from the package: what joins, what is filled in, what is said."""

import json
import re

import numpy as np
import openpyxl
import pandas as pd
import pytest

from etflux import outlines
from etflux.case import settings_record
from etflux.results.record import run_identity
from etflux.workbook import check, read, template


def square(west, south, size=0.4):
    ring = [[west, south], [west + size, south], [west + size, south + size], [west, south + size], [west, south]]
    return {"type": "Polygon", "coordinates": [ring]}


def drawn(path, shapes):
    features = [
        {"type": "Feature", "properties": {"county_id": identity}, "geometry": shape}
        for identity, shape in shapes.items()
    ]
    path.write_text(json.dumps({"type": "FeatureCollection", "features": features}))


@pytest.fixture
def workbook(tmp_path, tables):
    """Make the good workbook with other counties or settings."""

    def made(counties=None, **settings):
        changed = {**tables, **({} if counties is None else {"counties": counties})}
        return template.write(tmp_path / "book.xlsx", "si", changed, {"season_start": "2031-06-01", **settings})

    return made


def codes(findings):
    return {
        (finding.place, finding.code) for finding in findings if "outline" in finding.code or "geoid" in finding.code
    }


def test_a_file_joins_on_id_and_says_what_did_not(workbook, tmp_path):
    drawn(tmp_path / "here.geojson", {"A1": square(-91.5, 41.0), "Z9": square(-90.0, 41.0)})
    path = workbook(outlines_file="here.geojson")
    case, findings, _ = read(path)
    assert list(case.outlines) == ["A1"]
    place = next(finding.place for finding in findings if finding.code == "county-without-outline")
    assert place.startswith("Settings!")
    assert {code for _, code in codes(findings)} == {"county-without-outline", "outline-without-county"}
    said = next(finding for finding in findings if finding.code == "county-without-outline")
    assert "1: B2" in said.sentence()


def test_ids_that_lost_their_zeros_or_capitals_join_and_it_is_said(workbook, tmp_path):
    drawn(tmp_path / "here.geojson", {"a1": square(-91.5, 41.0), "0B2": square(-90.0, 41.0)})
    case, findings, _ = read(workbook(outlines_file="here.geojson"))
    assert list(case.outlines) == ["A1", "B2"]
    (found,) = [finding for finding in findings if "outline" in finding.code]
    assert (found.code, found.severity) == ("outline-id-alike", "note")
    assert found.detail == "2: a1 as A1, 0B2 as B2"


def test_an_id_that_could_be_either_of_two_joins_neither(workbook, tmp_path):
    drawn(tmp_path / "here.geojson", {"a1": square(-91.5, 41.0), "0A1": square(-92.5, 41.0), "B2": square(-90.0, 41.0)})
    case, findings, _ = read(workbook(outlines_file="here.geojson"))
    assert list(case.outlines) == ["B2"]
    (said,) = [finding for finding in findings if finding.code == "county-without-outline"]
    assert "A1" in said.detail
    assert "the file has 0A1" in said.detail or "the file has a1" in said.detail


def test_numbers_and_long_geoids_are_ids(workbook, tmp_path, tables):
    counties = tables["counties"].assign(county_id=["19169", "19015"])
    drawn(tmp_path / "here.geojson", {"0500000US19169": square(-91.5, 41.0), 19015.0: square(-90.0, 41.0)})
    case, _, _ = read(workbook(counties, outlines_file="here.geojson"))
    assert set(case.outlines) == {"19169", "19015"}


def test_the_run_is_another_when_the_file_is(workbook, tmp_path):
    path = workbook(outlines_file="here.geojson")
    ids = []
    for west in (-91.5, -91.6):
        drawn(tmp_path / "here.geojson", {"A1": square(west, 41.0), "B2": square(-90.0, 41.0)})
        case, _, _ = read(path)
        assert len(case.source["outlines_file"]["here.geojson"]) == 64
        ids.append(run_identity(case.source, settings_record(case.settings)))
    assert ids[0] != ids[1]


@pytest.mark.parametrize("word", ["none", "None"])
def test_none_turns_outlines_off_but_not_the_filling(tmp_path, tables, word):
    path = template.write(tmp_path / "us.xlsx", "si", us_tables(tables, ["19169", "19015"]), {"outlines_file": word})
    case, findings, _ = read(path)
    assert case.outlines == {}
    assert case.table("counties")["area_km2"].notna().all()
    assert {finding.code for finding in findings if "outline" in finding.code} == {"county-from-outline"}


@pytest.mark.parametrize(
    ("content", "code"),
    [
        ("{", "outlines-unreadable"),
        ('{"type": "FeatureCollection", "features": []}', "outlines-unreadable"),
        (json.dumps({"type": "FeatureCollection", "features": [
            {"type": "Feature", "properties": {"county_id": "A1"}, "geometry": square(4.0e5, 5.0e6)}]}),
         "outlines-unreadable"),
        (json.dumps({"type": "FeatureCollection", "features": [
            {"type": "Feature", "properties": {"county_id": "Q"}, "geometry": square(-91.0, 41.0)}]}),
         "outlines-join-nothing"),
    ],
)  # fmt: skip
def test_a_file_that_does_not_serve_is_an_error_at_the_setting(workbook, tmp_path, content, code):
    (tmp_path / "here.geojson").write_text(content)
    findings = check(workbook(outlines_file="here.geojson"))
    (found,) = [finding for finding in findings if finding.code == code]
    assert found.severity == "error"
    assert found.place.startswith("Settings!")


def test_a_file_outside_the_folder_is_refused(workbook):
    findings = check(workbook(outlines_file="../here.geojson"))
    assert "file-outside-folder" in {finding.code for finding in findings}


def us(ids, **columns):
    """Two counties with nothing but their ids."""
    blank = {"name": None, "area_km2": np.nan, "latitude_deg": np.nan, "longitude_deg": np.nan}
    return pd.DataFrame({"county_id": ids, **blank, **columns})


def us_tables(tables, ids):
    stands = tables["stands"].assign(county_id=[ids[0], ids[0], ids[1], ids[1]])
    stations = tables["stations"].assign(latitude_deg=[42.0, 42.1], longitude_deg=[-93.5, -93.6])
    keep = {name: tables[name] for name in ("weather", "soils", "irrigation_rules")}
    return {**keep, "stations": stations, "stands": stands, "counties": us(ids)}


def test_typing_a_geoid_fills_name_place_and_area(tmp_path, tables):
    """Areas of Story and Boone County, land and water: Census Bureau, 2017 Gazetteer Files, counties."""
    path = template.write(tmp_path / "us.xlsx", "si", us_tables(tables, ["19169", "19015"]), {})
    case, findings, _ = read(path)
    county = case.table("counties").set_index("county_id")
    assert list(county["name"]) == ["Story, IA", "Boone, IA"]
    assert county["area_km2"].to_numpy() == pytest.approx([1485.745, 1485.741], rel=0.003)
    assert county.loc["19169", ["latitude_deg", "longitude_deg"]].to_list() == pytest.approx([42.04, -93.46], abs=0.02)
    assert set(case.outlines) == {"19169", "19015"}
    (border,) = outlines.shared_borders(case.outlines)  # one straight line of four townships, 24 miles
    assert border.length_km == pytest.approx(24 * 1.609, rel=0.02)
    assert abs(border.normal[0]) == pytest.approx(1.0)
    said = next(finding for finding in findings if finding.code == "county-from-outline")
    assert "outline area of 2" in said.sentence()
    assert "name of 2" in said.sentence()
    assert not [finding for finding in findings if finding.code == "value-missing"]


def test_a_number_that_lost_its_zero_is_found(tmp_path, tables):
    path = template.write(tmp_path / "us.xlsx", "si", us_tables(tables, ["01001", "01021"]), {})
    book = openpyxl.load_workbook(path)
    sheet = book["Counties"]
    row = next(row for row in range(1, 9) if sheet.cell(row, 1).value == "01001")
    sheet.cell(row, 1).value = 1001
    book.save(path)
    case, findings, _ = read(path)
    assert case.table("counties")["name"].iloc[0] == "Autauga, AL"
    assert "id-padded" in {finding.code for finding in findings}


def test_what_a_person_entered_is_kept(tmp_path, tables):
    changed = us_tables(tables, ["19169", "19015"])
    changed["counties"] = us(["19169", "19015"], name=["Mine", None], area_km2=[1500.0, np.nan])
    case, _, _ = read(template.write(tmp_path / "us.xlsx", "si", changed, {}))
    assert case.table("counties")["name"].tolist() == ["Mine", "Boone, IA"]
    assert case.table("counties")["area_km2"].iloc[0] == 1500.0


def test_an_unknown_geoid_is_answered_with_the_nearest(tmp_path, tables):
    findings = check(template.write(tmp_path / "us.xlsx", "si", us_tables(tables, ["19170", "19015"]), {}))
    (found,) = [finding for finding in findings if finding.code == "geoid-unknown"]
    assert found.place == "Counties!A4"
    assert found.severity == "error"
    assert re.fullmatch("the nearest known is 191[0-9]{2}, .+, IA", found.detail)


def test_columns_of_place_and_area_may_be_left_out_of_us_counties(tmp_path, tables):
    path = without_columns(template.write(tmp_path / "us.xlsx", "si", us_tables(tables, ["19169", "19015"]), {}), 3)
    case, findings, _ = read(path)
    assert case.table("counties")["area_km2"].notna().all()
    assert not [finding for finding in findings if finding.severity == "error"]


def test_a_missing_column_of_other_counties_is_said_once(workbook):
    _, findings, _ = read(without_columns(workbook(), 1))
    codes = [finding.code for finding in findings if finding.table == "counties" and finding.severity == "error"]
    assert codes == ["column-missing"]


def without_columns(path, count):
    """The workbook without the first columns of area, latitude and longitude in its sheet of counties."""
    book = openpyxl.load_workbook(path)
    sheet = book["Counties"]
    heading = next(row for row in range(1, 9) if sheet.cell(row, 1).value == "County id")
    titles = [str(sheet.cell(heading, column).value) for column in range(1, 12)]
    for name in ("Area", "Latitude", "Longitude")[:count]:
        sheet.delete_cols(1 + next(k for k, title in enumerate(titles) if title.startswith(name)))
        titles = [title for title in titles if not title.startswith(name)]
    book.save(path)
    return path


@pytest.mark.parametrize(("old", "name"), [("46113", "Oglala Lakota, SD"), ("12025", "Miami-Dade, FL")])
def test_a_renumbered_geoid_takes_the_outline_of_the_new_one(tmp_path, tables, old, name):
    case, findings, _ = read(template.write(tmp_path / "us.xlsx", "si", us_tables(tables, [old, "19015"]), {}))
    assert case.table("counties")["name"].iloc[0] == name
    (said,) = [finding for finding in findings if finding.code == "geoid-renumbered"]
    assert said.severity == "note"
    assert f", {name}" in said.detail
    assert old in case.outlines


def test_a_part_of_an_old_county_must_be_entered(tmp_path, tables):
    """Chugach is half of what the outlines have: its area is not known here."""
    findings = check(template.write(tmp_path / "us.xlsx", "si", us_tables(tables, ["02063", "19015"]), {}))
    assert {("Counties!A4", "geoid-renumbered"), ("Counties!A4", "geoid-unknown")} <= codes(findings)


@pytest.mark.parametrize("geoid", [f"09{code}" for code in range(110, 200, 10)])
def test_a_planning_region_says_which_county_is_near(geoid):
    alias = outlines.us_county_aliases()[geoid]
    assert not alias.whole
    assert alias.outline_geoid.startswith("090")


def test_counties_of_which_some_have_no_packaged_outline(tmp_path, tables):
    changed = us_tables(tables, ["19169", "Upper"])
    changed["counties"] = us(["19169", "Upper"], area_km2=[np.nan, 900.0], latitude_deg=[np.nan, 42.3],
                             longitude_deg=[np.nan, -93.4])  # fmt: skip
    case, findings, _ = read(template.write(tmp_path / "us.xlsx", "si", changed, {}))
    assert list(case.outlines) == ["19169"]
    (said,) = [finding for finding in findings if finding.code == "county-without-packaged-outline"]
    assert said.detail == "1: Upper"


def test_an_invented_five_digit_id_elsewhere_takes_no_outline(workbook, tables):
    counties = tables["counties"].assign(county_id=["06037", "B2"], name=[None, "Lower"])
    case, findings, _ = read(workbook(counties=counties))
    assert case.outlines == {}
    assert case.table("counties")["name"].tolist() == [None, "Lower"]
    (found,) = [finding for finding in findings if finding.code == "geoid-elsewhere"]
    assert "Los Angeles" in found.sentence()


def test_a_place_far_from_the_middle_may_still_be_in_the_county(workbook, tables):
    """Aleutians West: its internal point in the Census Bureau's 2017 Gazetteer is 480 km from its middle."""
    counties = tables["counties"].assign(county_id=["02016", "B2"], latitude_deg=[51.948964, 41.6],
                                         longitude_deg=[179.621188, -90.0])  # fmt: skip
    case, findings, _ = read(workbook(counties=counties))
    assert "02016" in case.outlines
    assert "geoid-elsewhere" not in {finding.code for finding in findings}


def test_a_geoid_elsewhere_does_not_give_its_area(workbook, tables):
    counties = tables["counties"].assign(county_id=["06037", "B2"], area_km2=[np.nan, 900.0])
    _, findings, _ = read(workbook(counties=counties))
    missing = [(finding.code, finding.quantity) for finding in findings if finding.code == "value-missing"]
    assert missing == [("value-missing", "area_km2")]
    assert "geoid-unknown" not in {finding.code for finding in findings}


def test_blank_place_of_a_county_without_geoid_is_an_error_at_its_cell(workbook, tables):
    counties = tables["counties"].assign(latitude_deg=[np.nan, 41.6])
    findings = check(workbook(counties=counties))
    missing = [finding for finding in findings if finding.code == "value-missing"]
    assert [finding.quantity for finding in missing] == ["latitude_deg"]
    assert missing[0].place.startswith("Counties!")


def test_packaged_outlines_cover_the_country():
    """Outlines end at the shore: land of the 9.147, and inland water, 0.222 million km2 (Census 2010, from memory)."""
    counties = outlines.us_counties()
    assert len(counties) == 3231
    area = {geoid: outlines.area_and_centroid(outline) for geoid, outline in counties.items()}
    assert sum(row[0] for row in area.values()) == pytest.approx(9.369e6, rel=0.01)
    west = outlines.area_and_centroid(counties["02016"])  # Aleutians West, on both sides of the date line
    assert west[2] < -170.0 or west[2] > 170.0
    assert west[1] == pytest.approx(52.5, abs=1.0)
    inside = [row[1:] for geoid, row in area.items() if geoid[:2] not in {"02", "15", "60", "66", "69", "72", "78"}]
    assert all(24.0 < lat < 49.5 and -125.0 < lon < -66.5 for lat, lon in inside)


def test_every_alias_leads_to_an_outline():
    counties = outlines.us_counties()
    aliases = outlines.us_county_aliases()
    assert {alias.outline_geoid for alias in aliases.values()} <= set(counties)
    assert not set(aliases) & set(counties)
