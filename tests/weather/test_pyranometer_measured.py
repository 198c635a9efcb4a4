"""A good sensor in humid summers: Bondville, Illinois, 1998 (NOAA; folder named by ETFLUX_MEASURED)."""

import os
from pathlib import Path

import pandas as pd
import pytest

from etflux import weather
from etflux.case import Case, Settings


def test_clear_sky_with_vapour_does_not_condemn_bondville():
    folder = os.environ.get("ETFLUX_MEASURED", "")
    path = Path(folder) / "us_bo1_soybean_daily_1998.csv"
    if not folder or not path.exists():
        if "measured" in os.environ.get("ETFLUX_REQUIRE", ""):
            pytest.fail("ETFLUX_MEASURED must name the folder of measurements")
        pytest.skip("ETFLUX_MEASURED does not name a folder with us_bo1_soybean_daily_1998.csv")
    table = pd.read_csv(path)
    stations = pd.DataFrame(
        {"station_id": ["bo1"], "latitude_deg": [40.0062], "longitude_deg": [-88.2904], "elevation_m": [219.0],
         "wind_height_m": [10.0]}
    )  # fmt: skip
    rows = pd.DataFrame(
        {"station_id": "bo1", "date": pd.to_datetime(table["date"]), "t_max_c": table["Tmax_C"],
         "t_min_c": table["Tmin_C"], "vapour_pressure_kpa": table["ea_kPa"], "rs_mj_m2_d": table["Rs_MJ"]}
    )  # fmt: skip
    found = weather.quality(weather.arrange(Case(Settings(), {"stations": stations, "weather": rows})))
    assert [finding.code for finding in found if "pyranometer" in finding.code] == []
