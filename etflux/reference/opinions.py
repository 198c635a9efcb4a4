"""Second opinions: other published methods on the same daily record, from the library pyet.

References
----------
.. [1] Vremec, Collenteur, Birk (2024), PyEt v1.3.1, Geosci. Model Dev. 17, 7083-7103: the library and its sources.
.. [2] McMahon et al. (2013), Hydrol. Earth Syst. Sci. 17, 1331-1363: the wind function of Penman (1956).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from etflux import humidity

NAMES = (
    "eto_hargreaves_mm", "eto_priestley_taylor_mm", "eto_makkink_mm", "eto_turc_mm", "eto_penman_mm", "eto_spread_mm",
)  # fmt: skip
PENMAN_WIND = {"aw": 1.313, "bw": 1.381}  # the library's own numbers do not give mm/day


def second_opinions(
    dates: ArrayLike,
    t_max_c: ArrayLike,
    t_min_c: ArrayLike,
    vapour_pressure_kpa: ArrayLike,
    rs_mj_m2_d: ArrayLike,
    u2_m_s: ArrayLike,
    rn_mj_m2_d: ArrayLike,
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
    rn_mj_m2_d : array_like
        Net radiation of the grass reference, for all methods that need it. [MJ m-2 d-1]
    elevation_m, latitude_deg : array_like, shape (station,) or one number
        [m], [deg]
    rh_mean_pct : array_like, optional
        Mean relative humidity for Turc; without it the mean of those at lowest and highest temperature. [%]

    Returns
    -------
    dict of str to ndarray
        ``eto_<method>_mm`` by Hargreaves, Priestley-Taylor, Makkink, Turc and Penman (wind function
        1.313 + 1.381 u2), each at least 0, and ``eto_spread_mm``, the largest less the smallest of them; in the shape
        of `t_max_c`. [mm d-1]
    """
    import pyet
    import xarray as xr

    time = np.atleast_1d(np.asarray(dates)).astype("datetime64[ns]")
    shape = np.shape(t_max_c)
    t_max, t_min, ea, rs, u2, rn = (
        _as_day_station(values, shape)
        for values in (t_max_c, t_min_c, vapour_pressure_kpa, rs_mj_m2_d, u2_m_s, rn_mj_m2_d)
    )
    if not np.isfinite(rs).any() or not np.isfinite(rn).any():  # pyet takes that for a mistaken unit
        return {name: np.full(shape, np.nan) for name in NAMES}
    elevation, latitude = (np.broadcast_to(np.asarray(v, float), t_max.shape[1:]) for v in (elevation_m, latitude_deg))
    rh = _mean_humidity(ea, t_max, t_min) if rh_mean_pct is None else _as_day_station(rh_mean_pct, shape)

    def days(values: np.ndarray) -> xr.DataArray:
        return xr.DataArray(values, dims=("time", "station"), coords={"time": time})

    def across(values: np.ndarray) -> xr.DataArray:
        return xr.DataArray(values, dims="station")

    t = days(0.5 * (t_max + t_min))
    place = {"elevation": across(elevation), "rn": days(rn)}
    with np.errstate(invalid="ignore", divide="ignore"):  # pyet divides the temperature by itself
        found = [
            pyet.hargreaves(t, days(np.maximum(t_max, t_min)), days(t_min), across(np.radians(latitude))),
            pyet.priestley_taylor(t, **place),
            pyet.makkink(t, days(rs), elevation=across(elevation)),
            # a day at or below 0 degC is outside Turc's range and has nothing to evaporate
            pyet.turc(t, days(rs), days(rh)).where(t.values > 0.0, 0.0 * (rs + rh + t.values)),
            pyet.penman(t, days(u2), tmax=days(t_max), tmin=days(t_min), ea=days(ea), **place, **PENMAN_WIND),
        ]
    arrays = [np.asarray(values.values, float).reshape(shape) for values in found]
    return dict(zip(NAMES, [*arrays, np.max(arrays, axis=0) - np.min(arrays, axis=0)], strict=True))


def _as_day_station(values: ArrayLike, shape: tuple[int, ...]) -> np.ndarray:
    whole = np.broadcast_to(np.asarray(values, float), shape)
    return whole if whole.ndim > 1 else whole.reshape(-1, 1)


def _mean_humidity(ea: np.ndarray, t_max: np.ndarray, t_min: np.ndarray) -> np.ndarray:
    """Mean of the relative humidities at lowest and highest temperature, each at most 100. [%]"""
    both = [np.minimum(humidity.relative_humidity(ea, t), 100.0) for t in (t_min, t_max)]
    return 0.5 * (both[0] + both[1])
