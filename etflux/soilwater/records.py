"""What a stand is (Soil), what it carries (State), what comes to it (Forcing) and what it gives (Fluxes).

Every array has the shape (unit,), or batch axes in front of it; a scalar stands for all units.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np

from etflux.soilwater import equations as eq

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
    surface_uptake : bool
        Whether roots also take water from the drying layer (the term Tew of FAO-56 eq. 77).
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
    surface_uptake: bool = False

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


def cut(record: Any, part: Any) -> Any:
    """The same record with every array cut along its last axis; scalars stay."""
    return replace(
        record, **{name: value[..., part] for name, value in vars(record).items() if name in record.__dataclass_fields__
                   and np.ndim(value)}
    )  # fmt: skip
