"""Fill a station's record by the published procedures, and label every value with where it came from.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, chapter 3 "Estimating missing
   climatic data" and Annex 4.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from etflux import humidity, solar
from etflux.findings import Finding
from etflux.reference import LEAST_WIND_M_S, wind_at_2m
from etflux.weather.places import great_circle_km
from etflux.weather.record import SOURCE, Fill, StationRecord

if TYPE_CHECKING:
    from etflux.case import Settings

DIFFERENCE_DAYS = 30  # days whose mean difference adjusts a neighbour's temperature


class _Filler:
    """Values being completed, with their sources and the notes for people; private to one call of :func:`fill`."""

    def __init__(self, record: StationRecord, settings: Settings) -> None:
        self.record = record
        self.values = {name: column.copy() for name, column in record.values.items()}
        self.source = {name: column.copy() for name, column in record.source.items()}
        self.fills: list[Fill] = []
        distance = great_circle_km(record.latitude_deg, record.longitude_deg, record.latitude_deg, record.longitude_deg)
        np.fill_diagonal(distance, np.inf)
        self.order = np.argsort(distance, axis=1, kind="stable")
        within = np.take_along_axis(distance, self.order, axis=1) <= settings.weather_neighbour_km
        self.ranks = int(within.sum(axis=1).max(initial=0))
        self.within = within

    def start(self, name: str) -> None:
        """Begin a derived quantity: everything missing."""
        self.values[name] = np.full(self.record.shape, np.nan)
        self.source[name] = np.full(self.record.shape, SOURCE["missing"], dtype=np.uint8)

    def take(self, name: str, candidate: np.ndarray, bits: np.ndarray | int, method: str, note: bool = True) -> None:
        """Take a candidate wherever the quantity is still missing, and write down where."""
        candidate = np.broadcast_to(candidate, self.record.shape)
        taken = np.isnan(self.values[name]) & np.isfinite(candidate)
        if not taken.any():
            return
        self.values[name][taken] = candidate[taken]
        forecast = np.where(self.record.forecast, SOURCE["forecast"], 0)
        self.source[name][taken] = (np.broadcast_to(bits, taken.shape) | forecast)[taken].astype(np.uint8)
        if note:
            self.fills += list(_spans(self.record, name, method, taken))

    def neighbours(self, name: str) -> Iterator[tuple[np.ndarray, np.ndarray, np.ndarray]]:
        """Cells still missing and, rank by rank, the neighbour that might serve: (day, station, neighbour)."""
        for rank in range(self.ranks):
            day, station = np.nonzero(np.isnan(self.values[name]))
            near = self.within[station, rank]
            day, station = day[near], station[near]
            if not len(day):
                continue
            yield day, station, self.order[station, rank]


def _spans(record: StationRecord, name: str, method: str, taken: np.ndarray) -> Iterator[Fill]:
    """One row for each station and run of days."""
    for station in np.flatnonzero(taken.any(axis=0)):
        days = np.flatnonzero(taken[:, station])
        runs = np.split(days, np.flatnonzero(np.diff(days) > 1) + 1)
        if len(runs) > 3:  # many short gaps read better as one line
            runs = [days]
        for run in runs:
            yield Fill(record.station_ids[station], name, method, record.dates[run[0]], record.dates[run[-1]], len(run))


def fill(record: StationRecord, settings: Settings) -> tuple[StationRecord, list[Finding]]:
    """Complete temperature, humidity, radiation and wind of every station and day.

    Rain is left as it is: blank is missing, never 0 (see ``to_counties``).

    Parameters
    ----------
    record : StationRecord
        As measured.
    settings : Settings

    Returns
    -------
    StationRecord
        With complete ``t_max_c, t_min_c, t_mean_c, vapour_pressure_kpa, dew_point_c, rh_min_pct, rs_mj_m2_d, u2_m_s``
        apart from days whose temperature is missing for longer than a neighbour may stand in.
    list of Finding
        "temperature-gap" for those days.
    """
    filler = _Filler(record, settings)
    _fill_temperature(filler, settings)
    findings = _temperature_gaps(filler)
    _fill_humidity(filler, settings)
    _fill_radiation(filler, settings)
    _fill_wind(filler, settings)
    _derive(filler)
    return replace(
        record, values=filler.values, source=filler.source, fills=record.fills + tuple(filler.fills)
    ), findings


def _fill_temperature(filler: _Filler, settings: Settings) -> None:
    """Neighbour plus the mean difference of the 30 days before, for gaps of a few days at most."""
    for name in ("t_max_c", "t_min_c"):
        measured = filler.record.values[name]
        missing = np.isnan(measured)
        short = missing & (_run_length(missing) <= settings.temperature_gap_days)
        candidate = np.full(missing.shape, np.nan)
        for day, station, neighbour in filler.neighbours(name):
            open_ = short[day, station] & np.isnan(candidate[day, station]) & np.isfinite(measured[day, neighbour])
            day, station, neighbour = day[open_], station[open_], neighbour[open_]
            window = day[:, None] - np.arange(1, DIFFERENCE_DAYS + 1)
            inside = window >= 0
            window = np.maximum(window, 0)
            difference = measured[window, station[:, None]] - measured[window, neighbour[:, None]]
            good = inside & np.isfinite(difference)
            count = good.sum(axis=1)
            mean = np.where(good, difference, 0.0).sum(axis=1) / np.maximum(count, 1)
            candidate[day, station] = measured[day, neighbour] + mean
        filler.take(
            name, candidate, SOURCE["neighbour"],
            f"nearest station plus the mean difference of the {DIFFERENCE_DAYS} days before",
        )  # fmt: skip


def _run_length(missing: np.ndarray) -> np.ndarray:
    """Length of the run of missing days that each missing day belongs to."""
    before = np.zeros(missing.shape, dtype=int)
    after = np.zeros(missing.shape, dtype=int)
    count = np.zeros(missing.shape[1], dtype=int)
    for day in range(missing.shape[0]):
        count = np.where(missing[day], count + 1, 0)
        before[day] = count
    count = np.zeros(missing.shape[1], dtype=int)
    for day in range(missing.shape[0] - 1, -1, -1):
        count = np.where(missing[day], count + 1, 0)
        after[day] = count
    return before + after - 1


def _temperature_gaps(filler: _Filler) -> list[Finding]:
    record = filler.record
    missing = np.isnan(filler.values["t_max_c"]) | np.isnan(filler.values["t_min_c"])
    findings = []
    for station in np.flatnonzero(missing.any(axis=0)):
        days = np.flatnonzero(missing[:, station])
        findings.append(
            Finding(
                "temperature-gap",
                "weather",
                subject=f"station {record.station_ids[station]}",
                detail=f"{len(days)} days without temperature, first {record.dates[days[0]]}, "
                f"last {record.dates[days[-1]]}",
            )  # fmt: skip
        )
    return findings


def _fill_humidity(filler: _Filler, settings: Settings) -> None:
    """Vapour pressure by the first of the published forms that the day allows."""
    v = filler.values
    t_max, t_min = v["t_max_c"], v["t_min_c"]
    borrowed = filler.source["t_max_c"] | filler.source["t_min_c"]
    given = filler.values.pop("vapour_pressure_kpa")
    filler.start("vapour_pressure_kpa")
    forms = (
        (given, 0, "as measured"),
        (humidity.vapour_pressure_from_deficit(t_max, t_min, v["vpd_kpa"]), borrowed, "from the deficit, eq. 12"),
        (humidity.vapour_pressure_from_dew_point(v["dew_point_c"]), 0, "from the dew point, eq. 14"),
        (
            humidity.vapour_pressure_from_rh_max_min(t_max, t_min, v["rh_max_pct"], v["rh_min_pct"]),
            borrowed,
            "from highest and lowest humidity, eq. 17",
        ),
        (humidity.vapour_pressure_from_rh_max(t_min, v["rh_max_pct"]), borrowed, "from highest humidity, eq. 18"),
        (
            humidity.vapour_pressure_from_rh_mean(t_max, t_min, v["rh_mean_pct"]),
            borrowed,
            "from mean humidity, eq. 19",
        ),
    )
    for candidate, bits, method in forms:
        filler.take("vapour_pressure_kpa", np.where(candidate > 0.0, candidate, np.nan), bits, method)
    below = np.where(filler.record.arid, settings.tdew_below_tmin_arid_c, settings.tdew_below_tmin_humid_c)
    filler.take(
        "vapour_pressure_kpa", humidity.vapour_pressure_from_dew_point(t_min - below),
        borrowed | SOURCE["estimated"], "dew point taken from lowest temperature, eq. 48",
    )  # fmt: skip


def _fill_radiation(filler: _Filler, settings: Settings) -> None:
    record, v = filler.record, filler.values
    day = solar.day_of_year(record.dates)[:, None]
    ra = solar.extraterrestrial_radiation(record.latitude_deg, day)
    rso = solar.clear_sky_radiation(ra, record.elevation_m)
    hours = solar.daylight_hours(record.latitude_deg, day)
    filler.take(
        "rs_mj_m2_d", solar.radiation_from_sunshine(ra, v["sunshine_h"], hours), 0, "from sunshine hours, eq. 35"
    )
    here = v["rs_mj_m2_d"].copy()
    candidate = np.full(record.shape, np.nan)
    for days, station, neighbour in filler.neighbours("rs_mj_m2_d"):
        open_ = np.isnan(candidate[days, station]) & np.isfinite(here[days, neighbour])
        days, station, neighbour = days[open_], station[open_], neighbour[open_]
        candidate[days, station] = here[days, neighbour] / rso[days, neighbour] * rso[days, station]
    filler.take(
        "rs_mj_m2_d", candidate, SOURCE["neighbour"], "nearest station's share of clear-sky radiation, after eq. 49"
    )
    coefficient = np.where(record.coast, settings.krs_coast, settings.krs_interior)
    estimate = solar.radiation_from_temperature_range(ra, v["t_max_c"], v["t_min_c"], coefficient, rso)
    borrowed = filler.source["t_max_c"] | filler.source["t_min_c"]
    filler.take("rs_mj_m2_d", estimate, borrowed | SOURCE["estimated"], "from the temperature range, eq. 50")


def _fill_wind(filler: _Filler, settings: Settings) -> None:
    record = filler.record
    filler.start("u2_m_s")
    at_2m = np.maximum(wind_at_2m(filler.values["wind_m_s"], record.wind_height_m), LEAST_WIND_M_S)
    filler.take("u2_m_s", at_2m, 0, "brought to 2 m, eq. 47", note=False)
    here = filler.values["u2_m_s"].copy()
    candidate = np.full(record.shape, np.nan)
    for day, station, neighbour in filler.neighbours("u2_m_s"):
        open_ = np.isnan(candidate[day, station]) & np.isfinite(here[day, neighbour])
        candidate[day[open_], station[open_]] = here[day[open_], neighbour[open_]]
    filler.take("u2_m_s", candidate, SOURCE["neighbour"], "nearest station's wind at 2 m")
    count = np.isfinite(here).sum(axis=0)
    own = np.where(count > 0, np.nansum(here, axis=0) / np.maximum(count, 1), np.nan)
    filler.take("u2_m_s", own, SOURCE["station_mean"], "the station's own mean wind")
    filler.take(
        "u2_m_s", np.asarray(settings.default_u2_m_s), SOURCE["default"], f"default {settings.default_u2_m_s:g} m/s"
    )


def _derive(filler: _Filler) -> None:
    """Mean temperature, dew point and lowest humidity that follow from the rest."""
    v, source = filler.values, filler.source
    borrowed = source["t_max_c"] | source["t_min_c"]
    filler.take(
        "t_mean_c", 0.5 * (v["t_max_c"] + v["t_min_c"]), borrowed, "mean of highest and lowest, eq. 9", note=False
    )
    filler.start("dew_point_c")
    filler.take(
        "dew_point_c", humidity.dew_point(v["vapour_pressure_kpa"]), source["vapour_pressure_kpa"],
        "inverse of eq. 11", note=False,
    )  # fmt: skip
    rh_min = np.clip(humidity.relative_humidity(v["vapour_pressure_kpa"], v["t_max_c"]), 1.0, 100.0)
    filler.take(
        "rh_min_pct", rh_min, source["vapour_pressure_kpa"] | borrowed,
        "from dew point and highest temperature, eq. 63", note=False,
    )  # fmt: skip
