"""Speed of the soil water balance: 25,000 units, 20 days, one thread, every feature on.

Features: two stores with roots that grow, irrigation rule with windows and season limit, dated irrigation, residue,
drip and furrow with a part left dry, runoff by wetness, snow, need and days to stress; all 24 results of every day
are written, into arrays that are used again. Rainfed, sprinkler, furrow and (twice) drip are mixed in every block, and
every county has its own rain, so that no block is ever dry. Peers in the same run: all units in one block, and one
stand at a time.
Run: pytest tests/benchmarks/test_day_step.py --benchmark-enable -s. Times are printed, never asserted.
"""

import time
from types import SimpleNamespace

import numpy as np

from etflux.irrigation import Events, Rule
from etflux.soilwater import Forcing, Soil, closure, season, start_state
from etflux.soilwater.records import cut
from etflux.soilwater.season import BLOCK_UNITS

N_UNITS, N_COUNTIES, N_DAYS = 25_000, 1_000, 20


def everything_on():
    rng = np.random.default_rng(1)
    county = np.sort(rng.integers(0, N_COUNTIES, N_UNITS))
    regime = rng.integers(0, 5, N_UNITS)  # rainfed, sprinkler, furrow, drip, drip
    theta_wp = rng.uniform(0.05, 0.22, N_UNITS)
    theta_fc = theta_wp + rng.uniform(0.08, 0.18, N_UNITS)
    tew = 100.0 * (theta_fc - 0.5 * theta_wp)
    full = np.ones(N_UNITS)
    soil = Soil(
        available_water_mm_m=1000.0 * (theta_fc - theta_wp),
        theta_wp=theta_wp,
        evaporation_depth_m=0.1 * full,
        tew_mm=tew,
        rew_mm=0.4 * tew,
        profile_depth_m=2.0 * full,
        curve_number=rng.uniform(60.0, 90.0, N_UNITS),
        residue_share=rng.choice([0.1, 0.3, 0.6], N_UNITS),
        wetted_fraction=np.choose(regime, [1.0, 1.0, 0.5, 0.35, 0.35]),
        is_drip=(regime >= 3).astype(float),
        efficiency=0.8 * full,
        loss_to_air=(regime == 1).astype(float),
        p_table=0.55 * full,
        open_water=np.zeros(N_UNITS, bool),
    )
    grown = np.clip(np.linspace(0.0, 1.3, N_DAYS)[:, None] - rng.uniform(0.0, 0.3, N_UNITS), 0.0, 1.0)
    shape = (N_DAYS, N_COUNTIES)
    warming = np.linspace(0.0, 25.0, N_DAYS)[:, None]
    forcing = Forcing(
        eto_mm=rng.uniform(2.0, 8.0, shape)[:, county],
        rain_mm=(rng.exponential(12.0, shape) * (rng.random(shape) < 0.3))[:, county],
        t_mean_c=(rng.normal(0.0, 3.0, shape) + warming)[:, county],
        kcb=0.15 + grown,
        kc_max=1.2 + 0.05 * grown,
        ground_cover=0.95 * grown,
        root_depth_m=0.3 + 0.9 * grown,
        in_window=grown > 0.2,
        late=grown > 0.8,
        stress_window=grown > 0.1,
    )
    rule = Rule(
        start_below_share=0.2 * full,
        late_depletion_share=0.6 * full,
        fill_to_share=full,
        least_mm=5.0 * full,
        most_mm=np.where(regime == 0, 0.0, 25.0),
        shortest_interval_d=4.0 * full,
        rain_room_mm=5.0 * full,
        season_limit_mm=400.0 * full,
    )
    unit = np.arange(0, N_UNITS, 50)
    events = Events(np.sort(rng.integers(0, N_DAYS, len(unit))), unit, 20.0 * np.ones(len(unit)))
    start = start_state(soil, SimpleNamespace(start_water_share=0.7), forcing.root_depth_m[0])
    return soil, forcing, start, rule, events


def seconds(call, times=5):
    """Shortest of some runs."""
    taken = []
    for _ in range(times):
        begun = time.perf_counter()
        call()
        taken.append(time.perf_counter() - begun)
    return min(taken)


def test_season_of_25000_units(benchmark):
    soil, forcing, start, rule, events = everything_on()
    daily, end = season(soil, forcing, start, rule, events)
    assert np.abs(closure(daily, start, end)).max() < 1e-6
    assert daily["irrigation_mm"].sum() > 0.0
    assert daily["melt_mm"].sum() > 0.0

    def in_blocks():
        season(soil, forcing, start, rule, events, out=daily)

    benchmark(in_blocks)
    if not benchmark.enabled:
        return

    one_by_one = [slice(unit, unit + 1) for unit in range(40)]

    def one_stand_at_a_time():
        for part in one_by_one:
            season(cut(soil, part), cut(forcing, part), cut(start, part), cut(rule, part))

    unit_days = N_UNITS * N_DAYS
    blocked = seconds(in_blocks)
    unblocked = seconds(lambda: season(soil, forcing, start, rule, events, out=daily, block_units=N_UNITS))
    alone = seconds(one_stand_at_a_time) / (len(one_by_one) * N_DAYS)
    benchmark.extra_info.update(
        block_units=BLOCK_UNITS,
        million_unit_days_per_s=round(unit_days / blocked / 1e6, 2),
        ratio_to_one_block=round(unblocked / blocked, 2),
        ratio_to_one_stand_at_a_time=round(alone / (blocked / unit_days)),
    )
    print(benchmark.extra_info)
