"""The morning air: from observed profiles, or a standard one, to the column's layers.

A site's levels become functions of the mass of air above the ground, are made stable from the ground up, continued
above their top, and averaged over the layers. Counties take the sites around them by inverse distance.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux import humidity, solar
from etflux.column import EDGES, LAYER_MASS, saturation_humidity, virtual_theta
from etflux.humidity import FREEZING_K, GAS_CONSTANT_DRY, GRAVITY, KAPPA
from etflux.variables import flag_bits
from etflux.weather import great_circle_km

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings

LATEST_AFTER_SUNRISE_H = 3.0
LEAST_GRADIENT_K_KM = 3.0
LEAST_LEVELS = 5
AIR = flag_bits("air")


@dataclass(frozen=True)
class SiteProfile:
    """One morning profile on the column's layers; potential temperature refers to the pressure at its own ground."""

    site_id: str
    latitude_deg: float
    longitude_deg: float
    date: np.datetime64
    solar_hour: float
    theta_k: np.ndarray
    q_kg_kg: np.ndarray
    flags: int
    ground_kpa: float


@dataclass(frozen=True)
class Morning:
    """The air above every county at the start of a day, (county, layer), and where it comes from."""

    theta_k: np.ndarray
    q_kg_kg: np.ndarray
    start_hour: np.ndarray  # (county,), local solar time from which heat counts
    flags: np.ndarray  # (county,)
    distance_km: np.ndarray  # (county,), to the nearest site; NaN with a standard profile


def site_profiles(profiles: pd.DataFrame) -> list[SiteProfile]:
    """Every usable morning profile of a case.

    Parameters
    ----------
    profiles : DataFrame
        Table of a case; times in UTC, heights above the ground (or pressures), temperature, dew point or humidity.

    Returns
    -------
    list of SiteProfile
        Profiles later than 3 h after sunrise or before local midnight are left out, as are those with too few levels
        (``air_checks`` says so).
    """
    found: dict[tuple[str, np.datetime64], SiteProfile] = {}
    for (site_id, time), rows in groups(profiles):
        site = place(rows)
        if site is None:
            continue
        latitude, longitude = site
        date, hour = local_solar(time, longitude)
        levels, ground_kpa = _levels(rows)
        if len(levels) < LEAST_LEVELS or not is_morning(date, hour, latitude):
            continue
        theta, q, flags = _on_layers(levels)
        # Times are sorted: the later of two profiles of one morning stays.
        found[str(site_id), date] = SiteProfile(
            str(site_id), latitude, longitude, date, hour, theta, q, flags, ground_kpa
        )
    return list(found.values())


def groups(profiles: pd.DataFrame) -> Any:
    """Rows of each profile, with its site and time."""
    if not len(profiles):
        return []
    return profiles.groupby(["site_id", "time"], sort=True)


def place(rows: pd.DataFrame) -> tuple[float, float] | None:
    """Latitude and longitude of a profile: the first that its rows give."""
    known = rows[["latitude_deg", "longitude_deg"]].dropna() if "latitude_deg" in rows else rows.iloc[:0]
    return (float(known.iloc[0, 0]), float(known.iloc[0, 1])) if len(known) else None


def local_solar(time: Any, longitude_deg: float) -> tuple[np.datetime64, float]:
    """Local date and solar hour of a UTC time."""
    stamp = np.datetime64(time, "s")
    date = stamp.astype("datetime64[D]")
    hour = float((stamp - date).astype(int)) / 3600.0
    hour = float(solar.solar_from_clock(hour, solar.day_of_year(date), longitude_deg, 0.0))
    shift = int(np.floor(hour / 24.0))
    return date + np.timedelta64(shift, "D"), hour - 24.0 * shift


def is_morning(date: np.datetime64, hour: float, latitude_deg: float) -> bool:
    """Whether a profile of this local solar hour, counted from midnight, can start a day."""
    sunrise, _ = solar.sunrise_sunset(latitude_deg, solar.day_of_year(date))
    return hour <= float(sunrise) + LATEST_AFTER_SUNRISE_H


def _levels(rows: pd.DataFrame) -> tuple[np.ndarray, float]:
    """Mass above the ground, potential temperature and humidity of each level, rising, (level, 3); ground pressure."""

    def column(name: str) -> np.ndarray:
        return rows[name].to_numpy(float) if name in rows else np.full(len(rows), np.nan)

    t, height, pressure = column("temperature_c"), column("height_m"), column("pressure_kpa")
    rh = column("rh_mean_pct")
    e = humidity.vapour_pressure_from_dew_point(column("dew_point_c"))
    e = np.where(np.isnan(e), rh / 100.0 * humidity.saturation_vapour_pressure(t), e)
    by_height = np.isfinite(height).sum() >= np.isfinite(pressure).sum()
    order = np.argsort(height if by_height else -pressure, kind="stable")
    good = order[np.isfinite((height if by_height else pressure)[order] + t[order] + e[order])]
    if len(good) < 2:
        return np.empty((0, 3)), np.nan
    t, e, height, pressure = t[good], e[good], height[good], pressure[good]
    if by_height:
        elevation = float(np.nan_to_num(column("elevation_m")[0]))
        ground = pressure[0] if np.isfinite(pressure[0]) else float(humidity.pressure_from_elevation(elevation))
        pressure = _pressures(height, t, e, ground)
    keep = np.concatenate([[True], np.diff(pressure) < 0.0])
    t, e, pressure = t[keep], e[keep], pressure[keep]
    q = humidity.specific_humidity(e, pressure)
    theta = (t + FREEZING_K) * (pressure[0] / pressure) ** KAPPA
    mass = (pressure[0] - pressure) * 1000.0 / GRAVITY
    return np.stack([mass, theta, q], axis=1), float(pressure[0])


def _pressures(height: np.ndarray, t_c: np.ndarray, e_kpa: np.ndarray, ground_kpa: float) -> np.ndarray:
    """Pressure at heights, hypsometric from the ground up, virtual temperature from a first guess of pressure."""
    pressure = ground_kpa * np.exp(-(height - height[0]) / 8500.0)
    for _ in range(3):
        tv = (t_c + FREEZING_K) / (1.0 - 0.378 * e_kpa / pressure)
        middle = 0.5 * (tv[1:] + tv[:-1])
        steps = np.diff(height) * GRAVITY / (GAS_CONSTANT_DRY * middle)
        pressure = ground_kpa * np.exp(-np.concatenate([[0.0], np.cumsum(steps)]))
    return pressure


def layer_means(mass: np.ndarray, values: np.ndarray, edges: np.ndarray = EDGES) -> np.ndarray:
    """Means over layers of a quantity that is linear between levels, exact.

    Parameters
    ----------
    mass, values : ndarray, shape (level,)
        Levels by mass above the ground, rising, reaching from the ground beyond the last edge.
    edges : ndarray, shape (layer + 1,)

    Returns
    -------
    ndarray, shape (layer,)
    """
    x = np.union1d(edges, mass)
    y = np.interp(x, mass, values)
    integral = np.concatenate([[0.0], np.cumsum(0.5 * (y[1:] + y[:-1]) * np.diff(x))])
    return np.diff(np.interp(edges, x, integral)) / np.diff(edges)


def _on_layers(levels: np.ndarray) -> tuple[np.ndarray, np.ndarray, int]:
    """Layer means of a site's levels, stable and complete, with flags."""
    mass, theta, q = levels.T
    flags = 0
    if mass[-1] < EDGES[-1]:
        flags |= AIR["extended_profile"]
        mass, theta, q = _extended(mass, theta, q)
    theta, q = layer_means(mass, theta), layer_means(mass, q)
    stable_theta, stable_q = mixed_dry(theta, q)
    if not np.allclose(stable_theta, theta, rtol=0.0, atol=0.05):
        flags |= AIR["unstable_morning"]
    if np.any(np.diff(stable_q[EDGES[1:] < 3000.0]) > 5e-4):
        flags |= AIR["moist_above"]
    return stable_theta, stable_q, flags


def _extended(mass: np.ndarray, theta: np.ndarray, q: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Continue a profile above its top with its last stable gradient, at least 3 K/km; humidity halves upwards."""
    least = LEAST_GRADIENT_K_KM / 1000.0  # per kg m-2: about 1 kg m-3 up there
    gradients = np.diff(theta) / np.diff(mass)
    stable = gradients[gradients > 0.0]
    gradient = max(stable[-1], least) if len(stable) else least
    above = np.linspace(mass[-1], EDGES[-1] + 1.0, 12)[1:]
    return (
        np.append(mass, above),
        np.append(theta, theta[-1] + gradient * (above - mass[-1])),
        np.append(q, q[-1] * 0.5 ** ((above - mass[-1]) / 2500.0)),
    )


def mixed_dry(theta_k: np.ndarray, q_kg_kg: np.ndarray, mass: np.ndarray = LAYER_MASS) -> tuple[np.ndarray, np.ndarray]:
    """Mix unstable layers of one profile with what lies on them, from the ground up, until nothing is unstable.

    Heat and water are conserved.

    Parameters
    ----------
    theta_k, q_kg_kg, mass : ndarray, shape (layer,)

    Returns
    -------
    theta_k, q_kg_kg : ndarray, shape (layer,)
    """
    pools: list[list[float]] = []  # mass, heat, water, layers
    for theta, q, dm in zip(theta_k, q_kg_kg, mass, strict=True):
        pools.append([dm, theta * dm, q * dm, 1])
        while len(pools) > 1 and _pool_theta_v(pools[-2]) > _pool_theta_v(pools[-1]) + 1e-12:
            upper = pools.pop()
            pools[-1] = [a + b for a, b in zip(pools[-1], upper, strict=True)]
    repeat = [int(pool[3]) for pool in pools]
    return (
        np.repeat([pool[1] / pool[0] for pool in pools], repeat),
        np.repeat([pool[2] / pool[0] for pool in pools], repeat),
    )


def _pool_theta_v(pool: list[float]) -> float:
    return float(virtual_theta(pool[1] / pool[0], pool[2] / pool[0]))


def standard_profile(
    t_min_c: np.ndarray,
    t_max_before_c: np.ndarray,
    residual_depth_m: np.ndarray,
    dew_point_c: np.ndarray,
    free_air_c: np.ndarray,
    pressure_kpa: np.ndarray,
    settings: Settings,
) -> tuple[np.ndarray, np.ndarray]:
    """Morning air where no profile was taken.

    A stable layer from the night's lowest temperature up to the residual layer; the residual layer at yesterday's
    highest temperature less 1 K; a cap; the free air above. Humidity is the morning's up to the residual layer's top
    and halves upwards.

    Parameters
    ----------
    t_min_c, t_max_before_c : ndarray, shape (county,)
        Lowest temperature of the night, highest of yesterday. [degC]
    residual_depth_m : ndarray, shape (county,)
        [m]
    dew_point_c : ndarray, shape (county,)
        Of the morning. [degC]
    free_air_c : ndarray, shape (county,)
        Potential temperature of the free air at 1000 m. [degC]
    pressure_kpa : ndarray, shape (county,)
        At the ground. [kPa]
    settings : Settings

    Returns
    -------
    theta_k, q_kg_kg : ndarray, shape (county, layer)
    """
    z = _standard_heights(t_min_c, t_max_before_c, pressure_kpa)
    ground = t_min_c + FREEZING_K
    residual = np.maximum(t_max_before_c + FREEZING_K - 1.0, ground)
    depth = residual_depth_m[:, None]
    stable = ground[:, None] + (residual - ground)[:, None] * np.clip(z / settings.stable_layer_m, 0.0, 1.0)
    gradient = settings.free_air_theta_k_km / 1000.0
    free_at_depth = free_air_c + FREEZING_K + gradient * (residual_depth_m - 1000.0)
    cap = np.maximum(free_at_depth, residual + 0.5)[:, None]
    theta = np.where(z <= depth, stable, cap + gradient * (z - depth))
    q = humidity.specific_humidity(humidity.vapour_pressure_from_dew_point(dew_point_c), pressure_kpa)[:, None]
    return theta, q * 0.5 ** (np.maximum(z - depth, 0.0) / settings.humidity_scale_m)


def _standard_heights(t_min_c: np.ndarray, t_max_c: np.ndarray, pressure_kpa: np.ndarray) -> np.ndarray:
    """Heights of the layers' middles in air of the day's mean temperature falling 6.5 K/km, shape (county, layer)."""
    middle = 0.5 * (EDGES[:-1] + EDGES[1:])
    ratio = (pressure_kpa[:, None] - GRAVITY * middle / 1000.0) / pressure_kpa[:, None]
    lapse = 0.0065
    kelvin = 0.5 * (t_min_c + t_max_c)[:, None] + FREEZING_K
    return kelvin / lapse * (1.0 - ratio ** (GAS_CONSTANT_DRY * lapse / GRAVITY))


def background_humidity(pressure_kpa: np.ndarray, dew_point_c: float, settings: Settings) -> np.ndarray:
    """Humidity of air that no crop has moistened, of a dew point at the ground, shape (county, layer). [kg kg-1]"""
    e = humidity.vapour_pressure_from_dew_point(dew_point_c)
    ground = humidity.specific_humidity(e, pressure_kpa)[:, None]
    middle = 0.5 * (EDGES[:-1] + EDGES[1:])
    height = middle / 1.1  # near enough: about 1.1 kg m-3 in the lowest kilometres
    return ground * 0.5 ** (np.maximum(height - 1500.0, 0.0) / settings.humidity_scale_m)


def blend(
    sites: list[SiteProfile],
    latitude_deg: np.ndarray,
    longitude_deg: np.ndarray,
    within_km: float,
    standard: tuple[np.ndarray, np.ndarray],
    pressure_kpa: np.ndarray,
    sunrise: np.ndarray,
) -> Morning:
    """Sites of one morning blended by inverse distance; counties without one within reach take the standard profile.

    Parameters
    ----------
    sites : list of SiteProfile
        Of this date.
    latitude_deg, longitude_deg : ndarray, shape (county,)
    within_km : float
    standard : tuple of ndarray
        theta_k and q_kg_kg of the standard profile, (county, layer).
    pressure_kpa, sunrise : ndarray, shape (county,)

    Returns
    -------
    Morning
    """
    theta, q = standard[0].copy(), standard[1].copy()
    flags = np.full(len(latitude_deg), AIR["standard_profile"])
    start, distance = sunrise.copy(), np.full(len(latitude_deg), np.nan)
    if sites:
        km = great_circle_km(
            latitude_deg, longitude_deg, [site.latitude_deg for site in sites], [site.longitude_deg for site in sites]
        )
        weight = np.where(km <= within_km, 1.0 / np.maximum(km, 1.0), 0.0)
        near = weight.sum(axis=1) > 0.0
        weight = weight[near] / weight[near].sum(axis=1, keepdims=True)
        # The same air over higher ground: potential temperature referred to the county's own pressure.
        referred = (pressure_kpa[near, None] / np.array([site.ground_kpa for site in sites])) ** KAPPA
        theta[near] = (weight * referred) @ np.stack([site.theta_k for site in sites])
        q[near] = weight @ np.stack([site.q_kg_kg for site in sites])
        start[near] = np.maximum(start[near], weight @ np.array([site.solar_hour for site in sites]))
        of_sites = np.array([site.flags for site in sites])
        flags[near] = np.bitwise_or.reduce(np.where(weight > 0.0, of_sites, 0), axis=1)
        distance[near] = km[near].min(axis=1)
    limit = saturation_humidity(theta[:, 0], pressure_kpa)
    q[:, 0] = np.minimum(q[:, 0], limit)
    return Morning(theta, q, start, flags, distance)
