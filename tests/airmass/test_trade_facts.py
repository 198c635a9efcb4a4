"""What forecasters expect of crop moisture (common practice, no source), over a grid of days and regions.

Depth 0.8 to 2.5 km, water use 2 to 7 mm, wind 0.5 to 12 m/s, regions 150 to 900 km across.
"""

from dataclasses import replace

import numpy as np
import pytest

from etflux import airmass

DEPTHS_M = (800.0, 1200.0, 1700.0, 2500.0)
WATERS_MM = (2.0, 3.5, 5.0, 6.0, 7.0)
REGIONS = ((150.0, 4), (300.0, 6), (500.0, 8), (900.0, 10))  # km across, counties on a side
WINDS_M_S = (0.5, 3.0, 6.0, 12.0)


def one_day(make, quick, depth_m, et_mm):
    """A humid, sunny day with a given depth at 15 h; sun enough for the water."""
    inputs = make.summer(days=1, nx=2, ny=2, et_mm=et_mm, depth_m=depth_m, shares=(0.5, 0.3, 0.2))
    sun = inputs.rs_mj_m2_d + 5.0
    return airmass.season(replace(inputs, given_hour=inputs.given_hour * 0.0 + 15.0, rs_mj_m2_d=sun,
                                  given_depth_m=np.full((1, 4), depth_m)), quick).county  # fmt: skip


def test_a_day_adds_one_to_five_degrees(make, quick):
    """Where the mixed air is air: 7 mm into 800 m would saturate it and is blank, not a number."""
    found = {}
    for depth in DEPTHS_M:
        for et in WATERS_MM:
            found[depth, et] = one_day(make, quick, depth, et)["contribution_same_day_c"][0, 0]
    shown = {key: value for key, value in found.items() if np.isfinite(value)}
    assert len(shown) >= 0.7 * len(found)
    # The grid's corners are outside: 7 mm of which crops give 5.6 into 800 m add 5.3; 2 mm into deep air under 1.
    corner = shown.pop((800.0, 7.0))
    assert 5.0 < corner < 5.5
    assert max(shown.values()) < 5.0
    assert min(shown.values()) > 0.5
    ordinary = [value for (depth, et), value in shown.items() if et >= 3.5 and depth <= 1700.0]
    assert len(ordinary) >= 9
    assert min(ordinary) > 1.0


@pytest.mark.parametrize("et", [2.0, 3.5, 5.0])
def test_twice_the_depth_is_about_half_the_same_day_water(make, quick, et):
    for depth in (800.0, 1000.0, 1250.0):
        one, two = (one_day(make, quick, z, et)["contribution_g_kg"][0, 0] for z in (depth, 2.0 * depth))
        assert 0.45 <= two / one <= 0.6


def episode(make, quick, km, n, wind, days=9):
    inputs = make.summer(days=days, nx=n, ny=n, side_km=km / n, et_mm=4.5, wind=(wind, 0.0))
    return airmass.season(inputs, quick).county


def days_to_build(make, quick, km, n, wind):
    """Days after the first until the carried part is at nine tenths of its largest, and the course."""
    carried = episode(make, quick, km, n, wind)["contribution_carried_c"].mean(axis=1)
    assert carried[0] == pytest.approx(0.0, abs=1e-12)
    assert carried.max() > 1.0
    return int(np.argmax(carried >= 0.9 * carried.max())), carried / carried.max()


@pytest.mark.parametrize(("km", "n", "wind"), [(500.0, 8, 0.5), (500.0, 8, 1.0), (900.0, 10, 1.0), (900.0, 10, 2.0)])
def test_in_a_large_region_with_weak_wind_the_carried_part_builds_over_three_to_five_days(make, quick, km, n, wind):
    days, _ = days_to_build(make, quick, km, n, wind)
    assert 3 <= days <= 5


def test_where_it_builds_faster_or_more_slowly(make, quick):
    """500 km at 2 m/s take two days; 900 km in all but calm air six, with 85 % after five."""
    quicker, _ = days_to_build(make, quick, 500.0, 8, 2.0)
    slower, course = days_to_build(make, quick, 900.0, 10, 0.5)
    assert (quicker, slower) == (2, 6)
    assert course[5] > 0.85


@pytest.mark.parametrize(("km", "n"), REGIONS)
def test_wind_flushes(make, quick, km, n):
    carried = [episode(make, quick, km, n, wind, days=5)["contribution_carried_c"][-1].mean() for wind in WINDS_M_S]
    assert carried == sorted(carried, reverse=True)
    assert carried[-1] < 0.5 * carried[0]


def test_a_larger_region_carries_more(make, quick):
    carried = [episode(make, quick, km, n, 3.0, days=5)["contribution_carried_c"][-1].mean() for km, n in REGIONS]
    assert carried == sorted(carried)
