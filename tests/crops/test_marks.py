"""Growth marks on weather whose heat units can be counted by hand: 28/16 °C give 12 °C-days, every day."""

import numpy as np
import pytest

from etflux import marks
from etflux.findings import rules
from etflux.stands import packaged

CORN_F = {"emergence": 115, "cover10": 475, "v8": 600, "full_cover": 1135, "late": 2160, "maturity": 2700}
PER_DAY = 12.0


def after_planting(grown, name, unit=0):
    return grown.canopy.marks[name][unit] - grown.canopy.marks["planting"][unit]


def test_marks_of_the_default_hybrid(make):
    grown = make.grow(make.case(make.stand(planting_date="2031-05-01")))
    found = {name: after_planting(grown, name) for name in CORN_F}
    assert found == {name: np.ceil(units / 1.8 / PER_DAY) for name, units in CORN_F.items()}
    assert found["cover10"] == 22.0
    assert found["full_cover"] == 53.0
    assert after_planting(grown, "harvest") == 125.0 + 14.0


def test_all_marks_scale_with_the_hybrid(make):
    grown = make.grow(make.case(make.stand(planting_date="2031-05-01", hybrid_heat_units=1350.0)))
    for name, units in CORN_F.items():
        assert after_planting(grown, name) == np.ceil(0.9 * units / 1.8 / PER_DAY), name


def test_marks_against_a_sum_day_by_day(make):
    """Random weather, stations and hybrids; a plain loop is the witness."""
    rng = np.random.default_rng(7)
    t_max = rng.uniform(14.0, 38.0, (365, 3))
    record = make.record(t_max_c=t_max, t_min_c=t_max - rng.uniform(4.0, 18.0, (365, 3)), latitude=[38.0, 42.0, 46.0])
    clock = marks.HeatClock.of(record)
    station, planting = rng.integers(0, 3, 40), rng.integers(90, 200, 40).astype(float)
    need = np.sort(rng.uniform(20.0, 1900.0, (6, 40)), axis=0)
    found = marks.annual_marks(clock, station, planting, {}, need, np.ones(40, dtype=bool))
    daily = marks.heat_units(record.values["t_max_c"], record.values["t_min_c"])
    seen = 0
    for unit in range(40):
        total, day = 0.0, int(planting[unit])
        for place, name in enumerate(marks.ANNUAL_MARKS):
            while total < need[place, unit] and day < 364:
                day += 1
                total += daily[day, station[unit]]
            if total >= need[place, unit]:
                assert found[name][unit] == day, (unit, name)
                seen += 1
            else:
                assert found[name][unit] >= 365.0
    assert 150 < seen < 240  # some are past the record


def test_observed_date_wins_and_later_marks_continue_from_it(make):
    rows = [{"stand_id": "A", "date": "2031-07-10", "observed": "full cover"}]
    grown = make.grow(make.case(make.stand(planting_date="2031-05-01"), observations=rows))
    assert after_planting(grown, "full_cover") == 70.0
    assert after_planting(grown, "cover10") == 22.0
    assert after_planting(grown, "late") == 70.0 + np.ceil((2160 - 1135) / 1.8 / PER_DAY)
    assert grown.canopy.basis_of("full_cover")[0] == "observed"
    assert grown.canopy.basis_of("late")[0] == "heat units"


def test_an_early_observation_pulls_no_mark_before_another(make):
    """Full cover seen before the computed 10 % cover: the marks stay in order."""
    rows = [{"stand_id": "A", "date": "2031-05-15", "observed": "full cover"}]
    grown = make.grow(make.case(make.stand(planting_date="2031-05-01"), observations=rows))
    days = [after_planting(grown, name) for name in marks.ANNUAL_MARKS]
    assert days == sorted(days)


def test_day_lengths_of_corn(make):
    case = make.case(make.stand(planting_date="2031-05-01"), settings={"corn_marks": "day lengths"})
    grown = make.grow(case)
    found = [after_planting(grown, name) for name in ("emergence", "cover10", "full_cover", "late", "maturity")]
    assert found == [10.0, 25.0, 65.0, 110.0, 140.0]
    assert grown.canopy.basis_of("late")[0] == "FAO-56 Table 11, arid row, nearest in length"


@pytest.mark.parametrize(
    ("latitude", "planted", "shorter"),
    [
        (42.0, "2031-05-10", 0.0),
        (42.0, "2031-05-25", 5.0),
        (42.0, "2031-09-01", 20.0),  # no more than for 60 days
        (-33.0, "2031-11-25", 5.0),
        (-33.0, "2032-01-09", 20.0),
        (-33.0, "2031-10-20", 0.0),
    ],
)
def test_late_soybean_hurries_through_all_stages(make, latitude, planted, shorter):
    """A day less for every 3 days after 10 May, in the south after 10 November."""
    county = [{"county_id": "C1", "area_km2": 1000.0, "latitude_deg": latitude, "longitude_deg": -60.0}]
    record = make.record("2031-04-01", 500, latitude=latitude)
    grown = make.grow(make.case(make.stand(cover_id="soybean", planting_date=planted), counties=county), record)
    assert after_planting(grown, "maturity") == 140.0 - shorter
    assert after_planting(grown, "cover10") == pytest.approx(20.0 * (1.0 - shorter / 140.0), abs=0.5)  # whole days


def test_soybean_by_heat_units(make):
    """A corn hybrid's requirement, entered by mistake, does not scale them."""
    row = make.stand(cover_id="soybean", planting_date="2031-05-01", hybrid_heat_units=1200.0)
    grown = make.grow(make.case(row, settings={"soybean_marks": "heat units"}))
    table = packaged("heat_units").set_index(["cover_id", "mark"])["heat_units_f"]
    assert after_planting(grown, "full_cover") == np.ceil(table["soybean", "full_cover"] / 1.8 / PER_DAY)


def test_leap_day_counts(make):
    """65 days from 1 February 2032 end on 6 April, in a common year on 7 April."""
    case = make.case(make.stand(planting_date="2032-02-01"), settings={"corn_marks": "day lengths"})
    record = make.record("2032-01-01", 300)
    grown = make.grow(case, record)
    day = record.dates[0] + int(grown.canopy.marks["full_cover"][0])
    assert day == np.datetime64("2032-04-06")


# --- past the ends of the record ---


def test_marks_past_the_record_are_projected_at_the_last_pace(make):
    case = make.case(make.stand(planting_date="2031-05-01"))
    whole, cut = make.grow(case), make.grow(case, make.record(days=200))
    for name in ("late", "maturity", "harvest"):
        assert cut.canopy.marks[name][0] == whole.canopy.marks[name][0]
    assert cut.canopy.basis_of("late")[0] == "heat units, projected past the record"
    assert cut.canopy.basis_of("full_cover")[0] == "heat units"


def test_heat_units_that_never_come_stay_far_away(make):
    """A record that ends in the cold: the mark is past the projection, not at its start."""
    t_max = np.where(np.arange(300) < 200, 28.0, 5.0)
    grown = make.grow(
        make.case(make.stand(planting_date="2031-05-01")), make.record(days=300, t_max_c=t_max, t_min_c=4.0)
    )
    assert grown.canopy.marks["maturity"][0] >= 300 + marks.AHEAD_DAYS


def test_normals_ahead_are_means_of_the_same_days(make):
    """Three years of 1, 2, 3: after them 2; two years are too few."""
    years = np.repeat([1.0, 2.0, 3.0], [365, 365, 365])[:, None]
    ahead = marks.normals_ahead(years, 100)
    assert ahead.shape == (100, 1)
    assert ahead[1:] == pytest.approx(2.0)  # the first has no day 3 x 365.24 days ago
    assert np.isnan(marks.normals_ahead(years[:730], 100)).all()


def test_normals_carry_marks_better_than_the_last_pace(make):
    """Four years with the same summers; the fourth ends on 31 May. The truth is the whole fourth year."""
    dates = np.datetime64("2028-01-01") + np.arange(4 * 365 + 1)
    doy = (dates - dates.astype("datetime64[Y]").astype("datetime64[D]")).astype(int)
    t_mean = 10.0 - 15.0 * np.cos(2 * np.pi * (doy - 15) / 365.25)
    weather = {"t_max_c": t_mean + 6.0, "t_min_c": t_mean - 6.0}
    case = make.case(make.stand(planting_date="2031-05-01"))
    whole = make.grow(case, make.record("2028-01-01", len(dates), **weather))
    stop = make.day(whole.record, "2031-06-01")
    cut = make.grow(case, make.record("2028-01-01", stop, **{name: t[:stop] for name, t in weather.items()}))
    fresh = make.day(whole.record, "2031-01-01")
    alone = {name: t[fresh:stop] for name, t in weather.items()}
    pace = make.grow(case, make.record("2031-01-01", stop - fresh, **alone))
    truth = whole.canopy.marks["full_cover"][0]
    assert cut.canopy.marks["full_cover"][0] == pytest.approx(truth, abs=2.0)
    assert abs(pace.canopy.marks["full_cover"][0] + fresh - truth) > 5.0


def test_planted_before_the_record(make):
    """The first days' pace stands for the days that are missing."""
    case = make.case(make.stand(planting_date="2031-05-01"))
    whole, late = make.grow(case), make.grow(case, make.record("2031-05-15", 200))
    shift = make.day(whole.record, "2031-05-15")
    for name in marks.ANNUAL_MARKS:
        assert late.canopy.marks[name][0] + shift == whole.canopy.marks[name][0], name
    assert f"first {marks.PACE_DAYS} days" in rules()["planting-before-season"].rule.replace("ten", "10")


def test_a_season_over_new_year(make):
    """South of the equator: planted in October, ripe in the next year, marks in order, no gap at New Year."""
    county = [{"county_id": "C1", "area_km2": 1000.0, "latitude_deg": -33.0, "longitude_deg": -60.0}]
    record = make.record("2031-07-01", 366, latitude=-33.0)
    grown = make.grow(make.case(make.stand(planting_date="2031-10-15"), counties=county), record)
    assert after_planting(grown, "maturity") == 125.0
    stage = grown.canopy.stage[:, 0]
    new_year = make.day(record, "2032-01-01")
    assert stage[new_year - 1] == stage[new_year] == 4
    assert (np.diff(stage[make.day(record, "2031-10-15") : int(grown.canopy.marks["harvest"][0])]) >= 0).all()
