"""Radiation balance of the reference surface, its soil heat flux, and wind at 2 m.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), Crop evapotranspiration, FAO Irrigation and Drainage Paper 56.
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from etflux.humidity import KELVIN_OFFSET

STEFAN_BOLTZMANN_DAY = 4.903e-9  # MJ K-4 m-2 d-1, [FAO56] eq. 39
STEFAN_BOLTZMANN_DAY_EWRI = 4.901e-9  # [EWRI2005] eq. 17
STEFAN_BOLTZMANN_HOUR = 2.043e-10  # MJ K-4 m-2 h-1, [FAO56] p. 74
STEFAN_BOLTZMANN_HOUR_EWRI = 2.042e-10  # [EWRI2005] eq. 44
ALBEDO = 0.23  # [FAO56] eq. 38
LEAST_WIND_M_S = 0.5  # [FAO56] p. 63: buoyancy exchanges air even when the anemometer stands still
LEAST_CLEAR_SKY = 1e-6  # keeps Rs/Rso a number where the sun does not rise


def _array(values: ArrayLike) -> np.ndarray:
    return np.asarray(values, dtype=float)


def wind_at_2m(wind_m_s: ArrayLike, height_m: ArrayLike) -> np.ndarray:
    """Wind at 2 m over short grass from wind at another height.

    Parameters
    ----------
    wind_m_s : array_like
        Measured speed. [m s-1]
    height_m : array_like
        Height of the sensor, above 0.1; NaN results below. [m]

    Returns
    -------
    ndarray
        [m s-1]

    References
    ----------
    .. [1] [FAO56] eq. 47.

    Examples
    --------
    >>> wind_at_2m(3.2, 10.0).round(1).item()
    2.4
    """
    height = _array(height_m)
    height = np.where(height >= 0.1, height, np.nan)
    return _array(wind_m_s) * 4.87 / np.log(67.8 * height - 5.42)


def net_shortwave(rs: ArrayLike, albedo: ArrayLike = ALBEDO) -> np.ndarray:
    """Net solar radiation, in the unit of `rs`.  [FAO56] eq. 38."""
    return (1.0 - _array(albedo)) * _array(rs)


def cloudiness_factor(rs_over_rso: ArrayLike) -> np.ndarray:
    """Cloudiness factor of net longwave radiation, with 0.3 <= Rs/Rso <= 1.0, so 0.055 to 1.

    References
    ----------
    .. [1] [FAO56] eq. 39, upper limit p. 52, 0.3 for total cloud p. 75; [EWRI2005] eq. 18.
    """
    return 1.35 * np.clip(_array(rs_over_rso), 0.3, 1.0) - 0.35


def _grey(vapour_pressure_kpa: ArrayLike) -> np.ndarray:
    """Net emissivity of surface and humid air; NaN for a vapour pressure below 0."""
    e = _array(vapour_pressure_kpa)
    return 0.34 - 0.14 * np.sqrt(np.where(e >= 0.0, e, np.nan))


def _kelvin4(t_c: ArrayLike) -> np.ndarray:
    square = (_array(t_c) + KELVIN_OFFSET) ** 2
    return square * square


def net_longwave(
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_over_rso: ArrayLike,
    sigma: float = STEFAN_BOLTZMANN_DAY,
) -> np.ndarray:
    """Net outgoing longwave radiation of a day.

    Parameters
    ----------
    t_max_c, t_min_c : array_like
        [degC]
    vapour_pressure_kpa : array_like
        At least 0; NaN results below. [kPa]
    rs_over_rso : array_like
        Solar over clear-sky radiation; limited to 0.3 to 1.
    sigma : float
        Stefan-Boltzmann constant. [MJ K-4 m-2 d-1]

    Returns
    -------
    ndarray
        [MJ m-2 d-1]

    References
    ----------
    .. [1] [FAO56] eq. 39.
    """
    black = 0.5 * sigma * (_kelvin4(t_max_c) + _kelvin4(t_min_c))
    return black * _grey(vapour_pressure_kpa) * cloudiness_factor(rs_over_rso)


def net_longwave_hourly(
    t_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_over_rso: ArrayLike,
    sigma: float = STEFAN_BOLTZMANN_HOUR,
) -> np.ndarray:
    """Net outgoing longwave radiation of an hour. [MJ m-2 h-1]  [FAO56] eq. 39 and p. 74.

    At night give the Rs/Rso of the afternoon (:func:`etflux.reference.held_ratio`).
    """
    return sigma * _kelvin4(t_c) * _grey(vapour_pressure_kpa) * cloudiness_factor(rs_over_rso)


def share_of_clear_sky(rs: ArrayLike, rso: ArrayLike) -> np.ndarray:
    """Rs/Rso; 0 where neither the sun nor a clear sky gives anything (polar night)."""
    return _array(rs) / np.maximum(_array(rso), LEAST_CLEAR_SKY)


def net_radiation(
    rs_mj_m2_d: ArrayLike,
    rso_mj_m2_d: ArrayLike,
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    albedo: ArrayLike = ALBEDO,
    sigma: float = STEFAN_BOLTZMANN_DAY,
) -> np.ndarray:
    """Net radiation of a day.

    Parameters
    ----------
    rs_mj_m2_d, rso_mj_m2_d : array_like
        Solar and clear-sky radiation. [MJ m-2 d-1]
    t_max_c, t_min_c : array_like
        [degC]
    vapour_pressure_kpa : array_like
        [kPa]
    albedo : array_like
        0.23 for the grass reference.
    sigma : float
        Stefan-Boltzmann constant. [MJ K-4 m-2 d-1]

    Returns
    -------
    ndarray
        [MJ m-2 d-1]

    References
    ----------
    .. [1] [FAO56] eqs. 38 to 40.
    """
    outgoing = net_longwave(t_max_c, t_min_c, vapour_pressure_kpa, share_of_clear_sky(rs_mj_m2_d, rso_mj_m2_d), sigma)
    return net_shortwave(rs_mj_m2_d, albedo) - outgoing


def soil_heat_flux_month(t_before_c: ArrayLike, t_after_c: ArrayLike) -> np.ndarray:
    """Soil heat flux of a month from the mean temperatures before and after it. [MJ m-2 d-1]  [FAO56] eq. 43."""
    return 0.07 * (_array(t_after_c) - _array(t_before_c))


def soil_heat_flux_month_so_far(t_before_c: ArrayLike, t_month_c: ArrayLike) -> np.ndarray:
    """The same while the next month is not known, from its own mean. [MJ m-2 d-1]  [FAO56] eq. 44."""
    return 0.14 * (_array(t_month_c) - _array(t_before_c))
