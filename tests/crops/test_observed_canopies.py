"""Kcb moved to measured canopy cover and leaf area."""

import numpy as np
import pytest

PLANTED = "2031-05-01"


def seen(*rows):
    return [{"stand_id": "A", "date": date, "observed": word, "observed_value": value} for date, word, value in rows]


def pair(make, *rows, **changes):
    """Stand with measured canopies, and the same without."""
    row = make.stand(planting_date=PLANTED, **changes)
    return make.grow(make.case(row, observations=seen(*rows))), make.grow(make.case(row))


def test_on_the_day_kcb_is_that_of_the_canopy_cover(make):
    """FAO-56 eq. 98 at 2 m: 0.15 + 1.00 x min(1, 0.8, 0.4^(1/3))."""
    grown, _ = pair(make, ("2031-06-10", "canopy cover", 40.0))
    day = make.day(grown.record, "2031-06-10")
    assert grown.canopy.kcb[day, 0] == pytest.approx(0.15 + 0.4 ** (1.0 / 3.0))


def test_on_the_day_kcb_is_that_of_the_leaf_area(make):
    """FAO-56 eq. 97: 0.15 + 1.00 (1 - exp(-0.7 x 1.5))."""
    grown, _ = pair(make, ("2031-06-10", "leaf area", 1.5))
    assert grown.canopy.kcb[make.day(grown.record, "2031-06-10"), 0] == pytest.approx(0.15 + 1.0 - np.exp(-1.05))


def test_before_emergence_and_from_full_cover_on_nothing_moves(make):
    """A measurement of the growing crop says when it grows, not how tall it becomes."""
    grown, plain = pair(make, ("2031-06-10", "canopy cover", 20.0))
    at = {name: int(days[0]) for name, days in plain.canopy.marks.items() if name in ("emergence", "full_cover")}
    moved = np.flatnonzero(grown.canopy.kcb[:, 0] != plain.canopy.kcb[:, 0])
    assert at["emergence"] < moved[0]
    assert moved[-1] < at["full_cover"]


def test_a_thin_stand_at_full_cover_stays_thin_in_proportion(make):
    grown, plain = pair(make, ("2031-07-10", "canopy cover", 30.0))
    day, kcb = make.day(grown.record, "2031-07-10"), grown.canopy.kcb[:, 0]
    ratio = (0.15 + 0.6) / 1.15
    ends = int(plain.canopy.marks["harvest"][0])
    assert kcb[day:ends] == pytest.approx(ratio * plain.canopy.kcb[day:ends, 0])
    assert grown.canopy.ground_cover[day, 0] < plain.canopy.ground_cover[day, 0] - 0.2


def test_measured_on_the_day_of_full_cover_counts_as_grown(make):
    day = 173  # 53 days after planting
    grown, plain = pair(make, ("2031-06-23", "canopy cover", 30.0))
    assert plain.canopy.marks["full_cover"][0] == day
    assert grown.canopy.kcb[day + 10, 0] == pytest.approx(0.75)


def test_between_two_measurements_the_difference_runs_linearly(make):
    first, second = "2031-06-08", "2031-06-18"
    grown, plain = pair(make, (first, "canopy cover", 20.0), (second, "canopy cover", 50.0))
    a, b = make.day(grown.record, first), make.day(grown.record, second)
    difference = (grown.canopy.kcb - plain.canopy.kcb)[:, 0]
    assert difference[a : b + 1] == pytest.approx(np.linspace(difference[a], difference[b], b - a + 1))


def test_never_above_full_cover_nor_below_nothing(make):
    grown, plain = pair(make, ("2031-06-01", "leaf area", 9.0), ("2031-06-03", "leaf area", 0.0))
    assert grown.canopy.kcb.max() <= plain.canopy.kcb.max()
    assert grown.canopy.kcb.min() >= 0.0


def test_measured_bare_ground_after_harvest_is_not_scaled(make):
    grown, plain = pair(make, ("2031-11-10", "canopy cover", 5.0))
    assert (grown.canopy.kcb == plain.canopy.kcb).all()


def test_only_the_stand_that_was_measured_moves(make):
    rows = [make.stand("A", planting_date=PLANTED), make.stand("B", planting_date=PLANTED)]
    grown = make.grow(make.case(*rows, observations=seen(("2031-06-10", "canopy cover", 20.0))))
    plain = make.grow(make.case(*rows))
    assert (grown.canopy.kcb[:, 1] == plain.canopy.kcb[:, 1]).all()
    assert (grown.canopy.kcb[:, 0] != plain.canopy.kcb[:, 0]).any()


def test_grass_measured_thin_stays_thin_that_season_only(make):
    t_min = np.full(731, 16.0)
    for day in (60, 300, 430, 665):
        t_min[day] = -5.0
    record = make.record(days=731, t_min_c=t_min)
    row = make.stand(cover_id="grass_rotated")
    grown = make.grow(make.case(row, observations=seen(("2031-07-01", "canopy cover", 25.0))), record)
    plain = make.grow(make.case(row), record)
    moved = np.flatnonzero(grown.canopy.kcb[:, 0] != plain.canopy.kcb[:, 0])
    assert plain.canopy.marks["greenup"][1, 0] < moved[0]
    assert moved[-1] < plain.canopy.marks["end"][1, 0]
    assert grown.canopy.kcb[make.day(record, "2031-08-01"), 0] < 0.8 * 0.90
