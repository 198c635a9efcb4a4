"""McMahon et al. (2013), Hydrol. Earth Syst. Sci. 17, 1331-1363, supplement: worked example of 20 July 1980 at 23.8
degrees south, as quoted in the pyet documentation (the supplement itself was not seen).

The paper takes 273.2 for the zero of the absolute scale and 0.00163 P / latent heat for the psychrometric constant;
FAO-56 takes 273.16 and 0.000665 P. Numbers that depend on these carry the tolerance that is noted beside them. Its
Hargreaves value, 4.1129 mm/d, is for another form (Samani 2000) than eq. 52 of FAO-56, so it is no check here.
"""

import numpy as np
import pytest

from etflux import humidity, reference, solar

LATITUDE, ELEVATION, DAY = -23.7951, 546.0, 202
T_MAX, T_MIN, RH_MAX, RH_MIN, SUN, U2 = 21.0, 2.0, 71.0, 25.0, 10.7, 0.5903
DATE = np.array(["1980-07-20"], "datetime64[D]")


def printed(value, digits=4):
    return pytest.approx(value, abs=0.5 * 10.0**-digits * 1.0001)


def ea():
    return humidity.vapour_pressure_from_rh_max_min(T_MAX, T_MIN, RH_MAX, RH_MIN)


def radiation():
    ra = solar.extraterrestrial_radiation(LATITUDE, DAY)
    rs = solar.radiation_from_sunshine(ra, SUN, solar.daylight_hours(LATITUDE, DAY), a=0.23, b=0.50)
    return ra, rs, solar.clear_sky_radiation(ra, ELEVATION)


def test_humidity_and_pressure():
    assert humidity.saturation_vapour_pressure([T_MAX, T_MIN]).tolist() == [printed(2.4870), printed(0.7056)]
    assert humidity.mean_saturation_vapour_pressure(T_MAX, T_MIN) == printed(1.5963)
    assert humidity.slope_of_saturation(11.5) == printed(0.0898)
    pressure = humidity.pressure_from_elevation(ELEVATION)
    assert pressure == printed(95.01027, 5)
    assert 0.00163 * pressure / humidity.latent_heat_of_vaporization(20.0) == pytest.approx(0.0632, abs=0.0001)
    assert humidity.psychrometric_constant(pressure) == pytest.approx(0.0632, abs=0.0001)


def test_sun():
    assert solar.day_of_year(DATE) == DAY
    assert solar.inverse_relative_distance(DAY) == printed(0.9688)
    assert solar.declination(DAY) == printed(0.3557)
    assert solar.sunset_hour_angle(LATITUDE, DAY) == printed(1.4063)
    assert solar.daylight_hours(LATITUDE, DAY) == printed(10.7431)
    ra, rs, rso = radiation()
    assert ra == printed(23.6182)
    assert rso == printed(17.9716)
    assert rs == printed(17.1940)


def test_net_radiation():
    _, rs, rso = radiation()
    assert reference.net_shortwave(rs) == printed(13.2393, 3)  # 0.77 of a rounded Rs
    # 273.2 for 273.16: 4 * 0.04 / 285 of 7.18, 0.004
    assert reference.net_longwave(T_MAX, T_MIN, ea(), rs / rso) == pytest.approx(7.1784, abs=0.005)
    assert reference.net_radiation(rs, rso, T_MAX, T_MIN, ea()) == pytest.approx(6.0610, abs=0.005)


def test_reference_et():
    _, rs, rso = radiation()
    rn = reference.net_radiation(rs, rso, T_MAX, T_MIN, ea())
    pressure = humidity.pressure_from_elevation(ELEVATION)
    # 0.002: the net radiation and the psychrometric constant above
    assert reference.penman_monteith(T_MAX, T_MIN, ea(), rn, U2, pressure) == pytest.approx(2.0775, abs=0.002)
    assert reference.eto_fao56(T_MAX, T_MIN, ea(), rs, U2, ELEVATION, LATITUDE, DAY) == pytest.approx(2.0775, abs=0.002)


def test_other_methods():
    _, rs, _ = radiation()
    rn = 8.6401  # of open water, printed
    found = reference.second_opinions(
        DATE, [T_MAX], [T_MIN], ea(), rs, U2, rn, ELEVATION, LATITUDE, rh_mean_pct=0.5 * (RH_MAX + RH_MIN)
    )
    assert found["eto_turc_mm"] == printed(2.6727)
    # the paper divides by a latent heat of 2.45, the library by that of the air, 2.4738
    heavier = humidity.latent_heat_of_vaporization(11.5) / 2.45
    assert found["eto_priestley_taylor_mm"] * heavier == pytest.approx(2.6083, abs=0.001)
    slope, gamma = humidity.slope_of_saturation(11.5), humidity.psychrometric_constant(95.01027)
    radiation_part = slope / (slope + gamma) * rn / 2.45
    expected = 2.9797 - radiation_part * (1.0 - 1.0 / heavier)
    assert found["eto_penman_mm"] == pytest.approx(expected, abs=0.001)
