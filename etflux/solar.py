"""Where the sun is, what it sends to the top of the air and, of a clear day, to the ground.

Latitudes and longitudes in degrees (north and east positive), radiation in MJ m-2 d-1 or MJ m-2 h-1, hours as
decimal hours. Every function broadcasts and gives NaN where an input is NaN.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), Crop evapotranspiration, FAO Irrigation and Drainage Paper 56.
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation, appendix D.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

SOLAR_CONSTANT = 0.0820  # MJ m-2 min-1, [FAO56] eq. 21


def _array(values: ArrayLike) -> np.ndarray:
    return np.asarray(values, dtype=float)


def day_of_year(dates: ArrayLike) -> np.ndarray:
    """Day of the year, 1 on 1 January.

    Parameters
    ----------
    dates : array_like of datetime64

    Returns
    -------
    ndarray of float

    Examples
    --------
    >>> day_of_year(np.array(["2031-03-01", "2032-03-01"], "datetime64[D]"))
    array([60., 61.])
    """
    days = np.asarray(dates).astype("datetime64[D]")
    return (days - days.astype("datetime64[Y]").astype("datetime64[D]")).astype(float) + 1.0


def inverse_relative_distance(day: ArrayLike) -> np.ndarray:
    """Inverse relative distance Earth to Sun.  [FAO56] eq. 23."""
    return 1.0 + 0.033 * np.cos(2.0 * np.pi / 365.0 * _array(day))


def declination(day: ArrayLike) -> np.ndarray:
    """Solar declination. [rad]  [FAO56] eq. 24."""
    return 0.409 * np.sin(2.0 * np.pi / 365.0 * _array(day) - 1.39)


def sunset_hour_angle(latitude_deg: ArrayLike, day: ArrayLike) -> np.ndarray:
    """Hour angle of sunset: 0 in polar night, pi where the sun does not set. [rad]  [FAO56] eq. 25."""
    cosine = -np.tan(np.radians(_array(latitude_deg))) * np.tan(declination(day))
    return np.arccos(np.clip(cosine, -1.0, 1.0))


def daylight_hours(latitude_deg: ArrayLike, day: ArrayLike) -> np.ndarray:
    """Hours from sunrise to sunset. [h]  [FAO56] eq. 34."""
    return 24.0 / np.pi * sunset_hour_angle(latitude_deg, day)


def sunrise_sunset(latitude_deg: ArrayLike, day: ArrayLike) -> tuple[np.ndarray, np.ndarray]:
    """Sunrise and sunset in local solar time. [h]  From [FAO56] eq. 25."""
    half = 0.5 * daylight_hours(latitude_deg, day)
    return 12.0 - half, 12.0 + half


def extraterrestrial_radiation(latitude_deg: ArrayLike, day: ArrayLike) -> np.ndarray:
    """Daily radiation on a level plane above the air.

    Parameters
    ----------
    latitude_deg : array_like
        -90 to 90. [deg]
    day : array_like
        Day of the year, 1 to 366.

    Returns
    -------
    ndarray
        [MJ m-2 d-1]

    References
    ----------
    .. [1] [FAO56] eq. 21.

    Examples
    --------
    >>> extraterrestrial_radiation(-20.0, 246).round(1).item()
    32.2
    """
    phi, delta = np.radians(_array(latitude_deg)), declination(day)
    omega = sunset_hour_angle(latitude_deg, day)
    geometry = omega * np.sin(phi) * np.sin(delta) + np.cos(phi) * np.cos(delta) * np.sin(omega)
    return 24.0 * 60.0 / np.pi * SOLAR_CONSTANT * inverse_relative_distance(day) * geometry


def seasonal_correction(day: ArrayLike) -> np.ndarray:
    """Equation of time as the seasonal correction for solar time. [h]  [FAO56] eqs. 32 and 33."""
    b = 2.0 * np.pi * (_array(day) - 81.0) / 364.0
    return 0.1645 * np.sin(2.0 * b) - 0.1255 * np.cos(b) - 0.025 * np.sin(b)


def solar_from_clock(
    clock_hour: ArrayLike, day: ArrayLike, longitude_deg: ArrayLike, utc_offset_h: ArrayLike
) -> np.ndarray:
    """Local solar time of a local standard clock time.

    Parameters
    ----------
    clock_hour : array_like
        Local standard time (UTC when `utc_offset_h` is 0). [h]
    day : array_like
        Day of the year.
    longitude_deg : array_like
        East positive. [deg]
    utc_offset_h : array_like
        Local standard time minus UTC. [h]

    Returns
    -------
    ndarray
        May be below 0 or above 24 near midnight. [h]

    References
    ----------
    .. [1] [FAO56] eq. 31 (longitudes there are west positive).
    """
    meridian = 15.0 * _array(utc_offset_h)
    return _array(clock_hour) + (_array(longitude_deg) - meridian) / 15.0 + seasonal_correction(day)


def clock_from_solar(
    solar_hour: ArrayLike, day: ArrayLike, longitude_deg: ArrayLike, utc_offset_h: ArrayLike
) -> np.ndarray:
    """Local standard clock time of a local solar time, the inverse of :func:`solar_from_clock`. [h]"""
    return _array(solar_hour) - solar_from_clock(0.0, day, longitude_deg, utc_offset_h)


def sun_elevation(latitude_deg: ArrayLike, day: ArrayLike, solar_hour: ArrayLike) -> np.ndarray:
    """Height of the sun above the horizon, negative at night. [rad]  [FAO56] Annex 3 eq. 3-15."""
    phi, delta = np.radians(_array(latitude_deg)), declination(day)
    omega = np.pi / 12.0 * (_array(solar_hour) - 12.0)
    sine = np.sin(phi) * np.sin(delta) + np.cos(phi) * np.cos(delta) * np.cos(omega)
    return np.arcsin(np.clip(sine, -1.0, 1.0))


def _between(latitude_deg: ArrayLike, day: ArrayLike, first: np.ndarray, last: np.ndarray) -> np.ndarray:
    """Integral of the sine of the sun's elevation over an interval of hour angle, the sun being up."""
    phi, delta = np.radians(_array(latitude_deg)), declination(day)
    omega = sunset_hour_angle(latitude_deg, day)
    geometry = np.asarray(0.0)
    for turn in (-2.0 * np.pi, 0.0, 2.0 * np.pi):  # solar time may run past midnight
        a, b = np.clip(first + turn, -omega, omega), np.clip(last + turn, -omega, omega)
        part = (b - a) * np.sin(phi) * np.sin(delta) + np.cos(phi) * np.cos(delta) * (np.sin(b) - np.sin(a))
        geometry = geometry + np.maximum(part, 0.0)
    return geometry


def extraterrestrial_radiation_hourly(
    latitude_deg: ArrayLike, day: ArrayLike, solar_hour: ArrayLike, length_h: ArrayLike = 1.0
) -> np.ndarray:
    """Radiation above the air in a period of an hour or less.

    Parameters
    ----------
    latitude_deg, day : array_like
        Latitude [deg] and day of the year.
    solar_hour : array_like
        Local solar time at the middle of the period. [h]
    length_h : array_like
        Length of the period. [h]

    Returns
    -------
    ndarray
        Per period; 0 with the sun down. [MJ m-2 period-1]

    References
    ----------
    .. [1] [FAO56] eqs. 28 to 30; the period is cut at sunrise and sunset.
    """
    middle = np.pi / 12.0 * (_array(solar_hour) - 12.0)
    half = np.pi / 24.0 * _array(length_h)
    geometry = _between(latitude_deg, day, middle - half, middle + half)
    return 12.0 * 60.0 / np.pi * SOLAR_CONSTANT * inverse_relative_distance(day) * geometry


def day_share(latitude_deg: ArrayLike, day: ArrayLike, from_hour: ArrayLike, to_hour: ArrayLike) -> np.ndarray:
    """Share of the day's radiation that comes between two hours of local solar time.

    The shape is that of the radiation above the air, so the shares of a day's parts sum to 1; 0 in polar night.

    Parameters
    ----------
    latitude_deg, day : array_like
        Latitude [deg] and day of the year.
    from_hour, to_hour : array_like
        Local solar time. [h]

    Returns
    -------
    ndarray
        0 to 1.

    References
    ----------
    .. [1] [FAO56] eqs. 21 and 28.

    Examples
    --------
    >>> day_share(42.0, 200, [0.0, 12.0], [12.0, 24.0])
    array([0.5, 0.5])
    """
    first = np.pi / 12.0 * (_array(from_hour) - 12.0)
    last = np.pi / 12.0 * (_array(to_hour) - 12.0)
    whole = _between(latitude_deg, day, np.asarray(-np.pi), np.asarray(np.pi))
    part = _between(latitude_deg, day, first, last)
    return np.where(whole > 0.0, part / np.where(whole > 0.0, whole, 1.0), np.where(np.isnan(whole), np.nan, 0.0))


def clear_sky_radiation(ra_mj_m2_d: ArrayLike, elevation_m: ArrayLike) -> np.ndarray:
    """Clear-sky solar radiation from elevation alone. [MJ m-2 d-1]  [FAO56] eq. 37."""
    return (0.75 + 2.0e-5 * _array(elevation_m)) * _array(ra_mj_m2_d)


def mean_sun_elevation(latitude_deg: ArrayLike, day: ArrayLike) -> np.ndarray:
    """Mean height of the sun of a day, weighted by radiation, not below 0. [rad]  [FAO56] Annex 3 eq. 3-16."""
    phi = np.radians(_array(latitude_deg))
    swing = np.sin(2.0 * np.pi / 365.0 * _array(day) - 1.39)
    return np.maximum(0.85 + 0.3 * phi * swing - 0.42 * phi**2, 0.0)


def clear_sky_index(
    elevation_rad: ArrayLike,
    pressure_kpa: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    turbidity: ArrayLike = 1.0,
    form: Literal["ewri", "fao56"] = "ewri",
) -> np.ndarray:
    """Share of the radiation above the air that reaches the ground of a clear day or hour, direct and diffuse.

    Parameters
    ----------
    elevation_rad : array_like
        Height of the sun: :func:`mean_sun_elevation` for a day, :func:`sun_elevation` for an hour; taken as at
        least 0.05. [rad]
    pressure_kpa, vapour_pressure_kpa : array_like
        Air and vapour pressure at the station. [kPa]
    turbidity : array_like
        1.0 clean air, 0.5 or less extremely turbid.
    form : {"ewri", "fao56"}
        Coefficients of 2005 or the earlier ones of 1998.

    Returns
    -------
    ndarray
        0 to 1.

    References
    ----------
    .. [1] [EWRI2005] eqs. D.1 to D.4 (coefficients as quoted elsewhere, the report itself not seen).
    .. [2] [FAO56] Annex 3 eqs. 3-17 to 3-20.
    """
    sine = np.sin(np.maximum(_array(elevation_rad), 0.05))
    p = _array(pressure_kpa)
    path = (0.14 * _array(vapour_pressure_kpa) * p + 2.1) / sine
    water, slope = (0.075 * path**0.4, 0.36) if form == "ewri" else (0.091 * path**0.25, 0.33)
    direct = 0.98 * np.exp(-0.00146 * p / (_array(turbidity) * sine) - water)
    return direct + np.where(direct >= 0.15, 0.35 - slope * direct, 0.18 + 0.82 * direct)


def clear_sky_radiation_humid(
    latitude_deg: ArrayLike,
    day: ArrayLike,
    pressure_kpa: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    turbidity: ArrayLike = 1.0,
    form: Literal["ewri", "fao56"] = "ewri",
) -> np.ndarray:
    """Clear-sky solar radiation of a day with water vapour and turbidity.

    Parameters are those of :func:`clear_sky_index`, with latitude [deg] and day of the year.

    Returns
    -------
    ndarray
        [MJ m-2 d-1]

    References
    ----------
    .. [1] [EWRI2005] appendix D; [FAO56] Annex 3 eqs. 3-16 to 3-20.
    """
    elevation = mean_sun_elevation(latitude_deg, day)
    index = clear_sky_index(elevation, pressure_kpa, vapour_pressure_kpa, turbidity, form)
    return index * extraterrestrial_radiation(latitude_deg, day)


def radiation_from_sunshine(
    ra_mj_m2_d: ArrayLike, sunshine_h: ArrayLike, daylight_h: ArrayLike, a: float = 0.25, b: float = 0.50
) -> np.ndarray:
    """Solar radiation from bright sunshine hours. [MJ m-2 d-1]  [FAO56] eq. 35."""
    daylight = _array(daylight_h)
    share = np.clip(_array(sunshine_h) / np.where(daylight > 0.0, daylight, np.nan), 0.0, 1.0)
    share = np.where(daylight > 0.0, share, np.where(np.isnan(daylight), np.nan, 0.0))
    return (a + b * share) * _array(ra_mj_m2_d)


def radiation_from_temperature_range(
    ra_mj_m2_d: ArrayLike,
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    coefficient: ArrayLike = 0.16,
    clear_sky_mj_m2_d: ArrayLike = np.inf,
) -> np.ndarray:
    """Solar radiation from the day's temperature range, at most that of a clear sky.

    Parameters
    ----------
    ra_mj_m2_d : array_like
        Radiation above the air. [MJ m-2 d-1]
    t_max_c, t_min_c : array_like
        [degC]
    coefficient : array_like
        0.16 interior, 0.19 coast. [degC-0.5]
    clear_sky_mj_m2_d : array_like
        Upper limit. [MJ m-2 d-1]

    Returns
    -------
    ndarray
        [MJ m-2 d-1]

    References
    ----------
    .. [1] [FAO56] eq. 50 and p. 61 for the limit.
    """
    spread = np.sqrt(np.maximum(_array(t_max_c) - _array(t_min_c), 0.0))
    return np.minimum(_array(coefficient) * spread * _array(ra_mj_m2_d), _array(clear_sky_mj_m2_d))
