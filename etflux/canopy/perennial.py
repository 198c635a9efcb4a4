"""Covers that stay: sod, hay, trees, water, bare ground; green by season or all year, set back by cuts."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from etflux import marks as marking
from etflux.canopy.curves import Grown, StageClimate
from etflux.canopy.observed import Seen, positions
from etflux.crops import CUT_BACK_DAYS, Stage, piecewise
from etflux.variables import flag_bits

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings
    from etflux.weather import StationRecord

FAR = 1e6


def grow(units: pd.DataFrame, record: StationRecord, settings: Settings, seen: Seen) -> Grown:
    """Growth of perennial covers and of ground without plants.

    Parameters
    ----------
    units : DataFrame
        Other than annual units of ``stands.expand``.
    record : StationRecord
        Filled.
    settings : Settings
    seen : Seen
        Of these units.

    Returns
    -------
    Grown
        marks greenup, freeze, end, full_season as (year, unit); NaN for covers that are the same all year.
    """
    n_days, n_units = len(record.dates), len(units)
    day = np.arange(n_days, dtype=float)[:, None]
    seasonal = (units["marks"] == "green-up").to_numpy()
    climate = StageClimate.of(record)
    years, basis = _seasons(units, record, settings, seasonal)

    ini, mid, end, dormant = (units[name].to_numpy(float) for name in ("kcb_ini", "kcb_mid", "kcb_end", "kcb_dormant"))
    zero = np.zeros(n_units)
    full, _ = climate.adjusted(mid, units, zero, np.where(seasonal, zero, n_days), settings)
    kcb = np.broadcast_to(np.where(seasonal, dormant, full), (n_days, n_units)).copy()
    bare = ((units["habit"] == "bare") | (units["kcb_mid"] <= 0.0)).to_numpy()
    always = np.where(bare, Stage.BARE, Stage.MIDDLE)
    stage = np.broadcast_to(np.where(seasonal, Stage.DORMANT, always), (n_days, n_units)).astype(np.int8)
    provisional = np.zeros((n_days, n_units), dtype=np.uint8)
    bits = flag_bits("provisional")
    for season in years:
        knots = np.nan_to_num(_knots(units, season), nan=FAR)
        greenup, first, second, late, finish = knots
        over = np.nan_to_num(season["end"], nan=FAR)
        mid_now, mid_open = climate.adjusted(mid, units, second, np.minimum(late, over), settings)
        end_now, end_open = climate.adjusted(end, units, late, np.minimum(finish, over), settings)
        inside = (day >= greenup) & (day < over) & seasonal
        values = np.stack([ini, ini, mid_now, mid_now, end_now])
        kcb = np.where(inside, piecewise(day, np.maximum.accumulate(knots, axis=0), values), kcb)
        for begin, code in zip(
            (greenup, first, second, late), (Stage.INITIAL, Stage.DEVELOPMENT, Stage.MIDDLE, Stage.LATE), strict=True
        ):
            stage[inside & (day >= begin)] = code
        moving = (mid_open & (day >= first)) | (end_open & (day >= late))
        provisional |= np.where(inside & moving, bits["climate_adjustment"], 0).astype(np.uint8)
        unsettled = ~season["settled"] & (day >= np.nan_to_num(season["greenup"], nan=FAR) - 30.0) & seasonal
        provisional |= np.where(unsettled, bits["greenup"], 0).astype(np.uint8)
        started = season["greenup"] < n_days  # the season's own height of the curve
        full = np.where(seasonal & started, mid_now, full)
    kcb = _cut_back(kcb, ini, settings, seen.cuts, day)
    marks = {name: np.array([season[name] for season in years]) for name in ("greenup", "freeze", "end")}
    marks["full_season"] = np.array([_knots(units, season)[2] for season in years])
    grazed = units["cutting"].isin(("averaged", "dated")).to_numpy()
    share = np.where(grazed, np.minimum(kcb / np.where(full > 0.0, full, 1.0), 1.0), 1.0)
    return Grown(stage, kcb, share, provisional, np.where(full > 0.0, full, mid), marks, basis)


def _seasons(
    units: pd.DataFrame, record: StationRecord, settings: Settings, seasonal: np.ndarray
) -> tuple[list[dict[str, np.ndarray]], dict[str, np.ndarray]]:
    """Green-up, first freeze of autumn and end of every year, by unit; and what the last green-up rests on."""
    station = units["station_index"].to_numpy(int)
    entered = positions(units["greenup_date"], record.dates[0])
    first_year = int(str(record.dates[0].astype("datetime64[Y]"))) - 1
    last_year = int(str(record.dates[-1].astype("datetime64[Y]")))
    basis = {"marks": np.full(len(units), "all year", dtype=object)}
    years = []
    for year in range(first_year, last_year + 1):
        at = marking.freeze_marks(record, settings, year)
        january, next_january = (
            (np.datetime64(f"{y:04d}-01-01", "D") - record.dates[0]).astype(int) for y in (year, year + 1)
        )
        mine = (entered >= january) & (entered < next_january)
        greenup = np.where(mine, entered, at["greenup"][station])
        season = {"greenup": greenup, "freeze": at["freeze"][station], "end": at["end"][station]}
        here = seasonal & ~(season["end"] < 0.0)  # not over before the record starts
        season = {name: np.where(here, days, np.nan) for name, days in season.items()}
        season["settled"] = mine | (at["settled"] | at["defaulted"])[station]
        years.append(season)
        default = np.where(at["defaulted"][station], "mean green-up of the latitude, a default", "freezes")
        how = np.where(mine, "green-up entered", default)
        shown = seasonal & (greenup < len(record.dates))
        basis["marks"] = np.where(shown, how, basis["marks"]).astype(object)
    return years, basis


def _knots(units: pd.DataFrame, season: dict[str, np.ndarray]) -> np.ndarray:
    """Green-up, start of development, full cover, late season, end of the curve.

    Without lengths of the middle and late stages the cover is full until the first freeze of autumn.
    """
    first, second, middle, late = (
        units[name].to_numpy(float) for name in ("len_ini_d", "len_dev_d", "len_mid_d", "len_late_d")
    )
    greenup = season["greenup"]
    start = greenup + np.nan_to_num(first)
    full = start + np.nan_to_num(second)
    late_from = np.fmin(full + middle, season["freeze"])
    finish = np.fmin(late_from + late, season["end"])
    return np.stack([greenup, start, full, late_from, finish])


def _cut_back(kcb: np.ndarray, ini: np.ndarray, settings: Settings, cuts: np.ndarray, day: np.ndarray) -> np.ndarray:
    """Cutting or grazing sets the cover back; it regrows to where the season would have it.

    [FAO56] table 11, alfalfa, other cutting cycles: five days at the start, then up again. The slight decline before
    the next cut (table 17, note 14) is left out.
    """
    if not cuts.any():
        return kcb
    last = np.maximum.accumulate(np.where(cuts, day, -np.inf), axis=0)
    with np.errstate(invalid="ignore"):
        share = np.clip((day - last - CUT_BACK_DAYS) / settings.regrowth_days, 0.0, 1.0)
    back = np.minimum(ini, kcb)
    return back + share * (kcb - back)
