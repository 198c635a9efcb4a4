"""Allen et al. (1998), FAO Irrigation and Drainage Paper 56, annexes 2 and 3: meteorological tables, pp. 213-228.

Numbers are the printed ones; the tolerance is half the last printed digit. Tables 2.6 and 2.7 (radiation and day
length by latitude) are missing from the copy that was seen.
"""

import numpy as np
import pytest

from etflux import humidity, reference, solar
from etflux.reference.radiation import STEFAN_BOLTZMANN_DAY

TABLE_2_1 = {  # m, kPa, p. 213
    0: 101.3, 50: 100.7, 100: 100.1, 150: 99.5, 200: 99.0, 250: 98.4, 300: 97.8, 350: 97.2, 400: 96.7, 450: 96.1,
    500: 95.5, 600: 94.4, 700: 93.3, 800: 92.2, 900: 91.1, 1000: 90.0, 1200: 87.9, 1400: 85.8, 1500: 84.8, 1600: 83.8,
    1800: 81.8, 2000: 79.8, 2500: 75.0, 3000: 70.5, 3500: 66.2, 4000: 62.1,
}  # fmt: skip
TABLE_2_2 = {  # m, kPa/degC, p. 214
    0: 0.067, 100: 0.067, 200: 0.066, 300: 0.065, 400: 0.064, 500: 0.064, 600: 0.063, 700: 0.062, 800: 0.061,
    900: 0.061, 1000: 0.060, 1200: 0.058, 1500: 0.056, 1800: 0.054, 2000: 0.053, 2500: 0.050, 3000: 0.047, 4000: 0.041,
}  # fmt: skip
TABLE_2_3 = {  # degC, kPa, p. 215
    1: 0.657, 2: 0.706, 3: 0.758, 4: 0.813, 5: 0.872, 6: 0.935, 7: 1.002, 8: 1.073, 9: 1.148, 10: 1.228, 11: 1.313,
    12: 1.403, 13: 1.498, 14: 1.599, 15: 1.705, 16: 1.818, 17: 1.938, 18: 2.064, 19: 2.197, 20: 2.338, 21: 2.487,
    22: 2.644, 23: 2.809, 24: 2.984, 25: 3.168, 26: 3.361, 27: 3.565, 28: 3.780, 29: 4.006, 30: 4.243, 31: 4.493,
    32: 4.755, 33: 5.030, 34: 5.319, 35: 5.623, 36: 5.941, 37: 6.275, 38: 6.625, 39: 6.991, 40: 7.376, 41: 7.778,
    42: 8.199, 43: 8.640, 44: 9.101, 45: 9.582, 46: 10.086, 47: 10.613, 48: 11.163, 48.5: 11.447,
}  # fmt: skip
TABLE_2_4 = {  # degC, kPa/degC, p. 216
    1: 0.047, 2: 0.050, 3: 0.054, 4: 0.057, 5: 0.061, 6: 0.065, 7: 0.069, 8: 0.073, 9: 0.078, 10: 0.082, 11: 0.087,
    12: 0.092, 13: 0.098, 14: 0.104, 15: 0.110, 16: 0.116, 17: 0.123, 18: 0.130, 19: 0.137, 20: 0.145, 21: 0.153,
    22: 0.161, 23: 0.170, 24: 0.179, 25: 0.189, 26: 0.199, 27: 0.209, 28: 0.220, 29: 0.231, 30: 0.243, 31: 0.256,
    32: 0.269, 33: 0.282, 34: 0.296, 35: 0.311, 36: 0.326, 37: 0.342, 38: 0.358, 39: 0.375, 40: 0.393, 41: 0.412,
    42: 0.431, 43: 0.451, 44: 0.471, 45: 0.493, 46: 0.515, 47: 0.538, 48: 0.562,
}  # fmt: skip
TABLE_2_8 = {  # degC, MJ m-2 d-1, p. 221
    1: 27.70, 2: 28.11, 4: 28.93, 6: 29.78, 8: 30.64, 10: 31.52, 12: 32.42, 14: 33.34, 15: 33.81, 16: 34.28, 18: 35.24,
    20: 36.21, 22: 37.21, 24: 38.23, 25: 38.75, 26: 39.27, 28: 40.33, 30: 41.41, 32: 42.52, 34: 43.64, 35: 44.21,
    36: 44.79, 38: 45.96, 40: 47.15, 42: 48.37, 44: 49.61, 46: 50.87, 48: 52.16,
}  # fmt: skip
TABLE_2_9 = {  # m, factor, p. 222
    1.0: 1.178, 1.2: 1.125, 1.4: 1.084, 1.6: 1.051, 1.8: 1.023, 2.0: 1.000, 2.2: 0.980, 2.4: 0.963, 2.6: 0.947,
    2.8: 0.933, 3.0: 0.921, 4.0: 0.872, 5.0: 0.838, 6.0: 0.812, 7.0: 0.792, 8.0: 0.775, 9.0: 0.760,
    10.0: 0.748, 10.5: 0.742,
}  # fmt: skip


def agrees(function, table, digits):
    found = function(np.array(list(table), float))
    assert found.tolist() == pytest.approx(list(table.values()), abs=0.5 * 10.0**-digits * 1.0001)


def test_table_2_1_pressure():
    agrees(humidity.pressure_from_elevation, TABLE_2_1, 1)


def test_table_2_2_psychrometric_constant():
    agrees(lambda z: humidity.psychrometric_constant(humidity.pressure_from_elevation(z)), TABLE_2_2, 3)


def test_table_2_3_saturation_vapour_pressure():
    agrees(humidity.saturation_vapour_pressure, TABLE_2_3, 3)


def test_table_2_4_slope():
    agrees(humidity.slope_of_saturation, TABLE_2_4, 3)


def test_table_2_8_black_body():
    # the emission of a black surface under a clear, perfectly dry sky is the net longwave over 0.34
    agrees(lambda t: reference.net_longwave(t, t, 0.0, 1.0) / 0.34, TABLE_2_8, 2)
    assert STEFAN_BOLTZMANN_DAY == 4.903e-9


def test_table_2_9_wind_factor():
    agrees(lambda height: reference.wind_at_2m(1.0, height), TABLE_2_9, 3)


@pytest.mark.parametrize(
    ("date", "day"),
    [
        ("2031-01-01", 1), ("2031-03-01", 60), ("2031-06-01", 152), ("2031-07-01", 182), ("2031-10-01", 274),
        ("2031-12-31", 365), ("2032-02-29", 60), ("2032-03-01", 61), ("2032-07-01", 183),
    ],
)  # fmt: skip
def test_table_2_5_day_of_the_year(date, day):  # pp. 217-218
    assert solar.day_of_year(np.datetime64(date)) == day


def test_table_2_5_rule_for_every_day():  # p. 217
    dates = np.arange("2031-01-01", "2033-01-01", dtype="datetime64[D]")
    parts = np.array([[int(part) for part in str(date).split("-")] for date in dates])
    year, month, day = parts.T
    rule = np.floor(275 * month / 9 - 30 + day) - 2 + 2 * (month < 3) + ((year % 4 == 0) & (month > 2))
    assert solar.day_of_year(dates).tolist() == rule.tolist()


def test_annex_3_latent_heat():  # eq. 3-1, p. 223
    assert humidity.latent_heat_of_vaporization(20.0) == pytest.approx(2.45, abs=0.005)


def test_annex_3_virtual_temperature():  # eq. 3-6, p. 224: T / (1 - 0.378 e / P)
    t, e, p = np.array([0.0, 20.0, 35.0]), np.array([0.5, 2.0, 4.0]), 95.0
    q = humidity.specific_humidity(e, p)
    expected = (t + 273.15) / (1.0 - 0.378 * e / p) - 273.15
    assert humidity.virtual_temperature(t, q).tolist() == pytest.approx(expected.tolist(), abs=1e-9)


@pytest.mark.parametrize("ea", [0.3, 0.7, 1.409, 2.5, 4.0])
def test_annex_3_dew_point(ea):  # eq. 3-11, p. 225; its constants are rounded: 116.91 / 16.78 against eq. 11
    annex = (116.91 + 237.3 * np.log(ea)) / (16.78 - np.log(ea))
    assert humidity.dew_point(ea) == pytest.approx(annex, abs=0.02)


# FAO-56 eqs. 3-18 and 3-20; ASCE-EWRI (2005) eqs. D.2 and D.4 as quoted elsewhere (the report itself was not seen)
FORMS = {"fao56": (0.091, 0.25, 0.33), "ewri": (0.075, 0.4, 0.36)}


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize(
    ("latitude", "day", "p", "e", "turbidity"),
    [(42.0, 180, 98.0, 2.2, 1.0), (13.7, 105, 101.3, 2.85, 0.8), (50.0, 350, 99.0, 0.6, 0.2)],
)
def test_annex_3_clear_sky_with_water_vapour(latitude, day, p, e, turbidity, form):  # eqs. 3-16 to 3-20, transcribed
    factor, power, slope = FORMS[form]
    phi = np.radians(latitude)
    sine = np.sin(max(0.85 + 0.3 * phi * np.sin(2 * np.pi / 365 * day - 1.39) - 0.42 * phi**2, 0.0))
    water = 0.14 * e * p + 2.1
    direct = 0.98 * np.exp(-0.00146 * p / (turbidity * sine) - factor * (water / sine) ** power)
    assert (direct < 0.15) == (turbidity == 0.2)
    diffuse = 0.35 - slope * direct if direct >= 0.15 else 0.18 + 0.82 * direct
    expected = (direct + diffuse) * solar.extraterrestrial_radiation(latitude, day)
    found = solar.clear_sky_radiation_humid(latitude, day, p, e, turbidity, form=form)
    assert found == pytest.approx(expected, rel=1e-12)


def test_annex_3_clear_sky_forms_agree_within_reason():
    # the two sets of coefficients and eq. 37 describe the same sky: within 6 % on a clean, fairly dry midsummer day
    day = 180
    simple = solar.clear_sky_radiation(solar.extraterrestrial_radiation(42.0, day), 200.0)
    p = humidity.pressure_from_elevation(200.0)
    for form in ("ewri", "fao56"):
        assert solar.clear_sky_radiation_humid(42.0, day, p, 1.2, form=form) == pytest.approx(simple, rel=0.06)
    # moist and turbid air lets less through
    assert solar.clear_sky_radiation_humid(42.0, day, p, 2.8) < solar.clear_sky_radiation_humid(42.0, day, p, 1.2)
    assert solar.clear_sky_radiation_humid(42.0, day, p, 1.2, 0.7) < solar.clear_sky_radiation_humid(42.0, day, p, 1.2)
