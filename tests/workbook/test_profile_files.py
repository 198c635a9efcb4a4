"""Balloon soundings in files: the same air and the same run as typed in, and an answer to every kind of broken file.

The format is that of NOAA's igra2-data-format.txt; the soundings are invented and written here.
"""

import io
import zipfile

import numpy as np
import pandas as pd
import pytest

from etflux.run import run_case
from etflux.workbook import check, read, template
from etflux.workbook.profile_files import LONGEST_LINE, read_file

GROUND_M = 250
LEVELS = (  # height above the ground, hPa, °C, dew point °C
    (0, 984.0, 15.0, 14.0), (150, 967.0, 18.0, 12.5), (500, 929.0, 16.5, 11.0), (1200, 856.0, 10.5, 8.0),
    (2000, 778.0, 7.5, -2.0), (3500, 645.0, -3.0, -15.0), (5800, 480.0, -17.5, -40.0),
)  # fmt: skip
SITE = "ZZM00099999"


def header(levels, day="2031 06 20", hour=12, release=1130, latitude=415000, longitude=-910000, site=SITE):
    head = f"#{site:11s} {day} {hour:02d} {release:04d} {levels:4d} made-up  made-up "
    return f"{head} {latitude:7d} {longitude:8d}"


def level(kind, hpa, gph, t, td, rh=-9999, flag="B"):
    depression = -9999 if td is None else round(10 * (t - td))
    numbers = f"{round(hpa * 100):6d}{flag}{gph:5d}{flag}{round(10 * t):5d}{flag}{rh:5d} {depression:5d}   180    50"
    return f"{kind} -9999 {numbers}"


def sounding(rows=LEVELS, **about):
    lines = [level("21" if k == 0 else "20", hpa, GROUND_M + z, t, td) for k, (z, hpa, t, td) in enumerate(rows)]
    return [header(len(lines), **about), *lines]


def zipped(*members):
    store = io.BytesIO()
    with zipfile.ZipFile(store, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, text in members:
            archive.writestr(name, text)
    return store.getvalue()


def as_bytes(content):
    return content if isinstance(content, bytes) else ("\n".join(content) + "\n").encode("ascii")


@pytest.fixture
def block(tmp_path):
    """Read a file of this content for the June of the example."""

    def made(content, first="2031-06-01", last="2031-06-30"):
        path = tmp_path / "site.txt"
        path.write_bytes(as_bytes(content))
        return read_file(path, "site.txt", np.datetime64(first), np.datetime64(last))

    return made


@pytest.fixture
def book(tmp_path, tables):
    """The good workbook with other profiles and files beside it."""

    def made(name, files, profiles=None, setting=None):
        for file, content in files.items():
            (tmp_path / file).write_bytes(as_bytes(content))
        kept = {key: table for key, table in tables.items() if key != "profiles"}
        if profiles is not None:
            kept["profiles"] = profiles
        settings = {"profile_files": "; ".join(files) if setting is None else setting}
        return template.write(tmp_path / name, "si", kept, settings)

    return made


def typed_in():
    z, hpa, t, td = (np.array(column, float) for column in zip(*LEVELS, strict=True))
    return pd.DataFrame(
        {
            "site_id": SITE, "time": pd.Timestamp("2031-06-20 11:30"), "latitude_deg": 41.5, "longitude_deg": -91.0,
            "elevation_m": float(GROUND_M), "height_m": z, "pressure_kpa": hpa / 10.0, "temperature_c": t,
            "dew_point_c": td,
        }
    )  # fmt: skip


def test_a_file_gives_the_run_of_the_same_levels_typed_in(book):
    by_hand = read(book("hand.xlsx", {}, typed_in()))[0]
    case, findings, _ = read(book("file.xlsx", {"site.txt": sounding()}))
    assert [(found.code, found.place) for found in findings] == []
    pd.testing.assert_frame_equal(case.table("profiles"), by_hand.table("profiles"), rtol=1e-12)
    assert case.source["profile_files"].keys() == {"site.txt"}
    none = read(book("none.xlsx", {}))[0]
    from_file, from_sheet, standard = (run_case(each).county for each in (case, by_hand, none))
    for name in ("contribution_c", "dew_point_mixed_c", "mixing_depth_m", "theta_mixed_c"):
        np.testing.assert_allclose(from_file[name], from_sheet[name], rtol=1e-9)
    there = from_file["mixing_depth_m"].sel(date="2031-06-20")
    assert (abs(there - standard["mixing_depth_m"].sel(date="2031-06-20")) > 10.0).any()


def test_sheet_and_several_files_serve_together(book):
    other = sounding(site="ZZM00088888", longitude=-900000)
    packed = zipped(("ZZM00088888-data.txt", as_bytes(other)))
    sheet = typed_in().assign(site_id="west")
    path = book("both.xlsx", {"one.txt": sounding(), "two.zip": packed}, sheet)
    case, findings, places = read(path)
    assert not findings
    table = case.table("profiles")
    assert table["site_id"].unique().tolist() == ["west", SITE, "ZZM00088888"]
    assert places.of("profiles", len(LEVELS) + 2, "temperature_c") == "one.txt line 4, column Temperature"


def test_only_mornings_of_the_season_are_kept_and_the_others_counted(block):
    lines = [
        *sounding(day="1990 06 20"), *sounding(day="2031 06 20", hour=8, release=9999),
        *sounding(day="2031 06 20"), *sounding(day="2031 06 21", hour=0, release=2315),
        *sounding(day="2031 07 01"), *sounding(day="2031 07 02"),
    ]  # fmt: skip
    found = block(lines)
    (said,) = found.findings
    assert (said.code, said.place) == ("soundings-left-out", "site.txt")
    assert said.detail == "1 are kept; 3 of other days, 1 at other hours, 1 earlier on the same morning"
    assert set(found.columns["time"]) == {np.datetime64("2031-06-20T11:30")}


def test_a_later_sounding_that_is_too_short_does_not_take_the_place_of_a_whole_one(block):
    found = block([*sounding(hour=8, release=9999), *sounding(LEVELS[:2])])
    assert set(found.columns["time"]) == {np.datetime64("2031-06-20T08:00")}


def test_heights_count_from_the_surface_level_and_what_is_missing_is_left_out(block):
    rows = sounding()
    rows[2:2] = [
        "30 -9999  -9999   400 -9999 -9999 -9999   190    62",  # wind by height
        "10 -9999 100000 -9999 -9999 -9999 -9999 -9999 -9999",
    ]  # below the ground
    rows[5] = "20 -9999  92900B-8888   165B-9999    55   180    50"
    rows[6] = level("20", 856.0, 1450, 10.5, None, rh=845)
    rows[7] = level("20", 778.0, 2250, 7.5, None)
    rows[0] = header(len(rows) - 1)
    found = block(rows)
    assert not found.findings
    np.testing.assert_allclose(found.columns["height_m"], [0.0, 150.0, np.nan, 1200.0, 3500.0, 5550.0 + 250.0])
    np.testing.assert_allclose(found.columns["dew_point_c"][:5], [14.0, 12.5, 11.0, np.nan, -15.0])
    assert found.columns["rh_mean_pct"][3] == 84.5
    assert found.columns["elevation_m"].tolist() == [250.0] * 6
    assert found.rows == [2, 5, 6, 7, 9, 10]


def test_air_too_dry_for_a_dew_point_is_told_by_its_relative_humidity(book):
    dry = [*LEVELS[:5], (3500, 645.0, -3.0, -47.0), *LEVELS[6:]]
    findings = check(book("dry.xlsx", {"site.txt": sounding(dry)}))
    assert not [found for found in findings if found.table == "profiles"]


def test_levels_that_lie_no_higher_than_the_one_before_are_left_out(book, block):
    """Heights are whole metres: close levels of a fine sounding may share one, and no workbook cell can be mended."""
    fine = [*LEVELS[:2], (150, 966.9, 18.0, 12.4), (149, 966.5, 18.0, 12.4), *LEVELS[2:]]
    found = block(sounding(fine))
    np.testing.assert_array_equal(found.columns["height_m"], [row[0] for row in LEVELS])
    assert not [said for said in check(book("fine.xlsx", {"site.txt": sounding(fine)})) if said.table == "profiles"]


def test_without_a_surface_level_the_lowest_is_the_ground_and_it_is_said(block):
    rows = sounding()
    rows[1] = "20" + rows[1][2:]
    found = block(rows)
    assert [(said.code, said.place) for said in found.findings] == [("sounding-surface", "site.txt line 1")]
    assert found.columns["height_m"][0] == 0.0


def test_what_many_soundings_lack_is_said_once(block):
    days = [f"2031 06 {day}" for day in range(11, 16)]
    lines = [line for day in days for line in sounding(day=day)]
    found = block(["2" + "0" + line[2:] if line.startswith("21") else line for line in lines])
    assert [(said.code, said.detail) for said in found.findings] == [("sounding-surface", "and 4 more")]
    winds = [text for day in days[:2] for text in (header(1, day=day), level("21", 984.0, 250, 15.0, None))]
    found = block([*winds, *sounding()])
    assert [(said.code, said.place) for said in found.findings] == [("sounding-bare", "site.txt line 1")]
    assert found.findings[0].detail == "and 1 more"


def test_a_surface_level_without_a_height_leaves_the_pressures(block):
    """As in most soundings from the telecommunications network: the ground's own height is not sent."""
    rows = sounding()
    rows[1] = rows[1].replace("B  250B", "B-9999 ") + " "
    found = block(rows)
    assert not found.findings
    assert np.isnan(found.columns["height_m"]).all()
    np.testing.assert_allclose(found.columns["pressure_kpa"], [row[1] / 10.0 for row in LEVELS])


WHOLE = sounding()
BROKEN = {  # file, place, code, a part of the detail
    "a level cut": ([*WHOLE[:4], WHOLE[4][:30], *WHOLE[5:]], "site.txt line 5", "sounding-line", "51 characters"),
    "a level too long": ([*WHOLE[:4], WHOLE[4] + " 12", *WHOLE[5:]], "site.txt line 5", "sounding-line", "54"),
    "the file cut": (WHOLE[:-2], "site.txt line 1", "sounding-line", "7 levels are announced and 5 follow"),
    "a header cut": ([WHOLE[0][:40], *WHOLE[1:]], "site.txt line 1", "sounding-line", "a header has 71"),
    "words": ([*WHOLE[:2], "an unexpected word", *WHOLE[2:]], "site.txt line 3", "sounding-line", "51 characters"),
    "letters in a number": ([*WHOLE[:3], WHOLE[3].replace("92900", "92o00"), *WHOLE[4:]], "site.txt line 4",
                            "sounding-line", "columns 10-15 (pressure): ' 92o00'"),
    "no type": ([*WHOLE[:3], "99" + WHOLE[3][2:], *WHOLE[4:]], "site.txt line 4", "sounding-line", "level type"),
    "no such day": (sounding(day="2031 02 30"), "site.txt line 1", "sounding-line", "'2031 02 30'"),
    "no such hour": (sounding(hour=31), "site.txt line 1", "sounding-line", "columns 25-26"),
    "no such minute": (sounding(release=1175), "site.txt line 1", "sounding-line", "columns 28-31"),
    "no time": (sounding(hour=99, release=9999), "site.txt line 1", "sounding-time", "neither"),
    "no place": (sounding(latitude=-998888, longitude=-9988888 // 10), "site.txt line 1", "sounding-place", ""),
    "an unknown flag": ([*WHOLE[:3], WHOLE[3].replace("B  165B", "B  165Z"), *WHOLE[4:]], "site.txt line 4",
                        "sounding-flag", "temperature: 'Z'"),
    "levels before a header": ([*WHOLE[1:], *WHOLE], "site.txt line 1", "sounding-line", "must come before"),
    "no header": (WHOLE[1:], "site.txt", "soundings-unreadable", "no line starts with #"),
    "empty": (b"", "site.txt", "soundings-unreadable", "empty"),
    "blank": (b"\n  \n\n", "site.txt", "soundings-unreadable", "empty"),
    "UTF-16": ("\n".join(WHOLE).encode("utf-16"), "site.txt", "soundings-unreadable", "plain text"),
    "binary": (bytes(range(256)) * 40, "site.txt", "soundings-unreadable", "plain text"),
    "one endless line": (b"#" * (LONGEST_LINE + 1), "site.txt", "soundings-unreadable", "4,096"),
    "a letter beyond ASCII": ([*WHOLE[:3], WHOLE[3].replace("929", "92x")], "site.txt line 4", "sounding-line", "92x"),
    "zip cut": (zipped(("a.txt", as_bytes(WHOLE)))[:-30], "site.txt", "soundings-unreadable", "damaged"),
    "zip of two": (zipped(("a.txt", "x"), ("b.txt", "y")), "site.txt", "soundings-unreadable", "this one has 2"),
    "zip of none": (zipped(("a.csv", "x")), "site.txt", "soundings-unreadable", "this one has 0"),
    "bomb": (zipped(("a.txt", b"0" * 50_000_000)), "site.txt", "soundings-unreadable", "50,000,000"),
}  # fmt: skip


@pytest.mark.parametrize("kind", list(BROKEN))
def test_a_broken_file_is_said_at_its_line(block, kind):
    content, place, code, detail = BROKEN[kind]
    found = block(content)
    said = [finding for finding in found.findings if finding.code == code]
    assert [finding.place for finding in said] == [place]
    assert detail in said[0].sentence()


def test_a_broken_sounding_does_not_take_the_others_with_it(block):
    found = block([*WHOLE[:-1], *sounding(day="2031 06 21")])
    assert [said.code for said in found.findings] == ["sounding-line"]
    assert set(found.columns["time"]) == {np.datetime64("2031-06-21T11:30")}


def test_many_faults_are_said_ten_times_with_the_count(block):
    found = block([*sounding(), *([header(3)] * 25)])
    said = [finding for finding in found.findings if finding.code == "sounding-line"]
    assert len(said) == 10
    assert "and 15 more lines" in said[-1].detail


def test_a_bom_windows_line_ends_and_latin_letters_do_not_move_columns(block):
    text = "\r\n".join(WHOLE).replace("made-up  made-up ", "made-üp  made-up ")
    found = block(b"\xef\xbb\xbf" + text.encode("latin-1"))
    assert not found.findings
    assert len(found.rows) == len(LEVELS)


def test_a_locked_zip_is_refused(block):
    content = bytearray(zipped(("a.txt", as_bytes(WHOLE))))
    content[6] |= 1  # flag of encryption, local header
    at = content.index(b"PK\x01\x02")
    content[at + 8] |= 1  # and in the directory
    (said,) = block(bytes(content)).findings
    assert "password" in said.detail


@pytest.mark.parametrize(("name", "code"), [("../site.txt", "file-outside-folder"), ("nowhere.txt", "file-missing")])
def test_a_file_that_is_not_beside_the_workbook(book, name, code):
    path = book("lost.xlsx", {}, setting=name)
    said = [found for found in check(path) if found.code == code]
    assert [(found.value, found.place.partition("!")[0]) for found in said] == [(name, "Settings")]


def test_nothing_for_the_season_is_a_warning(block):
    (said,) = block(sounding(day="1990 06 20")).findings
    assert (said.code, said.severity, said.detail) == ("soundings-none", "warning", "1 of other days")
