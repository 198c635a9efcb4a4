"""The fast day step against a slow transcription of FAO-56 for one stand; how independent, one_stand.py says."""

import importlib.util
import sys
from dataclasses import fields, replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from etflux.irrigation import Events, rules_for_units
from etflux.soilwater import day_step, season

STANDS, DAYS = 300, 200
FIRST_GAP, END_OF_GAP = 90, 100  # days on which every third stand's irrigation window is shut

NAMES = {
    "e": "evaporation_mm", "t": "transpiration_mm", "et": "et_mm", "etc": "et_potential_mm", "ke": "ke", "ks": "ks",
    "few": "few", "de": "de_mm", "dr": "dr_mm", "ds": "ds_mm", "snow": "snow_mm", "melt": "melt_mm",
    "runoff": "runoff_mm", "percolation": "percolation_mm", "drainage": "drainage_mm", "taw": "taw_mm",
    "raw": "raw_mm", "irrigation": "irrigation_mm", "gross": "irrigation_gross_mm",
    "sprinkler_loss": "sprinkler_loss_mm", "need": "need_mm", "days_to_stress": "days_to_stress",
}  # fmt: skip


def _slow():
    spec = importlib.util.spec_from_file_location("one_stand", Path(__file__).with_name("one_stand.py"))
    module = importlib.util.module_from_spec(spec)
    sys.modules["one_stand"] = module
    spec.loader.exec_module(module)
    return module


slow = _slow()


def _harder(soil, forcing, rule, rng):
    """Forcing, rule and the rule's table for the shared random season, made harder.

    More sprinkles, roots that also withdraw slowly, windows that open twice, rules with a system capacity, days without
    ETo, days to stress asked from the first day.
    """
    rain = np.where(rng.random((DAYS, STANDS)) < 0.2, 0.03 * forcing.rain_mm, forcing.rain_mm)
    withdrawal = np.clip(1.0 - 0.004 * (np.arange(DAYS)[:, None] - 110), 0.7, 1.0)
    roots = np.where(np.arange(STANDS) % 4 == 0, forcing.root_depth_m * withdrawal, forcing.root_depth_m)
    window = forcing.in_window.copy()
    window[FIRST_GAP:END_OF_GAP, ::3] = False
    asked = forcing.stress_window.copy()
    asked[:6, ::2] = True  # a record that begins in mid season
    eto = forcing.eto_mm.copy()
    eto[120:126, ::5] = 0.0  # no use at all: the mean of three days is 0
    rain[:3, ::5] = 0.0
    table = pd.DataFrame({
        "rule_id": [f"r{unit}" for unit in range(STANDS)],
        "start_below_pct": 100.0 * rule.start_below_share,
        "late_depletion_pct": 100.0 * rule.late_depletion_share,
        "fill_to_pct": 100.0 * rule.fill_to_share,
        "least_mm": rule.least_mm,
        "most_mm": rule.most_mm,
        "shortest_interval_d": rule.shortest_interval_d,
        "capacity_mm_d": rng.uniform(4.0, 25.0, STANDS),
        "rain_room_mm": rule.rain_room_mm,
        "season_limit_mm": rule.season_limit_mm,
    })  # fmt: skip
    units = table[["rule_id"]].assign(efficiency=soil.efficiency, irrigated=rule.most_mm > 0.0)
    forcing = replace(
        forcing, eto_mm=eto, rain_mm=rain, root_depth_m=roots, in_window=window, stress_window=asked
    )  # fmt: skip
    return forcing, rules_for_units(units, table), table


def _ground(soil, unit):
    return slow.Ground(
        theta_fc=float((soil.tew_mm / (1000.0 * soil.evaporation_depth_m) + 0.5 * soil.theta_wp)[unit]),
        theta_wp=float(soil.theta_wp[unit]),
        ze=float(soil.evaporation_depth_m[unit]),
        rew=float(soil.rew_mm[unit]),
        available_mm_m=float(soil.available_water_mm_m[unit]),
        p_table=float(soil.p_table[unit]),
        curve_number=float(soil.curve_number[unit]),
        residue=float(soil.residue_share[unit]),
        fw_method=float(soil.wetted_fraction[unit]),
        drip=bool(soil.is_drip[unit]),
        profile_depth=float(soil.profile_depth_m[unit]),
        uptake=soil.surface_uptake,
    )


def _scheme(row):
    return slow.Scheme(
        start_below=row.start_below_pct / 100.0,
        late_depletion=row.late_depletion_pct / 100.0,
        fill_to=row.fill_to_pct / 100.0,
        least=row.least_mm,
        most=row.most_mm,
        interval=row.shortest_interval_d,
        capacity=row.capacity_mm_d,
        room=row.rain_room_mm,
        limit=row.season_limit_mm,
    )


def _store(start, unit):
    return slow.Store(
        de=float(start.de_mm[unit]), dr=float(start.dr_mm[unit]), ds=float(start.ds_mm[unit]),
        zr=float(start.root_depth_m[unit]), fw=float(start.fw[unit]), de_dry=float(start.de_dry_mm[unit]),
        snow=float(start.snow_mm[unit]), few=float(start.few[unit]),
    )  # fmt: skip


def _march(unit, soil, forcing, start, table, dated):
    """All days of one stand, one after the other."""
    ground, scheme, store = _ground(soil, unit), _scheme(table.iloc[unit]), _store(start, unit)
    efficiency, to_air = float(soil.efficiency[unit]), bool(soil.loss_to_air[unit])
    columns = {
        field.name: np.broadcast_to(getattr(forcing, field.name), (DAYS, STANDS))[:, unit].tolist()
        for field in fields(forcing)
    }
    p, since, pumped, was_open, use, rows = ground.p_table, 1000.0, 0.0, False, [], []
    for day in range(DAYS):
        today = {name: values[day] for name, values in columns.items()}
        if was_open and not today["in_window"]:
            pumped = 0.0
        w = slow.Weather(
            eto=today["eto_mm"], precipitation=today["rain_mm"], t_mean=today["t_mean_c"], kcb=today["kcb"],
            kc_max=today["kc_max"], cover=today["ground_cover"], zr=today["root_depth_m"],
            rise=today["capillary_rise_mm"], melt_factor=soil.melt_factor_mm,
        )  # fmt: skip
        net = efficiency * float(dated[day, unit])
        if net == 0.0:
            dr, taw = slow.moved_roots(ground, store, w.zr).dr, ground.available_mm_m * w.zr
            net = slow.rule_net(
                scheme, dr, taw, p * taw, since, pumped, efficiency, today["in_window"], today["late"]
            )  # fmt: skip
        w.irrigation, gross = net, net / efficiency
        store, water = slow.one_day(ground, store, w)
        slow.drain(store, water, 0.0 if to_air else gross - net)
        use.append(water["e"] + water["t"])
        d = slow.for_plants(ground, store.dr, store.de, store.few)
        rows.append({
            **water, **vars(store), "et": use[-1], "gross": gross, "sprinkler_loss": gross - net if to_air else 0.0,
            "need": slow.need(store.dr, scheme.room, today["in_window"]),
            "days_to_stress": slow.days_to_stress(water["raw"], d, use, today["stress_window"]),
        })  # fmt: skip
        p, was_open = water["p"], today["in_window"]
        since = 1.0 if net > 0.0 else since + 1.0
        pumped += gross
    return rows


@pytest.fixture(scope="module", params=[False, True], ids=["", "roots in the drying layer"])
def inputs(make, request):
    soil, forcing, start, rule, events = make.random(20310727, n=STANDS, days=DAYS)
    rng = np.random.default_rng(20310728)
    forcing, rule, table = _harder(soil, forcing, rule, rng)
    start = make.start(soil, forcing, rng.uniform(0.0, 1.0, STANDS))
    # a wetted fraction between the method's and all, that an irrigation before any rain narrows
    wider = soil.wetted_fraction + rng.uniform(0.2, 1.0, STANDS) * (1.0 - soil.wetted_fraction)
    start = replace(start, fw=wider, de_dry_mm=rng.uniform(0.0, 1.0, STANDS) * soil.tew_mm)
    early = np.arange(0, STANDS, 5)
    events = Events(
        np.concatenate([np.ones_like(early), events.day]),
        np.concatenate([early, events.unit]),
        np.concatenate([np.full(len(early), 12.0), events.gross_mm]),
    )
    return replace(soil, surface_uptake=request.param), forcing, start, rule, events, table


@pytest.fixture(scope="module")
def dated(inputs):
    events, gross = inputs[4], np.zeros((DAYS, STANDS))
    for day, unit, depth in zip(events.day, events.unit, events.gross_mm, strict=True):
        gross[day, unit] += depth
    return gross


@pytest.fixture(scope="module")
def fast(inputs):
    soil, forcing, start, rule, events, _ = inputs
    return season(soil, forcing, start, rule, events)[0]


@pytest.fixture(scope="module")
def marched(inputs, dated):
    """(day, stand) arrays of the slow code, and which stands: open water has no soil to transcribe."""
    soil, forcing, start, _, _, table = inputs
    land = np.flatnonzero(~soil.open_water)
    rows = [_march(unit, soil, forcing, start, table, dated) for unit in land]
    return {short: np.array([[day[short] for day in days] for days in rows]).T for short in NAMES}, land


@pytest.mark.parametrize("short", NAMES)
def test_same_to_rounding(fast, marched, short):
    expected, land = marched[0][short], marched[1]
    found = fast[NAMES[short]][:, land]
    assert len(land) > 0.9 * STANDS
    assert np.array_equal(np.isnan(found), np.isnan(expected))
    apart = np.abs(np.nan_to_num(found) - np.nan_to_num(expected))
    if short == "days_to_stress":  # a quotient: 1e-9 mm at the day's use
        apart = apart * np.nan_to_num(np.maximum(marched[0]["et"], 0.01))
    day, stand = np.unravel_index(apart.argmax(), apart.shape)
    assert apart.max() < 1e-9, f"day {day}, stand {land[stand]}: {found[day, stand]} against {expected[day, stand]}"


def test_day_step_by_itself_is_the_season(inputs, dated, fast):
    soil, forcing, state, rule, _, _ = inputs
    spread = {field.name: np.broadcast_to(getattr(forcing, field.name), (DAYS, STANDS)) for field in fields(forcing)}
    spread["irrigation_gross_mm"] = dated
    for day in range(DAYS):
        state, fluxes = day_step(state, soil, type(forcing)(**{name: a[day] for name, a in spread.items()}), rule)
        for name, values in (vars(state) | vars(fluxes)).items():
            if name in fast:
                np.testing.assert_array_equal(np.broadcast_to(values, (STANDS,)), fast[name][day], err_msg=name)


def test_every_feature_was_met(inputs, dated, fast):
    """Nothing above would be worth much if the weather never snowed or the rule never spoke."""
    soil, forcing, start, rule, _, table = inputs
    land = ~soil.open_water
    gross, roots = fast["irrigation_gross_mm"], np.diff(forcing.root_depth_m, axis=0)
    by_rule = (gross > 0.0) & (dated == 0.0)
    water = forcing.rain_mm + fast["melt_mm"]
    after_gap = by_rule[END_OF_GAP:, ::3] & (gross[:FIRST_GAP, ::3].sum(axis=0) > 0.0)
    days_left = fast["days_to_stress"]
    counts = {
        "melt": fast["melt_mm"] > 0.0,
        "snow": fast["snow_mm"] > 0.0,
        "runoff": fast["runoff_mm"] > 0.0,
        "drainage": fast["drainage_mm"] > 0.0,
        "sprinkler loss": fast["sprinkler_loss_mm"] > 0.0,
        "need": fast["need_mm"] > 0.0,
        "by rule": by_rule,
        "by rule after a season's total was reset": after_gap,
        "by rule when late": by_rule & forcing.late,
        "by rule, at the system's capacity": by_rule & np.isclose(gross * soil.efficiency, rule.most_mm)
        & (rule.most_mm < table["most_mm"].to_numpy()),
        "by drip": by_rule & (soil.is_drip > 0.0),
        "by furrow": by_rule & (soil.is_drip == 0.0) & (soil.wetted_fraction < 1.0),
        "irrigation with 3 mm of rain": (gross > 0.0) & (forcing.rain_mm - fast["runoff_mm"] >= 3.0),
        "sprinkle": (water > 0.0) & (water < 0.2 * forcing.eto_mm),
        "roots deepen": roots > 0.0,
        "roots withdraw": roots < 0.0,
        "off season": (forcing.kcb == 0.0) & land,
        "residue": (soil.residue_share > 0.5) & (fast["evaporation_mm"] > 0.0),
        "stress": fast["ks"] < 1.0,
        "stress now": days_left == 0.0,
        "stress later": days_left > 0.0,
        "stress not asked": np.isnan(days_left) & land,
        "stress asked in the first two days": (forcing.stress_window & land)[:2],
        "no use for three days": (fast["et_mm"][2:] + fast["et_mm"][1:-1] + fast["et_mm"][:-2] == 0.0)
        & (days_left[2:] > 0.0),
    }  # fmt: skip
    seen = {name: int(where.sum()) for name, where in counts.items()}
    assert min(seen.values()) > 100, seen
    assert (dated > 0.0).sum() > 100
    narrowed = (dated[1] > 0.0) & (start.fw > soil.wetted_fraction) & (start.fw < 1.0) & (water[:2] == 0.0).all(axis=0)
    assert (narrowed & land).sum() > 20
