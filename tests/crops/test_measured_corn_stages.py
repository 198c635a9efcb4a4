"""Corn's stages against leaf area measured at AmeriFlux US-Ne1, irrigated maize, 2002 to 2006 (CC-BY-4.0).

The site gives daily mean temperature only; half the daily range is taken as 5 to 7.5 K (common practice, no source),
and the result does not hang on it. Nothing is tuned: default hybrid (the site's management record of 2006 names 2700
°F-days), sowing dates of the record.
"""

import os
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

SOWN = ("2002-05-10", "2003-05-15", "2004-05-04", "2005-05-05", "2006-05-05")


@pytest.fixture(scope="module")
def site():
    folder = os.environ.get("ETFLUX_MEASURED", "")
    if not folder:
        if "measured" in os.environ.get("ETFLUX_REQUIRE", ""):
            pytest.fail("ETFLUX_MEASURED names no folder")
        pytest.skip("ETFLUX_MEASURED names no folder with measurements")
    days = pd.read_csv(Path(folder) / "us_ne1_daily_2001-2006.csv")
    days = days.set_index(pd.to_datetime(days["TIMESTAMP"].astype(str)))["TA_F"].asfreq("D")
    canopy = pd.read_csv(Path(folder) / "us_ne1_lai_height_soil.csv")
    canopy = canopy[canopy["variable"] == "LAI_TOT_m2m2"]
    leaf_area = pd.Series(canopy["value"].astype(float).to_numpy(), pd.to_datetime(canopy["date"].astype(str).str[:8]))
    return days.where(days > -90.0).interpolate(), leaf_area.sort_index()


@pytest.mark.parametrize("half_range", [5.0, 6.2, 7.5])
def test_leaf_area_at_the_stages(make, site, half_range):
    """10 % cover: a little leaf; full cover: 3 or more (FAO-56 p. 186); dent: past the peak; black layer: half gone."""
    mean, leaf_area = site
    t = mean.to_numpy()
    record = make.record(str(mean.index[0].date()), len(t), 41.2, t_max_c=t + half_range, t_min_c=t - half_range)
    rows = [make.stand(sown[:4], planting_date=sown, area_km2=10.0) for sown in SOWN]
    marks = make.grow(make.case(*rows), record).canopy.marks
    for unit, sown in enumerate(SOWN):
        year = leaf_area[leaf_area.index.year == int(sown[:4])]
        days = (year.index.to_numpy().astype("datetime64[D]") - record.dates[0]).astype(int)
        at = {
            name: float(np.interp(marks[name][unit], days, year))
            for name in ("cover10", "full_cover", "late", "maturity")
        }
        peak = year.max()
        assert 0.05 < at["cover10"] < 0.8, sown
        assert 3.0 < at["full_cover"] < 0.95 * peak, sown
        assert at["full_cover"] > 5.0 * at["cover10"], sown
        assert 0.7 * peak < at["late"] < 0.95 * peak, sown
        assert at["maturity"] < 0.6 * peak, sown
