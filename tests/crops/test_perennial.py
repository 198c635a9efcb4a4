"""Sod, hay, trees, water and bare ground: green-up and end by freezes, cuts, covers that do not change."""

import numpy as np
import pytest

from etflux.crops import Stage
from etflux.variables import flag_bits

BITS = flag_bits("provisional")
SOUTH = [{"county_id": "C1", "area_km2": 1000.0, "latitude_deg": -33.0, "longitude_deg": -60.0}]


def freezing(make, *dates, first="2031-01-01", days=365, **changes):
    """Mild weather with a night of -5 °C on some dates."""
    t_min = np.full(days, 16.0)
    for date in dates:
        t_min[int((np.datetime64(date) - np.datetime64(first)).astype(int))] = -5.0
    return make.record(first, days, **{"t_min_c": t_min, **changes})


def date_of(grown, name, year=-1, unit=0):
    return grown.record.dates[0] + int(grown.canopy.marks[name][year, unit])


# --- green-up and end ---


def test_green_up_7_days_before_the_last_freeze_of_spring(make):
    """FAO-56 Table 11, note 4 (p. 107); the freezes before it do not count."""
    record = freezing(make, "2031-02-20", "2031-03-25", "2031-04-10", "2031-10-12", "2031-10-20")
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated")), record)
    assert date_of(grown, "greenup") == np.datetime64("2031-04-03")
    assert date_of(grown, "freeze") == np.datetime64("2031-10-12")
    assert date_of(grown, "end") == np.datetime64("2031-10-19")
    assert grown.canopy.basis_of("greenup")[0] == "freezes"


def test_minus_4_is_the_limit(make):
    base = freezing(make, "2031-03-20")
    t_min = base.values["t_min_c"][:, 0].copy()
    t_min[make.day(base, "2031-04-20")] = -3.9
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated")), make.record(t_min_c=t_min))
    assert date_of(grown, "greenup") == np.datetime64("2031-03-13")


def test_green_up_waits_for_ten_days_above_5_degrees(make):
    """Mean 2 °C until 20 April, then 12 °C: the 10-day mean passes 5 °C on the fourth warm day, 23 April."""
    warm_from = int((np.datetime64("2031-04-20") - np.datetime64("2031-01-01")).astype(int))
    mean = np.where(np.arange(365) < warm_from, 2.0, 12.0)
    t_min = np.where(np.arange(365) < 40, -6.0, mean - 5.0)
    record = make.record(t_max_c=mean + 5.0, t_min_c=t_min, t_mean_c=mean)
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated")), record)
    assert date_of(grown, "greenup") == np.datetime64("2031-04-23")


def test_entered_date_wins_and_only_in_its_year(make):
    record = freezing(make, "2031-04-10", "2031-11-01", "2032-04-05", days=2 * 365)
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated", greenup_date="2031-03-28")), record)
    greenups = grown.record.dates[0] + grown.canopy.marks["greenup"][1:, 0].astype(int)
    assert list(greenups) == [np.datetime64("2031-03-28"), np.datetime64("2032-03-29")]
    assert grown.canopy.basis_of("greenup")[0] == "freezes"  # of the last one


def test_record_that_starts_in_march_takes_the_latitude_s_mean_date(make):
    """42° N: day 63 + 4.5 x 7 = 94.5 after 1 January (common practice, no source), said to be a default."""
    record = freezing(make, "2031-04-20", first="2031-03-01", days=200)
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated")), record)
    assert date_of(grown, "greenup") == np.datetime64("2031-04-05")
    assert "default" in grown.canopy.basis_of("greenup")[0]
    assert not (grown.canopy.provisional & BITS["greenup"]).any()  # a default does not move


@pytest.mark.parametrize(("days", "moves"), [(110, True), (134, True), (136, False)])
def test_green_up_is_provisional_until_15_may(make, days, moves):
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated")), freezing(make, "2031-04-10", days=days))
    assert (grown.canopy.provisional[-1, 0] & BITS["greenup"] > 0) == moves


def test_southern_seasons_are_half_a_year_away(make):
    record = freezing(make, "2031-09-01", "2032-04-25", first="2031-07-01", days=366, latitude=-33.0)
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated"), counties=SOUTH), record)
    year = 1  # the season that starts in 2031
    assert date_of(grown, "greenup", year) == np.datetime64("2031-08-25")
    assert date_of(grown, "end", year) == np.datetime64("2032-05-02")
    new_year = make.day(record, "2032-01-01")
    assert (grown.canopy.stage[new_year - 3 : new_year + 3, 0] == Stage.MIDDLE).all()


def test_two_years_make_two_seasons(make):
    record = freezing(make, "2031-04-10", "2031-10-12", "2032-04-16", "2032-10-02", days=731)
    kcb = make.grow(make.case(make.stand(cover_id="grass_rotated")), record).canopy.kcb[:, 0]
    for date, value in (
        ("2031-03-01", 0.30), ("2031-07-01", 0.90), ("2031-12-24", 0.30), ("2032-07-01", 0.90), ("2032-12-24", 0.30),
    ):  # fmt: skip
        assert kcb[make.day(record, date)] == pytest.approx(value), date


# --- curve ---


def test_grass_curve(make):
    """10 and 20 days to full cover (Table 11), Table 17's 0.30, 0.90 and 0.80, dormant 0.30."""
    record = freezing(make, "2031-04-10", "2031-10-12")
    grown = make.grow(make.case(make.stand(cover_id="grass_rotated")), record)
    kcb, stage, start = grown.canopy.kcb[:, 0], grown.canopy.stage[:, 0], make.day(record, "2031-04-03")
    assert kcb[start - 1 : start + 11] == pytest.approx(0.30)
    assert kcb[start + 20] == pytest.approx(0.60)
    assert kcb[start + 30] == pytest.approx(0.90)
    freeze = make.day(record, "2031-10-12")
    assert kcb[freeze] == pytest.approx(0.90)
    assert kcb[freeze + 6] == pytest.approx(0.90 - 0.10 * 6 / 7)
    assert kcb[freeze + 7] == pytest.approx(0.30)
    steps = [start - 1, start, start + 10, start + 30, freeze, freeze + 7]
    assert list(stage[steps]) == [
        Stage.DORMANT, Stage.INITIAL, Stage.DEVELOPMENT, Stage.MIDDLE, Stage.LATE, Stage.DORMANT,
    ]  # fmt: skip


def test_grass_is_adjusted_by_the_climate_of_its_own_season(make):
    """Wind 4 m/s from full cover to the freeze of 2031, 2 m/s else: 0.90 + 0.08 (0.22/3)^0.3, only that year."""
    u2 = np.full(731, 2.0)
    record = freezing(make, "2031-04-10", "2031-10-12", "2032-04-10", "2032-10-12", days=731)
    u2[make.day(record, "2031-05-03") : make.day(record, "2031-10-12")] = 4.0
    record = freezing(make, "2031-04-10", "2031-10-12", "2032-04-10", "2032-10-12", days=731, u2_m_s=u2)
    kcb = make.grow(make.case(make.stand(cover_id="grass_rotated")), record).canopy.kcb[:, 0]
    assert kcb[make.day(record, "2031-07-01")] == pytest.approx(0.90 + 0.08 * (0.22 / 3.0) ** 0.3)
    assert kcb[make.day(record, "2032-07-01")] == pytest.approx(0.90)


def test_sod_keeps_its_cover_and_roots_through_dormancy_and_cuts(make):
    rows = [{"stand_id": "A", "date": "2031-06-10", "observed": "cut"}]
    grown = make.grow(make.case(make.stand(cover_id="hay_cut"), observations=rows), freezing(make, "2031-04-10"))
    assert (grown.canopy.ground_cover == 0.90).all()
    assert (grown.canopy.root_depth_m == 2.0).all()


def test_woods_follow_table_11_and_keep_their_height(make):
    """Walnuts, p. 108: 20/10/130/30 days; 0.40/1.05/0.60, after leaf drop 0.15 (pp. 140, 113)."""
    record = freezing(make, "2031-04-10", "2031-11-08")
    grown = make.grow(make.case(make.stand(cover_id="woods")), record)
    kcb, start = grown.canopy.kcb[:, 0], make.day(record, "2031-04-03")
    for days, value in ((-1, 0.15), (5, 0.40), (25, 0.725), (30, 1.05), (160, 1.05), (175, 0.825), (190, 0.60)):
        assert kcb[start + days] == pytest.approx(value), days
    assert kcb[make.day(record, "2031-11-20")] == pytest.approx(0.15)
    assert (grown.canopy.plant_height_m == 5.0).all()


def test_an_early_freeze_ends_the_woods_season_before_its_length(make):
    record = freezing(make, "2031-04-10", "2031-09-05")
    grown = make.grow(make.case(make.stand(cover_id="woods")), record)
    assert grown.canopy.stage[make.day(record, "2031-09-04"), 0] == Stage.MIDDLE
    assert grown.canopy.stage[make.day(record, "2031-09-13"), 0] == Stage.DORMANT


@pytest.mark.parametrize(
    ("cover", "kcb", "fc", "stage"),
    [("water", 1.05, None, Stage.MIDDLE), ("conifers", 0.95, 0.90, Stage.MIDDLE), ("bare", 0.0, 0.0, Stage.BARE)],
)
def test_covers_that_are_the_same_all_year(make, cover, kcb, fc, stage):
    grown = make.grow(make.case(make.stand(cover_id=cover)), freezing(make, "2031-04-10", "2031-10-12", u2_m_s=5.0))
    assert (grown.canopy.kcb == kcb).all()
    assert (grown.canopy.stage == stage).all()
    assert not grown.canopy.provisional.any()
    if fc is not None:
        assert (grown.canopy.ground_cover == fc).all()


# --- cuts ---


def test_cut_sets_kcb_and_height_back_and_regrowth_takes_25_days(make):
    """Alfalfa, other cutting cycles (p. 107): 5 days at 0.30, 20 days up to 1.15."""
    rows = [{"stand_id": "A", "date": "2031-06-10", "observed": "cut"}]
    record = freezing(make, "2031-04-10")
    grown = make.grow(make.case(make.stand(cover_id="hay_cut"), observations=rows), record)
    kcb, height, day = grown.canopy.kcb[:, 0], grown.canopy.plant_height_m[:, 0], make.day(record, "2031-06-10")
    assert kcb[day - 1] == pytest.approx(1.15)
    assert kcb[day : day + 6] == pytest.approx(0.30)
    assert kcb[day + 15] == pytest.approx(0.725)
    assert kcb[day + 25 :][:60] == pytest.approx(1.15)
    assert height[day - 1] == pytest.approx(0.70)
    assert height[day] == pytest.approx(0.70 * 0.30 / 1.15)
    assert height[day + 25] == pytest.approx(0.70)


def test_a_second_cut_during_regrowth_starts_it_anew(make):
    rows = [{"stand_id": "A", "date": date, "observed": "cut"} for date in ("2031-06-10", "2031-06-25")]
    record = freezing(make, "2031-04-10")
    kcb = make.grow(make.case(make.stand(cover_id="hay_cut"), observations=rows), record).canopy.kcb[:, 0]
    assert kcb[make.day(record, "2031-06-26")] == pytest.approx(0.30)
    assert kcb[make.day(record, "2031-07-10")] == pytest.approx(0.725)


def test_regrowth_is_a_setting(make):
    rows = [{"stand_id": "A", "date": "2031-06-10", "observed": "grazing"}]
    record = freezing(make, "2031-04-10")
    case = make.case(make.stand(cover_id="hay_cut"), observations=rows, settings={"regrowth_days": 40})
    kcb = make.grow(case, record).canopy.kcb[:, 0]
    assert kcb[make.day(record, "2031-06-10") + 25] == pytest.approx(0.725)


def test_cuts_do_not_touch_a_cover_averaged_over_them(make):
    rows = [{"stand_id": "A", "date": "2031-06-10", "observed": "cut"}]
    record = freezing(make, "2031-04-10")
    cut = make.grow(make.case(make.stand(cover_id="hay_averaged"), observations=rows), record)
    uncut = make.grow(make.case(make.stand(cover_id="hay_averaged")), record)
    assert (cut.canopy.kcb == uncut.canopy.kcb).all()
