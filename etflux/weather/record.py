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
READ_NEXT_MORNING = ("rain_mm", "t_max_c")  # what a morning observer reads belongs to the day before


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
    read_later : mapping of str to ndarray of int, shape (day, station)
        The same for quantities that some stations read the morning after.
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
    read_later: Mapping[str, np.ndarray] = field(default_factory=dict)
    fills: tuple[Fill, ...] = field(default=())

    @property
    def shape(self) -> tuple[int, int]:
        """Number of days and stations."""
        return len(self.dates), len(self.station_ids)

    def name(self, day: int, station: int) -> str:
        """Station and day in words, for a finding."""
        return f"station {self.station_ids[station]}, {self.dates[day]}"

    def row(self, name: str, day: int, station: int) -> int | None:
        """Row of the weather table that holds a value; None where there is none."""
        row = int(self.read_later.get(name, self.row_of)[day, station])
        return row if row >= 0 else None


def arrange(case: Case) -> StationRecord:
    """Lay the weather table out as (day, station) arrays.

    All days from the first to the last are there, missing ones NaN; the settings `season_start` and `season_end`
    narrow them, or ask for more. Rows of unknown stations or without a date are left out and of two rows of one day
    the first counts (the checks report both).

    At stations that are read before noon, rain and highest temperature of a row belong to the day before and are
    moved there; lowest temperature and all else stay. Such a station's last row therefore only completes the day
    before it, and no day of the record rests on it alone.

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
    ids = _ids(stations["station_id"])
    _, first_seen = np.unique(ids, return_index=True)
    keep = np.sort(first_seen)
    stations, ids = stations.iloc[keep], ids[keep]
    morning = _column(stations, "observation_hour", 24.0) < MORNING_OBSERVER_HOUR

    named = _ids(weather["station_id"])
    position = np.where(named == "", -1, pd.Index(ids).get_indexer(pd.Index(named)))
    days = pd.to_datetime(weather["date"]).to_numpy().astype("datetime64[D]")
    rows = np.flatnonzero((position >= 0) & ~np.isnat(days))
    dates = _calendar(days[rows], days[rows] - morning[position[rows]].astype("timedelta64[D]"), case)
    row_of = _rows_by_day(rows, days[rows], position[rows], dates, len(ids))

    later = row_of.copy()
    later[:-1, morning] = row_of[1:, morning]
    later[-1, morning] = -1
    row_of, later = row_of[: len(dates)], later[: len(dates)]
    read_later = dict.fromkeys(READ_NEXT_MORNING, later) if morning.any() else {}
    told = weather["forecast"].map(lambda word: word is True or word == 1) if "forecast" in weather else None
    values, source = {}, {}
    for name in MEASURED:
        at = read_later.get(name, row_of)
        values[name] = _at_rows(weather.get(name), at)
        label = np.where(_at_rows(told, at) == 1.0, SOURCE["forecast"], SOURCE["measured"])
        source[name] = np.where(np.isfinite(values[name]), label, SOURCE["missing"]).astype(np.uint8)
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
        forecast=_at_rows(told, row_of) == 1.0,
        row_of=row_of,
        read_later=read_later,
    )


def _ids(column: pd.Series) -> np.ndarray:
    """Ids as text, blanks empty."""
    return column.fillna("").astype(str).to_numpy(dtype=object)


def _calendar(days: np.ndarray, completed: np.ndarray, case: Case) -> np.ndarray:
    """Every day from the first row to the last day that a row completes, as narrowed by the settings."""
    first = np.datetime64(case.settings.season_start, "D") if case.settings.season_start else None
    last = np.datetime64(case.settings.season_end, "D") if case.settings.season_end else None
    if len(days):
        first = days.min() if first is None else first
        last = max(completed.max(), days.min()) if last is None else last
    if first is None or last is None or last < first:
        return np.empty(0, dtype="datetime64[D]")
    return np.arange(first, last + np.timedelta64(1, "D"))


def _rows_by_day(
    rows: np.ndarray, days: np.ndarray, station: np.ndarray, dates: np.ndarray, stations: int
) -> np.ndarray:
    """Row of each day and station, -1 for none; one day more than asked for, for what is read the morning after."""
    row_of = np.full((len(dates) + 1, stations), -1)
    if len(dates):
        day = (days - dates[0]).astype(int)
        inside = (day >= 0) & (day <= len(dates))
        rows, day, station = rows[inside], day[inside], station[inside]
        _, first = np.unique(day * stations + station, return_index=True)  # the first of two rows counts
        row_of[day[first], station[first]] = rows[first]
    return row_of


def _at_rows(column: pd.Series | None, row_of: np.ndarray) -> np.ndarray:
    """Numbers of a column where `row_of` says; NaN where there is none."""
    found = np.full(row_of.shape, np.nan)
    if column is not None:
        there = row_of >= 0
        numbers = column.to_numpy(dtype=float, na_value=np.nan)
        found[there] = np.where(np.isfinite(numbers), numbers, np.nan)[row_of[there]]
    return found


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
