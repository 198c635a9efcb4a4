"""Stands and weather for the soil water tests: one plain stand, and many random ones that use every feature."""

from types import SimpleNamespace

import numpy as np
import pytest

from etflux.irrigation import Events, Rule
from etflux.soilwater import Forcing, Soil, start_state


def plain_soil(n=1, **changes):
    """Silt loam, 160 mm/m, rainfed, no runoff to speak of, no residue; `changes` replace parameters."""
    values = {
        "available_water_mm_m": 160.0,
        "theta_wp": 0.14,
        "evaporation_depth_m": 0.10,
        "tew_mm": 23.0,
        "rew_mm": 9.0,
        "profile_depth_m": 2.0,
        "curve_number": 40.0,
        "residue_share": 0.0,
        "wetted_fraction": 1.0,
        "is_drip": False,
        "efficiency": 0.8,
        "loss_to_air": False,
        "p_table": 0.55,
        "open_water": False,
        **changes,
    }
    return Soil(**{name: np.broadcast_to(value, (n,)).copy() for name, value in values.items()})


def plain_forcing(days, n=1, **changes):
    """Full cover in dry summer weather; `changes` replace quantities, scalars or arrays of (day,) or (day, unit)."""
    values = {
        "eto_mm": 5.0,
        "rain_mm": 0.0,
        "t_mean_c": 22.0,
        "kcb": 1.1,
        "kc_max": 1.2,
        "ground_cover": 0.9,
        "root_depth_m": 1.0,
        **changes,
    }

    def spread(value):
        value = np.asarray(value)
        return np.broadcast_to(value[:, None] if value.ndim == 1 else value, (days, n)).copy()

    return Forcing(**{name: spread(value) for name, value in values.items()})


def plain_rule(n=1, **changes):
    """A rule that fills up when the readily available water is used; `changes` replace its columns."""
    values = {
        "start_below_share": 0.0,
        "late_depletion_share": 0.6,
        "fill_to_share": 1.0,
        "least_mm": 0.0,
        "most_mm": np.inf,
        "shortest_interval_d": 0.0,
        "rain_room_mm": 0.0,
        "season_limit_mm": np.inf,
        **changes,
    }
    return Rule(**{name: np.broadcast_to(np.asarray(value, float), (n,)).copy() for name, value in values.items()})


def started(soil, forcing, share=1.0):
    return start_state(soil, SimpleNamespace(start_water_share=share), np.asarray(forcing.root_depth_m)[0])


def random_season(seed, n=1000, days=240):
    """Random stands and weather: every soil and method, snow, roots that grow and shrink, off season, rules, events."""
    rng = np.random.default_rng(seed)
    theta_wp = rng.uniform(0.02, 0.24, n)
    theta_fc = theta_wp + rng.uniform(0.05, 0.20, n)
    depth = rng.uniform(0.08, 0.15, n)
    tew = 1000.0 * (theta_fc - 0.5 * theta_wp) * depth
    regime = rng.integers(0, 4, n)  # rainfed, sprinkler, furrow, drip
    roots_max = rng.uniform(0.2, 1.9, n)
    roots_min = np.minimum(rng.uniform(0.1, 0.4, n), roots_max)
    soil = Soil(
        available_water_mm_m=1000.0 * (theta_fc - theta_wp),
        theta_wp=theta_wp,
        evaporation_depth_m=depth,
        tew_mm=tew,
        rew_mm=tew * rng.uniform(0.2, 0.7, n),
        profile_depth_m=np.maximum(rng.choice([1.0, 2.0], n), roots_max),
        curve_number=rng.uniform(30.0, 100.0, n),
        residue_share=rng.uniform(0.0, 1.0, n) * rng.integers(0, 2, n),
        wetted_fraction=np.choose(regime, [1.0, 1.0, rng.uniform(0.3, 1.0, n), rng.uniform(0.3, 0.4, n)]),
        is_drip=(regime == 3).astype(float),
        efficiency=rng.uniform(0.5, 1.0, n),
        loss_to_air=regime == 1,
        p_table=rng.uniform(0.3, 0.7, n),
        open_water=rng.random(n) < 0.03,
    )
    day = np.arange(days)[:, None]
    start, full, late, end = (
        rng.uniform(lo * days, hi * days, n) for lo, hi in ((0.1, 0.2), (0.3, 0.5), (0.6, 0.7), (0.75, 0.9))
    )
    grown = np.clip((day - start) / (full - start), 0.0, 1.0)
    alive = (day >= start) & (day < end)
    perennial = rng.random(n) < 0.2
    green = np.where(perennial, 0.5 + 0.5 * grown, grown * alive)
    kcb = np.where(perennial | alive, 0.15 + green * rng.uniform(0.5, 1.05, n), 0.0)
    forcing = Forcing(
        eto_mm=rng.gamma(3.0, 1.5, (days, n)) * (rng.random((days, n)) > 0.01),
        rain_mm=rng.exponential(rng.uniform(3.0, 25.0, n), (days, n))
        * (rng.random((days, n)) < rng.uniform(0.05, 0.5, n)),
        t_mean_c=rng.normal(0.0, 6.0, (days, n)) + 22.0 * np.sin(np.pi * day / days),
        kcb=kcb,
        kc_max=np.maximum(rng.uniform(1.05, 1.3, n), kcb + 0.05),
        ground_cover=np.where(perennial, rng.uniform(0.3, 0.95, n), np.minimum(green, 0.99)),
        root_depth_m=np.where(perennial, roots_max, roots_min + (roots_max - roots_min) * grown * alive),
        capillary_rise_mm=rng.uniform(0.0, 1.0, n) * (rng.random((days, n)) < 0.1) * (rng.random(n) < 0.2),
        in_window=(day >= start) & (day < end),
        late=day >= late,
        stress_window=alive,
    )
    rule = Rule(
        start_below_share=rng.uniform(0.0, 0.6, n),
        late_depletion_share=rng.uniform(0.4, 0.7, n),
        fill_to_share=rng.uniform(0.7, 1.0, n),
        least_mm=rng.uniform(0.0, 20.0, n),
        most_mm=np.where(regime == 0, 0.0, rng.uniform(10.0, 80.0, n)),
        shortest_interval_d=rng.integers(0, 8, n).astype(float),
        rain_room_mm=rng.uniform(0.0, 15.0, n),
        season_limit_mm=rng.uniform(50.0, 600.0, n),
    )
    dated = rng.integers(0, n, n // 5)
    events = Events(np.sort(rng.integers(0, days, len(dated))), dated, rng.uniform(1.0, 120.0, len(dated)))
    return soil, forcing, started(soil, forcing, rng.uniform(0.0, 1.0)), rule, events


@pytest.fixture(scope="session")
def make():
    """Builders: make.soil, make.forcing, make.rule, make.start, make.random."""
    return SimpleNamespace(soil=plain_soil, forcing=plain_forcing, rule=plain_rule, start=started, random=random_season)
