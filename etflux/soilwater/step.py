"""One day of the soil water balance of all units at once: the dual crop coefficient method of FAO-56.

The order of a day is that of :func:`day_step`: roots, irrigation, snow and runoff, the surface that is wet, its
depletion, evaporation, root zone, limits, transpiration and stress, percolation. All water comes early in the day
(FAO-56 Examples 35 and 38). Two stores keep water: the root zone (depletion Dr, which contains the drying layer's De)
and the soil below it down to the profile depth (Ds), which returns what it holds when roots grow into it.

Every array has the shape (unit,), or batch axes in front of it; a scalar stands for all units.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, NamedTuple

import numpy as np

from etflux import irrigation
from etflux.irrigation import Rule
from etflux.soilwater import equations as eq

WETTING_RAIN_MM = 3.0  # rain that wets all of the surface, FAO-56 p. 149
WP_SHARE_LEFT = 500.0  # mm per m of theta_wp: evaporation dries the layer to half of wilting point, FAO-56 eq. 73


@dataclass(frozen=True)
class Soil:
    """What does not change from day to day, per unit.

    Parameters
    ----------
    available_water_mm_m : ndarray
        Water held between field capacity and wilting point. [mm m-1]
    theta_wp : ndarray
        Wilting point. [m3 m-3]
    evaporation_depth_m, tew_mm, rew_mm : ndarray
        The drying layer: depth Ze [m], total and readily evaporable water [mm].
    profile_depth_m : ndarray
        Depth of both stores together, at least the greatest root depth. [m]
    curve_number : ndarray
        For antecedent condition II.
    residue_share : ndarray
        Ground under crop residue, 0-1.
    wetted_fraction, is_drip : ndarray
        Ground wetted by the irrigation method, 0.01-1; whether emitters stand under the plants.
    efficiency, loss_to_air : ndarray
        Net over gross irrigation, above 0 to 1; whether the loss evaporates (sprinkler) or passes below the roots.
    p_table : ndarray
        Depletion fraction at ETc = 5 mm/d, 0.1-0.8.
    open_water : ndarray of bool
        Units that are water: Kcb ETo evaporates, brought by capillary_rise; rain runs off.
    melt_factor_mm : float
        Snow melt. [mm degC-1 d-1]
    """

    available_water_mm_m: np.ndarray
    theta_wp: np.ndarray
    evaporation_depth_m: np.ndarray
    tew_mm: np.ndarray
    rew_mm: np.ndarray
    profile_depth_m: np.ndarray
    curve_number: np.ndarray
    residue_share: np.ndarray
    wetted_fraction: np.ndarray
    is_drip: np.ndarray
    efficiency: np.ndarray
    loss_to_air: np.ndarray
    p_table: np.ndarray
    open_water: np.ndarray
    melt_factor_mm: float = 4.0

    @cached_property
    def cn_dry(self) -> np.ndarray:
        """Curve number for antecedent condition I."""
        return eq.curve_number_dry(self.curve_number)

    @cached_property
    def cn_wet(self) -> np.ndarray:
        """Curve number for antecedent condition III."""
        return eq.curve_number_wet(self.curve_number)

    @cached_property
    def wetness_limits(self) -> tuple[np.ndarray, np.ndarray]:
        """Depletions of the drying layer between which the curve number falls from III to I. [mm]"""
        return eq.wetness_limits(self.rew_mm, self.tew_mm)

    @cached_property
    def drip_shade(self) -> np.ndarray:
        """Shading of the ground that drip wets."""
        return eq.DRIP_SHADE * np.asarray(self.is_drip, float)

    @cached_property
    def bare_share(self) -> np.ndarray:
        """Part of the evaporation that residue lets through."""
        return eq.bare_share(self.residue_share)

    @cached_property
    def layer_available_mm(self) -> np.ndarray:
        """Water of the drying layer that plants can take too: 1000 (theta_fc - theta_wp) Ze. [mm]"""
        return self.available_water_mm_m * self.evaporation_depth_m

    @cached_property
    def below_wilting_mm(self) -> np.ndarray:
        """Water of the drying layer below wilting point, for evaporation alone: 500 theta_wp Ze. [mm]"""
        return WP_SHARE_LEFT * self.theta_wp * self.evaporation_depth_m

    @cached_property
    def has_open_water(self) -> bool:
        """Whether any unit is open water."""
        return bool(np.any(self.open_water))


@dataclass(frozen=True)
class State:
    """What a unit carries into the next day: enough to go on from, so a checkpoint is a State.

    Parameters
    ----------
    de_mm, de_dry_mm : ndarray
        Depletion of the drying layer, in the wetted part and in the part left dry. [mm per area of the part]
    dr_mm, ds_mm : ndarray
        Depletion of the root zone, and of the soil below it. [mm]
    root_depth_m : ndarray
        Root depth of the day. [m]
    fw, few : ndarray
        Fraction wetted by the last rain or irrigation; exposed and wetted fraction of the day.
    snow_mm : ndarray
        Precipitation held as snow. [mm]
    p : ndarray
        Depletion fraction of the day, which the next day's irrigation rule uses.
    et_1_mm, et_2_mm : ndarray
        Water use of the day and of the day before; NaN at the start. [mm]
    days_since_irrigation : ndarray
        1 the day after an irrigation. [d]
    season_gross_mm : ndarray
        Pumped since the last irrigation window closed. [mm]
    in_window : ndarray of bool
        Whether the day was in the irrigation window.
    """

    de_mm: np.ndarray
    de_dry_mm: np.ndarray
    dr_mm: np.ndarray
    ds_mm: np.ndarray
    root_depth_m: np.ndarray
    fw: np.ndarray
    few: np.ndarray
    snow_mm: np.ndarray
    p: np.ndarray
    et_1_mm: np.ndarray
    et_2_mm: np.ndarray
    days_since_irrigation: np.ndarray
    season_gross_mm: np.ndarray
    in_window: np.ndarray


@dataclass(frozen=True)
class Forcing:
    """What comes from outside on one day, shape (unit,); for a season, shape (day, unit).

    Parameters
    ----------
    eto_mm, rain_mm, t_mean_c : ndarray
        Reference ET, precipitation [mm d-1], mean temperature [degC].
    kcb, kc_max, ground_cover, root_depth_m : ndarray
        Of the canopy: eq. 66-70, eq. 72, eq. 76 or the sod's own fc, and Zr [m].
    irrigation_gross_mm : ndarray
        Dated irrigation. [mm]
    capillary_rise_mm : ndarray
        Rise into the root zone. [mm d-1]
    in_window, late : ndarray of bool
        Whether the irrigation window is open; whether the rule's late depletion holds.
    stress_window : ndarray of bool
        Whether days to stress are worth saying (from V6 to R6).
    """

    eto_mm: np.ndarray
    rain_mm: np.ndarray
    t_mean_c: np.ndarray
    kcb: np.ndarray
    kc_max: np.ndarray
    ground_cover: np.ndarray
    root_depth_m: np.ndarray
    irrigation_gross_mm: Any = 0.0
    capillary_rise_mm: Any = 0.0
    in_window: Any = False
    late: Any = False
    stress_window: Any = True


@dataclass(frozen=True)
class Fluxes:
    """What a day brought, by the names of the results; stores (de_mm, dr_mm, ds_mm, snow_mm) are the State's.

    `irrigation_mm` is what reaches the ground: the net depth, and of a surface method or drip also the loss, which is
    part of `percolation_mm`. `irrigation_gross_mm` = `irrigation_mm` + `sprinkler_loss_mm`. `percolation_mm` leaves
    the root zone, `drainage_mm` the profile. `et_potential_mm` is (Kcb + Ke) ETo.
    """

    ke: np.ndarray
    ks: np.ndarray
    few: np.ndarray
    evaporation_mm: np.ndarray
    transpiration_mm: np.ndarray
    et_mm: np.ndarray
    et_potential_mm: np.ndarray
    taw_mm: np.ndarray
    raw_mm: np.ndarray
    rain_stand_mm: np.ndarray
    melt_mm: np.ndarray
    irrigation_mm: np.ndarray
    irrigation_gross_mm: np.ndarray
    sprinkler_loss_mm: np.ndarray
    capillary_rise_mm: np.ndarray
    runoff_mm: np.ndarray
    percolation_mm: np.ndarray
    drainage_mm: np.ndarray
    need_mm: np.ndarray
    days_to_stress: np.ndarray


def day_step(state: State, soil: Soil, forcing: Forcing, rule: Rule | None = None) -> tuple[State, Fluxes]:
    """Advance every unit by one day.

    Parameters
    ----------
    state : State
        At the end of the day before.
    soil : Soil
        Parameters of the units.
    forcing : Forcing
        Of the day. A NaN stops the unit: its fluxes and its depletions are NaN from this day on.
    rule : Rule, optional
        Irrigation rules; without, only dated depths.

    Returns
    -------
    state, fluxes : State, Fluxes
        At the end of the day, and over the day. Inputs are not changed.

    References
    ----------
    .. [1] Allen et al. (1998), FAO Irrigation and Drainage Paper 56, ch. 7 and 8.
    """
    eto, kcb, kc_max = forcing.eto_mm, forcing.kcb, forcing.kc_max

    # 0. roots; what they reach brings the depletion it has
    taw = soil.available_water_mm_m * forcing.root_depth_m  # eq. 82
    dr, ds = _move_roots(state, soil, forcing.root_depth_m, taw)

    # 1. irrigation, decided on yesterday's p
    water_in = _irrigate(state, soil, forcing, rule, dr, taw)

    # 2. snow and runoff, by the wetness of the drying layer
    water, melt, snow = _snow(state, soil, forcing)
    run_off = _runoff(water, state.de_mm, soil)
    rain_in = water - run_off

    # 3. the part of the surface that is wet, and exposed
    fw, de, de_dry = _wet_surface(state, soil, rain_in, water_in)
    few = eq.exposed_wetted_fraction(forcing.ground_cover, fw, soil.drip_shade, soil.bare_share)

    # 4. depletion of the drying layer after the day's water; a sprinkle evaporates without wetting it
    wetting = rain_in * (water >= eq.SMALL_RAIN_SHARE * eto)
    de_dry = np.maximum(de_dry - wetting, eq.ZERO)
    de = np.maximum(de - (wetting + water_in.net / fw if water_in.any else wetting), eq.ZERO)

    # 5. evaporation, eq. 74 and 71
    kr = eq.evaporation_reduction(de, soil.tew_mm, soil.rew_mm)
    ke = eq.evaporation_coefficient(kr, kcb, kc_max, few, soil.bare_share)
    evaporation = np.minimum(ke * eto, few * (soil.tew_mm - de))

    # 6. root zone after the day's water; what it cannot hold percolates
    dr = dr - rain_in - water_in.net - forcing.capillary_rise_mm
    filled = np.maximum(dr, eq.ZERO)
    percolation = water_in.below + (filled - dr)
    dr = filled

    # 7. evaporation dries the top to half of wilting point, so it may draw more than TAW
    drawable = np.maximum(taw + soil.below_wilting_mm - dr, eq.ZERO)
    evaporation = np.maximum(np.minimum(evaporation, drawable), eq.ZERO)

    # 8. stress and transpiration, eq. 84
    et_potential = (kcb + ke) * eto
    p = eq.depletion_fraction(soil.p_table, et_potential)
    raw = p * taw
    ks = eq.stress_coefficient(_for_plants(dr, de, few, soil), taw, raw)
    transpiration = np.minimum(ks * kcb * eto, drawable - evaporation)
    et = evaporation + transpiration

    # 9. depletions at the day's end; what overfills the soil below the roots drains
    de = de + evaporation / few
    dr = dr + et
    ds = ds - percolation
    filled = np.maximum(ds, eq.ZERO)
    drainage = filled - ds
    ds = filled

    fluxes = {
        "ke": ke,
        "ks": _without_plants(ks, kcb),
        "few": few,
        "evaporation_mm": evaporation,
        "transpiration_mm": transpiration,
        "et_mm": et,
        "et_potential_mm": et_potential,
        "taw_mm": taw,
        "raw_mm": raw,
        "rain_stand_mm": forcing.rain_mm,
        "melt_mm": melt,
        "irrigation_mm": water_in.ground,
        "irrigation_gross_mm": water_in.gross,
        "sprinkler_loss_mm": water_in.to_air,
        "capillary_rise_mm": forcing.capillary_rise_mm,
        "runoff_mm": run_off,
        "percolation_mm": percolation,
        "drainage_mm": drainage,
        "need_mm": np.maximum(dr - (0.0 if rule is None else rule.rain_room_mm), eq.ZERO) * forcing.in_window,
        "days_to_stress": _days_to_stress(state, soil, forcing, dr, de, few, raw, et),
    }
    stores = {"de_mm": de, "dr_mm": dr, "ds_mm": ds, "snow_mm": snow}
    if soil.has_open_water:
        _open_water(fluxes, stores, state, soil, forcing, water)
    lost = np.isnan(stores["dr_mm"])
    if _any(lost):
        fluxes, stores = (
            {name: np.where(lost, np.nan, values) for name, values in part.items()} for part in (fluxes, stores)
        )
    after = State(
        **stores,
        de_dry_mm=de_dry,
        root_depth_m=forcing.root_depth_m,
        fw=fw,
        few=few,
        p=p,
        et_1_mm=et,
        et_2_mm=state.et_1_mm,
        days_since_irrigation=water_in.days_since,
        season_gross_mm=water_in.season_gross,
        in_window=forcing.in_window,
    )
    return after, Fluxes(**fluxes)


def _any(condition: Any) -> bool:
    return bool(np.logical_or.reduce(condition, axis=None))


def _all(condition: Any) -> bool:
    return bool(np.logical_and.reduce(condition, axis=None))


class _WaterIn(NamedTuple):
    """Irrigation of the day, and what the next day's decision needs."""

    any: bool
    net: np.ndarray
    gross: np.ndarray
    to_air: np.ndarray
    below: np.ndarray
    ground: np.ndarray
    season_gross: np.ndarray
    days_since: np.ndarray


def _for_plants(dr: np.ndarray, de: np.ndarray, few: np.ndarray, soil: Soil) -> np.ndarray:
    """Root zone depletion without what the drying layer lacks below wilting point, which plants never had."""
    return dr - few * np.maximum(de - soil.layer_available_mm, eq.ZERO)


def _without_plants(ks: np.ndarray, kcb: np.ndarray) -> np.ndarray:
    """No plants, no stress."""
    bare = kcb <= 0.0
    return np.maximum(ks, bare) if _any(bare) else ks


def _move_roots(state: State, soil: Soil, root_depth_m: np.ndarray, taw: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Depletions of both stores after the day's change of root depth."""
    dr, ds = state.dr_mm, state.ds_mm
    if _any(root_depth_m > state.root_depth_m):
        dr, ds = eq.deepen_roots(dr, ds, state.root_depth_m, root_depth_m, soil.profile_depth_m)
    if _any(root_depth_m < state.root_depth_m):
        dr, ds = eq.shrink_roots(dr, ds, state.few * state.de_mm, state.root_depth_m, root_depth_m, taw)
    return dr, ds


def _irrigate(
    state: State, soil: Soil, forcing: Forcing, rule: Rule | None, dr: np.ndarray, taw: np.ndarray
) -> _WaterIn:
    """Dated irrigation, or else what the rule brings."""
    pumped = state.season_gross_mm
    closed = state.in_window > np.asarray(forcing.in_window)
    if _any(closed):
        pumped = np.where(closed, 0.0, pumped)
    dated = soil.efficiency * forcing.irrigation_gross_mm
    net = dated
    if rule is not None:
        net = irrigation.rule_depth(
            rule, dr, taw, state.p * taw, state.days_since_irrigation, pumped, soil.efficiency, forcing.in_window,
            forcing.late,
        )  # fmt: skip
        net = np.where(dated > 0.0, dated, net) if _any(dated > 0.0) else net
    none = np.logical_not(net > 0.0)
    if _all(none):
        return _WaterIn(False, net, net, net, net, net, pumped, state.days_since_irrigation + 1.0)
    gross, to_air, below = irrigation.gross_parts(net, soil.efficiency, soil.loss_to_air)
    since = state.days_since_irrigation * none + 1.0
    return _WaterIn(True, net, gross, to_air, below, net + below, pumped + gross, since)


def _snow(state: State, soil: Soil, forcing: Forcing) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Water that reaches the ground, melt and snow; where no unit freezes or has snow there is nothing to do."""
    if not _any(state.snow_mm > 0.0) and not _any(np.logical_not(forcing.t_mean_c >= 0.0)):
        return forcing.rain_mm, state.snow_mm, state.snow_mm
    return eq.snow_balance(forcing.rain_mm, forcing.t_mean_c, state.snow_mm, soil.melt_factor_mm)


def _runoff(water: np.ndarray, de: np.ndarray, soil: Soil) -> np.ndarray:
    """Runoff by the curve number of the day; where no unit has water there is none."""
    dry = water == 0.0
    if _all(dry):
        return water
    number = eq.curve_number_today(de, *soil.wetness_limits, soil.cn_dry, soil.curve_number, soil.cn_wet)
    return eq.runoff(water, number)


def _wet_surface(
    state: State, soil: Soil, rain_in: np.ndarray, water_in: _WaterIn
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Wetted fraction after the day's rain and irrigation (p. 149 with its errata), De there and in the part left dry.

    Rain of 3 mm wets all, with or without irrigation; irrigation with less rain wets the method's fraction.
    """
    fw = np.where(water_in.net > 0.0, soil.wetted_fraction, state.fw) if water_in.any else state.fw
    fw = np.maximum(fw, rain_in >= WETTING_RAIN_MM)
    if _all(fw == state.fw):
        return fw, state.de_mm, state.de_dry_mm
    return fw, *eq.rewet_surface(state.de_mm, state.de_dry_mm, state.fw, fw)


def _days_to_stress(
    state: State,
    soil: Soil,
    forcing: Forcing,
    dr: np.ndarray,
    de: np.ndarray,
    few: np.ndarray,
    raw: np.ndarray,
    et: np.ndarray,
) -> np.ndarray:
    """Days to stress at the mean use of three days, blank outside its window."""
    if not _any(forcing.stress_window):
        return np.full_like(dr, np.nan)
    days = eq.days_to_stress(_for_plants(dr, de, few, soil), raw, (et + state.et_1_mm + state.et_2_mm) / 3.0)
    return np.where(forcing.stress_window, days, np.nan)


def _open_water(
    fluxes: dict[str, Any], stores: dict[str, Any], state: State, soil: Soil, forcing: Forcing, water: np.ndarray
) -> None:
    """Put the balance of open water in place of the soil's: Kcb ETo is brought and evaporates, rain runs off."""
    evaporation = forcing.kcb * forcing.eto_mm
    nothing = dict.fromkeys(
        ("transpiration_mm", "irrigation_mm", "irrigation_gross_mm", "sprinkler_loss_mm", "percolation_mm",
         "drainage_mm", "need_mm", "taw_mm", "raw_mm"), 0.0
    )  # fmt: skip
    instead = {
        **nothing, "ke": forcing.kcb, "ks": 1.0, "few": 1.0, "evaporation_mm": evaporation, "et_mm": evaporation,
        "et_potential_mm": evaporation, "capillary_rise_mm": evaporation, "runoff_mm": water, "days_to_stress": np.nan,
    }  # fmt: skip
    stop = 0.0 * (water + evaporation)  # NaN where an input is
    for name, value in instead.items():
        fluxes[name] = np.where(soil.open_water, value, fluxes[name])
    for name, value in (("de_mm", state.de_mm), ("dr_mm", state.dr_mm), ("ds_mm", state.ds_mm)):
        stores[name] = np.where(soil.open_water, value + stop, stores[name])


def cut(record: Any, part: Any) -> Any:
    """The same record with every array cut along its last axis; scalars stay."""
    return replace(
        record, **{name: value[..., part] for name, value in vars(record).items() if name in record.__dataclass_fields__
                   and np.ndim(value)}
    )  # fmt: skip
