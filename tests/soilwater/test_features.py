"""One feature at a time: residue, sod, seedlings, roots, snow, open water, the part left dry, the dry top."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from etflux.soilwater import closure, roots_to_check, season, soil_from_units, soil_problems, start_state

STANDARD_KC_MAX = 1.2  # eq. 72 at RHmin 45 %, u2 2 m/s, the climate of FAO-56 Tables 12 and 17


def ordinary_weather(days, seed=1, wet_share=0.3, mean_rain=9.0, eto=(3.0, 7.0)):
    rng = np.random.default_rng(seed)
    rain = rng.exponential(mean_rain, days) * (rng.random(days) < wet_share)
    return {"rain_mm": rain, "eto_mm": np.where(rain > 0.0, eto[0], rng.uniform(*eto, days))}


@pytest.mark.parametrize("seed", range(5))
def test_residue_takes_half_its_share_of_evaporation(make, seed):
    """FAO-56 ch. 11: 5 % less for every 10 % of the ground under mulch; bare soil, two months."""
    share = np.array([0.0, 0.1, 0.3, 0.6, 1.0])
    soil = make.soil(5, residue_share=share)
    forcing = make.forcing(61, 5, kcb=0.0, ground_cover=0.0, root_depth_m=0.3, **ordinary_weather(61, seed))
    daily, _ = season(soil, forcing, make.start(soil, forcing))
    total = daily["evaporation_mm"].sum(axis=0)
    assert total[0] > 60.0
    assert 100.0 * (1.0 - total / total[0]) == pytest.approx(50.0 * share, abs=2.0)


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize(
    ("kcb_mid", "kc_mid"),
    [(0.90, 0.95), (0.70, 0.75)],  # rotated (middle of 0.80-1.00 and 0.85-1.05), extensive: Tables 17 and 12
)
def test_sod_uses_the_single_coefficient_of_table_12(make, kcb_mid, kc_mid, seed):
    soil = make.soil(1)
    weather = ordinary_weather(150, seed)
    forcing = make.forcing(150, kcb=kcb_mid, kc_max=STANDARD_KC_MAX, ground_cover=0.90, root_depth_m=1.0, **weather)
    daily, _ = season(soil, forcing, make.start(soil, forcing))
    assert daily["et_potential_mm"].sum() / weather["eto_mm"].sum() == pytest.approx(kc_mid, abs=0.05)


def seedlings(make, roots, seed):
    soil = make.soil(1, available_water_mm_m=130.0, theta_wp=0.205, tew_mm=23.25, rew_mm=9.5, curve_number=78.0)
    weather = ordinary_weather(31, seed, wet_share=0.4, mean_rain=9.0, eto=(2.5, 5.5))
    forcing = make.forcing(31, kcb=0.15, kc_max=STANDARD_KC_MAX, ground_cover=0.02, root_depth_m=roots, **weather)
    return season(soil, forcing, make.start(soil, forcing))[0]


@pytest.mark.parametrize("seed", range(20))
def test_seedlings_in_a_wet_may_live(make, seed):
    """Silty clay loam of Table 19, Zr 0.30 m: evaporation from the top must not take the seedlings' water."""
    daily = seedlings(make, 0.30, seed)
    assert daily["ks"].min() > 0.0


def test_no_stress_without_plants(make):
    soil = make.soil(1)
    forcing = make.forcing(40, kcb=0.0, ground_cover=0.0, root_depth_m=0.15)
    daily, _ = season(soil, forcing, make.start(soil, forcing))
    assert daily["dr_mm"][-1] > 0.8 * daily["taw_mm"][-1]
    assert (daily["ks"] == 1.0).all()
    assert (daily["transpiration_mm"] == 0.0).all()


def test_evaporation_dries_the_top_below_wilting_point_and_plants_do_not(make):
    """TEW reaches half of wilting point (eq. 73): a bare shallow zone loses TAW + 500 theta_wp Ze, not more."""
    soil = make.soil(1, available_water_mm_m=120.0, theta_wp=0.2, tew_mm=22.0)
    shallow = make.forcing(200, kcb=0.0, ground_cover=0.0, root_depth_m=0.10)
    daily, _ = season(soil, shallow, make.start(soil, shallow))
    assert daily["dr_mm"][-1] == pytest.approx(12.0 + 10.0, abs=0.1)
    planted = make.forcing(200, kcb=1.15, ground_cover=0.99, root_depth_m=1.0)
    daily, _ = season(soil, planted, make.start(soil, planted))
    transpired = daily["transpiration_mm"].sum()
    assert transpired <= 120.0
    assert transpired > 110.0


def test_the_dry_top_does_not_count_against_plants(make):
    """The same depletion, once with the drying layer empty below wilting point: less stress."""
    soil = make.soil(1)
    forcing = make.forcing(1, kcb=0.5, ground_cover=0.3, root_depth_m=0.5)
    state = make.start(soil, forcing)
    both = [
        season(soil, forcing, replace(state, dr_mm=np.array([60.0]), de_mm=np.array([de])))[0]["ks"][0, 0]
        for de in (16.0, 23.0)
    ]
    few = 0.7
    taw = 80.0
    p = 0.55 + 0.04 * (5.0 - 0.5 * 5.0)  # no evaporation with the layer empty
    assert both[1] == pytest.approx((taw - (60.0 - few * (23.0 - 16.0))) / (taw * (1.0 - p)))
    assert both[0] < both[1]


def test_roots_take_over_what_the_soil_below_lacks(make):
    soil = make.soil(1)
    forcing = make.forcing(3, eto_mm=0.0, root_depth_m=np.array([0.5, 1.0, 1.5]))
    state = replace(make.start(soil, forcing), dr_mm=np.array([10.0]), ds_mm=np.array([90.0]), de_mm=np.array([0.0]))
    daily, _ = season(soil, forcing, state)
    assert daily["dr_mm"][:, 0] == pytest.approx([10.0, 40.0, 70.0])
    assert daily["ds_mm"][:, 0] == pytest.approx([90.0, 60.0, 30.0])


def test_percolation_fills_the_soil_below_before_it_drains(make):
    soil = make.soil(1)
    forcing = make.forcing(2, eto_mm=0.0, rain_mm=np.array([30.0, 30.0]))
    state = replace(make.start(soil, forcing), dr_mm=np.array([10.0]), ds_mm=np.array([25.0]))
    daily, _ = season(replace(soil, curve_number=np.array([20.0])), forcing, state)
    assert daily["percolation_mm"][:, 0] == pytest.approx([20.0, 30.0])
    assert daily["ds_mm"][:, 0] == pytest.approx([5.0, 0.0])
    assert daily["drainage_mm"][:, 0] == pytest.approx([0.0, 25.0])


def test_roots_that_shrink_leave_their_depletion_below(make):
    """Season end: the shallow zone keeps its share, or what evaporation took (few De), at most its own TAW."""
    soil = make.soil(3)
    forcing = make.forcing(1, 3, eto_mm=0.0, root_depth_m=0.3)
    state = replace(
        make.start(soil, forcing),
        root_depth_m=np.full(3, 1.2),
        dr_mm=np.array([80.0, 40.0, 195.0]),
        ds_mm=np.full(3, 5.0),
        de_mm=np.array([0.0, 20.0, 0.0]),
        few=np.full(3, 0.75),
    )
    daily, _ = season(soil, forcing, state)
    assert daily["dr_mm"][0] == pytest.approx([20.0, 15.0, 48.0])
    assert daily["dr_mm"][0] + daily["ds_mm"][0] == pytest.approx([85.0, 45.0, 200.0])


def test_shrinking_never_takes_water_from_below(make):
    """few De may be above Dr after the canopy has opened: then nothing moves."""
    soil = make.soil(1)
    forcing = make.forcing(1, eto_mm=0.0, root_depth_m=0.3)
    state = replace(
        make.start(soil, forcing), root_depth_m=np.array([1.2]), dr_mm=np.array([8.0]), de_mm=np.array([20.0])
    )
    daily, _ = season(soil, forcing, state)
    assert daily["dr_mm"][0, 0] == pytest.approx(8.0)
    assert daily["ds_mm"][0, 0] == pytest.approx(0.0)


def test_snow_is_held_and_melts_by_degrees(make):
    """Held below 0 degC, 4 mm per degree and day above (common practice, no source)."""
    soil = make.soil(1, curve_number=20.0)
    forcing = make.forcing(
        5,
        eto_mm=0.0,
        kcb=0.0,
        rain_mm=np.array([12.0, 4.0, 0.0, 2.0, 0.0]),
        t_mean_c=np.array([-5.0, -0.1, 0.0, 2.0, 9.0]),
    )
    state = replace(make.start(soil, forcing), dr_mm=np.array([50.0]))
    daily, end = season(soil, forcing, state)
    assert daily["snow_mm"][:, 0] == pytest.approx([12.0, 16.0, 16.0, 8.0, 0.0])
    assert daily["melt_mm"][:, 0] == pytest.approx([0.0, 0.0, 0.0, 8.0, 8.0])
    assert daily["dr_mm"][:, 0] == pytest.approx([50.0, 50.0, 50.0, 40.0, 32.0])
    assert closure(daily, state, end) == pytest.approx(0.0, abs=1e-9)


def test_wet_soil_runs_off_more(make):
    soil = make.soil(1, curve_number=80.0)
    forcing = make.forcing(1, rain_mm=40.0)
    state = make.start(soil, forcing)
    runoff = [
        season(soil, forcing, replace(state, de_mm=np.array([de])))[0]["runoff_mm"][0, 0] for de in (0.0, 8.85, 20.0)
    ]
    assert runoff[0] > runoff[1] > runoff[2]
    s = 25400.0 / 80.0 - 254.0
    assert runoff[1] == pytest.approx((40.0 - 0.2 * s) ** 2 / (40.0 + 0.8 * s))  # half way: condition II


def test_the_part_left_dry_comes_back_with_the_next_rain(make):
    """Drip wets 0.35 of the ground; the rest keeps its depletion until rain wets all."""
    soil = make.soil(1, wetted_fraction=0.35, is_drip=True, efficiency=1.0)
    forcing = make.forcing(
        2, eto_mm=0.0, kcb=0.3, ground_cover=0.2, rain_mm=np.array([0.0, 3.0]), irrigation_gross_mm=np.array([7.0, 0.0])
    )
    state = replace(
        make.start(soil, forcing), dr_mm=np.array([60.0]), de_mm=np.array([22.0]), de_dry_mm=np.array([22.0])
    )
    daily, end = season(soil, forcing, state)
    assert daily["de_mm"][0, 0] == pytest.approx(22.0 - 7.0 / 0.35)
    assert daily["few"][0, 0] == pytest.approx((1.0 - 2.0 / 3.0 * 0.2) * 0.35)
    assert daily["de_mm"][1, 0] == pytest.approx(0.35 * 2.0 + 0.65 * 22.0 - 3.0)
    assert end.fw == pytest.approx(1.0)


def test_ground_left_dry_keeps_the_depletion_it_had(make):
    """After rain has wetted all, irrigation narrows the wet part: what is left outside is as wet as it was."""
    soil = make.soil(1, wetted_fraction=0.4, efficiency=1.0)
    forcing = make.forcing(1, eto_mm=0.0, irrigation_gross_mm=4.0)
    state = replace(make.start(soil, forcing), dr_mm=np.array([60.0]), de_mm=np.array([15.0]))
    _, end = season(soil, forcing, state)
    assert end.de_dry_mm == pytest.approx(15.0)
    assert end.de_mm == pytest.approx(5.0)


def test_open_water(make):
    soil = make.soil(2, open_water=np.array([True, False]), theta_wp=np.array([np.nan, 0.14]))
    roots = np.tile([0.0, 1.0], (30, 1))
    forcing = make.forcing(30, 2, kcb=1.05, root_depth_m=roots, **ordinary_weather(30))
    start = make.start(soil, forcing, share=0.5)
    daily, end = season(soil, forcing, start)
    assert daily["evaporation_mm"][:, 0] == pytest.approx(1.05 * forcing.eto_mm[:, 0])
    assert daily["et_mm"][:, 0] == pytest.approx(daily["capillary_rise_mm"][:, 0])
    assert daily["runoff_mm"][:, 0] == pytest.approx(forcing.rain_mm[:, 0])
    assert (daily["transpiration_mm"][:, 0] == 0.0).all()
    assert (daily["dr_mm"][:, 0] == 0.0).all()
    assert closure(daily, start, end) == pytest.approx([0.0, 0.0], abs=1e-9)


def test_start_share_holds_for_the_whole_profile(make):
    soil = make.soil(2)
    state = start_state(soil, SimpleNamespace(start_water_share=0.7), np.array([0.3, 1.0]))
    assert state.dr_mm == pytest.approx([0.3 * 48.0, 0.3 * 160.0])
    assert state.dr_mm + state.ds_mm == pytest.approx(np.full(2, 0.3 * 320.0))
    assert state.de_mm == pytest.approx([14.4, 23.0])  # min(TEW, that depletion)


def test_days_to_stress(make):
    """Without rain the count falls by one a day and reaches 0 when Ks does begin to fall; blank outside its window."""
    soil = make.soil(1)
    window = np.arange(40) >= 5
    forcing = make.forcing(40, kcb=1.15, kc_max=1.2, ground_cover=0.99, stress_window=window)
    daily, _ = season(soil, forcing, make.start(soil, forcing))
    days, ks = daily["days_to_stress"][:, 0], daily["ks"][:, 0]
    assert np.isnan(days[:5]).all()
    assert not np.isnan(days[5:]).any()
    first = int(np.argmax(ks < 1.0))
    assert 5 < first < 30
    assert days[first - 1] == 0.0
    assert days[first - 2] > 0.0
    assert np.diff(days[8 : first - 1]) == pytest.approx(-1.0, abs=0.1)


def test_days_to_stress_is_blank_until_three_days_are_known(make):
    soil = make.soil(1)
    forcing = make.forcing(4)
    daily, _ = season(soil, forcing, make.start(soil, forcing))
    assert np.isnan(daily["days_to_stress"][:, 0]).tolist() == [True, True, False, False]


def test_roots_to_check():
    ks = np.ones((30, 4))
    ks[5:15, 0] = 0.7  # ten days
    ks[5:14, 1] = 0.7  # nine
    ks[5:15, 2:] = 0.7
    found = roots_to_check(ks, [True, True, False, True], [True, True, True, False], 0.8)
    assert found.tolist() == [True, False, False, False]
    assert roots_to_check(ks[:5], [True] * 4, [True] * 4, 0.8).tolist() == [False] * 4


def test_soil_from_units():
    import pandas as pd

    units = pd.DataFrame({
        "theta_fc": [0.29, 0.29], "theta_wp": [0.15, 0.15], "available_water_mm_m": [np.nan, 200.0],
        "evaporation_depth_m": 0.1, "tew_mm": 21.5, "rew_mm": 9.5, "root_max_m": [1.7, 2.4], "curve_number": 78.0,
        "residue_share": 0.3, "fw_method": [1.0, 0.35], "is_drip": [False, True], "efficiency": 0.8,
        "water_regime": ["sprinkler", "drip"], "depletion_fraction": 0.55, "habit": ["annual", "water"],
    })  # fmt: skip
    soil = soil_from_units(units, SimpleNamespace(profile_depth_m=2.0, melt_factor_mm=3.0, surface_root_uptake=True))
    assert soil.available_water_mm_m == pytest.approx([140.0, 200.0])  # the survey's wins
    assert soil.profile_depth_m == pytest.approx([2.0, 2.4])  # never above the roots' end
    assert soil.loss_to_air.tolist() == [True, False]
    assert soil.open_water.tolist() == [False, True]
    assert soil.melt_factor_mm == 3.0
    assert soil.surface_uptake


@pytest.mark.parametrize("seed", range(3))
def test_roots_in_the_drying_layer_leave_less_to_evaporate_and_close_the_balance(make, seed):
    """Tew of FAO-56 eq. 77: young plants with shallow roots; without plants nothing changes."""
    weather = ordinary_weather(90, seed)
    found = {}
    for kcb in (0.0, 0.7):
        forcing = make.forcing(90, kcb=kcb, ground_cover=0.4 if kcb else 0.0, root_depth_m=0.4, **weather)
        for uptake in (False, True):
            soil = replace(make.soil(1), surface_uptake=uptake)
            start = make.start(soil, forcing)
            daily, end = season(soil, forcing, start)
            assert np.abs(closure(daily, start, end)).max() < 1e-9
            assert (daily["de_mm"] <= soil.tew_mm + 1e-9).all()
            found[kcb, uptake] = daily["evaporation_mm"].sum()
    assert found[0.0, True] == found[0.0, False]
    assert 0.6 * found[0.7, False] < found[0.7, True] < 0.97 * found[0.7, False]


def test_soil_problems_are_found():
    import pandas as pd

    soils = pd.DataFrame({
        "soil_id": ["good", "swapped", "wet"], "theta_fc": [0.25, 0.10, 0.20], "theta_wp": [0.12, 0.25, 0.10],
        "rew_mm": [9.0, 1.0, 15.5], "evaporation_depth_m": [0.1, np.nan, 0.1],
    })  # fmt: skip
    found = soil_problems(soils)
    assert [(finding.code, finding.row, finding.value) for finding in found] == [
        ("wilting-point-not-below-field-capacity", 1, 0.25),
        ("rew-not-below-tew", 1, 1.0),
        ("rew-not-below-tew", 2, 15.5),
    ]
    assert "soil wet" in found[2].sentence()
    assert all(finding.severity == "error" for finding in found)
