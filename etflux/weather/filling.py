"""Fill a station's record by the published procedures, and label every value with where it came from.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, chapter 3 "Estimating missing
   climatic data" and Annex 4.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from etflux import humidity, solar
from etflux.findings import Finding
from etflux.reference import wind_at_2m
from etflux.weather.places import great_circle_km
from etflux.weather.record import SOURCE, Fill, StationRecord

if TYPE_CHECKING:
    from etflux.case import Settings

DIFFERENCE_DAYS = 30  # days whose mean difference adjusts a neighbour's temperature
MOST_RUNS = 3  # more runs of days than these read better as one line
MOST_NAMES = 3  # neighbours that are worth naming one by one

# What a neighbour would lend: (values here and there, day, station, neighbour) -> values, NaN where it has none.
Loan = Callable[[np.ndarray, np.ndarray, np.ndarray, np.ndarray], np.ndarray]


def fill(record: StationRecord, settings: Settings) -> tuple[StationRecord, list[Finding]]:
    """Complete temperature, humidity, radiation and wind of every station and day.

    What was measured is kept to the last digit. Rain is left as it is: blank is missing, never 0 (see
    ``to_counties``).

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
    fills = record.fills + tuple(filler.fills)
    return replace(record, values=filler.values, source=filler.source, fills=fills), findings


class _Filler:
    """Values being completed, with their sources and the notes for people; private to one call of :func:`fill`."""

    def __init__(self, record: StationRecord, settings: Settings) -> None:
        self.record = record
        self.values = {name: column.copy() for name, column in record.values.items()}
        self.source = {name: column.copy() for name, column in record.source.items()}
        self.fills: list[Fill] = []
        km = great_circle_km(record.latitude_deg, record.longitude_deg, record.latitude_deg, record.longitude_deg)
        np.fill_diagonal(km, np.nan)
        near = np.nan_to_num(km, nan=np.inf) <= settings.weather_neighbour_km
        most = int(near.sum(axis=1).max(initial=0))
        self.order = np.argsort(km, axis=1, kind="stable")[:, :most].copy()  # NaN, the station itself, comes last
        self.within = np.take_along_axis(near, self.order, axis=1)

    def start(self, name: str) -> None:
        """Begin a derived quantity: everything missing."""
        self.values[name] = np.full(self.record.shape, np.nan)
        self.source[name] = np.full(self.record.shape, SOURCE["missing"], dtype=np.uint8)

    def of(self, *names: str) -> np.ndarray:
        """Sources of what a derived value rests on; what is missing makes no value and adds no bit."""
        bits = np.zeros(self.record.shape, dtype=np.uint8)
        for name in names:
            bits |= np.where(self.source[name] == SOURCE["missing"], 0, self.source[name]).astype(np.uint8)
        return bits

    def take(
        self, name: str, candidate: np.ndarray, bits: np.ndarray | int, method: str, lender: np.ndarray | None = None
    ) -> None:
        """Take a candidate wherever the quantity is still missing; an empty `method` is no filling worth telling."""
        candidate = np.broadcast_to(candidate, self.record.shape)
        taken = np.isnan(self.values[name]) & np.isfinite(candidate)
        if not taken.any():
            return
        self.values[name][taken] = candidate[taken]
        bits = bits | np.where(self.record.forecast, SOURCE["forecast"], 0)
        self.source[name][taken] = np.broadcast_to(bits, taken.shape)[taken].astype(np.uint8)
        if method:
            self.fills += list(_runs(self.record, name, method, taken, lender))

    def borrow(self, name: str, wanted: np.ndarray, loan: Loan, method: str) -> None:
        """Take what is still missing from the nearest station that has something to lend that day."""
        here, source = self.values[name].copy(), self.source[name].copy()
        day, station = np.nonzero(wanted & np.isnan(here) & np.isfinite(here).any(axis=1)[:, None])
        candidate = np.full(here.shape, np.nan)
        bits, lender = np.zeros(here.shape, dtype=np.uint8), np.full(here.shape, -1)
        for rank in range(self.order.shape[1]):
            near = self.within[station, rank]
            day, station = day[near], station[near]
            if not len(day):
                break
            neighbour = self.order[station, rank]
            value = loan(here, day, station, neighbour)
            good = np.isfinite(value)
            at = day[good], station[good]
            candidate[at], lender[at] = value[good], neighbour[good]
            bits[at] = SOURCE["neighbour"] | source[day[good], neighbour[good]]
            day, station = day[~good], station[~good]
        self.take(name, candidate, bits, method, lender)


def _runs(
    record: StationRecord, name: str, method: str, taken: np.ndarray, lender: np.ndarray | None
) -> Iterator[Fill]:
    """One row for each station and run of days."""
    for station in np.flatnonzero(taken.any(axis=0)):
        days = np.flatnonzero(taken[:, station])
        runs = np.split(days, np.flatnonzero(np.diff(days) > 1) + 1)
        for run in runs if len(runs) <= MOST_RUNS else [days]:
            told = method
            if lender is not None:
                names = [record.station_ids[k] for k in dict.fromkeys(lender[run, station].tolist())]
                told = f"{method}: {', '.join(names) if len(names) <= MOST_NAMES else f'{len(names)} stations'}"
            yield Fill(record.station_ids[station], name, told, record.dates[run[0]], record.dates[run[-1]], len(run))


# --- temperature ---


def _fill_temperature(filler: _Filler, settings: Settings) -> None:
    """Neighbour plus the mean difference of the 30 days before, for gaps of a few days at most.

    Where no day before has both, as at the start of a record, the 30 days after serve; a station without any common
    day cannot stand in. A day's filled value never passes the measured one at the other end of the day.
    """
    for name in ("t_max_c", "t_min_c"):
        missing = np.isnan(filler.values[name])
        short = missing & (_run_length(missing) <= settings.temperature_gap_days)
        for words, days in (("before", np.arange(-DIFFERENCE_DAYS, 0)), ("after", np.arange(1, DIFFERENCE_DAYS + 1))):
            filler.borrow(
                name, short, _with_difference(days),
                f"nearest station plus the mean difference of the {DIFFERENCE_DAYS} days {words}",
            )  # fmt: skip
    high, low = filler.values["t_max_c"], filler.values["t_min_c"]
    crossed = high < low
    from_near = (filler.source["t_max_c"] & SOURCE["neighbour"]) > 0
    high[crossed & from_near] = low[crossed & from_near]
    from_near = (filler.source["t_min_c"] & SOURCE["neighbour"]) > 0
    low[crossed & from_near] = high[crossed & from_near]


def _with_difference(days: np.ndarray) -> Loan:
    """Return a neighbour's value plus the mean difference over some days around, of those when both exist."""

    def loan(here: np.ndarray, day: np.ndarray, station: np.ndarray, neighbour: np.ndarray) -> np.ndarray:
        window = day[:, None] + days
        inside = (window >= 0) & (window < len(here))
        window = np.clip(window, 0, len(here) - 1)
        difference = here[window, station[:, None]] - here[window, neighbour[:, None]]
        good = inside & np.isfinite(difference)
        total, count = np.where(good, difference, 0.0).sum(axis=1), good.sum(axis=1)
        return here[day, neighbour] + np.where(count > 0, total / np.maximum(count, 1), np.nan)

    return loan


def _run_length(missing: np.ndarray) -> np.ndarray:
    """Length of the run of missing days that each missing day belongs to; 0 elsewhere.

    Examples
    --------
    >>> _run_length(np.array([[True], [False], [True], [True]])).ravel()
    array([1, 0, 2, 2])
    """
    days = len(missing)
    day = np.arange(days)[:, None]
    before = np.maximum.accumulate(np.where(missing, -1, day), axis=0)
    after = np.minimum.accumulate(np.where(missing, days, day)[::-1], axis=0)[::-1]
    return np.where(missing, after - before - 1, 0)


def _temperature_gaps(filler: _Filler) -> list[Finding]:
    record = filler.record
    missing = np.isnan(filler.values["t_max_c"]) | np.isnan(filler.values["t_min_c"])
    findings = []
    for station in np.flatnonzero(missing.any(axis=0)):
        days = np.flatnonzero(missing[:, station])
        span = f"first {record.dates[days[0]]}, last {record.dates[days[-1]]}"
        subject = f"station {record.station_ids[station]}"
        detail = f"{len(days)} days without temperature, {span}"
        findings.append(Finding("temperature-gap", "weather", subject=subject, detail=detail))
    return findings


# --- humidity ---


def _fill_humidity(filler: _Filler, settings: Settings) -> None:
    """Vapour pressure by the first of the published forms that the day allows."""
    v = filler.values
    t_max, t_min, rh_max = v["t_max_c"], v["t_min_c"], v["rh_max_pct"]
    warm, cold = filler.of("t_max_c"), filler.of("t_min_c")
    dry = v["vapour_pressure_kpa"] <= 0.0  # no air is quite dry
    v["vapour_pressure_kpa"][dry] = np.nan
    filler.source["vapour_pressure_kpa"][dry] = SOURCE["missing"]
    forms = (
        (humidity.vapour_pressure_from_deficit(t_max, t_min, v["vpd_kpa"]), warm | cold, "from the deficit, eq. 12"),
        (humidity.vapour_pressure_from_dew_point(v["dew_point_c"]), 0, "from the dew point, eq. 14"),
        (
            humidity.vapour_pressure_from_rh_max_min(t_max, t_min, rh_max, v["rh_min_pct"]),
            warm | cold,
            "from highest and lowest humidity, eq. 17",
        ),
        (humidity.vapour_pressure_from_rh_max(t_min, rh_max), cold, "from highest humidity, eq. 18"),
        (
            humidity.vapour_pressure_from_rh_mean(t_max, t_min, v["rh_mean_pct"]),
            warm | cold,
            "from mean humidity, eq. 19",
        ),
    )
    for candidate, bits, method in forms:
        filler.take("vapour_pressure_kpa", np.where(candidate > 0.0, candidate, np.nan), bits, method)
    below = np.where(filler.record.arid, settings.tdew_below_tmin_arid_c, settings.tdew_below_tmin_humid_c)
    filler.take(
        "vapour_pressure_kpa", humidity.vapour_pressure_from_dew_point(t_min - below), cold | SOURCE["estimated"],
        "dew point taken from lowest temperature, eq. 48",
    )  # fmt: skip


# --- radiation and wind ---


def _fill_radiation(filler: _Filler, settings: Settings) -> None:
    """Sunshine hours, else the neighbour's share of clear-sky radiation, else the temperature range."""
    record, v = filler.record, filler.values
    day = solar.day_of_year(record.dates)[:, None]
    ra = solar.extraterrestrial_radiation(record.latitude_deg, day)
    rso = solar.clear_sky_radiation(ra, record.elevation_m)
    hours = solar.daylight_hours(record.latitude_deg, day)
    sunny = solar.radiation_from_sunshine(ra, v["sunshine_h"], hours)
    filler.take("rs_mj_m2_d", sunny, SOURCE["estimated"], "from sunshine hours, eq. 35")

    def share(here: np.ndarray, day: np.ndarray, station: np.ndarray, neighbour: np.ndarray) -> np.ndarray:
        there = np.where(rso[day, neighbour] > 0.0, rso[day, neighbour], np.nan)
        return here[day, neighbour] / there * rso[day, station]

    everywhere = np.ones(record.shape, dtype=bool)
    filler.borrow("rs_mj_m2_d", everywhere, share, "nearest station's share of clear-sky radiation, after eq. 49")
    coefficient = np.where(record.coast, settings.krs_coast, settings.krs_interior)
    estimate = solar.radiation_from_temperature_range(ra, v["t_max_c"], v["t_min_c"], coefficient, rso)
    bits = filler.of("t_max_c", "t_min_c") | SOURCE["estimated"]
    filler.take("rs_mj_m2_d", estimate, bits, "from the temperature range, eq. 50")


def _fill_wind(filler: _Filler, settings: Settings) -> None:
    """Wind at 2 m: measured, neighbour, the station's own mean, the default."""
    record = filler.record
    filler.start("u2_m_s")
    at_2m = wind_at_2m(filler.values["wind_m_s"], record.wind_height_m)  # reference ET sets its own least wind
    filler.take("u2_m_s", at_2m, filler.of("wind_m_s"), "")
    measured = filler.values["u2_m_s"].copy()
    everywhere = np.ones(record.shape, dtype=bool)
    filler.borrow("u2_m_s", everywhere, lambda here, d, s, near: here[d, near], "nearest station's wind at 2 m")
    count = np.isfinite(measured).sum(axis=0)
    own = np.where(count > 0, np.nansum(measured, axis=0) / np.maximum(count, 1), np.nan)
    filler.take("u2_m_s", own, SOURCE["station_mean"], "the station's own mean wind")
    default = settings.default_u2_m_s
    filler.take("u2_m_s", np.asarray(default), SOURCE["default"], f"default {default:g} m/s")


def _derive(filler: _Filler) -> None:
    """Mean temperature, dew point and lowest humidity that follow from the rest."""
    v = filler.values
    t_max, vapour = v["t_max_c"], v["vapour_pressure_kpa"]
    filler.take("t_mean_c", 0.5 * (t_max + v["t_min_c"]), filler.of("t_max_c", "t_min_c"), "")  # eq. 9
    bits = filler.of("vapour_pressure_kpa")
    filler.take("dew_point_c", humidity.dew_point(vapour), bits, "")  # the inverse of eq. 11
    rh_min = np.clip(humidity.relative_humidity(vapour, t_max), 1.0, 100.0)
    guessed = (bits & SOURCE["estimated"]) > 0
    bits = bits | filler.of("t_max_c")
    filler.take("rh_min_pct", np.where(guessed, np.nan, rh_min), bits, "from dew point and highest temperature, eq. 63")
    filler.take(
        "rh_min_pct", rh_min, bits, "from dew point taken from lowest temperature and highest temperature, eq. 64"
    )
