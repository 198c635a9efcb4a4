"""From the tables of a case to the units of the water balance, one row each, with everything they need resolved.

A unit is a stand, or a third of one (planting spread), or a part of a county's rest. Rows are sorted by county. From
here on the science takes plain arrays, one value per unit.
"""

from __future__ import annotations

from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.findings import Finding
from etflux.soilwater.equations import total_evaporable_water

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case
    from etflux.weather import CountyWeather

DEFAULT_SOIL = "loam"
DEFAULT_ZE_M = 0.10  # FAO-56 p. 144: 0.10-0.15 m
DEFAULT_GROUP = "B"
THIRDS = ("early", "middle", "late")
SPREAD = ("planting_date_early", "planting_date_middle", "planting_date_late")
DATES = ("planting_date", *SPREAD, "greenup_date", "harvest_date")
FAO_ROOT_MIN_M = 0.15  # FAO-56 Annex 8
STAND_COLUMNS: dict[str, Any] = {
    "water_regime": "rainfed",
    "hybrid_heat_units": np.nan, "tillage": None, "residue_pct": np.nan, "drained": None, "hydrologic_group": None,
    "available_water_mm_m": np.nan, "restricting_depth_m": np.nan, "station_id": None, "rule_id": None,
}  # fmt: skip


@cache
def packaged(name: str) -> pd.DataFrame:
    """Return a table of the package ("covers", "soils", "curve_numbers", "wetted_fractions", "heat_units")."""
    import pandas as pd

    with files("etflux.tables").joinpath(f"{name}.csv").open(encoding="utf-8") as text:
        return pd.read_csv(text)


def complete(case: Case, name: str) -> pd.DataFrame:
    """Covers or soils of a case on top of the package's own, one row per id."""
    import pandas as pd

    own, key = case.table(name), name[:-1] + "_id"
    parts = [table for table in (packaged(name), own) if len(table)]
    rows = pd.concat(parts, ignore_index=True) if len(parts) > 1 else parts[0]
    return rows.drop_duplicates(key, keep="last").set_index(key)


def expand(case: Case, local: CountyWeather, station_ids: tuple[str, ...]) -> pd.DataFrame:
    """Every unit of a case with its parameters.

    Parameters
    ----------
    case : Case
        Without errors.
    local : CountyWeather
        Station of each county.
    station_ids : tuple of str
        In the order of the record.

    Returns
    -------
    DataFrame
        One row per unit, sorted by county; columns of the stand, of its cover and of its soil, and unit_id, part
        (whole, early, middle, late), kind (stand, rest), tag, county_index, station_index, tew_mm, curve_number,
        residue_share, residue_source, root_max_m, available_water_source, fw_method, is_drip, irrigated, efficiency.
    """
    import pandas as pd

    counties = case.table("counties")
    stand = _thirds(_stands(case))
    rows = pd.concat([stand, _rest(case, stand)], ignore_index=True) if len(counties) else stand
    county = pd.Index(counties["county_id"].astype(str))
    rows["county_index"] = county.get_indexer(pd.Index(rows["county_id"]))
    rows = rows.sort_values("county_index", kind="stable", ignore_index=True)
    named = pd.Index(station_ids).get_indexer(pd.Index(rows["station_id"].fillna("").astype(str)))
    rows["station_index"] = np.where(named >= 0, named, local.station_index[rows["county_index"]])
    latitude = counties["latitude_deg"].to_numpy(float)
    rows["latitude_deg"] = latitude[rows["county_index"]]
    return _water(_ground(_plants(rows, case), case), case)


def _stands(case: Case) -> pd.DataFrame:
    """Copy of the stands table with every optional column."""
    import pandas as pd

    table = case.table("stands").copy()
    for name, default in STAND_COLUMNS.items():
        if name not in table:
            table[name] = default
    for name in DATES:
        table[name] = pd.to_datetime(table[name]) if name in table else pd.NaT
    table["water_regime"] = table["water_regime"].fillna("rainfed")
    table["kind"] = "stand"
    return table.astype(dict.fromkeys(("stand_id", "county_id", "cover_id", "soil_id"), str))


def _thirds(stand: pd.DataFrame) -> pd.DataFrame:
    """Split stands with a planting spread into three equal parts."""
    import pandas as pd

    spread = stand[list(SPREAD)].notna().all(axis=1).to_numpy()
    whole = stand[~spread].assign(part="whole", unit_id=lambda rows: rows["stand_id"])
    parts = [
        stand[spread].assign(
            part=part,
            unit_id=lambda rows, part=part: rows["stand_id"] + "." + part,
            planting_date=lambda rows, name=name: rows[name],
            area_km2=lambda rows: rows["area_km2"] / 3.0,
        )
        for part, name in zip(THIRDS, SPREAD, strict=True)
    ]
    pieces = [piece for piece in (whole, *parts) if len(piece)] or [whole]
    return pd.concat(pieces).sort_index(kind="stable").reset_index(drop=True)


def _rest(case: Case, stand: pd.DataFrame) -> pd.DataFrame:
    """Units for what no stand represents, by the rest sheet; where it says nothing, the default cover."""
    import pandas as pd

    counties = case.table("counties")
    area = counties.set_index(counties["county_id"].astype(str))["area_km2"]
    left = (area - stand.groupby("county_id")["area_km2"].sum().reindex(area.index).fillna(0.0)).clip(lower=0.0)
    left = left[left > 1e-9 * area]
    shares = _rest_shares(case, left.index)
    soil = _common_soil(stand)
    by_county = dict(tuple(stand.groupby("county_id")))
    pieces = []
    for row in shares.itertuples():
        whole = left[row.county_id] * row.share
        own = by_county.get(row.county_id)
        if row.treatment == "no water" or whole <= 0.0:
            continue
        if row.treatment == "like the stands" and own is not None:
            unit = f"{row.county_id}.rest.{row.part}." + own["unit_id"]
            pieces.append(own.assign(unit_id=unit, area_km2=own["area_km2"] / own["area_km2"].sum() * whole))
            continue
        cover = row.cover_id if isinstance(row.cover_id, str) and row.cover_id else case.settings.rest_cover
        ground = row.soil_id if isinstance(row.soil_id, str) and row.soil_id else soil.get(row.county_id, DEFAULT_SOIL)
        pieces.append(
            pd.DataFrame(
                {
                    **{name: [default] for name, default in STAND_COLUMNS.items()},
                    **dict.fromkeys(DATES, pd.NaT),
                    "unit_id": f"{row.county_id}.rest.{row.part}",
                    "county_id": row.county_id,
                    "cover_id": cover,
                    "soil_id": ground,
                    "area_km2": whole,
                    "part": "whole",
                }
            )  # fmt: skip
        )
    if not pieces:
        return stand.iloc[:0]
    rest = pd.concat(pieces, ignore_index=True)
    return rest.assign(kind="rest", stand_id=rest["unit_id"])


def _rest_shares(case: Case, county_ids: pd.Index) -> pd.DataFrame:
    """One row per county and part of its rest, shares summing to 1 in every county."""
    import pandas as pd

    table = case.table("rest").copy()
    for name in ("cover_id", "soil_id"):
        if name not in table:
            table[name] = None
    table["county_id"] = table["county_id"].fillna("").astype(str)
    own = set(table["county_id"])
    everywhere = table[table["county_id"] == ""]
    general = [everywhere.assign(county_id=name) for name in county_ids if name not in own] if len(everywhere) else []
    rows = pd.concat([table[table["county_id"].isin(county_ids)], *general], ignore_index=True)
    rows["share"] = rows["share_pct"].astype(float) / 100.0
    missing = 1.0 - rows.groupby("county_id")["share"].sum().reindex(county_ids).fillna(0.0)
    missing = missing[missing > 1e-9]
    default = pd.DataFrame(
        {
            "county_id": missing.index,
            "part": "other",
            "share": missing.to_numpy(),
            "treatment": "cover",
            "cover_id": None,
            "soil_id": None,
        }
    )
    kept = [part for part in (rows, default) if len(part)]
    return pd.concat(kept, ignore_index=True) if kept else rows


def _common_soil(stand: pd.DataFrame) -> dict[str, str]:
    """Soil with the largest stand area in each county."""
    if not len(stand):
        return {}
    area = stand.groupby(["county_id", "soil_id"])["area_km2"].sum().reset_index()
    largest = area.sort_values("area_km2", ascending=False, kind="stable").drop_duplicates("county_id")
    return dict(zip(largest["county_id"], largest["soil_id"], strict=True))


def _plants(rows: pd.DataFrame, case: Case) -> pd.DataFrame:
    """Join the cover's columns; root depths by water regime, restricting depth and setting."""
    covers = complete(case, "covers").drop(columns=["name", "source"], errors="ignore")
    rows = rows.join(covers, on="cover_id")
    rows["tag"] = np.where(rows["kind"] == "rest", "rest", rows["tag"])
    rows["irrigated"] = rows["water_regime"] != "rainfed"
    deepest = np.where(rows["irrigated"], rows["root_max_irrigated_m"], rows["root_max_rainfed_m"]).astype(float)
    least = rows["root_min_m"].to_numpy(float)
    if case.settings.row_crop_root_min == "fao56":
        least = np.where(rows["habit"] == "annual", FAO_ROOT_MIN_M, least)
    restriction = rows["restricting_depth_m"].to_numpy(float)
    rows["root_max_m"] = np.fmin(deepest, restriction)
    rows["root_min_m"] = np.fmin(least, rows["root_max_m"])
    return rows


def _ground(rows: pd.DataFrame, case: Case) -> pd.DataFrame:
    """Join the soil's columns; available water, drying layer, hydrologic group and curve number."""
    soils = complete(case, "soils").drop(columns=["name", "source"], errors="ignore")
    rows = rows.rename(columns={"hydrologic_group": "stand_group"}).join(soils, on="soil_id")
    rows["evaporation_depth_m"] = rows["evaporation_depth_m"].astype(float).fillna(DEFAULT_ZE_M)
    rows["tew_mm"] = total_evaporable_water(
        rows["theta_fc"].to_numpy(float), rows["theta_wp"].to_numpy(float), rows["evaporation_depth_m"].to_numpy()
    )
    surveyed = rows["available_water_mm_m"].notna()
    texture = 1000.0 * (rows["theta_fc"] - rows["theta_wp"])
    rows["available_water_source"] = np.where(surveyed, "survey", "texture")
    rows["available_water_mm_m"] = rows["available_water_mm_m"].astype(float).where(surveyed, texture)
    group = rows["stand_group"].where(rows["stand_group"].notna(), rows["hydrologic_group"]).fillna(DEFAULT_GROUP)
    parts = group.astype(str).str.upper().str.split("/")
    drained = rows["drained"].map(lambda word: word is True or word == 1).to_numpy(bool)
    rows["hydrologic_letter"] = np.where(drained, parts.str[0], parts.str[-1])
    numbers = packaged("curve_numbers").set_index("cover_class")[list("ABCD")]
    place = numbers.index.get_indexer(rows["curve_number_class"].array)
    letter = np.array(["ABCD".index(word) for word in rows["hydrologic_letter"]], dtype=int)
    rows["curve_number"] = numbers.to_numpy(float)[place, letter]
    return rows


def _water(rows: pd.DataFrame, case: Case) -> pd.DataFrame:
    """Residue, the way water is brought, and its efficiency."""
    settings = case.settings
    by_tillage = {
        "conventional": settings.residue_conventional_pct, "reduced": settings.residue_reduced_pct,
        "no-till": settings.residue_no_till_pct,
    }  # fmt: skip
    given = rows["residue_pct"].astype(float)
    tilled = rows["tillage"].map(by_tillage).astype(float).where(rows["habit"] == "annual")
    rows["residue_source"] = np.select([given.notna(), tilled.notna()], ["entered", "by tillage"], "none")
    rows["residue_share"] = given.fillna(tilled).fillna(0.0) / 100.0
    method = packaged("wetted_fractions").set_index("water_regime")
    rows["fw_method"] = rows["water_regime"].map(method["wetted_fraction"]).astype(float)
    rows["is_drip"] = rows["water_regime"].map(method["is_drip"]).astype(bool)
    rules = case.table("irrigation_rules")
    usual = rows["water_regime"].map(method["efficiency_pct"]).astype(float).fillna(100.0)
    if len(rules) and "efficiency_pct" in rules:
        by_rule = rules.drop_duplicates("rule_id").set_index("rule_id")["efficiency_pct"].astype(float)
        usual = rows["rule_id"].map(by_rule).fillna(usual)
    rows["efficiency"] = usual / 100.0
    return rows


def check(case: Case) -> list[Finding]:
    """Findings on stands that need no weather: areas, shares, spreads, residue without meaning.

    Unknown ids are the cross-table checks' business.
    """
    return [*_areas(case), *_shares(case), *_spreads(case)]


def _areas(case: Case) -> list[Finding]:
    stand, counties = case.table("stands"), case.table("counties")
    if not len(stand) or not len(counties):
        return []
    total = stand.groupby(stand["county_id"].astype(str))["area_km2"].sum()
    found = []
    for row, county in enumerate(counties.itertuples()):
        used = float(total.get(str(county.county_id), 0.0))
        if used > county.area_km2 * (1.0 + 1e-6):
            detail = f"stands there sum to {used:.4g} km², the county has {county.area_km2:.4g} km²"
            found.append(
                Finding("stands-above-county", "counties", row, "area_km2", county.area_km2,
                        f"county {county.county_id}", detail)
            )  # fmt: skip
    return found


def _shares(case: Case) -> list[Finding]:
    rest = case.table("rest")
    if not len(rest):
        return []
    total = rest.groupby(rest["county_id"].fillna("").astype(str))["share_pct"].sum()
    found = []
    for county_id, share in total[total > 100.0 + 1e-6].items():
        row = int(np.flatnonzero(rest["county_id"].fillna("").astype(str) == county_id)[-1])
        found.append(
            Finding("rest-above-100", "rest", row, "share_pct", float(rest["share_pct"].iloc[row]),
                    f"county {county_id or '(all)'}", f"parts sum to {share:g} %")
        )  # fmt: skip
    return found


def _spreads(case: Case) -> list[Finding]:
    stand = case.table("stands")
    if not len(stand) or not all(name in stand for name in SPREAD):
        return []
    given = stand[list(SPREAD)].notna().sum(axis=1).to_numpy()
    found = []
    for row in np.flatnonzero(given):
        dates = stand[list(SPREAD)].iloc[row]
        about = f"stand {stand['stand_id'].iloc[row]}"
        if given[row] < 3:
            blank = SPREAD[int(np.flatnonzero(dates.isna())[0])]
            found.append(Finding("spread-incomplete", "stands", int(row), blank, None, about))
        elif not dates.is_monotonic_increasing:
            found.append(Finding("spread-order", "stands", int(row), SPREAD[0], str(dates.iloc[0].date()), about))
    return found
