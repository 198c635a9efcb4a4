"""Allen et al. (1998), FAO Irrigation and Drainage Paper 56: examples 2 to 14 and 17 to 19, figure 18.

Numbers are the printed ones; the tolerance is half the last printed digit unless a line says otherwise.
"""

import numpy as np
import pytest

from etflux import humidity, reference, solar
from etflux.reference.radiation import STEFAN_BOLTZMANN_DAY


def printed(value, digits):
    return pytest.approx(value, abs=0.5 * 10.0**-digits * 1.0001)


def test_example_2_pressure_and_psychrometric_constant():  # p. 32
    pressure = humidity.pressure_from_elevation(1800.0)
    assert pressure == printed(81.8, 1)
    assert humidity.psychrometric_constant(pressure) == printed(0.054, 3)


def test_example_3_saturation_vapour_pressure():  # p. 36
    assert humidity.saturation_vapour_pressure(24.5) == printed(3.075, 3)
    assert humidity.saturation_vapour_pressure(15.0) == printed(1.705, 3)
    assert humidity.mean_saturation_vapour_pressure(24.5, 15.0) == printed(2.39, 2)
    # at the mean temperature it would be lower: the book's reason for eq. 12
    assert humidity.saturation_vapour_pressure(19.75) == printed(2.30, 2)


def test_example_4_psychrometer():  # p. 38
    pressure = humidity.pressure_from_elevation(1200.0)
    assert pressure == printed(87.9, 1)
    assert humidity.saturation_vapour_pressure(19.5) == printed(2.267, 3)
    assert humidity.vapour_pressure_from_psychrometer(25.6, 19.5, pressure) == printed(1.91, 2)


def test_examples_5_and_6_vapour_pressure_from_relative_humidity():  # p. 39
    t_max, t_min, rh_max, rh_min = 25.0, 18.0, 82.0, 54.0
    assert humidity.saturation_vapour_pressure([t_min, t_max]).tolist() == [printed(2.064, 3), printed(3.168, 3)]
    ea = humidity.vapour_pressure_from_rh_max_min(t_max, t_min, rh_max, rh_min)
    assert ea == printed(1.70, 2)
    assert humidity.vapour_pressure_from_rh_mean(t_max, t_min, 0.5 * (rh_max + rh_min)) == printed(1.78, 2)
    # eq. 18 has no example; from the two numbers above, 2.064 * 0.82 = 1.692
    assert humidity.vapour_pressure_from_rh_max(t_min, rh_max) == printed(1.692, 3)
    assert humidity.mean_saturation_vapour_pressure(t_max, t_min) - ea == printed(0.91, 2)
    assert humidity.vapour_pressure_from_deficit(t_max, t_min, 0.91) == pytest.approx(1.70, abs=0.01)


def test_examples_8_and_9_sun_at_20_degrees_south():  # pp. 47, 49; angles of example 7 are numpy's own
    day = 246
    assert solar.day_of_year(np.datetime64("1998-09-03")) == day
    assert solar.inverse_relative_distance(day) == printed(0.985, 3)
    assert solar.declination(day) == printed(0.120, 3)
    assert solar.sunset_hour_angle(-20.0, day) == printed(1.527, 3)
    assert solar.extraterrestrial_radiation(-20.0, day) == printed(32.2, 1)
    assert 0.408 * solar.extraterrestrial_radiation(-20.0, day) == printed(13.1, 1)
    assert solar.daylight_hours(-20.0, day) == printed(11.7, 1)


def test_examples_10_to_12_radiation_balance():  # pp. 50-53
    ra = solar.extraterrestrial_radiation(-22.90, 135)
    assert ra == printed(25.1, 1)
    daylight = solar.daylight_hours(-22.90, 135)
    assert daylight == printed(10.9, 1)
    rs = solar.radiation_from_sunshine(ra, 220.0 / 31.0, daylight)
    assert rs == printed(14.5, 1)
    assert 0.408 * rs == printed(5.9, 1)
    rso = solar.clear_sky_radiation(ra, 0.0)  # the example takes 0.75 Ra
    assert rso == printed(18.8, 1)
    assert rs / rso == printed(0.77, 2)
    assert [STEFAN_BOLTZMANN_DAY * (t + 273.16) ** 4 for t in (25.1, 19.1)] == [printed(38.8, 1), printed(35.8, 1)]
    assert reference.cloudiness_factor(rs / rso) == printed(0.69, 2)
    assert reference.net_longwave(25.1, 19.1, 2.1, rs / rso) == printed(3.5, 1)
    assert reference.net_shortwave(rs) == printed(11.1, 1)
    assert reference.net_radiation(rs, rso, 25.1, 19.1, 2.1) == printed(7.6, 1)


def test_example_13_soil_heat_flux_of_a_month():  # p. 55
    assert reference.soil_heat_flux_month(14.1, 18.8) == printed(0.33, 2)


def test_example_14_wind_at_2m():  # p. 56
    assert reference.wind_at_2m(1.0, 10.0) == printed(0.75, 2)
    assert reference.wind_at_2m(3.2, 10.0) == printed(2.4, 1)


def test_example_17_monthly_means():  # pp. 70-71
    t_max, t_min, ea, u2 = 34.8, 25.6, 2.85, 2.0
    pressure = humidity.pressure_from_elevation(2.0)
    assert humidity.slope_of_saturation(30.2) == printed(0.246, 3)
    assert pressure == printed(101.3, 1)
    assert humidity.psychrometric_constant(101.3) == printed(0.0674, 4)  # the example goes on with the rounded pressure
    es = humidity.mean_saturation_vapour_pressure(t_max, t_min)
    assert es == printed(4.42, 2)
    assert es - ea == printed(1.57, 2)
    latitude = 13.0 + 44.0 / 60.0
    ra = solar.extraterrestrial_radiation(latitude, 105)
    assert ra == printed(38.06, 2)
    daylight = solar.daylight_hours(latitude, 105)
    assert daylight == printed(12.31, 2)
    rs = solar.radiation_from_sunshine(ra, 8.5, daylight)
    assert rs == printed(22.65, 2)
    rso = solar.clear_sky_radiation(ra, 2.0)
    assert rso == printed(28.54, 2)
    assert reference.net_shortwave(rs) == printed(17.44, 2)
    assert reference.net_longwave(t_max, t_min, ea, rs / rso) == printed(3.11, 2)
    rn = reference.net_radiation(rs, rso, t_max, t_min, ea)
    assert rn == printed(14.33, 2)
    ground = reference.soil_heat_flux_month_so_far(29.2, 30.2)
    assert ground == printed(0.14, 2)
    assert reference.penman_monteith(t_max, t_min, ea, rn, u2, pressure, ground) == printed(5.72, 2)
    # its two parts
    assert reference.penman_monteith(t_max, t_min, es, rn, u2, pressure, ground) == printed(3.97, 2)
    assert reference.penman_monteith(t_max, t_min, ea, 0.0, u2, pressure) == printed(1.75, 2)


def test_example_18_daily_data():  # pp. 72-73
    t_max, t_min = 21.5, 12.3
    u2 = reference.wind_at_2m(10.0 / 3.6, 10.0)
    assert u2 == pytest.approx(2.078, abs=0.001)  # the example multiplies rounded numbers, 0.748 by 2.78
    pressure = humidity.pressure_from_elevation(100.0)
    assert pressure == printed(100.1, 1)
    assert humidity.slope_of_saturation(16.9) == printed(0.122, 3)
    assert humidity.psychrometric_constant(pressure) == printed(0.0666, 4)
    es = humidity.mean_saturation_vapour_pressure(t_max, t_min)
    assert es == printed(1.997, 3)
    ea = humidity.vapour_pressure_from_rh_max_min(t_max, t_min, 84.0, 63.0)
    assert ea == printed(1.409, 3)
    assert es - ea == printed(0.589, 3)
    ra = solar.extraterrestrial_radiation(50.80, 187)
    assert ra == printed(41.09, 2)
    daylight = solar.daylight_hours(50.80, 187)
    assert daylight == printed(16.1, 1)
    rs = solar.radiation_from_sunshine(ra, 9.25, daylight)
    assert rs == printed(22.07, 2)
    rso = solar.clear_sky_radiation(ra, 100.0)
    assert rso == printed(30.90, 2)
    assert reference.net_shortwave(rs) == printed(17.00, 2)
    assert reference.net_longwave(t_max, t_min, ea, rs / rso) == printed(3.71, 2)
    rn = reference.net_radiation(rs, rso, t_max, t_min, ea)
    assert rn == printed(13.28, 2)
    assert reference.penman_monteith(t_max, t_min, ea, rn, u2, pressure) == printed(3.88, 2)
    assert reference.penman_monteith(t_max, t_min, es, rn, u2, pressure) == printed(2.81, 2)
    assert reference.penman_monteith(t_max, t_min, ea, 0.0, u2, pressure) == printed(1.07, 2)
    assert reference.eto_fao56(t_max, t_min, ea, rs, u2, 100.0, 50.80, 187) == printed(3.88, 2)


def test_example_19_hour_by_day():  # pp. 75-76, 14:00 to 15:00
    latitude, day, clock = 16.0 + 13.0 / 60.0, 274, 14.5
    assert solar.inverse_relative_distance(day) == printed(1.0001, 4)
    assert solar.declination(day) == printed(-0.0753, 4)
    assert solar.seasonal_correction(day) == printed(0.1889, 4)
    hour = solar.solar_from_clock(clock, day, -16.25, -1.0)
    omega = np.pi / 12.0 * (hour - 12.0)
    assert omega == printed(0.682, 3)
    assert [omega - np.pi / 24.0, omega + np.pi / 24.0] == [printed(0.5512, 4), printed(0.8130, 4)]
    ra = solar.extraterrestrial_radiation_hourly(latitude, day, hour)
    assert ra == printed(3.543, 3)
    rso = solar.clear_sky_radiation(ra, 8.0)
    assert rso == printed(2.658, 3)
    ea = humidity.saturation_vapour_pressure(38.0) * 0.52
    assert ea == printed(3.445, 3)
    assert reference.net_shortwave(2.450) == pytest.approx(1.887, abs=0.0006)  # 1.8865, printed rounded up
    longwave = reference.net_longwave_hourly(38.0, ea, 2.450 / rso)
    assert longwave == printed(0.137, 3)
    rn = reference.net_shortwave(2.450) - longwave
    assert rn == printed(1.749, 3)
    pressure = humidity.pressure_from_elevation(8.0)
    assert humidity.psychrometric_constant(pressure) == printed(0.0673, 4)
    assert reference.et_hourly(38.0, ea, rn, 3.3, pressure) == printed(0.63, 2)
    hours = reference.et_from_hours([38.0], ea, 2.450, 3.3, 8.0, latitude, day, hour)
    assert hours == printed(0.63, 2)


def test_example_19_hour_by_night():  # pp. 75-76, 02:00 to 03:00, Rs/Rso 0.8 assumed
    latitude, day = 16.0 + 13.0 / 60.0, 274
    hour = solar.solar_from_clock(2.5, day, -16.25, -1.0)
    assert np.pi / 12.0 * (hour - 12.0) == printed(-2.46, 2)
    assert solar.extraterrestrial_radiation_hourly(latitude, day, hour) == 0.0
    ea = humidity.saturation_vapour_pressure(28.0) * 0.90
    assert ea == printed(3.402, 3)
    longwave = reference.net_longwave_hourly(28.0, ea, 0.8)
    assert longwave == printed(0.100, 3)
    pressure = humidity.pressure_from_elevation(8.0)
    assert reference.et_hourly(28.0, ea, -longwave, 1.9, pressure) == printed(0.00, 2)
    hours = reference.et_from_hours([28.0], ea, 0.0, 1.9, 8.0, latitude, day, hour, first_ratio=0.8)
    assert hours == printed(0.00, 2)


def test_the_afternoon_serves_the_night():  # p. 75: (ws - 0.79) <= w <= (ws - 0.52)
    hours = np.arange(36) + 0.5
    day = np.where(hours < 24.0, 200, 201)
    ra = solar.extraterrestrial_radiation_hourly(42.0, day, hours % 24.0)
    sunset = 12.0 + 12.0 / np.pi * solar.sunset_hour_angle(42.0, day)
    chosen = (hours >= sunset - 0.79 * 12.0 / np.pi) & (hours <= sunset - 0.52 * 12.0 / np.pi)
    assert chosen.sum() == 1
    rs = 0.75 * ra * np.where(chosen, 0.9, 0.5)
    weather = (np.full(36, 15.0), 1.2, rs, 0.0, 0.0, 42.0, day, hours % 24.0)
    et = reference.et_from_hours(*weather)
    ea, pressure = 1.2, humidity.pressure_from_elevation(0.0)
    for hour, ratio in ((3, 0.6), (22, 0.9), (26, 0.9)):  # 0.6: what is assumed before the first afternoon
        longwave = reference.net_longwave_hourly(15.0, ea, ratio)
        assert et[hour] == pytest.approx(reference.et_hourly(15.0, ea, -longwave, 0.0, pressure))


# Figure 18, p. 69: a coastal station at 5.33 degrees south, 20 m, twelve monthly means.
# month, t_min, t_max, RH %, wind km/d, sunshine h, printed Rs, printed ETo
FIGURE_18 = [
    (1, 22.8, 29.6, 81, 78, 4.0, 15.7, 3.4),
    (2, 22.7, 30.3, 82, 69, 4.6, 16.9, 3.7),
    (3, 23.0, 30.6, 80, 78, 5.1, 17.4, 3.8),
    (4, 23.0, 30.2, 82, 69, 5.0, 16.4, 3.5),
    (5, 22.0, 28.6, 84, 69, 3.8, 13.5, 2.9),
    (6, 19.2, 26.5, 81, 69, 3.3, 12.2, 2.6),
    (7, 17.6, 25.1, 78, 78, 3.2, 12.3, 2.6),
    (8, 18.6, 25.3, 78, 78, 2.6, 12.4, 2.6),
    (9, 20.5, 26.5, 78, 104, 2.0, 12.4, 2.8),
    (10, 22.5, 28.0, 79, 130, 2.2, 12.9, 3.1),
    (11, 23.0, 28.7, 80, 104, 3.2, 14.4, 3.3),
    (12, 23.0, 29.1, 82, 95, 3.8, 15.2, 3.4),
]


def test_figure_18_twelve_months():
    month, t_min, t_max, rh, wind, sun, rs_printed, eto_printed = np.array(FIGURE_18, float).T
    day = np.floor(30.4 * month - 15.0)  # p. 217
    ra = solar.extraterrestrial_radiation(-5.33, day)
    rs = solar.radiation_from_sunshine(ra, sun, solar.daylight_hours(-5.33, day))
    # sunshine is printed to 0.1 h: 0.05 h are worth 0.5 * 37 / 12 * 0.05 = 0.08 of Rs
    assert rs.tolist() == pytest.approx(rs_printed.tolist(), abs=0.05 + 0.08)
    ea = humidity.vapour_pressure_from_rh_mean(t_max, t_min, rh)
    eto = reference.eto_fao56(t_max, t_min, ea, rs, wind * 1000.0 / 86400.0, 20.0, -5.33, day)
    assert eto[0] == printed(3.4, 1)
    # The program that printed the figure does not say how it took the humidity and the soil heat flux. With eq. 19 and
    # no soil heat flux we are below it in every month, by up to 0.17: a known disagreement, not rounding.
    assert np.all((eto - eto_printed > -0.175) & (eto - eto_printed < 0.0))
