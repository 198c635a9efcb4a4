"""Reading: columns in any order, places, values as they were written, and how long it takes."""

import io
import time

import numpy as np
import pandas as pd
import pytest
from openpyxl import load_workbook

from etflux.workbook import check, read, template
from etflux.workbook.sheets import sheets


def test_columns_in_any_order_and_other_units(bare_bytes, tmp_path):
    book = load_workbook(io.BytesIO(bare_bytes))
    page = book["Weather"]
    rows = [[cell.value for cell in row] for row in page.iter_rows(min_row=3, max_row=63, max_col=18)]
    page.delete_rows(1, 100)
    order = [14, 2, 3, 0, 11, 1, 13, 8]
    heading = ["Rain (in)", "Highest temperature (K)", "t_min_c", "STATION  ID", "Solar radiation (W/m2)", "Date",
               "Wind speed (km/day)", "Dew point (degF)"]  # fmt: skip
    page.append(["Days of both stations"])
    page.append([None, *heading])
    for row in rows[1:]:
        values = [row[place] for place in order]
        values[0] = values[0] / 25.4
        values[1] += 273.15
        values[4] /= 0.0864
        values[6] *= 86.4
        values[7] = values[7] * 1.8 + 32.0
        page.append([None, *values])
    path = tmp_path / "other.xlsx"
    book.save(path)
    (tmp_path / "good.xlsx").write_bytes(bare_bytes)
    mine, findings, places = read(path)
    assert [finding.code for finding in findings] == ["unit-other-system"]
    good = read(tmp_path / "good.xlsx")[0].table("weather")
    for name in ("rain_mm", "t_max_c", "t_min_c", "rs_mj_m2_d", "wind_m_s", "dew_point_c"):
        assert mine.table("weather")[name].to_numpy() == pytest.approx(good[name].to_numpy(), abs=1e-9)
    assert mine.table("weather")["rh_max_pct"].isna().all()
    assert places.of("weather", 0, "dew_point_c") == "Weather!I3"
    assert places.of("weather", 59, "station_id") == "Weather!E62"


def test_places(good_path):
    _, _, places = read(good_path)
    assert places.of("weather", 0, "t_max_c") == "Weather!C4"
    assert places.of("weather", None, "t_max_c") == "Weather!C3"
    assert places.of("weather") == "Weather"
    assert places.of("stands", 3, "planting_date_late") == "Stands!J7"
    assert places.of("stands", 3) == "Stands!A7"
    assert places.of("settings", None, "frost_kill_c").startswith("Settings!C")
    assert places.of("covers", 2, "kcb_mid").startswith("Covers!")
    assert places.of("rest", 0, "share_pct") == "Rest of county!C4"


def test_packaged_rows_have_no_cell(bare_bytes, tmp_path):
    book = load_workbook(io.BytesIO(bare_bytes))
    del book["Soils"]
    path = tmp_path / "no soils.xlsx"
    book.save(path)
    case, _, places = read(path)
    assert places.of("soils", 0, "theta_fc") == "Soils"
    assert len(case.table("soils")) > 5
    book = load_workbook(io.BytesIO(bare_bytes))
    book["Soils"].delete_rows(5, 3)
    book.save(path)
    _, _, places = read(path)
    assert places.of("soils", 8, "theta_fc") == "Soils (packaged row)"


def test_values_are_told_in_the_unit_of_their_heading(tables, tmp_path):
    tables = dict(tables)
    tables["stations"] = tables["stations"].assign(elevation_m=[7000.0, 230.0])
    tables["weather"] = tables["weather"].assign(t_max_c=lambda rows: rows["t_max_c"].where(rows.index != 5, 57.0))
    path = template.write(tmp_path / "us.xlsx", "us", tables)
    told = {finding.place: (finding.value, finding.detail) for finding in check(path)}
    assert told["Stations!E4"] == (pytest.approx(22965.9, abs=0.1), "from -1411 to 1.804e+04 ft")
    assert told["Weather!C9"] == (pytest.approx(134.6), "from -58 to 131 °F")


def test_dates_of_1904_are_the_same_days(bare_bytes, tmp_path):
    from openpyxl.utils.datetime import CALENDAR_MAC_1904

    book = load_workbook(io.BytesIO(bare_bytes))
    book.epoch = CALENDAR_MAC_1904
    book.save(tmp_path / "mac.xlsx")
    (tmp_path / "good.xlsx").write_bytes(bare_bytes)
    mac, good = (read(tmp_path / name)[0] for name in ("mac.xlsx", "good.xlsx"))
    for name in ("weather", "stands", "profiles", "wind"):
        pd.testing.assert_frame_equal(mac.table(name), good.table(name))


def test_county_ids_of_four_digits_are_the_same_everywhere(bare_bytes, tmp_path):
    book = load_workbook(io.BytesIO(bare_bytes))
    book["Counties"]["A4"].value = 1001
    book["Stands"]["B4"].value, book["Stands"]["B5"].value = "1001", 1001
    for title, cell in (("Mixing depths", "A4"), ("Rest of county", "A5"), ("Wind", "A5")):
        book[title][cell].value = 1001
    path = tmp_path / "geoid.xlsx"
    book.save(path)
    case = read(path)[0]
    assert case.table("counties")["county_id"].tolist() == ["01001", "B2"]
    assert case.table("stands")["county_id"].tolist() == ["01001", "01001", "B2", "B2"]


def test_blank_rows_are_skipped_and_places_stay_right(bare_bytes, tmp_path):
    book = load_workbook(io.BytesIO(bare_bytes))
    book["Stands"].insert_rows(5, 3)
    path = tmp_path / "gaps.xlsx"
    book.save(path)
    case, findings, places = read(path)
    assert findings == []
    assert len(case.table("stands")) == 4
    assert places.of("stands", 1, "area_km2") == "Stands!E8"


def test_unknown_units_leave_a_column_blank_and_not_wrong(bare_bytes, tmp_path):
    book = load_workbook(io.BytesIO(bare_bytes))
    book["Weather"]["L3"].value = "Solar radiation (suns)"
    path = tmp_path / "suns.xlsx"
    book.save(path)
    assert read(path)[0].table("weather")["rs_mj_m2_d"].isna().all()


def test_progress_is_told(good_path):
    told = []
    read(good_path, progress=lambda step, share: told.append((step, share)))
    assert ("reading Weather", pytest.approx(1 / len(sheets()))) in told
    assert told[-1] == ("reading done", 1.0)
    shares = [share for _, share in told]
    assert shares == sorted(shares)


def test_a_season_of_a_region_is_checked_in_seconds(tables, tmp_path):
    """Six stations, 183 days, 90 stands: the whole command may take 3 s; here without starting Python."""
    path = template.write(tmp_path / "region.xlsx", "si", larger(tables, 6, 183, 90))
    check(path)
    start = time.perf_counter()
    findings = check(path)
    seconds = time.perf_counter() - start
    assert not [finding for finding in findings if finding.severity == "error"]
    assert seconds < 3.0


def larger(tables, stations, days, stands):
    """The good tables repeated: more stations, days and stands."""
    tables = dict(tables)
    rng = np.random.default_rng(5)
    ids = [f"S{number}" for number in range(stations)]
    one = tables["weather"].iloc[np.arange(days) % 30].reset_index(drop=True)
    one["date"] = pd.date_range("2031-04-01", periods=days)
    weather = pd.concat([one.assign(station_id=name) for name in ids], ignore_index=True)
    for name in ("t_max_c", "t_min_c", "dew_point_c", "rs_mj_m2_d", "wind_m_s"):
        weather[name] = (weather[name] + 0.3 * rng.random(len(weather))).round(2)
    station = tables["stations"].iloc[[0] * stations].reset_index(drop=True)
    stand = tables["stands"].iloc[np.arange(stands) % 4].reset_index(drop=True)
    stand["stand_id"] = [f"stand-{number}" for number in range(stands)]
    stand["area_km2"] = 5.0
    return tables | {
        "stations": station.assign(station_id=ids, latitude_deg=41.5 + 0.01 * np.arange(stations)),
        "weather": weather,
        "counties": tables["counties"].assign(station_id=ids[0]),
        "stands": stand,
        "irrigation_events": tables["irrigation_events"].assign(stand_id="stand-2"),
        "observations": tables["observations"].assign(stand_id=["stand-0", "stand-1"]),
    }


def test_values_of_morning_observers_are_placed_where_they_stand(tables, tmp_path):
    """Read at 7: the highest temperature of a day stands in the next day's row."""
    tables = dict(tables)
    tables["stations"] = tables["stations"].assign(observation_hour=[7.0, np.nan])
    tables["weather"] = tables["weather"].assign(t_max_c=lambda rows: rows["t_max_c"].where(rows.index != 5, 70.0))
    path = template.write(tmp_path / "morning.xlsx", "si", tables)
    assert {(finding.place, finding.code) for finding in check(path) if finding.severity == "error"} == {
        ("Weather!C9", "range")
    }
