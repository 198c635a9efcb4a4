"""Tagged water: conserved, below what there is, moved with the air, aged, carried and shared out."""

from dataclasses import replace

import numpy as np
import pytest

from etflux import airmass, humidity
from etflux.airmass import ranges, unaccounted, unaccounted_by_day
from etflux.airmass.inputs import Variation
from etflux.airmass.march import BACKGROUND, EMITTED, REPLACED, TOP, WIND, March
from etflux.airmass.tracers import FLOOR, HUMIDITY, Layout
from etflux.case import with_settings
from etflux.column import EDGES, LAYER_MASS
from etflux.wind import Winds


def layout_of(inputs, **changes):
    return Layout(
        **{"sources": 3, "ages": 8, "is_crop": inputs.is_crop, "outside": True, "home": True, "origins": 0, **changes}
    )


def winds_that(kind, days, n, make):
    """Winds that meet in the middle, part there, spin, or make no sense."""
    x = np.tile(np.linspace(-1.0, 1.0, 5), 4)
    y = np.repeat(np.linspace(-1.0, 1.0, 4), 5)
    east, north = {
        "meet": (-6.0 * x, -6.0 * y), "part": (6.0 * x, 6.0 * y), "spin": (-6.0 * y, 6.0 * x),
        "shear": (6.0 * y, 0.0 * x),
    }.get(kind, (0.0 * x, 0.0 * x))  # fmt: skip
    if kind == "noise":
        return make.noisy(days, n)
    if kind == "uniform":
        return make.steady(4.0, 2.0, days, n)
    return Winds(*(np.tile(part, (days, 1)) for part in (east, north, 0.5 * east, 0.5 * north)))


@pytest.mark.parametrize("sinking", [0.0, 400.0])
@pytest.mark.parametrize("kind", ["none", "uniform", "meet", "part", "spin", "shear", "noise"])
def test_every_tag_is_accounted_for_day_by_day(make, quick, kind, sinking):
    inputs = make.summer(days=4)
    if kind != "none":
        inputs = make.summer(days=4, wind=winds_that(kind, 4, 20, make))
    drier = np.array([0.0, 6.0, 0.0, 3.0])[:, None]
    inputs = replace(inputs, dew_point_morning_c=inputs.dew_point_morning_c - drier)
    found = airmass.season(inputs, with_settings(quick, subsidence_m=sinking))
    left = found.ledger[EMITTED]
    water = np.einsum("dcs,c->ds", inputs.water_mm, inputs.area_km2)
    assert left == pytest.approx(water, rel=1e-9)
    assert np.abs(unaccounted_by_day(found.ledger)).max() < 1e-9 * left.sum()
    assert np.abs(unaccounted(found.ledger)).max() < 1e-9 * left.sum()
    assert (found.ledger[BACKGROUND].sum() > 0.0) == (kind == "none")
    assert (WIND in found.ledger and found.ledger[WIND].sum() > 0.0) == (kind != "none")
    assert (TOP in found.ledger) == (sinking > 0.0)
    printed = [row for row in found.budget if row["subject"] == "corn"]
    total = {row["term"]: row["value"] for row in printed}
    rest = sum(value for term, value in total.items() if term not in (EMITTED, "unaccounted"))
    assert total[EMITTED] == pytest.approx(rest, rel=1e-9)


def courses(inputs, settings, **changes):
    return list(March(inputs, settings, layout_of(inputs, **changes)))


def test_without_wind_humidity_is_the_closed_form(make, quick):
    """q = (integral of the morning's q up to M, plus the water so far)/M at every hour, and so for the day's tag."""
    inputs = make.summer(days=2, et_mm=4.0)
    first, second = courses(inputs, quick)
    for course in (first, second):
        for hour in (9, 12, 15, 18):
            mass = course.depths.water[:, hour]
            below = np.clip(mass[:, None] - EDGES[:-1], 0.0, LAYER_MASS)
            water = inputs.water_mm[0].sum(axis=1) * course.energy.water_after[:, hour]
            expected = ((below * course.morning.q_kg_kg).sum(axis=1) + water) / mass
            assert course.values[hour][:, HUMIDITY] == pytest.approx(expected, rel=1e-12)
    today = first.values[15][:, layout_of(inputs).tags].reshape(20, 3, 8)
    water = inputs.water_mm[0] * first.energy.water_share[:, 15, None] / first.depths.water[:, 15, None]
    assert today[:, :, 0] == pytest.approx(water, rel=1e-12)
    assert today[:, :, 1:] == pytest.approx(np.zeros((20, 3, 7)), abs=0.0)


def test_calm_wind_equals_no_wind_within_the_day(make, quick):
    calm = airmass.season(make.summer(days=1, wind=(0.0, 0.0)), quick)
    none = airmass.season(make.summer(days=1), quick)
    for name in ("contribution_c", "dew_point_mixed_c", "contribution_12_c", "contribution_18_c", "mixing_depth_m"):
        assert calm.county[name] == pytest.approx(none.county[name], rel=1e-10)
    assert calm.county["contribution_other_c"] == pytest.approx(np.zeros((1, 20)), abs=1e-12)


def test_any_wind_over_identical_columns_changes_nothing(make, quick):
    """Humidity, and the tags where air from outside brings the same: nothing to move."""
    still = courses(make.summer(days=3, nx=20, ny=1, wind=(0.0, 0.0)), quick)
    for winds in (make.steady(5.0, -3.0, 3, 20), make.noisy(3, 20)):
        moved = courses(make.summer(days=3, nx=20, ny=1, wind=winds), quick)
        for a, b in zip(still, moved, strict=True):
            assert b.values[15][:, HUMIDITY] == pytest.approx(a.values[15][:, HUMIDITY], rel=1e-9)
        # The first day's tags: the region's and those from outside, together as without wind.
        tags, crops = layout_of(make.summer()).tags, layout_of(make.summer()).crop_tags
        one, other = (days[0].values[15] for days in (still, moved))
        assert other[:, tags][:, crops].sum(axis=1) + other[:, 2] == pytest.approx(
            one[:, tags][:, crops].sum(axis=1), rel=1e-9
        )


def test_moving_the_region_along_its_latitude_changes_nothing(make, quick):
    wind = make.noisy(3, 20)
    here = airmass.season(make.summer(days=3, wind=wind), quick)
    there = airmass.season(make.summer(days=3, wind=wind, longitude=20.0), quick)
    assert there.county["contribution_c"] == pytest.approx(here.county["contribution_c"], rel=1e-9)


def test_tags_never_exceed_what_air_holds_above_its_background(make, quick):
    rng = np.random.default_rng(3)
    inputs = make.summer(days=8, et_mm=6.0, wind=make.noisy(8, 20))
    jumps = rng.normal(17.0, 3.0, (8, 20))
    inputs = replace(inputs, dew_point_morning_c=jumps, water_mm=inputs.water_mm * rng.uniform(0.2, 1.4, (8, 20, 1)))
    for course in courses(inputs, quick, origins=20):
        layout = layout_of(inputs, origins=20)
        for hour in range(6, 20):
            values = course.values[hour]
            room = values[:, HUMIDITY] - values[:, FLOOR]
            tags = values[:, layout.tags]
            assert (tags.sum(axis=1) <= room + 1e-9).all()
            assert (values[:, FLOOR] >= 0.0).all()
            assert (tags >= -1e-15).all()
            home = course.home[hour]
            assert (home <= tags + 1e-12).all()
            assert values[:, layout.by_origin].sum(axis=1) == pytest.approx(
                tags[:, layout.crop_tags].sum(axis=1), rel=1e-9
            )


def test_home_and_other_and_origins_sum_to_the_crops(make, quick):
    inputs = make.summer(days=4, wind=(3.0, 1.0))
    found = airmass.season(inputs, quick)
    county = found.county
    assert county["contribution_home_c"] + county["contribution_other_c"] == pytest.approx(county["contribution_c"])
    assert county["contribution_same_day_c"] + county["contribution_carried_c"] == pytest.approx(
        county["contribution_c"]
    )
    assert found.origins_g_kg.sum(axis=2) == pytest.approx(county["contribution_g_kg"], rel=1e-9)
    own = np.diagonal(found.origins_g_kg, axis1=1, axis2=2)
    west, east = 0, 4
    assert (own[:, west] / county["contribution_g_kg"][:, west] > 0.99).all()  # upwind: nothing but its own
    assert (county["contribution_other_c"][:, east] > 0.3 * county["contribution_c"][:, east]).all()
    assert found.origins_g_kg[2, east, west] > 0.0
    assert found.origins_g_kg[2, west, east] == pytest.approx(0.0, abs=1e-12)
    crops = found.tags["contribution_c"][:, :, :2]
    assert crops.sum(axis=(2, 3)) == pytest.approx(county["contribution_c"])
    home = found.tags["home_g_kg"][:, :, :2].sum(axis=(2, 3)) / county["contribution_g_kg"]
    assert home * county["contribution_c"] == pytest.approx(county["contribution_home_c"])


def test_tags_age_by_a_day_and_the_oldest_are_pooled(make, quick):
    inputs = make.summer(days=10, et_mm=4.0)
    water = inputs.water_mm.copy()
    water[1:] = 0.0
    found = airmass.season(replace(inputs, water_mm=water), with_settings(quick, residence_days=15.0))
    by_age = found.tags["contribution_g_kg"].sum(axis=(1, 2))
    for day in range(10):
        assert np.flatnonzero(by_age[day] > 0.0).tolist() == [min(day, 7)]


def test_pooled_tags_are_the_sum_of_the_tags(make, quick):
    """The copies that the ranges run on tell the same contribution.

    Not to rounding: how sharply the top of the mixed air is kept within a layer hangs on all tags that are told apart.
    """
    inputs = make.summer(days=4, wind=make.noisy(4, 20))
    base = ranges.contributions(inputs, quick, (Variation(), Variation(), Variation()))
    found = airmass.season(inputs, quick).county["contribution_c"]
    for copy in base:
        assert copy == pytest.approx(found, rel=1e-4)
    assert base[0] == pytest.approx(base[2], rel=1e-12)


def test_many_counties_equal_one_alone(make, quick):
    inputs = make.summer(days=3)
    rng = np.random.default_rng(9)
    inputs = replace(inputs, t_max_c=inputs.t_max_c + rng.normal(0.0, 1.0, inputs.t_max_c.shape))
    alone = with_settings(quick, heat_fetch_km=0.0)
    together = airmass.season(inputs, alone)
    k = 7
    per_county = {name: value[:, k : k + 1] for name, value in vars(inputs).items() if getattr(value, "ndim", 0) >= 2}
    fixed = {name: getattr(inputs, name)[k : k + 1] for name in (
        "latitude_deg", "longitude_deg", "elevation_m", "area_km2", "represented")}  # fmt: skip
    one = airmass.season(replace(inputs, county_ids=("x",), **per_county, **fixed), alone)
    for name in ("contribution_c", "mixing_depth_m", "theta_mixed_c", "contribution_carried_c"):
        assert one.county[name][:, 0] == pytest.approx(together.county[name][:, k], rel=1e-10)


def test_a_county_without_input_is_blank_and_leaves_the_others_alone(make, quick):
    inputs = make.summer(days=4, wind=(3.0, 0.0))
    water, t_max = inputs.water_mm.copy(), inputs.t_max_c.copy()
    water[2:, 3] = np.nan
    t_max[1:, 17] = np.nan
    found = airmass.season(replace(inputs, water_mm=water, t_max_c=t_max), quick)
    c = found.county["contribution_c"]
    missing = np.zeros_like(c, dtype=bool)
    missing[2:, 3] = missing[1:, 17] = True
    assert np.array_equal(np.isnan(c), missing)
    for name in ("mixing_depth_m", "dew_point_mixed_c"):
        assert np.array_equal(np.isnan(found.county[name]), missing)
    assert np.isnan(found.hourly["contribution_c"][3, 3]).all()
    assert np.abs(unaccounted_by_day(found.ledger)).max() < 1e-6


def test_a_front_takes_the_tags_with_it(make, quick):
    """Four moist days, then q falls from 18 to 9 g/kg overnight: what is left of them is below 3 degC.

    The new day's own water counts more in the dry air than it did before; it is not what the front leaves.
    """
    moist, dry = (humidity.dew_point_from_specific_humidity(q, 97.8).item() for q in (0.018, 0.009))
    inputs = make.summer(days=6, et_mm=5.0)
    morning = inputs.dew_point_morning_c * 0.0 + moist
    morning[4:] = dry
    results = airmass.season(replace(inputs, dew_point_morning_c=morning, t_min_c=inputs.t_min_c + 4.0), quick)
    found, carried = results.county, results.tags["contribution_g_kg"][:, :, :2, 1:].sum(axis=(2, 3))
    assert (carried[3] > 1.0).all()
    assert (carried[4] < 0.33 * carried[3]).all()
    assert (found["contribution_carried_c"][4] < 0.6 * found["contribution_carried_c"][3]).all()
    assert (found["contribution_carried_c"][4] < 3.0).all()
    assert (found["contribution_same_day_c"][4] > found["contribution_same_day_c"][3]).all()
    assert (found["replaced_share"][4] > 0.5).all()
    assert ((found["flags"][4] & airmass.flags.AIR["replaced"]) > 0).all()


def test_wind_flushes_and_calm_builds_up(make, quick):
    carried = {
        speed: airmass.season(make.summer(days=6, wind=(speed, 0.0)), quick).county["contribution_carried_c"][5].mean()
        for speed in (0.5, 2.0, 6.0, 12.0)
    }
    values = list(carried.values())
    assert values == sorted(values, reverse=True)
    assert values[-1] < 0.1 * values[0]


def test_both_inflow_worlds(make, quick):
    inputs = make.summer(days=5, wind=(4.0, 0.0))
    found = airmass.season(inputs, quick).county
    low, c, high = (found[f"contribution_{name}c"] for name in ("low_", "", "high_"))
    assert (low <= c).all()
    assert (high >= c).all()
    west, east = 0, 4
    assert found["contribution_outside_c"][4, west] > found["contribution_outside_c"][4, east]
    water = np.ones(20, dtype=bool)
    sea = airmass.season(replace(inputs, region=make.plane(water_edge=water)), quick).county
    assert sea["contribution_outside_c"] == pytest.approx(np.zeros((5, 20)), abs=1e-9)
    assert sea["contribution_c"] == pytest.approx(c, rel=1e-5)


def test_a_region_that_wind_crosses_in_a_day_says_so(make, quick):
    edge = airmass.flags.AIR["edge_dependent"]
    fast = airmass.season(make.summer(days=1, wind=(4.0, 0.0)), quick).county
    slow = airmass.season(make.summer(days=1, wind=(1.0, 0.0)), quick).county
    assert fast["crossing_h"] == pytest.approx(np.full((1, 20), 200.0 / 14.4), rel=1e-9)
    assert ((fast["flags"] & edge) > 0).all()
    assert ((slow["flags"] & edge) == 0).all()


def test_residence_is_the_share_that_stays_overnight(make, quick):
    """Yesterday's tags over yesterday's evening ones: exp(-1/residence), where no other air came."""
    inputs = make.summer(days=2, et_mm=3.0)
    inputs = replace(
        inputs, dew_point_morning_c=inputs.dew_point_morning_c + np.array([[0.0], [4.0]]), t_min_c=inputs.t_min_c + 4.0
    )
    for days in (0.5, 2.0, 8.0):
        found = airmass.season(inputs, with_settings(quick, residence_days=days))
        stays = 1.0 - found.ledger[BACKGROUND][0] / found.ledger[EMITTED][0]
        assert stays == pytest.approx(np.full(3, np.exp(-1.0 / days)), rel=1e-9)


def test_forecast_days_without_observation_carry_the_model(make, quick):
    inputs = make.summer(days=4, et_mm=4.0)
    forecast = inputs.forecast.copy()
    forecast[2:] = True
    dew = inputs.dew_point_morning_c.copy()
    dew[2:] = np.nan
    found = airmass.season(replace(inputs, forecast=forecast, dew_point_morning_c=dew), quick)
    assert found.county["replaced_share"][2:] == pytest.approx(np.zeros((2, 20)), abs=1e-12)
    assert found.ledger[REPLACED][3].sum() == pytest.approx(0.0, abs=1e-9)
    assert ((found.county["flags"][2:] & airmass.flags.AIR["forecast"]) > 0).all()


def test_hours_of_the_day(make, quick):
    found = airmass.season(make.summer(days=2, wind=(2.0, 0.0)), quick)
    hours = found.hours.astype(int)
    depth = found.hourly["mixing_depth_m"][1, 5]
    assert np.isnan(depth[hours <= 4]).all()
    assert (np.diff(depth[hours >= 5]) >= 0.0).all()
    for hour, name in ((12, "contribution_12_c"), (15, "contribution_c"), (18, "contribution_18_c")):
        assert found.hourly["contribution_c"][:, :, hour - 1] == pytest.approx(found.county[name])
    dew = found.hourly["dew_point_mixed_c"][1, :, 8:19]
    assert found.county["peak_hour"][1] == pytest.approx(9 + dew.argmax(axis=1))
    rh = found.hourly["rh_mixed_pct"][1, :, 11]
    e = humidity.saturation_vapour_pressure(found.hourly["dew_point_mixed_c"][1, :, 11])
    assert rh == pytest.approx(humidity.relative_humidity(e, found.hourly["theta_mixed_c"][1, :, 11]))
    assert ((found.county["break_hour"] > 5.0) & (found.county["break_hour"] < 12.0)).all()
    assert found.tags["g_kg_12"].shape == found.tags["contribution_g_kg"].shape
