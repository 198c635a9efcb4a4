"""From stands to counties: area sums and the latent heat flux they carry.

Units (stands, thirds of stands, parts of a county's rest) come sorted by county, so a county is one slice and its
sum one segment of ``np.add.reduceat``.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from etflux.humidity import latent_heat_of_vaporization

JOULES_PER_MJ = 1.0e6
SECONDS_PER_DAY = 86400.0
M3_PER_MM_KM2 = 1000.0
M3_PER_HM3 = 1.0e6


def county_sums(values: ArrayLike, county_index: ArrayLike, n_counties: int) -> np.ndarray:
    """Sum over the units of each county.

    Parameters
    ----------
    values : array_like, shape (..., unit)
        Extensive values (already times area), units sorted by county.
    county_index : array_like of int, shape (unit,)
        Position of each unit's county, not decreasing.
    n_counties : int
        Number of counties; a county without units sums to 0.

    Returns
    -------
    ndarray, shape (..., n_counties)
        NaN where a unit of the county is NaN.

    Raises
    ------
    ValueError
        If the units are not sorted by county.

    Examples
    --------
    >>> county_sums([1.0, 2.0, 4.0], [0, 0, 2], 3)
    array([3., 0., 4.])
    """
    numbers = np.asarray(values, dtype=float)
    index = np.asarray(county_index, dtype=int)
    if np.any(np.diff(index) < 0):
        raise ValueError("county_index must not decrease: sort the units by county first")
    sums = np.zeros((*numbers.shape[:-1], n_counties))
    if index.size:
        present, starts = np.unique(index, return_index=True)
        sums[..., present] = np.add.reduceat(numbers, starts, axis=-1)
    return sums


def latent_flux(et_mm: ArrayLike, t_mean_c: ArrayLike, hours: ArrayLike = 24.0) -> np.ndarray:
    """Mean latent heat flux that a depth of water carries into the air over a part of the day.

    Parameters
    ----------
    et_mm : array_like
        Water that left the ground in the day. [mm d-1]
    t_mean_c : array_like, broadcastable
        Daily mean air temperature. [degC]
    hours : array_like, broadcastable
        Hours over which it left: 24 for the daily mean, the daylight hours for the daytime mean. [h]

    Returns
    -------
    ndarray
        Positive upward; NaN where an input is NaN. [W m-2]

    References
    ----------
    .. [1] Allen et al. (1998), FAO Irrigation and Drainage Paper 56, Annex 3, eq. 3-1 (after Harrison 1963).

    Examples
    --------
    >>> latent_flux(5.0, 20.0).round(1).item()
    142.0
    """
    seconds = np.asarray(hours, dtype=float) * 3600.0
    return np.asarray(et_mm, dtype=float) * latent_heat_of_vaporization(t_mean_c) * JOULES_PER_MJ / seconds


def water_volume(depth_mm: ArrayLike, area_km2: ArrayLike) -> np.ndarray:
    """Volume of a water depth over an area.

    Parameters
    ----------
    depth_mm : array_like
        Water depth. [mm]
    area_km2 : array_like, broadcastable
        Area. [km2]

    Returns
    -------
    ndarray
        Volume. [10^6 m3]

    Examples
    --------
    >>> water_volume(5.0, 2000.0).item()
    10.0
    """
    return np.asarray(depth_mm, dtype=float) * np.asarray(area_km2, dtype=float) * M3_PER_MM_KM2 / M3_PER_HM3
