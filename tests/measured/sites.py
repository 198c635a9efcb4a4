"""Cases of the measured sites, made from the sites' own documents, and what was measured there.

Nothing here is fitted: places, sowing dates, tillage and soil texture are the sites' own; everything else is the
package's default. Files are found through ETFLUX_MEASURED only.
"""

from __future__ import annotations

import os
from functools import cache
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pandas as pd

from etflux import humidity, solar
from etflux.case import Case, Settings, with_settings

LAMBDA_MJ_KG = 2.45  # FAO-56 Annex 3, p. 223: the constant behind the published millimetres
MJ_PER_W_DAY = 0.0864
KRS_INTERIOR = 0.16  # FAO-56 eq. 50
DEPTHS_AND_AIR = {"air_worlds": False, "air_ranges": False, "second_opinions": False}

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
HARVESTED = {2002: "2002-11-04", 2003: None, 2004: "2004-10-14", 2005: "2005-10-12", 2006: "2006-10-04"}
# US-Bo1, 1998: the sowing day is not on record. Middle of the usual period of central Illinois (common practice, no
# source): 20 May.
BO1_SOWN = "1998-05-20"


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


def case(place, weather, stands, settings=None, **tables) -> Case:
    """Case of one station in one county full of the given stands."""
    stations = pd.DataFrame(
        [{"station_id": "tower", "latitude_deg": place.latitude, "longitude_deg": place.longitude,
          "elevation_m": place.elevation, "wind_height_m": place.wind_height}]
    )  # fmt: skip
    counties = pd.DataFrame(
        [{"county_id": "site", "area_km2": 10.0, "latitude_deg": place.latitude, "longitude_deg": place.longitude}]
    )
    rows = pd.DataFrame([{"county_id": "site", "area_km2": 10.0 / len(stands), **stand} for stand in stands])
    for name in ("planting_date", "harvest_date", "greenup_date"):
        if name in rows:
            rows[name] = pd.to_datetime(rows[name])
    found = {"stations": stations, "weather": weather, "counties": counties, "stands": rows, **tables}
    return Case(with_settings(Settings(), **{**DEPTHS_AND_AIR, **(settings or {})}), found)


@cache
def ne1_canopy(what: str) -> pd.Series:
    """Measured canopy of US-Ne1 by day: LAI_TOT_m2m2 or HEIGHTC_m."""
    rows = table("us_ne1_lai_height_soil.csv")
    rows = rows[rows["variable"] == what]
    values = pd.Series(rows["value"].astype(float).to_numpy(), pd.to_datetime(rows["date"].astype(int).astype(str)))
    return values.sort_index()


def leaf_area(year: int, stand_id: str) -> pd.DataFrame:
    """Observations of leaf area of one year of US-Ne1."""
    area = ne1_canopy("LAI_TOT_m2m2")
    area = area[area.index.year == year]
    return pd.DataFrame(
        {"stand_id": stand_id, "date": area.index, "observed": "leaf area", "observed_value": area.to_numpy()}
    )


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
    rain = fluxnet("us_ne1_daily_2001-2006.csv")["P_F"].loc[str(year)]
    record = table("us_ne1_management.csv")
    begun = pd.to_datetime(record.loc[record["group"] == "WATER", "date"].astype(str))
    days = []
    for day in begun[begun.dt.year == year]:
        turn = rain.loc[day : day + pd.Timedelta(days=ROTATION_DAYS - 1)].drop(days, errors="ignore")
        days.append(turn.idxmax())
    depth = rain.loc[days]
    return depth.clip(upper=depth.median()).loc[lambda found: found > 0.0].sort_index()


def ne1(year: int, settings=None, tables=None, residue=True, split=True, **stand) -> Case:
    """Irrigated maize of one year; what of the rain column is irrigation is entered as such, or left as rain."""
    days = fluxnet("us_ne1_daily_2001-2006.csv").loc[str(year)]
    row = {
        "stand_id": f"maize{year}", "cover_id": "corn", "soil_id": "silty_clay_loam", "water_regime": "sprinkler",
        "planting_date": SOWN[year], "hybrid_heat_units": 1500.0, "tillage": TILLED[year] if residue else None, **stand,
    }  # fmt: skip
    weather, tables = fluxnet_weather(days, NE1), dict(tables or {})
    if split:
        depth = ne1_irrigation(year)
        weather["rain_mm"] = (days["P_F"] - depth.reindex(days.index, fill_value=0.0)).to_numpy()
        tables["irrigation_events"] = pd.DataFrame(
            {"stand_id": row["stand_id"], "date": depth.index, "depth_net_mm": depth.to_numpy()}
        )
    return case(NE1, weather, [row], settings, **tables)


def bo1(settings=None, tables=None, residue=True, mean_only=False, **stand) -> Case:
    """Rainfed no-till soybean of 1998."""
    row = {
        "stand_id": "soybean1998", "cover_id": "soybean", "soil_id": "silt_loam", "water_regime": "rainfed",
        "planting_date": BO1_SOWN, "tillage": "no-till" if residue else None, **stand,
    }  # fmt: skip
    return case(BO1, bondville_weather(mean_only), [row], settings, **(tables or {}))


def ar1(settings=None, tables=None, **stand) -> Case:
    """Grass on loam, not irrigated, 2010 and 2011."""
    days = fluxnet("us_ar1_grass_daily_2010-2011.csv")
    row = {"stand_id": "grass", "cover_id": "grass_extensive", "soil_id": "loam", "water_regime": "rainfed", **stand}
    return case(AR1, fluxnet_weather(days, AR1), [row], settings, **(tables or {}))
