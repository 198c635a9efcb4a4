"""The equations of the soil water balance, one published relation per function.

Depths are mm over the stand's whole area unless a docstring says "per wetted area": the depletion De of the drying
layer is of the exposed and wetted part of the surface only. NaN in, NaN out; every function broadcasts.

References
----------
.. [1] Allen, R.G., Pereira, L.S., Raes, D., Smith, M. (1998), Crop evapotranspiration, FAO Irrigation and Drainage
   Paper 56. Equation, table and page numbers below are of this paper.
.. [2] USDA-SCS (1985), National Engineering Handbook, Section 4, Hydrology: the curve number method.
.. [3] Hawkins, R.H., Hjelmfelt, A.T., Zevenbergen, A.W. (1985), Runoff probability, storm depth, and curve numbers,
   J. Irrig. Drain. Eng. 111(4): curve numbers I and III from II. From memory.
.. [4] ASCE Manual 70, 2nd ed. (2016): curve number from the depletion of the drying layer. From memory.
.. [5] Allen, R.G., Pereira, L.S., Smith, M., Raes, D., Wright, J.L. (2005), FAO-56 dual crop coefficient method for
   estimating evaporation from soil and application extensions, J. Irrig. Drain. Eng. 131(1): 2-13.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

# numpy is quicker with 0-d arrays than with Python numbers, and with these two steps than with its clip.
ZERO, ONE, LEAST_P, MOST_P, TINY = (np.array(number) for number in (0.0, 1.0, 0.1, 0.8, 1e-9))
LEAST_FEW = 0.01  # few is at least this, FAO-56 eq. 75
RESIDUE_EFFECT = 0.5  # 5 % less evaporation for every 10 % of the ground under residue, FAO-56 ch. 11
DRIP_SHADE = 2.0 / 3.0  # emitters under the plants, FAO-56 p. 147
SMALL_RAIN_SHARE = 0.2  # of ETo: evaporates at once and does not wet the drying layer, FAO-56 p. 153


def unit_interval(values: ArrayLike) -> np.ndarray:
    """Values brought into 0-1; NaN stays.

    Examples
    --------
    >>> unit_interval([-0.2, 0.5, float("nan"), 3.0])
    array([0. , 0.5, nan, 1. ])
    """
    return np.minimum(np.maximum(values, ZERO), ONE)


def snow_balance(
    precipitation_mm: ArrayLike, t_mean_c: ArrayLike, snow_mm: ArrayLike, melt_factor_mm: ArrayLike
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Hold precipitation of a freezing day and let it melt later (degree-day method; common practice, no source).

    Parameters
    ----------
    precipitation_mm, t_mean_c : array_like
        The day's precipitation [mm] and mean temperature [degC]; below 0 degC all of it is held.
    snow_mm : array_like
        Water held since earlier days. [mm]
    melt_factor_mm : array_like
        Melt per degree of mean temperature above 0 degC. [mm degC-1 d-1]

    Returns
    -------
    water, melt, snow : ndarray
        Rain and melt that reach the ground, the melt in it, and what is held at the end of the day. [mm]

    Examples
    --------
    >>> water, melt, snow = snow_balance([10.0, 3.0], [-4.0, 2.0], [0.0, 10.0], 4.0)
    >>> water, melt, snow
    (array([ 0., 11.]), array([0., 8.]), array([10.,  2.]))
    """
    precipitation, t_mean, held = (np.asarray(a, float) for a in (precipitation_mm, t_mean_c, snow_mm))
    frozen = np.where(t_mean < 0.0, precipitation, ZERO)
    melt = np.minimum(held, np.asarray(melt_factor_mm, float) * np.maximum(t_mean, ZERO))
    return precipitation - frozen + melt, melt, held + frozen - melt


def curve_number_dry(curve_number: ArrayLike) -> np.ndarray:
    """Curve number for antecedent condition I (dry) from that for II [3]_.

    Examples
    --------
    >>> curve_number_dry([100.0, 80.0]).round(1)
    array([100. ,  63.7])
    """
    cn = np.asarray(curve_number, float)
    return cn / (2.281 - 0.01281 * cn)


def curve_number_wet(curve_number: ArrayLike) -> np.ndarray:
    """Curve number for antecedent condition III (wet) from that for II [3]_.

    Examples
    --------
    >>> curve_number_wet([100.0, 80.0]).round(1)
    array([100. ,  90.4])
    """
    cn = np.asarray(curve_number, float)
    return cn / (0.427 + 0.00573 * cn)


def wetness_limits(rew_mm: ArrayLike, tew_mm: ArrayLike) -> tuple[np.ndarray, np.ndarray]:
    """Depletion of the drying layer up to which antecedent condition III holds, and from which I does [4]_. [mm]

    Examples
    --------
    >>> wet, dry = wetness_limits(9.0, 19.0)
    >>> wet.item(), dry.item()
    (4.5, 12.0)
    """
    rew = np.asarray(rew_mm, float)
    return np.asarray(0.5 * rew), np.asarray(0.7 * rew + 0.3 * np.asarray(tew_mm, float))


def curve_number_today(
    de_mm: ArrayLike,
    wet_limit_mm: ArrayLike,
    dry_limit_mm: ArrayLike,
    cn_dry: ArrayLike,
    cn_average: ArrayLike,
    cn_wet: ArrayLike,
) -> np.ndarray:
    """Curve number for the wetness of the drying layer at the day's start [4]_.

    Parameters
    ----------
    de_mm : array_like
        Depletion of the drying layer. [mm]
    wet_limit_mm, dry_limit_mm : array_like
        Of :func:`wetness_limits`. [mm]
    cn_dry, cn_average, cn_wet : array_like
        Curve numbers for antecedent conditions I, II and III.

    Returns
    -------
    ndarray
        III up to the wet limit, I from the dry limit on, linear between them through II half way.

    Examples
    --------
    >>> curve_number_today([0.0, 8.25, 19.0], 4.5, 12.0, 63.0, 80.0, 91.0)
    array([91., 80., 63.])
    """
    wet, cn2, limit = (np.asarray(a, float) for a in (cn_wet, cn_average, wet_limit_mm))
    halves = (np.asarray(de_mm, float) - limit) / (0.5 * (np.asarray(dry_limit_mm, float) - limit))
    first, second = unit_interval(halves), unit_interval(halves - ONE)
    return wet + first * (cn2 - wet) + second * (np.asarray(cn_dry, float) - cn2)


def runoff(water_mm: ArrayLike, curve_number: ArrayLike) -> np.ndarray:
    """Runoff of a day's rain and melt by its curve number, initial abstraction 0.2 S [2]_.

    Parameters
    ----------
    water_mm : array_like
        Rain and melt. [mm]
    curve_number : array_like
        Above 0, up to 100.

    Returns
    -------
    ndarray
        From 0 to `water_mm`. [mm]

    Examples
    --------
    >>> (runoff([6 * 25.4, 2.0], 75.0) / 25.4).round(2)  # TR-55: 3.28 in
    array([3.28, 0.  ])
    """
    water = np.asarray(water_mm, float)
    retention = 25400.0 / np.asarray(curve_number, float) - 254.0
    excess = np.maximum(water - 0.2 * retention, ZERO)
    return excess * excess / np.maximum(excess + retention, TINY)


def total_evaporable_water(theta_fc: ArrayLike, theta_wp: ArrayLike, evaporation_depth_m: ArrayLike) -> np.ndarray:
    """Water that evaporation can draw from the drying layer, eq. 73. [mm]

    Examples
    --------
    >>> total_evaporable_water(0.23, 0.10, 0.10).item()
    18.0
    """
    available = np.asarray(theta_fc, float) - 0.5 * np.asarray(theta_wp, float)
    return 1000.0 * available * np.asarray(evaporation_depth_m, float)


def evaporation_reduction(de_mm: ArrayLike, tew_mm: ArrayLike, rew_mm: ArrayLike) -> np.ndarray:
    """Evaporation reduction coefficient Kr, eq. 74: 1 up to De = REW, falling to 0 at De = TEW.

    Examples
    --------
    >>> evaporation_reduction([0.0, 9.45, 16.57, 20.0], 20.0, 9.0).round(2)
    array([1.  , 0.96, 0.31, 0.  ])
    """
    tew = np.asarray(tew_mm, float)
    return unit_interval((tew - np.asarray(de_mm, float)) / (tew - np.asarray(rew_mm, float)))


def bare_share(residue_share: ArrayLike) -> np.ndarray:
    """Part of the evaporation that crop residue on the ground lets through: 5 % less for every 10 % (ch. 11).

    Examples
    --------
    >>> bare_share([0.0, 0.1, 0.6])
    array([1.  , 0.95, 0.7 ])
    """
    return 1.0 - RESIDUE_EFFECT * np.asarray(residue_share, float)


def exposed_wetted_fraction(
    ground_cover: ArrayLike, fw: ArrayLike, drip_shade: ArrayLike = 0.0, bare_share: ArrayLike = 1.0
) -> np.ndarray:
    """Part of the ground that is exposed, wetted and free of residue, eq. 75.

    Parameters
    ----------
    ground_cover : array_like
        Ground covered by plants fc, 0-0.99.
    fw : array_like
        Ground wetted by the last rain or irrigation, 0.01-1.
    drip_shade : array_like
        :data:`DRIP_SHADE` for emitters under the plants, whose wet ground is shaded: min[1 - fc, (1 - 2/3 fc) fw]
        (p. 147); else 0.
    bare_share : array_like
        Of :func:`bare_share`; multiplies few.

    Examples
    --------
    >>> exposed_wetted_fraction(0.53, [1.0, 0.3, 0.3], [0.0, 0.0, DRIP_SHADE]).round(2)
    array([0.47, 0.3 , 0.19])
    """
    cover = np.asarray(ground_cover, float)
    wetted = (1.0 - np.asarray(drip_shade, float) * cover) * np.asarray(fw, float)
    return np.maximum(np.minimum(1.0 - cover, wetted), LEAST_FEW) * np.asarray(bare_share, float)


def evaporation_coefficient(
    kr: ArrayLike, kcb: ArrayLike, kc_max: ArrayLike, few: ArrayLike, bare_share: ArrayLike = 1.0
) -> np.ndarray:
    """Soil evaporation coefficient Ke, eq. 71; residue on the ground also holds back the energy (ch. 11).

    Examples
    --------
    >>> evaporation_coefficient(1.0, 0.9, 1.3, [0.47, 0.30, 0.19]).round(2)
    array([0.4 , 0.39, 0.25])
    """
    kc_top = np.asarray(kc_max, float)
    wanted = np.asarray(kr, float) * (kc_top - np.asarray(kcb, float)) * np.asarray(bare_share, float)
    return np.minimum(wanted, np.asarray(few, float) * kc_top)


def surface_uptake(
    transpiration_mm: ArrayLike, de_mm: ArrayLike, tew_mm: ArrayLike, depletion_mm: ArrayLike, taw_mm: ArrayLike,
    evaporation_depth_m: ArrayLike, root_depth_m: ArrayLike, layer_available_mm: ArrayLike,
) -> np.ndarray:  # fmt: skip
    """What of the day's transpiration the roots take from the drying layer, Tew of eq. 77.

    FAO-56 (p. 153) lets it be neglected; Allen et al. (2005) [5]_ give its share of the transpiration as
    (1 - De/TEW)/(1 - Dr/TAW) (Ze/Zr)^0.6, from 0 to 1 (from memory). Plants dry the layer to wilting point only.

    Parameters
    ----------
    transpiration_mm : array_like
        Of the day. [mm]
    de_mm, tew_mm : array_like
        Depletion of the drying layer after the day's evaporation, and what it holds. [mm]
    depletion_mm, taw_mm : array_like
        Depletion of the root zone after the day's evaporation, and what it holds. [mm]
    evaporation_depth_m, root_depth_m : array_like
        Ze and Zr. [m]
    layer_available_mm : array_like
        Water of the layer above wilting point. [mm]

    Returns
    -------
    ndarray
        [mm]

    Examples
    --------
    Half of both stores used, roots six times as deep as the layer, 5 mm of transpiration:

    >>> surface_uptake(5.0, 10.0, 20.0, 60.0, 120.0, 0.1, 0.6, 15.0).round(2).item()
    1.71
    """
    wet = unit_interval(1.0 - np.asarray(de_mm, float) / np.maximum(tew_mm, TINY))
    left = np.maximum(1.0 - np.asarray(depletion_mm, float) / np.maximum(taw_mm, TINY), TINY)
    depth = np.asarray(evaporation_depth_m, float) / np.maximum(root_depth_m, TINY)
    share = unit_interval(wet / left * depth**0.6)
    room = np.maximum(np.asarray(layer_available_mm, float) - np.asarray(de_mm, float), ZERO)
    return np.minimum(share * np.asarray(transpiration_mm, float), room)


def rewet_surface(
    de_mm: ArrayLike, de_dry_mm: ArrayLike, fw_before: ArrayLike, fw: ArrayLike
) -> tuple[np.ndarray, np.ndarray]:
    """Depletion of the wetted and of the dry part of the surface after the wetted part has changed.

    A wetted part that grows takes in ground with the depletion of the part left dry; one that shrinks leaves ground
    with its own depletion behind. Area-weighted, so that no water appears or vanishes.

    Parameters
    ----------
    de_mm, de_dry_mm : array_like
        Depletion of the drying layer in the wetted part and in the part left dry. [mm, per area of the part]
    fw_before, fw : array_like
        Wetted fraction before and now, above 0 to 1.

    Returns
    -------
    de, de_dry : ndarray
        [mm, per area of the part]

    Examples
    --------
    >>> de, de_dry = rewet_surface([4.0, 4.0], [18.0, 18.0], [0.4, 1.0], [1.0, 0.4])
    >>> de.round(1), de_dry.round(1)
    (array([12.4,  4. ]), array([18.,  4.]))
    """
    de, de_dry, before, now = (np.asarray(a, float) for a in (de_mm, de_dry_mm, fw_before, fw))
    change, drier = now - before, de_dry - de
    taken_in = np.maximum(change, ZERO) / now
    left_behind = np.minimum(change, ZERO) / np.maximum(1.0 - now, TINY)
    return de + taken_in * drier, de_dry + left_behind * drier


def total_available_water(theta_fc: ArrayLike, theta_wp: ArrayLike, root_depth_m: ArrayLike) -> np.ndarray:
    """Water that the roots can hold TAW, eq. 82. [mm]

    Examples
    --------
    >>> total_available_water(0.32, 0.12, 0.8).round(1).item()
    160.0
    """
    return 1000.0 * (np.asarray(theta_fc, float) - np.asarray(theta_wp, float)) * np.asarray(root_depth_m, float)


def depletion_fraction(p_table: ArrayLike, etc_mm: ArrayLike) -> np.ndarray:
    """Share p of TAW that is taken up without stress, for the day's ETc (p. 162), 0.1-0.8.

    Examples
    --------
    >>> depletion_fraction(0.55, [5.0, 9.0, 0.0]).round(2)
    array([0.55, 0.39, 0.75])
    """
    p = np.asarray(p_table, float) + 0.04 * (5.0 - np.asarray(etc_mm, float))
    return np.minimum(np.maximum(p, LEAST_P), MOST_P)


def stress_coefficient(depletion_mm: ArrayLike, taw_mm: ArrayLike, raw_mm: ArrayLike) -> np.ndarray:
    """Water stress coefficient Ks, eq. 84: 1 up to RAW, falling to 0 at TAW.

    Examples
    --------
    >>> stress_coefficient([55.0, 67.0, 160.0, 170.0], 160.0, 64.0).round(2)
    array([1.  , 0.97, 0.  , 0.  ])
    """
    taw = np.asarray(taw_mm, float)
    span = np.maximum(taw - np.asarray(raw_mm, float), TINY)
    return unit_interval((taw - np.asarray(depletion_mm, float)) / span)


def deepen_roots(
    dr_mm: ArrayLike, ds_mm: ArrayLike, root_depth_before_m: ArrayLike, root_depth_m: ArrayLike, profile_m: ArrayLike
) -> tuple[np.ndarray, np.ndarray]:
    """Depletions after the roots have grown into the soil below, which brings what it lacks (p. 173).

    Returns
    -------
    dr, ds : ndarray
        Depletion of the root zone and of the soil below it down to the profile depth; their sum is kept. [mm]

    Examples
    --------
    >>> dr, ds = deepen_roots(20.0, 60.0, 0.5, 1.0, 2.0)
    >>> dr.item(), ds.item()
    (40.0, 40.0)
    """
    ds, before = np.asarray(ds_mm, float), np.asarray(root_depth_before_m, float)
    grown = np.maximum(np.asarray(root_depth_m, float) - before, ZERO)
    gained = ds * (grown / np.maximum(np.asarray(profile_m, float) - before, TINY))
    return np.asarray(dr_mm, float) + gained, ds - gained


def shrink_roots(
    dr_mm: ArrayLike,
    ds_mm: ArrayLike,
    surface_depletion_mm: ArrayLike,
    root_depth_before_m: ArrayLike,
    root_depth_m: ArrayLike,
    taw_mm: ArrayLike,
) -> tuple[np.ndarray, np.ndarray]:
    """Depletions after the season's end has left a shallower root zone: it keeps its share, the rest goes below.

    Parameters
    ----------
    dr_mm, ds_mm : array_like
        Depletion of the root zone and of the soil below it. [mm]
    surface_depletion_mm : array_like
        few De: what evaporation has drawn from the top, which the shallow zone keeps at least. [mm]
    root_depth_before_m, root_depth_m : array_like
        Root depth before and now; where it has not shrunk nothing changes. [m]
    taw_mm : array_like
        What the new root zone can hold; its depletion is not more. [mm]

    Returns
    -------
    dr, ds : ndarray
        Their sum is kept. [mm]

    Examples
    --------
    >>> dr, ds = shrink_roots([80.0, 80.0], 10.0, [12.0, 30.0], 1.2, 0.3, 40.0)
    >>> dr, ds
    (array([20., 30.]), array([70., 60.]))
    """
    dr, before, now = (np.asarray(a, float) for a in (dr_mm, root_depth_before_m, root_depth_m))
    share = np.maximum(dr * (now / np.maximum(before, TINY)), surface_depletion_mm)
    kept = np.where(now < before, np.minimum(np.minimum(share, taw_mm), dr), dr)
    return kept, np.asarray(ds_mm, float) + (dr - kept)


def days_to_stress(depletion_mm: ArrayLike, raw_mm: ArrayLike, et_mean_mm: ArrayLike) -> np.ndarray:
    """Days until the readily available water is used at the recent rate; 0 is now. [d]

    Examples
    --------
    >>> days_to_stress([30.0, 70.0], 60.0, 6.0)
    array([5., 0.])
    """
    left = np.maximum(np.asarray(raw_mm, float) - np.asarray(depletion_mm, float), ZERO)
    return left / np.maximum(np.asarray(et_mean_mm, float), 0.01)
