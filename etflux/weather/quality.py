"""What is impossible, doubtful or telling in a measured record. Nothing is corrected here.

References
----------
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation, appendix D.
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, Annex 5.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable

import numpy as np

from etflux import solar
from etflux.findings import Finding
from etflux.variables import quantity
from etflux.weather.pyranometer import pyranometer_findings
from etflux.weather.record import MEASURED, StationRecord

STUCK_DAYS = 5  # the same reading so many days running
CALM_M_S = 0.5
ENOUGH_DAYS = 20  # days that a statement about a whole sensor needs
PLAUSIBLE_RAIN_MM = 250.0

# A value that is common in the wrong unit and hardly possible in the right one: median above -> the likely unit.
LIKELY_UNITS = {
    "t_max_c": ((45.0, "°F"), (200.0, "K")),
    "t_min_c": ((38.0, "°F"), (200.0, "K")),
    "rs_mj_m2_d": ((42.0, "W/m²"), (380.0, "langley/day"), (900.0, "J/cm²")),
    "wind_m_s": ((20.0, "km/day or miles/day"),),
    "vapour_pressure_kpa": ((5.0, "hPa"),),
    "vpd_kpa": ((7.0, "hPa"),),
}


def quality(record: StationRecord) -> list[Finding]:
    """Findings on a record as measured.

    Parameters
    ----------
    record : StationRecord
        As arranged, nothing filled.

    Returns
    -------
    list of Finding
        In table "weather", with the row of the day's reading where there is one.
    """
    if not len(record.dates):
        return []
    doubtful_unit = _units(record)
    in_wrong_unit = {(finding.detail.split(" ")[1], finding.quantity) for finding in doubtful_unit}
    findings = doubtful_unit
    findings += [
        finding
        for finding in _ranges(record)
        if (finding.subject.split(" ")[1].rstrip(","), finding.quantity) not in in_wrong_unit
    ]
    for check in (_order, _humidity, _radiation, _rain, _stuck, _wind, _gaps):
        findings += check(record)
    return findings + pyranometer_findings(record)


def _cells(
    record: StationRecord, code: str, name: str, where: np.ndarray, detail: Callable[[int, int], str] = lambda d, s: ""
) -> Iterable[Finding]:
    """One finding for each (day, station) cell of a mask."""
    for day, station in zip(*np.nonzero(where), strict=True):
        row = int(record.row_of[day, station])
        yield Finding(
            code, "weather", row if row >= 0 else None, name, float(record.values[name][day, station]),
            record.name(day, station), detail(day, station),
        )  # fmt: skip


def _constant(text: str) -> Callable[[int, int], str]:
    return lambda day, station: text


def _sensor(record: StationRecord, code: str, name: str, station: int, detail: str) -> Finding:
    """One finding about a whole sensor."""
    station_id = record.station_ids[station]
    return Finding(code, "weather", None, name, None, f"station {station_id}", f"station {station_id} {detail}")


def _units(record: StationRecord) -> list[Finding]:
    findings = []
    for name, marks in LIKELY_UNITS.items():
        column = record.values[name]
        for station in np.flatnonzero(np.isfinite(column).any(axis=0)).tolist():
            median = float(np.nanmedian(column[:, station]))
            likely = [unit for least, unit in marks if median > least]
            if likely:
                findings.append(
                    _sensor(
                        record, "unit-suspected", name, station, f"has a median of {median:.4g}: likely {likely[-1]}"
                    )
                )
    for name in ("rh_max_pct", "rh_min_pct", "rh_mean_pct"):
        column = record.values[name]
        for station in np.flatnonzero(np.isfinite(column).any(axis=0)).tolist():
            highest = float(np.nanmax(column[:, station]))
            if 0.0 < highest <= 1.5:
                findings.append(_sensor(record, "humidity-fraction", name, station, f"never passes {highest:.3g}"))
    return findings


def _ranges(record: StationRecord) -> Iterable[Finding]:
    for name in MEASURED:
        row = quantity(name)
        column = record.values[name]
        if name == "rain_mm":
            yield from _cells(record, "rain-negative", name, column < 0.0)
            continue
        if row.low is not None and row.high is not None:
            limits = f"from {row.low:g} to {row.high:g} {row.unit}"
            yield from _cells(record, "range", name, (column < row.low) | (column > row.high), _constant(limits))


def _order(record: StationRecord) -> Iterable[Finding]:
    v = record.values
    yield from _cells(record, "t-max-below-t-min", "t_max_c", v["t_max_c"] < v["t_min_c"])
    outside = (v["t_mean_c"] > v["t_max_c"] + 0.05) | (v["t_mean_c"] < v["t_min_c"] - 0.05)
    yield from _cells(record, "t-mean-outside", "t_mean_c", outside)
    yield from _cells(record, "humidity-order", "rh_max_pct", v["rh_max_pct"] < v["rh_min_pct"])
    yield from _cells(record, "dew-point-above-t-max", "dew_point_c", v["dew_point_c"] > v["t_max_c"])


def _humidity(record: StationRecord) -> Iterable[Finding]:
    """Sensors that never saturate on rain days, and dew points out of step with the night's temperature."""
    v = record.values
    wet = v["rain_mm"] > 2.0
    with np.errstate(invalid="ignore"):
        for station in range(record.shape[1]):
            on_rain = v["rh_max_pct"][wet[:, station], station]
            on_rain = on_rain[np.isfinite(on_rain)]
            if len(on_rain) >= 10 and 1.5 < on_rain.max() < 93.0:
                yield _sensor(
                    record, "humidity-never-wet", "rh_max_pct", station,
                    f"reaches {on_rain.max():.0f} % at most on {len(on_rain)} rain days",
                )  # fmt: skip
            excess = v["dew_point_c"][:, station] - v["t_min_c"][:, station]
            excess = excess[np.isfinite(excess)]
            if len(excess) >= ENOUGH_DAYS and np.median(excess) > 3.0:
                yield _sensor(
                    record, "dew-point-against-t-min", "dew_point_c", station,
                    f"has its dew point {np.median(excess):.1f} °C above the lowest temperature on half of the days",
                )  # fmt: skip


def _radiation(record: StationRecord) -> Iterable[Finding]:
    ra = solar.extraterrestrial_radiation(record.latitude_deg, solar.day_of_year(record.dates)[:, None])
    rs = record.values["rs_mj_m2_d"]

    def likely(day: int, station: int) -> str:
        ratio = rs[day, station] / ra[day, station]
        unit = "W/m²" if ratio < 13.0 else "langley/day" if ratio < 26.0 else "J/cm²"
        guess = f"; likely {unit}" if ratio > 2.0 else ""
        return f"{ra[day, station]:.1f} MJ/m²/day reach the top of the air that day{guess}"

    above = (rs > 1.05 * ra) & (rs <= quantity("rs_mj_m2_d").high)
    yield from _cells(record, "radiation-above-sky", "rs_mj_m2_d", above, likely)


def _rain(record: StationRecord) -> Iterable[Finding]:
    yield from _cells(record, "rain-heavy", "rain_mm", record.values["rain_mm"] > PLAUSIBLE_RAIN_MM)


def _stuck(record: StationRecord) -> Iterable[Finding]:
    """A sensor that repeats itself to the last digit."""
    for name in ("t_max_c", "t_min_c", "rh_min_pct", "dew_point_c", "vapour_pressure_kpa", "rs_mj_m2_d", "wind_m_s"):
        column = record.values[name]
        same = np.zeros(column.shape, dtype=bool)
        same[1:] = column[1:] == column[:-1]
        run = np.zeros(column.shape[1], dtype=int)
        for day in range(column.shape[0]):
            run = np.where(same[day], run + 1, 0)
            ends = run >= STUCK_DAYS - 1
            if day + 1 < column.shape[0]:
                ends &= ~same[day + 1]
            for station in np.flatnonzero(ends).tolist():
                yield Finding(
                    "value-repeated", "weather", int(record.row_of[day, station]), name,
                    float(column[day, station]), record.name(day, station), f"{run[station] + 1} days running",
                )  # fmt: skip


def _wind(record: StationRecord) -> Iterable[Finding]:
    wind = record.values["wind_m_s"]
    for station in range(record.shape[1]):
        here = wind[np.isfinite(wind[:, station]), station]
        if len(here) >= ENOUGH_DAYS and np.mean(here < CALM_M_S) > 0.5:
            yield _sensor(
                record, "wind-calm", "wind_m_s", station,
                f"is below {CALM_M_S:g} m/s on {100 * np.mean(here < CALM_M_S):.0f} % of the days",
            )  # fmt: skip


def _gaps(record: StationRecord) -> Iterable[Finding]:
    """Days of a station's own span that have no row at all."""
    there = record.row_of >= 0
    for station in range(record.shape[1]):
        days = np.flatnonzero(there[:, station])
        if not len(days):
            station_id = record.station_ids[station]
            yield Finding(
                "station-without-weather", "stations", None, "station_id", station_id, f"station {station_id}"
            )
            continue
        lost = record.dates[days[0] : days[-1] + 1][~there[days[0] : days[-1] + 1, station]]
        if len(lost):
            yield _sensor(
                record, "days-missing", "date", station, f"lacks {len(lost)} days, first {lost[0]}, last {lost[-1]}"
            )
