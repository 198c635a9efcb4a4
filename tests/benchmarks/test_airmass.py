"""The air above 3,100 counties: seconds and memory by day, and how they grow with counties and tags.

Asked for: 3,100 counties x 120 days x 40 layers or more x 24 tags under 3 minutes on 2 cores and under 3 GB. Feature
list, fixed: 53 layers; 3 sources x 8 ages; home and other; outside; noisy wind by day and night, adjusted. Without the
other worlds and the ranges. Set ETFLUX_SLOW=1 for the whole 120 days; else a few days are measured and multiplied.
"""

import importlib.util
import os
import resource
import time
from pathlib import Path

import pytest

from etflux import airmass
from etflux.case import Settings, with_settings

_spec = importlib.util.spec_from_file_location(
    "regions", Path(__file__).resolve().parents[1] / "airmass" / "regions.py"
)
make = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(make)

SETTINGS = with_settings(Settings(), air_worlds=False, air_ranges=False)
DAYS = 120


def seconds_a_day(nx, ny, days):
    """Wall time of a day once the first, which loads libraries and factorizes, is over."""
    inputs = make.summer(days=days, nx=nx, ny=ny, wind=make.noisy(days, nx * ny, mean=(5.0, 1.0), spread=1.0))
    marks = []
    found = airmass.season(inputs, SETTINGS, lambda share: marks.append(time.perf_counter()))
    return (marks[days - 1] - marks[0]) / (days - 1), found


def test_air_of_3100_counties(benchmark):
    days = DAYS if os.environ.get("ETFLUX_SLOW") else 5
    each, found = benchmark.pedantic(seconds_a_day, args=(62, 50, days), rounds=1, iterations=1)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    assert found.tags["contribution_g_kg"].shape == (days, 3100, 3, 8)
    print(
        f"\n3,100 counties, 53 layers, 24 tags: {each:.2f} s a day, {each * DAYS:.0f} s for {DAYS} days, {peak:.2f} GB"
    )


@pytest.mark.parametrize(("nx", "ny"), [(10, 10), (20, 20), (40, 40)])
def test_growth_with_counties(benchmark, nx, ny):
    each, _ = benchmark.pedantic(seconds_a_day, args=(nx, ny, 4), rounds=1, iterations=1)
    print(f"\n{nx * ny} counties: {1000.0 * each:.0f} ms a day, {1e6 * each / (nx * ny):.0f} us a county and day")
