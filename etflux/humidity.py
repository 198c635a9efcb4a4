"""Water vapour in air: pressure, dew point, specific humidity, condensation level.

Every function takes scalars or arrays that broadcast, and gives NaN where an input is NaN. Temperatures are in
degrees Celsius, vapour and air pressure in kPa, specific humidity and mixing ratio in kg/kg
(results print g/kg).

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), Crop evapotranspiration, FAO Irrigation and Drainage Paper 56.
.. [Bolton1980] Bolton (1980), The computation of equivalent potential temperature, Mon. Wea. Rev. 108, 1046-1053.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

MOLAR_RATIO = 0.622  # water over dry air [FAO56] eq. 8
KELVIN_OFFSET = 273.16  # as [FAO56] writes it (p. 33); thermodynamics of moist air below uses 273.15
FREEZING_K = 273.15
KAPPA = 2.0 / 7.0  # R/cp of dry air
GRAVITY = 9.81
GAS_CONSTANT_DRY = 287.05  # J kg-1 K-1
HEAT_CAPACITY_AIR = 1004.7  # J kg-1 K-1, R / kappa


def _array(values: ArrayLike) -> np.ndarray:
    return np.asarray(values, dtype=float)


def saturation_vapour_pressure(t_c: ArrayLike) -> np.ndarray:
    """Saturation vapour pressure over water.

    Parameters
    ----------
    t_c : array_like
        Air temperature, -40 to 60. [degC]

    Returns
    -------
    ndarray
        [kPa]

    References
    ----------
    .. [1] [FAO56] eq. 11.

    Examples
    --------
    >>> saturation_vapour_pressure([15.0, 24.5]).round(3)
    array([1.705, 3.075])
    """
    t = _array(t_c)
    return 0.6108 * np.exp(17.27 * t / (t + 237.3))


def slope_of_saturation(t_c: ArrayLike) -> np.ndarray:
    """Slope of the saturation vapour pressure curve.

    Parameters
    ----------
    t_c : array_like
        Air temperature. [degC]

    Returns
    -------
    ndarray
        [kPa degC-1]

    References
    ----------
    .. [1] [FAO56] eq. 13.
    """
    t = _array(t_c)
    return 4098.0 * saturation_vapour_pressure(t) / (t + 237.3) ** 2


def pressure_from_elevation(elevation_m: ArrayLike) -> np.ndarray:
    """Mean air pressure at an elevation.

    Parameters
    ----------
    elevation_m : array_like
        Height above sea level. [m]

    Returns
    -------
    ndarray
        [kPa]

    References
    ----------
    .. [1] [FAO56] eq. 7.

    Examples
    --------
    >>> pressure_from_elevation(1800.0).round(1).item()
    81.8
    """
    return 101.3 * ((293.0 - 0.0065 * _array(elevation_m)) / 293.0) ** 5.26


def psychrometric_constant(pressure_kpa: ArrayLike) -> np.ndarray:
    """Psychrometric constant.

    Parameters
    ----------
    pressure_kpa : array_like
        Air pressure. [kPa]

    Returns
    -------
    ndarray
        [kPa degC-1]

    References
    ----------
    .. [1] [FAO56] eq. 8.
    """
    return 0.665e-3 * _array(pressure_kpa)


def vapour_pressure_from_dew_point(dew_point_c: ArrayLike) -> np.ndarray:
    """Actual vapour pressure from the dew point. [kPa]  [FAO56] eq. 14."""
    return saturation_vapour_pressure(dew_point_c)


def vapour_pressure_from_psychrometer(
    t_dry_c: ArrayLike, t_wet_c: ArrayLike, pressure_kpa: ArrayLike, coefficient: float = 0.000662
) -> np.ndarray:
    """Actual vapour pressure from dry and wet bulb.

    Parameters
    ----------
    t_dry_c, t_wet_c : array_like
        Dry and wet bulb temperature. [degC]
    pressure_kpa : array_like
        Air pressure. [kPa]
    coefficient : float
        0.000662 ventilated at 5 m/s, 0.0008 natural, 0.0012 indoors. [degC-1]

    Returns
    -------
    ndarray
        [kPa]

    References
    ----------
    .. [1] [FAO56] eqs. 15 and 16.
    """
    drop = _array(t_dry_c) - _array(t_wet_c)
    return saturation_vapour_pressure(t_wet_c) - coefficient * _array(pressure_kpa) * drop


def vapour_pressure_from_rh_max_min(
    t_max_c: ArrayLike, t_min_c: ArrayLike, rh_max_pct: ArrayLike, rh_min_pct: ArrayLike
) -> np.ndarray:
    """Actual vapour pressure from highest and lowest relative humidity. [kPa]  [FAO56] eq. 17."""
    at_min = saturation_vapour_pressure(t_min_c) * _array(rh_max_pct)
    at_max = saturation_vapour_pressure(t_max_c) * _array(rh_min_pct)
    return 0.5 * (at_min + at_max) / 100.0


def vapour_pressure_from_rh_max(t_min_c: ArrayLike, rh_max_pct: ArrayLike) -> np.ndarray:
    """Actual vapour pressure from highest relative humidity alone. [kPa]  [FAO56] eq. 18."""
    return saturation_vapour_pressure(t_min_c) * _array(rh_max_pct) / 100.0


def vapour_pressure_from_rh_mean(t_max_c: ArrayLike, t_min_c: ArrayLike, rh_mean_pct: ArrayLike) -> np.ndarray:
    """Actual vapour pressure from mean relative humidity. [kPa]  [FAO56] eq. 19."""
    return _array(rh_mean_pct) / 100.0 * mean_saturation_vapour_pressure(t_max_c, t_min_c)


def vapour_pressure_from_deficit(t_max_c: ArrayLike, t_min_c: ArrayLike, vpd_kpa: ArrayLike) -> np.ndarray:
    """Actual vapour pressure from the deficit, es - ea with es of eq. 12. [kPa]  [FAO56] eq. 12."""
    return mean_saturation_vapour_pressure(t_max_c, t_min_c) - _array(vpd_kpa)


def mean_saturation_vapour_pressure(t_max_c: ArrayLike, t_min_c: ArrayLike) -> np.ndarray:
    """Mean saturation vapour pressure of a day. [kPa]  [FAO56] eq. 12."""
    return 0.5 * (saturation_vapour_pressure(t_max_c) + saturation_vapour_pressure(t_min_c))


def dew_point(vapour_pressure_kpa: ArrayLike) -> np.ndarray:
    """Dew point, the exact inverse of the saturation curve.

    Parameters
    ----------
    vapour_pressure_kpa : array_like
        Above 0; NaN otherwise. [kPa]

    Returns
    -------
    ndarray
        [degC]

    References
    ----------
    .. [1] [FAO56] eq. 11 solved for temperature; Annex 3 eq. 3-11 is the same with rounded constants.

    Examples
    --------
    >>> dew_point(saturation_vapour_pressure(12.0)).round(6).item()
    12.0
    """
    e = _array(vapour_pressure_kpa)
    ratio = np.log(np.where(e > 0.0, e, np.nan) / 0.6108)
    return 237.3 * ratio / (17.27 - ratio)


def relative_humidity(vapour_pressure_kpa: ArrayLike, t_c: ArrayLike) -> np.ndarray:
    """Relative humidity over water. [%]  [FAO56] eq. 10."""
    return 100.0 * _array(vapour_pressure_kpa) / saturation_vapour_pressure(t_c)


def latent_heat_of_vaporization(t_c: ArrayLike) -> np.ndarray:
    """Latent heat of vaporization.

    Parameters
    ----------
    t_c : array_like
        Temperature. [degC]

    Returns
    -------
    ndarray
        [MJ kg-1]

    References
    ----------
    .. [1] [FAO56] Annex 3 eq. 3-1, after Harrison (1963).

    Examples
    --------
    >>> latent_heat_of_vaporization(20.0).round(4).item()
    2.4538
    """
    return 2.501 - 2.361e-3 * _array(t_c)


def mixing_ratio(vapour_pressure_kpa: ArrayLike, pressure_kpa: ArrayLike) -> np.ndarray:
    """Mass of water vapour over mass of dry air. [kg kg-1]  From Dalton's law, ratio of molar masses 0.622."""
    e = _array(vapour_pressure_kpa)
    return MOLAR_RATIO * e / (_array(pressure_kpa) - e)


def specific_humidity(vapour_pressure_kpa: ArrayLike, pressure_kpa: ArrayLike) -> np.ndarray:
    """Mass of water vapour over mass of moist air.

    Parameters
    ----------
    vapour_pressure_kpa, pressure_kpa : array_like
        Vapour and air pressure. [kPa]

    Returns
    -------
    ndarray
        [kg kg-1]

    References
    ----------
    .. [1] Dalton's law with the ratio of molar masses 0.622.
    """
    e = _array(vapour_pressure_kpa)
    return MOLAR_RATIO * e / (_array(pressure_kpa) - (1.0 - MOLAR_RATIO) * e)


def vapour_pressure_from_specific_humidity(q_kg_kg: ArrayLike, pressure_kpa: ArrayLike) -> np.ndarray:
    """Vapour pressure of a specific humidity, the inverse of :func:`specific_humidity`. [kPa]"""
    q = _array(q_kg_kg)
    return q * _array(pressure_kpa) / (MOLAR_RATIO + (1.0 - MOLAR_RATIO) * q)


def dew_point_from_specific_humidity(q_kg_kg: ArrayLike, pressure_kpa: ArrayLike) -> np.ndarray:
    """Dew point of a specific humidity; NaN where it is not above 0. [degC]"""
    return dew_point(vapour_pressure_from_specific_humidity(q_kg_kg, pressure_kpa))


def potential_temperature(t_c: ArrayLike, pressure_kpa: ArrayLike, reference_kpa: ArrayLike = 100.0) -> np.ndarray:
    """Potential temperature referred to `reference_kpa`. [degC]  Poisson's equation with R/cp = 2/7."""
    ratio = (_array(reference_kpa) / _array(pressure_kpa)) ** KAPPA
    return (_array(t_c) + FREEZING_K) * ratio - FREEZING_K


def virtual_temperature(t_c: ArrayLike, q_kg_kg: ArrayLike) -> np.ndarray:
    """Virtual temperature (or virtual potential temperature, given a potential one).

    Parameters
    ----------
    t_c : array_like
        Temperature. [degC]
    q_kg_kg : array_like
        Specific humidity. [kg kg-1]

    Returns
    -------
    ndarray
        [degC]

    References
    ----------
    .. [1] Tv = T (1 + 0.608 q), from the ratio of molar masses 0.622.
    """
    kelvin = _array(t_c) + FREEZING_K
    return kelvin * (1.0 + (1.0 / MOLAR_RATIO - 1.0) * _array(q_kg_kg)) - FREEZING_K


def condensation_temperature(t_c: ArrayLike, dew_point_c: ArrayLike) -> np.ndarray:
    """Temperature at the lifting condensation level; saturated air is there already. [degC]  [Bolton1980] eq. 15."""
    t = _array(t_c) + FREEZING_K
    td = np.minimum(_array(dew_point_c) + FREEZING_K, t)
    return 1.0 / (1.0 / (td - 56.0) + np.log(t / td) / 800.0) + 56.0 - FREEZING_K


def condensation_pressure(t_c: ArrayLike, dew_point_c: ArrayLike, pressure_kpa: ArrayLike) -> np.ndarray:
    """Pressure at the lifting condensation level. [kPa]  [Bolton1980] eq. 15 and Poisson's equation."""
    at_level = condensation_temperature(t_c, dew_point_c) + FREEZING_K
    return _array(pressure_kpa) * (at_level / (_array(t_c) + FREEZING_K)) ** (1.0 / KAPPA)


def condensation_level(t_c: ArrayLike, dew_point_c: ArrayLike, pressure_kpa: ArrayLike = 101.3) -> np.ndarray:
    """Height of the lifting condensation level above the parcel.

    Parameters
    ----------
    t_c, dew_point_c : array_like
        Temperature and dew point of the parcel. [degC]
    pressure_kpa : array_like
        Its pressure, which matters little: a quarter less makes 0.3 % of the height. [kPa]

    Returns
    -------
    ndarray
        At least 0. [m]

    References
    ----------
    .. [1] [Bolton1980] eq. 15; height along the dry adiabat of moist air, g / cp (1 + 0.84 q) per metre (the factor
       from memory, Stull 1988).
    """
    drop = _array(t_c) - condensation_temperature(t_c, dew_point_c)
    q = specific_humidity(saturation_vapour_pressure(dew_point_c), pressure_kpa)
    return drop * HEAT_CAPACITY_AIR * (1.0 + 0.84 * q) / GRAVITY
