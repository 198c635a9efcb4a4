"""Weather of a season that never was: a daily generator with memory, and what six stations make of it.

The season's course (wet spring, dry spell, humid episode, cool front) is a table of spells; noise with memory in time
and likeness in space fills it. Sums of rain are set by spell, everything else comes out of the generator.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd
from scipy.special import ndtr, ndtri

from etflux import humidity, solar
from invented.numbers import SEED, field

FIRST, LAST = "2031-04-01", "2031-09-30"
DATES = np.arange(np.datetime64("2031-03-31"), np.datetime64("2031-10-02"))  # a day more at both ends
TURBIDITY = 0.8  # farmland in summer


class Spell(NamedTuple):
    """A stretch of days that have their weather in common."""

    first: str
    last: str
    wet_share: float  # of the days
    rain_mm: float  # mean over the places
    warmer_c: float
    drier_c: float  # added to how far the morning dew point lies below the lowest temperature
    windier: float  # factor
    clearer: float  # added to the normal deviate of the clearness

    def days(self) -> np.ndarray:
        """Which of the days belong to it."""
        return (np.datetime64(self.first) <= DATES) & (np.datetime64(self.last) >= DATES)


SPELLS = (
    Spell("2031-03-31", "2031-04-30", 0.38, 96.0, -0.6, 0.4, 1.0, 0.2),
    Spell("2031-05-01", "2031-05-31", 0.44, 134.0, 1.2, 0.0, 0.95, 0.15),
    Spell("2031-06-01", "2031-06-21", 0.36, 96.0, 0.2, 0.0, 1.0, 0.0),
    Spell("2031-06-22", "2031-07-07", 0.08, 6.0, 1.6, 2.2, 1.05, 0.45),
    Spell("2031-07-08", "2031-07-09", 0.0, 0.0, 3.5, 8.0, 1.65, 1.0),  # hot wind
    Spell("2031-07-10", "2031-07-16", 0.06, 1.5, 1.8, 2.4, 1.0, 0.4),
    Spell("2031-07-17", "2031-07-22", 0.55, 74.0, 0.0, -0.2, 0.9, -0.1),
    Spell("2031-07-23", "2031-07-23", 0.0, 0.0, 1.6, -0.8, 0.9, 0.2),  # warm air comes back
    Spell("2031-07-24", "2031-07-28", 0.06, 0.8, 1.5, -0.5, 0.6, 0.3),  # the episode, days set below
    Spell("2031-07-29", "2031-07-29", 0.95, 17.0, -2.5, 0.5, 1.8, -0.9),  # cool front
    Spell("2031-07-30", "2031-08-01", 0.02, 0.0, -4.0, 1.6, 1.3, 0.9),
    Spell("2031-08-02", "2031-08-31", 0.34, 108.0, -0.4, -0.2, 0.95, 0.0),
    Spell("2031-09-01", "2031-10-01", 0.27, 70.0, 0.3, 0.0, 1.0, 0.1),
)


class Episode(NamedTuple):
    """A day of the humid episode, at the middle of the basin and 400 m."""

    date: str
    dew_point_morning_c: float
    dew_point_afternoon_c: float
    t_min_c: float
    t_max_c: float
    clearness: float
    u2_m_s: float


EPISODE = (
    Episode("2031-07-24", 21.4, 23.9, 22.0, 31.2, 0.90, 1.5),
    Episode("2031-07-25", 21.9, 24.5, 22.4, 31.9, 0.92, 1.3),
    Episode("2031-07-26", 22.4, 25.0, 22.9, 32.4, 0.93, 1.1),
    Episode("2031-07-27", 22.8, 25.6, 23.3, 32.9, 0.91, 1.2),
    Episode("2031-07-28", 23.1, 25.7, 23.7, 32.6, 0.84, 1.6),
)


class Weather(NamedTuple):
    """The air as it was: arrays (day, place)."""

    t_max_c: np.ndarray
    t_min_c: np.ndarray
    dew_point_morning_c: np.ndarray
    dew_point_afternoon_c: np.ndarray
    rs_mj_m2_d: np.ndarray
    clearness: np.ndarray
    u2_m_s: np.ndarray
    rain_mm: np.ndarray

    @property
    def dew_point_c(self) -> np.ndarray:
        """Daily mean."""
        return 0.5 * (self.dew_point_morning_c + self.dew_point_afternoon_c)

    @property
    def rh_max_pct(self) -> np.ndarray:
        """At sunrise."""
        e = humidity.saturation_vapour_pressure(self.dew_point_morning_c)
        return np.minimum(100.0 * e / humidity.saturation_vapour_pressure(self.t_min_c), 100.0)

    @property
    def rh_min_pct(self) -> np.ndarray:
        """In the afternoon."""
        e = humidity.saturation_vapour_pressure(self.dew_point_afternoon_c)
        return 100.0 * e / humidity.saturation_vapour_pressure(self.t_max_c)


def _by_day(name: str) -> np.ndarray:
    """A column of the spells for every day, shape (day, 1)."""
    values = np.full(len(DATES), np.nan)
    for spell in SPELLS:
        inside = spell.days()
        values[inside] = getattr(spell, name)
    return values[:, None]


def season(km: np.ndarray, latitude_deg: np.ndarray, elevation_m: np.ndarray, seed: int = SEED) -> Weather:
    """Weather of all days at the given places.

    Parameters
    ----------
    km : ndarray, shape (place, 2)
        East and north, for the likeness of near places.
    latitude_deg, elevation_m : ndarray, shape (place,)
    seed : int

    Returns
    -------
    Weather
    """
    n_days = len(DATES)
    day = solar.day_of_year(DATES)[:, None]
    summer = np.cos(2.0 * np.pi * (day - 202.0) / 365.0)  # 1 in late July
    rain, wetness = _rain(km, summer, seed)
    wet = rain >= 0.5

    bright = 0.80 * field(14, km, n_days, 300.0, 0.35, seed) - 0.60 * wetness + _by_day("clearer")
    share = ndtr(bright)
    clearness = np.where(wet, 0.20 + 0.62 * share, 1.01 - 0.60 * (1.0 - share) ** 2)
    clearness = np.clip(clearness - 0.004 * np.minimum(rain, 40.0), 0.12, 1.0)

    spread = 3.1 - 1.0 * np.clip(summer, 0.0, 1.0)
    mean = 10.4 + 13.9 * summer + _by_day("warmer_c") + spread * field(11, km, n_days, 700.0, 0.72, seed)
    mean = mean + 0.45 * field(12, km, n_days, 80.0, 0.2, seed) - 0.8 * wet
    mean = mean - 0.006 * (elevation_m - 400.0) - 0.7 * (latitude_deg - 41.75)
    swing = 4.4 + 9.0 * clearness + 0.30 * np.clip(_by_day("drier_c"), 0.0, 5.0)
    t_max, t_min = mean + 0.5 * swing, mean - 0.5 * swing

    moist = 0.85 * field(13, km, n_days, 500.0, 0.6, seed) + 0.4 * wetness
    below = 1.6 - 0.9 * np.clip(summer, 0.0, 1.0) + _by_day("drier_c") - 1.3 * moist
    below = np.clip(np.where(wet, np.minimum(below, 0.9), below), 0.2, None)
    dew_morning = t_min - below
    grown = 1.0 / (1.0 + np.exp(-(day - 172.0) / 9.0)) * (1.0 - 0.6 / (1.0 + np.exp(-(day - 248.0) / 9.0)))
    rise = 0.2 + 1.5 * grown * clearness - 0.30 * below + 0.7 * field(16, km, n_days, 400.0, 0.2, seed)
    dew_afternoon = np.minimum(dew_morning + rise, t_max - 1.5)

    u2 = 2.75 - 0.75 * summer + 0.25 * np.cos(2.0 * np.pi * (day - 100.0) / 365.0)
    u2 = u2 * _by_day("windier") * np.exp(0.33 * field(15, km, n_days, 350.0, 0.4, seed) - 0.05)
    parts = [t_max, t_min, dew_morning, dew_afternoon, clearness, np.clip(u2, 0.6, 6.5)]
    parts = _episode(parts, km, elevation_m, seed)
    t_max, t_min, dew_morning, dew_afternoon, clearness, u2 = parts
    rs = clearness * _clear_sky(latitude_deg, elevation_m, day, dew_morning, km, seed)
    return Weather(t_max, t_min, dew_morning, dew_afternoon, rs, clearness, u2, rain)


def _rain(km: np.ndarray, summer: np.ndarray, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Rain, and the noise behind it: broad in spring and autumn, in patches in summer."""
    n_days = len(DATES)
    patchy = 0.12 + 0.16 * np.clip(summer, 0.0, 1.0)
    wetness = np.sqrt(1.0 - patchy) * field(17, km, n_days, 700.0, 0.22, seed)
    wetness = wetness + np.sqrt(patchy) * field(18, km, n_days, 70.0, 0.0, seed)
    share = _by_day("wet_share")
    excess = np.maximum(wetness - ndtri(1.0 - np.clip(share, 1e-9, 1.0)), 0.0)
    rain = np.minimum(excess, 1.5) ** 1.05 * np.exp(0.30 * field(19, km, n_days, 90.0, 0.0, seed))
    for spell in SPELLS:
        inside = spell.days()
        total = rain[inside].sum(axis=0)
        rain[inside] *= np.sqrt(total.mean() / np.maximum(total, 1e-9)) if len(total) > 1 else 1.0  # no place left out
        total = rain[inside].sum(axis=0).mean()
        rain[inside] *= spell.rain_mm / total if total > 0.0 else 0.0
    return np.where(rain < 0.2, 0.0, rain), wetness


def _episode(parts: list[np.ndarray], km: np.ndarray, elevation_m: np.ndarray, seed: int) -> list[np.ndarray]:
    """Set the days of the humid episode: its own course, a little moister and lower to the east."""
    n_days = len(DATES)
    east = (km[:, 0] - km[:, 0].mean()) / 150.0
    lower = 0.004 * (400.0 - elevation_m)
    t_max, t_min, morning, afternoon, clearness, u2 = (part.copy() for part in parts)
    warm, moist, breeze = (field(purpose, km, n_days, 200.0, 0.5, seed) for purpose in (21, 22, 23))
    for row in EPISODE:
        d = int(np.flatnonzero(np.datetime64(row.date) == DATES)[0])
        t_max[d] = row.t_max_c + lower + 0.40 * warm[d]
        morning[d] = np.clip(row.dew_point_morning_c + 0.15 * east + 0.20 * moist[d], 21.0, 23.5)
        t_min[d] = morning[d] + (row.t_min_c - row.dew_point_morning_c) + 0.15 * np.abs(warm[d])
        afternoon[d] = np.clip(row.dew_point_afternoon_c + 0.25 * east + 0.30 * moist[d], 23.4, 26.1)
        clearness[d] = np.clip(row.clearness + 0.03 * breeze[d], 0.70, 1.0)
        u2[d] = row.u2_m_s * np.exp(0.12 * breeze[d])
    return [t_max, t_min, morning, afternoon, clearness, u2]


def _clear_sky(
    latitude_deg: np.ndarray,
    elevation_m: np.ndarray,
    day: np.ndarray,
    dew_point_c: np.ndarray,
    km: np.ndarray,
    seed: int,
) -> np.ndarray:
    """Clear-sky radiation with the day's vapour and a turbidity that comes and goes. [MJ m-2 d-1]"""
    turbidity = np.clip(TURBIDITY + 0.025 * field(20, km, len(DATES), 800.0, 0.6, seed), 0.65, 0.95)
    vapour = humidity.saturation_vapour_pressure(dew_point_c)
    pressure = humidity.pressure_from_elevation(elevation_m)
    return solar.clear_sky_radiation_humid(latitude_deg, day, pressure, vapour, turbidity)


def wind_at(height_m: float, u2_m_s: np.ndarray) -> np.ndarray:
    """Wind at a sensor's height from that at 2 m (FAO-56 eq. 47 turned round). [m/s]"""
    return u2_m_s * np.log(67.8 * height_m - 5.42) / 4.87


def sunshine_hours(clearness: np.ndarray, latitude_deg: float) -> np.ndarray:
    """Bright sunshine of days: 0.93 of the daylight when clear, none when the clearness is under 0.22. [h]"""
    daylight = solar.daylight_hours(latitude_deg, solar.day_of_year(DATES))
    return daylight * np.clip(0.93 * (clearness - 0.22) / 0.78, 0.0, 0.93)


def table(values: dict[str, np.ndarray], station_id: str, first: str = FIRST, last: str = LAST) -> pd.DataFrame:
    """Weather rows of one station from columns over all days."""
    frame = pd.DataFrame({"station_id": station_id, "date": DATES.astype("datetime64[ns]"), **values})
    return frame[(frame["date"] >= first) & (frame["date"] <= last)].reset_index(drop=True)
