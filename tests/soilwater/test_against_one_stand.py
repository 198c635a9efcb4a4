"""The fast day step against a slow transcription of FAO-56 for one stand, written without sight of it."""

import importlib.util
import sys
from dataclasses import fields
from pathlib import Path

import numpy as np
import pytest

from etflux.soilwater import season

STANDS, DAYS = 250, 240


def _slow():
    spec = importlib.util.spec_from_file_location("one_stand", Path(__file__).with_name("one_stand.py"))
    module = importlib.util.module_from_spec(spec)
    sys.modules["one_stand"] = module
    spec.loader.exec_module(module)
    return module


slow = _slow()


def _march(unit, soil, forcing, start, rule, events):
    """All days of one stand, one after the other."""
    ground = slow.Ground(
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
    )
    scheme = slow.Scheme(
        start_below=float(rule.start_below_share[unit]),
        late_depletion=float(rule.late_depletion_share[unit]),
        fill_to=float(rule.fill_to_share[unit]),
        least=float(rule.least_mm[unit]),
        most=float(rule.most_mm[unit]),
        interval=float(rule.shortest_interval_d[unit]),
        capacity=np.inf,
        room=float(rule.rain_room_mm[unit]),
        limit=float(rule.season_limit_mm[unit]),
    )
    efficiency, to_air = float(soil.efficiency[unit]), bool(soil.loss_to_air[unit])
    store = slow.Store(
        de=float(start.de_mm[unit]), dr=float(start.dr_mm[unit]), ds=float(start.ds_mm[unit]),
        zr=float(start.root_depth_m[unit]), fw=float(start.fw[unit]), de_dry=float(start.de_dry_mm[unit]),
        snow=float(start.snow_mm[unit]), few=float(start.few[unit]),
    )  # fmt: skip
    p, since, pumped, was_open, use = ground.p_table, 1000.0, 0.0, False, []
    rows = []
    names = [field.name for field in fields(forcing)]
    shape = (DAYS, len(soil.tew_mm))
    columns = {name: np.broadcast_to(getattr(forcing, name), shape)[:, unit].tolist() for name in names}
    for day in range(DAYS):

        def at(name, day=day):
            return columns[name][day]

        open_, late = bool(at("in_window")), bool(at("late"))
        if was_open and not open_:
            pumped = 0.0
        w = slow.Weather(
            eto=at("eto_mm"), precipitation=at("rain_mm"), t_mean=at("t_mean_c"), kcb=at("kcb"), kc_max=at("kc_max"),
            cover=at("ground_cover"), zr=at("root_depth_m"), rise=at("capillary_rise_mm"),
            melt_factor=soil.melt_factor_mm,
        )  # fmt: skip
        here = (events.day == day) & (events.unit == unit)
        net = efficiency * float(events.gross_mm[here].sum())
        if net == 0.0:
            moved = slow.moved_roots(ground, store, w.zr)
            taw = ground.available_mm_m * w.zr
            net = slow.rule_net(scheme, moved.dr, taw, p * taw, since, pumped, efficiency, open_, late)
        w.irrigation = net
        store, water = slow.one_day(ground, store, w)
        gross = net / efficiency
        water["gross"], water["sprinkler_loss"] = gross, (gross - net) if to_air else 0.0
        below = 0.0 if to_air else gross - net
        slow.drain(store, water, below)
        water["de"], water["dr"], water["ds"], water["snow"] = store.de, store.dr, store.ds, store.snow
        water["need"] = max(store.dr - scheme.room, 0.0) if open_ else 0.0
        use.append(water["e"] + water["t"])
        rows.append(water)
        p = water["p"]
        since = 1.0 if net > 0.0 else since + 1.0
        pumped += gross
        was_open = open_
    return rows


@pytest.fixture(scope="module")
def both(make):
    soil, forcing, start, rule, events = make.random(20310727, n=STANDS, days=DAYS)
    fast, _ = season(soil, forcing, start, rule, events)
    land = np.flatnonzero(~soil.open_water)
    return fast, {unit: _march(unit, soil, forcing, start, rule, events) for unit in land}


NAMES = {
    "e": "evaporation_mm", "t": "transpiration_mm", "ke": "ke", "ks": "ks", "few": "few", "de": "de_mm", "dr": "dr_mm",
    "ds": "ds_mm", "snow": "snow_mm", "melt": "melt_mm", "runoff": "runoff_mm", "percolation": "percolation_mm",
    "drainage": "drainage_mm", "taw": "taw_mm", "raw": "raw_mm", "gross": "irrigation_gross_mm",
    "sprinkler_loss": "sprinkler_loss_mm", "need": "need_mm",
}  # fmt: skip


@pytest.mark.parametrize("short", NAMES)
def test_same_to_rounding(both, short):
    fast, marched = both
    assert len(marched) > 0.9 * STANDS
    expected = np.array([[day[short] for day in rows] for rows in marched.values()]).T
    found = fast[NAMES[short]][:, list(marched)]
    worst = np.unravel_index(np.abs(found - expected).argmax(), expected.shape)
    assert np.abs(found - expected).max() < 1e-9, f"day {worst[0]}, stand {list(marched)[worst[1]]}"


def test_every_feature_was_met(both):
    """Nothing above would be worth much if the weather never snowed or the rule never spoke."""
    fast, _ = both
    for name in ("melt_mm", "runoff_mm", "drainage_mm", "sprinkler_loss_mm", "irrigation_gross_mm", "need_mm"):
        assert (fast[name] > 0.0).sum() > 100, name
    assert (fast["ks"] < 1.0).sum() > 1000
