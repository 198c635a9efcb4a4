"""Runs of the measured sites, each made once; skipped with a reason where the measurements are not there."""

import importlib.util
import os
import sys
import time
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from etflux import run_case
from etflux.compare import compare

_spec = importlib.util.spec_from_file_location("measured_sites", Path(__file__).with_name("sites.py"))
_sites = importlib.util.module_from_spec(_spec)
sys.modules[_spec.name] = _sites  # its dataclass looks its module up
_spec.loader.exec_module(_sites)

YEARS = (2002, 2003, 2004, 2005, 2006)
KEPT = {"surface_root_uptake": True}


@pytest.fixture(scope="session")
def sites():
    """The module that knows the sites."""
    folder = os.environ.get("ETFLUX_MEASURED", "")
    if not folder or not (Path(folder) / "us_ne1_daily_2001-2006.csv").exists():
        if "measured" in os.environ.get("ETFLUX_REQUIRE", ""):
            pytest.fail("ETFLUX_MEASURED must name the folder of measurements")
        pytest.skip("ETFLUX_MEASURED names no folder with measurements")
    return _sites


def _compared(sites, site, case):
    results = run_case(case)
    return SimpleNamespace(results=results, comparison=compare(results, sites.measured(site, results)))


@pytest.fixture(scope="session")
def kept(sites):
    """Every flux site with the options that are kept, the reference ET of the network, and how long all took."""
    start = time.perf_counter()
    found = {f"ne1_{year}": _compared(sites, "ne1", sites.ne1(year, KEPT, only="kept")) for year in YEARS}
    found["bo1"] = _compared(sites, "bo1", sites.bo1(KEPT, only="kept"))
    found["ar1"] = _compared(sites, "ar1", sites.ar1(KEPT, only="kept"))
    network = run_case(sites.azmet())
    found["azmet"] = SimpleNamespace(results=network, comparison=compare(network, sites.measured_azmet()))
    found["seconds"] = time.perf_counter() - start
    return found


@pytest.fixture(scope="session")
def all_variants(sites):
    """Every flux site with every variant, the package's settings as they are."""
    found = {f"ne1_{year}": _compared(sites, "ne1", sites.ne1(year)) for year in YEARS}
    return found | {"bo1": _compared(sites, "bo1", sites.bo1()), "ar1": _compared(sites, "ar1", sites.ar1())}


def window(pairs, place, quantity="et_mm", series=None, first=None, last=None, year=None):
    """Pairs of a place within days of the year given as (month, day)."""
    rows = pairs[(pairs["place"] == place) & (pairs["quantity"] == quantity)]
    if series is not None:
        rows = rows[rows["series"] == series]
    day = rows["date"].dt.month * 100 + rows["date"].dt.day
    keep = np.ones(len(rows), dtype=bool)
    if first:
        keep &= (day >= first[0] * 100 + first[1]).to_numpy()
    if last:
        keep &= (day <= last[0] * 100 + last[1]).to_numpy()
    if year:
        keep &= (rows["date"].dt.year == year).to_numpy()
    return rows[keep]


@pytest.fixture(scope="session")
def within():
    """Pairs or band rows of a place between two days of the year."""
    return window
