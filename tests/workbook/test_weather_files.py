"""CSV files of weather beside the workbook: what is read, what is refused, and where findings stand."""

import io
import os

import numpy as np
import pandas as pd
import pytest
from openpyxl import load_workbook

from etflux.variables import to_si
from etflux.workbook import check, read
from etflux.workbook.weather_files import Trouble, beside

HEADINGS = "Date,Highest temperature (°C),Lowest temperature (°C),Dew point (°C),Wind speed (m/s),Rain (mm)"


def days(separator=",", decimal=".", station=""):
    """Thirty days as text."""
    rows = []
    for k in range(30):
        numbers = (25.0 + np.sin(k) + 0.01 * k, 14.0 + np.cos(k), 12.5 + np.sin(2 * k), 2.0 + 0.5 * np.cos(k), 0.1 * k)
        words = [f"{number:.2f}".replace(".", decimal) for number in numbers]
        rows.append(separator.join([*([station] if station else []), f"2031-06-{k + 1:02d}", *words]))
    return "\n".join(rows) + "\n"


@pytest.fixture
def workbook(bare_bytes, tmp_path):
    """A function that writes a workbook whose second station has its days in a file of that name."""

    def make(name, content=None, station_two="N2", also=None):
        book = load_workbook(io.BytesIO(bare_bytes))
        book["Weather"].delete_rows(34, 30)
        book["Stations"]["K5"].value = name
        if also:
            book["Stations"]["K4"].value = also
            book["Weather"].delete_rows(4, 30)
        book["Stations"]["A5"].value = station_two
        book.save(tmp_path / "filled.xlsx")
        if content is not None:
            path = tmp_path / str(name)
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
        return tmp_path / "filled.xlsx"

    return make


def found(path):
    return {(finding.place, finding.code) for finding in check(path)}


@pytest.mark.parametrize(
    ("separator", "decimal"),
    [(",", "."), (";", "."), (";", ","), ("\t", ".")],
    ids=["comma", "semicolon", "decimal comma", "tab"],
)
def test_separators_and_decimal_signs_give_the_same_days(separator, decimal, workbook):
    path = workbook("n2.csv", HEADINGS.replace(",", separator) + "\n" + days(separator, decimal))
    case, findings, _ = read(path)
    assert findings == []
    rows = case.table("weather").query("station_id == 'N2'").reset_index(drop=True)
    expected = pd.read_csv(io.StringIO(HEADINGS + "\n" + days()))
    assert len(rows) == 30
    assert rows["date"].iloc[4] == pd.Timestamp("2031-06-05")
    for name, heading in (("t_max_c", 1), ("t_min_c", 2), ("dew_point_c", 3), ("wind_m_s", 4), ("rain_mm", 5)):
        assert rows[name].to_numpy() == pytest.approx(expected.iloc[:, heading].to_numpy(), abs=1e-12)
    assert case.source["weather_files"].keys() == {"n2.csv"}


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16"])
def test_encodings(encoding, workbook):
    assert found(workbook("n2.csv", (HEADINGS + "\n" + days()).encode(encoding))) == set()


def test_latin_1_is_read_and_said(workbook):
    content = (HEADINGS + "\n" + days()).encode("latin-1")
    assert found(workbook("n2.csv", content)) == {("n2.csv", "file-encoding")}


def test_units_and_names_of_the_registry(workbook):
    heading = "station_id,date,t_max_c,Lowest temperature (degF),dew_point_c,Wind speed (mph),Rain (in)"
    case, findings, _ = read(workbook("n2.csv", heading + "\n" + days(station="N2")))
    assert [finding.code for finding in findings] == ["unit-other-system"]
    rows = case.table("weather").query("station_id == 'N2'").reset_index(drop=True)
    assert rows["t_max_c"].iloc[0] == pytest.approx(25.0)
    assert rows["t_min_c"].iloc[0] == pytest.approx(float(to_si(15.0, "t_min_c", "°F")))
    assert rows["wind_m_s"].iloc[0] == pytest.approx(2.5 * 0.44704)


def test_lines_above_the_headings_and_blank_lines(workbook):
    text = (
        "Weather of the river station\nmade by hand\n\n"
        + HEADINGS
        + "\n"
        + days().replace("2031-06-10", "\n2031-06-10")
    )
    assert found(workbook("n2.csv", text)) == set()


def test_findings_name_line_and_column(workbook):
    text = HEADINGS + "\n" + days()
    lines = text.splitlines()
    lines[5] = "2031-06-05,9.00,14.10,8.0,2.0,0.0"  # line 6
    lines[8] = "2031-06-08,25.10,14.20,12.1,two,1.0"
    lines[9] = "09/06/2031,25.20,14.30,12.2,2.1,1.1"
    lines[10] = ",25.20,14.30,12.2,2.1,1.1"
    lines[11] = "2031-06-11,25.20,14.30,12.2,2.1,NA"
    assert found(workbook("n2.csv", "\n".join(lines))) == {
        ("n2.csv line 6, column Highest temperature (°C)", "t-max-below-t-min"),
        ("n2.csv line 9, column Wind speed (m/s)", "text-for-number"),
        ("n2.csv line 10, column Date", "date-ambiguous"),
        ("n2.csv line 11, column Date", "value-missing"),
        ("n2.csv line 12, column Rain (mm)", "missing-mark"),
    }


def test_thousands_and_mixed_decimal_signs_are_not_guessed(workbook):
    text = HEADINGS.replace(",", ";") + "\n" + days(";", ",").replace("25,00;", "25.00;", 1)
    assert found(workbook("n2.csv", text)) == {("n2.csv line 2, column Highest temperature (°C)", "number-as-text")}


def test_headings_of_a_file(workbook):
    text = HEADINGS.replace("Highest temperature (°C)", "Tmax").replace("Rain (mm)", "Rain") + "\n" + days()
    assert found(workbook("n2.csv", text)) == {
        ("n2.csv line 1", "column-missing"),
        ("n2.csv line 1, column Tmax", "heading-unknown"),
        ("n2.csv line 1, column Rain", "unit-missing"),
    }


def test_a_whole_sensor_is_placed_in_its_file(workbook):
    text = (
        HEADINGS
        + ",Highest relative humidity (%)\n"
        + "".join(f"{line},0.9{k}\n" for k, line in enumerate(days().split()))
    )
    assert found(workbook("n2.csv", text)) == {
        ("n2.csv line 1, column Highest relative humidity (%)", "humidity-fraction")
    }


def test_days_in_the_sheet_and_in_the_file_are_twice(workbook, bare_bytes, tmp_path):
    path = workbook("n2.csv", HEADINGS + "\n" + days())
    book = load_workbook(io.BytesIO(bare_bytes))
    book["Stations"]["K5"].value = "n2.csv"
    book.save(path)
    places = [(finding.place, finding.code, finding.detail) for finding in check(path)]
    assert places == [("n2.csv line 2, column Date", "row-repeated", "and 29 more days")]


def test_one_file_for_two_stations_needs_their_ids(workbook):
    with_ids = "station_id," + HEADINGS + "\n" + days(station="N1") + days(station="N2")
    assert found(workbook("both.csv", with_ids, also="both.csv")) == set()
    without = found(workbook("both.csv", HEADINGS + "\n" + days(), also="both.csv"))
    assert ("both.csv line 1", "column-missing") in without


def test_rows_of_another_station(workbook):
    text = "station_id," + HEADINGS + "\n" + days(station="N2").replace("N2,2031-06-04", "N7,2031-06-04")
    assert found(workbook("n2.csv", text)) == {("n2.csv line 5, column station_id", "file-other-station")}


def test_ids_with_leading_zeros_stay(workbook):
    text = "station_id," + HEADINGS + "\n" + days(station="007")
    case, findings, _ = read(workbook("n2.csv", text, station_two="007"))
    assert findings == []
    assert set(case.table("weather")["station_id"]) == {"N1", "007"}


def test_folders_below_are_allowed(workbook):
    for name in ("stations/n2.csv", "./n2.csv", "stations\\n3.csv"):
        content = HEADINGS + "\n" + days()
        path = workbook(name.replace("\\", "/"), content)
        assert found(path) == set(), name
    assert found(workbook("stations\\n3.csv")) == set()


@pytest.mark.parametrize(
    "name",
    [
        "../n2.csv", "/etc/hostname", "stations/../../n2.csv", "C:\\n2.csv", "\\\\server\\share\\n2.csv", "..\\n2.csv",
        ".",
    ],
)  # fmt: skip
def test_files_outside_the_folder_are_refused(name, workbook, tmp_path):
    (tmp_path.parent / "n2.csv").write_text(HEADINGS + "\n" + days(), encoding="utf-8")
    assert found(workbook(name)) == {("Stations!K5", "file-outside-folder")}


def test_links_that_leave_the_folder_are_refused(workbook, tmp_path, tmp_path_factory):
    elsewhere = tmp_path_factory.mktemp("elsewhere")
    (elsewhere / "n2.csv").write_text(HEADINGS + "\n" + days(), encoding="utf-8")
    (tmp_path / "link.csv").symlink_to(elsewhere / "n2.csv")
    (tmp_path / "folder").symlink_to(elsewhere)
    (tmp_path / "loop.csv").symlink_to(tmp_path / "loop.csv")
    assert found(workbook("link.csv")) == {("Stations!K5", "file-outside-folder")}
    assert found(workbook("folder/n2.csv")) == {("Stations!K5", "file-outside-folder")}
    assert {code for _, code in found(workbook("loop.csv"))} <= {"file-missing", "file-unreadable"}


def test_links_inside_the_folder_are_followed(workbook, tmp_path):
    path = workbook("n2.csv", HEADINGS + "\n" + days())
    (tmp_path / "link.csv").symlink_to(tmp_path / "n2.csv")
    assert found(workbook("link.csv")) == set()
    assert path.exists()


def test_what_is_not_a_csv_file(workbook, tmp_path, bare_bytes):
    (tmp_path / "n2.d").mkdir()
    os.mkfifo(tmp_path / "pipe.csv")
    assert found(workbook("n2.d")) == {("Stations!K5", "file-unreadable")}
    assert found(workbook("pipe.csv")) == {("Stations!K5", "file-unreadable")}
    assert found(workbook("none.csv")) == {("Stations!K5", "file-missing")}
    assert ("book.csv", "file-unreadable") in found(workbook("book.csv", bare_bytes))
    assert ("zero.csv", "file-unreadable") in found(workbook("zero.csv", b"a,b\0c\n"))
    assert ("void.csv", "file-empty") in found(workbook("void.csv", b""))
    assert ("words.csv", "headings-missing") in found(workbook("words.csv", "once upon a time\n"))
    assert ("quote.csv", "file-unreadable") in found(workbook("quote.csv", HEADINGS + '\n"' + "x" * 200_000))
    assert ("large.csv", "file-unreadable") in found(workbook("large.csv", b"1,2,3\n" * 3_500_000))


def test_the_nearest_name_is_told(workbook, tmp_path):
    (tmp_path / "river_2031.csv").write_text("x", encoding="utf-8")
    (finding,) = check(workbook("river2031.csv"))
    assert finding.detail == "the nearest known is 'river_2031.csv'"


def test_beside_says_what_is_wrong(tmp_path):
    assert beside(tmp_path, "") == Trouble("file-outside-folder")
    assert beside(tmp_path, "a\0b").code == "file-unreadable"
