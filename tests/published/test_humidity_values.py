"""Humidity values that general libraries publish in their tests: PsychroLib (after ASHRAE Fundamentals), MetPy, NCL.

Their saturation curves differ from eq. 11 of FAO-56 by up to 0.3 % between 0 and 50 degC; where a value depends on the
curve, the tolerance is what 0.3 % is worth, else half the last digit that we can reach with 0.622 and R/cp = 2/7.
"""

import numpy as np
import pytest

from etflux import humidity, solar

CURVE = 0.003


@pytest.mark.parametrize(("t", "pascal"), [(5.0, 872.6), (25.0, 3169.7), (50.0, 12351.3)])
def test_saturation_over_water(t, pascal):  # PsychroLib test_psychrolib_si.py, ASHRAE table
    assert humidity.saturation_vapour_pressure(t) * 1000.0 == pytest.approx(pascal, rel=CURVE)


@pytest.mark.parametrize(
    ("t", "ratio", "rel"), [(5.0, 0.005425, 0.005), (25.0, 0.020173, 0.005), (50.0, 0.086863, 0.01)]
)
def test_saturation_humidity_ratio(t, ratio, rel):  # PsychroLib, 101325 Pa; ASHRAE counts 0.5 % for real moist air
    assert humidity.mixing_ratio(humidity.saturation_vapour_pressure(t), 101.325) == pytest.approx(ratio, rel=rel)


def test_humidity_ratio_of_a_vapour_pressure():  # PsychroLib; 0.621945 there, 0.622 here
    assert humidity.mixing_ratio(3.1697, 95.461) == pytest.approx(0.02136040, rel=1e-4)


def test_psychrometer_at_40_and_20_degrees():  # PsychroLib after ASHRAE: dew point 7 degC (0.5), humidity 14 %
    e = humidity.vapour_pressure_from_psychrometer(40.0, 20.0, 101.325)
    assert humidity.dew_point(e) == pytest.approx(7.0, abs=0.5)
    assert humidity.relative_humidity(e, 40.0) == pytest.approx(14.0, abs=0.5)


def test_psychrometer_at_20_and_18_degrees():  # MetPy: 19.3518 hPa and 82.8861 % with a = 6.21e-4
    e = humidity.vapour_pressure_from_psychrometer(20.0, 18.0, 101.325, 6.21e-4)
    assert e * 10.0 == pytest.approx(19.3518, rel=CURVE)
    assert humidity.relative_humidity(e, 20.0) == pytest.approx(82.8861, abs=0.1)


@pytest.mark.parametrize(
    ("elevation", "pascal"), [(0.0, 101325.0), (500.0, 95461.0), (1000.0, 89875.0), (4000.0, 61640.0)]
)
def test_standard_atmosphere(elevation, pascal):  # PsychroLib; eq. 7 is for 20 degC at sea level, the standard for 15
    found = humidity.pressure_from_elevation(elevation) * 1000.0
    warmer = 1.0 + 9.81 * elevation / 287.0 * (1.0 / 288.15 - 1.0 / 293.0)  # first order in the temperature
    assert found == pytest.approx(pascal * warmer, rel=0.001)


@pytest.mark.parametrize(("kpa", "celsius"), [(0.6112, 0.0), (1.58256, 13.8564)])
def test_dew_point_of_a_vapour_pressure(kpa, celsius):  # MetPy, Bolton's curve: 0.05 degC apart at most
    assert humidity.dew_point(kpa) == pytest.approx(celsius, abs=0.05)


@pytest.mark.parametrize(
    ("t", "rh", "celsius"), [(30.0, 30.0, 11), (25.0, 45.0, 12), (10.0, 55.0, 1), (20.0, 80.0, 16), (25.0, 85.0, 22)]
)
def test_dew_point_of_a_relative_humidity(t, rh, celsius):  # MetPy, whole degrees
    assert humidity.dew_point(humidity.saturation_vapour_pressure(t) * rh / 100.0) == pytest.approx(celsius, abs=0.5)


def test_relative_humidity_of_a_dew_point():  # MetPy: 25 and 15 degC, 53.86 %; 53.80 with Bolton's curve
    e = humidity.vapour_pressure_from_dew_point(15.0)
    assert humidity.relative_humidity(e, 25.0) == pytest.approx(53.86, abs=0.06)


def test_vapour_pressure_of_a_mixing_ratio():  # MetPy: 0.04963 kg/kg at 998 hPa, 73.75 hPa
    w = 0.04963
    e = humidity.vapour_pressure_from_specific_humidity(w / (1.0 + w), 99.8)
    assert e * 10.0 == pytest.approx(73.75, abs=0.01)
    assert humidity.mixing_ratio(e, 99.8) == pytest.approx(w, rel=1e-12)


def test_condensation_level():  # MetPy: 1000 hPa, 30 degC, dew point 20 degC: 864.213 hPa, 17.662 degC
    assert humidity.condensation_temperature(30.0, 20.0) == pytest.approx(17.662, abs=0.005)
    assert humidity.condensation_pressure(30.0, 20.0, 100.0) * 10.0 == pytest.approx(864.213, abs=0.5)


def test_condensation_level_height():  # Romps (2017), as MetPy quotes it: 300 K, 288.7153 K, 1433.84 m
    assert humidity.condensation_level(26.85, 15.5653) == pytest.approx(1433.84, abs=5.0)


@pytest.mark.parametrize(
    ("hpa", "kelvin", "theta"),
    [(900.0, 278.0, 286.496), (500.0, 283.0, 344.981), (300.0, 291.0, 410.475), (100.0, 298.0, 575.348)],
)
def test_potential_temperature(hpa, kelvin, theta):  # MetPy
    assert humidity.potential_temperature(kelvin - 273.15, hpa / 10.0) + 273.15 == pytest.approx(theta, abs=0.01)


def test_virtual_temperature():  # MetPy: 288 K, 0.0016 kg/kg, 288.2796 K; 1000 hPa, 30 and 25 degC, 33.668 degC
    w = 0.0016
    assert humidity.virtual_temperature(14.85, w / (1.0 + w)) + 273.15 == pytest.approx(288.2796, abs=0.0005)
    q = humidity.specific_humidity(humidity.vapour_pressure_from_dew_point(25.0), 100.0)
    assert humidity.virtual_temperature(30.0, q) == pytest.approx(33.668, abs=0.01)


def test_latent_heat_at_300_kelvin():  # MetPy, after Ambaum (2020): 2.4375 MJ/kg
    assert humidity.latent_heat_of_vaporization(26.85) == pytest.approx(2.4375, abs=0.0005)


def test_latent_heat_every_ten_degrees():  # Harrison (1963) in FAO-56 annex 3, evaluated by hand
    assert humidity.latent_heat_of_vaporization([0.0, 10.0, 20.0, 30.0]).tolist() == pytest.approx(
        [2.501, 2.4774, 2.4538, 2.4302], abs=0.00005
    )


def test_ncl_radiation_functions():  # NCL pages radext_fao56, radsol_fao56, daylight_fao56
    ra = solar.extraterrestrial_radiation(-22.90, 135)
    assert ra == pytest.approx(25.111, abs=0.0005)
    assert solar.radiation_from_sunshine(ra, 220.0 / 31.0, solar.daylight_hours(-22.90, 135)) == pytest.approx(
        14.4561, abs=0.0005
    )
    assert solar.daylight_hours(-20.0, 246) == pytest.approx(11.7, abs=0.05)


# --- own edge cases ---


def test_specific_humidity_and_vapour_pressure_are_inverse():
    e = np.linspace(0.01, 6.0, 50)
    for p in (60.0, 101.3):
        q = humidity.specific_humidity(e, p)
        assert humidity.vapour_pressure_from_specific_humidity(q, p).tolist() == pytest.approx(e.tolist(), rel=1e-12)
        assert humidity.dew_point_from_specific_humidity(q, p).tolist() == pytest.approx(humidity.dew_point(e).tolist())


def test_dew_point_of_dry_air_is_missing():
    assert np.isnan(humidity.dew_point([0.0, -0.2])).all()


def test_saturated_air_condenses_where_it_is():
    assert humidity.condensation_level(20.0, 20.0) == pytest.approx(0.0, abs=1e-9)
    assert humidity.condensation_level(20.0, 20.3) == pytest.approx(
        0.0, abs=1e-9
    )  # 102 %: a sensor, not a cloud below ground
