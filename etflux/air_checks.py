"""What can be said about profiles, mixing depths and winds before they are used.

Each fault is one finding at the cell that has it; faults that leave a number usable are warnings.
"""

from __future__ import annotations

import importlib.util
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.findings import Finding
from etflux.profiles import LEAST_LEVELS, groups, is_morning, local_solar, place

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case, Settings

FARTHEST_DEG = 360.0  # a longitude beyond it is none
LEAST_TOP_M = 1500.0
STEEPEST_FALL_K_KM = 12.0  # temperature: beyond it a level is doubtful, dry adiabatic is 9.8
HIGHEST_FIRST_LEVEL_M = 60.0
PRESSURE_KPA = (60.0, 110.0)  # the highest of a profile, that near the ground
WARMEST_C = 48.0
DAYLIGHT_HOURS = (6.0, 21.0)  # of a mixing depth, local solar time
FASTEST_M_S = 30.0  # of a boundary-layer wind; beyond it knots, mph or km/h are likelier
HEIGHT_M = (2.0, 3000.0)  # of a boundary-layer wind
WINDS_AGREE_M_S = 0.5


def check(case: Case) -> list[Finding]:
    """Findings on the tables that only the air uses.

    Parameters
    ----------
    case : Case

    Returns
    -------
    list of Finding
        By table, then by row.
    """
    return [
        *_extras(case.settings),
        *_profiles(case.table("profiles")),
        *_mixing_depths(case.table("mixing_depths"), case.settings),
        *_wind(case.table("wind")),
        *_at("background_air", case.table("background_air"), "row-repeated", "date",
             _repeated(case.table("background_air"), ["date"]), "background air"),
    ]  # fmt: skip


def _extras(settings: Settings) -> list[Finding]:
    if settings.air_cape and importlib.util.find_spec("metpy") is None:
        return [Finding("cape-not-installed", "settings", None, "air_cape", "yes")]
    return []


def _column(rows: pd.DataFrame, name: str) -> np.ndarray:
    return rows[name].to_numpy(float) if name in rows else np.full(len(rows), np.nan)


def _at(table: str, rows: pd.DataFrame, code: str, name: str, mask: np.ndarray, about: Any) -> list[Finding]:
    """One finding per row of the mask; `about` says who or when, the same for all or a function of the row."""
    found = []
    for k in np.flatnonzero(mask):
        value = rows[name].iloc[k] if name in rows else None
        value = None if value is None or value != value else (float(value) if isinstance(value, float) else value)
        subject = about(rows.iloc[k]) if callable(about) else about
        found.append(Finding(code, table, int(rows.index[k]), name, value, subject))
    return found


def _profiles(profiles: pd.DataFrame) -> list[Finding]:
    found: list[Finding] = []
    mornings: set[tuple[str, np.datetime64]] = set()
    for (site_id, time), rows in groups(profiles):
        about = f"site {site_id}, {str(time)[:16]} UTC"
        found += _site_and_time(str(site_id), time, rows, about, mornings)
        found += _levels(rows, about)
        found += _units(rows, about)
    return found


def _site_and_time(
    site_id: str, time: Any, rows: pd.DataFrame, about: str, mornings: set[tuple[str, np.datetime64]]
) -> list[Finding]:
    first = int(rows.index[0])
    site = place(rows)
    if site is None:
        return [Finding("profile-place", "profiles", first, "latitude_deg", None, about)]
    if abs(site[1]) > FARTHEST_DEG:  # out of range, said by the reader; it has no hour of the day
        return []
    date, hour = local_solar(time, site[1])
    shown = str(time)[:16]
    if not is_morning(date, hour, site[0]):
        return [Finding("profile-hour", "profiles", first, "time", shown, about, f"{hour:.1f} h local solar time")]
    if (site_id, date) in mornings:
        return [Finding("profile-repeated", "profiles", first, "time", shown, about)]
    mornings.add((site_id, date))
    return []


def _levels(rows: pd.DataFrame, about: str) -> list[Finding]:
    """Levels that are incomplete, out of order, too few, or impossible."""
    t, td, height, pressure, rh = (
        _column(rows, name) for name in ("temperature_c", "dew_point_c", "height_m", "pressure_kpa", "rh_mean_pct")
    )
    by_height = np.isfinite(height).sum() >= np.isfinite(pressure).sum()
    place_of, name = (height, "height_m") if by_height else (pressure, "pressure_kpa")
    no_place = ~(np.isfinite(height) | np.isfinite(pressure))
    found = _at("profiles", rows, "profile-level", name, no_place, about)
    found += _at("profiles", rows, "profile-humidity", "dew_point_c", ~(np.isfinite(td) | np.isfinite(rh)), about)
    found += _at("profiles", rows, "profile-dew-point", "dew_point_c", td > t + 0.05, about)
    upward = np.diff(place_of if by_height else -place_of, prepend=-np.inf)
    found += _at("profiles", rows, "profile-not-rising", name, upward <= 0.0, about)
    if len(rows) < LEAST_LEVELS or (by_height and np.nanmax(height, initial=0.0) < LEAST_TOP_M):
        first = int(rows.index[0])
        found.append(Finding("profile-short", "profiles", first, "site_id", None, about, f"{len(rows)} levels"))
    if by_height and len(rows) > 1 and np.nanmax(t, initial=-99.0) <= WARMEST_C:
        with np.errstate(invalid="ignore", divide="ignore"):
            fall = -np.diff(t, prepend=np.nan) / np.diff(height, prepend=np.nan) * 1000.0
        steep = (fall > STEEPEST_FALL_K_KM) & (np.diff(height, prepend=np.nan) > 50.0)
        found += _at("profiles", rows, "profile-unstable", "temperature_c", steep, about)
    return found


def _units(rows: pd.DataFrame, about: str) -> list[Finding]:
    """Heights above the sea, and pressures and temperatures in another unit than the heading's."""
    first = int(rows.index[0])
    found = []

    def suspect(code: str, name: str, value: float) -> None:
        found.append(Finding(code, "profiles", first, name, value, about))

    height, pressure, t = (_column(rows, name) for name in ("height_m", "pressure_kpa", "temperature_c"))
    if np.isfinite(height).any() and np.nanmin(height) > HIGHEST_FIRST_LEVEL_M:
        suspect("profile-above-sea", "height_m", float(np.nanmin(height)))
    if np.isfinite(pressure).any():
        lowest, highest = PRESSURE_KPA
        ground = float(np.nanmax(pressure))
        if not lowest <= ground <= highest:
            suspect("profile-pressure-unit", "pressure_kpa", ground)
    if np.nanmax(t, initial=-99.0) > WARMEST_C:
        suspect("profile-temperature-unit", "temperature_c", float(np.nanmax(t)))
    return found


def _mixing_depths(depths: pd.DataFrame, settings: Settings) -> list[Finding]:
    if not len(depths):
        return []

    def about(row: pd.Series) -> str:
        return f"{_county(row)}, {str(row['date'])[:10]}"

    depth, hour = _column(depths, "mixing_depth_m"), _column(depths, "hour")
    floor, stable = settings.depth_floor_m, settings.stable_layer_m
    early, late = DAYLIGHT_HOURS
    name = "mixing_depth_m"
    return [
        *_at("mixing_depths", depths, "depth-below-floor", name, depth < floor, about),
        *_at("mixing_depths", depths, "depth-below-stable-layer", name, (depth >= floor) & (depth < stable), about),
        *_at("mixing_depths", depths, "depth-hour", "hour", (hour < early) | (hour > late), about),
        *_at("mixing_depths", depths, "row-repeated", "date", _repeated(depths, ["county_id", "date"]), about),
    ]


def _wind(wind: pd.DataFrame) -> list[Finding]:
    if not len(wind):
        return []

    def about(row: pd.Series) -> str:
        part = row.get("day_part")
        return f"{_county(row)}, {str(row['date'])[:10]}" + (f", {part}" if isinstance(part, str) and part else "")

    speed, direction, u, v, height = (
        _column(wind, name) for name in ("wind_speed_m_s", "wind_from_deg", "u_m_s", "v_m_s", "height_m")
    )
    polar, plain = np.isfinite(speed) & np.isfinite(direction), np.isfinite(u) & np.isfinite(v)
    angle = np.radians(direction)
    with np.errstate(invalid="ignore"):
        apart = np.hypot(u + speed * np.sin(angle), v + speed * np.cos(angle)) > WINDS_AGREE_M_S
        strength = np.where(polar, speed, np.hypot(u, v))
        turned = (direction < 0.0) | (direction > 360.0)
        low = (height < HEIGHT_M[0]) | (height > HEIGHT_M[1])
    fast = "wind_speed_m_s" if "wind_speed_m_s" in wind else "u_m_s"
    return [
        *_at("wind", wind, "wind-incomplete", fast, ~(polar | plain), about),
        *_at("wind", wind, "wind-direction", "wind_from_deg", turned, about),
        *_at("wind", wind, "wind-twice", "u_m_s", polar & plain & apart, about),
        *_at("wind", wind, "wind-unit", fast, strength > FASTEST_M_S, about),
        *_at("wind", wind, "wind-height", "height_m", ~np.isfinite(height) | low, about),
        *_at("wind", wind, "row-repeated", "date", _repeated(wind, ["county_id", "date", "day_part"]), about),
    ]


def _county(row: pd.Series) -> str:
    return f"county {row['county_id']}" if isinstance(row["county_id"], str) and row["county_id"] else "all counties"


def _repeated(table: pd.DataFrame, keys: list[str]) -> np.ndarray:
    known = [name for name in keys if name in table]
    return table[known].fillna("").astype(str).duplicated().to_numpy()
