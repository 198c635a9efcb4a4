"""What grows in the Harrowbend: soils, about ninety stands, the rest of the counties, water and what was seen.

Sandy uplands with sprinklers in the west, furrows in the river's bottoms, tile-drained clay loam in the east, grass
in the north. A county's line below says how much of it each crop takes; stands get their details by rule and stream.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
import pandas as pd

from invented.numbers import stream

INVENTED = "invented for this example"
LOESS, BOTTOM = "hb_loess", "hb_bottom"  # the region's own soils; the sands are the packaged rows
SANDY, SANDS = "sandy_loam", "loamy_sand"
# Available water of the soil survey; the texture's own numbers are low for such soils. [mm/m]
SURVEYED = {LOESS: 205.0, BOTTOM: 195.0, SANDY: 140.0, SANDS: 90.0}
GRASSES = ("grass_rotated", "grass_extensive", "hay_averaged", "hay_cut")


class Place(NamedTuple):
    """A county's farming: shares of its area. [%]"""

    county_id: str
    soil: str
    corn: float
    soybean: float
    grass: float
    second: tuple[str, str, str, float] | None = None  # cover, soil, water regime, share


COUNTIES = (
    Place("HB01", LOESS, 27, 20, 34),
    Place("HB02", LOESS, 31, 24, 27, ("hay_cut", LOESS, "rainfed", 4)),
    Place("HB03", LOESS, 34, 28, 15),
    Place("HB04", LOESS, 37, 31, 12),
    Place("HB05", BOTTOM, 24, 19, 5),
    Place("HB06", SANDY, 16, 14, 30, ("corn", SANDS, "sprinkler", 17)),
    Place("HB07", LOESS, 29, 21, 16, ("corn", SANDY, "sprinkler", 13)),
    Place("HB08", LOESS, 35, 27, 14, ("soybean", SANDS, "rainfed", 6)),
    Place("HB09", LOESS, 38, 32, 10),
    Place("HB10", BOTTOM, 41, 36, 8, ("hay_cut", LOESS, "rainfed", 2)),
    Place("HB11", BOTTOM, 42, 37, 6),
    Place("HB12", SANDS, 11, 12, 28, ("corn", SANDS, "sprinkler", 24)),
    Place("HB13", BOTTOM, 18, 20, 15, ("corn", BOTTOM, "furrow every, wide bed", 22)),
    Place("HB14", BOTTOM, 25, 24, 12, ("corn", BOTTOM, "furrow alternate", 14)),
    Place("HB15", BOTTOM, 36, 30, 9, ("soybean", SANDY, "sprinkler", 5)),
    Place("HB16", BOTTOM, 40, 35, 6, ("corn", SANDY, "furrow every, narrow bed", 4)),
    Place("HB17", BOTTOM, 43, 38, 6, ("soybean", SANDS, "rainfed", 3)),
    Place("HB18", BOTTOM, 42, 36, 7),
    Place("HB19", SANDY, 14, 13, 26, ("corn", SANDS, "sprinkler", 21)),
    Place("HB20", LOESS, 26, 20, 18, ("corn", SANDY, "sprinkler", 12)),
    Place("HB21", LOESS, 33, 26, 16, ("soybean", SANDS, "rainfed", 5)),
    Place("HB22", LOESS, 36, 31, 11, ("corn", LOESS, "drip", 1)),
    Place("HB23", LOESS, 38, 32, 10, ("soybean", LOESS, "sprinkler", 4)),
    Place("HB24", LOESS, 28, 24, 11),
)  # fmt: skip
TILE_DRAINED = ("HB05", "HB10", "HB11", "HB15", "HB16", "HB17", "HB18")
SPREAD_PLANTING = ("HB03-corn", "HB04-soybean", "HB09-corn", "HB10-corn", "HB11-soybean", "HB16-corn", "HB18-soybean",
                   "HB23-corn")  # fmt: skip
RULES = {"sprinkler": "pivot", "furrow every, wide bed": "furrow", "furrow alternate": "furrow", "drip": "drip"}
UNSURVEYED = (
    "HB02-grass",
    "HB07-corn",
    "HB08-soybean-2",
    "HB12-grass",
    "HB14-grass",
    "HB16-corn-2",
    "HB20-soybean",
    "HB21-soybean-2",
    "HB22-grass",
)  # available water by texture alone
DATED_ONLY = ("HB16-corn-2", "HB23-soybean-2")  # irrigated on entered dates, by no rule


def soils() -> pd.DataFrame:
    """Two soils of the region on top of the packaged ones."""
    return pd.DataFrame(
        [
            (LOESS, "Upland silt loam", 0.315, 0.135, 9.5, 0.10, "B", INVENTED),
            (BOTTOM, "Bottomland silty clay loam", 0.37, 0.195, 9.5, 0.10, "C/D", INVENTED),
        ],
        columns=["soil_id", "name", "theta_fc", "theta_wp", "rew_mm", "evaporation_depth_m", "hydrologic_group",
                 "source"],
    )  # fmt: skip


def stands(counties: pd.DataFrame) -> pd.DataFrame:
    """Stand table of the Harrowbend."""
    area = counties.set_index("county_id")["area_km2"]
    rows = []
    for number, place in enumerate(COUNTIES):
        parts = [
            ("corn", place.soil, "rainfed", place.corn),
            ("soybean", place.soil, "rainfed", place.soybean),
            (GRASSES[number % 4], SANDY if place.soil == SANDS else place.soil, "rainfed", place.grass),
        ]
        parts += [place.second] if place.second else []
        seen: dict[str, int] = {}
        for cover, soil, regime, share in parts:
            kind = cover if cover in ("corn", "soybean") else "grass"
            seen[kind] = seen.get(kind, 0) + 1
            stand_id = f"{place.county_id}-{kind}" + (f"-{seen[kind]}" if seen[kind] > 1 else "")
            row = {
                "stand_id": stand_id, "county_id": place.county_id, "cover_id": cover, "soil_id": soil,
                "area_km2": round(float(area[place.county_id]) * share / 100.0, 1), "water_regime": regime,
            }  # fmt: skip
            rows.append(row | _ground(row, len(rows)) | _plants(row, number))
    table = pd.DataFrame(rows)
    for name in ("planting_date", "planting_date_early", "planting_date_middle", "planting_date_late", "greenup_date",
                 "harvest_date"):  # fmt: skip
        table[name] = pd.to_datetime(table[name])
    return table


def _ground(row: dict[str, Any], position: int) -> dict[str, Any]:
    """Tillage, residue, drainage and available water of a stand."""
    rng = stream(100 + position)
    found: dict[str, Any] = {}
    planted = row["cover_id"] in ("corn", "soybean")
    if planted:
        sandy = row["soil_id"] in (SANDY, SANDS)
        shares = (0.15, 0.30, 0.55) if sandy else (0.35, 0.40, 0.25)
        found["tillage"] = str(rng.choice(["conventional", "reduced", "no-till"], p=shares))
        if found["tillage"] == "no-till" and row["cover_id"] == "soybean" and rng.random() < 0.5:
            found["residue_pct"] = float(rng.choice([65.0, 70.0, 75.0]))  # corn stalks
    tiled = row["county_id"] in TILE_DRAINED and row["soil_id"] == BOTTOM and planted
    found["drained"] = True if tiled else False if row["soil_id"] == BOTTOM else None
    if row["county_id"] in ("HB04", "HB09") and planted:  # wetter loess, drained in part
        found["hydrologic_group"] = "B/D"
        found["drained"] = row["cover_id"] == "corn"
    if row["stand_id"] not in UNSURVEYED:
        found["available_water_mm_m"] = SURVEYED[row["soil_id"]] + 5.0 * float(rng.integers(-2, 3))
    if row["stand_id"] in ("HB12-soybean", "HB19-soybean"):
        found["restricting_depth_m"] = 0.9  # gravel
    return found


def _plants(row: dict[str, Any], number: int) -> dict[str, Any]:
    """Dates and hybrid of a stand: earlier on sand and in the south, soybean after corn."""
    rng = stream(300 + number)
    cover, sandy = row["cover_id"], row["soil_id"] in (SANDY, SANDS)
    found: dict[str, Any] = {}
    if cover == "corn":
        first = np.datetime64("2031-04-22") + int(rng.integers(2, 11)) + (0 if sandy else 5) + (3 if number < 5 else 0)
        first += 6 if row["water_regime"].startswith("furrow") else 0
        found["hybrid_heat_units"] = float(rng.choice([1440.0, 1500.0, 1560.0, 1610.0]))
        spread = (-7, 0, 11)
    elif cover == "soybean":
        first = np.datetime64("2031-05-10") + int(rng.integers(0, 11)) + (0 if sandy else 4) + (3 if number < 5 else 0)
        spread = (-8, 0, 10)
        if number % 6 == 1:
            found["harvest_date"] = np.datetime64("2031-09-26")
    else:
        if number % 3 == 0:
            found["greenup_date"] = np.datetime64("2031-04-05") + int(rng.integers(0, 9))
        return found
    if row["stand_id"] in SPREAD_PLANTING:
        days = zip(("early", "middle", "late"), spread, strict=True)
        return found | {f"planting_date_{part}": first + shift for part, shift in days}
    rule = RULES.get(row["water_regime"]) if row["stand_id"] not in DATED_ONLY else None
    return found | {"planting_date": first, "rule_id": rule}


def rest() -> pd.DataFrame:
    """The part of the counties that no stand represents; the rows without a county serve all without their own."""
    everywhere = None
    rows = [
        (everywhere, "grass", 52.0, "cover", "grass_extensive", LOESS),
        (everywhere, "woods", 24.0, "cover", "woods", LOESS),
        (everywhere, "water", 4.0, "cover", "water", BOTTOM),
        (everywhere, "developed", 20.0, "cover", "developed", LOESS),
        ("HB01", "grass", 70.0, "cover", "grass_extensive", LOESS),
        ("HB01", "woods", 18.0, "cover", "woods", LOESS),
        ("HB01", "developed", 12.0, "cover", "developed", LOESS),
        ("HB05", "water", 34.0, "cover", "water", BOTTOM),  # the lake
        ("HB05", "woods", 33.0, "cover", "woods", BOTTOM),
        ("HB05", "wetland", 13.0, "cover", "wetland", BOTTOM),
        ("HB05", "grass", 12.0, "cover", "grass_extensive", BOTTOM),
        ("HB05", "developed", 8.0, "cover", "developed", BOTTOM),
        ("HB13", "wetland", 16.0, "cover", "wetland", BOTTOM),
        ("HB13", "woods", 38.0, "cover", "woods", BOTTOM),
        ("HB13", "grass", 26.0, "cover", "grass_extensive", BOTTOM),
        ("HB13", "developed", 14.0, "cover", "developed", BOTTOM),  # the 6 % not given take the default cover
        ("HB14", "wetland", 12.0, "cover", "wetland", BOTTOM),
        ("HB14", "woods", 40.0, "cover", "woods", BOTTOM),
        ("HB14", "grass", 30.0, "cover", "grass_extensive", BOTTOM),
        ("HB14", "developed", 18.0, "cover", "developed", BOTTOM),
        ("HB17", "grass", 45.0, "like the stands", None, None),  # small fields nobody counted
        ("HB17", "woods", 25.0, "cover", "woods", BOTTOM),
        ("HB17", "developed", 30.0, "cover", "developed", BOTTOM),
        ("HB24", "developed", 32.0, "cover", "developed", LOESS),  # the city of Avenholt and its suburbs
        ("HB24", "developed", 14.0, "no water", None, None),  # roofs and roads
        ("HB24", "woods", 26.0, "cover", "woods", LOESS),
        ("HB24", "grass", 28.0, "cover", "grass_extensive", LOESS),
    ]
    return pd.DataFrame(rows, columns=["county_id", "part", "share_pct", "treatment", "cover_id", "soil_id"])


def irrigation_rules() -> pd.DataFrame:
    """Three ways to decide."""
    return pd.DataFrame(
        [
            ("pivot", "V8", "maturity", 35.0, 60.0, 90.0, 12.0, 25.0, 4.0, 7.5, 10.0, 85.0, 420.0),
            ("furrow", "V8", "maturity", 20.0, 60.0, 100.0, 40.0, 75.0, 9.0, 14.0, 0.0, 65.0, 560.0),
            ("drip", "V6", "maturity", 60.0, 60.0, 90.0, 5.0, 12.0, 2.0, 7.0, 10.0, 92.0, 400.0),
        ],
        columns=[
            "rule_id", "from_stage", "to_stage", "start_below_pct", "late_depletion_pct", "fill_to_pct", "least_mm",
            "most_mm", "shortest_interval_d", "capacity_mm_d", "rain_room_mm", "efficiency_pct", "season_limit_mm",
        ],
    )  # fmt: skip


def irrigation_events() -> pd.DataFrame:
    """Irrigations that were written down; gross as pumped, or net as it reached the ground."""
    furrow, beans = DATED_ONLY
    rows = [(furrow, f"2031-{day}", 85.0, np.nan) for day in ("06-26", "07-06", "07-15", "08-07", "08-25")]
    rows += [(beans, f"2031-{day}", np.nan, 20.0) for day in ("07-03", "07-08", "07-13", "08-09", "08-27")]
    rows += [("HB07-corn-2", "2031-05-29", 15.0, np.nan), ("HB22-corn-2", "2031-06-08", np.nan, 8.0)]
    table = pd.DataFrame(rows, columns=["stand_id", "date", "depth_gross_mm", "depth_net_mm"])
    return table.assign(date=pd.to_datetime(table["date"]))


def observations(stand: pd.DataFrame) -> pd.DataFrame:
    """Stages, canopy and cuts that somebody saw and wrote down."""
    rows: list[tuple[str, str, str, float]] = []
    for stand_id in stand.loc[stand["cover_id"] == "hay_cut", "stand_id"]:
        shift = int(stream(500 + int(stand_id[2:4])).integers(-3, 4))
        for day in ("2031-05-30", "2031-07-07", "2031-08-16"):
            rows.append((stand_id, str(np.datetime64(day) + shift), "cut", np.nan))
    rows += [
        ("HB03-soybean", "2031-06-01", "emergence", np.nan),
        ("HB06-corn-2", "2031-05-09", "emergence", np.nan),
        ("HB06-corn-2", "2031-07-06", "full cover", np.nan),
        ("HB10-soybean", "2031-07-11", "full cover", np.nan),
        ("HB12-corn-2", "2031-06-17", "canopy cover", 45.0),
        ("HB12-corn-2", "2031-06-27", "canopy cover", 72.0),
        ("HB21-corn", "2031-06-24", "leaf area", 2.3),
        ("HB21-corn", "2031-07-07", "leaf area", 4.1),
    ]
    table = pd.DataFrame(rows, columns=["stand_id", "date", "observed", "observed_value"])
    return table.assign(date=pd.to_datetime(table["date"]))
