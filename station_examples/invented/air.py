"""Morning air over the Harrowbend: balloon profiles at two sites, mixing depths that somebody judged, and the wind.

A profile has the night's stable layer, the residual layer of yesterday's mixing, a cap and the free air; dew points
fall all the way up.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd

from etflux import humidity
from etflux.humidity import FREEZING_K, GAS_CONSTANT_DRY, GRAVITY, KAPPA
from invented import stations
from invented.numbers import normal, stream
from invented.weather import DATES, Weather

LAUNCH_UTC = "11:30"  # soon after sunrise here
SITES = (("west", "QM", 1.02), ("east", "VM", 0.96))  # beside two of the stations; share of the cap's height
LEVELS_M = np.array(
    [2.0, 45, 95, 150, 215, 290, 380, 500, 640, 790, 940, 1060, 1160, 1260, 1380, 1550, 1850, 2250, 2750, 3350, 4100,
     4950]
)  # fmt: skip
STABLE_M = 105.0  # depth over which the night's cooling falls to 1/e


class Morning(NamedTuple):
    """How the air lay over the basin on one morning."""

    date: str
    residual_m: float  # top of the layer that yesterday left
    cap_k: float
    cap_m: float  # thickness
    free_k_km: float
    below_t_max_k: float  # potential temperature of the residual layer below the day's highest temperature
    residual_share: float  # humidity at its bottom, of that near the ground
    top_share: float  # and at its top
    above_share: float  # and over the cap


MORNINGS = (
    Morning("2031-06-05", 1500.0, 2.0, 200.0, 5.0, 2.0, 0.92, 0.80, 0.55),
    Morning("2031-07-13", 2000.0, 2.0, 250.0, 4.5, 2.4, 0.88, 0.62, 0.42),
    Morning("2031-07-24", 1000.0, 5.6, 240.0, 3.0, 3.1, 0.93, 0.86, 0.56),
    Morning("2031-07-25", 970.0, 6.0, 230.0, 3.0, 3.1, 0.94, 0.88, 0.56),
    Morning("2031-07-26", 910.0, 6.4, 220.0, 3.0, 3.1, 0.95, 0.90, 0.56),
    Morning("2031-07-27", 870.0, 6.6, 220.0, 3.0, 3.1, 0.96, 0.91, 0.57),
    Morning("2031-07-28", 900.0, 5.8, 240.0, 3.0, 2.8, 0.96, 0.91, 0.58),
    Morning("2031-07-30", 1400.0, 3.0, 200.0, 5.0, 2.2, 0.86, 0.66, 0.40),
    Morning("2031-08-20", 1350.0, 2.5, 200.0, 5.0, 1.8, 0.90, 0.72, 0.50),
)
# Wind of the boundary layer over the whole basin: day and part, speed, direction it comes from.
WIND = (
    ("2031-07-23", "day", 4.5, 190), ("2031-07-23", "night", 6.5, 200),
    ("2031-07-24", "day", 3.6, 175), ("2031-07-24", "night", 4.6, 185),
    ("2031-07-25", "day", 2.9, 165), ("2031-07-25", "night", 3.8, 180),
    ("2031-07-26", "day", 2.2, 150), ("2031-07-26", "night", 3.1, 170),
    ("2031-07-27", "day", 2.4, 140), ("2031-07-27", "night", 3.3, 165),
    ("2031-07-28", "day", 3.4, 185), ("2031-07-28", "night", 6.0, 215),
    ("2031-07-29", "day", 9.5, 310), ("2031-07-29", "night", 8.0, 330),
)  # fmt: skip
WIND_HEIGHT_M = 500.0
# Judged by eye from another source: county, and the share of the profile's cap that it keeps.
JUDGED = (("HB12", 1.05), ("HB15", 0.97), ("HB18", 0.93))


def day_of(date: str) -> int:
    """Position of a date among the days of the weather."""
    return int(np.flatnonzero(np.datetime64(date) == DATES)[0])


def profiles(air: Weather) -> pd.DataFrame:
    """Profile table: two sites, nine mornings."""
    pieces = []
    for place, (site, station, share) in enumerate(SITES):
        s = stations.IDS.index(station)
        for number, morning in enumerate(MORNINGS):
            morning = morning._replace(residual_m=round(share * morning.residual_m))
            d = day_of(morning.date)
            rng = stream(700 + 50 * place + number)
            rows = _profile(
                morning, float(air.t_min_c[d, s]), float(air.t_max_c[d, s]), float(air.dew_point_morning_c[d, s]),
                float(stations.ELEVATION[s]), rng,
            )  # fmt: skip
            rows.insert(0, "site_id", site)
            rows.insert(1, "time", pd.Timestamp(f"{morning.date} {LAUNCH_UTC}"))
            rows.insert(2, "latitude_deg", stations.LATITUDE[s])
            rows.insert(3, "longitude_deg", stations.LONGITUDE[s])
            rows.insert(4, "elevation_m", stations.ELEVATION[s])
            pieces.append(rows)
    return pd.concat(pieces, ignore_index=True)


def _profile(
    morning: Morning, t_min_c: float, t_max_c: float, dew_point_c: float, elevation_m: float, rng: np.random.Generator
) -> pd.DataFrame:
    """Levels of one balloon: heights above the ground, pressure, temperature and dew point."""
    z = LEVELS_M.copy()
    z[1:] = (z[1:] * (1.0 + 0.02 * (rng.random(len(z) - 1) - 0.5))).round(0)
    top, cap_top = morning.residual_m, morning.residual_m + morning.cap_m
    z = np.union1d(z[(z < top - 40.0) | (z > cap_top + 40.0)], [top, cap_top])  # the balloon marks both ends of the cap
    near_ground = t_min_c + 0.4 + FREEZING_K
    residual = t_max_c + FREEZING_K - morning.below_t_max_k + 0.0004 * np.minimum(z, top)
    theta = residual - (residual[0] - near_ground) * np.exp(-z / STABLE_M)
    theta += np.interp(z, [top, cap_top], [0.0, morning.cap_k])
    theta += morning.free_k_km / 1000.0 * np.maximum(z - cap_top, 0.0)
    theta += np.where(z > 400.0, 0.06 * normal(rng, len(z)), 0.0)

    ground_kpa = float(humidity.pressure_from_elevation(elevation_m))
    e = float(humidity.saturation_vapour_pressure(dew_point_c))
    q = float(humidity.specific_humidity(e, ground_kpa))
    share = np.interp(
        z, [0.0, 300.0, top, cap_top], [1.0, morning.residual_share, morning.top_share, morning.above_share]
    )
    q = q * share * 0.5 ** (np.maximum(z - cap_top, 0.0) / 1700.0)
    pressure = _pressure(z, theta, q, ground_kpa)
    temperature = theta * (pressure / ground_kpa) ** KAPPA - FREEZING_K
    dew_point = humidity.dew_point_from_specific_humidity(q, pressure)
    return pd.DataFrame(
        {
            "height_m": z,
            "pressure_kpa": pressure.round(2),
            "temperature_c": temperature.round(1),
            "dew_point_c": np.minimum(dew_point, temperature - 0.2).round(1),
        }
    )


def _pressure(z: np.ndarray, theta: np.ndarray, q: np.ndarray, ground_kpa: float) -> np.ndarray:
    """Pressure of levels in hydrostatic balance, from the ground up."""
    pressure = ground_kpa * np.exp(-z / 8700.0)
    for _ in range(4):
        virtual = theta * (pressure / ground_kpa) ** KAPPA * (1.0 + 0.61 * q)
        middle = np.concatenate([[virtual[0]], 0.5 * (virtual[1:] + virtual[:-1])])
        steps = np.diff(z, prepend=0.0) * GRAVITY / (GAS_CONSTANT_DRY * middle)
        pressure = ground_kpa * np.exp(-np.cumsum(steps))
    return pressure


def mixing_depths() -> pd.DataFrame:
    """Depths entered for three counties through the episode, and one for all on a day of the dry spell."""
    rows: list[tuple[str | None, str, float, float]] = [(None, "2031-07-10", 2100.0, np.nan)]
    for morning in MORNINGS:
        if "2031-07-24" <= morning.date <= "2031-07-28":
            middle = morning.residual_m + 0.5 * morning.cap_m
            rows += [(county, morning.date, round(share * middle, -1), 15.0) for county, share in JUDGED]
    table = pd.DataFrame(rows, columns=["county_id", "date", "mixing_depth_m", "hour"])
    return table.assign(date=pd.to_datetime(table["date"]))


def wind() -> pd.DataFrame:
    """Boundary-layer wind by day and night; a row without a county holds for the whole region."""
    table = pd.DataFrame(WIND, columns=["date", "day_part", "wind_speed_m_s", "wind_from_deg"])
    table.insert(0, "county_id", None)
    table.insert(3, "height_m", WIND_HEIGHT_M)
    return table.assign(date=pd.to_datetime(table["date"]), wind_from_deg=table["wind_from_deg"].astype(float))
