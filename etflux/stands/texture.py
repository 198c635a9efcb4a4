"""Water that a soil holds, from its texture.

References
----------
.. [SR06] Saxton, K.E., Rawls, W.J. (2006), Soil water characteristic estimates by texture and organic matter for
   hydrologic solutions, Soil Science Society of America Journal 70:1569-1578. Equations from memory; the test holds
   them against the paper's own table of texture classes, also from memory.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike

USUAL_ORGANIC_MATTER_PCT = 2.5  # [SR06] table 3
# Sand and clay of the texture classes, [SR06] table 3, by the ids of tables/soils.csv. [%]
CLASSES: Mapping[str, tuple[float, float]] = {
    "sand": (88.0, 5.0), "loamy_sand": (80.0, 5.0), "sandy_loam": (65.0, 10.0), "loam": (40.0, 20.0),
    "silt_loam": (20.0, 15.0), "silt": (10.0, 5.0), "silty_clay_loam": (10.0, 35.0), "silty_clay": (10.0, 45.0),
    "clay": (25.0, 50.0),
}  # fmt: skip


def water_retention(
    sand_pct: ArrayLike, clay_pct: ArrayLike, organic_matter_pct: ArrayLike = USUAL_ORGANIC_MATTER_PCT
) -> tuple[np.ndarray, np.ndarray]:
    """Water held at field capacity (33 kPa) and at wilting point (1500 kPa).

    Parameters
    ----------
    sand_pct, clay_pct : array_like
        Of the mineral soil, by mass. [%]
    organic_matter_pct : array_like
        By mass, up to 8. [%]

    Returns
    -------
    theta_fc, theta_wp : ndarray
        [m3 m-3]

    References
    ----------
    .. [1] [SR06] eqs. 1 and 2.

    Examples
    --------
    Silt loam: 200 mm of available water in a metre.

    >>> theta_fc, theta_wp = water_retention(20.0, 15.0)
    >>> theta_fc.round(2).item(), theta_wp.round(2).item()
    (0.31, 0.11)
    """
    sand, clay = np.asarray(sand_pct, float) / 100.0, np.asarray(clay_pct, float) / 100.0
    matter = np.asarray(organic_matter_pct, float)
    dry = (
        -0.024 * sand + 0.487 * clay + 0.006 * matter + 0.005 * sand * matter - 0.013 * clay * matter
        + 0.068 * sand * clay + 0.031
    )  # fmt: skip
    moist = (
        -0.251 * sand + 0.195 * clay + 0.011 * matter + 0.006 * sand * matter - 0.027 * clay * matter
        + 0.452 * sand * clay + 0.299
    )  # fmt: skip
    return moist + 1.283 * moist**2 - 0.374 * moist - 0.015, dry + 0.14 * dry - 0.02


def class_available_water(soil_id: ArrayLike) -> np.ndarray:
    """Available water of the package's texture classes, NaN for any other soil. [mm m-1]

    Examples
    --------
    >>> class_available_water(["silt_loam", "clay", "my_soil"]).round()
    array([195., 123.,  nan])
    """
    ids = np.asarray(soil_id, dtype=object)
    sand, clay = (np.array([CLASSES.get(str(name), (np.nan, np.nan))[k] for name in ids.ravel()]) for k in (0, 1))
    theta_fc, theta_wp = water_retention(sand, clay)
    return (1000.0 * (theta_fc - theta_wp)).reshape(ids.shape)
