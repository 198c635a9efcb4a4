"""Cases of the measured sites, made from the sites' own documents, and what was measured there.

Nothing here is fitted: places, sowing dates, tillage and soil texture are the sites' own; everything else is the
package's default or a published option. All variants of a site are stands of one case, so that they meet the same sky
in one run. Files are found through ETFLUX_MEASURED only.
"""

from __future__ import annotations

import os
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pandas as pd

from etflux import humidity, solar
from etflux.case import Case, Settings, with_settings
from etflux.compare import measurements_from
from etflux.stands import class_available_water, packaged

MJ_PER_W_DAY = 0.0864
NE1_FILE, AR1_FILE = "us_ne1_daily_2001-2006.csv", "us_ar1_grass_daily_2010-2011.csv"
HALF_HOURS_LEAST = 40  # of 48 at US-Bo1, for a day's mean to stand
KRS_INTERIOR = 0.16  # FAO-56 eq. 50
WITHOUT_AIR = {"air_worlds": False, "air_ranges": False, "second_opinions": False}

NE1 = SimpleNamespace(latitude=41.1651, longitude=-96.4766, elevation=361.0, wind_height=6.0)
BO1 = SimpleNamespace(latitude=40.0062, longitude=-88.2904, elevation=219.0, wind_height=10.0)
AR1 = SimpleNamespace(latitude=36.4267, longitude=-99.4200, elevation=611.0, wind_height=3.0)
AZMET_WIND_M = 3.0

# US-Ne1: main sowing day of each year (management record). Tillage: "since initiation of the study in 2001, all sites
# have been under no-till" (University of Nebraska, Carbon Sequestration Program, description of the study sites), until
# the record has a conventional tillage again, on 26 October 2005. Its entries "Other" name no implement.
SOWN = {2002: "2002-05-10", 2003: "2003-05-15", 2004: "2004-05-04", 2005: "2005-05-05", 2006: "2006-05-05"}
TILLED = {2002: "no-till", 2003: "no-till", 2004: "no-till", 2005: "no-till", 2006: "conventional"}
ROTATION_DAYS = 4  # the record: a turn of the centre pivot takes 87 to 93 hours
# US-Bo1, 1998: the sowing day is not on record. Middle of the usual period of central Illinois (common practice, no
# source): 20 May.
BO1_SOWN = "1998-05-20"
# Corn residue on the ground at planting: 95 % after harvest, 90 % of it after winter, 90 % of that after a no-till
# planter: the calculation method of Shelton, Smith and Dickey, University of Nebraska NebGuide G93-1133 (1995), from
# memory. At full cover evaporation is halved: FAO-56 ch. 11; Klocke et al. (2009), Trans. ASABE 52:103.
NO_TILL_CORN_RESIDUE_PCT = 77.0


def folder() -> Path:
    """Folder of the measurements; KeyError where none is named."""
    return Path(os.environ["ETFLUX_MEASURED"])


@cache
def table(name: str) -> pd.DataFrame:
    """One file, missing marks as NaN."""
    found = pd.read_csv(folder() / name)
    numbers = found.select_dtypes("number").columns
    found[numbers] = found[numbers].where(found[numbers] > -9000)
    return found


@cache
def fluxnet(name: str) -> pd.DataFrame:
    """A daily FLUXNET file by date."""
    days = table(name)
    return days.set_index(pd.to_datetime(days["TIMESTAMP"].astype(str))).asfreq("D")


@cache
def bondville() -> pd.DataFrame:
    """US-Bo1 by date."""
    days = table("us_bo1_soybean_daily_1998.csv")
    return days.set_index(pd.to_datetime(days["date"]))


def range_from_radiation(rs_mj_m2_d, dates, latitude_deg):
    """Daily temperature range that FAO-56 eq. 50 turned round gives: Tmax - Tmin = (Rs / (0.16 Ra))². [K]"""
    ra = solar.extraterrestrial_radiation(latitude_deg, dates.dayofyear.to_numpy(float))
    return (np.asarray(rs_mj_m2_d, float) / ra / KRS_INTERIOR) ** 2


def _weather(dates, **columns):
    return pd.DataFrame({"station_id": "tower", "date": dates, **columns})


def fluxnet_weather(days: pd.DataFrame, place: SimpleNamespace) -> pd.DataFrame:
    """Daily weather of a FLUXNET site: only the mean temperature is there, so the range comes from the radiation."""
    rs = days["SW_IN_F"].to_numpy() * MJ_PER_W_DAY
    half = 0.5 * range_from_radiation(rs, days.index, place.latitude)
    mean = days["TA_F"].to_numpy()
    t_max, t_min = mean + half, mean - half
    # the mean of half-hourly deficits, kept below saturation of the day's own temperatures
    most = 0.5 * (humidity.saturation_vapour_pressure(t_max) + humidity.saturation_vapour_pressure(t_min)) - 0.01
    return _weather(
        days.index, t_max_c=t_max, t_min_c=t_min, t_mean_c=mean, rs_mj_m2_d=rs,
        vpd_kpa=np.minimum(days["VPD_F"].to_numpy() / 10.0, most), wind_m_s=days["WS_F"].to_numpy(),
        rain_mm=days["P_F"].to_numpy(),
    )  # fmt: skip


def bondville_weather(mean_only: bool = False) -> pd.DataFrame:
    """Daily weather of US-Bo1, with its true extremes, or as if only the mean had been kept."""
    days = bondville()
    t_max, t_min = days["Tmax_C"].to_numpy(), days["Tmin_C"].to_numpy()
    if mean_only:
        half = 0.5 * range_from_radiation(days["Rs_MJ"], days.index, BO1.latitude)
        t_max, t_min = days["Tmean_C"].to_numpy() + half, days["Tmean_C"].to_numpy() - half
    return _weather(
        days.index, t_max_c=t_max, t_min_c=t_min, t_mean_c=days["Tmean_C"].to_numpy(),
        vapour_pressure_kpa=days["ea_kPa"].to_numpy(), rs_mj_m2_d=days["Rs_MJ"].to_numpy(),
        wind_m_s=days["wind10_ms"].to_numpy(), rain_mm=days["rain_mm"].to_numpy(),
    )  # fmt: skip


# --- what the weather of a site needs ---


@cache
def ne1_canopy(what: str) -> pd.Series:
    """Measured canopy of US-Ne1 by day: LAI_TOT_m2m2 or HEIGHTC_m."""
    rows = table("us_ne1_lai_height_soil.csv")
    rows = rows[rows["variable"] == what]
    values = pd.Series(rows["value"].astype(float).to_numpy(), pd.to_datetime(rows["date"].astype(int).astype(str)))
    return values.sort_index()


def ne1_height(year: int, days: pd.DatetimeIndex) -> np.ndarray:
    """Height of the maize on every day: 0 at sowing, linear between measurements, the last one kept to 10 October."""
    seen = ne1_canopy("HEIGHTC_m")
    seen = seen[seen.index.year == year]
    end = pd.Timestamp(year, 10, 10)
    ends = pd.Series([0.0, seen.iloc[-1]], [pd.Timestamp(SOWN[year]), end])
    seen = pd.concat([seen, ends]).sort_index()
    height = seen.reindex(days.union(seen.index)).interpolate("index").reindex(days)
    return height.where((days >= SOWN[year]) & (days <= end), 0.0).fillna(0.0).to_numpy()


def wind_over_grass(wind_m_s, height_m, crop_m, blend_m=45.0):
    """Wind that grass would have at the same height, from wind measured over a crop.

    Through a height at which the air no longer feels the ground (45 m), both profiles logarithmic with displacement
    2/3 h and roughness 0.123 h: ASCE-EWRI (2005) app. B, after Allen and Wright (1997), J. Hydrol. Eng. 2:26-35 (from
    memory).
    """

    def carried(z, h):
        return np.log((z - 2.0 / 3.0 * h) / (0.123 * h))

    grass = 0.12
    crop = np.maximum(crop_m, grass)
    aloft = wind_m_s * carried(blend_m, crop) / carried(height_m, crop)
    return aloft * carried(height_m, grass) / carried(blend_m, grass)


@cache
def ne1_irrigation(year: int) -> pd.Series:
    """Depth of each irrigation of US-Ne1, by day, found in the site's own gauge. [mm]

    The rain column holds the irrigation too. The management record has the days on which a turn of the pivot began; the
    gauge gets its share on one of the days of that turn: that with the most water. More than the year's middle depth is
    rain that fell on the same day.
    """
    rain = fluxnet(NE1_FILE)["P_F"].loc[str(year)]
    record = table("us_ne1_management.csv")
    begun = pd.to_datetime(record.loc[record["group"] == "WATER", "date"].astype(str))
    days = []
    for day in begun[begun.dt.year == year]:
        turn = rain.loc[day : day + pd.Timedelta(days=ROTATION_DAYS - 1)].drop(days, errors="ignore")
        days.append(turn.idxmax())
    depth = rain.loc[days]
    return depth.clip(upper=depth.median()).loc[lambda found: found > 0.0].sort_index()


# --- variants and cases ---


@dataclass(frozen=True)
class Variant:
    """One way to run a site: changes of its stand, and what else it needs.

    Parameters
    ----------
    name : str
        Also the stand's id.
    stand : dict
        Columns of the stands table on top of the site's own.
    county : str
        "site"; "rain" takes all water as rain; "wind" has the wind carried from the crop to grass.
    observations : DataFrame, optional
    covers, soils : dict, optional
        A row of one's own: changes of a packaged one, under the id that `stand` names.
    """

    name: str
    stand: dict = field(default_factory=dict)
    county: str = "site"
    observations: pd.DataFrame | None = None
    covers: dict | None = None
    soils: dict | None = None


def _own_cover(name: str, cover: str, **changes) -> Variant:
    row = packaged("covers").set_index("cover_id", drop=False).loc[cover].to_dict()
    return Variant(name, {"cover_id": name}, covers={**row, "cover_id": name, **changes})


def _own_soil(name: str, soil: str, **changes) -> Variant:
    row = packaged("soils").set_index("soil_id", drop=False).loc[soil].to_dict()
    return Variant(name, {"soil_id": name}, soils={**row, "soil_id": name, **changes})


def _texture(soil: str) -> dict:
    return {"available_water_mm_m": float(class_available_water([soil])[0])}


def ne1_variants(year: int) -> list[Variant]:
    """Irrigated maize: "kept" has every option that literature supports, the same at all sites."""
    residue = {"residue_pct": NO_TILL_CORN_RESIDUE_PCT} if TILLED[year] == "no-till" else {}
    area = ne1_canopy("LAI_TOT_m2m2")
    area = area[area.index.year == year]
    seen = pd.DataFrame({"date": area.index, "observed": "leaf area", "observed_value": area.to_numpy()})
    soil = "silty_clay_loam"
    return [
        Variant("documents"),
        Variant("plain", {"tillage": None}, "rain"),
        Variant("bare", {"tillage": None}),
        Variant("all_rain", {}, "rain"),
        Variant("residue", residue),
        Variant("texture", _texture(soil)),
        Variant("leaf_area", {}, observations=seen),
        Variant("wind", {}, "wind"),
        _own_cover("day_lengths", "corn", marks="day lengths"),
        _own_cover("late_kcb", "corn", kcb_end=0.63),
        _own_cover("rainfed_roots", "corn", root_max_irrigated_m=1.7),
        _own_soil("deep_layer", soil, evaporation_depth_m=0.15),
        Variant("kept", {**residue, **_texture(soil)}),
        Variant("kept_wind", {**residue, **_texture(soil)}, "wind"),
    ]


def bo1_variants() -> list[Variant]:
    """Rainfed soybean after corn, no-till."""
    residue, soil = {"residue_pct": NO_TILL_CORN_RESIDUE_PCT}, "silt_loam"
    return [
        Variant("documents"),
        Variant("plain", {"tillage": None}),
        Variant("residue", residue),
        Variant("texture", _texture(soil)),
        Variant("mean_only", {}, "mean_only"),
        _own_cover("heat_units", "soybean", marks="heat units"),
        _own_cover("newer_kcb", "soybean", kcb_mid=0.87),
        Variant("sown_early", {"planting_date": "1998-05-10"}),
        Variant("sown_late", {"planting_date": "1998-05-30"}),
        Variant("shallow_roots", {"restricting_depth_m": 0.78}),
        _own_soil("deep_layer", soil, evaporation_depth_m=0.15),
        Variant("kept", {**residue, **_texture(soil)}),
    ]


def ar1_variants() -> list[Variant]:
    """Grass on loam."""
    return [
        Variant("documents"),
        Variant("plain"),
        Variant("texture", _texture("loam")),
        Variant("rotated", {"cover_id": "grass_rotated"}),
        Variant("shallow_roots", {"restricting_depth_m": 0.75}),
        _own_soil("deep_layer", "loam", evaporation_depth_m=0.15),
        Variant("kept", _texture("loam")),
    ]


def _case(place, weathers: dict[str, pd.DataFrame], own: dict, variants: list[Variant], settings=None, events=None):
    """Case of a site: a county for each weather, a stand for each variant."""
    names = list(weathers)
    spot = {"latitude_deg": place.latitude, "longitude_deg": place.longitude}
    stations = pd.DataFrame(
        {"station_id": names, **spot, "elevation_m": place.elevation, "wind_height_m": place.wind_height}
    )
    counties = pd.DataFrame({"county_id": names, "station_id": names, "area_km2": 100.0, **spot})
    rows = [
        {"stand_id": item.name, "county_id": item.county, "area_km2": 5.0, **own, **item.stand} for item in variants
    ]
    stands = pd.DataFrame(rows)
    if "planting_date" in stands:
        stands["planting_date"] = pd.to_datetime(stands["planting_date"])
    weather = pd.concat([frame.assign(station_id=name) for name, frame in weathers.items()], ignore_index=True)
    tables = {"stations": stations, "weather": weather, "counties": counties, "stands": stands}
    seen = [item.observations.assign(stand_id=item.name) for item in variants if item.observations is not None]
    if seen:
        tables["observations"] = pd.concat(seen, ignore_index=True)
    for name in ("covers", "soils"):
        made = [getattr(item, name) for item in variants if getattr(item, name)]
        if made:
            tables[name] = pd.concat([packaged(name), pd.DataFrame(made)], ignore_index=True)
    if events is not None:
        with_events = [item.name for item in variants if item.county != "rain"]
        tables["irrigation_events"] = pd.concat(
            [events.assign(stand_id=name) for name in with_events], ignore_index=True
        )
    return Case(with_settings(Settings(), **{**WITHOUT_AIR, **(settings or {})}), tables)


def ne1(year: int, settings=None, only: str | None = None) -> Case:
    """Irrigated maize of one year, to the end of October."""
    days = fluxnet(NE1_FILE).loc[f"{year}-01-01" : f"{year}-10-31"]
    depth = ne1_irrigation(year)
    rain = fluxnet_weather(days, NE1)
    site = rain.assign(rain_mm=(days["P_F"] - depth.reindex(days.index, fill_value=0.0)).to_numpy())
    wind = wind_over_grass(site["wind_m_s"].to_numpy(), NE1.wind_height, ne1_height(year, days.index))
    own = {
        "cover_id": "corn", "soil_id": "silty_clay_loam", "water_regime": "sprinkler", "planting_date": SOWN[year],
        "hybrid_heat_units": 1500.0, "tillage": TILLED[year],
    }  # fmt: skip
    events = pd.DataFrame({"date": depth.index, "depth_net_mm": depth.to_numpy()})
    weathers = {"site": site, "rain": rain, "wind": site.assign(wind_m_s=wind)}
    return _case(NE1, weathers, own, _some(ne1_variants(year), only), settings, events)


def bo1(settings=None, only: str | None = None) -> Case:
    """Rainfed no-till soybean of 1998."""
    own = {
        "cover_id": "soybean", "soil_id": "silt_loam", "water_regime": "rainfed", "planting_date": BO1_SOWN,
        "tillage": "no-till",
    }  # fmt: skip
    weathers = {"site": bondville_weather(), "mean_only": bondville_weather(mean_only=True)}
    return _case(BO1, weathers, own, _some(bo1_variants(), only), settings)


def ar1(settings=None, only: str | None = None) -> Case:
    """Grass on loam, not irrigated, 2010 and 2011."""
    own = {"cover_id": "grass_extensive", "soil_id": "loam", "water_regime": "rainfed"}
    return _case(
        AR1, {"site": fluxnet_weather(fluxnet(AR1_FILE), AR1)}, own, _some(ar1_variants(), only), settings
    )  # fmt: skip


def _some(variants: list[Variant], only: str | None) -> list[Variant]:
    return [item for item in variants if only is None or item.name.startswith(only)]


# Rows of the Arizona network that cannot be right: az01 2023-06-15 (documented; mean wind 8.0 m/s where the two-minute
# readings have 1.5); az04 2023-07-16 (highest temperature 30.0 °C below the day's mean, 33.2).
AZMET_BAD = (("az01", "2023-06-15"), ("az04", "2023-07-16"))


@cache
def azmet_days() -> pd.DataFrame:
    """Days of the Arizona network, all of them."""
    days = table("azmet_daily_15stations_2023.csv")
    return days.assign(date=pd.to_datetime(days["datetime"]))


def azmet_good() -> pd.DataFrame:
    """The days without the bad rows."""
    days = azmet_days()
    keys = zip(days["meta_station_id"], days["datetime"].astype(str), strict=True)
    return days[[key not in AZMET_BAD for key in keys]].reset_index(drop=True)


def azmet(days: pd.DataFrame | None = None) -> Case:
    """15 stations; a stand is there because a case needs one."""
    places, days = table("azmet_stations.csv"), azmet_good() if days is None else days
    stations = pd.DataFrame(
        {"station_id": places["id"], "latitude_deg": places["latitude"], "longitude_deg": places["longitude"],
         "elevation_m": places["elev_m"], "wind_height_m": AZMET_WIND_M, "climate": "arid"}
    )  # fmt: skip
    weather = pd.DataFrame(
        {"station_id": days["meta_station_id"], "date": days["date"], "t_max_c": days["temp_air_maxC"],
         "t_min_c": days["temp_air_minC"], "t_mean_c": days["temp_air_meanC"],
         "vapour_pressure_kpa": days["vp_actual_mean"],
         "rs_mj_m2_d": days["sol_rad_total"], "wind_m_s": days["wind_spd_mean_mps"],
         "rain_mm": days["precip_total_mm"]}
    )  # fmt: skip
    first = places.iloc[0]
    county = {"county_id": "site", "area_km2": 10.0, "latitude_deg": first["latitude"],
              "longitude_deg": first["longitude"], "station_id": first["id"]}  # fmt: skip
    stand = {"stand_id": "bare", "county_id": "site", "cover_id": "bare", "soil_id": "loam", "area_km2": 10.0}
    settings = with_settings(Settings(), **WITHOUT_AIR, missing_rain="treat as 0")
    tables = {
        "stations": stations,
        "weather": weather,
        "counties": pd.DataFrame([county]),
        "stands": pd.DataFrame([stand]),
    }
    return Case(settings, tables)


# --- measurements ---


def _long(place: str, days: pd.Series, quantity: str, unit: str, series: str) -> pd.DataFrame:
    return pd.DataFrame({"place": place, "date": days.index, "quantity": quantity, "value": days.to_numpy(),
                         "unit": unit, "series": series})  # fmt: skip


def flux_rows(days: pd.DataFrame, places: list[str]) -> list[pd.DataFrame]:
    """Latent heat of a FLUXNET site, measured and closure-corrected, for several stands."""
    return [_long(place, days[name], "et_mm", "W/m²", name) for place in places for name in ("LE_F_MDS", "LE_CORR")]


def measured(site: str, results) -> object:
    """Measurements of a site for all stands of its run: water use, and net radiation at the station."""
    stands = [str(name) for name in results.stand["stand_id"].to_numpy()[results.stand["kind"].to_numpy() == "stand"]]
    if site == "bo1":
        days = bondville()
        latent = days["LE_Wm2"].where(days["LE_n"] >= HALF_HOURS_LEAST)
        rows = [_long(place, latent, "et_mm", "W/m²", "LE") for place in stands]
        net, unit = days["Rn_MJ"], "MJ/m²/day"
    else:
        days = fluxnet(NE1_FILE if site.startswith("ne1") else AR1_FILE)
        first, last = (str(results.dates[k]) for k in (0, -1))
        days = days.loc[first:last]
        rows, net, unit = flux_rows(days, stands), days["NETRAD"], "W/m²"
    rows.append(_long("site", net, "rn_mj_m2_d", unit, "net radiometer"))
    return measurements_from(pd.concat(rows, ignore_index=True), f"tower {site}")


def measured_azmet() -> object:
    """The network's own Penman-Monteith reference ET, printed to 0.1 mm."""
    days = azmet_good()
    rows = pd.DataFrame({"place": days["meta_station_id"], "date": days["date"], "quantity": "ets_mm",
                         "value": days["eto_pen_mon"], "unit": "mm/day", "series": "network"})  # fmt: skip
    return measurements_from(rows, "network")
