"""What a day's numbers rest on, in words that hold for runs without air too."""

from dataclasses import replace

from etflux.results.rests import rests_on


def test_no_balloon_is_claimed_where_the_air_was_not_computed(small):
    air = [name for name in ("flags", "profile_distance_km", "crossing_h") if name in small.county]
    without = replace(small, county=small.county.drop_vars(air))
    morning = next(rest for rest in rests_on(without, without.dates[-1]) if rest.name == "Morning air")
    assert morning.text == "none used: the air was not computed"
    assert not morning.fallback
