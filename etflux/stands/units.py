"""From the tables of a case to one row per unit: thirds, the rest of each county, parameters of cover, soil, method."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.soilwater.equations import total_evaporable_water
from etflux.stands.tables import complete, packaged
from etflux.stands.texture import class_available_water

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
FAO_ROOT_MIN_M = 0.15  # FAO-56 Annex 8 (p. 279): 0.15-0.20 m
STAND_COLUMNS: dict[str, Any] = {
    "water_regime": "rainfed",
    "hybrid_heat_units": np.nan, "tillage": None, "residue_pct": np.nan, "drained": None, "hydrologic_group": None,
    "available_water_mm_m": np.nan, "restricting_depth_m": np.nan, "station_id": None, "rule_id": None,
}  # fmt: skip
REST_PART = "other"  # what the rest sheet leaves unsaid


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
        One row per unit, sorted by county; columns of the stand, of its cover and of its soil, and unit_id, stand_row
        (row of the stands table, -1 for the rest), part (whole, early, middle, late), kind (stand, rest), tag and
        tag_of_cover (they differ where the rest counts as rest), county_index, station_index, latitude_deg, tew_mm,
        curve_number, hydrologic_letter, residue_share, residue_source, root_max_m, available_water_source, fw_method,
        is_drip, irrigated, efficiency.
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
    table["stand_row"] = np.arange(len(table))
    table["area_km2"] = table["area_km2"].astype(float)
    return table.astype(dict.fromkeys(("stand_id", "county_id", "cover_id", "soil_id"), str))


def _thirds(stand: pd.DataFrame) -> pd.DataFrame:
    """Split stands with a planting spread into three equal parts, side by side in the order of the stands."""
    spread = stand[list(SPREAD)].notna().all(axis=1).to_numpy()
    row = np.repeat(np.arange(len(stand)), np.where(spread, len(THIRDS), 1))
    third = np.arange(len(row)) - np.searchsorted(row, row)
    rows = stand.iloc[row].reset_index(drop=True)
    split = spread[row]
    rows["part"] = np.where(split, np.array(THIRDS)[third], "whole")
    rows["unit_id"] = rows["stand_id"].where(~split, rows["stand_id"] + "." + rows["part"])
    dates = rows[list(SPREAD)].to_numpy(dtype="datetime64[ns]")[np.arange(len(rows)), third]
    rows["planting_date"] = np.where(split, dates, rows["planting_date"].to_numpy(dtype="datetime64[ns]"))
    rows["area_km2"] = rows["area_km2"] / np.where(split, len(THIRDS), 1)
    return rows


def _rest(case: Case, stand: pd.DataFrame) -> pd.DataFrame:
    """Units for what no stand represents, by the rest sheet; where it says nothing, the default cover.

    Parts called "like the stands" are copies of the county's stands, in proportion; parts without water have no unit,
    their area only counts in the county's mean.
    """
    import pandas as pd

    counties = case.table("counties")
    area = counties.set_index(counties["county_id"].astype(str))["area_km2"].astype(float)
    used = stand.groupby("county_id")["area_km2"].sum().reindex(area.index).fillna(0.0)
    left = (area - used).clip(lower=0.0)
    left = left[left > 1e-9 * area]
    parts = _rest_shares(case, left.index)
    parts["whole_km2"] = parts["county_id"].map(left).astype(float) * parts["share"]
    parts = parts[(parts["treatment"] != "no water") & (parts["whole_km2"] > 0.0)]
    alike = (parts["treatment"] == "like the stands") & (parts["county_id"].map(used) > 0.0)
    copies = parts.loc[alike, ["county_id", "part", "whole_km2"]].rename(columns={"part": "rest_part"})
    copies = copies.merge(stand, on="county_id")
    copies["unit_id"] = copies["county_id"] + ".rest." + copies["rest_part"] + "." + copies["unit_id"]
    copies["area_km2"] *= copies["whole_km2"] / copies["county_id"].map(used)
    covers = parts.loc[~alike, ["county_id", "part", "cover_id", "soil_id", "whole_km2"]]
    own = covers.rename(columns={"whole_km2": "area_km2"}).assign(**STAND_COLUMNS, **dict.fromkeys(DATES, pd.NaT))
    own["unit_id"] = own["county_id"] + ".rest." + own["part"]
    own["part"] = "whole"
    own["cover_id"] = own["cover_id"].fillna(case.settings.rest_cover).astype(str)
    common = own["county_id"].map(_common_soil(stand)).fillna(DEFAULT_SOIL)
    own["soil_id"] = own["soil_id"].fillna(common).astype(str)
    pieces = [piece for piece in (copies.drop(columns=["rest_part", "whole_km2"]), own) if len(piece)]
    rest = pd.concat(pieces, ignore_index=True) if pieces else stand.iloc[:0]
    repeat = rest.groupby("unit_id").cumcount()  # a part named twice, with two covers
    unit = rest["unit_id"].where(repeat == 0, rest["unit_id"] + "." + (repeat + 1).astype(str))
    return rest.assign(unit_id=unit, kind="rest", stand_id=unit, stand_row=-1)


def _rest_shares(case: Case, county_ids: pd.Index) -> pd.DataFrame:
    """One row per county and part of its rest, shares summing to 1 in every county."""
    import pandas as pd

    names = ["county_id", "part", "share_pct", "treatment", "cover_id", "soil_id"]
    table = case.table("rest").reindex(columns=names)
    table[["cover_id", "soil_id"]] = table[["cover_id", "soil_id"]].astype(object).replace("", np.nan)
    table["treatment"] = table["treatment"].fillna("cover")
    table["county_id"] = table["county_id"].fillna("").astype(str)
    own = table[table["county_id"].isin(county_ids)]
    general = county_ids[~county_ids.isin(table["county_id"])]
    everywhere = table[table["county_id"] == ""].drop(columns="county_id")
    shared = everywhere.merge(pd.DataFrame({"county_id": general}), how="cross")
    rows = pd.concat([piece for piece in (own, shared) if len(piece)] or [own], ignore_index=True)
    rows["share"] = rows["share_pct"].astype(float) / 100.0
    missing = 1.0 - rows.groupby("county_id")["share"].sum().reindex(county_ids).fillna(0.0)
    missing = missing[missing > 1e-9]
    default = pd.DataFrame({"county_id": missing.index, "share": missing.to_numpy()})
    default = default.assign(part=REST_PART, treatment="cover", cover_id=None, soil_id=None)
    kept = [piece[["county_id", "part", "share", "treatment", "cover_id", "soil_id"]] for piece in (rows, default)]
    return pd.concat([piece for piece in kept if len(piece)] or kept[:1], ignore_index=True)


def _common_soil(stand: pd.DataFrame) -> dict[str, str]:
    """Soil with the largest stand area in each county."""
    area = stand.groupby(["county_id", "soil_id"])["area_km2"].sum().reset_index()
    largest = area.sort_values("area_km2", ascending=False, kind="stable").drop_duplicates("county_id")
    return dict(zip(largest["county_id"], largest["soil_id"], strict=True))


def _plants(rows: pd.DataFrame, case: Case) -> pd.DataFrame:
    """Join the cover's columns; root depths by water regime, restricting depth and setting.

    Roots reach the upper end of FAO-56 Table 22's range where the stand is rainfed and the middle of its lower half
    where it is irrigated, as the cover table has them; a restricting depth caps both ends.
    """
    covers = complete(case, "covers").drop(columns=["name", "source"], errors="ignore")
    rows = rows.join(covers, on="cover_id")
    rows["tag_of_cover"] = rows["tag"]
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


def hydrologic_letter(group: pd.Series, drained: np.ndarray) -> np.ndarray:
    """Letter of a hydrologic group; of a dual one the first if drained, else the second.

    Examples
    --------
    >>> import pandas as pd
    >>> hydrologic_letter(pd.Series(["B", "B/D", "b/d"]), np.array([False, True, False])).tolist()
    ['B', 'B', 'D']
    """
    parts = group.astype(str).str.strip().str.upper().str.split("/")
    return np.where(drained, parts.str[0], parts.str[-1])


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
    if case.settings.texture_water == "saxton-rawls":
        texture = texture.where(~_is_packaged(rows), class_available_water(rows["soil_id"]))
    rows["available_water_source"] = np.where(surveyed, "survey", "texture")
    rows["available_water_mm_m"] = rows["available_water_mm_m"].astype(float).where(surveyed, texture)
    group = rows["stand_group"].where(rows["stand_group"].notna(), rows["hydrologic_group"]).fillna(DEFAULT_GROUP)
    drained = rows["drained"].map(lambda word: word is True or word == 1).to_numpy(bool)
    rows["hydrologic_letter"] = hydrologic_letter(group, drained)
    numbers = packaged("curve_numbers").melt("cover_class", list("ABCD"), "letter", "curve_number")
    numbers = numbers.set_index(["cover_class", "letter"])["curve_number"].astype(float)
    rows["curve_number"] = numbers.reindex(
        list(zip(rows["curve_number_class"], rows["hydrologic_letter"], strict=True))
    ).to_numpy()
    return rows


def _is_packaged(rows: pd.DataFrame) -> np.ndarray:
    """Whether the soil is the package's, not one of a person's own under its id: those keep their own numbers."""
    ours = packaged("soils").set_index("soil_id")[["theta_fc", "theta_wp"]].reindex(rows["soil_id"])
    return np.isclose(ours.to_numpy(float), rows[["theta_fc", "theta_wp"]].to_numpy(float)).all(axis=1)


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
