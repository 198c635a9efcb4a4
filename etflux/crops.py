"""Crop coefficients: the published relations, one per function; stages and their words.

``canopy`` puts them together into a season.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, ch. 6, 7, 9 and Annex 8.
"""

from __future__ import annotations

from enum import IntEnum

import numpy as np
from numpy.typing import ArrayLike

KC_MIN = 0.15  # [FAO56] eq. 76
ADJUST_FROM = 0.45  # [FAO56] p. 136
LEAST_HEIGHT_M = 0.1
CUT_BACK_DAYS = 5  # [FAO56] table 11, alfalfa, other cuttings

OBSERVED_MARKS = {
    "emergence": "emergence", "cover 10 %": "cover10", "full cover": "full_cover", "late season": "late",
    "maturity": "maturity",
}  # fmt: skip
OBSERVED = (*OBSERVED_MARKS, "harvest", "cut", "grazing", "replant", "canopy cover", "leaf area")
# Stages a person may name in an irrigation rule, in order.
RULE_STAGES = {
    "emergence": "emergence", "V6": "cover10", "V8": "v8", "full cover": "full_cover", "begin dent": "late",
    "maturity": "maturity",
}  # fmt: skip


class Stage(IntEnum):
    """Growth stage of a unit on a day."""

    BARE = 0
    PLANTED = 1
    INITIAL = 2
    DEVELOPMENT = 3
    MIDDLE = 4
    LATE = 5
    MATURE = 6
    DORMANT = 7


STAGE_WORDS = {
    Stage.BARE: "bare", Stage.PLANTED: "planted", Stage.INITIAL: "start", Stage.DEVELOPMENT: "growing",
    Stage.MIDDLE: "full cover", Stage.LATE: "ripening", Stage.MATURE: "ripe", Stage.DORMANT: "dormant",
}  # fmt: skip


def climate_adjustment(u2_m_s: ArrayLike, rh_min_pct: ArrayLike, height_m: ArrayLike) -> np.ndarray:
    """What wind and dry air add to a tabulated crop coefficient.

    Parameters
    ----------
    u2_m_s : array_like
        Mean wind at 2 m, kept to 1-6. [m s-1]
    rh_min_pct : array_like
        Mean lowest relative humidity, kept to 20-80. [%]
    height_m : array_like
        Plant height, kept to 0.1-10. [m]

    Returns
    -------
    ndarray

    References
    ----------
    .. [1] [FAO56] eqs. 62, 65 and 70.

    Examples
    --------
    Maize at Mocha ([FAO56] example 27): 1.20 becomes 1.30.

    >>> (1.20 + climate_adjustment(4.6, 44.0, 2.0)).round(2).item()
    1.3
    """
    wind = 0.04 * (np.clip(np.asarray(u2_m_s, float), 1.0, 6.0) - 2.0)
    dry = 0.004 * (np.clip(np.asarray(rh_min_pct, float), 20.0, 80.0) - 45.0)
    return (wind - dry) * (np.clip(np.asarray(height_m, float), LEAST_HEIGHT_M, 10.0) / 3.0) ** 0.3


def kc_upper_limit(kcb: ArrayLike, u2_m_s: ArrayLike, rh_min_pct: ArrayLike, height_m: ArrayLike) -> np.ndarray:
    """Upper limit of evaporation and transpiration together, Kc,max.  [FAO56] eq. 72."""
    return np.maximum(1.2 + climate_adjustment(u2_m_s, rh_min_pct, height_m), np.asarray(kcb, float) + 0.05)


def ground_cover_from_kcb(kcb: ArrayLike, kc_max: ArrayLike, height_m: ArrayLike) -> np.ndarray:
    """Share of the ground that the canopy covers, fc.

    Parameters
    ----------
    kcb, kc_max : array_like
        Basal coefficient and upper limit of the day.
    height_m : array_like
        At least 0.1. [m]

    Returns
    -------
    ndarray
        0 to 0.99.

    References
    ----------
    .. [1] [FAO56] eq. 76 with Kc,min = 0.15 and at least 0.01 in the numerator.

    Examples
    --------
    Cotton ([FAO56] example 32):

    >>> ground_cover_from_kcb(0.9, 1.3007, 1.0).round(2).item()
    0.53
    """
    above = np.maximum(np.asarray(kcb, float) - KC_MIN, 0.01) / (np.asarray(kc_max, float) - KC_MIN)
    height = np.maximum(np.asarray(height_m, float), LEAST_HEIGHT_M)
    return np.clip(above ** (1.0 + 0.5 * height), 0.0, 0.99)


def kcb_from_leaf_area(kcb_full: ArrayLike, leaf_area: ArrayLike, kc_min: float = KC_MIN) -> np.ndarray:
    """Basal coefficient of a canopy of known green leaf area index, one side of the leaves.  [FAO56] eq. 97."""
    return kc_min + (np.asarray(kcb_full, float) - kc_min) * (1.0 - np.exp(-0.7 * np.asarray(leaf_area, float)))


def kcb_from_canopy_cover(
    kcb_full: ArrayLike,
    cover_share: ArrayLike,
    height_m: ArrayLike,
    effective_share: ArrayLike | None = None,
    kc_min: float = KC_MIN,
) -> np.ndarray:
    """Basal coefficient of a canopy of known ground cover.

    Parameters
    ----------
    kcb_full : array_like
        Basal coefficient at full cover, adjusted for climate ([1]_ eqs. 99 and 100).
    cover_share : array_like
        Share of the ground under leaves, seen from above, 0-1.
    height_m : array_like
        Plant height. [m]
    effective_share : array_like, optional
        Share of the ground in shade about noon ([1]_ box 18); at least the cover, and taken as the cover if not given,
        which holds for rows that run north to south.
    kc_min : float
        Of bare soil.

    Returns
    -------
    ndarray

    References
    ----------
    .. [1] [FAO56] eq. 98; the same density coefficient in Allen and Pereira (2009), Irrigation Science 28:17-34.

    Examples
    --------
    Vegetation as tall as wide, 2 m, on 30 % of the ground ([FAO56] example 41):

    >>> kcb_from_canopy_cover(1.15, 0.3, 2.0, effective_share=0.41).round(2).item()
    0.75
    """
    fc = np.asarray(cover_share, float)
    shaded = fc if effective_share is None else np.asarray(effective_share, float)
    density = np.minimum(np.minimum(1.0, 2.0 * fc), shaded ** (1.0 / (1.0 + np.asarray(height_m, float))))
    return kc_min + (np.asarray(kcb_full, float) - kc_min) * density


def growth_share(kcb: ArrayLike, kcb_ini: ArrayLike, kcb_mid: ArrayLike) -> np.ndarray:
    """How far a crop has grown from start to full cover, by its basal coefficient; roots deepen with it.

    Parameters
    ----------
    kcb, kcb_ini, kcb_mid : array_like
        Basal coefficient today, at the start and at full cover, the last adjusted for climate.

    Returns
    -------
    ndarray
        0 to 1; 1 also where start and full cover do not differ.

    References
    ----------
    .. [1] [FAO56] eqs. 8-1 and 8-2: Zr = Zr,min + (Zr,max - Zr,min) x this share.

    Examples
    --------
    >>> growth_share([0.15, 0.65, 1.15, 0.5], 0.15, 1.15).round(2)
    array([0.  , 0.5 , 1.  , 0.35])
    """
    low, high = np.asarray(kcb_ini, float), np.asarray(kcb_mid, float)
    rise = high - low
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(rise > 0.0, (np.asarray(kcb, float) - low) / rise, 1.0)
    return np.clip(share + 0.0 * (np.asarray(kcb, float) + rise), 0.0, 1.0)


def piecewise(day: np.ndarray, knots: ArrayLike, values: ArrayLike) -> np.ndarray:
    """Linear between knots, for many units at once.

    Parameters
    ----------
    day : ndarray, shape (day, 1)
    knots, values : array_like, shape (knot, unit)
        Days of the knots, not falling, and the curve there; 0 before the first and flat after the last knot.

    Returns
    -------
    ndarray, shape (day, unit)

    References
    ----------
    .. [1] [FAO56] eq. 66.
    """
    x, y = np.asarray(knots, float), np.asarray(values, float)
    curve = np.where(day >= x[0], y[0], 0.0)
    for k in range(1, len(x)):
        span = x[k] - x[k - 1]
        share = np.clip((day - x[k - 1]) / np.where(span > 0.0, span, 1.0), 0.0, 1.0)
        share = np.where(span > 0.0, share, day >= x[k])
        curve = curve + np.where(day >= x[k - 1], share * (y[k] - y[k - 1]), 0.0)
    return curve


def stage_means(
    values: np.ndarray, station: np.ndarray, first: np.ndarray, last: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Mean of a station's values from a first day up to, not including, a last one, and the days it rests on.

    Parameters
    ----------
    values : ndarray, shape (day, station)
    station : ndarray of int, shape (unit,)
    first, last : ndarray, shape (unit,)
        Day positions, whole or between two days; cut to the record.

    Returns
    -------
    mean, days : ndarray, shape (unit,)
        NaN and 0 where no day is on record.
    """
    good = np.isfinite(values)
    sums = np.concatenate([np.zeros((1, values.shape[1])), np.cumsum(np.where(good, values, 0.0), axis=0)])
    count = np.concatenate([np.zeros((1, values.shape[1])), np.cumsum(good, axis=0)])
    a = np.ceil(np.clip(np.nan_to_num(first), 0, len(values))).astype(int)
    b = np.maximum(np.ceil(np.clip(np.nan_to_num(last), 0, len(values))).astype(int), a)
    days = count[b, station] - count[a, station]
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = (sums[b, station] - sums[a, station]) / days
    return mean, days
