"""Numbers of one day for people, and the closure of the water balance as a table."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import ArrayLike

from etflux.crops import Stage
from etflux.variables import flag_bits

if TYPE_CHECKING:
    from etflux.results.record import Results

# How far a county's contribution can be relied on, from least to most: the order of the brief. A county has the worst
# word that a flag, a far profile or a day that may still move gives it.
CONFIDENCE: Mapping[int, str] = {0: "no value", 1: "a range only", 2: "low", 3: "fair", 4: "good"}
_A_RANGE = ("represented_low", "depths_differ")
_LOW = ("given_depth_ratio", "cumulus", "heat_elsewhere", "temperature_off")
FAR_PROFILE_KM = 150.0
DEFAULT_HOUR = 15.0

WATER_IN = ("rain_stand_mm", "irrigation_mm", "capillary_rise_mm")
WATER_OUT = ("runoff_mm", "drainage_mm", "evaporation_mm", "transpiration_mm")
COUNTY_MEANS = (
    "eto_mm", "rain_mm", "et_stands_mm", "et_county_mm", "le_stands_w_m2", "le_county_w_m2", "le_daytime_w_m2",
    "represented_pct", "mixing_depth_m", "dew_point_mixed_c", "dew_point_without_c", "contribution_c",
    "contribution_g_kg", "contribution_same_day_c", "contribution_carried_c", "contribution_p10_c",
    "contribution_p90_c", "effect_of_crops_c",
)  # fmt: skip


def confidence(
    flags: ArrayLike, provisional: ArrayLike, value: ArrayLike, profile_distance_km: ArrayLike = np.nan
) -> np.ndarray:
    """How far a contribution can be relied on.

    Parameters
    ----------
    flags, provisional : array_like of int
        Bits of the registry.
    value : array_like
        The contribution; NaN where there is none.
    profile_distance_km : array_like
        To the nearest balloon; NaN where none was used. [km]

    Returns
    -------
    ndarray of int
        Keys of :data:`CONFIDENCE`: 1 where too little of the county is represented or the depth hangs on entrainment; 2
        where the given depth does not fit the heat, clouds vent, much heat comes from elsewhere or the computed
        temperature is off; 3 with any other flag (a standard profile, an estimated dew point, a forecast ...), a
        provisional day or a balloon farther than 150 km; else 4. Rules of this project.

    Examples
    --------
    >>> confidence([0, 64, 1, 1024, 0], [0, 0, 0, 0, 0], [2.0, 2.0, 2.0, 2.0, np.nan])
    array([4, 3, 2, 1, 0])
    """
    flags, provisional = np.asarray(flags, int), np.asarray(provisional, int)
    a_range, low = (sum(flag_bits("air")[name] for name in names) for names in (_A_RANGE, _LOW))
    remark = (flags != 0) | (provisional != 0) | (np.asarray(profile_distance_km, float) > FAR_PROFILE_KM)
    none = np.isnan(np.asarray(value, float))
    return np.select([none, flags & a_range != 0, flags & low != 0, remark], [0, 1, 2, 3], 4)


def values(dataset: xr.Dataset, name: str, day: np.datetime64 | None = None) -> np.ndarray:
    """Values of a variable, on one day or all; NaN (0 for flags) in its place where a run has none."""
    found = dataset if day is None else dataset.sel(date=day)
    if name in found:
        return found[name].to_numpy()
    dims = [dim for dim in ("date", "station_id", "unit_id", "county_id") if dim in found.dims]
    shape = tuple(found.sizes[dim] for dim in dims)
    return np.zeros(shape, int) if name in {"flags", "provisional", "stage_code"} else np.full(shape, np.nan)


def area_mean(numbers: ArrayLike, area: ArrayLike) -> float:
    """Mean weighted by area over what has a value; NaN when nothing has."""
    numbers, area = np.asarray(numbers, float), np.asarray(area, float)
    good = np.isfinite(numbers)
    return float(np.average(numbers[good], weights=area[good])) if area[good].sum() > 0.0 else float("nan")


def summarise(results: Results, day: np.datetime64) -> dict[str, Any]:
    """Numbers of one day.

    Parameters
    ----------
    results : Results
    day : datetime64
        A day of the run.

    Returns
    -------
    dict
        Plain numbers in SI units, NaN where the run has none: area means over the counties by the names of the
        registry, `water_volume_hm3` in all, and the groups `contribution`, `covers`, `stands`, `marked`, `closure`,
        `findings`.
    """
    county, stand = results.county, results.stand
    area = county["area_km2"].to_numpy()
    is_stand = stand["kind"].to_numpy() == "stand"
    means = {name: area_mean(values(county, name, day), area) for name in COUNTY_MEANS}
    flags, provisional = values(county, "flags", day), values(county, "provisional", day)
    distance = values(county, "profile_distance_km", day)
    rank = confidence(flags, provisional, values(county, "contribution_c", day), distance)
    counts = dict.fromkeys(("error", "warning", "note"), 0)
    for finding in results.findings:
        counts[finding.severity] += 1
    volume = values(county, "water_volume_hm3", day)
    return {
        "day": str(day),
        "first_day": str(results.dates[0]),
        "last_day": str(results.dates[-1]),
        "title": results.settings.get("title") or "",
        "counties": int(county.sizes["county_id"]),
        "county_area_km2": float(area.sum()),
        "stand_area_km2": float(stand["area_km2"].to_numpy()[is_stand].sum()),
        **means,
        "water_volume_hm3": float(np.nansum(volume)) if np.isfinite(volume).any() else float("nan"),
        "contribution": _contribution(results, day, rank),
        "covers": _covers(results, day),
        "stands": _stands(stand.isel(unit_id=is_stand), day),
        "marked": {
            "provisional_counties": int((provisional != 0).sum()),
            "confidence": {word: int((rank == code).sum()) for code, word in CONFIDENCE.items()},
        },
        "closure": _largest_closure(results.budget),
        "findings": counts,
    }


def contribution_on(results: Results, days: ArrayLike) -> pd.DataFrame:
    """Rows of the contribution at the run's hour on some days, counties without a value left out."""
    rows = results.contribution
    if not len(rows):
        return rows
    hour = float(results.settings.get("contribution_hour", DEFAULT_HOUR))
    dates = pd.to_datetime(rows["date"]).to_numpy().astype("datetime64[D]")
    return rows[np.isin(dates, np.asarray(days, "datetime64[D]")) & (rows["hour"] == hour)]


def crop_sources(results: Results) -> list[str]:
    """Sources whose water makes the contribution: all but the rest of the counties."""
    rest = set(results.stand["tag"].to_numpy()[results.stand["kind"].to_numpy() == "rest"].astype(str))
    return [str(tag) for tag in pd.unique(results.contribution["cover"]) if tag not in rest]


def region_contribution(results: Results, days: ArrayLike, by: str = "cover") -> pd.DataFrame:
    """Area mean over the counties with a value, by day and "cover" or "age_d", of the crops' water.

    Returns
    -------
    DataFrame
        Index the days, one column per cover or age. [degC of difference]
    """
    rows = contribution_on(results, days)
    rows = rows[rows["cover"].isin(crop_sources(results))]
    days = np.asarray(days, "datetime64[D]")
    if not len(rows):
        return pd.DataFrame(index=pd.to_datetime(days))
    area = pd.Series(results.county["area_km2"].to_numpy(), index=results.county["county_id"].to_numpy().astype(str))
    weight = rows["county_id"].astype(str).map(area)
    counted = rows.assign(weighted=rows["contribution_c"] * weight, date=pd.to_datetime(rows["date"]))
    sums = counted.groupby(["date", by])["weighted"].sum().unstack(by)
    valued = results.county.sel(date=days)
    has = np.isfinite(values(valued, "contribution_c"))
    total = pd.Series((has * area.to_numpy()).sum(axis=1), index=pd.to_datetime(days))
    return sums.reindex(total.index).div(total.where(total > 0.0), axis=0)


def _contribution(results: Results, day: np.datetime64, rank: np.ndarray) -> dict[str, Any]:
    county = results.county
    found = values(county, "contribution_c", day)
    ids = county["county_id"].to_numpy().astype(str)
    ranked = np.where(rank >= 2, found, np.nan)
    any_ranked = bool(np.isfinite(ranked).any())
    return {
        "counties": int(np.isfinite(found).sum()),
        "ranked": int(np.isfinite(ranked).sum()),
        "least_c": float(np.nanmin(ranked)) if any_ranked else float("nan"),
        "most_c": float(np.nanmax(ranked)) if any_ranked else float("nan"),
        "least_county": str(ids[np.nanargmin(ranked)]) if any_ranked else "",
        "most_county": str(ids[np.nanargmax(ranked)]) if any_ranked else "",
    }


def _covers(results: Results, day: np.datetime64) -> list[dict[str, Any]]:
    """One record per tag: area, water use, contribution."""
    stand = results.stand.sel(date=day)
    tags, area = stand["tag"].to_numpy().astype(str), stand["area_km2"].to_numpy()
    by_cover = region_contribution(results, [day])
    records = []
    for tag in pd.unique(tags):
        here = tags == tag
        records.append(
            {
                "tag": str(tag),
                "area_km2": float(area[here].sum()),
                "et_mm": area_mean(values(stand, "et_mm")[here], area[here]),
                "contribution_c": float(by_cover[tag].iloc[0]) if tag in by_cover else float("nan"),
            }
        )
    return sorted(records, key=lambda record: (record["tag"] == "rest", -record["area_km2"]))


def says_stress(stage_code: ArrayLike) -> np.ndarray:
    """Whether a word on stress makes sense: after 10 % ground cover (V6 of corn) and before maturity (R6)."""
    stage = np.asarray(stage_code)
    return (stage > Stage.INITIAL) & (stage < Stage.MATURE)


def _stands(stand: xr.Dataset, day: np.datetime64) -> dict[str, Any]:
    today = stand.sel(date=day)
    area = stand["area_km2"].to_numpy()
    grows = says_stress(values(today, "stage_code"))
    stressed = grows & (values(today, "ks") < 1.0)
    need = np.where(grows, values(today, "need_mm"), np.nan)
    return {
        "count": int(len(np.unique(stand["stand_id"].to_numpy()))),
        "stressed": int(len(np.unique(stand["stand_id"].to_numpy()[stressed]))),
        "stressed_area_pct": float(100.0 * area[stressed].sum() / area.sum()) if area.sum() else float("nan"),
        "need": int(len(np.unique(stand["stand_id"].to_numpy()[need > 0.0]))),
        "irrigated_today_mm": area_mean(values(today, "irrigation_mm"), area),
        "provisional": int((values(today, "provisional") != 0).sum()),
    }


def _largest_closure(budget: pd.DataFrame) -> dict[str, float]:
    """Largest closure error of each balance, in its own unit."""
    rows = budget[budget["term"].astype(str).str.startswith("closure")]
    return {str(name): float(part["value"].abs().max()) for name, part in rows.groupby("balance", sort=False)}


def water_budget(stand: xr.Dataset) -> pd.DataFrame:
    """Closure of the water balance of every unit over the run.

    Parameters
    ----------
    stand : Dataset
        Daily flows and stores, and `stored_start_mm`. A unit whose season stopped is counted up to its last day.

    Returns
    -------
    DataFrame
        Rows of the table `budget`: water held at the start, what came, what went, water held at the end, closure.
    """
    lasting = np.isfinite(stand["dr_mm"].to_numpy())
    days = lasting.sum(axis=0)
    last = np.maximum(days - 1, 0)
    flows = {name: np.where(lasting, stand[name].to_numpy(), 0.0).sum(axis=0) for name in (*WATER_IN, *WATER_OUT)}
    stored = stand["snow_mm"].to_numpy() - stand["dr_mm"].to_numpy() - stand["ds_mm"].to_numpy()
    start = stand["stored_start_mm"].to_numpy()
    end = np.where(days > 0, stored[last, np.arange(len(last))], np.nan)
    came, went = sum(flows[name] for name in WATER_IN), sum(flows[name] for name in WATER_OUT)
    terms = {"stored_start_mm": start, **flows, "stored_end_mm": end, "closure_error_mm": came - went - (end - start)}
    units = stand["unit_id"].to_numpy().astype(str)
    frame = pd.DataFrame(terms, index=pd.Index(units, name="subject"))
    long = frame.stack(future_stack=True).rename_axis(["subject", "term"]).rename("value").reset_index()
    return long.assign(balance="water", unit="mm")[["balance", "subject", "term", "value", "unit"]]
