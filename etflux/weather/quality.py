"""What is impossible, doubtful or telling in a measured record. Nothing is corrected here.

References
----------
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation, appendix D.
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, Annex 5.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import replace

import numpy as np

from etflux import humidity, solar
from etflux.findings import Finding
from etflux.variables import quantity
from etflux.weather.likely_units import likely_solar_unit, sensor, unit_findings
from etflux.weather.pyranometer import pyranometer_findings
from etflux.weather.record import MEASURED, StationRecord

STUCK_DAYS = 5  # the same reading so many days running
CALM_M_S = 0.5  # [FAO56] Annex 5, p. 252
ENOUGH_DAYS = 20  # days that a statement about a whole sensor needs
RAIN_DAYS = 10  # the same, days with rain
WET_MM = 2.0
WET_RH_PCT = 93.0  # [FAO56] Annex 5, p. 253: above 95 % in rain; 2 % for the sensor
ABOVE_T_MIN_C = 3.0
APART_C = 0.5  # two sensors may differ by so much
APART_H = 0.5  # the sun's disk and its refraction lengthen the day of eq. 34 by up to a quarter of an hour at each end
HEAVY_RAIN_MM = 300.0
STRAY_ROWS, STRAY_DAYS = 3, 60  # so few rows, so many days from the others, have a wrong date
BLANK_SHARE, BLANK_DAYS = 0.1, 10  # what is blank on more days than both is mentioned
REPEATING = (
    "t_max_c", "t_min_c", "t_mean_c", "rh_min_pct", "rh_mean_pct", "dew_point_c", "vapour_pressure_kpa", "vpd_kpa",
    "rs_mj_m2_d", "wind_m_s", "rain_mm",
)  # fmt: skip
EXPECTED_DAILY = (
    "t_max_c", "t_min_c", "rh_max_pct", "rh_min_pct", "rh_mean_pct", "dew_point_c", "vapour_pressure_kpa",
    "rs_mj_m2_d", "wind_m_s", "rain_mm",
)  # fmt: skip
DEW_POINTS = ("dew_point_c", "dew_point_morning_c", "dew_point_afternoon_c")


def quality(record: StationRecord) -> list[Finding]:
    """Findings on a record as measured.

    Parameters
    ----------
    record : StationRecord
        As arranged, nothing filled.

    Returns
    -------
    list of Finding
        In table "weather", with the row that holds the value; without a row for a whole column of a station. Of a
        column whose unit is doubted nothing else is said.
    """
    if not len(record.dates):
        return []
    findings = unit_findings(record)
    trusted = _without(record, findings)
    for check in (_ranges, _order, _vapour, _humidity, _sun, _rain, _stuck, _wind, _days, _blanks):
        findings += check(trusted)
    return findings + pyranometer_findings(trusted)


def _without(record: StationRecord, findings: Iterable[Finding]) -> StationRecord:
    """Return the record with the columns that findings are about blank."""
    values = dict(record.values)
    for finding in findings:
        name, station = str(finding.quantity), record.station_ids.index(finding.subject.removeprefix("station "))
        values[name] = values[name].copy()
        values[name][:, station] = np.nan
    return replace(record, values=values)


def _cells(
    record: StationRecord, code: str, name: str, where: np.ndarray, detail: Callable[[int, int], str] = lambda d, s: ""
) -> Iterable[Finding]:
    """One finding for each (day, station) cell of a mask."""
    for day, station in zip(*np.nonzero(where), strict=True):
        value = float(record.values[name][day, station])
        row = record.row(name, day, station)
        yield Finding(code, "weather", row, name, value, record.name(day, station), detail(day, station))


def _constant(text: str) -> Callable[[int, int], str]:
    return lambda day, station: text


def _each(form: str, numbers: np.ndarray) -> Callable[[int, int], str]:
    return lambda day, station: form.format(numbers[day, station])


def _ranges(record: StationRecord) -> Iterable[Finding]:
    for name in MEASURED:
        low, high, unit = quantity(name).low, quantity(name).high, quantity(name).unit
        column = record.values[name]
        if low is None or high is None:
            continue
        limits = f"from {low:g} to {high:g} {unit}"
        negative_rain = (column < 0.0) & (name == "rain_mm")
        outside = ((column < low) | (column > high)) & ~negative_rain
        yield from _cells(record, "rain-negative", name, negative_rain)
        yield from _cells(record, "range", name, outside, _constant(limits))


# --- within a day ---


def _order(record: StationRecord) -> Iterable[Finding]:
    v = record.values
    yield from _cells(record, "t-max-below-t-min", "t_max_c", v["t_max_c"] < v["t_min_c"])
    outside = (v["t_mean_c"] > v["t_max_c"] + 0.05) | (v["t_mean_c"] < v["t_min_c"] - 0.05)
    yield from _cells(record, "t-mean-outside", "t_mean_c", outside)
    yield from _cells(record, "humidity-order", "rh_max_pct", v["rh_max_pct"] < v["rh_min_pct"])
    for name in DEW_POINTS:
        yield from _cells(record, "dew-point-above-t-max", name, v[name] > v["t_max_c"] + APART_C)


def _vapour(record: StationRecord) -> Iterable[Finding]:
    """More vapour than the day's warmest air holds, or a deficit that leaves less than none."""
    v = record.values
    most = humidity.saturation_vapour_pressure(v["t_max_c"] + APART_C)
    mean = humidity.mean_saturation_vapour_pressure(v["t_max_c"], v["t_min_c"])
    limits = "from 0 to {:.2f} kPa that day"
    above = v["vapour_pressure_kpa"] > most
    yield from _cells(record, "vapour-pressure-impossible", "vapour_pressure_kpa", above, _each(limits, most))
    below = v["vpd_kpa"] >= mean
    yield from _cells(record, "vapour-pressure-impossible", "vpd_kpa", below, _each(limits, mean))


def _sun(record: StationRecord) -> Iterable[Finding]:
    """More radiation than above the air, more sunshine than daylight."""
    day = solar.day_of_year(record.dates)[:, None]
    ra = solar.extraterrestrial_radiation(record.latitude_deg, day)
    rs, sunshine = record.values["rs_mj_m2_d"], record.values["sunshine_h"]
    hours = np.broadcast_to(solar.daylight_hours(record.latitude_deg, day), rs.shape)

    def likely(day: int, station: int) -> str:
        ratio = rs[day, station] / ra[day, station]
        guess = f"; likely {likely_solar_unit(ratio)}" if ratio > 1.5 else ""
        return f"{ra[day, station]:.1f} MJ/m²/day reach the top of the air that day{guess}"

    above = (rs > 1.05 * ra) & (rs <= quantity("rs_mj_m2_d").high)
    yield from _cells(record, "radiation-above-sky", "rs_mj_m2_d", above, likely)
    longer = (sunshine > hours + APART_H) & (sunshine <= quantity("sunshine_h").high)
    yield from _cells(record, "sunshine-above-day", "sunshine_h", longer, _each("{:.1f} h that day", hours))


def _rain(record: StationRecord) -> Iterable[Finding]:
    rain = record.values["rain_mm"]
    yield from _cells(record, "rain-heavy", "rain_mm", (rain >= HEAVY_RAIN_MM) & (rain <= quantity("rain_mm").high))


# --- through the record ---


def _humidity(record: StationRecord) -> Iterable[Finding]:
    """Sensors that never saturate on rain days, and dew points out of step with the night's temperature."""
    v = record.values
    wet = (v["rain_mm"] > WET_MM) & np.isfinite(v["rh_max_pct"])
    highest = np.where(wet, v["rh_max_pct"], -np.inf).max(axis=0)
    for station in np.flatnonzero((wet.sum(axis=0) >= RAIN_DAYS) & (highest < WET_RH_PCT)).tolist():
        detail = f"reaches {highest[station]:.0f} % at most on {wet[:, station].sum()} rain days"
        yield sensor(record, "humidity-never-wet", "rh_max_pct", station, detail)
    from_vapour = humidity.dew_point(v["vapour_pressure_kpa"])
    for name, dew_point in (("dew_point_c", v["dew_point_c"]), ("vapour_pressure_kpa", from_vapour)):
        excess = dew_point - v["t_min_c"]
        stations = np.flatnonzero(np.isfinite(excess).sum(axis=0) >= ENOUGH_DAYS)
        for station, median in zip(stations.tolist(), _medians(excess[:, stations]), strict=True):
            if median > ABOVE_T_MIN_C:
                detail = f"has its dew point {median:.1f} °C or more above the lowest temperature on half of the days"
                yield sensor(record, "dew-point-against-t-min", name, station, detail)


def _medians(columns: np.ndarray) -> list[float]:
    return np.nanmedian(columns, axis=0).tolist() if columns.shape[1] else []


def _stuck(record: StationRecord) -> Iterable[Finding]:
    """A sensor that repeats itself to the last digit; dry days may."""
    for name in REPEATING:
        column = record.values[name]
        same = np.zeros(column.shape, dtype=bool)
        same[1:] = (column[1:] == column[:-1]) & ((column[1:] > 0.0) | (name != "rain_mm"))
        last_new = np.maximum.accumulate(np.where(same, 0, np.arange(len(column))[:, None]), axis=0)
        run = np.arange(len(column))[:, None] - last_new + 1
        ends = (run >= STUCK_DAYS) & ~np.vstack([same[1:], np.zeros((1, column.shape[1]), dtype=bool)])
        yield from _cells(record, "value-repeated", name, ends, _each("{} days running", run))


def _wind(record: StationRecord) -> Iterable[Finding]:
    wind = record.values["wind_m_s"]
    count = np.isfinite(wind).sum(axis=0)
    calm = (wind < CALM_M_S).sum(axis=0) / np.maximum(count, 1)
    for station in np.flatnonzero((count >= ENOUGH_DAYS) & (calm > 0.5)).tolist():
        detail = f"is below {CALM_M_S:g} m/s on {100 * calm[station]:.0f} % of the days"
        yield sensor(record, "wind-calm", "wind_m_s", station, detail)


def _days(record: StationRecord) -> Iterable[Finding]:
    """Stations without rows, rows far from all others, days without a row, forecasts before observations."""
    there = record.row_of >= 0
    for station, station_id in enumerate(record.station_ids):
        days = np.flatnonzero(there[:, station])
        if not len(days):
            yield Finding(
                "station-without-weather", "stations", None, "station_id", station_id, f"station {station_id}"
            )
            continue
        days, stray = _main_part(days)
        for day in stray.tolist():
            yield _on_row(record, "date-stray", "date", day, station, str(record.dates[day]))
        span = slice(days[0], days[-1] + 1)
        lost = record.dates[span][~there[span, station]]
        if len(lost):
            detail = f"lacks {len(lost)} days, first {lost[0]}, last {lost[-1]}"
            yield sensor(record, "days-missing", "date", station, detail)
        observed = days[~record.forecast[days, station]]
        early = days[record.forecast[days, station] & (days < observed.max(initial=-1))]
        if len(early):
            detail = f"{len(early)} days, though {record.dates[observed[-1]]} is observed"
            found = _on_row(record, "forecast-in-the-past", "forecast", int(early[0]), station, "yes")
            yield replace(found, detail=detail)


def _on_row(record: StationRecord, code: str, name: str, day: int, station: int, value: str) -> Finding:
    return Finding(code, "weather", record.row(name, day, station), name, value, record.name(day, station))


def _main_part(days: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Days of a station apart from the few at either end that are far from all others, and these.

    Examples
    --------
    >>> _main_part(np.array([0, 200, 201, 202, 203]))
    (array([200, 201, 202, 203]), array([0]))
    """
    blocks = np.split(days, np.flatnonzero(np.diff(days) > STRAY_DAYS) + 1)
    stray = []
    for end in (0, -1):
        if len(blocks) > 1 and len(blocks[end]) <= STRAY_ROWS < len(days) - len(blocks[end]):
            stray.append(blocks.pop(end))
    return np.concatenate(blocks), np.concatenate([*stray, np.empty(0, dtype=days.dtype)])


def _blanks(record: StationRecord) -> Iterable[Finding]:
    """Quantities of a station that are there on most of its days and blank on many."""
    for name in EXPECTED_DAILY:
        rows = (record.read_later.get(name, record.row_of) >= 0) & ~record.forecast
        have = np.isfinite(record.values[name]) & rows
        blank = rows & ~have
        lacking = blank.sum(axis=0)
        many = (lacking > BLANK_DAYS) & (lacking > BLANK_SHARE * rows.sum(axis=0)) & (lacking < have.sum(axis=0))
        for station in np.flatnonzero(many).tolist():
            days = record.dates[blank[:, station]]
            detail = f"is blank on {len(days)} of {rows[:, station].sum()} days, first {days[0]}, last {days[-1]}"
            yield sensor(record, "values-blank", name, station, detail)
