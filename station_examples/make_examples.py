"""Make the two examples: invented land, weather, farms and air, the same every time.

Run as a script from anywhere; it writes beside itself

* ``harrowbend.xlsx``, a river basin of 24 counties in SI units, with ``harrowbend.geojson`` (outlines) and
  ``harrowbend_om.csv`` (one station's days),
* ``tallgrove_us.xlsx``, one county in US customary units.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

HERE = Path(__file__).resolve().parent
if str(HERE) not in sys.path:
    sys.path.insert(0, str(HERE))

from invented import air as mornings  # noqa: E402
from invented import county, farms, land, stations, weather  # noqa: E402

from etflux.outlines import Outline  # noqa: E402
from etflux.weather import great_circle_km  # noqa: E402

BASIN, COUNTY = "harrowbend", "tallgrove_us"
OUTLINES_FILE = f"{BASIN}.geojson"

Tables = dict[str, pd.DataFrame]


def basin_tables() -> tuple[Tables, dict[str, Any], dict[str, Outline]]:
    """Tables (SI, registry names), settings and outlines of the Harrowbend.

    The weather table has every station's rows, also those of the station whose days go to a file of their own.
    """
    outlines = land.outlines()
    counties = land.counties(outlines)
    km = np.vstack([stations.KM, land.kilometres(counties["longitude_deg"], counties["latitude_deg"])])
    latitude = np.concatenate([stations.LATITUDE, counties["latitude_deg"]])
    elevation = np.concatenate([stations.ELEVATION, counties["elevation_m"]])
    sky = weather.season(km, latitude, elevation)
    nearest, second_km = _nearest(counties)
    reports = stations.reports(sky)
    stand = farms.stands(counties)
    tables = {
        "stations": stations.stations(),
        "weather": pd.concat(list(reports.values()), ignore_index=True),
        "rain_gauges": stations.rain_gauges(sky, list(counties["county_id"]), nearest, second_km),
        "counties": counties,
        "rest": farms.rest(),
        "soils": farms.soils(),
        "stands": stand,
        "irrigation_events": farms.irrigation_events(),
        "irrigation_rules": farms.irrigation_rules(),
        "observations": farms.observations(stand),
        "mixing_depths": mornings.mixing_depths(),
        "profiles": mornings.profiles(sky),
        "wind": mornings.wind(),
    }
    settings = {
        "title": "Harrowbend basin, April to September 2031 (invented)",
        "units": "si",
        "season_start": weather.FIRST,
        "season_end": weather.LAST,
        "brief_date": "2031-07-27",
        "outlines_file": OUTLINES_FILE,
    }
    return tables, settings, outlines


def _nearest(counties: pd.DataFrame) -> tuple[list[str], np.ndarray]:
    """Nearest station of every county, and the distance to the next one."""
    km = great_circle_km(
        counties["latitude_deg"].to_numpy(), counties["longitude_deg"].to_numpy(), stations.LATITUDE, stations.LONGITUDE
    )
    order = np.argsort(km, axis=1)
    return [stations.IDS[k] for k in order[:, 0]], np.take_along_axis(km, order, axis=1)[:, 1]


def county_tables() -> tuple[Tables, dict[str, Any]]:
    """Tables (SI, registry names) and settings of Tallgrove County."""
    settings = {
        "title": "Tallgrove County, April to September 2031 (invented)",
        "units": "us",
        "brief_date": "2031-07-27",
    }
    return county.tables(), settings


def split_weather(tables: Tables) -> tuple[Tables, Tables]:
    """Take the days of stations with a weather file out of the workbook; (tables, rows by file name)."""
    station, days = tables["stations"], tables["weather"]
    own = station.dropna(subset=["weather_file"]).set_index("weather_file")["station_id"]
    apart = {name: days[days["station_id"] == id_].dropna(axis=1, how="all") for name, id_ in own.items()}
    return tables | {"weather": days[~days["station_id"].isin(own)].reset_index(drop=True)}, apart


def write_outlines(outlines: dict[str, Outline], path: Path) -> None:
    """GeoJSON, one county a line, so that a change shows as the county it touches."""
    document = land.geojson(outlines)
    features = ",\n".join(json.dumps(feature, separators=(",", ":")) for feature in document["features"])
    path.write_text(f'{{"type":"FeatureCollection","features":[\n{features}\n]}}\n', encoding="utf-8")


def write_weather(rows: pd.DataFrame, path: Path) -> None:
    """Days of one station as a CSV file, under the headings of the Weather sheet."""
    from etflux.workbook.sheets import sheet_of

    sheet = sheet_of("weather")
    dates = rows["date"].dt.strftime("%Y-%m-%d")
    headings = {name: sheet.column(name).heading("si") for name in rows}
    rows.assign(date=dates).rename(columns=headings).to_csv(path, index=False, lineterminator="\n")


def main(folder: Path = HERE) -> None:
    """Write both examples into a folder."""
    from etflux.workbook import template

    tables, settings, outlines = basin_tables()
    write_outlines(outlines, folder / OUTLINES_FILE)
    inside, apart = split_weather(tables)
    for name, rows in apart.items():
        write_weather(rows, folder / name)
    template.write(folder / f"{BASIN}.xlsx", system="si", tables=inside, settings=settings, replace=True)
    tables, settings = county_tables()
    template.write(folder / f"{COUNTY}.xlsx", system="us", tables=tables, settings=settings, replace=True)


if __name__ == "__main__":
    main()
