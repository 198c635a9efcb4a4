"""A season of days: parameters and start from the units, the loop over days, and the closure of the balance."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import fields
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from etflux.findings import Finding
from etflux.irrigation import Events, Rule
from etflux.soilwater import equations as eq
from etflux.soilwater.records import Fluxes, Forcing, Soil, State, cut
from etflux.soilwater.step import day_step

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings

STORES = ("de_mm", "dr_mm", "ds_mm", "snow_mm")
DAILY = (*(field.name for field in fields(Fluxes)), *STORES)
BLOCK_UNITS = 8192  # fewer: the cost of calls; more: one day's arrays of a block leave the processor's cache

_IN = ("rain_stand_mm", "irrigation_mm", "capillary_rise_mm")
_OUT = ("runoff_mm", "drainage_mm", "evaporation_mm", "transpiration_mm")


def soil_from_units(units: pd.DataFrame, settings: Settings) -> Soil:
    """Parameters of the units.

    Parameters
    ----------
    units : DataFrame
        One row per unit: available_water_mm_m (blank: 1000 (theta_fc - theta_wp)), theta_fc, theta_wp,
        evaporation_depth_m, tew_mm, rew_mm, root_max_m, curve_number, residue_share, fw_method, is_drip, efficiency,
        water_regime, depletion_fraction, habit.
    settings : Settings
        profile_depth_m, melt_factor_mm and surface_root_uptake.

    Returns
    -------
    Soil
        The profile is as deep as the setting says, or as the roots where they go deeper.
    """

    def column(name: str) -> np.ndarray:
        return units[name].to_numpy(float)

    texture = 1000.0 * (column("theta_fc") - column("theta_wp"))
    given = column("available_water_mm_m")
    return Soil(
        available_water_mm_m=np.where(np.isnan(given), texture, given),
        theta_wp=column("theta_wp"),
        evaporation_depth_m=column("evaporation_depth_m"),
        tew_mm=column("tew_mm"),
        rew_mm=column("rew_mm"),
        profile_depth_m=np.fmax(settings.profile_depth_m, column("root_max_m")),
        curve_number=column("curve_number"),
        residue_share=column("residue_share"),
        wetted_fraction=column("fw_method"),
        is_drip=column("is_drip"),
        efficiency=column("efficiency"),
        loss_to_air=(units["water_regime"] == "sprinkler").to_numpy(bool),
        p_table=column("depletion_fraction"),
        open_water=(units["habit"] == "water").to_numpy(bool),
        melt_factor_mm=settings.melt_factor_mm,
        surface_uptake=settings.surface_root_uptake,
    )


def start_state(soil: Soil, settings: Settings, root_depth_m: ArrayLike, water_share: ArrayLike | None = None) -> State:
    """State before the first day: one share of available water in the whole profile.

    Parameters
    ----------
    soil : Soil
        Parameters of the units.
    settings : Settings
        start_water_share, unless `water_share` is given.
    root_depth_m : array_like, shape (unit,)
        Root depth on the first day. [m]
    water_share : array_like, optional
        Share of available water per unit, 0-1.

    Returns
    -------
    State
        The drying layer lacks as much as the root zone, at most TEW; all of the surface counts as wetted alike.
    """
    roots = np.asarray(root_depth_m, float)
    share = np.asarray(settings.start_water_share if water_share is None else water_share, float)
    lack = (1.0 - share) * soil.available_water_mm_m
    dr = np.where(soil.open_water, 0.0, lack * roots)
    ds = np.where(soil.open_water, 0.0, lack * (soil.profile_depth_m - roots))
    de = np.where(soil.open_water, 0.0, np.minimum(soil.tew_mm, dr))
    full = np.ones_like(dr)
    return State(
        de_mm=de,
        de_dry_mm=de,
        dr_mm=dr,
        ds_mm=ds,
        root_depth_m=np.where(soil.open_water, 0.0, roots),
        fw=full,
        few=full,
        snow_mm=np.zeros_like(dr),
        p=soil.p_table * full,
        et_1_mm=np.full_like(dr, np.nan),
        et_2_mm=np.full_like(dr, np.nan),
        days_since_irrigation=np.full_like(dr, 1000.0),
        season_gross_mm=np.zeros_like(dr),
        in_window=np.zeros(dr.shape, bool),
    )


def season(
    soil: Soil,
    forcing: Forcing,
    state: State,
    rule: Rule | None = None,
    events: Events | None = None,
    keep: Sequence[str] = DAILY,
    block_units: int = BLOCK_UNITS,
    out: dict[str, np.ndarray] | None = None,
) -> tuple[dict[str, np.ndarray], State]:
    """Run all days of a record, or a stretch of it: the state that comes back starts the next stretch.

    Parameters
    ----------
    soil : Soil
        Parameters of the units.
    forcing : Forcing
        Arrays of shape (day, ..., unit); a scalar stands for all days and units.
    state : State
        Before the first day.
    rule : Rule, optional
        Irrigation rules, shape (unit,).
    events : Events, optional
        Dated irrigations, days counted from the first of `forcing`.
    keep : sequence of str
        Names of :data:`DAILY` to return.
    block_units : int
        Units run together; changes speed, not results.
    out : dict of str to ndarray, optional
        Arrays to fill, from an earlier call of the same shape; a long run saves the cost of fresh memory.

    Returns
    -------
    daily : dict of str to ndarray, shape (day, ..., unit)
        By the names of the results.
    state : State
        After the last day.

    Raises
    ------
    ValueError
        If the arrays do not have the same days and units.
    """
    given = {field.name: getattr(forcing, field.name) for field in fields(Forcing)}
    shapes = {name: np.shape(value) for name, value in given.items() if np.ndim(value)}
    n_days, *_, n_units = shapes["eto_mm"]
    for name, shape in shapes.items():
        if (shape[0], shape[-1]) != (n_days, n_units):
            raise ValueError(f"{name} has the shape {shape}: must have {n_days} days first and {n_units} units last")
    shape = np.broadcast_shapes(state.dr_mm.shape, *(shape[1:] for shape in shapes.values()))
    state = State(**{name: np.broadcast_to(value, shape) for name, value in vars(state).items()})
    daily = {name: np.empty((n_days, *shape)) for name in keep} if out is None else {name: out[name] for name in keep}
    ends = [
        _block(cut(soil, part), given, cut(state, part), rule and cut(rule, part), events, daily, part)
        for part in _parts(n_units, block_units // max(1, int(np.prod(shape[:-1]))))
    ]
    names = [field.name for field in fields(State)]
    return daily, State(**{name: np.concatenate([getattr(end, name) for end in ends], axis=-1) for name in names})


def _parts(n_units: int, block_units: int) -> list[slice]:
    """Even parts of at most `block_units`."""
    ends = np.linspace(0, n_units, -(-n_units // max(1, block_units)) + 1).astype(int)
    return [slice(int(first), int(last)) for first, last in itertools.pairwise(ends)]


def _block(
    soil: Soil,
    given: Mapping[str, Any],
    state: State,
    rule: Rule | None,
    events: Events | None,
    daily: Mapping[str, np.ndarray],
    part: slice,
) -> State:
    """Run the days of one block of units and write them into `daily`."""
    arrays = {name: value[..., part] for name, value in given.items() if np.ndim(value)}
    constant = {name: value for name, value in given.items() if np.ndim(value) == 0}
    dated = _dated(events, part)
    parts = {name: values[..., part] for name, values in daily.items()}
    shape = state.dr_mm.shape
    for day in range(len(arrays["eto_mm"])):
        today = {**constant, **{name: values[day] for name, values in arrays.items()}}
        if day in dated:
            gross = np.zeros(shape)
            unit, depth = dated[day]
            np.add.at(gross.T, unit, depth.reshape(-1, *(1,) * (len(shape) - 1)))  # one stand may have two that day
            today["irrigation_gross_mm"] = today["irrigation_gross_mm"] + gross
        state, fluxes = day_step(state, soil, Forcing(**today), rule)
        of_the_day = {**vars(state), **vars(fluxes)}
        for name, values in parts.items():
            values[day] = of_the_day[name]
    return State(**{name: np.broadcast_to(value, shape) for name, value in vars(state).items()})


def _dated(events: Events | None, part: slice) -> dict[int, tuple[np.ndarray, np.ndarray]]:
    """Irrigations of one block of units: day to positions in the block and gross depths."""
    if events is None:
        return {}
    here = (events.unit >= part.start) & (events.unit < part.stop)
    day, unit, gross = events.day[here], events.unit[here] - part.start, events.gross_mm[here]
    return {int(when): (unit[day == when], gross[day == when]) for when in np.unique(day)}


def closure(daily: Mapping[str, np.ndarray], start: State, end: State) -> np.ndarray:
    """What a stretch of days fails to account for: 0 to rounding when no water appeared or vanished.

    Rain, irrigation that reaches the ground and capillary rise, less runoff, drainage, evaporation, transpiration and
    the change of what root zone, soil below and snow hold. Melt moves water within, and sprinkler loss never reaches
    the ground: neither is a term.

    Parameters
    ----------
    daily : mapping
        What :func:`season` returned for the days from `start` to `end`.
    start : State
        Before the first day.
    end : State
        After the last day.

    Returns
    -------
    ndarray, shape (..., unit)
        In less out less change of storage; NaN where the season stopped. [mm]
    """
    flows = sum(daily[name].sum(axis=0) for name in _IN) - sum(daily[name].sum(axis=0) for name in _OUT)
    return flows - (_stored(vars(end)) - _stored(vars(start)))


def daily_closure(daily: Mapping[str, np.ndarray], start: State) -> np.ndarray:
    """:func:`closure` of every day, shape (day, ..., unit). [mm]"""
    flows = sum(daily[name] for name in _IN) - sum(daily[name] for name in _OUT)
    stored = _stored(daily)
    first = np.broadcast_to(_stored(vars(start)), stored.shape[1:])
    return flows - np.diff(stored, axis=0, prepend=first[None])


def _stored(stores: Mapping[str, Any]) -> np.ndarray:
    """Water held, counted from field capacity. [mm]"""
    return stores["snow_mm"] - stores["dr_mm"] - stores["ds_mm"]


def roots_to_check(
    ks: ArrayLike, by_texture: ArrayLike, rainfed: ArrayLike, below: float, days: int = 10
) -> np.ndarray:
    """Whether a unit's stress is so long that its root depth or a water table is in question.

    Parameters
    ----------
    ks : array_like, shape (day, ..., unit)
        Stress coefficient.
    by_texture, rainfed : array_like of bool, shape (unit,)
        Whether available water is known by texture alone; whether the unit is not irrigated.
    below : float
        Ks under which a day counts.
    days : int
        Days in a row.

    Returns
    -------
    ndarray of bool, shape (..., unit)
    """
    low = np.asarray(ks, float) < below
    if len(low) < days:
        return np.zeros(low.shape[1:], bool)
    counted = np.cumsum(low, axis=0, dtype=np.int32)
    in_a_row = counted[days - 1 :].copy()
    in_a_row[1:] -= counted[:-days]
    return (in_a_row == days).any(axis=0) & np.asarray(by_texture, bool) & np.asarray(rainfed, bool)


def soil_problems(soils: pd.DataFrame) -> list[Finding]:
    """Soils that hold no available water, or whose readily evaporable water is not below the total (eq. 73).

    Parameters
    ----------
    soils : DataFrame
        The table soils of a case; a blank evaporation_depth_m means 0.10 m.
    """
    fc, wp, rew = (soils[name].to_numpy(float) for name in ("theta_fc", "theta_wp", "rew_mm"))
    depth = soils["evaporation_depth_m"].to_numpy(float) if "evaporation_depth_m" in soils else np.full(len(soils), 0.1)
    tew = eq.total_evaporable_water(fc, wp, np.where(np.isnan(depth), 0.1, depth))
    found = []
    for code, name, values, wrong, detail in (
        ("wilting-point-not-below-field-capacity", "theta_wp", wp, wp >= fc, fc),
        ("rew-not-below-tew", "rew_mm", rew, rew >= tew, tew),
    ):
        found += [
            Finding(code, "soils", int(row), name, float(values[row]), f"soil {soils['soil_id'].iloc[row]}",
                    f"here {detail[row]:.3g}")
            for row in np.flatnonzero(wrong)
        ]  # fmt: skip
    return found
