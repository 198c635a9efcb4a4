"""Hourly reference evapotranspiration: FAO-56 and ASCE-EWRI.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), Crop evapotranspiration, FAO Irrigation and Drainage Paper 56.
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from etflux import humidity, solar
from etflux.reference.daily import SURFACES
from etflux.reference.radiation import (
    STEFAN_BOLTZMANN_HOUR,
    STEFAN_BOLTZMANN_HOUR_EWRI,
    net_longwave_hourly,
    net_shortwave,
    share_of_clear_sky,
)

Method = Literal["fao56", "asce_short", "asce_tall"]

LOW_SUN_RAD = 0.3  # below it [EWRI2005] keeps the cloudiness of the hour before


def _array(values: ArrayLike) -> np.ndarray:
    return np.asarray(values, dtype=float)


def et_hourly(
    t_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rn_mj_m2_h: ArrayLike,
    u2_m_s: ArrayLike,
    pressure_kpa: ArrayLike,
    method: Method = "fao56",
) -> np.ndarray:
    """Reference evapotranspiration of an hour from its terms; with net radiation above 0 it counts as day.

    Parameters
    ----------
    t_c, vapour_pressure_kpa : array_like
        Mean temperature [degC] and vapour pressure [kPa] of the hour.
    rn_mj_m2_h : array_like
        Net radiation. [MJ m-2 h-1]
    u2_m_s, pressure_kpa : array_like
        Wind at 2 m [m s-1] and air pressure [kPa].
    method : {"fao56", "asce_short", "asce_tall"}
        "fao56" has one denominator day and night, the others one each.

    Returns
    -------
    ndarray
        May be below 0 at night. [mm h-1]

    References
    ----------
    .. [1] [FAO56] eq. 53 with eqs. 45 and 46; [EWRI2005] eq. 1 and table 1.
    """
    constants = SURFACES["tall" if method == "asce_tall" else "short"]
    rn, t, u2 = _array(rn_mj_m2_h), _array(t_c), _array(u2_m_s)
    by_day = rn > 0.0
    ground = np.where(by_day, constants.ground_day, constants.ground_night) * rn
    if method == "fao56":
        denominator = np.asarray(constants.denominator)
    else:
        denominator = np.where(by_day, constants.denominator_day, constants.denominator_night)
    slope = humidity.slope_of_saturation(t)
    gamma = humidity.psychrometric_constant(pressure_kpa)
    deficit = humidity.saturation_vapour_pressure(t) - _array(vapour_pressure_kpa)
    wind = gamma * constants.numerator_hour / (t + 273.0) * u2 * deficit
    return (0.408 * slope * (rn - ground) + wind) / (slope + gamma * (1.0 + denominator * u2))


def et_from_hours(
    t_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_mj_m2_h: ArrayLike,
    u2_m_s: ArrayLike,
    elevation_m: ArrayLike,
    latitude_deg: ArrayLike,
    day: ArrayLike,
    solar_hour: ArrayLike,
    method: Method = "fao56",
    first_ratio: float = 0.6,
) -> np.ndarray:
    """Reference evapotranspiration of consecutive hours from weather.

    Parameters
    ----------
    t_c, vapour_pressure_kpa, rs_mj_m2_h, u2_m_s : array_like, shape (hour, ...)
        Means of the hour [degC], [kPa], [m s-1] (wind as it is, no least value) and its solar radiation [MJ m-2 h-1];
        hours in order, none left out.
    elevation_m, latitude_deg : array_like
        Of the station. [m], [deg]
    day, solar_hour : array_like, broadcastable to (hour, ...)
        Day of the year and local solar time at the middle of the hour (:func:`etflux.solar.solar_from_clock`).
    method : {"fao56", "asce_short", "asce_tall"}
    first_ratio : float
        Rs/Rso of the night before the first afternoon: 0.4 to 0.6 in humid, 0.7 to 0.8 in arid climates.

    Returns
    -------
    ndarray, shape (hour, ...)
        May be below 0 at night. [mm h-1]

    References
    ----------
    .. [1] [FAO56] eq. 53, pp. 74-76, eqs. 28 and 37 to 40. The afternoon's Rs/Rso serves the night: of the hour whose
       middle is 0.52 to 0.79 rad before sunset.
    .. [2] [EWRI2005] eqs. 1, 44 and 45, table 1: with the sun lower than 0.3 rad the last ratio serves (from memory).
    """
    t_c, rs_mj_m2_h, solar_hour, day = np.broadcast_arrays(*map(_array, (t_c, rs_mj_m2_h, solar_hour, day)))
    omega = np.pi / 12.0 * (solar_hour - 12.0)
    sunset = solar.sunset_hour_angle(latitude_deg, day)
    ra = solar.extraterrestrial_radiation_hourly(latitude_deg, day, solar_hour)
    ratio = share_of_clear_sky(rs_mj_m2_h, solar.clear_sky_radiation(ra, elevation_m))
    if method == "fao56":
        sigma = STEFAN_BOLTZMANN_HOUR
        remember = (omega >= sunset - 0.79) & (omega <= sunset - 0.52)
        use = np.abs(omega) >= sunset
    else:
        sigma = STEFAN_BOLTZMANN_HOUR_EWRI
        remember = solar.sun_elevation(latitude_deg, day, solar_hour) >= LOW_SUN_RAD
        use = ~remember
    ratio = held_ratio(ratio, remember, use, first_ratio)
    rn = net_shortwave(rs_mj_m2_h) - net_longwave_hourly(t_c, vapour_pressure_kpa, ratio, sigma)
    return et_hourly(t_c, vapour_pressure_kpa, rn, u2_m_s, humidity.pressure_from_elevation(elevation_m), method)


def held_ratio(rs_over_rso: ArrayLike, remember: ArrayLike, use: ArrayLike, first_ratio: float = 0.6) -> np.ndarray:
    """Rs/Rso by the hour, hours of low or no sun taking an earlier one.

    Parameters
    ----------
    rs_over_rso : array_like, shape (hour, ...)
        Of consecutive hours.
    remember, use : array_like of bool, broadcastable
        Hours whose ratio is kept for later, and hours that take the kept one.
    first_ratio : float
        What is kept before the first hour to remember.

    Returns
    -------
    ndarray, shape (hour, ...)

    Examples
    --------
    >>> held_ratio([0.0, 0.7, 0.1, 0.0], [False, True, False, False], [True, False, False, True])
    array([0.6, 0.7, 0.1, 0.7])
    """
    ratio, keep, take = np.broadcast_arrays(_array(rs_over_rso), np.asarray(remember), np.asarray(use))
    if ratio.ndim == 0:  # a single hour
        return held_ratio(ratio[None], keep[None], take[None], first_ratio)[0]
    kept = np.full(ratio.shape[1:], first_ratio)
    result = np.empty(ratio.shape)
    for hour in range(ratio.shape[0]):
        kept = np.where(keep[hour], ratio[hour], kept)
        result[hour] = np.where(take[hour], kept, ratio[hour])
    return result
