"""What is said about a measured record: the exact findings of one fault at a time."""

import numpy as np
import pytest

from etflux import humidity, solar, weather


def _said(make, rows, stations=None):
    found = weather.quality(weather.arrange(make.case(rows, stations)))
    return {(finding.code, finding.row, finding.quantity) for finding in found}


def test_good_record_is_not_spoken_of(make):
    assert _said(make, make.weather()) == set()


@pytest.mark.parametrize(
    ("column", "value", "expected"),
    [
        ("t_max_c", 3.0, {("t-max-below-t-min", 7, "t_max_c")}),
        ("t_max_c", 62.0, {("range", 7, "t_max_c")}),
        ("rh_min_pct", 99.5, {("humidity-order", 7, "rh_max_pct")}),
        ("rh_max_pct", 120.0, {("range", 7, "rh_max_pct")}),
        ("rain_mm", -1.0, {("rain-negative", 7, "rain_mm")}),
        ("rain_mm", 300.0, {("rain-heavy", 7, "rain_mm")}),
        ("rs_mj_m2_d", 44.5, {("radiation-above-sky", 7, "rs_mj_m2_d")}),
        ("wind_m_s", 55.0, {("range", 7, "wind_m_s")}),
        ("dew_point_c", 34.0, {("dew-point-above-t-max", 7, "dew_point_c")}),
        ("t_mean_c", 50.0, {("range", 7, "t_mean_c"), ("t-mean-outside", 7, "t_mean_c")}),
    ],
)
def test_one_wrong_value(make, column, value, expected):
    rows = make.weather()
    rows.loc[7, column] = value
    assert _said(make, rows) == expected


@pytest.mark.parametrize(
    ("column", "factor", "offset", "unit"),
    [("t_max_c", 1.8, 32.0, "°F"), ("rs_mj_m2_d", 11.574, 0.0, "W/m²"), ("wind_m_s", 86.4, 0.0, "km/day")],
)
def test_column_in_another_unit_is_one_finding_not_sixty(make, column, factor, offset, unit):
    rows = make.weather()
    near = rows["station_id"] == "near"
    rows.loc[near, column] = rows.loc[near, column] * factor + offset
    found = weather.quality(weather.arrange(make.case(rows)))
    assert [(finding.code, finding.quantity) for finding in found] == [("unit-suspected", column)]
    assert unit in found[0].detail


def test_humidity_as_a_fraction(make):
    rows = make.weather()
    rows[["rh_max_pct", "rh_min_pct"]] /= 100.0
    found = {(finding.code, finding.quantity) for finding in weather.quality(weather.arrange(make.case(rows)))}
    assert found == {("humidity-fraction", "rh_max_pct"), ("humidity-fraction", "rh_min_pct")}


def test_humidity_sensor_that_never_saturates(make):
    rows = make.weather()
    rows["rh_max_pct"] = np.minimum(rows["rh_max_pct"], 89.0 + 0.01 * np.arange(len(rows)) % 1.0)
    codes = {finding.code for finding in weather.quality(weather.arrange(make.case(rows)))}
    assert "humidity-never-wet" in codes


def test_stuck_sensor_and_calm_wind(make):
    rows = make.weather()
    near = rows["station_id"] == "near"
    rows.loc[near & rows["date"].between("2031-06-10", "2031-06-14"), "wind_m_s"] = 2.2
    assert _said(make, rows) == {("value-repeated", 13, "wind_m_s")}
    rows = make.weather()
    rows.loc[near, "wind_m_s"] = np.linspace(0.1, 0.45, 60)
    found = weather.quality(weather.arrange(make.case(rows)))
    assert [finding.code for finding in found] == ["wind-calm"]


def test_missing_days_and_a_station_without_weather(make):
    rows = make.weather()
    rows = rows[~((rows["station_id"] == "near") & rows["date"].between("2031-06-10", "2031-06-12"))]
    found = weather.quality(weather.arrange(make.case(rows.reset_index(drop=True))))
    assert [finding.code for finding in found] == ["days-missing"]
    assert "3 days, first 2031-06-10, last 2031-06-12" in found[0].detail
    rows = make.weather()
    found = weather.quality(weather.arrange(make.case(rows[rows["station_id"] != "far"].reset_index(drop=True))))
    assert [finding.code for finding in found] == ["station-without-weather"]


def _sunny(make, share, days=180):
    """A record whose clear days read `share` (day) of the clear sky."""
    rows = make.weather(days, "2031-04-01")
    day = solar.day_of_year(rows["date"].to_numpy())
    latitude = rows["station_id"].map({"near": 42.0, "by": 42.18, "far": 44.5}).to_numpy()
    ea = humidity.vapour_pressure_from_rh_max_min(
        rows["t_max_c"], rows["t_min_c"], rows["rh_max_pct"], rows["rh_min_pct"]
    )
    clear = solar.clear_sky_radiation_humid(latitude, day, humidity.pressure_from_elevation(300.0), ea, 0.8)
    cloud = np.random.default_rng(3).uniform(0.3, 1.0, len(rows))
    number = np.tile(np.arange(days), 3)
    cloud = np.where(number % 5 == 0, 1.0, cloud)
    near = (rows["station_id"] == "near").to_numpy()
    return rows.assign(rs_mj_m2_d=clear * cloud * np.where(near, share[number], 1.0))


@pytest.mark.parametrize(
    ("share", "codes"),
    [
        (np.full(180, 1.0), set()),
        (np.full(180, 0.95), set()),
        (np.full(180, 0.90), {"pyranometer-off"}),
        (np.full(180, 1.12), {"pyranometer-off"}),
        (np.linspace(1.03, 0.93, 180), {"pyranometer-drift"}),
    ],
)
def test_pyranometer_against_the_clear_sky(make, share, codes):
    found = [f for f in weather.quality(weather.arrange(make.case(_sunny(make, share)))) if "pyranometer" in f.code]
    assert {finding.code for finding in found} == codes
    assert {finding.subject for finding in found} <= {"station near"}


def test_pyranometer_needs_sixty_days(make):
    rows = _sunny(make, np.full(180, 0.85))
    short = rows[rows["date"] < "2031-05-20"].reset_index(drop=True)
    assert _said(make, short) == set()
