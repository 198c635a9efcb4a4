"""Between the science and the results: gather inputs by county and unit, label what comes out.

Nothing is computed here that has a published equation; sums over units and unit conversions of fluxes are.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux import airmass, canopy, cells, counties, irrigation, profiles, reference, soilwater, solar, wind
from etflux.airmass import AirInputs, AirResults
from etflux.crops import Stage
from etflux.findings import Finding
from etflux.methods import METHODS
from etflux.results import Results, confidence, water_budget
from etflux.variables import flag_bits
from etflux.weather.record import SOURCE

if TYPE_CHECKING:
    import pandas as pd
    import xarray as xr

    from etflux.case import Case, Settings
    from etflux.weather import CountyWeather, StationRecord

STATION_FILLED = (
    "t_max_c", "t_min_c", "t_mean_c", "dew_point_c", "vapour_pressure_kpa", "rh_min_pct", "rs_mj_m2_d", "u2_m_s",
    "rain_mm",
)  # fmt: skip
# What a day's "estimated input" counts, one share each; a pair counts as estimated when either is.
INPUT_GROUPS = (("t_max_c", "t_min_c"), ("vapour_pressure_kpa",), ("rs_mj_m2_d",), ("u2_m_s",), ("rain_mm",))
NOT_MEASURED = 255 - SOURCE["forecast"]
BLOCK_UNITS = 8192  # units run together; a block never splits a county
STAND_LABELS = ("stand_id", "part", "kind", "tag", "county_id", "cover_id", "soil_id", "water_regime", "area_km2")
SPRINKLER = "sprinkler loss"
MJ_PER_W_DAY = 0.0864  # a mean flux of 1 W m-2 through a day
STRESS_FROM_STAGE = Stage.INITIAL


def _dates(record: StationRecord) -> np.ndarray:
    return record.dates.astype("datetime64[ns]")


def estimated_share(source: dict[str, np.ndarray]) -> np.ndarray:
    """Share of the day's inputs that were not measured here. [%]"""
    parts = []
    for group in INPUT_GROUPS:
        bits = np.zeros_like(source[group[0]])
        for name in group:
            bits = bits | source[name]
        parts.append((bits & NOT_MEASURED) > 0)
    return 100.0 * np.mean(parts, axis=0)


def station_daily(record: StationRecord, settings: Settings) -> xr.Dataset:
    """Reference ET and what it rests on, by station and day."""
    import xarray as xr

    v = record.values
    day = solar.day_of_year(record.dates)[:, None]
    ra = np.broadcast_to(solar.extraterrestrial_radiation(record.latitude_deg, day), record.shape)
    rso = solar.clear_sky_radiation(ra, record.elevation_m)
    weather = (v["t_max_c"], v["t_min_c"], v["vapour_pressure_kpa"], v["rs_mj_m2_d"], v["u2_m_s"])
    place = (record.elevation_m, record.latitude_deg, day)
    short = reference.et_asce(*weather, *place, surface="short")
    fao = reference.eto_fao56(*weather, *place)
    found = {name: v[name] for name in STATION_FILLED}
    found |= {
        "rn_mj_m2_d": reference.net_radiation(
            v["rs_mj_m2_d"], rso, v["t_max_c"], v["t_min_c"], v["vapour_pressure_kpa"]
        ),
        "ra_mj_m2_d": ra,
        "eto_mm": np.maximum(short if settings.eto_method == "asce_short" else fao, 0.0),
        "ets_mm": short,
        "etr_mm": reference.et_asce(*weather, *place, surface="tall"),
    }
    if settings.second_opinions:
        found |= reference.second_opinions(record.dates, *weather, found["rn_mj_m2_d"], *place[:2])
    share = estimated_share({name: record.source[name] for group in INPUT_GROUPS for name in group})
    bits = flag_bits("provisional")
    provisional = np.where(share > settings.provisional_share_pct, bits["weather"], 0)
    provisional = (provisional | np.where(record.forecast, bits["forecast"], 0)).astype(np.uint8)
    dims = ("date", "station_id")
    variables: dict[str, Any] = {name: (dims, values) for name, values in found.items()}
    variables |= {f"{name}_source": (dims, record.source[name]) for name in STATION_FILLED}
    variables |= {"estimated_share_pct": (dims, share), "provisional": (dims, provisional)}
    return xr.Dataset(
        variables,
        coords={
            "date": _dates(record), "station_id": list(record.station_ids),
            "latitude_deg": ("station_id", record.latitude_deg), "longitude_deg": ("station_id", record.longitude_deg),
            "elevation_m": ("station_id", record.elevation_m),
        },
    )  # fmt: skip


def blocks(county_index: np.ndarray, most: int = BLOCK_UNITS) -> Iterator[slice]:
    """Slices of units of about `most` each that never split a county.

    Examples
    --------
    >>> list(blocks(np.array([0, 0, 1, 1, 1, 2]), most=3))
    [slice(0, 2, None), slice(2, 5, None), slice(5, 6, None)]
    """
    n_units = len(county_index)
    ends = np.append(np.flatnonzero(np.diff(county_index)) + 1, n_units)
    start = 0
    while start < n_units:
        fitting = ends[(ends > start) & (ends <= start + most)]
        end = int(fitting[-1]) if len(fitting) else int(ends[ends > start][0])
        yield slice(start, end)
        start = end


def stand_daily(
    case: Case,
    record: StationRecord,
    local: CountyWeather,
    station: xr.Dataset,
    units: pd.DataFrame,
    tell: Callable[[str, float], None],
) -> tuple[xr.Dataset, pd.DataFrame, list[Finding]]:
    """Crop and soil water of every unit, block by block; marks; findings."""
    import pandas as pd
    import xarray as xr

    n_days, n_units = len(record.dates), len(units)
    kept: dict[str, np.ndarray] = {}
    stored = np.zeros(n_units)
    marks: list[pd.DataFrame] = []
    findings: list[Finding] = []
    for part in blocks(units["county_index"].to_numpy(int)):
        block = units.iloc[part].reset_index(drop=True)
        daily, start, found, rows = _block(case, record, local, station, block)
        stored[part] = start.snow_mm - start.dr_mm - start.ds_mm
        for name, values in daily.items():
            whole = kept.setdefault(name, np.empty((n_days, n_units), dtype=values.dtype))
            whole[:, part] = values
        marks.append(rows)
        findings += found
        tell("crops and soil water", 0.2 + 0.4 * part.stop / max(n_units, 1))
    dims = ("date", "unit_id")
    labels: dict[str, Any] = {name: ("unit_id", units[name].to_numpy()) for name in STAND_LABELS}
    for name in ("stand_id", "part", "kind", "tag", "county_id", "cover_id", "soil_id", "water_regime"):
        labels[name] = ("unit_id", units[name].astype(str).to_numpy(object))
    dataset = xr.Dataset(
        {name: (dims, values) for name, values in kept.items()},
        coords={"date": _dates(record), "unit_id": units["unit_id"].astype(str).to_numpy(object), **labels},
    ).assign_coords(stored_start_mm=("unit_id", stored))
    return dataset, pd.concat(marks, ignore_index=True) if marks else pd.DataFrame(), findings


def _block(
    case: Case, record: StationRecord, local: CountyWeather, station: xr.Dataset, units: pd.DataFrame
) -> tuple[dict[str, np.ndarray], soilwater.State, list[Finding], pd.DataFrame]:
    """One block of units through the season."""
    settings = case.settings
    place = units["station_index"].to_numpy(int)
    eto = station["eto_mm"].to_numpy()[:, place]
    plants, findings = canopy.canopy(units, record, settings, case.table("observations"))
    windows = canopy.rule_windows(units, case.table("irrigation_rules"), plants.marks, len(record.dates))
    soil = soilwater.soil_from_units(units, settings)
    start = soilwater.start_state(soil, settings, plants.root_depth_m[0])
    forcing = soilwater.Forcing(
        eto_mm=eto,
        rain_mm=local.rain_mm[:, units["county_index"].to_numpy(int)],
        t_mean_c=record.values["t_mean_c"][:, place],
        kcb=plants.kcb,
        kc_max=plants.kc_max,
        ground_cover=plants.ground_cover,
        root_depth_m=plants.root_depth_m,
        **windows,
    )
    rule = irrigation.rules_for_units(units, case.table("irrigation_rules"))
    events = irrigation.dated_events(units, case.table("irrigation_events"), record.dates)
    daily, _ = soilwater.season(soil, forcing, start, rule, events)
    with np.errstate(invalid="ignore", divide="ignore"):
        left = np.clip(daily["taw_mm"] - daily["dr_mm"], 0.0, None)
        found = {
            "eto_mm": eto,
            "stage_code": plants.stage,
            "days_after_planting": plants.days_after_planting,
            "kcb": plants.kcb,
            **daily,
            "kc": np.where(eto > 0.0, daily["et_mm"] / np.where(eto > 0.0, eto, 1.0), np.nan),
            "plant_height_m": plants.plant_height_m,
            "root_depth_m": plants.root_depth_m,
            "ground_cover": plants.ground_cover,
            "water_left_mm": left,
            "water_left_pct": 100.0 * left / daily["taw_mm"],
            "closure_error_mm": soilwater.daily_closure(daily, start),
            "provisional": plants.provisional | station["provisional"].to_numpy()[:, place],
        }
    findings += _roots(units, daily["ks"], settings)
    return found, start, findings, _mark_rows(units, record, plants)


def _roots(units: pd.DataFrame, ks: np.ndarray, settings: Settings) -> list[Finding]:
    doubtful = soilwater.roots_to_check(
        ks, units["available_water_source"] == "texture", ~units["irrigated"], settings.check_roots_ks
    )
    return [
        Finding("check-roots", "stands", subject=f"stand {units['unit_id'].iloc[unit]}")
        for unit in np.flatnonzero(doubtful & (units["kind"] == "stand").to_numpy())
    ]


def _mark_rows(units: pd.DataFrame, record: StationRecord, plants: canopy.Canopy) -> pd.DataFrame:
    """Growth marks as a long table of dates."""
    import pandas as pd

    pieces = []
    last = len(record.dates) - 1
    for name, values in plants.marks.items():
        rows = values if values.ndim == 2 else values[None]
        for days in rows:
            there = np.isfinite(days)
            if not there.any():
                continue
            whole = np.floor(days[there]).astype("timedelta64[D]")
            pieces.append(
                pd.DataFrame(
                    {
                        "unit_id": units["unit_id"].to_numpy(object)[there],
                        "mark": name,
                        "date": (record.dates[0] + whole).astype("datetime64[ns]"),
                        "basis": np.where(
                            days[there] > last, "projected past the record", plants.basis_of(name)[there]
                        ),
                    }
                )
            )
    return (
        pd.concat(pieces, ignore_index=True) if pieces else pd.DataFrame(columns=["unit_id", "mark", "date", "basis"])
    )


def county_daily(
    case: Case, record: StationRecord, local: CountyWeather, station: xr.Dataset, units: pd.DataFrame, stand: xr.Dataset
) -> tuple[xr.Dataset, dict[str, np.ndarray], dict[str, np.ndarray]]:
    """Area sums over the units of each county, latent flux; by source the water, and what of it went through plants."""
    import xarray as xr

    table = case.table("counties")
    n, area = len(table), table["area_km2"].to_numpy(float)
    index, unit_area = units["county_index"].to_numpy(int), units["area_km2"].to_numpy(float)
    place = local.station_index

    def mean(name: str, where: np.ndarray | None = None, over: np.ndarray = area) -> np.ndarray:
        weight = unit_area if where is None else np.where(where, unit_area, 0.0)
        values = stand[name].to_numpy() if where is None else np.where(where, stand[name].to_numpy(), 0.0)
        return counties.county_sums(values * weight, index, n) / over

    own = (units["kind"] == "stand").to_numpy()
    stand_area = counties.county_sums(np.where(own, unit_area, 0.0), index, n)
    with np.errstate(invalid="ignore", divide="ignore"):
        et_stands = np.where(stand_area > 0.0, mean("et_mm", own, stand_area), np.nan)
    sources = _sources(units)
    water = {name: mean("et_mm", (units["tag"] == name).to_numpy()) for name in sources if name != SPRINKLER}
    moved = {name: mean("transpiration_mm", (units["tag"] == name).to_numpy()) for name in water}
    loss = mean("sprinkler_loss_mm")
    water[SPRINKLER] = loss
    transpiration, evaporation = mean("transpiration_mm"), mean("evaporation_mm") + loss
    et = transpiration + evaporation
    t_mean = record.values["t_mean_c"][:, place]
    julian = solar.day_of_year(record.dates)[:, None]
    daylight = solar.daylight_hours(table["latitude_deg"].to_numpy(float), julian)
    clock = solar.clock_from_solar(0.0, julian, table["longitude_deg"].to_numpy(float), record.utc_offset_h[place])
    flux = counties.latent_flux
    dims = ("date", "county_id")
    found = {
        "eto_mm": station["eto_mm"].to_numpy()[:, place],
        "rain_mm": local.rain_mm,
        "rain_mm_source": local.rain_source,
        "et_stands_mm": et_stands,
        "et_county_mm": et,
        "sprinkler_loss_county_mm": loss,
        "le_stands_w_m2": flux(et_stands, t_mean),
        "le_county_w_m2": flux(et, t_mean),
        "le_daytime_w_m2": flux(et, t_mean, np.maximum(daylight, 1e-6)),
        "le_transpiration_w_m2": flux(transpiration, t_mean),
        "le_evaporation_w_m2": flux(evaporation, t_mean),
        "water_volume_hm3": counties.water_volume(et, area),
        "represented_pct": np.broadcast_to(100.0 * stand_area / area, et.shape),
        "estimated_share_pct": _county_estimated(record, local),
        "provisional": _county_provisional(units, stand, index, n),
        "clock_minus_solar_h": clock,
    }
    by_tag = np.stack([flux(water[name], t_mean) for name in sources], axis=-1)
    ids = table["county_id"].astype(str).to_numpy(object)
    names = table["name"].fillna("").astype(str).to_numpy(object) if "name" in table else ids
    dataset = xr.Dataset(
        {name: (dims, values) for name, values in found.items()},
        coords={
            "date": _dates(record), "county_id": ids, "tag": list(sources), "name": ("county_id", names),
            "area_km2": ("county_id", area), "latitude_deg": ("county_id", table["latitude_deg"].to_numpy(float)),
            "longitude_deg": ("county_id", table["longitude_deg"].to_numpy(float)),
        },
    )  # fmt: skip
    dataset["le_by_tag_w_m2"] = ((*dims, "tag"), by_tag)
    dataset["ground_cover"] = (dims, mean("ground_cover"))
    return dataset, water, moved


def _sources(units: pd.DataFrame) -> tuple[str, ...]:
    """Covers by the area they hold, then the rest and the sprinklers' loss."""
    area = units[units["tag"] != "rest"].groupby("tag")["area_km2"].sum().sort_values(ascending=False, kind="stable")
    return (*[str(name) for name in area.index], "rest", SPRINKLER)


def _county_estimated(record: StationRecord, local: CountyWeather) -> np.ndarray:
    source = {name: record.source[name][:, local.station_index] for group in INPUT_GROUPS for name in group}
    return estimated_share({**source, "rain_mm": local.rain_source})


def _county_provisional(units: pd.DataFrame, stand: xr.Dataset, index: np.ndarray, n: int) -> np.ndarray:
    """OR over the bits of a county's stands."""
    bits = stand["provisional"].to_numpy()
    found = np.zeros((len(bits), n), dtype=np.uint8)
    if len(index):
        present, starts = np.unique(index, return_index=True)
        found[:, present] = np.bitwise_or.reduceat(bits, starts, axis=1)
    return found


def air_inputs(
    case: Case, record: StationRecord, local: CountyWeather, county: xr.Dataset, water: dict[str, np.ndarray],
    moved: dict[str, np.ndarray],
) -> AirInputs:  # fmt: skip
    """What the air is given, by county: `water` of each source, and what of it `moved` through plants."""
    table, place, v = case.table("counties"), local.station_index, record.values
    ids = tuple(county["county_id"].to_numpy())
    elevation = record.elevation_m[place]
    if "elevation_m" in table:
        given = table["elevation_m"].to_numpy(float)
        elevation = np.where(np.isnan(given), elevation, given)
    depth, hour = airmass.given_depths(case.table("mixing_depths"), record.dates, ids)
    return AirInputs(
        dates=record.dates,
        county_ids=ids,
        latitude_deg=table["latitude_deg"].to_numpy(float),
        longitude_deg=table["longitude_deg"].to_numpy(float),
        elevation_m=elevation,
        area_km2=table["area_km2"].to_numpy(float),
        t_max_c=v["t_max_c"][:, place],
        t_min_c=v["t_min_c"][:, place],
        dew_point_c=v["dew_point_c"][:, place],
        vapour_pressure_kpa=v["vapour_pressure_kpa"][:, place],
        rs_mj_m2_d=v["rs_mj_m2_d"][:, place],
        rain_mm=local.rain_mm,
        dew_point_morning_c=v["dew_point_morning_c"][:, place],
        albedo=np.full(local.rain_mm.shape, case.settings.albedo_stands),
        ground_cover=county["ground_cover"].to_numpy(),
        forecast=record.forecast[:, place],
        sources=tuple(water),
        water_mm=np.stack(list(water.values()), axis=-1),
        represented=county["represented_pct"].to_numpy()[0] / 100.0,
        given_depth_m=depth,
        given_hour=hour,
        sites=profiles.site_profiles(case.table("profiles")),
        dew_point_afternoon_c=v["dew_point_afternoon_c"][:, place],
        u2_m_s=v["u2_m_s"][:, place],
        background_dew_point_c=airmass.given_background(case.table("background_air"), record.dates),
        transpiration_mm=np.stack([moved.get(name, np.zeros_like(local.rain_mm)) for name in water], axis=-1),
        **_wind(case, record, ids),
    )


def _wind(case: Case, record: StationRecord, ids: tuple[str, ...]) -> dict[str, Any]:
    """Cells of the counties and the wind over them, where any wind is given."""
    if not len(case.table("wind")):
        return {}
    table = case.table("counties")
    place = table["latitude_deg"].to_numpy(float), table["longitude_deg"].to_numpy(float)
    water = table["edge"].fillna("").astype(str).eq("water").to_numpy() if "edge" in table else None
    return {
        "region": cells.region(ids, *place, table["area_km2"].to_numpy(float), case.outlines or None, water),
        "winds": wind.winds(case.table("wind"), record.dates, ids, *place, case.settings),
    }


def with_air(county: xr.Dataset, air: AirResults) -> xr.Dataset:
    """County dataset with the air's variables and the course by the hour."""
    dims = ("date", "county_id")
    found = county.drop_vars("ground_cover").assign({name: (dims, values) for name, values in air.county.items()})
    if air.county:
        code = confidence(*(found[name] for name in ("flags", "provisional", "contribution_c", "profile_distance_km")))
        found["confidence_code"] = (dims, code)
    found = found.assign_coords(hour=air.hours)
    found = found.assign({f"hourly_{name}": ((*dims, "hour"), values) for name, values in air.hourly.items()})
    if air.profiles is None:
        return found
    found = found.assign_coords(profile_date=county["date"].to_numpy()[-len(air.profiles) :])
    names = ("profile_height_m", "profile_theta_c", "profile_humidity_g_kg", "profile_humidity_without_g_kg")
    layers = ("profile_date", "county_id", "layer")
    return found.assign({name: (layers, air.profiles[:, place]) for place, name in enumerate(names)})


def budget_table(stand: xr.Dataset, county: xr.Dataset, air: AirResults) -> pd.DataFrame:
    """Closure of every unit's water, of the counties' energy and of the tagged water."""
    import pandas as pd

    return pd.concat([water_budget(stand), _energy_budget(county), pd.DataFrame(air.budget)], ignore_index=True)


def _energy_budget(county: xr.Dataset) -> pd.DataFrame:
    """Mean daytime energy of the days that were computed: available, carried by water, left to warm the air."""
    import pandas as pd

    available = county["available_energy_mj_m2_d"].to_numpy()
    latent = county["le_county_w_m2"].to_numpy() * MJ_PER_W_DAY
    own = county["sensible_heat_mj_m2_d"].to_numpy() - county["heat_elsewhere_mj_m2_d"].to_numpy()
    weight = np.where(np.isfinite(available + latent + own), county["area_km2"].to_numpy(), 0.0)
    terms = {
        "available_energy_mj_m2_d": available,
        "latent heat": latent,
        "sensible heat of the county itself": own,
        "closure": available - latent - own,
        "heat_elsewhere_mj_m2_d": county["heat_elsewhere_mj_m2_d"].to_numpy(),
    }
    means = [float(np.nansum(np.nan_to_num(values) * weight) / max(weight.sum(), 1e-12)) for values in terms.values()]
    return pd.DataFrame(
        {
            "balance": "energy by day",
            "subject": "all counties",
            "term": list(terms),
            "value": means,
            "unit": "MJ/m²/day",
        }
    )


def results(
    case: Case, record: StationRecord, station: xr.Dataset, stand: xr.Dataset, county: xr.Dataset,
    air: AirResults, marks: pd.DataFrame, findings: list[Finding],
) -> Results:  # fmt: skip
    """Everything of a run in one place."""
    import pandas as pd

    fills = pd.DataFrame(
        [vars(row) for row in record.fills], columns=["station_id", "quantity", "method", "first", "last", "days"]
    )
    labels = county["date"].to_numpy(), county["county_id"].to_numpy()
    return Results(
        station=station,
        stand=stand,
        county=county,
        contribution=airmass.frames.contribution(*labels, air, case.settings.contribution_hour),
        contribution_hours=airmass.frames.other_hours(*labels, air),
        ranges=airmass.frames.ranges(*labels, air),
        moistened_by=airmass.frames.moistened_by(*labels, air),
        budget=budget_table(stand, county, air),
        marks=marks,
        fills=fills,
        names=_names(case),
        methods=pd.DataFrame(METHODS, columns=["step", "method", "source"]),
        findings=findings,
        outlines=case.outlines,
        settings=case.settings,
        source=dict(case.source),
    )


def _names(case: Case) -> pd.DataFrame:
    """Free text by id, apart from the numbers."""
    import pandas as pd

    pieces = []
    for table, key in (
        ("stations", "station_id"),
        ("counties", "county_id"),
        ("covers", "cover_id"),
        ("soils", "soil_id"),
    ):
        rows = case.table(table)
        if len(rows) and "name" in rows:
            text = rows["name"].fillna("").astype(str)
            pieces.append(pd.DataFrame({"kind": key[:-3], "id": rows[key].astype(str), "name": text}))
    return pd.concat(pieces, ignore_index=True) if pieces else pd.DataFrame(columns=["kind", "id", "name"])
