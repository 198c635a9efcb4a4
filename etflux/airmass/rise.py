"""The observed rise of the dew point from morning to afternoon, and what makes it.

References
----------
.. [D74] Dyer (1974), A review of flux-profile relationships, Boundary-Layer Meteorol. 7, 363-372 (constants from
   memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from etflux.airmass.inputs import AirInputs
from etflux.airmass.march import Course, mean_below
from etflux.humidity import (
    FREEZING_K,
    GAS_CONSTANT_DRY,
    GRAVITY,
    HEAT_CAPACITY_AIR,
    dew_point_from_specific_humidity,
    latent_heat_of_vaporization,
)

KARMAN = 0.41
GRASS_M = 0.12  # height of the reference grass, over which wind is measured (FAO-56 p. 20)
ROUGHNESS_M, DISPLACEMENT_M = 0.123 * GRASS_M, 2.0 / 3.0 * GRASS_M
LEVEL_M = 2.0
SURFACE_LAYER = 0.1  # of the mixing depth: above it the air is mixed
SECONDS_PER_HOUR = 3600.0
BIAS_DAYS = 7
DEFAULT_U2_M_S = 2.0


def near_ground_excess(
    water_kg_m2_s: ArrayLike, sensible_w_m2: ArrayLike, u2_m_s: ArrayLike, depth_m: ArrayLike, t_c: ArrayLike,
    pressure_kpa: ArrayLike,
) -> np.ndarray:  # fmt: skip
    """Specific humidity at 2 m over that of the mixed layer.

    Parameters
    ----------
    water_kg_m2_s : array_like
        Evaporation. [kg m-2 s-1]
    sensible_w_m2 : array_like
        Sensible heat flux. [W m-2]
    u2_m_s : array_like
        Wind at 2 m over grass. [m s-1]
    depth_m : array_like
        Mixing depth. [m]
    t_c, pressure_kpa : array_like
        Of the air near the ground.

    Returns
    -------
    ndarray
        [kg kg-1]

    References
    ----------
    .. [1] Surface-layer similarity with the stability functions of [D74], from 2 m to a tenth of the depth.

    Examples
    --------
    350 W m-2 of latent heat, 100 W m-2 of sensible heat, 2 m/s:

    >>> near_ground_excess(350.0 / 2.44e6, 100.0, 2.0, 1200.0, 30.0, 98.0).round(4).item()
    0.0011
    """
    t_k = np.asarray(t_c, float) + FREEZING_K
    density = np.asarray(pressure_kpa, float) * 1000.0 / (GAS_CONSTANT_DRY * t_k)
    # Moist air is lighter: its buoyancy counts with the heat.
    evaporation = np.asarray(water_kg_m2_s, float)
    heat = np.asarray(sensible_w_m2, float) / HEAT_CAPACITY_AIR + 0.61 * t_k * evaporation
    u2 = np.maximum(np.asarray(u2_m_s, float), 0.5)
    top = np.maximum(SURFACE_LAYER * np.asarray(depth_m, float), 2.0 * LEVEL_M)
    z = LEVEL_M - DISPLACEMENT_M
    friction = KARMAN * u2 / np.log(z / ROUGHNESS_M)
    for _ in range(8):
        with np.errstate(divide="ignore", invalid="ignore"):
            inverse_length = -KARMAN * GRAVITY * heat / (density * t_k * friction**3)
        inverse_length = np.clip(inverse_length, -1.0, 0.2)
        drag = np.log(z / ROUGHNESS_M) - _psi_m(z * inverse_length) + _psi_m(ROUGHNESS_M * inverse_length)
        friction = KARMAN * u2 / np.maximum(drag, 1.0)
    between = np.log(top / z) - _psi_h(top * inverse_length) + _psi_h(z * inverse_length)
    return evaporation / (density * KARMAN * friction) * np.maximum(between, 0.0)


def _psi_m(zeta: np.ndarray) -> np.ndarray:
    """Stability function of wind [D74]."""
    x = (1.0 - 16.0 * np.minimum(zeta, 0.0)) ** 0.25
    unstable = 2.0 * np.log(0.5 * (1.0 + x)) + np.log(0.5 * (1.0 + x**2)) - 2.0 * np.arctan(x) + 0.5 * np.pi
    return np.where(zeta < 0.0, unstable, -5.0 * np.minimum(zeta, 1.0))


def _psi_h(zeta: np.ndarray) -> np.ndarray:
    """Stability function of heat and water [D74]."""
    x = (1.0 - 16.0 * np.minimum(zeta, 0.0)) ** 0.5
    return np.where(zeta < 0.0, 2.0 * np.log(0.5 * (1.0 + x)), -5.0 * np.minimum(zeta, 1.0))


def terms(inputs: AirInputs, course: Course, found: dict[str, np.ndarray], hour: int) -> dict[str, np.ndarray]:
    """Parts of the observed rise of one day, and how far the estimate of the afternoon was off, (row,). [degC]"""
    day, pressure = course.day, course.day.pressure_kpa

    def dew(q: np.ndarray) -> np.ndarray:
        return dew_point_from_specific_humidity(q, pressure)

    mass = course.depths.water[:, hour]
    before = mean_below(course.morning.q_kg_kg, mass[:, None])[:, 0]
    water = day.water_mm.sum(axis=1)
    with_water = before + water * course.energy.water_after[:, hour] / mass
    an_hour = np.diff(course.energy.water_share)[:, hour - 1] * water / SECONDS_PER_HOUR
    sensible = course.energy.used[:, hour - 1] * 1e6 / SECONDS_PER_HOUR  # the heat that mixes the layer, never below 0
    u2 = np.full(len(mass), DEFAULT_U2_M_S) if inputs.u2_m_s is None else inputs.u2_m_s[day.number]
    excess = near_ground_excess(an_hour, sensible, u2, found["mixing_depth_m"], found["theta_mixed_c"], pressure)
    mixed = found["humidity_mixed_g_kg"] / 1000.0
    afternoon = np.full(len(mass), np.nan)
    if inputs.dew_point_afternoon_c is not None:
        afternoon = inputs.dew_point_afternoon_c[day.number]
    morning = day.dew_point_morning_c
    parts = {
        "rise_mixing_c": dew(before) - morning,
        "rise_same_day_c": dew(with_water) - dew(before),
        "rise_near_ground_c": dew(mixed + excess) - dew(mixed),
    }
    observed = afternoon - morning
    known = np.isfinite(observed)
    other = observed - sum(parts.values())
    estimate = dew(mixed + excess)
    return {
        "rise_observed_c": observed,
        **{name: np.where(known, values, np.nan) for name, values in parts.items()},
        "rise_other_c": other,
        "estimate_error_c": estimate - afternoon,
        "le_hour_w_m2": an_hour * latent_heat_of_vaporization(day.t_max_c) * 1e6,
    }


def add_bias(found: dict[str, np.ndarray]) -> None:
    """Mean error of the estimate over the seven days before each, (day, county); NaN with under three of them."""
    error = found["estimate_error_c"]
    known = np.isfinite(error)
    total, count = (
        np.concatenate([np.zeros((1, error.shape[1])), np.cumsum(values, axis=0)])
        for values in (np.where(known, error, 0.0), known.astype(float))
    )
    day = np.arange(len(error))
    first = np.maximum(day - BIAS_DAYS, 0)
    number = count[day] - count[first]
    with np.errstate(invalid="ignore", divide="ignore"):
        found["estimate_bias_c"] = np.where(number >= 3, (total[day] - total[first]) / number, np.nan)
