"""A witness from outside: humidity, virtual temperature and condensation level against MetPy, -10 to 40 degC.

MetPy's saturation curve is that of Ambaum (2020), ours that of FAO-56 eq. 11; the tolerances are what that is worth.
"""

import numpy as np
import pytest

from etflux import humidity

mpcalc = pytest.importorskip("metpy.calc")
units = pytest.importorskip("metpy.units").units

T = np.linspace(-10.0, 40.0, 101)


def celsius(values):
    return units.Quantity(np.asarray(values, float), "degC")


def kpa(values):
    return units.Quantity(np.asarray(values, float), "kPa")


def test_saturation_vapour_pressure():
    witness = mpcalc.saturation_vapor_pressure(celsius(T)).to("kPa").magnitude
    np.testing.assert_allclose(humidity.saturation_vapour_pressure(T), witness, rtol=0.003)


def test_dew_point():
    e = humidity.saturation_vapour_pressure(T)
    witness = mpcalc.dewpoint(kpa(e)).to("degC").magnitude
    np.testing.assert_allclose(humidity.dew_point(e), witness, atol=0.05)


@pytest.mark.parametrize("p", [70.0, 85.0, 101.3])
def test_mixing_ratio_and_specific_humidity_of_a_vapour_pressure(p):
    e = np.linspace(0.1, 5.0, 50)
    witness = mpcalc.mixing_ratio(kpa(e), kpa(p))
    np.testing.assert_allclose(humidity.mixing_ratio(e, p), witness.to("dimensionless").magnitude, rtol=0.001)
    specific = mpcalc.specific_humidity_from_mixing_ratio(witness).to("dimensionless").magnitude
    np.testing.assert_allclose(humidity.specific_humidity(e, p), specific, rtol=0.001)


def test_specific_humidity_of_a_dew_point():
    witness = mpcalc.specific_humidity_from_dewpoint(kpa(98.0), celsius(T)).to("dimensionless").magnitude
    found = humidity.specific_humidity(humidity.vapour_pressure_from_dew_point(T), 98.0)
    np.testing.assert_allclose(found, witness, rtol=0.004)  # 0.3 % of the curve, 0.1 % of the ratio of masses


@pytest.mark.parametrize("p", [60.0, 85.0, 100.0])
def test_potential_temperature(p):
    witness = mpcalc.potential_temperature(kpa(p), celsius(T)).to("degC").magnitude
    np.testing.assert_allclose(humidity.potential_temperature(T, p), witness, atol=0.01)


@pytest.mark.parametrize("p", [85.0, 100.0])
def test_virtual_potential_temperature(p):
    w = np.linspace(0.0, 0.025, len(T))
    witness = mpcalc.virtual_potential_temperature(kpa(p), celsius(T), units.Quantity(w, "kg/kg")).to("degC").magnitude
    theta = humidity.potential_temperature(T, p)
    np.testing.assert_allclose(humidity.virtual_temperature(theta, w / (1.0 + w)), witness, atol=0.02)


def test_relative_humidity():
    dew = T - 8.0
    witness = mpcalc.relative_humidity_from_dewpoint(celsius(T), celsius(dew)).to("percent").magnitude
    found = humidity.relative_humidity(humidity.vapour_pressure_from_dew_point(dew), T)
    np.testing.assert_allclose(found, witness, rtol=0.006)  # the curve counts twice


@pytest.mark.parametrize("spread", [1.0, 8.0, 20.0])
def test_condensation_level(spread):
    t = np.linspace(5.0, 40.0, 36)
    pressure, temperature = mpcalc.lcl(kpa(np.full_like(t, 98.0)), celsius(t), celsius(t - spread))
    np.testing.assert_allclose(
        humidity.condensation_temperature(t, t - spread), temperature.to("degC").magnitude, atol=0.15
    )
    np.testing.assert_allclose(
        humidity.condensation_pressure(t, t - spread, 98.0), pressure.to("kPa").magnitude, atol=0.12
    )


def test_latent_heat():
    witness = mpcalc.water_latent_heat_vaporization(celsius(T)).to("MJ/kg").magnitude
    np.testing.assert_allclose(humidity.latent_heat_of_vaporization(T), witness, rtol=0.001)
