"""Filling by the published procedures, every value labelled.

FAO-56: Allen et al. (1998), chapter 3 "Estimating missing climatic data".
"""

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from etflux import humidity, reference, solar, weather

NEIGHBOUR, ESTIMATED, OWN_MEAN, DEFAULT = 1, 2, 4, 8


def _filled(make, rows, stations=None, **choices):
    case = make.case(rows, stations, settings=choices)
    return weather.fill(weather.arrange(case), case.settings)


def _near(rows, name):
    return rows[rows["station_id"] == "near"][name].to_numpy()


def test_complete_record_is_left_as_it_is(make):
    rows = make.weather()
    record, findings = _filled(make, rows)
    assert findings == []
    for name in ("t_max_c", "t_min_c", "rs_mj_m2_d", "rh_min_pct"):
        assert np.array_equal(record.values[name][:, 0], _near(rows, name))
        assert (record.source[name] == 0).all()


HUMIDITY_FORMS = {
    "vapour_pressure_kpa": (1.5, lambda v: np.full(60, 1.5)),
    "vpd_kpa": (0.9, lambda v: humidity.vapour_pressure_from_deficit(v["t_max_c"], v["t_min_c"], 0.9)),
    "dew_point_c": (14.0, lambda v: np.full(60, humidity.vapour_pressure_from_dew_point(14.0))),
}


@pytest.mark.parametrize("name", HUMIDITY_FORMS)
def test_humidity_takes_the_first_form_at_hand(make, name):
    value, expected = HUMIDITY_FORMS[name]
    rows = make.weather().assign(**{name: value})
    record, _ = _filled(make, rows)
    mine = rows[rows["station_id"] == "near"]
    found = record.values["vapour_pressure_kpa"][:, 0]
    assert found == pytest.approx(np.asarray(expected({key: mine[key].to_numpy() for key in mine})), rel=1e-12)


@pytest.mark.parametrize(
    ("dropped", "form"),
    [
        ([], lambda m: humidity.vapour_pressure_from_rh_max_min(m.t_max_c, m.t_min_c, m.rh_max_pct, m.rh_min_pct)),
        (["rh_min_pct"], lambda m: humidity.vapour_pressure_from_rh_max(m.t_min_c, m.rh_max_pct)),
    ],
)
def test_humidity_from_relative_humidity(make, dropped, form):
    rows = make.weather().drop(columns=dropped)
    record, _ = _filled(make, rows)
    mine = rows[rows["station_id"] == "near"]
    assert record.values["vapour_pressure_kpa"][:, 0] == pytest.approx(np.asarray(form(mine)))
    assert (record.source["vapour_pressure_kpa"] == 0).all()


def test_mean_humidity_and_then_the_lowest_temperature(make):
    rows = make.weather().drop(columns=["rh_max_pct", "rh_min_pct"]).assign(rh_mean_pct=70.0)
    mine = rows[rows["station_id"] == "near"]
    record, _ = _filled(make, rows)
    expected = humidity.vapour_pressure_from_rh_mean(mine.t_max_c, mine.t_min_c, 70.0)
    assert record.values["vapour_pressure_kpa"][:, 0] == pytest.approx(np.asarray(expected))
    stations = make.stations(climate=["humid", "arid", "humid"])
    record, _ = _filled(make, rows.drop(columns="rh_mean_pct"), stations)
    below = record.values["t_min_c"] - record.values["dew_point_c"]
    assert below[:, 0] == pytest.approx(np.zeros(60), abs=1e-9)
    assert below[:, 1] == pytest.approx(np.full(60, 2.0))
    assert (record.source["vapour_pressure_kpa"] == ESTIMATED).all()


def test_temperature_gap_takes_the_neighbour_plus_its_usual_difference(make):
    rows = make.weather()
    gap = (rows["station_id"] == "near") & rows["date"].between("2031-07-10", "2031-07-12")
    truth = rows.copy()
    rows.loc[gap, "t_max_c"] = np.nan
    record, findings = _filled(make, rows)
    assert findings == []
    by = truth[truth["station_id"] == "by"]["t_max_c"].to_numpy()
    near = _near(truth, "t_max_c")
    difference = (near - by)[9:39].mean()  # the 30 days before 10 July, the record's day 39
    assert record.values["t_max_c"][39, 0] == pytest.approx(by[39] + difference)
    assert (record.source["t_max_c"][39:42, 0] == NEIGHBOUR).all()
    (fill,) = [row for row in record.fills if row.quantity == "t_max_c"]
    assert (fill.station_id, str(fill.first), str(fill.last), fill.days) == ("near", "2031-07-10", "2031-07-12", 3)


def test_longer_temperature_gap_stays_and_is_said(make):
    rows = make.weather()
    rows.loc[(rows["station_id"] == "near") & rows["date"].between("2031-07-10", "2031-07-13"), "t_max_c"] = np.nan
    record, findings = _filled(make, rows)
    assert [finding.code for finding in findings] == ["temperature-gap"]
    assert "first 2031-07-10, last 2031-07-13" in findings[0].detail
    assert np.flatnonzero(np.isnan(record.values["t_max_c"][:, 0])).tolist() == [39, 40, 41, 42]


def test_radiation_from_sunshine_neighbour_and_temperature_range(make):
    rows = make.weather()
    near = rows["station_id"] == "near"
    rows.loc[near, "sunshine_h"] = np.where(np.arange(60) < 10, 8.0, np.nan)
    rows.loc[near, "rs_mj_m2_d"] = np.nan
    record, _ = _filled(make, rows)
    day = solar.day_of_year(record.dates)
    ra = solar.extraterrestrial_radiation(42.0, day)
    sunny = solar.radiation_from_sunshine(ra, 8.0, solar.daylight_hours(42.0, day))
    assert record.values["rs_mj_m2_d"][:10, 0] == pytest.approx(sunny[:10])
    ratio = rows[rows["station_id"] == "by"]["rs_mj_m2_d"] / solar.extraterrestrial_radiation(42.18, day)
    assert record.values["rs_mj_m2_d"][10:, 0] == pytest.approx((ratio * ra).to_numpy()[10:])
    assert (record.source["rs_mj_m2_d"][10:, 0] == NEIGHBOUR).all()
    record, _ = _filled(make, rows.assign(rs_mj_m2_d=np.nan, sunshine_h=np.nan), make.stations(situation="coast"))
    t_max, t_min = record.values["t_max_c"][:, 0], record.values["t_min_c"][:, 0]
    expected = np.minimum(0.19 * np.sqrt(t_max - t_min) * ra, solar.clear_sky_radiation(ra, 300.0))
    assert record.values["rs_mj_m2_d"][:, 0] == pytest.approx(expected)
    assert (record.source["rs_mj_m2_d"] == ESTIMATED).all()


def test_wind_height_neighbour_own_mean_and_default(make):
    rows = make.weather()
    stations = make.stations(wind_height_m=[10.0, 2.0, 2.0])
    near, far = rows["station_id"] == "near", rows["station_id"] == "far"
    rows.loc[near & (rows["date"] == "2031-06-05"), "wind_m_s"] = np.nan
    rows.loc[far & (rows["date"] == "2031-06-06"), "wind_m_s"] = np.nan
    record, _ = _filled(make, rows, stations)
    measured = reference.wind_at_2m(_near(rows, "wind_m_s")[0], 10.0)
    assert record.values["u2_m_s"][0, 0] == pytest.approx(measured)
    assert record.values["u2_m_s"][4, 0] == pytest.approx(record.values["u2_m_s"][4, 1])
    assert record.source["u2_m_s"][4, 0] == NEIGHBOUR
    others = np.delete(record.values["u2_m_s"][:, 2], 5)
    assert record.values["u2_m_s"][5, 2] == pytest.approx(others.mean())
    assert record.source["u2_m_s"][5, 2] == OWN_MEAN
    record, _ = _filled(make, rows.assign(wind_m_s=np.nan))
    assert (record.values["u2_m_s"] == 2.0).all()  # FAO-56 p. 63
    assert (record.source["u2_m_s"] == DEFAULT).all()


def test_calm_wind_is_shown_as_measured(make):
    rows = make.weather()
    rows.loc[3, "wind_m_s"] = 0.0
    rows.loc[4, "wind_m_s"] = 0.3
    rows.loc[5, "wind_m_s"] = np.nan
    rows = rows[rows["station_id"] == "near"]
    record, _ = _filled(make, rows, make.stations().iloc[:1])
    u2, source = record.values["u2_m_s"][:, 0], record.source["u2_m_s"][:, 0]
    assert u2[3] == 0.0
    assert u2[4] == pytest.approx(0.3, rel=1e-3)  # eq. 47 is 1.0002 at 2 m
    assert source[3:6].tolist() == [0, 0, OWN_MEAN]
    assert u2[5] == pytest.approx(np.delete(u2, 5).mean())


HUMIDITY_ORDER = (
    ("vapour_pressure_kpa", 1.31, lambda m: 1.31),
    ("vpd_kpa", 0.9, lambda m: humidity.vapour_pressure_from_deficit(m.t_max_c, m.t_min_c, 0.9)),
    ("dew_point_c", 12.5, lambda m: humidity.vapour_pressure_from_dew_point(12.5)),
    ("rh_min_pct", 41.0, lambda m: humidity.vapour_pressure_from_rh_max_min(m.t_max_c, m.t_min_c, 91.0, 41.0)),
    ("rh_max_pct", 91.0, lambda m: humidity.vapour_pressure_from_rh_max(m.t_min_c, 91.0)),
    ("rh_mean_pct", 66.0, lambda m: humidity.vapour_pressure_from_rh_mean(m.t_max_c, m.t_min_c, 66.0)),
    ("nothing", np.nan, lambda m: humidity.vapour_pressure_from_dew_point(m.t_min_c)),
)


def test_humidity_forms_are_used_in_order_day_by_day(make):
    rows = make.weather(days=40).drop(columns=["rh_max_pct", "rh_min_pct"])
    rows = rows.assign(**{name: value for name, value, _ in HUMIDITY_ORDER})
    # Every six days one form more goes blank, so that each is for some days the first at hand.
    number = np.tile(np.arange(40), 3)
    for k, (name, _, _) in enumerate(HUMIDITY_ORDER):
        rows.loc[number >= 6 * (k + 1), name] = np.nan
    record, _ = _filled(make, rows)
    mine = rows[rows["station_id"] == "near"].reset_index(drop=True)
    for k, (name, _, form) in enumerate(HUMIDITY_ORDER):
        days = slice(6 * k, 6 * k + 6 if k < 6 else 40)
        expected = np.broadcast_to(np.asarray(form(mine)), 40)[days]
        assert record.values["vapour_pressure_kpa"][days, 0] == pytest.approx(expected, rel=1e-12), name
    assert record.source["vapour_pressure_kpa"][:, 0].tolist() == [0] * 36 + [ESTIMATED] * 4
    said = [(row.method, str(row.first), row.days) for row in record.fills
            if row.station_id == "near" and row.quantity == "vapour_pressure_kpa" and "lowest" in row.method
            and "eq. 48" in row.method]  # fmt: skip
    assert said == [("dew point taken from lowest temperature, eq. 48", "2031-07-07", 4)]


def test_gap_of_the_setting_s_length_is_filled_and_one_longer_is_not(make):
    for allowed, blank, filled in ((3, 3, True), (3, 4, False), (1, 2, False), (5, 5, True), (0, 1, False)):
        rows = make.weather()
        last = pd.Timestamp("2031-07-10") + pd.Timedelta(days=blank - 1)
        gap = (rows["station_id"] == "near") & rows["date"].between("2031-07-10", last)
        rows.loc[gap, "t_min_c"] = np.nan
        record, findings = _filled(make, rows, temperature_gap_days=allowed)
        assert np.isfinite(record.values["t_min_c"][39:39 + blank, 0]).all() == filled  # fmt: skip
        assert [finding.code for finding in findings] == ([] if filled else ["temperature-gap"])


def test_no_neighbour_within_reach_leaves_temperature_missing(make):
    rows = make.weather()
    rows.loc[(rows["station_id"] == "far") & (rows["date"] == "2031-07-10"), "t_max_c"] = np.nan
    record, findings = _filled(make, rows)  # the nearest is 258 km off
    assert np.isnan(record.values["t_max_c"][39, 2])
    assert [(f.code, f.subject) for f in findings] == [("temperature-gap", "station far")]
    record, findings = _filled(make, rows, weather_neighbour_km=300.0)
    assert findings == []
    assert record.source["t_max_c"][39, 2] == NEIGHBOUR


def test_neighbour_s_temperature_uses_only_days_that_both_have(make):
    rows = make.weather()
    near, by = rows["station_id"] == "near", rows["station_id"] == "by"
    truth = {name: rows[rows["station_id"] == name]["t_max_c"].to_numpy() for name in ("near", "by")}
    rows.loc[near & rows["date"].between("2031-06-12", "2031-06-20"), "t_max_c"] = np.nan  # days 11 to 19
    rows.loc[by & rows["date"].between("2031-06-18", "2031-06-25"), "t_max_c"] = np.nan  # days 17 to 24
    rows.loc[near & (rows["date"] == "2031-07-10"), "t_max_c"] = np.nan  # day 39
    record, _ = _filled(make, rows)
    both = [*range(9, 11), *range(25, 39)]
    difference = (truth["near"] - truth["by"])[both].mean()
    assert record.values["t_max_c"][39, 0] == pytest.approx(truth["by"][39] + difference)


def test_situation_chooses_the_coefficient_of_each_station(make):
    rows = make.weather().assign(rs_mj_m2_d=np.nan)
    stations = make.stations(situation=["interior", "coast", "interior"])
    record, _ = _filled(make, rows, stations, krs_interior=0.15, krs_coast=0.18)
    day = solar.day_of_year(record.dates)
    for station, (latitude, coefficient) in enumerate(((42.0, 0.15), (42.18, 0.18), (44.5, 0.15))):
        ra = solar.extraterrestrial_radiation(latitude, day)
        spread = np.sqrt(record.values["t_max_c"] - record.values["t_min_c"])[:, station]
        expected = np.minimum(coefficient * spread * ra, solar.clear_sky_radiation(ra, 300.0))
        assert record.values["rs_mj_m2_d"][:, station] == pytest.approx(expected)


def test_rain_is_never_filled_here(make):
    rows = make.weather()
    rows.loc[rows["date"].between("2031-06-11", "2031-06-19"), "rain_mm"] = np.nan
    record, _ = _filled(make, rows)
    assert np.isnan(record.values["rain_mm"][10:19]).all()
    assert (record.source["rain_mm"][10:19] == 128).all()
    assert not [row for row in record.fills if row.quantity == "rain_mm"]


def test_estimated_dew_point_is_never_an_observed_one(make):
    rows = make.weather().drop(columns=["rh_max_pct", "rh_min_pct"])
    record, _ = _filled(make, rows)
    for name in ("dew_point_morning_c", "dew_point_afternoon_c"):
        assert np.isnan(record.values[name]).all()
        assert (record.source[name] == 128).all()


def test_three_thousand_stations_for_a_year():
    from etflux.case import Case, Settings

    stations, days = 3000, 365
    rng = np.random.default_rng(1)
    ids = np.array([f"s{k}" for k in range(stations)])
    places = pd.DataFrame(
        {"station_id": ids, "latitude_deg": rng.uniform(36.0, 46.0, stations),
         "longitude_deg": rng.uniform(-100.0, -85.0, stations), "elevation_m": 300.0, "wind_height_m": 2.0}
    )  # fmt: skip
    t_max = rng.normal(28.0, 3.0, stations * days)
    rows = pd.DataFrame(
        {"station_id": np.repeat(ids, days), "date": np.tile(pd.date_range("2031-01-01", periods=days), stations),
         "t_max_c": t_max, "t_min_c": t_max - 11.0, "rh_max_pct": 90.0, "rs_mj_m2_d": 8.0, "wind_m_s": 2.0}
    )  # fmt: skip
    for name in ("t_max_c", "rs_mj_m2_d", "wind_m_s"):
        rows.loc[rng.random(len(rows)) < 0.01, name] = np.nan
    raw = weather.arrange(Case(Settings(), {"stations": places, "weather": rows}))
    record, findings = weather.fill(raw, Settings())
    assert record.shape == (days, stations)
    assert findings == []
    for name in ("t_max_c", "rs_mj_m2_d", "u2_m_s", "vapour_pressure_kpa"):
        assert np.isfinite(record.values[name]).all(), name
    blank = np.isnan(raw.values["t_max_c"])
    assert np.array_equal(record.source["t_max_c"], np.where(blank, NEIGHBOUR, 0))


def test_lyon_with_temperatures_alone():
    """FAO-56 example 20 (p. 77): July, Tmax 26.6, Tmin 14.8, nothing else."""
    from etflux.case import Case, Settings

    stations = pd.DataFrame(
        {"station_id": ["lyon"], "latitude_deg": [45.72], "longitude_deg": [4.83], "elevation_m": [200.0],
         "wind_height_m": [2.0], "climate": ["humid"], "situation": ["interior"]}
    )  # fmt: skip
    rows = pd.DataFrame(
        {"station_id": ["lyon"], "date": pd.to_datetime(["2031-07-15"]), "t_max_c": 26.6, "t_min_c": 14.8}
    )
    record, _ = weather.fill(weather.arrange(Case(Settings(), {"stations": stations, "weather": rows})), Settings())
    v = {name: values.item() for name, values in record.values.items()}
    assert v["vapour_pressure_kpa"] == pytest.approx(1.68, abs=0.005)
    assert v["rs_mj_m2_d"] == pytest.approx(22.29, abs=0.01)
    assert v["u2_m_s"] == 2.0
    eto = reference.eto_fao56(
        v["t_max_c"], v["t_min_c"], v["vapour_pressure_kpa"], v["rs_mj_m2_d"], v["u2_m_s"], 200.0, 45.72, 196
    )
    assert eto == pytest.approx(4.56, abs=0.005)


@settings(max_examples=20, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(seed=st.integers(0, 10_000))
def test_measured_values_never_change_and_sources_cover_what_was_filled(make, seed):
    rng = np.random.default_rng(seed)
    rows = make.weather()
    for name in ("t_max_c", "t_min_c", "rs_mj_m2_d", "rh_max_pct", "wind_m_s"):
        rows.loc[rng.random(len(rows)) < 0.2, name] = np.nan
    case = make.case(rows)
    raw = weather.arrange(case)
    record, _ = weather.fill(raw, case.settings)
    for name in ("t_max_c", "t_min_c", "rs_mj_m2_d"):
        there = np.isfinite(raw.values[name])
        assert np.array_equal(record.values[name][there], raw.values[name][there])
        assert (record.source[name][there] == 0).all()
        added = ~there & np.isfinite(record.values[name])
        assert added.any()
        assert ((record.source[name] > 0) & (record.source[name] < 128))[added].all()
        assert (record.source[name][~there & ~added] == 128).all()
        counted = dict.fromkeys(record.station_ids, 0)
        for row in record.fills:
            counted[row.station_id] += row.days if row.quantity == name else 0
        assert list(counted.values()) == added.sum(axis=0).tolist()
    for name, values in record.values.items():
        assert np.array_equal(np.isnan(values), record.source[name] == 128), name
