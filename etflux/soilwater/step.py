"""One day of the soil water balance of all units at once: the dual crop coefficient method of FAO-56.

The order of a day is that of :func:`day_step`. All water comes early in the day (FAO-56 Examples 35 and 38). Two
stores keep water: the root zone (depletion Dr, which contains the drying layer's De) and the soil below it down to the
profile depth (Ds), which takes what percolates and returns what it holds when roots grow into it.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from etflux import irrigation
from etflux.irrigation import Rule
from etflux.soilwater import equations as eq
from etflux.soilwater.records import Fluxes, Forcing, Soil, State

WETTING_RAIN_MM = 3.0  # rain that wets all of the surface, FAO-56 p. 149


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
    # roots; what they reach brings the depletion it has
    taw = soil.available_water_mm_m * forcing.root_depth_m  # eq. 82
    dr, ds = _move_roots(state, soil, forcing.root_depth_m, taw)

    # irrigation, decided on yesterday's p; snow and runoff; the surface that is wet
    water_in = _irrigate(state, soil, forcing, rule, dr, taw)
    top = _wet_top(state, soil, forcing, water_in)

    # root zone after the day's water, eq. 85; what it cannot hold percolates, eq. 88 before ET as in Example 38
    dr, over = _fill(dr - top.rain_in - water_in.net - forcing.capillary_rise_mm)
    percolation = over + water_in.below

    # evaporation, stress, transpiration
    used = _evapotranspire(soil, forcing, top, dr, taw)

    # depletions at the day's end; what overfills the soil below the roots drains
    de = _dried(soil, forcing, top, used, dr, taw)
    dr = dr + used.et
    ds, drainage = _fill(ds - percolation)

    stores = {"de_mm": de, "dr_mm": dr, "ds_mm": ds, "snow_mm": top.snow}
    fluxes = _fluxes(forcing, water_in, top, used) | {
        "taw_mm": taw,
        "percolation_mm": percolation,
        "drainage_mm": drainage,
        "need_mm": np.maximum(dr - (0.0 if rule is None else rule.rain_room_mm), eq.ZERO) * forcing.in_window,
        "days_to_stress": _days_to_stress(state, soil, forcing, top.few, used, dr, de),
    }
    if soil.has_open_water:
        _open_water(fluxes, stores, state, soil, forcing, top.water)
    fluxes, stores = _stopped(fluxes, stores)
    return _after(state, forcing, water_in, top, used, stores), Fluxes(**fluxes)


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


class _Top(NamedTuple):
    """Rain and melt of the day, and the surface after them: wetted fractions, depletions of its wet and dry part."""

    water: np.ndarray
    melt: np.ndarray
    snow: np.ndarray
    run_off: np.ndarray
    rain_in: np.ndarray
    fw: np.ndarray
    few: np.ndarray
    de: np.ndarray
    de_dry: np.ndarray


class _Used(NamedTuple):
    """Water use of the day and its coefficients."""

    ke: np.ndarray
    ks: np.ndarray
    p: np.ndarray
    raw: np.ndarray
    evaporation: np.ndarray
    transpiration: np.ndarray
    et: np.ndarray
    et_potential: np.ndarray


def _any(condition: Any) -> bool:
    return bool(np.logical_or.reduce(condition, axis=None))


def _all(condition: Any) -> bool:
    return bool(np.logical_and.reduce(condition, axis=None))


def _fill(depletion: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Depletion not below 0, and the water that a full store passes on."""
    kept = np.maximum(depletion, eq.ZERO)
    return kept, kept - depletion


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


def _wet_top(state: State, soil: Soil, forcing: Forcing, water_in: _WaterIn) -> _Top:
    """Snow, runoff, and the drying layer after the day's water."""
    water, melt, snow = _snow(state, soil, forcing)
    run_off = _runoff(water, state.de_mm, soil)
    rain_in = water - run_off

    fw, de, de_dry = _wet_surface(state, soil, rain_in, water_in)
    few = eq.exposed_wetted_fraction(forcing.ground_cover, fw, soil.drip_shade, soil.bare_share)

    # a sprinkle evaporates without wetting the layer, p. 153; the root zone gets it
    wetting = rain_in * (water >= eq.SMALL_RAIN_SHARE * forcing.eto_mm)
    de_dry = np.maximum(de_dry - wetting, eq.ZERO)
    de = np.maximum(de - (wetting + water_in.net / fw if water_in.any else wetting), eq.ZERO)
    return _Top(water, melt, snow, run_off, rain_in, fw, few, de, de_dry)


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


def _evapotranspire(soil: Soil, forcing: Forcing, top: _Top, dr: np.ndarray, taw: np.ndarray) -> _Used:
    """Evaporation within its energy, its layer and the root zone; stress; transpiration within what is left."""
    eto, kcb = forcing.eto_mm, forcing.kcb
    kr = eq.evaporation_reduction(top.de, soil.tew_mm, soil.rew_mm)
    ke = eq.evaporation_coefficient(kr, kcb, forcing.kc_max, top.few, soil.bare_share)
    evaporation = np.minimum(ke * eto, top.few * (soil.tew_mm - top.de))

    # evaporation dries the top to half of wilting point, so it may draw more than TAW
    drawable = np.maximum(taw + soil.below_wilting_mm - dr, eq.ZERO)
    evaporation = np.maximum(np.minimum(evaporation, drawable), eq.ZERO)

    et_potential = (kcb + ke) * eto
    p = eq.depletion_fraction(soil.p_table, et_potential)
    raw = p * taw
    ks = eq.stress_coefficient(_for_plants(dr, top.de, top.few, soil), taw, raw)
    transpiration = np.minimum(ks * kcb * eto, drawable - evaporation)
    return _Used(ke, ks, p, raw, evaporation, transpiration, evaporation + transpiration, et_potential)


def _dried(soil: Soil, forcing: Forcing, top: _Top, used: _Used, dr: np.ndarray, taw: np.ndarray) -> np.ndarray:
    """Depletion of the drying layer at the day's end, eq. 77; by evaporation, and by roots if they are asked for."""
    de = top.de + used.evaporation / top.few
    if not soil.surface_uptake:
        return de
    return de + eq.surface_uptake(
        used.transpiration, de, soil.tew_mm, dr + used.evaporation, taw, soil.evaporation_depth_m,
        forcing.root_depth_m, soil.layer_available_mm,
    )  # fmt: skip


def _for_plants(dr: np.ndarray, de: np.ndarray, few: np.ndarray, soil: Soil) -> np.ndarray:
    """Root zone depletion without what the drying layer lacks below wilting point, which plants never had."""
    return dr - few * np.maximum(de - soil.layer_available_mm, eq.ZERO)


def _without_plants(ks: np.ndarray, kcb: np.ndarray) -> np.ndarray:
    """No plants, no stress."""
    bare = kcb <= 0.0
    return np.maximum(ks, bare) if _any(bare) else ks


def _days_to_stress(
    state: State, soil: Soil, forcing: Forcing, few: np.ndarray, used: _Used, dr: np.ndarray, de: np.ndarray
) -> np.ndarray:
    """Days to stress at the mean use of three days, blank outside its window."""
    if not _any(forcing.stress_window):
        return np.full_like(dr, np.nan)
    mean = (used.et + state.et_1_mm + state.et_2_mm) / 3.0
    days = eq.days_to_stress(_for_plants(dr, de, few, soil), used.raw, mean)
    return np.where(forcing.stress_window, days, np.nan)


def _fluxes(forcing: Forcing, water_in: _WaterIn, top: _Top, used: _Used) -> dict[str, Any]:
    """Fluxes that need no depletion of the day's end."""
    return {
        "ke": used.ke,
        "ks": _without_plants(used.ks, forcing.kcb),
        "few": top.few,
        "evaporation_mm": used.evaporation,
        "transpiration_mm": used.transpiration,
        "et_mm": used.et,
        "et_potential_mm": used.et_potential,
        "raw_mm": used.raw,
        "rain_stand_mm": forcing.rain_mm,
        "melt_mm": top.melt,
        "irrigation_mm": water_in.ground,
        "irrigation_gross_mm": water_in.gross,
        "sprinkler_loss_mm": water_in.to_air,
        "capillary_rise_mm": forcing.capillary_rise_mm,
        "runoff_mm": top.run_off,
    }


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


def _stopped(fluxes: dict[str, Any], stores: dict[str, Any]) -> tuple[dict[str, Any], dict[str, Any]]:
    """Fluxes and stores with all of a unit blank whose root zone is not known."""
    lost = np.isnan(stores["dr_mm"])
    if not _any(lost):
        return fluxes, stores
    blank = [{name: np.where(lost, np.nan, value) for name, value in part.items()} for part in (fluxes, stores)]
    return blank[0], blank[1]


def _after(state: State, forcing: Forcing, water_in: _WaterIn, top: _Top, used: _Used, stores: dict[str, Any]) -> State:
    """State at the day's end."""
    return State(
        **stores,
        de_dry_mm=top.de_dry,
        root_depth_m=forcing.root_depth_m,
        fw=top.fw,
        few=top.few,
        p=used.p,
        et_1_mm=used.et,
        et_2_mm=state.et_1_mm,
        days_since_irrigation=water_in.days_since,
        season_gross_mm=water_in.season_gross,
        in_window=forcing.in_window,
    )
