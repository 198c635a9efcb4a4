"""Where there is no number, the reason; the other worlds, the ranges, the draws, the observed rise."""

from dataclasses import replace

import numpy as np
import pytest

from etflux import airmass, humidity
from etflux.airmass import flags, ranges, rise, worlds
from etflux.airmass.inputs import given_depths
from etflux.case import Settings, with_settings

AIR = flags.AIR


def has(found, name):
    return (found["flags"] & AIR[name]) > 0


def blank(found):
    return np.isnan(found["contribution_c"]) & np.isnan(found["contribution_same_day_c"])


def test_saturated_air_is_blank_with_its_reason(make, quick):
    found = airmass.season(make.summer(days=1, et_mm=7.0, depth_m=260.0), quick).county
    assert has(found, "saturated").all()
    assert blank(found).all()
    assert np.isnan(found["dew_point_mixed_c"]).all()


def test_a_tiny_depth_is_blank_with_its_reason(make, quick):
    shallow = with_settings(quick, depth_floor_m=20.0)
    found = airmass.season(make.summer(days=1, et_mm=0.3, depth_m=30.0), shallow).county
    assert has(found, "depth_tiny").all()
    assert blank(found).all()


def test_evaporation_above_the_available_energy_is_blank_with_its_reason(make, quick):
    found = airmass.season(make.summer(days=1, et_mm=8.5), quick).county
    assert has(found, "energy_short").all()
    assert blank(found).all()
    fits = airmass.season(make.summer(days=1, et_mm=5.0), quick).county
    assert not has(fits, "energy_short").any()


def test_reasons_say_themselves_in_words():
    from etflux.variables import words_of

    for name in flags.BLANKS:
        assert words_of(AIR[name], "air"), name


def test_flags_of_their_conditions(make, quick):
    inputs = make.summer(days=2)
    rain = inputs.rain_mm.copy()
    rain[1, 0] = 25.0
    t_max = inputs.t_max_c.copy()
    t_max[1, 1] = 40.0
    forecast = inputs.forecast.copy()
    forecast[1, 2] = True
    given = inputs.given_depth_m.copy()
    given[1, 3] = 4000.0
    represented = inputs.represented.copy()
    represented[4] = 0.5
    found = airmass.season(
        replace(inputs, rain_mm=rain, t_max_c=t_max, forecast=forecast, given_depth_m=given, represented=represented),
        quick,
    ).county
    for county, name in enumerate(
        ("heavy_rain", "temperature_off", "forecast", "given_depth_ratio", "represented_low")
    ):
        bit = has(found, name)
        assert bit[1, county], name
    assert has(found, "represented_low").sum() == 2
    assert has(found, "heavy_rain").sum() == 1
    assert has(found, "standard_profile").all()
    assert (found["contribution_high_c"][:, 4] > 1.5 * found["contribution_c"][:, 4]).all()


def test_dry_air_gives_a_small_tag_a_large_effect_and_says_so(make, quick):
    inputs = make.summer(days=1, et_mm=2.0)
    dry = replace(inputs, dew_point_morning_c=inputs.dew_point_morning_c - 22.0, dew_point_c=inputs.dew_point_c - 22.0)
    found = airmass.season(dry, quick).county
    assert has(found, "dry_region").all()
    assert np.isfinite(found["contribution_c"]).all()
    assert (found["contribution_c"] > airmass.season(inputs, quick).county["contribution_c"]).all()


def test_kc_of_a_whole_region_from_1_1_to_1_2_moves_the_same_day_part_little(make, quick):
    one, other = (
        airmass.season(make.summer(days=1, et_mm=5.0 * factor), quick).county["contribution_same_day_c"]
        for factor in (1.0, 1.2 / 1.1)
    )
    assert (other > one).all()
    assert (other - one < 0.5).all()


def test_a_given_depth_sets_the_water_and_leaves_the_temperature(make, quick):
    inputs = make.summer(days=1)
    free = airmass.season(inputs, quick)
    given = inputs.given_depth_m.copy()
    hour = inputs.given_hour.copy()
    given[0, 2], hour[0, 2] = 1100.0, 15.0
    given[0, 5] = 1900.0  # the day's greatest
    found = airmass.season(replace(inputs, given_depth_m=given, given_hour=hour), quick)
    assert found.county["mixing_depth_m"][0, 2] == pytest.approx(1100.0, abs=0.5)
    assert found.hourly["mixing_depth_m"][0, 5, -1] == pytest.approx(1900.0, abs=0.5)
    assert found.county["mixing_depth_m"][0, 5] < 1900.0
    assert found.county["theta_mixed_c"] == pytest.approx(free.county["theta_mixed_c"], abs=1e-9)
    same_day = found.county["contribution_g_kg"][0, 2] / free.county["contribution_g_kg"][0, 2]
    assert same_day == pytest.approx(free.county["mixing_depth_m"][0, 2] / 1100.0, rel=0.03)


def test_given_depths_by_county_win_over_those_of_all():
    import pandas as pd

    dates = np.array(["2031-07-20", "2031-07-21"], "datetime64[D]")
    table = pd.DataFrame(
        {
            "county_id": ["b", None, "zz"], "date": pd.to_datetime(["2031-07-21"] * 3),
            "mixing_depth_m": [900.0, 1500.0, 1.0], "hour": [15.0, np.nan, 12.0],
        }
    )  # fmt: skip
    depth, hour = given_depths(table, dates, ("a", "b"))
    assert np.isnan(depth[0]).all()
    assert depth[1].tolist() == [1500.0, 900.0]
    assert hour[1, 1] == 15.0
    assert np.isnan(hour[1, 0])


def test_a_world_with_the_same_water_is_the_real_one(make):
    """Run by the same code from the same mornings: nothing is left of the effect."""
    inputs = make.summer(days=4, wind=make.noisy(4, 20))
    settings = with_settings(Settings(), air_worlds=True)
    found = airmass.season(replace(inputs, water_without_crops_mm=inputs.water_mm.sum(axis=2)), settings).county
    assert found["effect_of_crops_c"] == pytest.approx(np.zeros((4, 20)), abs=2e-3)
    assert found["depth_without_crops_m"] == pytest.approx(found["mixing_depth_m"], rel=1e-3)
    assert (found["effect_of_evaporation_c"] > 1.0).all()


def test_other_worlds_are_drier_deeper_and_warmer(make):
    inputs = make.summer(days=5, et_mm=5.0)
    less = inputs.water_mm.sum(axis=2) * 0.6
    found = airmass.season(
        replace(inputs, water_without_crops_mm=less), with_settings(Settings(), air_worlds=True)
    ).county
    real, crops, none = (
        (found["dew_point_mixed_c"], found["mixing_depth_m"], found["theta_mixed_c"]),
        (found["dew_point_without_crops_c"], found["depth_without_crops_m"], found["theta_without_crops_c"]),
        (
            found["dew_point_without_evaporation_c"],
            found["depth_without_evaporation_m"],
            found["theta_without_evaporation_c"],
        ),
    )
    for better, worse in ((real, crops), (crops, none)):
        assert (better[0] > worse[0]).all()
        assert (better[1] < worse[1]).all()
        assert (better[2] < worse[2]).all()
    assert found["effect_of_crops_c"] == pytest.approx(real[0] - crops[0])
    # The effect is not the contribution: it has the deeper air in it.
    assert (np.abs(found["effect_of_crops_c"] - found["contribution_c"]) > 0.1).any()


def test_water_without_crops_is_the_rests_own_depth_over_the_county(make):
    inputs = make.summer(days=1, et_mm=5.0, shares=(0.5, 0.3, 0.2))
    assert worlds.water_without_crops(inputs) == pytest.approx(np.full((1, 20), 5.0))
    represented = inputs.represented.copy()
    represented[3] = 1.0
    water = inputs.water_mm.copy()
    water[:, 3, 2] = 0.0
    found = worlds.water_without_crops(replace(inputs, represented=represented, water_mm=water))
    assert found[0, 3] == pytest.approx(5.0)  # the others' rest
    full = replace(inputs, represented=np.ones(20))
    assert np.isnan(worlds.water_without_crops(full)).all()


def test_two_sentences_name_the_other_worlds():
    assert set(worlds.WORLDS) == {"crops", "evaporation"}
    for sentence in worlds.WORLDS.values():
        assert sentence.startswith("the same days had ")


def test_ranges_hold_the_contribution_and_move_the_right_way(make):
    inputs = make.summer(days=4, wind=(2.0, 0.0))
    moved = inputs.water_mm * np.array([0.8, 0.8, 0.0])
    found = airmass.season(replace(inputs, transpiration_mm=moved), with_settings(Settings(), air_ranges=True))
    base = found.county["contribution_c"]
    assert set(found.ranges) == {ranges.EDGE, *ranges.VARIED}
    for name, (low, high) in found.ranges.items():
        assert (low <= base + 1e-9).all(), name
        assert (high >= base - 1e-9).all(), name
    depth = found.ranges["mixing depth 25 % less or more"]
    assert (depth[1] - depth[0] > 0.25 * base).all()
    water, crop = (found.ranges[name] for name in ("water use 15 % less or more", "crop coefficient 10 % less or more"))
    assert (crop[1] - crop[0] < water[1] - water[0]).all()
    assert (found.ranges["500 m deeper"][0] < base).all()
    assert (found.ranges["wind doubled"][0][1:] < base[1:]).any()


def test_crop_coefficient_needs_transpiration(make):
    found = airmass.season(make.summer(days=1), with_settings(Settings(), air_ranges=True))
    assert "crop coefficient 10 % less or more" not in found.ranges


def test_draws_are_the_same_for_the_same_seed_and_in_order(make, quick):
    inputs = make.summer(days=3)
    heard = []
    one = airmass.monte_carlo(inputs, quick, draws=24, seed=5, progress=heard.append)
    again = airmass.monte_carlo(inputs, quick, draws=24, seed=5)
    other = airmass.monte_carlo(inputs, quick, draws=24, seed=6)
    assert np.array_equal(one, again)
    assert not np.allclose(one, other)
    assert (np.diff(one, axis=0) > 0.0).all()
    base = airmass.season(inputs, quick).county["contribution_c"]
    assert (one[0] < base).all()
    assert (one[2] > base).all()
    assert heard[-1] == pytest.approx(1.0)
    assert "not the error of the method" in ranges.NOTE


def test_parts_of_the_observed_rise_sum_to_it(make, quick):
    inputs = make.summer(days=9)
    rng = np.random.default_rng(2)
    afternoon = inputs.dew_point_morning_c + 2.0 + rng.normal(0.0, 1.0, (9, 20))
    afternoon[4, 3] = np.nan
    results = airmass.season(replace(inputs, dew_point_afternoon_c=afternoon, u2_m_s=np.full((9, 20), 2.5)), quick)
    found = results.county
    parts = sum(found[f"rise_{name}_c"] for name in ("mixing", "same_day", "near_ground", "other"))
    assert parts == pytest.approx(found["rise_observed_c"], nan_ok=True)
    assert np.isnan(found["rise_observed_c"]).sum() == 1
    seen = np.isfinite(found["rise_observed_c"])
    assert (found["rise_mixing_c"][seen] < 0.0).all()  # drier air from above
    assert (found["rise_same_day_c"][seen] > 1.0).all()
    assert ((found["rise_near_ground_c"][seen] > 0.3) & (found["rise_near_ground_c"][seen] < 2.0)).all()
    error = found["estimate_error_c"]
    assert np.isnan(found["estimate_bias_c"][:3]).all()
    assert found["estimate_bias_c"][8, 5] == pytest.approx(error[1:8, 5].mean())


def test_nothing_is_estimated_from_an_unobserved_afternoon(make, quick):
    found = airmass.season(make.summer(days=1), quick).county
    for name in (
        "rise_observed_c",
        "rise_mixing_c",
        "rise_same_day_c",
        "rise_near_ground_c",
        "rise_other_c",
        "estimate_error_c",
    ):
        assert np.isnan(found[name]).all()


@pytest.mark.parametrize("latent", [300.0, 450.0])
def test_air_at_two_metres_is_one_or_two_degrees_moister_than_the_mixed_layer(latent):
    """Common practice, no source: dew point 1 to 2 K higher at a latent heat flux of 300 to 450 W m-2."""
    wind = np.array([1.5, 2.0, 3.0, 4.0])
    excess = rise.near_ground_excess(latent / 2.44e6, 100.0, wind, 1300.0, 30.0, 98.0)
    q = 0.016
    more = humidity.dew_point_from_specific_humidity(q + excess, 98.0) - humidity.dew_point_from_specific_humidity(
        q, 98.0
    )
    assert (more > 0.8).all()
    assert (more < 2.0).all()


def test_excess_near_the_ground_in_neutral_air_is_the_logarithmic_one():
    found = rise.near_ground_excess(1e-4, -0.61 * 303.15 * 1e-4 * 1004.7, 3.0, 1000.0, 30.0, 98.0)
    z = rise.LEVEL_M - rise.DISPLACEMENT_M
    friction = rise.KARMAN * 3.0 / np.log(z / rise.ROUGHNESS_M)
    density = 98_000.0 / (287.05 * 303.15)
    assert found == pytest.approx(1e-4 / (density * rise.KARMAN * friction) * np.log(100.0 / z), rel=1e-3)


def test_progress_runs_to_one(make):
    heard = []
    airmass.season(make.summer(days=3), Settings(), heard.append)
    assert heard == sorted(heard)
    assert heard[-1] == 1.0
