"""Cells, the flow through their borders, and what an hour of wind moves."""

import numpy as np
import pandas as pd
import pytest

from etflux import cells, wind
from etflux.case import Settings, with_settings
from etflux.outlines import Outline
from etflux.wind import LARGEST_COURANT, OUTSIDE, Transport, merge_small


def around(region):
    """Sum of normals around every cell, (cell, 2); zero for closed cells."""
    inner = region.second != OUTSIDE
    total = np.zeros((region.n_cells, 2))
    for axis, way in enumerate((region.east_km, region.north_km)):
        np.add.at(total[:, axis], region.first, way)
        np.add.at(total[:, axis], region.second[inner], -way[inner])
    return total


def squares(nx=6, ny=5, lon=-93.0, lat=42.0, step=0.4):
    """Outlines of square counties in degrees, their centroids and areas."""
    found, place = {}, []
    for j in range(ny):
        for i in range(nx):
            x, y = lon + i * step, lat + j * step
            ring = np.array([[x, y], [x + step, y], [x + step, y + step], [x, y + step], [x, y]])
            found[f"{j}{i}"] = Outline(f"{j}{i}", "", ((ring,),))
            place.append((y + step / 2, x + step / 2))
    lat_c, lon_c = np.array(place).T
    area = (step * 111.195) ** 2 * np.cos(np.radians(lat_c))
    return found, lat_c, lon_c, area


def scattered(n=40, seed=2):
    rng = np.random.default_rng(seed)
    return 40.0 + 4.0 * rng.random(n), -95.0 + 5.0 * rng.random(n), rng.lognormal(7.3, 0.4, n)


def checks(hour, area):
    """What must hold of any hour: nothing negative, nothing lost, a uniform tracer stays uniform."""
    assert hour.matrix.min() >= 0.0
    assert (hour.stays >= 1.0 - LARGEST_COURANT - 1e-12).all()
    assert area @ hour.matrix.toarray() + area * hour.to_outside == pytest.approx(area, rel=1e-12)
    assert hour.matrix @ np.ones(len(area)) + hour.from_outside == pytest.approx(np.ones(len(area)), abs=1e-12)
    assert hour.net_per_day < 1e-9


def built(name):
    if name in ("outlines", "centroids"):
        outlines, lat, lon, area = squares()
        return cells.region(tuple(outlines), lat, lon, area, outlines if name == "outlines" else None)
    lat, lon, area = scattered()
    if name == "in a row":
        return cells.region(tuple("abcde"), np.full(5, 41.0), np.linspace(-95.0, -93.0, 5), area[:5])
    n = {"scattered": 40, "two": 2, "one": 1}[name]
    return cells.region(tuple(map(str, range(n))), lat[:n], lon[:n], area[:n])


@pytest.mark.parametrize("name", ["outlines", "centroids", "scattered", "in a row", "two", "one"])
def test_cells_are_closed_and_any_wind_is_made_to_gather_nothing(name):
    region = built(name)
    assert np.abs(around(region)).max() < 1e-6 * np.sqrt(region.area_km2.max())
    transport = Transport(region)
    rng = np.random.default_rng(4)
    counties = len(region.cell_of)
    for scale in (0.0, 1.0, 6.0):
        u, v = rng.normal(0.0, scale, (2, counties))
        checks(transport.hour(u, v), region.area_km2)
    spin = np.arange(counties) % 3 - 1.0
    checks(transport.hour(8.0 * spin, -8.0 * spin), region.area_km2)


def test_uniform_wind_is_unchanged_by_the_adjustment(make):
    region = make.plane(7, 6)
    n = len(region.cell_of)
    flow, removed, net = Transport(region).flow(np.full(n, 4.0), np.full(n, -3.0))
    assert flow == pytest.approx(3.6 * (4.0 * region.east_km - 3.0 * region.north_km), abs=1e-9)
    assert removed < 1e-12
    assert net < 1e-12


def test_adjustment_is_the_least_squares_one(make):
    """No other flow without net outflow is nearer to the wind, weighed by the borders' lengths."""
    region = make.plane(4, 3)
    transport = Transport(region)
    rng = np.random.default_rng(8)
    u, v = rng.normal(0.0, 5.0, (2, 12))
    flow, removed, _ = transport.flow(u, v)
    assert removed > 0.1
    other = np.where(region.second == OUTSIDE, region.first, region.second)
    wanted = 1.8 * ((u[region.first] + u[other]) * region.east_km + (v[region.first] + v[other]) * region.north_km)
    length = np.hypot(region.east_km, region.north_km)
    out = np.zeros((12, len(flow)))
    out[region.first, np.arange(len(flow))] = 1.0
    inner = region.second != OUTSIDE
    out[region.second[inner], np.flatnonzero(inner)] = -1.0
    _, _, turns = np.linalg.svd(out)
    free = turns[np.linalg.matrix_rank(out) :]  # flows that gather nothing
    assert free @ ((flow - wanted) / length) == pytest.approx(np.zeros(len(free)), abs=1e-9)


def test_turning_region_and_wind_together_changes_nothing(make):
    rng = np.random.default_rng(5)
    u, v = rng.normal(2.0, 3.0, (2, 20))
    straight = Transport(make.plane()).hour(u, v)
    for angle in (0.3, 1.1, np.pi / 2, 2.5):
        c, s = np.cos(angle), np.sin(angle)
        turned = Transport(make.plane(turn=angle)).hour(c * u - s * v, s * u + c * v)
        assert turned.matrix.toarray() == pytest.approx(straight.matrix.toarray(), abs=1e-12)
        assert turned.crossing_h == pytest.approx(straight.crossing_h)


def test_moving_a_region_along_its_latitude_changes_nothing():
    rng = np.random.default_rng(6)
    lat, lon, area = scattered()
    ids = tuple(map(str, range(40)))
    u, v = rng.normal(2.0, 3.0, (2, 40))
    here, there = (Transport(cells.region(ids, lat, lon + shift, area)).hour(u, v) for shift in (0.0, 90.0))
    assert there.matrix.toarray() == pytest.approx(here.matrix.toarray(), abs=1e-9)


def test_outlines_and_centroids_tell_the_same_story():
    outlines, lat, lon, area = squares(10, 9, step=0.35)
    ids = tuple(outlines)
    both = [Transport(cells.region(ids, lat, lon, area, drawn)).hour(np.full(90, 5.0), np.zeros(90))
            for drawn in (outlines, None)]  # fmt: skip
    # Centroids know no edge: outer cells reach 1.5 radii, a third of a county farther than the outlines.
    assert both[1].crossing_h == pytest.approx(both[0].crossing_h, rel=0.05)
    drawn, guessed = (hour.matrix.toarray() for hour in both)
    assert drawn == pytest.approx(guessed, abs=0.1)
    inside = np.arange(90).reshape(9, 10)[2:-2, 2:-2].ravel()
    assert drawn[inside] == pytest.approx(guessed[inside], abs=0.01)
    # 10 counties of 29 km at 18 km/h
    assert both[0].crossing_h == pytest.approx(10 * 0.35 * 111.195 * np.cos(np.radians(43.4)) / 18.0, rel=0.02)


def test_a_winding_border_lets_no_more_air_through_than_a_straight_one():
    outlines, lat, lon, area = squares(2, 2)
    wave = np.linspace(0.0, 0.4, 41)[1:-1]
    bend = np.stack([-92.6 + 0.05 * np.sin(wave * 60.0), 42.0 + wave], axis=1)
    west, east = (outlines[name].polygons[0][0] for name in ("00", "01"))
    outlines["00"] = Outline("00", "", ((np.concatenate([west[:2], bend, west[2:]]),),))
    outlines["01"] = Outline("01", "", ((np.concatenate([east[:4], bend[::-1], east[4:]]),),))
    region = cells.region(tuple(outlines), lat, lon, area, outlines)
    shared = (region.first == 0) & (region.second == 1)
    assert shared.sum() == 1
    assert np.hypot(region.east_km[shared], region.north_km[shared])[0] == pytest.approx(0.4 * 111.195, rel=1e-3)
    hour = Transport(region).hour(np.zeros(4), np.full(4, 5.0))  # along the border
    assert hour.matrix[1, 0] < 1e-3


def test_air_enters_and_leaves_a_county_at_the_edge_on_both_of_its_sides():
    outlines, lat, lon, area = squares(3, 1)
    hour = Transport(cells.region(tuple(outlines), lat, lon, area, outlines)).hour(np.zeros(3), np.full(3, 5.0))
    assert hour.from_outside == pytest.approx(18.0 / (0.4 * 111.195) * np.ones(3) / hour.substeps, rel=0.02)
    assert hour.to_outside == pytest.approx(hour.from_outside, rel=0.02)


def test_outlines_that_do_not_touch_fall_back_on_centroids():
    outlines, lat, lon, area = squares(4, 4)
    apart = {
        name: Outline(name, "", ((outline.polygons[0][0] + 1e-4 * k,),))
        for k, (name, outline) in enumerate(outlines.items())
    }
    region = cells.region(tuple(apart), lat, lon, area, apart)
    assert ((region.second != OUTSIDE).sum()) >= 24  # neighbours by centroids
    missing = {name: outline for name, outline in outlines.items() if name != "00"}
    assert ((cells.region(tuple(outlines), lat, lon, area, missing).second != OUTSIDE).sum()) >= 24


def test_few_or_lined_up_counties_are_squares():
    lat, lon, area = scattered()
    for region in (
        cells.region(("a", "b", "c"), lat[:3], lon[:3], area[:3]),
        cells.region(tuple("abcdef"), np.full(6, 41.0), np.linspace(-95.0, -93.0, 6), area[:6]),
    ):
        assert (region.second == OUTSIDE).all()
        side = np.sqrt(region.area_km2)
        hour = Transport(region).hour(np.full(len(side), 2.0), np.zeros(len(side)))
        assert hour.from_outside * hour.substeps == pytest.approx(7.2 / side, rel=0.02)


def test_small_counties_share_a_cell_and_conserve():
    outlines, lat, lon, area = squares(5, 5)
    tiny = area.copy()
    tiny[12] *= 0.01
    region = cells.region(tuple(outlines), lat, lon, tiny, outlines)
    assert region.n_cells == 24
    assert region.cell_of[12] in region.cell_of[[7, 11, 13, 17]]
    calm = Transport(region).hour(np.zeros(25), np.zeros(25))
    assert calm.matrix.toarray() == pytest.approx(np.eye(25), abs=1e-15)  # sharing a cell mixes nothing
    windy = Transport(region).hour(np.full(25, 3.0), np.full(25, 2.0))
    checks(windy, tiny)
    assert windy.substeps == 1
    lat, lon, area = scattered()
    area[3] = 10.0
    assert cells.region(tuple(map(str, range(40))), lat, lon, area).n_cells == 39


def test_small_cells_that_lean_on_each_other_end_in_one(make):
    region = make.plane(4, 1)
    area = np.array([1600.0, 5.0, 4.0, 1600.0])
    merged = merge_small(wind.Region(**{**vars(region), "area_km2": area}))
    assert merged.n_cells == 2
    assert np.abs(around(merged)).max() < 1e-9


def table(*rows):
    columns = ["county_id", "date", "day_part", "height_m", "wind_speed_m_s", "wind_from_deg", "u_m_s", "v_m_s"]
    frame = pd.DataFrame(rows, columns=columns)
    return frame.assign(date=pd.to_datetime(frame["date"]))


DATES = np.array(["2031-07-20", "2031-07-21", "2031-07-22"], "datetime64[D]")
PLACES = (("a", "b", "c"), DATES, np.array([42.0, 42.0, 42.0]), np.array([-93.0, -92.0, -90.0]))


def winds(*rows, **changes):
    ids, dates, lat, lon = PLACES
    return wind.winds(table(*rows), dates, ids, lat, lon, with_settings(Settings(), **changes))


NAN = np.nan


def test_wind_of_the_whole_region_with_a_county_of_its_own():
    found = winds(
        (None, "2031-07-20", "both", 500.0, 5.0, 270.0, NAN, NAN),
        ("b", "2031-07-20", "both", 500.0, NAN, NAN, 1.0, -2.0),
    )
    assert found.u_day[0] == pytest.approx([5.0, 1.0, 5.0])
    assert found.v_night[0] == pytest.approx([0.0, -2.0, 0.0], abs=1e-12)
    assert found.of(0, "day") is not None
    assert found.of(1, "day") is None


def test_direction_is_where_the_wind_comes_from():
    found = winds((None, "2031-07-21", "day", 400.0, 10.0, 180.0, NAN, NAN))
    assert found.u_day[1] == pytest.approx(np.zeros(3), abs=1e-12)
    assert found.v_day[1] == pytest.approx(np.full(3, 10.0))
    assert found.v_night[1] == pytest.approx(np.full(3, 10.0))  # the day's serves for the night


def test_a_part_that_is_missing_takes_the_other_one():
    found = winds((None, "2031-07-22", "night", 400.0, NAN, NAN, 3.0, 4.0))
    assert found.u_day[2] == pytest.approx(np.full(3, 3.0))


def test_counties_without_a_wind_take_the_others_by_inverse_distance():
    found = winds(
        ("a", "2031-07-20", "both", 400.0, NAN, NAN, 2.0, 0.0), ("c", "2031-07-20", "both", 400.0, NAN, NAN, 8.0, 0.0)
    )
    assert found.u_day[0, [0, 2]] == pytest.approx([2.0, 8.0])
    assert found.u_day[0, 1] == pytest.approx((2.0 * 2 + 8.0 * 1) / 3, rel=0.01)  # c is twice as far as a


def test_low_winds_are_raised_by_the_power_of_the_settings():
    rows = ((None, "2031-07-20", "both", 10.0, 4.0, 270.0, NAN, NAN),)
    found = winds(*rows, wind_top_m=300.0, wind_power_day=0.1, wind_power_night=0.3)
    assert found.u_day[0] == pytest.approx(np.full(3, 4.0 * 30.0**0.1))
    assert found.u_night[0] == pytest.approx(np.full(3, 4.0 * 30.0**0.3))
    high = winds((None, "2031-07-20", "both", 800.0, 4.0, 270.0, NAN, NAN))
    assert high.u_night[0] == pytest.approx(np.full(3, 4.0))


def test_no_rows_give_no_wind():
    found = winds()
    assert np.isnan(found.u_day).all()
    assert found.of(0, "night") is None
