"""Tallgrove, a county that does not exist, in US customary units: one station, six stands.

Every number is round in the unit that its reader would write, and handed on in SI.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from etflux.variables import to_si
from invented import weather

ID = "97013"  # no state has the number 97
SEED = 97035
LATITUDE, LONGITUDE, ELEVATION_FT = 41.27, -90.84, 730.0
STAND_COLUMNS = ("stand_id", "cover_id", "soil_id", "acres", "water_regime", "planting_date", "f_days", "tillage",
                 "residue_pct", "drained", "hydrologic_group", "in_ft", "rule_id")  # fmt: skip
STANDS: tuple[tuple[Any, ...], ...] = (
    ("corn-north", "corn", "silt_loam", 74000, "rainfed", "2031-04-29", 2700, "reduced", None, None, None, 2.4, None),
    ("corn-tiled", "corn", "silty_clay_loam", 48000, "rainfed", "2031-05-08", 2600, "conventional", None, True, "C/D",
     2.2, None),
    ("corn-pivot", "corn", "loamy_sand", 9500, "sprinkler", "2031-04-26", 2700, "no-till", None, None, None, 1.1,
     "pivot"),
    ("beans", "soybean", "silt_loam", 96000, "rainfed", "2031-05-16", None, "no-till", 70, None, None, 2.4, None),
    ("beans-sand", "soybean", "loamy_sand", 14500, "rainfed", "2031-05-12", None, "no-till", None, None, None, 1.1,
     None),
    ("pasture", "grass_rotated", "silt_loam", 41000, "rainfed", None, None, None, None, None, None, None, None),
)  # fmt: skip
COUNTY_ACRES = 358000.0


def _si(values: Any, name: str, unit: str) -> Any:
    return to_si(np.asarray(values, float), name, unit)


def tables() -> dict[str, pd.DataFrame]:
    """Tables of the one-county example, SI."""
    station = {
        "station_id": "TG1", "name": "Tallgrove extension plot", "latitude_deg": LATITUDE, "longitude_deg": LONGITUDE,
        "elevation_m": _si(ELEVATION_FT, "elevation_m", "ft").item(),
        "wind_height_m": _si(10.0, "wind_height_m", "ft").item(), "utc_offset_h": -6.0, "observation_hour": 24.0,
        "climate": "humid", "situation": "interior",
    }  # fmt: skip
    county = {
        "county_id": ID, "name": "Tallgrove", "area_km2": _si(COUNTY_ACRES, "area_km2", "acres").item(),
        "latitude_deg": 41.24, "longitude_deg": -90.88, "elevation_m": _si(720.0, "elevation_m", "ft").item(),
        "station_id": "TG1",
    }  # fmt: skip
    rest = [("grass", 45.0, "cover", "grass_extensive"), ("woods", 33.0, "cover", "woods"),
            ("developed", 22.0, "cover", "developed")]  # fmt: skip
    return {
        "stations": pd.DataFrame([station]),
        "weather": _weather(),
        "counties": pd.DataFrame([county]),
        "rest": pd.DataFrame(rest, columns=["part", "share_pct", "treatment", "cover_id"]).assign(
            county_id=ID, soil_id="silt_loam"
        ),
        "stands": _stands(),
        "irrigation_rules": pd.DataFrame([_rule()]),
        "observations": pd.DataFrame(
            {
                "stand_id": ["corn-north", "beans"],
                "date": pd.to_datetime(["2031-05-11", "2031-05-27"]),
                "observed": "emergence",
            }
        ),
        "mixing_depths": _depths(),
    }  # fmt: skip


def _weather() -> pd.DataFrame:
    """Days of the station in whole degrees Fahrenheit, hundredths of an inch, langleys and tenths of a mile an hour."""
    place = np.zeros((1, 2))
    elevation = _si([ELEVATION_FT], "elevation_m", "ft")
    air = weather.season(place, np.array([LATITUDE]), elevation, SEED)

    def rounded(values: np.ndarray, name: str, us_unit: str, digits: int) -> np.ndarray:
        zero, one = to_si([0.0, 1.0], name, us_unit)
        return _si(((values[:, 0] - zero) / (one - zero)).round(digits), name, us_unit)

    wind = weather.wind_at(_si(10.0, "wind_height_m", "ft").item(), air.u2_m_s)
    columns = {
        "t_max_c": rounded(air.t_max_c, "t_max_c", "°F", 0),
        "t_min_c": rounded(air.t_min_c, "t_min_c", "°F", 0),
        "rh_max_pct": air.rh_max_pct[:, 0].round(0),
        "rh_min_pct": air.rh_min_pct[:, 0].round(0),
        "rs_mj_m2_d": rounded(air.rs_mj_m2_d, "rs_mj_m2_d", "langley/day", 0),
        "wind_m_s": rounded(wind, "wind_m_s", "mph", 1),
        "rain_mm": rounded(air.rain_mm, "rain_mm", "in", 2),
        "dew_point_morning_c": rounded(air.dew_point_morning_c, "dew_point_morning_c", "°F", 0),
        "dew_point_afternoon_c": rounded(air.dew_point_afternoon_c, "dew_point_afternoon_c", "°F", 0),
    }
    table = weather.table(columns, "TG1")
    table.loc[table["date"].between("2031-06-18", "2031-06-20"), ["rh_max_pct", "rh_min_pct"]] = np.nan
    return table


def _stands() -> pd.DataFrame:
    table = pd.DataFrame(STANDS, columns=STAND_COLUMNS)
    return pd.DataFrame(
        {
            "stand_id": table["stand_id"], "county_id": ID, "cover_id": table["cover_id"], "soil_id": table["soil_id"],
            "area_km2": _si(table["acres"], "area_km2", "acres"), "water_regime": table["water_regime"],
            "planting_date": pd.to_datetime(table["planting_date"]),
            "hybrid_heat_units": _si(table["f_days"], "hybrid_heat_units", "°F-days"),
            "tillage": table["tillage"], "residue_pct": table["residue_pct"].astype(float), "drained": table["drained"],
            "hydrologic_group": table["hydrologic_group"],
            "available_water_mm_m": _si(table["in_ft"], "available_water_mm_m", "in/ft"), "rule_id": table["rule_id"],
        }
    )  # fmt: skip


def _rule() -> dict[str, Any]:
    return {
        "rule_id": "pivot", "from_stage": "V8", "to_stage": "maturity", "start_below_pct": 35.0,
        "late_depletion_pct": 60.0, "fill_to_pct": 90.0, "least_mm": _si(0.5, "least_mm", "in").item(),
        "most_mm": _si(1.0, "most_mm", "in").item(), "shortest_interval_d": 4.0,
        "capacity_mm_d": _si(0.3, "capacity_mm_d", "in/day").item(),
        "rain_room_mm": _si(0.4, "rain_room_mm", "in").item(), "efficiency_pct": 85.0,
        "season_limit_mm": _si(16.0, "season_limit_mm", "in").item(),
    }  # fmt: skip


def _depths() -> pd.DataFrame:
    """Afternoon mixing depths of the humid episode, read off a forecast sounding."""
    feet = {"2031-07-24": 4200, "2031-07-25": 4000, "2031-07-26": 3600, "2031-07-27": 3400, "2031-07-28": 3700}
    return pd.DataFrame(
        {
            "county_id": ID,
            "date": pd.to_datetime(list(feet)),
            "mixing_depth_m": _si(list(feet.values()), "mixing_depth_m", "ft"),
            "hour": 15.0,
        }
    )
