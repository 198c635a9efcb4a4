"""Net radiation and reference evapotranspiration, daily and hourly, and second opinions by other methods.

Shapes broadcast; daily arrays are (day, station). NaN where an input is NaN.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), Crop evapotranspiration, FAO Irrigation and Drainage Paper 56.
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation.
"""

from __future__ import annotations

from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from etflux import humidity, solar

Surface = Literal["short", "tall"]

STEFAN_BOLTZMANN_DAY = 4.903e-9  # MJ K-4 m-2 d-1, [FAO56] eq. 39
STEFAN_BOLTZMANN_DAY_EWRI = 4.901e-9  # [EWRI2005] eq. 17
STEFAN_BOLTZMANN_HOUR = 2.043e-10  # MJ K-4 m-2 h-1, [FAO56] p. 74
STEFAN_BOLTZMANN_HOUR_EWRI = 2.042e-10  # [EWRI2005] eq. 44
ALBEDO = 0.23  # [FAO56] eq. 38
LEAST_WIND_M_S = 0.5  # [FAO56] p. 63

# Days in a block: a block of some thousand stations then stays in the processor's cache.
BLOCK_VALUES = 24_000


class _Surface(NamedTuple):
    """Constants of [EWRI2005] table 1; hourly ones by day and night."""

    numerator: float
    denominator: float
    numerator_hour: float
    denominator_day: float
    denominator_night: float
    ground_day: float
    ground_night: float


SURFACES: dict[str, _Surface] = {
    "short": _Surface(900.0, 0.34, 37.0, 0.24, 0.96, 0.1, 0.5),
    "tall": _Surface(1600.0, 0.38, 66.0, 0.25, 1.7, 0.04, 0.2),
}


def _array(values: ArrayLike) -> np.ndarray:
    return np.asarray(values, dtype=float)


def wind_at_2m(wind_m_s: ArrayLike, height_m: ArrayLike) -> np.ndarray:
    """Wind at 2 m over short grass from wind at another height.

    Parameters
    ----------
    wind_m_s : array_like
        Measured speed. [m s-1]
    height_m : array_like
        Height of the sensor, above 0.1. [m]

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
    return _array(wind_m_s) * 4.87 / np.log(67.8 * _array(height_m) - 5.42)


def net_shortwave(rs: ArrayLike, albedo: ArrayLike = ALBEDO) -> np.ndarray:
    """Net solar radiation, in the unit of `rs`.  [FAO56] eq. 38."""
    return (1.0 - _array(albedo)) * _array(rs)


def cloudiness_factor(rs_over_rso: ArrayLike) -> np.ndarray:
    """Cloudiness factor of net longwave radiation, with 0.3 <= Rs/Rso <= 1.0.

    References
    ----------
    .. [1] [FAO56] eq. 39; limits p. 52 and [EWRI2005] eq. 18.
    """
    return 1.35 * np.clip(_array(rs_over_rso), 0.3, 1.0) - 0.35


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
        [kPa]
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
    return black * (0.34 - 0.14 * np.sqrt(_array(vapour_pressure_kpa))) * cloudiness_factor(rs_over_rso)


def _kelvin4(t_c: ArrayLike) -> np.ndarray:
    square = (_array(t_c) + humidity.KELVIN_OFFSET) ** 2
    return square * square


def _share_of_clear_sky(rs: ArrayLike, rso: ArrayLike) -> np.ndarray:
    """Rs/Rso, 1 where no clear-sky radiation comes (polar night)."""
    clear = _array(rso)
    return np.where(clear == 0.0, 1.0, _array(rs) / np.where(clear == 0.0, 1.0, clear))


def net_radiation(
    rs_mj_m2_d: ArrayLike,
    rso_mj_m2_d: ArrayLike,
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    albedo: ArrayLike = ALBEDO,
    sigma: float = STEFAN_BOLTZMANN_DAY,
) -> np.ndarray:
    """Daily net radiation of the surface. [MJ m-2 d-1]  [FAO56] eqs. 38 to 40."""
    outgoing = net_longwave(t_max_c, t_min_c, vapour_pressure_kpa, _share_of_clear_sky(rs_mj_m2_d, rso_mj_m2_d), sigma)
    return net_shortwave(rs_mj_m2_d, albedo) - outgoing


def soil_heat_flux_month(t_before_c: ArrayLike, t_month_c: ArrayLike) -> np.ndarray:
    """Soil heat flux of a month from its own and the month before's mean temperature. [MJ m-2 d-1]  [FAO56] eq. 44."""
    return 0.14 * (_array(t_month_c) - _array(t_before_c))


def penman_monteith(
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rn_mj_m2_d: ArrayLike,
    u2_m_s: ArrayLike,
    pressure_kpa: ArrayLike,
    g_mj_m2_d: ArrayLike = 0.0,
    surface: Surface = "short",
) -> np.ndarray:
    """Daily reference evapotranspiration from its terms.

    Parameters
    ----------
    t_max_c, t_min_c : array_like
        Highest and lowest air temperature. [degC]
    vapour_pressure_kpa : array_like
        Actual vapour pressure. [kPa]
    rn_mj_m2_d, g_mj_m2_d : array_like
        Net radiation and soil heat flux. [MJ m-2 d-1]
    u2_m_s : array_like
        Wind at 2 m. [m s-1]
    pressure_kpa : array_like
        Air pressure. [kPa]
    surface : {"short", "tall"}
        Grass of 0.12 m ([FAO56] eq. 6 and [EWRI2005] alike) or alfalfa of 0.50 m.

    Returns
    -------
    ndarray
        [mm d-1]

    References
    ----------
    .. [1] [FAO56] eq. 6; [EWRI2005] eq. 1.
    """
    constants = SURFACES[surface]
    t_mean = 0.5 * (_array(t_max_c) + _array(t_min_c))
    slope = humidity.slope_of_saturation(t_mean)
    gamma = humidity.psychrometric_constant(pressure_kpa)
    deficit = humidity.mean_saturation_vapour_pressure(t_max_c, t_min_c) - _array(vapour_pressure_kpa)
    u2 = _array(u2_m_s)
    radiation = 0.408 * slope * (_array(rn_mj_m2_d) - _array(g_mj_m2_d))
    wind = gamma * constants.numerator / (t_mean + 273.0) * u2 * deficit
    return (radiation + wind) / (slope + gamma * (1.0 + constants.denominator * u2))


def _daily(
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_mj_m2_d: ArrayLike,
    u2_m_s: ArrayLike,
    elevation_m: ArrayLike,
    latitude_deg: ArrayLike,
    day: ArrayLike,
    surface: Surface,
    sigma: float,
) -> np.ndarray:
    """Reference ET from weather, in blocks of days that fit the processor's cache."""
    weather = np.broadcast_arrays(
        *map(_array, (t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s, elevation_m, latitude_deg, day))
    )
    # what depends on place alone is worked out once, not every day
    pressure = np.broadcast_to(humidity.pressure_from_elevation(elevation_m), weather[0].shape)
    ra = np.broadcast_to(solar.extraterrestrial_radiation(latitude_deg, day), weather[0].shape)
    result = np.empty(weather[0].shape)
    days = weather[0].shape[0] if weather[0].ndim else 1
    step = max(1, BLOCK_VALUES // max(weather[0][0].size, 1)) if weather[0].ndim else 1
    for start in range(0, days, step):
        here = (slice(start, start + step),) if weather[0].ndim else ()
        t_max, t_min, ea, rs, u2, elevation, _, _ = (values[here] for values in weather)
        rso = solar.clear_sky_radiation(ra[here], elevation)
        rn = net_radiation(rs, rso, t_max, t_min, ea, sigma=sigma)
        result[here] = penman_monteith(t_max, t_min, ea, rn, u2, pressure[here], surface=surface)
    return result


def eto_fao56(
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_mj_m2_d: ArrayLike,
    u2_m_s: ArrayLike,
    elevation_m: ArrayLike,
    latitude_deg: ArrayLike,
    day: ArrayLike,
) -> np.ndarray:
    """Daily grass reference evapotranspiration from weather.

    Parameters
    ----------
    t_max_c, t_min_c : array_like, shape (day, station) or anything that broadcasts
        Highest and lowest air temperature. [degC]
    vapour_pressure_kpa : array_like
        Actual vapour pressure. [kPa]
    rs_mj_m2_d : array_like
        Solar radiation. [MJ m-2 d-1]
    u2_m_s : array_like
        Wind at 2 m. [m s-1]
    elevation_m, latitude_deg : array_like
        Of the station. [m], [deg]
    day : array_like
        Day of the year, 1 to 366; for (day, station) arrays of shape (day, 1).

    Returns
    -------
    ndarray
        Soil heat flux is neglected, as for daily steps in [FAO56] eq. 42. [mm d-1]

    References
    ----------
    .. [1] [FAO56] eq. 6 with eqs. 7, 8, 11 to 13, 21, 37 to 40.

    Examples
    --------
    Uccle, 6 July ([FAO56] example 18):

    >>> eto_fao56(21.5, 12.3, 1.409, 22.07, 2.078, 100.0, 50.8, 187).round(1).item()
    3.9
    """
    return _daily(
        t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s, elevation_m, latitude_deg, day, "short",
        STEFAN_BOLTZMANN_DAY,
    )  # fmt: skip


def et_asce(
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_mj_m2_d: ArrayLike,
    u2_m_s: ArrayLike,
    elevation_m: ArrayLike,
    latitude_deg: ArrayLike,
    day: ArrayLike,
    surface: Surface = "short",
    sigma: float = STEFAN_BOLTZMANN_DAY_EWRI,
) -> np.ndarray:
    """Daily standardized reference evapotranspiration, short or tall.

    Parameters are those of :func:`eto_fao56`; `surface` is "short" or "tall", `sigma` the Stefan-Boltzmann constant.

    Returns
    -------
    ndarray
        [mm d-1]

    References
    ----------
    .. [1] [EWRI2005] eq. 1 and table 1.
    """
    return _daily(
        t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s, elevation_m, latitude_deg, day, surface, sigma
    )


def et_hourly(
    t_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rn_mj_m2_h: ArrayLike,
    u2_m_s: ArrayLike,
    pressure_kpa: ArrayLike,
    method: Literal["fao56", "asce_short", "asce_tall"] = "fao56",
) -> np.ndarray:
    """Hourly reference evapotranspiration; an hour with net radiation above 0 counts as day.

    Parameters
    ----------
    t_c, vapour_pressure_kpa : array_like
        Mean temperature [degC] and vapour pressure [kPa] of the hour.
    rn_mj_m2_h : array_like
        Net radiation. [MJ m-2 h-1]
    u2_m_s, pressure_kpa : array_like
        Wind at 2 m [m s-1] and air pressure [kPa].
    method : str
        "fao56": one denominator day and night; "asce_short", "asce_tall": by day and by night.

    Returns
    -------
    ndarray
        [mm h-1]

    References
    ----------
    .. [1] [FAO56] eq. 53 with eqs. 45 and 46; [EWRI2005] eq. 1 and table 1.
    """
    constants = SURFACES["tall" if method == "asce_tall" else "short"]
    rn, t, u2 = _array(rn_mj_m2_h), _array(t_c), _array(u2_m_s)
    by_day = rn > 0.0
    ground = np.where(by_day, constants.ground_day, constants.ground_night) * rn
    if method == "fao56":
        denominator = np.asarray(0.34)
    else:
        denominator = np.where(by_day, constants.denominator_day, constants.denominator_night)
    slope = humidity.slope_of_saturation(t)
    gamma = humidity.psychrometric_constant(pressure_kpa)
    deficit = humidity.saturation_vapour_pressure(t) - _array(vapour_pressure_kpa)
    wind = gamma * constants.numerator_hour / (t + 273.0) * u2 * deficit
    return (0.408 * slope * (rn - ground) + wind) / (slope + gamma * (1.0 + denominator * u2))


def net_longwave_hourly(
    t_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_over_rso: ArrayLike,
    sigma: float = STEFAN_BOLTZMANN_HOUR,
) -> np.ndarray:
    """Net outgoing longwave radiation of an hour; at night give the ratio of the afternoon (:func:`night_ratio`).

    Returns
    -------
    ndarray
        [MJ m-2 h-1]

    References
    ----------
    .. [1] [FAO56] eq. 39 and p. 74.
    """
    emissivity = 0.34 - 0.14 * np.sqrt(_array(vapour_pressure_kpa))
    return sigma * _kelvin4(t_c) * emissivity * cloudiness_factor(rs_over_rso)


def night_ratio(
    rs_over_rso: ArrayLike, hour_angle: ArrayLike, sunset_angle: ArrayLike, default: float = 0.7
) -> np.ndarray:
    """Rs/Rso for every hour, those without sun taking the value 2 to 3 hours before sunset.

    Parameters
    ----------
    rs_over_rso, hour_angle : array_like, shape (hour, ...)
        Ratio and solar hour angle [rad] of consecutive hours.
    sunset_angle : array_like, broadcastable
        Sunset hour angle. [rad]
    default : float
        For hours before the first afternoon on record: 0.4 to 0.6 humid, 0.7 to 0.8 arid.

    Returns
    -------
    ndarray, shape (hour, ...)

    References
    ----------
    .. [1] [FAO56] p. 75: the window is (ws - 0.79) <= w <= (ws - 0.52).
    """
    ratio, omega = np.broadcast_arrays(_array(rs_over_rso), _array(hour_angle))
    sunset = np.broadcast_to(_array(sunset_angle), ratio.shape)
    window = (omega >= sunset - 0.79) & (omega <= sunset - 0.52)
    down = np.abs(omega) >= sunset
    last = np.full(ratio.shape[1:], default)
    filled = np.empty(ratio.shape)
    for hour in range(ratio.shape[0]):
        last = np.where(window[hour] & np.isfinite(ratio[hour]), ratio[hour], last)
        filled[hour] = np.where(down[hour], last, ratio[hour])
    return filled


def eto_hargreaves(t_max_c: ArrayLike, t_min_c: ArrayLike, ra_mj_m2_d: ArrayLike) -> np.ndarray:
    """Reference ET from temperature alone. [mm d-1]  [FAO56] eq. 52."""
    t_max, t_min = _array(t_max_c), _array(t_min_c)
    spread = np.sqrt(np.maximum(t_max - t_min, 0.0))
    return 0.0023 * (0.5 * (t_max + t_min) + 17.8) * spread * 0.408 * _array(ra_mj_m2_d)
