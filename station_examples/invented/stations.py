"""Six stations of the Harrowbend: where they stand, what each measures, and what went wrong there."""

from __future__ import annotations

import numpy as np
import pandas as pd

from invented import land, weather
from invented.weather import DATES, Weather, wind_at

# id, name, km east, km north, height of the wind sensor, observation hour
PLACES = (
    ("QM", "Quillmere airfield", 62.0, 141.0, 10.0, 24.0),
    ("DS", "Dunsorrow research farm", 40.0, 62.0, 2.0, 24.0),
    ("OM", "Othermead weather mast", 133.0, 104.0, 3.0, 24.0),
    ("RU", "Rushenholm field station", 204.0, 58.0, 2.0, 24.0),
    ("SW", "Sorrelwick observer", 226.0, 40.0, 2.0, 7.0),
    ("VM", "Velmarch airfield", 277.0, 88.0, 10.0, 24.0),
)
IDS = tuple(place[0] for place in PLACES)
KM = np.array([place[2:4] for place in PLACES])
LONGITUDE, LATITUDE = land.degrees(KM).round(4).T
ELEVATION = land.ground_m(KM).round(0)
UTC_OFFSET_H = -6.0
WEATHER_FILE = "harrowbend_om.csv"  # the mast at Othermead keeps its days in a file of its own
IN_FILE = "OM"
DRIFTING, DRIFT_SHARE = "DS", -0.115  # the pyranometer there loses this much from the first day to the last

# station, column, first and last day: what is missing
GAPS = (
    ("RU", "dew_point_c", "2031-06-09", "2031-06-15"),
    ("VM", "wind_m_s", "2031-08-11", "2031-08-19"),
    ("DS", "t_max_c", "2031-05-20", "2031-05-21"),
    ("DS", "t_min_c", "2031-05-20", "2031-05-21"),
    ("RU", "rain_mm", "2031-05-06", "2031-05-08"),
    ("RU", "rain_mm", "2031-08-21", "2031-08-22"),
    ("OM", "rs_mj_m2_d", "2031-09-02", "2031-09-04"),
)


def stations() -> pd.DataFrame:
    """Station table."""
    return pd.DataFrame(
        {
            "station_id": IDS,
            "name": [place[1] for place in PLACES],
            "latitude_deg": LATITUDE,
            "longitude_deg": LONGITUDE,
            "elevation_m": ELEVATION,
            "wind_height_m": [place[4] for place in PLACES],
            "utc_offset_h": UTC_OFFSET_H,
            "observation_hour": [place[5] for place in PLACES],
            "climate": "humid",
            "situation": "interior",
            "weather_file": [WEATHER_FILE if station == IN_FILE else None for station in IDS],
        }
    )


def reports(air: Weather) -> dict[str, pd.DataFrame]:
    """What every station reports, rows of the weather table by station; `air` has the stations as its first places."""
    found = {}
    for place, station in enumerate(IDS):
        columns = _columns(air, place)
        last = weather.LAST
        if PLACES[place][5] < 12.0:  # read in the morning: rain and highest temperature of the day before
            columns |= {name: np.roll(columns[name], 1) for name in ("t_max_c", "rain_mm")}
            last = "2031-10-01"
        table = weather.table(columns, station, last=last)
        for where, name, first, until in GAPS:
            if where == station:
                table.loc[table["date"].between(first, until), name] = np.nan
        found[station] = table
    return found


def _columns(air: Weather, place: int) -> dict[str, np.ndarray]:
    """Columns of one station, rounded as its instruments report."""
    station, height = IDS[place], PLACES[place][4]
    common = {
        "t_max_c": air.t_max_c[:, place].round(1),
        "t_min_c": air.t_min_c[:, place].round(1),
        "wind_m_s": wind_at(height, air.u2_m_s[:, place]).round(1),
        "rain_mm": air.rain_mm[:, place].round(1),
    }
    rs = air.rs_mj_m2_d[:, place]
    if station == DRIFTING:
        rs = rs * (1.0 + DRIFT_SHARE * np.arange(len(DATES)) / (len(DATES) - 1))
    radiation = {"rs_mj_m2_d": rs.round(2)}
    dew_points = {
        "dew_point_morning_c": air.dew_point_morning_c[:, place].round(1),
        "dew_point_afternoon_c": air.dew_point_afternoon_c[:, place].round(1),
    }
    extremes = {"rh_max_pct": air.rh_max_pct[:, place].round(0), "rh_min_pct": air.rh_min_pct[:, place].round(0)}
    own = {
        "QM": {"dew_point_c": air.dew_point_c[:, place].round(1), **dew_points, **radiation},
        "DS": {**extremes, **radiation},
        "OM": {**extremes, **dew_points, **radiation},
        "RU": {"dew_point_c": air.dew_point_c[:, place].round(1), **radiation},
        "SW": {
            "rh_mean_pct": (0.5 * (air.rh_max_pct + air.rh_min_pct)[:, place]).round(0),
            "sunshine_h": weather.sunshine_hours(air.clearness[:, place], float(LATITUDE[place])).round(1),
        },
        "VM": {"dew_point_c": air.dew_point_c[:, place].round(1), **dew_points, **radiation},
    }
    return common | own[station]


def rain_gauges(air: Weather, county_ids: list[str], nearest: list[str], within_km: np.ndarray) -> pd.DataFrame:
    """Rain read in the counties themselves.

    Two counties keep a gauge all season; those whose station has blank rain, and no other station near, have one for
    these days.

    Parameters
    ----------
    air : Weather
        Counties follow the stations among its places.
    county_ids, nearest : list of str
        Counties, and the station of each.
    within_km : ndarray, shape (county,)
        Distance to the nearest station other than its own.
    """
    rain = air.rain_mm[:, len(IDS) :].round(1)
    pieces = []
    for place, county in enumerate(county_ids):
        frame = weather.table({"rain_mm": rain[:, place]}, county).rename(columns={"station_id": "county_id"})
        keep = np.full(len(frame), county in ("HB03", "HB20"))
        for station, name, first, last in GAPS:
            if name == "rain_mm" and station == nearest[place] and within_km[place] > 30.0:
                keep |= frame["date"].between(first, last).to_numpy()
        pieces.append(frame[keep])
    return pd.concat(pieces, ignore_index=True)
