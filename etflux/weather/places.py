"""Distances between places."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

EARTH_RADIUS_KM = 6371.0088  # mean radius, IUGG


def great_circle_km(
    latitude_deg: ArrayLike, longitude_deg: ArrayLike, other_latitude_deg: ArrayLike, other_longitude_deg: ArrayLike
) -> np.ndarray:
    """Great-circle distance between places, every one of the first to every one of the second.

    Parameters
    ----------
    latitude_deg, longitude_deg : array_like, shape (n,)
    other_latitude_deg, other_longitude_deg : array_like, shape (m,)

    Returns
    -------
    ndarray, shape (n, m)
        [km]

    References
    ----------
    .. [1] The haversine formula.

    Examples
    --------
    >>> great_circle_km([0.0], [0.0], [0.0, 1.0], [0.0, 0.0]).round(1)
    array([[  0. , 111.2]])
    """
    lat1, lon1 = (
        np.radians(np.asarray(latitude_deg, float))[:, None],
        np.radians(np.asarray(longitude_deg, float))[:, None],
    )
    lat2, lon2 = np.radians(np.asarray(other_latitude_deg, float)), np.radians(np.asarray(other_longitude_deg, float))
    chord = np.sin(0.5 * (lat2 - lat1)) ** 2 + np.cos(lat1) * np.cos(lat2) * np.sin(0.5 * (lon2 - lon1)) ** 2
    return 2.0 * EARTH_RADIUS_KM * np.arcsin(np.sqrt(np.clip(chord, 0.0, 1.0)))
