"""A small good workbook: two stations, thirty days, two counties, four stands, a little of everything else."""

import numpy as np
import pandas as pd
import pytest

from etflux.workbook import template

DAYS = pd.date_range("2031-06-01", periods=30)


def _weather(station_id, shift):
    """Thirty plausible days of early summer; dry and wet ones, no two alike."""
    k = np.arange(len(DAYS))
    wave = np.sin(0.7 * k + shift)
    rain = np.where(k % 5 == 2, 6.0 + k / 10.0, 0.0)
    t_max = 26.0 + 3.0 * wave + 0.01 * k
    return pd.DataFrame(
        {
            "station_id": station_id,
            "date": DAYS,
            "t_max_c": t_max.round(2),
            "t_min_c": (t_max - 11.0 + 0.5 * np.cos(k)).round(2),
            "rh_max_pct": (95.0 + 2.0 * np.sin(1.3 * k)).round(1),
            "rh_min_pct": (48.0 - 6.0 * wave).round(1),
            "dew_point_c": (14.0 + wave).round(2),
            "rs_mj_m2_d": (21.0 + 3.0 * wave - np.where(rain > 0.0, 6.0, 0.0)).round(2),
            "wind_m_s": (2.4 + 0.5 * np.cos(0.9 * k)).round(2),
            "rain_mm": rain.round(1),
        }
    )


def good_tables():
    """Tables of a case without anything to say about it."""
    stands = pd.DataFrame(
        {
            "stand_id": ["A-corn", "A-beans", "B-corn", "B-grass"],
            "county_id": ["A1", "A1", "B2", "B2"],
            "cover_id": ["corn", "soybean", "corn", "grass_rotated"],
            "soil_id": ["silt_loam", "silt_loam", "sandy_loam", "my_loam"],
            "area_km2": [400.0, 350.0, 300.0, 250.0],
            "water_regime": ["rainfed", "rainfed", "sprinkler", None],
            "planting_date": pd.to_datetime(["2031-06-02", "2031-06-05", "2031-06-01", None]),
            "hybrid_heat_units": [1500.0, np.nan, 1450.0, np.nan],
            "tillage": ["reduced", "no-till", "conventional", None],
            "drained": [True, False, None, None],
            "hydrologic_group": ["B/D", None, None, None],
            "available_water_mm_m": [200.0, 190.0, np.nan, 180.0],
            "rule_id": [None, None, "pivot", None],
        }
    )
    profile = pd.DataFrame(
        {
            "site_id": "west",
            "time": pd.Timestamp("2031-06-20 11:30"),
            "latitude_deg": 41.5,
            "longitude_deg": -91.0,
            "elevation_m": 250.0,
            "height_m": [2.0, 150.0, 500.0, 1200.0, 2000.0, 3500.0],
            "pressure_kpa": [98.4, 96.7, 92.9, 85.6, 77.8, 64.5],
            "temperature_c": [15.0, 18.0, 16.5, 10.5, 7.5, -3.0],
            "dew_point_c": [14.0, 12.5, 11.0, 8.0, -2.0, -15.0],
        }
    )
    return {
        "stations": pd.DataFrame(
            {
                "station_id": ["N1", "N2"], "name": ["North farm", "River"], "latitude_deg": [41.5, 41.8],
                "longitude_deg": [-91.0, -90.5], "elevation_m": [250.0, 230.0], "wind_height_m": [2.0, 10.0],
                "utc_offset_h": [-6.0, -6.0], "observation_hour": [24.0, np.nan], "climate": ["humid", None],
                "situation": ["interior", None],
            }
        ),
        "weather": pd.concat([_weather("N1", 0.0), _weather("N2", 0.4)], ignore_index=True),
        "counties": pd.DataFrame(
            {
                "county_id": ["A1", "B2"], "name": ["Alder", "Birch"], "area_km2": [1000.0, 800.0],
                "latitude_deg": [41.5, 41.8], "longitude_deg": [-91.1, -90.6], "elevation_m": [255.0, np.nan],
                "station_id": ["N1", None],
            }
        ),
        "stands": stands,
        "rain_gauges": pd.DataFrame({"county_id": "B2", "date": DAYS[:4], "rain_mm": [0.0, 3.0, np.nan, 8.5]}),
        "irrigation_rules": pd.DataFrame(
            {
                "rule_id": ["pivot"], "from_stage": ["V8"], "to_stage": ["maturity"], "start_below_pct": [35.0],
                "fill_to_pct": [90.0], "least_mm": [12.0], "most_mm": [25.0], "shortest_interval_d": [4.0],
                "capacity_mm_d": [8.0], "efficiency_pct": [85.0],
            }
        ),
        "irrigation_events": pd.DataFrame(
            {"stand_id": ["B-corn", "B-corn"], "date": DAYS[[9, 19]], "depth_gross_mm": [20.0, np.nan],
             "depth_net_mm": [np.nan, 18.0]}
        ),
        "observations": pd.DataFrame(
            {"stand_id": ["A-corn", "A-beans"], "date": DAYS[[8, 25]], "observed": ["emergence", "canopy cover"],
             "observed_value": [np.nan, 12.0]}
        ),
        "rest": pd.DataFrame(
            {"county_id": [None, "A1"], "part": ["grass", "woods"], "share_pct": [80.0, 60.0],
             "treatment": ["like the stands", "cover"], "cover_id": [None, "woods"], "soil_id": [None, "loam"]}
        ),
        "mixing_depths": pd.DataFrame(
            {"county_id": ["A1", None], "date": DAYS[[19, 20]], "mixing_depth_m": [1500.0, 1200.0],
             "hour": [15.0, np.nan]}
        ),
        "profiles": profile,
        "wind": pd.DataFrame(
            {"county_id": [None, "A1"], "date": DAYS[[19, 20]], "day_part": ["day", None], "height_m": [500.0, 500.0],
             "wind_speed_m_s": [4.0, np.nan], "wind_from_deg": [190.0, np.nan], "u_m_s": [np.nan, 1.0],
             "v_m_s": [np.nan, 3.0]}
        ),
        "background_air": pd.DataFrame({"date": DAYS[[19, 20]], "background_dew_point_c": [6.5, 9.0]}),
        "soils": pd.DataFrame(
            {"soil_id": ["my_loam"], "name": ["My loam"], "theta_fc": [0.3], "theta_wp": [0.14], "rew_mm": [9.0],
             "evaporation_depth_m": [0.1], "hydrologic_group": ["B"], "source": ["made up"]}
        ),
    }  # fmt: skip


SETTINGS = {"title": "Two counties", "season_start": "2031-06-01", "season_end": "2031-06-30", "frost_kill_c": -2.0}


KEPT = {"Covers": 6, "Soils": 100}  # rows; what is left out comes with the package
LEFT_OUT = ("Choices",)


def bare(path, to):
    """Copy a workbook without its looks and most packaged rows, so that a hundred broken copies are quick to make."""
    from openpyxl import Workbook, load_workbook

    book, plain = load_workbook(path), Workbook()
    plain.remove(plain.active)
    for prop in book.custom_doc_props:
        plain.custom_doc_props.append(prop)
    for page in book:
        if page.title in LEFT_OUT:
            continue
        copy = plain.create_sheet(page.title)
        for row in page.iter_rows(max_row=KEPT.get(page.title, 200), max_col=4 if page.title == "Settings" else None):
            for cell in row:
                if cell.value is not None:
                    new = copy.cell(cell.row, cell.column, cell.value)
                    if cell.is_date:
                        new.number_format = cell.number_format
    plain.save(to)
    return to


@pytest.fixture(scope="session")
def good_path(tmp_path_factory):
    """The workbook as the template writes it."""
    return template.write(tmp_path_factory.mktemp("good") / "good.xlsx", "si", good_tables(), SETTINGS)


@pytest.fixture(scope="session")
def bare_bytes(good_path, tmp_path_factory):
    """The same without looks, as bytes to load and break."""
    return bare(good_path, tmp_path_factory.mktemp("bare") / "bare.xlsx").read_bytes()


@pytest.fixture(scope="session")
def tables():
    return good_tables()
