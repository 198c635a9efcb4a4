"""A made-up run of any size: seeded, plausible to an agronomist, its soil water balance closed by construction."""

import datetime as dt

import numpy as np
import pandas as pd
import xarray as xr

from etflux.case import Settings, with_settings
from etflux.findings import Finding
from etflux.results import Results, water_budget
from etflux.variables import flag_bits

KINDS = (  # cover, tag, soil, regime, Kcb at full cover, first and last day of full cover
    ("corn", "corn", "silt_loam", "rainfed", 1.15, 75, 135),
    ("corn", "corn", "sandy_loam", "sprinkler", 1.15, 78, 138),
    ("soybean", "soybean", "sandy_loam", "rainfed", 1.10, 88, 142),
    ("grass_rotated", "grass", "loam", "rainfed", 0.90, 30, 170),
)
STATION_VALUES = (
    ("t_max_c", 27.0, 3.0), ("t_min_c", 15.0, 3.0), ("t_mean_c", 21.0, 3.0), ("dew_point_c", 15.0, 2.0),
    ("vapour_pressure_kpa", 1.7, 0.2), ("rh_min_pct", 48.0, 8.0), ("rs_mj_m2_d", 21.0, 4.0), ("u2_m_s", 2.2, 0.5),
    ("rn_mj_m2_d", 12.5, 2.0), ("ra_mj_m2_d", 39.0, 1.0),
)  # fmt: skip
AIR_DAYS = 5


def _stands(counties, per_county, bare_county):
    rows = []
    for county in range(counties):
        county_id = f"{99000 + 2 * county + 1:05d}"
        n = 0 if county == bare_county else per_county
        for number in range(n):
            kind = KINDS[(county + number) % len(KINDS)]
            stand_id = f"S{county + 1:02d}-{number + 1}"
            parts = ("early", "middle", "late") if number == 0 and county == 0 else ("whole",)
            rows += [
                (stand_id if part == "whole" else f"{stand_id}.{part}", stand_id, part, "stand", kind[1], county_id,
                 kind[0], kind[2], kind[3], 400.0 / n / len(parts), *kind[4:])
                for part in parts
            ]  # fmt: skip
        unit_id = f"{county_id}.rest.grass"
        rows.append(
            (unit_id, unit_id, "whole", "rest", "rest", county_id, "grass_extensive", "loam", "rainfed",
             500.0 - 400.0 * (n > 0), 0.70, 30, 170)
        )  # fmt: skip
    names = ["unit_id", "stand_id", "part", "kind", "tag", "county_id", "cover_id", "soil_id", "water_regime",
             "area_km2", "kcb_full", "full", "late"]  # fmt: skip
    return pd.DataFrame(rows, columns=names)


def _stage(day, units):
    full, late = units["full"].to_numpy(), units["late"].to_numpy()
    edges = np.array([full - 60, full - 50, full - 30, full, late, late + 35])
    return (day[:, None] >= edges[:, None, :]).sum(axis=0).astype(np.int8)


def _stand_dataset(rng, units, dates, eto, rain):
    n_days, n = len(dates), len(units)
    day = np.arange(n_days)
    stage = _stage(day, units)
    peak = units["kcb_full"].to_numpy()
    kcb = np.array([0.0, 0.0, 0.15, 0.6, 1.0, 0.7, 0.2, 0.3])[stage] * peak
    ke = rng.uniform(0.02, 0.3, (n_days, n)) * (1.2 - kcb)
    taw = np.where(stage >= 3, 180.0, 60.0)
    daily = {name: np.zeros((n_days, n)) for name in ("irrigation_mm", "runoff_mm", "drainage_mm", "ks", "dr_mm")}
    sprinkler = (units["water_regime"] == "sprinkler").to_numpy()
    evaporation, transpiration = np.zeros((n_days, n)), np.zeros((n_days, n))
    dr = np.full(n, 20.0)
    for t in range(n_days):
        daily["runoff_mm"][t] = 0.2 * np.maximum(rain[t] - 25.0, 0.0)
        daily["irrigation_mm"][t] = np.where(sprinkler & (stage[t] >= 3) & (stage[t] < 6) & (dr > 60.0), 25.4, 0.0)
        daily["ks"][t] = np.clip((taw[t] - dr) / (0.5 * taw[t]), 0.0, 1.0)
        transpiration[t] = daily["ks"][t] * kcb[t] * eto[t]
        evaporation[t] = np.where(dr < taw[t], ke[t] * eto[t], 0.0)
        dr = dr - rain[t] + daily["runoff_mm"][t] - daily["irrigation_mm"][t] + evaporation[t] + transpiration[t]
        daily["drainage_mm"][t] = np.maximum(-dr, 0.0)
        dr = np.maximum(dr, 0.0)
        daily["dr_mm"][t] = dr
    raw = 0.5 * taw
    et = evaporation + transpiration
    zero = np.zeros((n_days, n))
    window = sprinkler & (stage >= 3) & (stage < 6)
    talk = (stage >= 3) & (stage < 6)
    provisional = np.where((day[:, None] > n_days - 12) & talk, flag_bits("provisional")["climate_adjustment"], 0)
    values = daily | {
        "eto_mm": np.broadcast_to(eto, (n_days, n)), "stage_code": stage, "kcb": kcb, "ke": ke,
        "days_after_planting": np.where(stage > 0, day[:, None] - units["full"].to_numpy() + 60.0, np.nan),
        "kc": et / eto, "plant_height_m": 2.0 * kcb / 1.15, "root_depth_m": np.where(stage >= 3, 1.2, 0.3),
        "ground_cover": kcb / 1.2, "few": 1.0 - kcb / 1.3, "evaporation_mm": evaporation,
        "transpiration_mm": transpiration, "et_mm": et, "et_potential_mm": (kcb + ke) * eto,
        "de_mm": np.minimum(daily["dr_mm"], 22.0), "ds_mm": zero, "taw_mm": taw, "raw_mm": raw,
        "water_left_mm": np.maximum(taw - daily["dr_mm"], 0.0),
        "water_left_pct": 100.0 * np.maximum(taw - daily["dr_mm"], 0.0) / taw,
        "rain_stand_mm": np.broadcast_to(rain, (n_days, n)), "snow_mm": zero, "melt_mm": zero,
        "irrigation_gross_mm": daily["irrigation_mm"] / 0.85, "sprinkler_loss_mm": daily["irrigation_mm"] * 0.15 / 0.85,
        "capillary_rise_mm": zero, "percolation_mm": daily["drainage_mm"],
        "need_mm": np.where(window, daily["dr_mm"], 0.0),
        "days_to_stress": np.where(talk, np.maximum(raw - daily["dr_mm"], 0.0) / np.maximum(et, 0.01), np.nan),
        "closure_error_mm": zero, "provisional": provisional.astype(np.uint8),
    }  # fmt: skip
    labels = ("stand_id", "part", "kind", "tag", "county_id", "cover_id", "soil_id", "water_regime", "area_km2")
    return xr.Dataset(
        {name: (("date", "unit_id"), array) for name, array in values.items()},
        coords={"date": dates, "unit_id": units["unit_id"].to_numpy(object),
                "stored_start_mm": ("unit_id", np.full(n, -20.0)),
                **{name: ("unit_id", units[name].to_numpy()) for name in labels}},
    )  # fmt: skip


def _county_dataset(rng, stand, units, dates, eto, rain, air):
    ids = list(dict.fromkeys(units["county_id"]))
    n_days, n = len(dates), len(ids)
    index = np.array([ids.index(name) for name in units["county_id"]])
    area = units["area_km2"].to_numpy()
    own = (units["kind"] == "stand").to_numpy()
    tags = ["corn", "soybean", "grass", "rest"]

    def mean(where, name="et_mm"):
        sums = np.zeros((n_days, n))
        np.add.at(sums.T, index, (stand[name].to_numpy() * np.where(where, area, 0.0)).T)
        return sums

    share = np.bincount(index, np.where(own, area, 0.0), n) / 500.0
    et = mean(np.ones(len(units), bool)) / 500.0
    with np.errstate(invalid="ignore", divide="ignore"):
        et_stands = np.where(share > 0.0, mean(own) / (500.0 * share), np.nan)
    by_tag = np.stack([28.35 * mean((units["tag"] == tag).to_numpy()) / 500.0 for tag in tags], axis=-1)
    inside = np.zeros((n_days, n), bool)
    inside[n_days - AIR_DAYS :] = air
    contribution = np.where(inside, 2.6 + rng.normal(0.0, 0.4, (n_days, n)), np.nan)
    flags = np.zeros((n_days, n), np.int32)
    bits = flag_bits("air")
    flags[inside & (rng.random((n_days, n)) < 0.2)] |= bits["cumulus"]
    flags[inside & (rng.random((n_days, n)) < 0.2)] |= bits["standard_profile"]
    flags[inside & (share == 0.0)] |= bits["represented_low"]
    if air and n > 2:
        contribution[-1, n // 2] = np.nan
        flags[-1, n // 2] |= bits["saturated"]
    flags[~inside & air] |= bits["dry_region"]
    depth = np.where(inside, rng.uniform(700.0, 1400.0, (n_days, n)), np.nan)
    with_water = np.where(inside, 22.0 + rng.normal(0.0, 0.6, (n_days, n)), np.nan)
    estimated = np.where(rng.random((n_days, n)) < 0.1, 40.0, 0.0)
    values = {
        "eto_mm": np.broadcast_to(eto, (n_days, n)), "rain_mm": np.broadcast_to(rain, (n_days, n)),
        "et_stands_mm": et_stands, "et_county_mm": et, "le_stands_w_m2": 28.35 * et_stands,
        "le_county_w_m2": 28.35 * et, "le_daytime_w_m2": 48.0 * et,
        "le_transpiration_w_m2": 24.0 * et, "le_evaporation_w_m2": 4.35 * et,
        "water_volume_hm3": et * 0.5, "represented_pct": np.broadcast_to(100.0 * share, (n_days, n)),
        "mixing_depth_m": depth, "depth_a0_m": 0.85 * depth, "humidity_mixed_g_kg": with_water * 0.8,
        "theta_mixed_c": with_water + 10.0, "dew_point_mixed_c": with_water,
        "dew_point_without_c": with_water - contribution, "contribution_c": contribution,
        "contribution_same_day_c": 0.6 * contribution, "contribution_carried_c": 0.4 * contribution,
        "contribution_g_kg": 0.75 * contribution, "contribution_low_c": contribution - 0.5,
        "contribution_high_c": contribution + 0.5, "lcl_m": depth + 100.0,
        "available_energy_mj_m2_d": 0.0 * depth + 14.0,
        "sensible_heat_mj_m2_d": 0.0 * depth + 3.0, "heat_elsewhere_mj_m2_d": 0.0 * depth + 0.5, "flags": flags,
        "estimated_share_pct": estimated,
        "provisional": np.where(estimated > 20.0, flag_bits("provisional")["weather"], 0).astype(np.uint8),
    }  # fmt: skip
    dataset = xr.Dataset(
        {name: (("date", "county_id"), array) for name, array in values.items()},
        coords={
            "date": dates, "county_id": np.array(ids, object), "tag": np.array(tags, object),
            "name": ("county_id", np.array([f"County {number + 1}" for number in range(n)], object)),
            "area_km2": ("county_id", np.full(n, 500.0)), "latitude_deg": ("county_id", 41.0 + 0.1 * np.arange(n)),
            "longitude_deg": ("county_id", -93.0 + 0.1 * np.arange(n)),
        },
    )  # fmt: skip
    by_hour = with_water[..., None] + np.array([-1.0, 0.0, 0.5])
    return dataset.assign_coords(hour=[12.0, 15.0, 18.0]).assign(
        le_by_tag_w_m2=(("date", "county_id", "tag"), by_tag),
        hourly_dew_point_mixed_c=(("date", "county_id", "hour"), by_hour),
        hourly_contribution_c=(("date", "county_id", "hour"), contribution[..., None] * np.array([0.8, 1.0, 1.1])),
        hourly_mixing_depth_m=(("date", "county_id", "hour"), depth[..., None] * np.array([0.8, 1.0, 1.1])),
        clock_minus_solar_h=(("date", "county_id"), np.full(contribution.shape, 0.3)),
    )


def _contribution(county):
    pieces = []
    share = {"corn": 0.6, "soybean": 0.25, "grass": 0.15, "rest": 0.2}  # the rest comes on top
    ages = {0: 0.6, 1: 0.3, 2: 0.1}
    whole = county["contribution_c"].to_series().dropna()
    for cover, part in share.items():
        for age, of_it in ages.items():
            value = part * of_it * whole.to_numpy()
            rows = whole.index.to_frame(index=False)
            pieces.append(rows.assign(hour=15.0, cover=cover, age_d=age, contribution_c=value,
                                      contribution_g_kg=0.75 * value))  # fmt: skip
    return pd.concat(pieces, ignore_index=True)


def _station_dataset(rng, stations, dates, eto, rain):
    shape = (len(dates), stations)
    values = {name: middle + rng.normal(0.0, spread, shape) for name, middle, spread in STATION_VALUES}
    values |= {"rain_mm": np.broadcast_to(rain, shape), "eto_mm": np.broadcast_to(eto, shape)}
    values |= {"ets_mm": 1.0 * values["eto_mm"], "etr_mm": 1.25 * values["eto_mm"]}
    values |= {"eto_hargreaves_mm": 1.08 * values["eto_mm"], "eto_turc_mm": 0.94 * values["eto_mm"]}
    values["eto_spread_mm"] = 0.14 * values["eto_mm"]
    source = np.zeros(shape, np.uint8)
    source[5:9, -1] = flag_bits("source")["neighbour"]
    names = [name for name, *_ in STATION_VALUES[:8]] + ["rain_mm"]
    values |= {f"{name}_source": source if name == "rs_mj_m2_d" else 0 * source for name in names}
    values["estimated_share_pct"] = np.where(source > 0, 20.0, 0.0)
    values["provisional"] = 0 * source
    return xr.Dataset(
        {name: (("date", "station_id"), array) for name, array in values.items()},
        coords={
            "date": dates, "station_id": [f"N{number + 1}" for number in range(stations)],
            "latitude_deg": ("station_id", 41.0 + 0.2 * np.arange(stations)),
            "longitude_deg": ("station_id", -93.0 + 0.3 * np.arange(stations)),
            "elevation_m": ("station_id", 250.0 + 10.0 * np.arange(stations)),
        },
    )  # fmt: skip


def make(counties=24, days=183, stations=3, per_county=4, air=True, units="si", seed=20310726, **changes):
    """A made-up run; `changes` replace fields of the results."""
    rng = np.random.default_rng(seed)
    dates = pd.date_range("2031-04-01", periods=days)
    day = np.arange(days)[:, None]
    eto = np.maximum(2.5 + 2.8 * np.sin(np.pi * (day + 20.0) / 223.0) + rng.normal(0.0, 0.7, (days, 1)), 0.4)
    rain = np.where(rng.random((days, 1)) < 0.25, rng.gamma(1.0, 13.0, (days, 1)), 0.0)
    rows = _stands(counties, per_county, bare_county=counties - 1 if counties > 1 else None)
    stand = _stand_dataset(rng, rows, dates, eto, rain)
    county = _county_dataset(rng, stand, rows, dates, eto, rain, air)
    station = _station_dataset(rng, stations, dates, eto, rain)
    settings = with_settings(Settings(), title="Upper Basin, a season", units=units)
    names = [("county", name, f"County {n + 1}") for n, name in enumerate(county["county_id"].to_numpy())]
    names += [("station", name, f"Station {name}") for name in station["station_id"].to_numpy()]
    names += [("cover", "corn", "Corn (grain)"), ("cover", "soybean", "Soybean"),
              ("cover", "grass_rotated", "Grassland, rotationally grazed")]  # fmt: skip
    marks = [
        (unit, mark, dates[0] + pd.Timedelta(days=int(full) + shift), "heat units")
        for unit, full in zip(rows["unit_id"], rows["full"], strict=True)
        for mark, shift in (("planting", -60), ("emergence", -50), ("full_cover", 0))
    ]
    closure = water_budget(stand)
    energy = [("energy by day", "all counties", name, value, "MJ/m²/day") for name, value in
              (("available_energy_mj_m2_d", 14.0), ("sensible_heat_mj_m2_d", 3.0), ("closure", 0.0))]  # fmt: skip
    made = {
        "station": station, "stand": stand, "county": county,
        "contribution": _contribution(county) if air else pd.DataFrame(columns=["date", "county_id", "hour", "cover",
                                                                                 "age_d", "contribution_c",
                                                                                 "contribution_g_kg"]),
        "budget": pd.concat([closure, pd.DataFrame(energy, columns=closure.columns)], ignore_index=True),
        "marks": pd.DataFrame(marks, columns=["unit_id", "mark", "date", "basis"]),
        "fills": pd.DataFrame([(f"N{stations}", "rs_mj_m2_d", "ratio to clear sky of the neighbour N1",
                                dates[min(5, days - 1)], dates[min(8, days - 1)], 4)],
                              columns=["station_id", "quantity", "method", "first", "last", "days"]),
        "names": pd.DataFrame(names, columns=["kind", "id", "name"]),
        "methods": pd.DataFrame([("Reference ET", "Grass reference evapotranspiration, daily", "FAO-56 eq. 6")],
                                columns=["step", "method", "source"]),
        "findings": [
            Finding("pyranometer-drift", "weather", 3, "rs_mj_m2_d", 0.93, f"station N{stations}", "6 % in the season"),
            Finding("value-repeated", "weather", 8, "t_min_c", 14.2, "station N1, 2031-05-04"),
        ],
        "settings": settings,
        "source": {"path": "somewhere/upper_basin.xlsx", "sha256": "ab" * 32, "etflux_template": 1},
        "issued": dt.datetime(2031, 10, 1, 6, 10, tzinfo=dt.UTC),
    }  # fmt: skip
    return Results(**{**made, **changes})
