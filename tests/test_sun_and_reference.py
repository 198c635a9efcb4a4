"""Sun geometry and reference ET where print has no numbers: poles, clocks, blocks, identities."""

import numpy as np
import pytest

from etflux import humidity, reference, solar
from etflux.reference import daily

DAYS = np.arange(1.0, 367.0)
LATITUDES = np.array([-90.0, -75.0, -66.6, -40.0, 0.0, 23.4, 42.0, 60.0, 66.5, 70.0, 89.9, 90.0])


# --- the sun ---


def test_poles_have_day_and_night_without_a_warning():
    hours = solar.daylight_hours(LATITUDES, DAYS[:, None])
    ra = solar.extraterrestrial_radiation(LATITUDES, DAYS[:, None])
    assert hours.min() == 0.0
    assert hours.max() == 24.0
    assert np.all((hours >= 0.0) & (hours <= 24.0))
    assert np.all(ra[hours == 0.0] == pytest.approx(0.0, abs=1e-12))
    assert np.all(ra[hours > 1.0] > 0.0)
    sunrise, sunset = solar.sunrise_sunset(LATITUDES, DAYS[:, None])
    assert np.allclose(sunset - sunrise, hours)


def test_polar_night_has_no_sunshine_and_no_share():
    ra, hours = solar.extraterrestrial_radiation(80.0, 355.0), solar.daylight_hours(80.0, 355.0)
    assert solar.radiation_from_sunshine(ra, 0.0, hours) == 0.0
    assert solar.day_share(80.0, 355.0, np.arange(24.0), np.arange(1.0, 25.0)).tolist() == [0.0] * 24
    eto = reference.eto_fao56(-20.0, -30.0, 0.04, 0.0, 3.0, 10.0, 80.0, 355.0)
    assert 0.0 <= eto < 0.5


@pytest.mark.parametrize("length", [0.5, 1.0, 3.0])
def test_parts_of_a_day_sum_to_the_day(length):
    start = np.arange(0.0, 24.0, length)[:, None, None]
    parts = solar.extraterrestrial_radiation_hourly(LATITUDES, DAYS[::7, None], start + length / 2.0, length)
    whole = solar.extraterrestrial_radiation(LATITUDES, DAYS[::7, None])
    np.testing.assert_allclose(parts.sum(axis=0), whole, rtol=1e-10, atol=1e-10)
    shares = solar.day_share(LATITUDES, DAYS[::7, None], start, start + length).sum(axis=0)
    np.testing.assert_allclose(shares[whole > 1e-9], 1.0, rtol=1e-10)


def test_solar_time_may_run_past_midnight():
    # summer beyond the polar circle: the hour around midnight has the sun up on both sides
    around = solar.extraterrestrial_radiation_hourly(75.0, 172.0, 24.0)
    sides = solar.extraterrestrial_radiation_hourly(75.0, 172.0, [0.25, 23.75], 0.5).sum()
    assert around == pytest.approx(sides, rel=1e-12)
    assert around > 0.5
    yesterday = solar.extraterrestrial_radiation_hourly(42.0, 172.0, 16.5 - 24.0)
    assert yesterday == pytest.approx(solar.extraterrestrial_radiation_hourly(42.0, 172.0, 16.5), rel=1e-12)


def test_hour_is_the_integral_of_the_sine_of_the_sun():
    hour = 8.0 + (np.arange(3600) + 0.5) / 3600.0
    power = solar.SOLAR_CONSTANT * 60.0 * solar.inverse_relative_distance(200.0)
    by_sum = power * np.mean(np.sin(solar.sun_elevation(42.0, 200.0, hour)))
    assert solar.extraterrestrial_radiation_hourly(42.0, 200.0, 8.5) == pytest.approx(by_sum, rel=1e-7)


def test_mean_elevation_is_near_the_true_weighted_mean():
    # eq. 3-16 is an approximation: within 5 degrees of the integral from 30 to 55 degrees north, March to September
    hour = np.linspace(0.0, 24.0, 2401)[:, None, None]
    latitude, day = np.array([30.0, 42.0, 55.0]), np.arange(80.0, 265.0, 15.0)[:, None]
    height = solar.sun_elevation(latitude, day, hour)
    weight = np.maximum(np.sin(height), 0.0)
    true = (height * weight).sum(axis=0) / weight.sum(axis=0)
    np.testing.assert_allclose(solar.mean_sun_elevation(latitude, day), true, atol=np.radians(5.0))


def test_clocks_turn_back():
    hour = np.linspace(0.0, 23.5, 48)
    there = solar.solar_from_clock(hour, 300.0, -93.6, -6.0)
    np.testing.assert_allclose(solar.clock_from_solar(there, 300.0, -93.6, -6.0), hour, atol=1e-12)
    utc = solar.clock_from_solar(there, 300.0, -93.6, 0.0)
    np.testing.assert_allclose(utc - hour, 6.0, atol=1e-12)


def test_equation_of_time_has_its_known_shape():
    # 3 November +16.4 min, 11 February -14.2 min (almanacs, from memory); eqs. 32 and 33 are good to a week and 1 min
    minutes = 60.0 * solar.seasonal_correction(DAYS)
    assert DAYS[minutes.argmax()] == pytest.approx(307, abs=7)
    assert minutes.max() == pytest.approx(16.4, abs=1.0)
    assert DAYS[minutes.argmin()] == pytest.approx(42, abs=7)
    assert minutes.min() == pytest.approx(-14.2, abs=1.0)


# --- the fast daily form against the plain one ---


def plain(t_max, t_min, ea, rs, u2, elevation, latitude, day, surface="short", sigma=4.903e-9):
    rso = solar.clear_sky_radiation(solar.extraterrestrial_radiation(latitude, day), elevation)
    rn = reference.net_radiation(rs, rso, t_max, t_min, ea, sigma=sigma)
    u2 = np.maximum(u2, reference.LEAST_WIND_M_S)
    pressure = humidity.pressure_from_elevation(elevation)
    return np.maximum(reference.penman_monteith(t_max, t_min, ea, rn, u2, pressure, surface=surface), 0.0)


def weather(shape, seed=1):
    rng = np.random.default_rng(seed)
    t_min = rng.uniform(-25.0, 25.0, shape)
    return [
        t_min + rng.uniform(0.0, 20.0, shape),
        t_min,
        humidity.saturation_vapour_pressure(t_min) * rng.uniform(0.2, 1.1, shape),
        rng.uniform(0.0, 32.0, shape),
        rng.uniform(0.0, 9.0, shape),
    ]


@pytest.mark.parametrize("block", [1, 7, 40, 24_000])
@pytest.mark.parametrize("surface", ["short", "tall"])
def test_blocks_give_what_the_plain_form_gives(monkeypatch, block, surface):
    monkeypatch.setattr(daily, "BLOCK_VALUES", block)
    elevation, latitude = np.linspace(0.0, 2000.0, 5), np.linspace(-80.0, 80.0, 5)
    given = [*weather((23, 5)), elevation, latitude, DAYS[:23, None] * 15.0]
    found = reference.et_asce(*given, surface, sigma=4.903e-9)
    np.testing.assert_allclose(found, plain(*given, surface), rtol=1e-11, atol=1e-12)


def test_every_shape_of_place_and_day():
    elevation, latitude, day = np.linspace(0.0, 900.0, 4), np.linspace(20.0, 60.0, 4), DAYS[100:106]
    whole = weather((6, 4))
    expected = plain(*whole, elevation, latitude, day[:, None])
    np.testing.assert_allclose(reference.eto_fao56(*whole, elevation, latitude, day[:, None]), expected, rtol=1e-11)
    one_station = [values[:, 2] for values in whole]
    np.testing.assert_allclose(
        reference.eto_fao56(*one_station, elevation[2], latitude[2], day), expected[:, 2], rtol=1e-11
    )
    one_day = [values[3] for values in whole]
    np.testing.assert_allclose(reference.eto_fao56(*one_day, elevation, latitude, day[3]), expected[3], rtol=1e-11)
    members = [np.stack([values, values + 0.1]) for values in whole]  # a batch axis in front
    batch = reference.eto_fao56(*members, elevation, latitude, day[:, None])
    assert batch.shape == (2, 6, 4)
    np.testing.assert_allclose(batch[0], expected, rtol=1e-11)
    assert reference.eto_fao56(*[np.empty((0, 4))] * 5, elevation, latitude, np.empty((0, 1))).shape == (0, 4)


def test_vapour_pressure_below_zero_is_missing():
    assert np.isnan(reference.eto_fao56(25.0, 15.0, -0.1, 20.0, 2.0, 0.0, 42.0, 180.0))
    assert np.isnan(reference.net_longwave(25.0, 15.0, -0.1, 0.7))


def test_reference_et_is_not_below_zero_but_its_terms_may_be():
    # FAO-56 p. 209: on some winter days the equation itself gives net condensation
    cold = (-5.0, -15.0, humidity.saturation_vapour_pressure(-5.0), 1.0, 1.0)
    assert plain(*cold, 200.0, 55.0, 350.0) == reference.eto_fao56(*cold, 200.0, 55.0, 350.0) == 0.0
    rn = reference.net_radiation(1.0, 6.0, *cold[:3])
    assert reference.penman_monteith(*cold[:3], rn - 1.5, 1.0, 99.0) < 0.0


def test_cloudiness_is_limited():
    assert reference.cloudiness_factor([0.0, 0.3, 1.0, 1.4]).tolist() == pytest.approx([0.055, 0.055, 1.0, 1.0])


def test_tall_reference_uses_more_than_short():
    given = (33.0, 18.0, 1.6, 26.0, 4.0, 300.0, 42.0, 200.0)
    short, tall = reference.et_asce(*given), reference.et_asce(*given, "tall")
    assert 1.1 < tall / short < 1.6


def test_wind_needs_a_height():
    assert np.isnan(reference.wind_at_2m(3.0, [0.0, 0.05, np.nan])).all()
    assert reference.wind_at_2m(3.0, 2.0) == pytest.approx(3.0, rel=1e-3)
