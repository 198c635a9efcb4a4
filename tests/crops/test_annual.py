"""Annual crops through the season: curve, climate, frost, harvest, replant, thirds; on weather easy to count."""

import numpy as np
import pytest

from etflux import canopy
from etflux.crops import Stage
from etflux.variables import flag_bits

BITS = flag_bits("provisional")
PLANTED = "2031-05-01"


def weather_with(make, name, value, dates, base, **changes):
    """A record with one quantity changed on some dates."""
    record = make.record(**changes)
    values = np.full(len(record.dates), float(base))
    for date in np.atleast_1d(dates):
        values[make.day(record, date)] = value
    return make.record(**{**changes, name: values})


def mid_season(grown):
    """Days from full cover to late season, the season of a corn stand."""
    at = grown.canopy.marks
    return slice(int(at["full_cover"][0]), int(at["late"][0]))


# --- an oracle ---


def slow_kcb(grown, unit, row):
    """FAO-56 eqs. 66 and 70 for one unit, day by day, from its marks; no frost, nothing observed."""
    at = {name: days[unit] for name, days in grown.canopy.marks.items() if days.ndim == 1}
    u2, rh = (grown.record.values[name][:, row["station_index"]] for name in ("u2_m_s", "rh_min_pct"))

    def adjusted(table, first, last):
        days = [day for day in range(len(u2)) if first <= day < last]
        if table < 0.45:
            return table
        wind = min(max(np.mean(u2[days]), 1.0), 6.0)
        dry = min(max(np.mean(rh[days]), 20.0), 80.0)
        return table + (0.04 * (wind - 2.0) - 0.004 * (dry - 45.0)) * (row["height_max_m"] / 3.0) ** 0.3

    mid = adjusted(row["kcb_mid"], at["full_cover"], at["late"])
    end = adjusted(row["kcb_end"], at["late"], at["maturity"])
    found = []
    for day in range(len(u2)):
        if not at["emergence"] <= day < at["harvest"]:
            kcb = 0.0
        elif day < at["cover10"]:
            kcb = row["kcb_ini"]
        elif day < at["full_cover"]:
            kcb = row["kcb_ini"] + (day - at["cover10"]) / (at["full_cover"] - at["cover10"]) * (mid - row["kcb_ini"])
        elif day < at["late"]:
            kcb = mid
        elif day < at["maturity"]:
            kcb = mid + (day - at["late"]) / (at["maturity"] - at["late"]) * (end - mid)
        else:
            kcb = end + min((day - at["maturity"]) / 14.0, 1.0) * (row["kcb_end_dry"] - end)
        found.append(kcb)
    return found


def test_curve_against_a_slow_transcription(make):
    rng = np.random.default_rng(3)
    record = make.record(u2_m_s=rng.uniform(0.5, 8.0, 365), rh_min_pct=rng.uniform(10.0, 90.0, 365))
    rows = [
        make.stand(f"A{k}", cover, planting_date=np.datetime64("2031-04-15") + int(rng.integers(0, 40)), area_km2=20.0,
                   hybrid_heat_units=float(rng.uniform(1200.0, 1700.0)) if cover == "corn" else np.nan)
        for k, cover in enumerate(["corn", "soybean"] * 8)
    ]  # fmt: skip
    grown = make.grow(make.case(*rows), record)
    for unit in range(len(grown.units)):
        slow = slow_kcb(grown, unit, grown.units.iloc[unit])
        assert grown.canopy.kcb[:, unit] == pytest.approx(slow, abs=1e-12), grown.units["cover_id"][unit]


def test_any_part_of_the_units_gives_the_same(make):
    rows = [
        make.stand("A", planting_date=PLANTED),
        make.stand("B", "hay_cut"),
        make.stand("C", "soybean", planting_date=PLANTED),
        make.stand("D", "grass_extensive"),
    ]
    seen = [
        {"stand_id": "B", "date": "2031-06-10", "observed": "cut", "observed_value": np.nan},
        {"stand_id": "C", "date": "2031-06-20", "observed": "canopy cover", "observed_value": 30.0},
    ]
    case = make.case(*rows, observations=seen)
    whole = make.grow(case)
    for unit in range(4):
        part = whole.units.iloc[[unit]].reset_index(drop=True)
        alone, _ = canopy.canopy(part, whole.record, case.settings, case.table("observations"))
        for name in ("stage", "kcb", "plant_height_m", "root_depth_m", "kc_max", "ground_cover", "provisional"):
            assert (getattr(alone, name)[:, 0] == getattr(whole.canopy, name)[:, unit]).all(), (name, unit)


# --- stages ---


def test_stages_follow_each_other(make):
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)))
    stage, at = grown.canopy.stage[:, 0], grown.canopy.marks
    for name, code in (
        ("planting", Stage.PLANTED), ("emergence", Stage.INITIAL), ("cover10", Stage.DEVELOPMENT),
        ("full_cover", Stage.MIDDLE), ("late", Stage.LATE), ("maturity", Stage.MATURE), ("harvest", Stage.BARE),
    ):  # fmt: skip
        day = int(at[name][0])
        assert (stage[day - 1], stage[day]) == (code - 1 if code else Stage.MATURE, code), name
    assert stage[0] == Stage.BARE


def test_nothing_transpires_before_emergence_or_after_harvest(make):
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)))
    at, kcb, fc = grown.canopy.marks, grown.canopy.kcb[:, 0], grown.canopy.ground_cover[:, 0]
    for quiet in (slice(0, int(at["emergence"][0])), slice(int(at["harvest"][0]), None)):
        assert (kcb[quiet] == 0.0).all()
        assert (fc[quiet] == 0.0).all()
    assert kcb[int(at["emergence"][0])] == 0.15


def test_corn_dries_from_half_at_black_layer_to_015_in_two_weeks(make):
    """FAO-56 Table 17, note 12: 0.50 at high grain moisture, 0.15 dried in the field."""
    grown = make.grow(make.case(make.stand(planting_date=PLANTED, harvest_date="2031-10-15")))
    ripe = int(grown.canopy.marks["maturity"][0])
    assert grown.canopy.kcb[ripe, 0] == pytest.approx(0.50)
    assert grown.canopy.kcb[ripe + 7, 0] == pytest.approx(0.325)
    assert grown.canopy.kcb[ripe + 14 : ripe + 20, 0] == pytest.approx(0.15)


@pytest.mark.parametrize("date", ["2031-08-20", "2031-09-06"])
def test_an_early_harvest_ends_the_curve_and_does_not_bend_it(make, date):
    """FAO-56 p. 125: the curve of a normal season, terminated early."""
    whole = make.grow(make.case(make.stand(planting_date=PLANTED)))
    early = make.grow(make.case(make.stand(planting_date=PLANTED, harvest_date=date)))
    day = make.day(whole.record, date)
    assert (early.canopy.kcb[:day, 0] == whole.canopy.kcb[:day, 0]).all()
    assert (early.canopy.kcb[day:, 0] == 0.0).all()
    assert (early.canopy.stage[day:, 0] == Stage.BARE).all()
    if date == "2031-08-20":
        assert np.isnan(early.canopy.marks["maturity"][0])  # it never came
    assert early.canopy.basis_of("harvest")[0] == "entered"


def test_an_observed_harvest_wins_over_the_planned_one(make):
    rows = [{"stand_id": "A", "date": "2031-09-20", "observed": "harvest"}]
    grown = make.grow(make.case(make.stand(planting_date=PLANTED, harvest_date="2031-10-15"), observations=rows))
    assert grown.canopy.marks["harvest"][0] == make.day(grown.record, "2031-09-20")


def test_planted_after_the_record_stays_bare(make):
    grown = make.grow(make.case(make.stand(planting_date="2032-03-01")))
    assert (grown.canopy.kcb == 0.0).all()
    assert (grown.canopy.stage == Stage.BARE).all()
    assert np.isnan(grown.canopy.days_after_planting).all()


def test_days_after_planting(make):
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)))
    day = make.day(grown.record, "2031-05-31")
    assert grown.canopy.days_after_planting[day, 0] == 30.0
    assert np.isnan(grown.canopy.days_after_planting[make.day(grown.record, PLANTED) - 1, 0])


# --- climate adjustment ---


def test_middle_coefficient_follows_its_own_stage_only(make):
    """Eq. 70 by hand at 4 m/s and 30 % from full cover to dent, 2 m/s and 45 % at all other times."""
    calm = make.grow(make.case(make.stand(planting_date=PLANTED)))
    middle = mid_season(calm)
    u2, rh = np.full(365, 2.0), np.full(365, 45.0)
    u2[middle], rh[middle] = 4.0, 30.0
    windy = make.grow(make.case(make.stand(planting_date=PLANTED)), make.record(u2_m_s=u2, rh_min_pct=rh))
    expected = 1.15 + (0.04 * 2.0 + 0.004 * 15.0) * (2.0 / 3.0) ** 0.3
    assert windy.canopy.kcb[middle, 0] == pytest.approx(expected)
    outside = make.record(u2_m_s=np.where(u2 == 4.0, 2.0, 6.0), rh_min_pct=45.0)
    other = make.grow(make.case(make.stand(planting_date=PLANTED)), outside)
    assert other.canopy.kcb[middle, 0] == pytest.approx(1.15)


def test_end_coefficient_is_adjusted_from_045_on(make):
    """Corn's 0.50 is, soybean's 0.30 is not."""
    rows = [make.stand("A", planting_date=PLANTED), make.stand("B", "soybean", planting_date=PLANTED)]
    grown = make.grow(make.case(*rows), make.record(u2_m_s=4.0))
    ripe = grown.canopy.marks["maturity"].astype(int)
    assert grown.canopy.kcb[ripe[0], 0] == pytest.approx(0.50 + 0.08 * (2.0 / 3.0) ** 0.3)
    assert grown.canopy.kcb[ripe[1], 1] == pytest.approx(0.30)


@pytest.mark.parametrize(("days", "adjusted"), [(9, False), (10, True)])
def test_table_value_until_ten_days_of_the_stage_are_on_record(make, days, adjusted):
    full_cover = 120 + 53
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), make.record(days=full_cover + days, u2_m_s=4.0))
    expected = 1.15 + (0.08 * (2.0 / 3.0) ** 0.3 if adjusted else 0.0)
    assert grown.canopy.kcb[-1, 0] == pytest.approx(expected)
    assert (grown.canopy.provisional[full_cover:, 0] & BITS["climate_adjustment"]).all()


def test_normals_stand_in_while_the_stage_is_young(make):
    """Three windy summers before: their mean of the stage's dates adjusts Kcb,mid from its first day."""
    years = 3 * 365
    calm = np.full(years + 175, 2.0)
    for year in range(3):
        calm[year * 365 + 170 : year * 365 + 225] = 4.0  # the stage is days 173 to 220
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), make.record("2028-01-01", len(calm), u2_m_s=calm))
    assert grown.canopy.kcb[-1, 0] == pytest.approx(1.15 + 0.08 * (2.0 / 3.0) ** 0.3, abs=0.003)
    assert grown.canopy.provisional[-1, 0] & BITS["climate_adjustment"]


def test_weather_after_the_harvest_is_not_the_stage_s(make):
    """Cut in mid-season; gales afterwards leave Kcb,mid as it was."""
    row = make.stand(planting_date=PLANTED, harvest_date="2031-07-15")
    gales = np.where(np.arange(365) >= 195, 6.0, 2.0)  # from 15 July
    grown = make.grow(make.case(row), make.record(u2_m_s=gales))
    assert grown.canopy.kcb[make.day(grown.record, "2031-07-10"), 0] == pytest.approx(1.15)


def test_own_covers_may_refuse_the_adjustment(make):
    """FAO-56 p. 136: local values need none."""
    from etflux.stands import packaged

    row = packaged("covers").set_index("cover_id").loc["corn"].to_dict() | {"cover_id": "ours", "adjust_climate": "no"}
    grown = make.grow(
        make.case(make.stand(cover_id="ours", planting_date=PLANTED), covers=[row]), make.record(u2_m_s=5.0)
    )
    assert grown.canopy.kcb.max() == pytest.approx(1.15)
    assert after(grown, "maturity") == 125.0  # an own cover counted as corn has corn's heat units


def after(grown, name):
    return grown.canopy.marks[name][0] - grown.canopy.marks["planting"][0]


# --- provisional days ---


def test_a_finished_season_has_no_provisional_day(make):
    rows = [make.stand("A", planting_date=PLANTED), make.stand("B", "soybean", planting_date=PLANTED)]
    assert not make.grow(make.case(*rows)).canopy.provisional.any()


@pytest.mark.parametrize(
    ("days", "bits_from"),
    [
        (130, {}),  # emerged: nothing can move
        (160, {"climate_adjustment": "cover10", "marks": "cover10"}),
        (190, {"climate_adjustment": "cover10"}),  # at full cover only the stage's mean is open
        (220, {}),  # the last day of the middle stage
        (230, {"climate_adjustment": "late", "marks": "late"}),
        (250, {}),
    ],
)
def test_a_season_cut_off_is_provisional_where_it_may_still_move(make, days, bits_from):
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), make.record(days=days, u2_m_s=3.0))
    for name in ("climate_adjustment", "marks"):
        found = np.flatnonzero(grown.canopy.provisional[:, 0] & BITS[name])
        if name in bits_from:
            assert found[0] == grown.canopy.marks[bits_from[name]][0]
            assert found[-1] == days - 1
        else:
            assert not len(found), name


def test_provisional_days_are_those_that_a_longer_record_moves(make):
    """Weather that keeps changing: a day that differs between two lengths of record was marked in the shorter one."""
    rng = np.random.default_rng(11)
    weather = {"u2_m_s": rng.uniform(1.0, 5.0, 365), "t_max_c": rng.uniform(22.0, 34.0, 365)}
    rows = [make.stand("A", planting_date=PLANTED), make.stand("B", "soybean", planting_date=PLANTED)]
    rows += [make.stand("C", "grass_rotated")]
    whole = make.grow(make.case(*rows), make.record(**weather)).canopy.kcb
    for days in (130, 165, 190, 210, 235, 250, 290):
        part = make.record(days=days, **{name: values[:days] for name, values in weather.items()})
        grown = make.grow(make.case(*rows), part)
        moved = np.abs(grown.canopy.kcb - whole[:days]) > 1e-12
        assert not (moved & (grown.canopy.provisional == 0)).any(), days


# --- frost ---


def test_frost_kills_from_mid_season_on(make):
    record = weather_with(make, "t_min_c", -3.0, "2031-08-01", 16.0)
    base = make.grow(make.case(make.stand(planting_date=PLANTED)))
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), record)
    day = make.day(record, "2031-08-01")
    at = grown.canopy.marks
    assert at["killed"][0] == day
    assert at["harvest"][0] == day + 14
    assert np.isnan(at["late"][0])
    assert np.isnan(at["maturity"][0])
    assert grown.canopy.kcb[:day, 0] == pytest.approx(base.canopy.kcb[:day, 0])
    assert (grown.canopy.kcb[day : day + 14, 0] == 0.15).all()
    assert (grown.canopy.stage[day : day + 14, 0] == Stage.MATURE).all()
    assert grown.findings == []


def test_a_crop_killed_on_the_day_of_a_stage_did_not_reach_it(make):
    record = weather_with(make, "t_min_c", -3.0, "2031-08-09", 16.0)  # day 220, begin dent
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), record)
    assert grown.canopy.marks["killed"][0] == 220.0
    assert np.isnan(grown.canopy.marks["late"][0])


def test_a_killed_crop_is_not_provisional_any_more(make):
    """Killed while ripening, the record ends before the day on which it would have been ripe."""
    t_min = np.full(240, 16.0)
    t_min[230] = -3.0
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), make.record(days=240, t_min_c=t_min))
    bits = grown.canopy.provisional[:, 0]
    assert (bits[220:230] & BITS["marks"]).all()
    assert not bits[230:].any()


@pytest.mark.parametrize(
    ("cover", "limit", "killed"), [("corn", -2.2, True), ("corn", -2.1, False), ("soybean", -2.2, True)]
)
def test_frost_limit_is_28_f(make, cover, limit, killed):
    """-2.2 °C is 28 °F (common practice, no source)."""
    record = weather_with(make, "t_min_c", limit, "2031-08-10", 16.0)
    grown = make.grow(make.case(make.stand(cover_id=cover, planting_date=PLANTED)), record)
    assert np.isfinite(grown.canopy.marks["killed"][0]) == killed


def test_frost_before_full_cover_asks_for_a_look_and_kills_nothing(make):
    record = weather_with(make, "t_min_c", -3.0, "2031-05-25", 16.0)
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), record)
    (finding,) = grown.findings
    assert (finding.code, finding.table, finding.row, finding.value) == ("frost-early", "stands", 0, "2031-05-25")
    assert "enter a replant" in finding.sentence()
    assert np.isnan(grown.canopy.marks["killed"][0])


@pytest.mark.parametrize("date", ["2031-05-03", "2031-09-10"])
def test_frost_before_emergence_or_after_black_layer_changes_nothing(make, date):
    record = weather_with(make, "t_min_c", -3.0, date, 16.0)
    grown = make.grow(make.case(make.stand(planting_date=PLANTED, harvest_date="2031-10-15")), record)
    assert grown.findings == []
    assert np.isnan(grown.canopy.marks["killed"][0])


# --- replant ---


def test_replant_grows_the_first_crop_until_its_day(make):
    rows = [{"stand_id": "A", "date": "2031-06-05", "observed": "replant"}]
    grown = make.grow(make.case(make.stand(planting_date=PLANTED), observations=rows))
    first = make.grow(make.case(make.stand(planting_date=PLANTED)))
    second = make.grow(make.case(make.stand(planting_date="2031-06-05")))
    day = make.day(grown.record, "2031-06-05")
    for name in ("kcb", "stage", "plant_height_m", "root_depth_m", "ground_cover"):
        found = getattr(grown.canopy, name)[:, 0]
        assert (found[:day] == getattr(first.canopy, name)[:day, 0]).all(), name
        assert (found[day:] == getattr(second.canopy, name)[day:, 0]).all(), name
    assert grown.canopy.marks["planting"][0] == day
    assert grown.canopy.marks["maturity"][0] == second.canopy.marks["maturity"][0]
    assert grown.canopy.basis_of("planting")[0] == "replanted"


def test_stages_seen_before_a_replant_belong_to_the_first_crop(make):
    rows = [
        {"stand_id": "A", "date": "2031-05-12", "observed": "emergence"},
        {"stand_id": "A", "date": "2031-06-05", "observed": "replant"},
        {"stand_id": "A", "date": "2031-06-20", "observed": "emergence"},
    ]
    grown = make.grow(make.case(make.stand(planting_date=PLANTED), observations=rows))
    stage = grown.canopy.stage[:, 0]
    for date, code in (("2031-05-11", 1), ("2031-05-12", 2), ("2031-06-05", 1), ("2031-06-19", 1), ("2031-06-20", 2)):
        assert stage[make.day(grown.record, date)] == code, date


# --- planting spread ---


def test_thirds_are_planted_on_their_own_days(make):
    dates = {
        f"planting_date_{part}": f"2031-05-{day}" for part, day in (("early", "01"), ("middle", "10"), ("late", "25"))
    }
    grown = make.grow(make.case(make.stand(area_km2=90.0, **dates)))
    assert list(grown.units["part"]) == ["early", "middle", "late"]
    assert list(grown.units["unit_id"]) == ["A.early", "A.middle", "A.late"]
    assert grown.units["area_km2"].to_numpy() == pytest.approx(30.0)
    assert list(grown.canopy.marks["planting"]) == [120.0, 129.0, 144.0]


def test_a_stage_seen_on_a_spread_stand_is_the_middle_third_s(make):
    dates = {
        f"planting_date_{part}": f"2031-05-{day}" for part, day in (("early", "01"), ("middle", "10"), ("late", "25"))
    }
    rows = [{"stand_id": "A", "date": "2031-05-20", "observed": "emergence"}]
    grown = make.grow(make.case(make.stand(**dates), observations=rows))
    assert grown.canopy.marks["emergence"] - grown.canopy.marks["planting"] == pytest.approx(10.0)


# --- height, roots, cover ---


def test_roots_and_height_grow_with_kcb_and_do_not_shrink_in_season(make):
    """FAO-56 Annex 8: half-way where Kcb is half-way, full from full cover on, the least after harvest."""
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)))
    roots, height, kcb = (getattr(grown.canopy, name)[:, 0] for name in ("root_depth_m", "plant_height_m", "kcb"))
    at = {
        name: int(days[0])
        for name, days in grown.canopy.marks.items()
        if name in ("emergence", "full_cover", "harvest")
    }
    season = slice(at["emergence"], at["harvest"])
    assert (np.diff(roots[season]) >= 0.0).all()
    assert (np.diff(height[season]) >= 0.0).all()
    growing = slice(at["emergence"], at["full_cover"])
    assert roots[growing] == pytest.approx(0.30 + 1.40 * (kcb[growing] - 0.15))
    assert height[growing] == pytest.approx(2.0 * kcb[growing] / 1.15)
    assert roots[at["full_cover"]] == pytest.approx(1.7)
    assert roots[at["harvest"]] == roots[0] == pytest.approx(0.30)
    assert height[at["harvest"]] == 0.0


def test_roots_reach_their_depth_when_the_climate_lowers_kcb(make):
    """Eq. 8-1 takes the adjusted Kcb,mid: calm and humid, 1.15 becomes less."""
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), make.record(u2_m_s=1.0, rh_min_pct=75.0))
    assert grown.canopy.kcb.max() < 1.05
    assert grown.canopy.root_depth_m.max() == pytest.approx(1.7)
    assert grown.canopy.plant_height_m.max() == pytest.approx(2.0)


def test_height_stays_below_the_greatest_where_kcb_ends_above_its_middle(make):
    from etflux.stands import packaged

    row = packaged("covers").set_index("cover_id").loc["corn"].to_dict() | {"cover_id": "ours", "kcb_end": 1.30}
    grown = make.grow(make.case(make.stand(cover_id="ours", planting_date=PLANTED), covers=[row]))
    assert grown.canopy.kcb.max() == pytest.approx(1.30)
    assert grown.canopy.plant_height_m.max() == pytest.approx(2.0)


def test_standing_dead_corn_keeps_half_of_its_cover_until_harvest(make):
    rows = [make.stand("A", planting_date=PLANTED, harvest_date="2031-10-20")]
    rows += [make.stand("B", "soybean", planting_date=PLANTED, harvest_date="2031-10-20")]
    grown = make.grow(make.case(*rows))
    corn, soybean = grown.canopy.ground_cover[:, 0], grown.canopy.ground_cover[:, 1]
    last = make.day(grown.record, "2031-10-19")
    assert corn[last] == pytest.approx(0.5 * corn.max())
    assert soybean[last] < 0.1 * soybean.max()
    assert corn[last + 1] == 0.0


def test_upper_limit_follows_the_day_s_wind(make):
    record = weather_with(make, "u2_m_s", 6.0, "2031-07-20", 2.0)
    grown = make.grow(make.case(make.stand(planting_date=PLANTED)), record)
    day = make.day(record, "2031-07-20")
    # 2 m high: 1.2 + 0.16 (2/3)^0.3; the day before Kcb + 0.05 is below 1.2
    assert grown.canopy.kc_max[day, 0] == pytest.approx(1.2 + 0.16 * (2.0 / 3.0) ** 0.3)
    assert grown.canopy.kc_max[day - 1, 0] == pytest.approx(max(1.2, grown.canopy.kcb[day - 1, 0] + 0.05))


# --- windows of the irrigation rule ---


def test_windows_of_the_rule(make):
    rules = [{"rule_id": "R", "from_stage": "V6", "to_stage": "begin dent"}, {"rule_id": "Q"}]
    rows = [
        make.stand("A", planting_date=PLANTED, water_regime="sprinkler", rule_id="R"),
        make.stand("B", planting_date=PLANTED, water_regime="sprinkler", rule_id="Q"),
        make.stand("C", planting_date=PLANTED),
    ]
    grown = make.grow(make.case(*rows, irrigation_rules=rules))
    windows = canopy.rule_windows(grown.units, grown.case.table("irrigation_rules"), grown.canopy.marks, 365)
    at = {name: int(days[0]) for name, days in grown.canopy.marks.items() if days.ndim == 1 and np.isfinite(days[0])}
    days = [np.flatnonzero(windows["in_window"][:, unit]) for unit in range(3)]
    assert (days[0][0], days[0][-1]) == (at["cover10"], at["late"] - 1)
    assert (days[1][0], days[1][-1]) == (at["v8"], at["maturity"] - 1)
    assert not len(days[2])
    late, stress = np.flatnonzero(windows["late"][:, 0]), np.flatnonzero(windows["stress_window"][:, 2])
    assert late[0] == at["late"]
    assert (stress[0], stress[-1]) == (at["cover10"], at["maturity"] - 1)


def test_a_killed_crop_gets_no_water(make):
    record = weather_with(make, "t_min_c", -3.0, "2031-08-01", 16.0)
    row = make.stand(planting_date=PLANTED, water_regime="sprinkler")
    grown = make.grow(make.case(row), record)
    windows = canopy.rule_windows(grown.units, grown.case.table("irrigation_rules"), grown.canopy.marks, 365)
    for name in ("in_window", "stress_window"):
        assert np.flatnonzero(windows[name][:, 0])[-1] == make.day(record, "2031-07-31"), name
