"""The air above every county at the start of a day, and what of yesterday's tagged water is still in it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux import column, humidity, profiles
from etflux.airmass.inputs import AirInputs, Day
from etflux.profiles import Morning
from etflux.variables import flag_bits

if TYPE_CHECKING:
    from etflux.case import Settings

AIR = flag_bits("air")
FIRST_RESIDUAL_M = 1500.0  # before the first day; common practice, no source


@dataclass(frozen=True)
class Evening:
    """Mixing depth and highest temperature of a day, (row,): they make the next morning's residual layer."""

    depth_m: np.ndarray
    t_max_c: np.ndarray


def morning_of(inputs: AirInputs, day: Day, before: Evening | None, settings: Settings) -> Morning:
    """Profile or standard air of every row.

    Parameters
    ----------
    inputs : AirInputs
        For the morning's sites.
    day : Day
    before : Evening or None
        None on the first day.
    settings : Settings

    Returns
    -------
    Morning
    """
    if before is None:
        yesterday, residual = day.t_max_c, np.full(len(day.t_max_c), FIRST_RESIDUAL_M)
    else:
        yesterday = np.where(np.isnan(before.t_max_c), day.t_max_c, before.t_max_c)
        residual = np.where(np.isnan(before.depth_m), FIRST_RESIDUAL_M, before.depth_m - settings.residual_depth_less_m)
    residual = np.clip(residual, settings.residual_depth_low_m, settings.residual_depth_high_m)
    dew = day.dew_point_morning_c
    estimate = np.fmin(day.dew_point_c, day.t_min_c)
    free_air = np.where(np.isnan(day.t_max_mean_c), day.t_max_c, day.t_max_mean_c) + settings.free_air_above_c
    if settings.free_air == "fixed":
        free_air = np.full(len(free_air), settings.free_air_theta_c)
    standard = profiles.standard_profile(
        day.t_min_c, yesterday, residual, np.where(np.isnan(dew), estimate, dew), free_air, day.pressure_kpa, settings
    )
    sites = [site for site in inputs.sites if site.date == day.date]
    found = profiles.blend(
        sites, day.latitude_deg, day.longitude_deg, settings.profile_distance_km, standard, day.pressure_kpa,
        day.sunrise,
    )  # fmt: skip
    no_dew = np.isnan(dew) & ((found.flags & AIR["standard_profile"]) > 0)
    flags = found.flags | np.where(no_dew, AIR["estimated_dew_point"], 0)
    return Morning(found.theta_k, found.q_kg_kg, found.start_hour, flags, found.distance_km)


def background(inputs: AirInputs, day: int, settings: Settings) -> np.ndarray:
    """Humidity of air that no crop has moistened, one profile for the whole region, shape (layer,). [kg kg-1]"""
    given = np.nan if inputs.background_dew_point_c is None else inputs.background_dew_point_c[day]
    dew_point = settings.background_dew_point_c if np.isnan(given) else float(given)
    return profiles.background_humidity(np.array([np.mean(inputs.pressure_kpa)]), dew_point, settings)[0]


def kept_share(q_observed: np.ndarray, q_modelled: np.ndarray, floor: np.ndarray) -> np.ndarray:
    """Share of yesterday's air that is still there, layer by layer.

    Parameters
    ----------
    q_observed, q_modelled, floor : ndarray, shape (row, layer)
        Humidity of the morning, humidity that yesterday left, and its part that no crop has moistened.

    Returns
    -------
    ndarray, shape (row, layer)
        r = (q_obs - q_bg)/(q_mod - q_bg), 0 to 1; 0 where yesterday left nothing above the background. Tags times r
        stay below q_obs - q_bg where they were below q_mod - q_bg.
    """
    above = q_modelled - floor
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = np.where(above > 1e-12, (q_observed - floor) / above, 0.0)
    return np.clip(np.where(np.isnan(ratio), 0.0, ratio), 0.0, 1.0)


def replaced_share(kept: np.ndarray) -> np.ndarray:
    """Share of the lowest 1500 kg m-2 that other air has taken, shape (row,)."""
    low = column.EDGES[1:] <= 1500.0
    mass = column.LAYER_MASS[low]
    return 1.0 - (kept[:, low] * mass).sum(axis=1) / mass.sum()


def carries_model(day: Day, morning: Morning) -> np.ndarray:
    """Rows whose morning humidity is the modelled one: forecast days without any observation, shape (row,) bool."""
    standard = (morning.flags & AIR["standard_profile"]) > 0
    return day.forecast.astype(bool) & standard & np.isnan(day.dew_point_morning_c)


def dew_point_at_ground(morning: Morning, pressure_kpa: np.ndarray) -> np.ndarray:
    """Dew point of the lowest layer. [degC]"""
    return humidity.dew_point_from_specific_humidity(morning.q_kg_kg[:, 0], pressure_kpa)
