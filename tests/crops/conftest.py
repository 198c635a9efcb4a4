"""Small cases for stands and crops: weather by rule, counties of 1000 km², stands as keyword arguments."""

from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest

from etflux import canopy, stands
from etflux.case import Case, Settings, with_settings
from etflux.weather import CountyWeather, StationRecord


def record(first="2031-01-01", days=365, latitude=42.0, **changes):
    """Stations with the same weather unless `changes` give (day,) or (day, station) arrays.

    By default 28/16 °C on every day: 12 °C-days of heat units, wind and humidity at which eq. 70 changes nothing.
    """
    latitude = np.atleast_1d(np.asarray(latitude, float))
    n = len(latitude)
    values = {"t_max_c": 28.0, "t_min_c": 16.0, "u2_m_s": 2.0, "rh_min_pct": 45.0, "rain_mm": 0.0, **changes}

    def spread(value):
        value = np.asarray(value, float)
        return np.broadcast_to(value[:, None] if value.ndim == 1 else value, (days, n)).copy()

    values = {name: spread(value) for name, value in values.items()}
    values.setdefault("t_mean_c", 0.5 * (values["t_max_c"] + values["t_min_c"]))
    none = np.zeros(n, dtype=bool)
    return StationRecord(
        dates=np.datetime64(first, "D") + np.arange(days),
        station_ids=tuple(f"S{k}" for k in range(n)),
        latitude_deg=latitude,
        longitude_deg=np.full(n, -93.0),
        elevation_m=np.full(n, 300.0),
        wind_height_m=np.full(n, 2.0),
        utc_offset_h=np.full(n, -6.0),
        arid=none,
        coast=none,
        values=values,
        source={},
        forecast=np.zeros((days, n), dtype=bool),
        row_of=np.zeros((days, n), dtype=int),
    )


def stand(stand_id="A", cover_id="corn", **changes):
    """A row of the stands table: 100 km² of loam in county C1."""
    return {
        "stand_id": stand_id,
        "county_id": "C1",
        "cover_id": cover_id,
        "soil_id": "loam",
        "area_km2": 100.0,
    } | changes


def case(*rows, settings=None, counties=None, **tables):
    """Case of one county of 1000 km² unless more are given; other tables as lists of records."""
    counties = counties or [{"county_id": "C1", "area_km2": 1000.0, "latitude_deg": 42.0, "longitude_deg": -93.0}]
    found = {"counties": pd.DataFrame(counties)}
    for name, records in {"stands": rows, **tables}.items():
        table = pd.DataFrame(records)
        for column in table:
            if column == "date" or column.endswith("_date") or "_date_" in column:
                table[column] = pd.to_datetime(table[column])
        if len(table):
            found[name] = table
    return Case(with_settings(Settings(), **(settings or {})), found)


def expand(a_case, a_record=None):
    """Units of a case; every county takes the first station."""
    a_record = a_record or record()
    n = len(a_case.table("counties"))
    nothing = np.zeros((len(a_record.dates), n))
    ends = np.full(n, len(a_record.dates))
    local = CountyWeather(np.zeros(n, dtype=int), np.zeros(n), nothing, nothing.astype(np.uint8), ends)
    return stands.expand(a_case, local, a_record.station_ids)


def grow(a_case, a_record=None):
    """Units that are stands, their canopy, and the findings."""
    a_record = a_record or record()
    units = expand(a_case, a_record)
    units = units[units["kind"] == "stand"].reset_index(drop=True)
    found, findings = canopy.canopy(units, a_record, a_case.settings, a_case.table("observations"))
    return SimpleNamespace(units=units, canopy=found, findings=findings, record=a_record, case=a_case)


def day(a_record, date):
    """Position of a date."""
    return int((np.datetime64(date, "D") - a_record.dates[0]).astype(int))


@pytest.fixture(scope="session")
def make():
    """Builders: record, stand, case, expand, grow, day."""
    return SimpleNamespace(record=record, stand=stand, case=case, expand=expand, grow=grow, day=day)
