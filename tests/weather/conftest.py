"""A small record: two stations 20 km apart and a third far away, 60 clear summer days, nothing missing."""

from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest

from etflux.case import Case, Settings

PLACES = {"near": (42.00, -93.00), "by": (42.18, -93.00), "far": (44.50, -93.00)}


def station_rows(**changes):
    rows = pd.DataFrame(
        {
            "station_id": list(PLACES),
            "latitude_deg": [place[0] for place in PLACES.values()],
            "longitude_deg": [place[1] for place in PLACES.values()],
            "elevation_m": 300.0,
            "wind_height_m": 2.0,
            "utc_offset_h": -6.0,
            "observation_hour": 24.0,
            "climate": "humid",
            "situation": "interior",
        }
    )
    return rows.assign(**changes)


def weather_rows(days=60, start="2031-06-01"):
    rng = np.random.default_rng(7)
    pieces = []
    for k, name in enumerate(PLACES):
        t_max = 28.0 + k + rng.normal(0.0, 2.0, days)
        pieces.append(
            pd.DataFrame(
                {
                    "station_id": name,
                    "date": pd.date_range(start, periods=days),
                    "t_max_c": t_max,
                    "t_min_c": t_max - 11.0 - rng.uniform(0.0, 2.0, days),
                    "rh_max_pct": rng.uniform(88.0, 98.0, days),
                    "rh_min_pct": rng.uniform(40.0, 55.0, days),
                    "rs_mj_m2_d": rng.uniform(14.0, 27.0, days),
                    "wind_m_s": rng.uniform(1.5, 4.0, days),
                    "rain_mm": np.where(np.arange(days) % 4 == 0, rng.uniform(1.0, 20.0, days), 0.0),
                }
            )
        )
    return pd.concat(pieces, ignore_index=True)


def county_rows():
    return pd.DataFrame(
        {
            "county_id": ["c1", "c2"], "area_km2": 1500.0, "latitude_deg": [42.02, 44.4], "longitude_deg": -93.0,
        }
    )  # fmt: skip


def make_case(weather=None, stations=None, counties=None, settings=None, **tables):
    return Case(
        Settings(**(settings or {})),
        {
            "stations": station_rows() if stations is None else stations,
            "weather": weather_rows() if weather is None else weather,
            "counties": county_rows() if counties is None else counties,
            **tables,
        },
    )


@pytest.fixture
def make():
    return SimpleNamespace(case=make_case, stations=station_rows, weather=weather_rows, counties=county_rows)
