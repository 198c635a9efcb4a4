"""The irrigation rule, dated depths, where lost water goes, and the need."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from etflux.irrigation import DEFAULTS, dated_events, rule_depth, rule_problems, rules_for_units
from etflux.soilwater import closure, season


def depth_of(make, dr=70.0, taw=100.0, raw=50.0, days_since=100.0, pumped=0.0, efficiency=1.0, in_window=True,
             late=False, **rule):  # fmt: skip
    return rule_depth(make.rule(**rule), dr, taw, raw, days_since, pumped, efficiency, in_window, late).item()


@pytest.mark.parametrize(
    ("case", "expected"),
    [
        ({}, 70.0),
        ({"dr": 49.9}, 0.0),  # readily available water left
        ({"dr": 50.0}, 50.0),  # used up: FAO-56 Example 38, "required when Dr >= RAW"
        ({"dr": 40.0, "start_below_share": 0.2}, 40.0),  # 20 % of RAW left
        ({"dr": 39.9, "start_below_share": 0.2}, 0.0),
        ({"dr": 55.0, "late": True}, 0.0),  # late: 60 % of TAW may be used
        ({"dr": 60.0, "late": True}, 60.0),
        ({"in_window": False}, 0.0),
        ({"fill_to_share": 0.9}, 60.0),
        ({"rain_room_mm": 15.0}, 55.0),
        ({"fill_to_share": 0.9, "rain_room_mm": 15.0}, 55.0),  # the larger of the two stays unfilled
        ({"most_mm": 25.0}, 25.0),
        ({"least_mm": 80.0}, 0.0),  # waits
        ({"least_mm": 70.0}, 70.0),
        ({"days_since": 3.0, "shortest_interval_d": 4.0}, 0.0),
        ({"days_since": 4.0, "shortest_interval_d": 4.0}, 70.0),
        ({"season_limit_mm": 100.0, "pumped": 60.0, "efficiency": 0.8}, 32.0),
        ({"season_limit_mm": 100.0, "pumped": 100.0}, 0.0),
        ({"season_limit_mm": 100.0, "pumped": 130.0}, 0.0),  # dated depths have gone beyond
        ({"most_mm": 0.0}, 0.0),  # no rule
        ({"dr": 0.0, "start_below_share": 1.0}, 0.0),
    ],
)
def test_depth_of_the_rule(make, case, expected):
    assert depth_of(make, **case) == pytest.approx(expected)


def test_unknown_depletion_gives_no_number(make):
    assert np.isnan(depth_of(make, dr=np.nan))


def dry_season(make, days=60, rule=None, **changes):
    soil_changes = {
        name: changes.pop(name) for name in ("efficiency", "loss_to_air", "profile_depth_m") if name in changes
    }
    soil = make.soil(1, **soil_changes)
    forcing = make.forcing(days, **{"kcb": 1.15, "ground_cover": 0.95, "in_window": True, **changes})
    start = make.start(soil, forcing)
    daily, end = season(soil, forcing, start, rule)
    assert closure(daily, start, end) == pytest.approx(0.0, abs=1e-9)
    return {name: values[:, 0] for name, values in daily.items()}


def test_the_rule_keeps_stress_away(make):
    daily = dry_season(make, rule=make.rule())
    assert daily["ks"].min() > 0.95
    assert daily["irrigation_mm"].sum() > 200.0
    assert daily["percolation_mm"].sum() == pytest.approx(0.25 * daily["irrigation_mm"].sum() * 0.8)  # the loss alone
    assert dry_season(make)["ks"].min() < 0.5


def test_the_rule_decides_on_yesterdays_p(make):
    daily = dry_season(make, rule=make.rule())
    day = int(np.argmax(daily["irrigation_mm"] > 0.0))
    p_before = daily["raw_mm"][day - 1] / daily["taw_mm"][day - 1]
    assert daily["dr_mm"][day - 1] >= p_before * daily["taw_mm"][day]
    assert daily["dr_mm"][day - 2] < daily["raw_mm"][day - 2]


def test_interval_and_capacity(make):
    daily = dry_season(make, rule=make.rule(shortest_interval_d=4.0, most_mm=15.0))
    days = np.flatnonzero(daily["irrigation_mm"])
    assert np.diff(days).min() == 4
    assert daily["irrigation_mm"][days] == pytest.approx(15.0 / 0.8)


def test_season_limit_is_gross_and_starts_again_after_the_window(make):
    open_days = (np.arange(120) < 50) | (np.arange(120) >= 70)
    daily = dry_season(make, 120, make.rule(season_limit_mm=100.0, most_mm=30.0), in_window=open_days)
    assert daily["irrigation_gross_mm"][:50].sum() == pytest.approx(100.0)
    assert daily["irrigation_gross_mm"][50:70].sum() == 0.0
    assert daily["irrigation_gross_mm"][70:].sum() == pytest.approx(100.0)


def test_sprinkler_loss_goes_into_the_air(make):
    daily = dry_season(make, 20, loss_to_air=True, efficiency=0.75, irrigation_gross_mm=np.eye(20)[5] * 20.0)
    assert daily["irrigation_gross_mm"][5] == pytest.approx(20.0)
    assert daily["sprinkler_loss_mm"][5] == pytest.approx(5.0)
    assert daily["irrigation_mm"][5] == pytest.approx(15.0)
    assert daily["percolation_mm"].sum() == 0.0


def test_surface_loss_percolates(make):
    daily = dry_season(make, 20, efficiency=0.75, irrigation_gross_mm=np.eye(20)[5] * 20.0, profile_depth_m=1.0)
    assert daily["irrigation_mm"][5] == pytest.approx(20.0)
    assert daily["sprinkler_loss_mm"].sum() == 0.0
    assert daily["percolation_mm"][5] == pytest.approx(5.0)
    assert daily["drainage_mm"][5] == pytest.approx(5.0)  # roots down to the profile's end: nothing below keeps it


def test_a_dated_depth_goes_before_the_rule(make):
    gross = np.zeros(60)
    gross[30] = 10.0
    daily = dry_season(make, rule=make.rule(shortest_interval_d=4.0), irrigation_gross_mm=gross)
    assert daily["irrigation_gross_mm"][30] == pytest.approx(10.0)
    assert daily["irrigation_gross_mm"][31:34].sum() == 0.0


def test_need_is_what_is_depleted_but_the_room(make):
    open_days = np.arange(30) >= 10
    daily = dry_season(make, 30, make.rule(most_mm=0.0, rain_room_mm=12.0), in_window=open_days)
    assert (daily["need_mm"][:10] == 0.0).all()
    assert daily["need_mm"][10:] == pytest.approx(np.maximum(daily["dr_mm"][10:] - 12.0, 0.0))
    assert daily["need_mm"][-1] > 0.0


UNITS = pd.DataFrame({
    "stand_id": ["b", "a", "a", "c"], "rule_id": ["r1", "r2", "r2", None], "irrigated": [True, True, True, False],
    "efficiency": [0.8, 0.5, 0.5, 1.0],
})  # fmt: skip


def test_rules_for_units():
    rules = pd.DataFrame({
        "rule_id": ["r1", "r2"], "start_below_pct": [20.0, np.nan], "most_mm": [30.0, np.nan],
        "capacity_mm_d": [np.nan, 8.0], "shortest_interval_d": [np.nan, 5.0],
    })  # fmt: skip
    rule = rules_for_units(UNITS, rules)
    assert rule.start_below_share == pytest.approx([0.2, 0.0, 0.0, 0.0])
    assert rule.late_depletion_share == pytest.approx(np.full(4, 0.6))
    assert rule.shortest_interval_d == pytest.approx([DEFAULTS["shortest_interval_d"], 5.0, 5.0, 4.0])
    assert rule.most_mm == pytest.approx([30.0, 8.0 * 5.0 * 0.5, 8.0 * 5.0 * 0.5, 0.0])  # what the system can bring
    assert np.isinf(rule.season_limit_mm).all()


def test_rules_for_units_without_any_rule():
    rule = rules_for_units(UNITS, pd.DataFrame({"rule_id": pd.Series([], dtype=object)}))
    assert (rule.most_mm == 0.0).all()


def test_dated_events_reach_every_part_of_a_stand():
    dates = np.arange("2031-06-01", "2031-06-11", dtype="datetime64[D]")
    events = pd.DataFrame({
        "stand_id": ["a", "b", "c", "a", "b"],
        "date": pd.to_datetime(["2031-06-09", "2031-06-02", "2031-07-01", "2031-06-02", "2031-06-02"]),
        "depth_gross_mm": [20.0, np.nan, 10.0, 8.0, 5.0], "depth_net_mm": [np.nan, 16.0, np.nan, np.nan, np.nan],
    })  # fmt: skip
    found = dated_events(UNITS, events, dates)
    rows = sorted(zip(found.day.tolist(), found.unit.tolist(), found.gross_mm.tolist(), strict=True))
    assert rows == [(1, 0, 5.0), (1, 0, 20.0), (1, 1, 8.0), (1, 2, 8.0), (8, 1, 20.0), (8, 2, 20.0)]
    assert np.all(np.diff(found.day) >= 0)


def test_two_depths_on_one_day_add_up(make):
    dates = np.arange("2031-06-01", "2031-06-11", dtype="datetime64[D]")
    events = pd.DataFrame({
        "stand_id": ["b", "b"], "date": pd.to_datetime(["2031-06-02"] * 2), "depth_gross_mm": [20.0, 5.0],
    })  # fmt: skip
    soil = make.soil(4)
    forcing = make.forcing(10, 4)
    daily, _ = season(soil, forcing, make.start(soil, forcing), events=dated_events(UNITS, events, dates))
    assert daily["irrigation_gross_mm"][1].tolist() == [25.0, 0.0, 0.0, 0.0]
    assert daily["irrigation_gross_mm"].sum() == 25.0


def test_no_dated_events():
    dates = np.arange("2031-06-01", "2031-06-11", dtype="datetime64[D]")
    empty = pd.DataFrame({"stand_id": pd.Series([], dtype=object), "date": pd.Series([], dtype="datetime64[ns]")})
    assert len(dated_events(UNITS, empty, dates).day) == 0


def test_rules_that_could_never_irrigate_are_found():
    rules = pd.DataFrame({
        "rule_id": ["fine", "least above most", "system too small"], "least_mm": [10.0, 30.0, 25.0],
        "most_mm": [30.0, 20.0, np.nan], "capacity_mm_d": [np.nan, np.nan, 6.0],
    })  # fmt: skip
    found = rule_problems(rules)
    assert [(finding.row, finding.code) for finding in found] == [
        (1, "irrigation-least-too-high"), (2, "irrigation-least-too-high"),
    ]  # fmt: skip
    assert "never irrigates" in found[0].sentence()


def test_irrigation_wets_only_the_methods_part(make):
    soil = make.soil(1, wetted_fraction=0.4, efficiency=1.0)
    forcing = make.forcing(1, eto_mm=0.0, irrigation_gross_mm=4.0)
    state = replace(make.start(soil, forcing), dr_mm=np.array([50.0]), de_mm=np.array([20.0]))
    _, end = season(soil, forcing, state)
    assert end.de_mm == pytest.approx(20.0 - 4.0 / 0.4)
    assert end.dr_mm == pytest.approx(46.0)
