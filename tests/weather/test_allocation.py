"""Which station and whose rain a county takes. Blank rain is missing, never 0."""

import numpy as np
import pandas as pd
import pytest

from etflux import weather

GAP = ("2031-06-11", "2031-06-19")  # nine days


def _blank(rows, stations, first=GAP[0], last=GAP[1]):
    rows = rows.copy()
    rows.loc[rows["station_id"].isin(stations) & rows["date"].between(first, last), "rain_mm"] = np.nan
    return rows


def _local(make, rows, **arguments):
    case = make.case(rows, **arguments)
    record, _ = weather.fill(weather.arrange(case), case.settings)
    return (*weather.to_counties(case, record), record)


def test_nearest_station_or_the_named_one(make):
    local, findings, record = _local(make, make.weather())
    assert findings == []
    assert local.station_index.tolist() == [0, 2]
    assert local.distance_km == pytest.approx([2.2, 11.1], abs=0.1)
    named, _, _ = _local(make, make.weather(), counties=make.counties().assign(station_id=["by", None]))
    assert named.station_index.tolist() == [1, 2]
    assert np.array_equal(local.rain_mm[:, 0], record.values["rain_mm"][:, 0])
    assert local.season_end.tolist() == [60, 60]


def test_blank_rain_takes_a_gauge_within_reach_and_says_so(make):
    rows = _blank(make.weather(), ["near"])
    local, findings, record = _local(make, rows)
    assert findings == []
    assert np.array_equal(local.rain_mm[10:19, 0], record.values["rain_mm"][10:19, 1])
    assert (local.rain_source[10:19, 0] == 1).all()
    assert (local.rain_source[19:, 0] == 0).all()


def test_nine_blank_days_are_never_dry(make):
    rows = _blank(make.weather(), ["near", "by"])
    local, findings, _ = _local(make, rows)
    assert np.isnan(local.rain_mm[10:19, 0]).all()
    assert local.season_end.tolist() == [10, 60]
    assert [(finding.code, finding.value) for finding in findings] == [("rain-missing", "c1")]
    assert "9 days without rain data, first 2031-06-11, last 2031-06-19" in findings[0].detail


def test_treated_as_zero_only_when_asked(make):
    rows = _blank(make.weather(), ["near", "by"])
    local, findings, _ = _local(make, rows, settings={"missing_rain": "treat as 0"})
    assert (local.rain_mm[10:19, 0] == 0.0).all()
    assert (local.rain_source[10:19, 0] == 32).all()
    assert [finding.code for finding in findings] == ["rain-treated-as-zero"]
    assert local.season_end.tolist() == [60, 60]


def test_far_stations_do_not_serve(make):
    rows = _blank(make.weather(), ["near"])
    _, findings, _ = _local(make, rows, settings={"rain_neighbour_km": 10.0})
    assert [finding.code for finding in findings] == ["rain-missing"]


def test_a_neighbour_s_forecast_rain_is_still_a_forecast(make):
    rows = _blank(make.weather(), ["near"])
    rows["forecast"] = rows["date"] >= "2031-06-15"
    local, findings, _ = _local(make, rows)
    assert findings == []
    assert local.rain_source[8:20, 0].tolist() == [0, 0, 1, 1, 1, 1, 17, 17, 17, 17, 17, 16]


def test_each_blank_day_takes_the_nearest_station_that_has_rain(make):
    rows = _blank(_blank(make.weather(), ["near"]), ["by"], "2031-06-15", "2031-06-16")
    local, findings, record = _local(make, rows, settings={"rain_neighbour_km": 200.0}, counties=make.counties()[:1])
    assert [finding.code for finding in findings] == ["rain-missing"]
    lender = np.ones(9, dtype=int)
    lender[4:6] = 2  # serves only where the setting reaches it
    far = weather.great_circle_km([42.02], [-93.0], [44.5], [-93.0]).item()
    assert far > 200.0
    assert np.isnan(local.rain_mm[[14, 15], 0]).all()
    wide, _, _ = _local(make, rows, settings={"rain_neighbour_km": far + 1.0}, counties=make.counties()[:1])
    assert np.array_equal(wide.rain_mm[10:19, 0], record.values["rain_mm"][np.arange(10, 19), lender])


def test_gauge_covers_only_its_days(make):
    rows = _blank(make.weather(), ["near", "by"])
    days = pd.date_range("2031-06-11", "2031-06-14")
    gauges = pd.DataFrame({"county_id": "c1", "date": days, "rain_mm": [0.0, 4.0, 0.0, 1.5]})
    local, findings, _ = _local(make, rows, rain_gauges=gauges)
    assert local.rain_mm[10:14, 0].tolist() == [0.0, 4.0, 0.0, 1.5]
    assert (local.rain_source[10:14, 0] == 0).all()
    assert local.season_end.tolist() == [14, 60]
    assert [(f.code, f.table, f.row, f.quantity, f.value) for f in findings] == [
        ("rain-missing", "counties", 0, "county_id", "c1")
    ]
    assert "5 days without rain data, first 2031-06-15" in findings[0].detail


def test_own_gauge_wins(make):
    gauges = pd.DataFrame(
        {"county_id": ["c1", "c1", "nobody"], "date": pd.to_datetime(["2031-06-11", "2031-06-12", "2031-06-12"]),
         "rain_mm": [33.0, np.nan, 99.0]}
    )  # fmt: skip
    local, _, record = _local(make, make.weather(), rain_gauges=gauges)
    assert local.rain_mm[10, 0] == 33.0
    assert local.rain_mm[11, 0] == record.values["rain_mm"][11, 0]
    assert 99.0 not in local.rain_mm


def test_temperature_gap_stops_the_season_too(make):
    rows = make.weather()
    rows.loc[(rows["station_id"] == "near") & rows["date"].between("2031-07-01", "2031-07-09"), "t_min_c"] = np.nan
    local, _, _ = _local(make, rows)
    assert local.season_end.tolist() == [30, 60]


def test_distances_are_great_circles():
    one = weather.great_circle_km([0.0, 60.0], [0.0, 0.0], [0.0], [90.0])
    assert one[:, 0] == pytest.approx([10007.6, 10007.6], abs=0.5)  # a quarter of the way round
