"""Second opinions: other published methods on the same daily record, from the library pyet.

References
----------
.. [1] Vremec, Collenteur, Birk (2024), PyEt v1.3.1, Geosci. Model Dev. 17, 7083-7103: the library and its sources.
.. [2] McMahon et al. (2013), Hydrol. Earth Syst. Sci. 17, 1331-1363: the wind function of Penman (1948).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from etflux import humidity, solar
from etflux.reference.radiation import net_radiation

if TYPE_CHECKING:
    from collections.abc import Mapping

METHODS = ("hargreaves", "priestley_taylor", "makkink", "turc", "penman")
PENMAN_WIND = {"aw": 2.626, "bw": 1.381}  # of Penman (1948) as [2] gives it; the library's own are not in mm/day


def second_opinions(
    dates: ArrayLike,
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_mj_m2_d: ArrayLike,
    u2_m_s: ArrayLike,
    elevation_m: ArrayLike,
    latitude_deg: ArrayLike,
    rh_mean_pct: ArrayLike | None = None,
) -> dict[str, np.ndarray]:
    """Reference ET of a daily record by five other methods.

    Parameters
    ----------
    dates : array_like of datetime64, shape (day,)
    t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s : array_like, shape (day, station) or (day,)
        As for :func:`etflux.reference.eto_fao56`.
    elevation_m, latitude_deg : array_like, shape (station,) or one number
        [m], [deg]
    rh_mean_pct : array_like, optional
        Mean relative humidity for Turc; without it the mean of those at lowest and highest temperature. [%]

    Returns
    -------
    dict of str to ndarray
        "hargreaves", "priestley_taylor", "makkink", "turc", "penman", each at least 0, in the shape of `t_max_c`.
        [mm d-1]

    Notes
    -----
    Net radiation is that of the grass reference for all; Penman has the wind function 2.626 + 1.381 u2.
    """
    import pyet
    import xarray as xr

    time = np.atleast_1d(np.asarray(dates)).astype("datetime64[ns]")
    shape = np.shape(t_max_c)
    t_max, t_min, ea, rs, u2 = (
        _as_day_station(values, shape) for values in (t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s)
    )
    if not np.isfinite(rs).any():  # pyet takes a record without any radiation for a mistaken unit
        return {name: np.full(shape, np.nan) for name in METHODS}
    elevation, latitude = (np.broadcast_to(np.asarray(v, float), t_max.shape[1:]) for v in (elevation_m, latitude_deg))
    ra = solar.extraterrestrial_radiation(latitude, solar.day_of_year(time)[:, None])
    rn = net_radiation(rs, solar.clear_sky_radiation(ra, elevation), t_max, t_min, ea)
    rh = _mean_humidity(ea, t_max, t_min) if rh_mean_pct is None else _as_day_station(rh_mean_pct, shape)

    def days(values: np.ndarray) -> xr.DataArray:
        return xr.DataArray(values, dims=("time", "station"), coords={"time": time})

    t = days(0.5 * (t_max + t_min))
    high = xr.DataArray(elevation, dims="station")
    place = {"elevation": high, "rn": days(rn)}
    with np.errstate(invalid="ignore", divide="ignore"):  # pyet divides the temperature by itself
        found = {
            "hargreaves": pyet.hargreaves(
                t, days(np.maximum(t_max, t_min)), days(t_min), xr.DataArray(np.radians(latitude), dims="station")
            ),
            "priestley_taylor": pyet.priestley_taylor(t, **place),
            "makkink": pyet.makkink(t, days(rs), elevation=high),
            "turc": pyet.turc(t, days(rs), days(rh)),
            "penman": pyet.penman(t, days(u2), tmax=days(t_max), tmin=days(t_min), ea=days(ea), **place, **PENMAN_WIND),
        }
    # Turc is for days above 0 degC: below, its temperature term changes sign twice
    found["turc"] = found["turc"].where(t.values > 0.0, 0.0 * (rs + rh) + 0.0 * t.values)
    return {name: np.asarray(values.values, float).reshape(shape) for name, values in found.items()}


def spread(opinions: Mapping[str, ArrayLike]) -> np.ndarray:
    """Largest less smallest of the opinions; NaN where one of them is. [mm d-1]

    Examples
    --------
    >>> spread({"a": [4.0, 5.0], "b": [4.5, 3.0]})
    array([0.5, 2. ])
    """
    stack = np.stack([np.asarray(values, float) for values in opinions.values()])
    return stack.max(axis=0) - stack.min(axis=0)


def _as_day_station(values: ArrayLike, shape: tuple[int, ...]) -> np.ndarray:
    whole = np.broadcast_to(np.asarray(values, float), shape)
    return whole if whole.ndim > 1 else whole.reshape(-1, 1)


def _mean_humidity(ea: np.ndarray, t_max: np.ndarray, t_min: np.ndarray) -> np.ndarray:
    """Mean of the relative humidities at lowest and highest temperature, each at most 100. [%]"""
    both = [np.minimum(humidity.relative_humidity(ea, t), 100.0) for t in (t_min, t_max)]
    return 0.5 * (both[0] + both[1])
