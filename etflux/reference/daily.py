"""Daily reference evapotranspiration: FAO-56 and ASCE-EWRI Penman-Monteith, and Hargreaves.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), Crop evapotranspiration, FAO Irrigation and Drainage Paper 56.
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation.
"""

from __future__ import annotations

from math import exp, prod
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from etflux import humidity, solar
from etflux.reference.radiation import (
    ALBEDO,
    LEAST_CLEAR_SKY,
    LEAST_WIND_M_S,
    STEFAN_BOLTZMANN_DAY,
    STEFAN_BOLTZMANN_DAY_EWRI,
)

Surface = Literal["short", "tall"]

# A block of days this large stays in the processor's cache, 1.3 to 1.6 times as fast as all days at once.
BLOCK_VALUES = 24_000


# 17.27 T / (T + 237.3) of eq. 11 is 17.27 - 17.27 * 237.3 / (T + 237.3): what of it does not depend on T
SATURATION = 0.6108 * exp(17.27)


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
        May be below 0 on cold, humid days. [mm d-1]

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
        Wind at 2 m; taken as at least 0.5. [m s-1]
    elevation_m, latitude_deg : array_like
        Of the station. [m], [deg]
    day : array_like
        Day of the year, 1 to 366; for (day, station) arrays of shape (day, 1).

    Returns
    -------
    ndarray
        At least 0; soil heat flux is neglected, as for daily steps in [FAO56] eq. 42. [mm d-1]

    References
    ----------
    .. [1] [FAO56] eq. 6 with eqs. 7, 8, 11 to 13, 21, 37 to 40; least wind p. 63.

    Examples
    --------
    A July day at 50.8 degrees north ([FAO56] example 18):

    >>> eto_fao56(21.5, 12.3, 1.409, 22.07, 2.078, 100.0, 50.8, 187).round(1).item()
    3.9
    """
    return _from_weather(
        t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s, elevation_m, latitude_deg, day,
        surface="short", sigma=STEFAN_BOLTZMANN_DAY,
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
        At least 0. [mm d-1]

    References
    ----------
    .. [1] [EWRI2005] eq. 1 and table 1.
    """
    return _from_weather(
        t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s, elevation_m, latitude_deg, day,
        surface=surface, sigma=sigma,
    )  # fmt: skip


def eto_hargreaves(t_max_c: ArrayLike, t_min_c: ArrayLike, ra_mj_m2_d: ArrayLike) -> np.ndarray:
    """Reference ET from temperature alone. [mm d-1]  [FAO56] eq. 52."""
    t_max, t_min = _array(t_max_c), _array(t_min_c)
    spread = np.sqrt(np.maximum(t_max - t_min, 0.0))
    return 0.0023 * (0.5 * (t_max + t_min) + 17.8) * spread * 0.408 * _array(ra_mj_m2_d)


# --- the fast way: blocks of days, results written over scratch arrays ---


def _from_weather(*weather: ArrayLike, surface: Surface, sigma: float) -> np.ndarray:
    """Reference ET in blocks along the first axis; the tests hold it to :func:`penman_monteith`."""
    given = [_array(values) for values in weather]
    shape = np.broadcast_shapes(*(values.shape for values in given))
    full = shape or (1,)
    *daily, elevation, latitude, day = (
        values.reshape((1,) * (len(full) - values.ndim) + values.shape) for values in given
    )
    terms = _place_and_season(elevation, latitude, day)
    result = np.empty(full)
    step = max(1, BLOCK_VALUES // max(prod(full[1:]), 1))
    scratch = np.empty((5, min(step, full[0]), *full[1:]))
    with np.errstate(invalid="ignore"):  # a vapour pressure below 0 gives NaN
        for start in range(0, full[0], step):
            rows = slice(start, start + step)
            out = result[rows]
            work = scratch[:, : len(out)]
            here = [_rows(values, rows) for values in daily]
            _block(here, [_rows(values, rows) for values in terms], SURFACES[surface], sigma, out, work)
    return result.reshape(shape)


def _rows(values: np.ndarray, rows: slice) -> np.ndarray:
    return values if values.shape[0] == 1 else values[rows]


def _place_and_season(elevation: np.ndarray, latitude: np.ndarray, day: np.ndarray) -> list[np.ndarray]:
    """What depends on the place or the day of the year alone, each in its own small shape."""
    phi, delta = np.radians(latitude), solar.declination(day)
    distance = solar.inverse_relative_distance(day)
    clear = (0.75 + 2.0e-5 * elevation) * 24.0 * 60.0 / np.pi * solar.SOLAR_CONSTANT
    gamma = humidity.psychrometric_constant(humidity.pressure_from_elevation(elevation))
    return [
        gamma, np.tan(phi), clear * np.sin(phi), clear * np.cos(phi),
        -np.tan(delta), distance * np.sin(delta), distance * np.cos(delta),
    ]  # fmt: skip


def _block(
    daily: list[np.ndarray],
    terms: list[np.ndarray],
    constants: _Surface,
    sigma: float,
    out: np.ndarray,
    work: np.ndarray,
) -> None:
    """One block of [FAO56] eq. 6 into `out`; each step overwrites an array that is no longer needed."""
    t_max, t_min, ea, rs, u2 = daily
    gamma, *sun = terms
    rn, a, b, c, d = work
    _clear_sky(sun, rn, a, b)
    _net_radiation(t_max, t_min, ea, rs, sigma, rn, a, b)

    _exponential(t_max, a, b)
    _exponential(t_min, b, c)
    a += b
    a *= 0.5 * SATURATION
    a -= ea  # es - ea, eqs. 11 and 12

    np.add(t_max, t_min, out=b)
    b *= 0.5
    _exponential(b, c, d)
    np.square(d, out=d)
    c /= d
    c *= 4098.0 * SATURATION  # slope, eq. 13

    np.maximum(u2, LEAST_WIND_M_S, out=d)
    b += 273.0
    a *= d
    a *= gamma * constants.numerator
    a /= b
    rn *= c
    rn *= 0.408
    rn += a  # numerator of eq. 6
    d *= gamma * constants.denominator
    d += gamma
    d += c
    np.divide(rn, d, out=out)
    np.maximum(out, 0.0, out=out)


def _exponential(t: np.ndarray, out: np.ndarray, shifted: np.ndarray) -> None:
    """exp(-17.27 * 237.3 / (T + 237.3)) into `out`: eq. 11 less its constants; T + 237.3 into `shifted`."""
    np.add(t, 237.3, out=shifted)
    np.divide(-17.27 * 237.3, shifted, out=out)
    np.exp(out, out=out)


def _clear_sky(sun: list[np.ndarray], out: np.ndarray, a: np.ndarray, b: np.ndarray) -> None:
    """Clear-sky radiation, eqs. 21, 25 and 37, into `out`."""
    tan_phi, sin_phi, cos_phi, minus_tan_delta, sin_delta, cos_delta = sun
    np.multiply(minus_tan_delta, tan_phi, out=a)
    np.clip(a, -1.0, 1.0, out=a)  # cosine of the sunset angle
    np.arccos(a, out=out)
    np.square(a, out=a)
    np.subtract(1.0, a, out=a)
    np.sqrt(a, out=a)  # its sine
    np.multiply(sin_delta, sin_phi, out=b)
    out *= b
    np.multiply(cos_delta, cos_phi, out=b)
    a *= b
    out += a


def _net_radiation(
    t_max: np.ndarray, t_min: np.ndarray, ea: np.ndarray, rs: np.ndarray, sigma: float,
    rso_then_rn: np.ndarray, a: np.ndarray, b: np.ndarray,
) -> None:  # fmt: skip
    """Net radiation, eqs. 38 to 40, over the clear-sky radiation it needs."""
    rn = rso_then_rn
    np.maximum(rn, LEAST_CLEAR_SKY, out=rn)
    np.divide(rs, rn, out=rn)
    np.clip(rn, 0.3, 1.0, out=rn)
    rn *= 1.35
    rn -= 0.35
    for index, t in enumerate((t_max, t_min)):
        kelvin = (a, b)[index]
        np.add(t, humidity.KELVIN_OFFSET, out=kelvin)
        np.square(kelvin, out=kelvin)
        np.square(kelvin, out=kelvin)
    a += b
    rn *= a
    np.sqrt(ea, out=a)
    a *= -0.14 * 0.5 * sigma
    a += 0.34 * 0.5 * sigma
    rn *= a
    np.multiply(rs, 1.0 - ALBEDO, out=a)
    np.subtract(a, rn, out=rn)
