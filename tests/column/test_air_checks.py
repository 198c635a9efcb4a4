"""Broken profiles, mixing depths and winds, each with the exact findings."""

import numpy as np
import pandas as pd
import pytest

from etflux import air_checks
from etflux.case import Case, Settings
from etflux.findings import Finding

HEIGHTS = [2.0, 100.0, 200.0, 400.0, 800.0, 1200.0, 1600.0, 2400.0, 3200.0]


def profile(**changes):
    """A sound morning profile of nine levels; a change is a column, or a dictionary of rows."""
    z = np.array(HEIGHTS)
    t = np.array([18.0, 22.0, 22.5, 21.0, 17.5, 14.0, 13.0, 8.0, 3.0])
    rows = pd.DataFrame(
        {
            "site_id": "m", "time": pd.Timestamp("2031-07-27 11:30"), "latitude_deg": 42.0, "longitude_deg": -93.0,
            "elevation_m": 300.0, "height_m": z, "pressure_kpa": np.nan, "temperature_c": t, "dew_point_c": t - 3.0,
            "rh_mean_pct": np.nan,
        }
    )  # fmt: skip
    for name, change in changes.items():
        if isinstance(change, dict):
            rows.loc[list(change), name] = list(change.values())
        else:
            rows[name] = change
    return rows


def pressures(factor=1.0):
    return factor * np.array([97.8, 96.7, 95.6, 93.4, 89.2, 85.2, 81.2, 73.7, 66.7])


def depths(**changes):
    row = {"county_id": "c1", "date": pd.Timestamp("2031-07-27"), "mixing_depth_m": 1500.0, "hour": 15.0}
    return pd.DataFrame([row | changes])


def wind(**changes):
    row = {
        "county_id": None, "date": pd.Timestamp("2031-07-27"), "day_part": "day", "height_m": 300.0,
        "wind_speed_m_s": 5.0, "wind_from_deg": 225.0, "u_m_s": np.nan, "v_m_s": np.nan,
    }  # fmt: skip
    return pd.DataFrame([row | changes])


def found(**tables):
    return {(f.table, f.row, f.quantity, f.code) for f in air_checks.check(Case(Settings(), tables))}


@pytest.mark.parametrize(
    "tables",
    [
        {},
        {"profiles": profile()},
        {"profiles": profile(height_m=np.nan, pressure_kpa=pressures())},
        {"profiles": profile(dew_point_c=np.nan, rh_mean_pct=70.0)},
        {"mixing_depths": depths()},
        {"mixing_depths": depths(hour=np.nan)},
        {"wind": wind()},
        {"wind": wind(wind_speed_m_s=np.nan, wind_from_deg=np.nan, u_m_s=3.0, v_m_s=-2.0)},
        {"wind": wind(u_m_s=5.0 * np.sqrt(0.5), v_m_s=5.0 * np.sqrt(0.5))},
    ],
)
def test_sound_tables_have_no_findings(tables):
    assert found(**tables) == set()


BROKEN_PROFILES = {
    "no place": (profile(latitude_deg=np.nan), {(0, "latitude_deg", "profile-place")}),
    "afternoon": (profile(time=pd.Timestamp("2031-07-27 20:00")), {(0, "time", "profile-hour")}),
    "late morning": (profile(time=pd.Timestamp("2031-07-27 14:30")), {(0, "time", "profile-hour")}),
    "before midnight": (profile(time=pd.Timestamp("2031-07-27 05:30")), {(0, "time", "profile-hour")}),
    "local time for UTC": (profile(time=pd.Timestamp("2031-07-27 05:40")), {(0, "time", "profile-hour")}),
    "a level without height": (profile(height_m={4: np.nan}), {(4, "height_m", "profile-level")}),
    "a level without pressure": (
        profile(height_m=np.nan, pressure_kpa=pressures()).assign(
            pressure_kpa=lambda rows: rows["pressure_kpa"].where(rows.index != 3)
        ),
        {(3, "pressure_kpa", "profile-level")},
    ),
    "a level without humidity": (profile(dew_point_c={2: np.nan, 5: np.nan}),
        {(2, "dew_point_c", "profile-humidity"), (5, "dew_point_c", "profile-humidity")}),
    "no humidity column": (
        profile().drop(columns=["dew_point_c", "rh_mean_pct"]),
        {(k, "dew_point_c", "profile-humidity") for k in range(9)},
    ),
    "dew point above temperature": (profile(dew_point_c={1: 23.0}), {(1, "dew_point_c", "profile-dew-point")}),
    "temperature and dew point exchanged": (
        profile(temperature_c=profile()["dew_point_c"], dew_point_c=profile()["temperature_c"]),
        {(k, "dew_point_c", "profile-dew-point") for k in range(9)},
    ),
    "a height repeated": (profile(height_m={3: 200.0}), {(3, "height_m", "profile-not-rising")}),
    "two heights exchanged": (profile(height_m={5: 1600.0, 6: 1200.0}), {(6, "height_m", "profile-not-rising")}),
    "sorted from the top": (
        profile().iloc[::-1].reset_index(drop=True), {(k, "height_m", "profile-not-rising") for k in range(1, 9)}
    ),
    "pressure rising": (
        profile(height_m=np.nan, pressure_kpa=pressures()).assign(
            pressure_kpa=lambda rows: rows["pressure_kpa"].where(rows.index != 4, 94.0)
        ),
        {(4, "pressure_kpa", "profile-not-rising")},
    ),
    "four levels": (profile().iloc[[0, 2, 5, 8]].reset_index(drop=True), {(0, "site_id", "profile-short")}),
    "too low": (profile().iloc[:6], {(0, "site_id", "profile-short")}),
    "heights above the sea": (profile(height_m=np.array(HEIGHTS) + 310.0), {(0, "height_m", "profile-above-sea")}),
    "hPa for kPa": (
        profile(height_m=np.nan, pressure_kpa=pressures(10.0)), {(0, "pressure_kpa", "profile-pressure-unit")}
    ),
    "hPa for Pa": (
        profile(height_m=np.nan, pressure_kpa=pressures(0.01)), {(0, "pressure_kpa", "profile-pressure-unit")}
    ),
    "degF for degC": (
        profile(temperature_c=profile()["temperature_c"] * 1.8 + 32.0, dew_point_c=profile()["dew_point_c"]),
        {(0, "temperature_c", "profile-temperature-unit")},
    ),
    "kelvin for degC": (
        profile(temperature_c=profile()["temperature_c"] + 273.15), {(0, "temperature_c", "profile-temperature-unit")}
    ),
    "super-adiabatic": (profile(temperature_c={4: 15.5}), {(4, "temperature_c", "profile-unstable")}),
    "twice on one morning": (
        pd.concat([profile(), profile(time=pd.Timestamp("2031-07-27 12:30"))], ignore_index=True),
        {(9, "time", "profile-repeated")},
    ),
    "two faults at once": (
        profile(height_m={3: 200.0}, dew_point_c={7: 9.0}),
        {(3, "height_m", "profile-not-rising"), (7, "dew_point_c", "profile-dew-point")},
    ),
}  # fmt: skip

BROKEN_DEPTHS = {
    "below the floor": (depths(mixing_depth_m=150.0), {(0, "mixing_depth_m", "depth-below-floor")}),
    "km for m": (depths(mixing_depth_m=1.5), {(0, "mixing_depth_m", "depth-below-floor")}),
    "in the stable layer": (depths(mixing_depth_m=230.0), {(0, "mixing_depth_m", "depth-below-stable-layer")}),
    "at night": (depths(hour=3.0), {(0, "hour", "depth-hour")}),
    "given twice": (pd.concat([depths(), depths(mixing_depth_m=1700.0)], ignore_index=True),
        {(1, "date", "row-repeated")}),
}  # fmt: skip

BROKEN_WINDS = {
    "no direction": (wind(wind_from_deg=np.nan), {(0, "wind_speed_m_s", "wind-incomplete")}),
    "no speed": (wind(wind_speed_m_s=np.nan), {(0, "wind_speed_m_s", "wind-incomplete")}),
    "half a vector": (
        wind(wind_speed_m_s=np.nan, wind_from_deg=np.nan, u_m_s=3.0), {(0, "wind_speed_m_s", "wind-incomplete")}
    ),
    "direction over 360": (wind(wind_from_deg=410.0), {(0, "wind_from_deg", "wind-direction")}),
    "direction below 0": (wind(wind_from_deg=-45.0), {(0, "wind_from_deg", "wind-direction")}),
    "knots for m/s": (wind(wind_speed_m_s=38.0), {(0, "wind_speed_m_s", "wind-unit")}),
    "components point where it comes from": (wind(u_m_s=-3.5, v_m_s=-3.5), {(0, "u_m_s", "wind-twice")}),
    "no height": (wind(height_m=np.nan), {(0, "height_m", "wind-height")}),
    "height of a jet": (wind(height_m=9000.0), {(0, "height_m", "wind-height")}),
    "given twice": (pd.concat([wind(), wind()], ignore_index=True), {(1, "date", "row-repeated")}),
    "fast and turned": (
        wind(wind_speed_m_s=45.0, wind_from_deg=370.0),
        {(0, "wind_speed_m_s", "wind-unit"), (0, "wind_from_deg", "wind-direction")},
    ),
}  # fmt: skip


@pytest.mark.parametrize(
    ("table", "rows", "expected"),
    [
        pytest.param(table, rows, expected, id=f"{table}: {name}")
        for table, cases in (
            ("profiles", BROKEN_PROFILES), ("mixing_depths", BROKEN_DEPTHS), ("wind", BROKEN_WINDS),
        )
        for name, (rows, expected) in cases.items()
    ],
)  # fmt: skip
def test_exact_findings(table, rows, expected):
    assert found(**{table: rows}) == {(table, row, quantity, code) for row, quantity, code in expected}


def test_every_finding_is_a_sentence_with_place_rule_and_remedy():
    table = {"profiles": profile(dew_point_c={1: 23.0}), "wind": wind(wind_from_deg=410.0)}
    for finding in air_checks.check(Case(Settings(), table)):
        assert isinstance(finding, Finding)
        assert finding.severity in {"error", "warning"}
        text = finding.sentence()
        assert str(finding.value)[:2] in text
        assert text.endswith(".")
