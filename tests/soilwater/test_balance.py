"""What must hold for every stand and season: the balance closes, stores and fluxes keep their bounds."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from etflux.soilwater import DAILY, closure, daily_closure, day_step, season
from etflux.soilwater.records import cut
from etflux.soilwater.season import STORES

MANY = settings(max_examples=8, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
ROUNDING = 1e-9


def day_of(forcing, first, last=None):
    part = first if last is None else slice(first, last)
    return type(forcing)(**{name: value[part] if np.ndim(value) else value for name, value in vars(forcing).items()})


@MANY
@given(seed=st.integers(0, 2**31))
def test_closure_of_a_thousand_random_stands(make, seed):
    soil, forcing, start, rule, events = make.random(seed)
    daily, end = season(soil, forcing, start, rule, events)
    assert np.abs(closure(daily, start, end)).max() < 1e-6
    assert np.abs(daily_closure(daily, start)).max() < 1e-6
    pumped = daily["irrigation_gross_mm"] - daily["irrigation_mm"] - daily["sprinkler_loss_mm"]
    assert np.abs(pumped).max() < 1e-9
    for feature in ("irrigation_mm", "melt_mm", "capillary_rise_mm", "runoff_mm", "drainage_mm", "sprinkler_loss_mm"):
        assert daily[feature].sum() > 0.0, f"the seasons must use {feature}"


@MANY
@given(seed=st.integers(0, 2**31))
def test_bounds_of_a_thousand_random_stands(make, seed):
    soil, forcing, start, rule, events = make.random(seed)
    daily, end = season(soil, forcing, start, rule, events)
    for name in DAILY:
        if name != "days_to_stress":
            assert daily[name].min() >= 0.0, name
            assert not np.isnan(daily[name]).any(), name
    land = ~soil.open_water
    daily = {name: values[:, land] for name, values in daily.items()}
    soil, eto, kcb = cut(soil, land), forcing.eto_mm[:, land], forcing.kcb[:, land]
    assert (daily["de_mm"] <= soil.tew_mm + ROUNDING).all()
    assert (daily["ks"] <= 1.0).all()
    assert (daily["few"] <= 1.0).all()
    assert (daily["transpiration_mm"] <= daily["ks"] * kcb * eto + ROUNDING).all()
    assert (daily["evaporation_mm"] <= daily["ke"] * eto + ROUNDING).all()
    assert (daily["ke"] + kcb <= forcing.kc_max[:, land] + ROUNDING).all()
    assert (daily["dr_mm"] <= daily["taw_mm"] + soil.below_wilting_mm + ROUNDING).all()
    assert (daily["runoff_mm"] <= daily["rain_stand_mm"] + daily["melt_mm"] + ROUNDING).all()
    assert (daily["raw_mm"] <= 0.8 * daily["taw_mm"] + ROUNDING).all()
    below = soil.available_water_mm_m * (soil.profile_depth_m - forcing.root_depth_m[:, land])
    # when roots shrink, what evaporation drew from below wilting point may pass to the lower store
    assert (daily["ds_mm"] <= below + soil.below_wilting_mm + ROUNDING).all()
    assert (end.de_dry_mm[land] <= soil.tew_mm + ROUNDING).all()
    assert (end.de_dry_mm[land] >= 0.0).all()


@MANY
@given(seed=st.integers(0, 2**31), block=st.integers(1, 300), day=st.integers(1, 59))
def test_blocks_and_stretches_change_nothing(make, seed, block, day):
    soil, forcing, start, rule, events = make.random(seed, n=200, days=60)
    daily, end = season(soil, forcing, start, rule, events)
    in_blocks, _ = season(soil, forcing, start, rule, events, block_units=block)
    first, between = season(soil, day_of(forcing, 0, day), start, rule, events_until(events, day))
    second, after = season(soil, day_of(forcing, day, 60), between, rule, events_from(events, day))
    for name in DAILY:
        assert np.array_equal(in_blocks[name], daily[name], equal_nan=True), name
        assert np.array_equal(np.concatenate([first[name], second[name]]), daily[name], equal_nan=True), name
    for name, values in vars(end).items():
        assert np.array_equal(getattr(after, name), values, equal_nan=True), name


def events_until(events, day):
    return type(events)(*(values[events.day < day] for values in (events.day, events.unit, events.gross_mm)))


def events_from(events, day):
    later = events.day >= day
    return type(events)(events.day[later] - day, events.unit[later], events.gross_mm[later])


def test_batch_axes_in_front(make):
    soil, forcing, start, rule, events = make.random(5, n=40, days=50)
    batch = np.stack([forcing.rain_mm, 0.5 * forcing.rain_mm, 0.0 * forcing.rain_mm], axis=1)
    spread = {name: value[:, None] if np.ndim(value) else value for name, value in vars(forcing).items()}
    daily, end = season(soil, type(forcing)(**{**spread, "rain_mm": batch}), start, rule, events)
    assert daily["et_mm"].shape == (50, 3, 40)
    for member in range(3):
        alone, alone_end = season(soil, replace(forcing, rain_mm=batch[:, member]), start, rule, events)
        for name in DAILY:
            assert np.array_equal(daily[name][:, member], alone[name], equal_nan=True), name
        assert np.array_equal(end.dr_mm[member], alone_end.dr_mm)


def test_arrays_to_fill_are_filled(make):
    soil, forcing, start, rule, events = make.random(6, n=30, days=20)
    daily, _ = season(soil, forcing, start, rule, events)
    out = {name: np.full_like(values, -1.0) for name, values in daily.items()}
    again, _ = season(soil, forcing, start, rule, events, out=out)
    for name in DAILY:
        assert again[name] is out[name]
        assert np.array_equal(out[name], daily[name], equal_nan=True)


def test_only_what_is_asked_for_comes_back(make):
    soil, forcing, start, rule, events = make.random(7, n=30, days=20)
    daily, _ = season(soil, forcing, start, rule, events, keep=("et_mm", "dr_mm"))
    assert set(daily) == {"et_mm", "dr_mm"}


def test_inputs_are_not_changed(make):
    soil, forcing, start, rule, events = make.random(8, n=50, days=30)
    records = (soil, forcing, start, rule, events)
    before = [{name: np.copy(value) for name, value in vars(record).items()} for record in records]
    season(soil, forcing, start, rule, events)
    for record, values in zip(records, before, strict=True):
        for name, value in values.items():
            assert np.array_equal(getattr(record, name), value, equal_nan=value.dtype.kind == "f"), name


def test_wrong_shapes_are_named(make):
    soil, forcing, start, rule, events = make.random(9, n=30, days=20)
    with pytest.raises(ValueError, match="rain_mm has the shape .* must have 20 days first and 30 units last"):
        season(soil, replace(forcing, rain_mm=forcing.rain_mm[:, :-1]), start, rule, events)


@pytest.mark.parametrize("name", ["rain_mm", "eto_mm", "t_mean_c", "kcb", "kc_max", "ground_cover", "root_depth_m"])
def test_a_gap_stops_its_unit_and_no_other(make, name):
    soil, forcing, start, rule, events = make.random(10, n=60, days=40)
    soil = replace(soil, open_water=np.arange(60) == 8)
    with_gap = np.copy(getattr(forcing, name))
    units = [3, 17] + ([8] if name in {"rain_mm", "eto_mm", "t_mean_c", "kcb"} else [])
    with_gap[12, units] = np.nan
    whole, _ = season(soil, forcing, start, rule, events)
    daily, end = season(soil, replace(forcing, **{name: with_gap}), start, rule, events)
    others = np.setdiff1d(np.arange(60), units)
    for quantity in DAILY:
        assert np.array_equal(daily[quantity][:12], whole[quantity][:12], equal_nan=True), quantity
        assert np.array_equal(daily[quantity][:, others], whole[quantity][:, others], equal_nan=True), quantity
        assert np.isnan(daily[quantity][12:, units]).all(), quantity
    assert np.isnan(closure(daily, start, end)[units]).all()
    assert np.abs(closure(daily, start, end)[others]).max() < 1e-6


def test_one_day_is_a_season_of_one_day(make):
    soil, forcing, start, rule, _ = make.random(11, n=50, days=3)
    state, fluxes = day_step(start, soil, day_of(forcing, 0), rule)
    daily, end = season(soil, day_of(forcing, 0, 1), start, rule)
    for name in DAILY:
        value = getattr(state if name in STORES else fluxes, name)
        assert np.array_equal(daily[name][0], value, equal_nan=True), name
    assert np.array_equal(end.dr_mm, state.dr_mm)
