"""Columns that do not look like the unit in their heading, and the unit they look like.

Nothing is converted. The limits lie between what is common in the wrong unit and what is hardly possible in the right
one anywhere people farm (common practice, no source); the solar ones are ratios to the radiation at the top of the
air, so that they hold in every season.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from etflux import solar
from etflux.findings import Finding
from etflux.variables import quantity
from etflux.weather.record import StationRecord

FEW_DAYS = 5  # days that a word about a column needs
ENOUGH_DAYS = 30  # days of which one must have been clear
# A median above -> the likely unit.
MEDIANS = {
    "t_max_c": ((48.0, "°F"), (200.0, "K")),
    "t_min_c": ((40.0, "°F"), (200.0, "K")),
    "t_mean_c": ((43.0, "°F"), (200.0, "K")),
    "dew_point_c": ((32.0, "°F"), (200.0, "K")),
    "dew_point_morning_c": ((32.0, "°F"), (200.0, "K")),
    "dew_point_afternoon_c": ((32.0, "°F"), (200.0, "K")),
    "wind_m_s": ((20.0, "km/day or miles/day"),),
    "vapour_pressure_kpa": ((5.0, "hPa"),),
    "vpd_kpa": ((7.0, "hPa"),),
    "sunshine_h": ((24.0, "minutes"),),
}
HUMIDITIES = ("rh_max_pct", "rh_min_pct", "rh_mean_pct")
FRACTION_MOST = 1.5
# Ratio to the radiation at the top of the air on clear days, by what was entered under which heading.
CLEAR_SHARE = 0.75
SOLAR_FACTORS = {
    1.0 / 23.9: "MJ/m²/day under a heading of langley/day",
    1.0 / 11.57: "MJ/m²/day under a heading of W/m²",
    1.0 / 3.6: "kWh/m²/day",
    11.57 / 23.9: "W/m² under a heading of langley/day",
    23.9 / 11.57: "langley/day under a heading of W/m²",
    3.6: "MJ/m²/day under a heading of kWh/m²/day",
    11.57: "W/m²",
    23.9: "langley/day",
    100.0: "J/cm²",
}
IMPOSSIBLE_SHARE = 1.05  # of the radiation at the top of the air
IMPOSSIBLE_DAYS = 0.25  # share of days above it that makes it the unit's fault
DIM_SHARE = 0.42  # no month is so dark that its clearest day stays below
COLD_C = 5.0  # highest temperatures under a high sun; below, they are °C under a heading of °F
HIGH_SUN_MJ = 35.0
HIGH_LAND_M = 2500.0
FAR_NORTH_DEG = 55.0
WET_MEDIAN_MM = 75.0  # of days with rain; above, they are mm under a heading of inches
SMALL_RAIN_MM = (0.8, 4.0)  # mean and most of days with rain; below both, they are inches under a heading of mm
RAIN_DAYS = 15


def unit_findings(record: StationRecord) -> list[Finding]:
    """Findings on whole columns, one for each station and quantity at most.

    Parameters
    ----------
    record : StationRecord
        As arranged.

    Returns
    -------
    list of Finding
        "unit-suspected", "humidity-fraction", "radiation-low", "rain-small"; all without a row.
    """
    return [*_medians(record), *_cold(record), *_fractions(record), *_solar(record), *_rain(record)]


def likely_solar_unit(ratio: float) -> str:
    """Words for the unit that radiation was entered in, by its ratio to that of the top of the air on a clear day.

    Examples
    --------
    >>> likely_solar_unit(8.7), likely_solar_unit(0.21)
    ('W/m²', 'kWh/m²/day')
    """
    return SOLAR_FACTORS[min(SOLAR_FACTORS, key=lambda factor: abs(np.log(ratio / CLEAR_SHARE / factor)))]


def sensor(record: StationRecord, code: str, name: str, station: int, detail: str) -> Finding:
    """One finding about a whole column of a station."""
    station_id = record.station_ids[station]
    return Finding(code, "weather", None, name, None, f"station {station_id}", f"station {station_id} {detail}")


def _enough(column: np.ndarray, days: int) -> list[int]:
    """Stations whose column has as many values."""
    return np.flatnonzero(np.isfinite(column).sum(axis=0) >= days).tolist()


def _medians(record: StationRecord) -> Iterator[Finding]:
    for name, marks in MEDIANS.items():
        column = record.values[name]
        stations = _enough(column, FEW_DAYS)
        if not stations:
            continue
        for station, median in zip(stations, np.nanmedian(column[:, stations], axis=0).tolist(), strict=True):
            likely = [unit for least, unit in marks if median > least]
            if likely:
                detail = f"has a median of {median:.4g} {quantity(name).unit}: likely {likely[-1]}"
                yield sensor(record, "unit-suspected", name, station, detail)


def _cold(record: StationRecord) -> Iterator[Finding]:
    """Highest temperatures near freezing under a high sun, in the lowlands."""
    ra = solar.extraterrestrial_radiation(record.latitude_deg, solar.day_of_year(record.dates)[:, None])
    lowland = (record.elevation_m < HIGH_LAND_M) & (np.abs(record.latitude_deg) < FAR_NORTH_DEG)
    for name in ("t_max_c", "t_min_c"):
        column = np.where((ra > HIGH_SUN_MJ) & lowland, record.values[name], np.nan)
        limit = COLD_C if name == "t_max_c" else COLD_C - 10.0
        for station in _enough(column, FEW_DAYS):
            median = float(np.nanmedian(column[:, station]))
            if median < limit:
                detail = f"has a median of {median:.4g} °C in summer: likely °C under a heading of °F"
                yield sensor(record, "unit-suspected", name, station, detail)


def _fractions(record: StationRecord) -> Iterator[Finding]:
    for name in HUMIDITIES:
        column = record.values[name]
        for station in _enough(column, 1):
            highest = float(np.nanmax(column[:, station]))
            if 0.0 < highest <= FRACTION_MOST:
                yield sensor(record, "humidity-fraction", name, station, f"never passes {highest:.3g}")


def _solar(record: StationRecord) -> Iterator[Finding]:
    ra = solar.extraterrestrial_radiation(record.latitude_deg, solar.day_of_year(record.dates)[:, None])
    ratio = record.values["rs_mj_m2_d"] / np.where(ra > 1.0, ra, np.nan)
    for station in _enough(ratio, FEW_DAYS):
        here = ratio[np.isfinite(ratio[:, station]), station]
        if np.mean(here > IMPOSSIBLE_SHARE) >= IMPOSSIBLE_DAYS:
            clear = float(np.percentile(here, 95.0))
            code, words = "unit-suspected", f"reads {clear:.3g} times the radiation at the top of the air"
        elif len(here) >= ENOUGH_DAYS and 0.0 < here.max() < DIM_SHARE:
            clear = float(here.max())
            code, words = "radiation-low", f"never passes {100 * clear:.0f} % of the radiation at the top of the air"
        else:
            continue
        yield sensor(record, code, "rs_mj_m2_d", station, f"{words}: likely {likely_solar_unit(clear)}")


def _rain(record: StationRecord) -> Iterator[Finding]:
    rain = np.where(record.values["rain_mm"] > 0.0, record.values["rain_mm"], np.nan)
    for station in _enough(rain, FEW_DAYS):
        wet = rain[np.isfinite(rain[:, station]), station]
        if np.median(wet) > WET_MEDIAN_MM:
            detail = f"has a median of {np.median(wet):.4g} mm on days with rain: likely mm under a heading of inches"
            yield sensor(record, "unit-suspected", "rain_mm", station, detail)
        elif len(wet) >= RAIN_DAYS and wet.mean() < SMALL_RAIN_MM[0] and wet.max() < SMALL_RAIN_MM[1]:
            detail = f"has at most {wet.max():.3g} mm on {len(wet)} days with rain: likely inches under a heading of mm"
            yield sensor(record, "rain-small", "rain_mm", station, detail)
