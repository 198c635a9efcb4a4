"""A station's record: the long weather table laid out as dense (day, station) arrays."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from etflux.variables import flag_bits

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case

SOURCE = flag_bits("source")

# What a weather row may hold.
MEASURED = (
    "t_max_c", "t_min_c", "t_mean_c", "rh_max_pct", "rh_min_pct", "rh_mean_pct", "dew_point_c",
    "vapour_pressure_kpa", "vpd_kpa", "rs_mj_m2_d", "sunshine_h", "wind_m_s", "rain_mm",
    "dew_point_morning_c", "dew_point_afternoon_c",
)  # fmt: skip

MORNING_OBSERVER_HOUR = 12.0


@dataclass(frozen=True)
class Fill:
    """One kind of filled or derived value of one station, for people."""

    station_id: str
    quantity: str
    method: str
    first: np.datetime64
    last: np.datetime64
    days: int


@dataclass(frozen=True)
class StationRecord:
    """Weather of all stations on all days.

    Parameters
    ----------
    dates : ndarray of datetime64[D], shape (day,)
    station_ids : tuple of str
    latitude_deg, longitude_deg, elevation_m, wind_height_m, utc_offset_h : ndarray, shape (station,)
    arid, coast : ndarray of bool, shape (station,)
        How humidity and radiation are estimated where they must be.
    values : mapping of str to ndarray, shape (day, station)
        SI; NaN where missing.
    source : mapping of str to ndarray of uint8, shape (day, station)
        Bits of ``tables/flags.toml`` [source].
    forecast : ndarray of bool, shape (day, station)
    row_of : ndarray of int, shape (day, station)
        Row of the weather table, -1 where there is none.
    fills : tuple of Fill
        What was filled and how.
    """

    dates: np.ndarray
    station_ids: tuple[str, ...]
    latitude_deg: np.ndarray
    longitude_deg: np.ndarray
    elevation_m: np.ndarray
    wind_height_m: np.ndarray
    utc_offset_h: np.ndarray
    arid: np.ndarray
    coast: np.ndarray
    values: Mapping[str, np.ndarray]
    source: Mapping[str, np.ndarray]
    forecast: np.ndarray
    row_of: np.ndarray
    fills: tuple[Fill, ...] = field(default=())

    @property
    def shape(self) -> tuple[int, int]:
        """Number of days and stations."""
        return len(self.dates), len(self.station_ids)

    def name(self, day: int, station: int) -> str:
        """Station and day in words, for a finding."""
        return f"station {self.station_ids[station]}, {self.dates[day]}"


def arrange(case: Case) -> StationRecord:
    """Lay the weather table out as (day, station) arrays.

    All days from the first to the last are there, missing ones NaN; the settings `season_start` and `season_end`
    narrow them. Rows of unknown stations or without a date are left out and of two rows of one day the first counts
    (the checks report both). At stations that are read in the morning, rain and highest temperature belong to the
    day before and are moved there.

    Parameters
    ----------
    case : Case

    Returns
    -------
    StationRecord
        As measured, nothing filled.
    """
    import pandas as pd

    stations, weather = case.table("stations"), case.table("weather")
    ids = stations["station_id"].astype(str).to_numpy()
    known, first_seen = np.unique(ids, return_index=True)
    keep = np.sort(first_seen)
    stations, ids = stations.iloc[keep], ids[keep]

    position = pd.Index(ids).get_indexer(pd.Index(weather["station_id"].astype(str)))
    days = pd.to_datetime(weather["date"]).to_numpy().astype("datetime64[D]")
    rows = np.flatnonzero((position >= 0) & ~np.isnat(days))
    dates = _calendar(days[rows], case)
    start = dates[0] if len(dates) else np.datetime64("1970-01-01")

    # one day more than asked for, so that a morning observer's last reading reaches its day
    count = len(dates)
    day = (days[rows] - start).astype(int)
    inside = (day >= 0) & (day <= count)
    rows, day, station = rows[inside], day[inside], position[rows[inside]]
    row_of = np.full((count + 1, len(ids)), -1)
    _, first = np.unique(day * len(ids) + station, return_index=True)  # the first of two rows counts
    row_of[day[first], station[first]] = rows[first]

    there = row_of >= 0
    values = {}
    for name in MEASURED:
        column = np.full(row_of.shape, np.nan)
        if name in weather:
            column[there] = weather[name].to_numpy(dtype=float, na_value=np.nan)[row_of[there]]
        values[name] = column
    morning = _column(stations, "observation_hour", 24.0) < MORNING_OBSERVER_HOUR
    for name in ("rain_mm", "t_max_c"):
        values[name][:-1, morning] = values[name][1:, morning]
    forecast = np.zeros(row_of.shape, dtype=bool)
    if "forecast" in weather:
        told = weather["forecast"].map(lambda word: word is True or word == 1).to_numpy(dtype=bool)
        forecast[there] = told[row_of[there]]

    values = {name: column[:count] for name, column in values.items()}
    forecast = forecast[:count]
    source = {
        name: np.where(
            np.isfinite(column), np.where(forecast, SOURCE["forecast"], SOURCE["measured"]), SOURCE["missing"]
        ).astype(np.uint8)
        for name, column in values.items()
    }
    return StationRecord(
        dates=dates,
        station_ids=tuple(ids),
        latitude_deg=_column(stations, "latitude_deg", np.nan),
        longitude_deg=_column(stations, "longitude_deg", np.nan),
        elevation_m=_column(stations, "elevation_m", np.nan),
        wind_height_m=_column(stations, "wind_height_m", np.nan),
        utc_offset_h=_utc_offset(stations),
        arid=_words(stations, "climate") == "arid",
        coast=_words(stations, "situation") == "coast",
        values=values,
        source=source,
        forecast=forecast,
        row_of=row_of[:count],
    )


def _calendar(days: np.ndarray, case: Case) -> np.ndarray:
    """Every day from the first to the last, narrowed by the settings."""
    first = np.datetime64(case.settings.season_start, "D") if case.settings.season_start else None
    last = np.datetime64(case.settings.season_end, "D") if case.settings.season_end else None
    if len(days):
        first = days.min() if first is None else first
        last = days.max() if last is None else last
    if first is None or last is None or last < first:
        return np.empty(0, dtype="datetime64[D]")
    return np.arange(first, last + np.timedelta64(1, "D"))


def _column(stations: pd.DataFrame, name: str, default: float) -> np.ndarray:
    if name not in stations:
        return np.full(len(stations), default)
    column = stations[name].to_numpy(dtype=float, na_value=np.nan)
    return np.where(np.isnan(column), default, column)


def _utc_offset(stations: pd.DataFrame) -> np.ndarray:
    """Offset of standard time; where not given, that of the nearest 15 degree meridian."""
    given = _column(stations, "utc_offset_h", np.nan)
    return np.where(np.isnan(given), np.round(_column(stations, "longitude_deg", 0.0) / 15.0), given)


def _words(stations: pd.DataFrame, name: str) -> np.ndarray:
    if name not in stations:
        return np.full(len(stations), "")
    return np.array([str(word).strip().lower() for word in stations[name]])
