"""Allen et al. (1998), FAO Irrigation and Drainage Paper 56: examples 15, 16 and 20, weather that was not measured.

Numbers are the printed ones; the tolerance is half the last printed digit unless a line says otherwise.
"""

import numpy as np
import pytest

from etflux import humidity, reference, solar

LATITUDE = 45.0 + 43.0 / 60.0  # examples 15 and 20: 200 m, July


def printed(value, digits):
    return pytest.approx(value, abs=0.5 * 10.0**-digits * 1.0001)


def test_example_15_radiation_from_the_temperature_range():  # p. 61
    ra = solar.extraterrestrial_radiation(LATITUDE, 196)
    assert ra == printed(40.6, 1)
    rs = solar.radiation_from_temperature_range(ra, 26.6, 14.8, 0.16)
    assert rs == printed(22.3, 1)
    assert 0.408 * rs == printed(9.1, 1)


def test_example_16_net_radiation_without_radiation_data():  # p. 62
    ra = solar.extraterrestrial_radiation(13.0 + 44.0 / 60.0, 105)
    assert ra == printed(38.1, 1)
    rso = solar.clear_sky_radiation(ra, 0.0)  # the example takes 0.75 Ra
    assert rso == printed(28.5, 1)
    rs = solar.radiation_from_temperature_range(ra, 34.8, 25.6, 0.19, rso)
    assert rs == printed(21.9, 1)
    assert reference.net_shortwave(rs) == printed(16.9, 1)
    assert reference.net_longwave(34.8, 25.6, 2.85, rs / rso) == printed(3.0, 1)
    rn = reference.net_radiation(rs, rso, 34.8, 25.6, 2.85)
    assert rn == printed(13.9, 1)
    assert 0.408 * rn == printed(5.7, 1)


def test_estimated_radiation_is_never_above_a_clear_sky():  # p. 61
    ra = solar.extraterrestrial_radiation(40.0, 180)
    rso = solar.clear_sky_radiation(ra, 1000.0)
    assert solar.radiation_from_temperature_range(ra, 45.0, 15.0, 0.19, rso) == rso


def example_20(u2):
    t_max, t_min = 26.6, 14.8
    ea = humidity.vapour_pressure_from_dew_point(t_min)  # eq. 48
    ra = solar.extraterrestrial_radiation(LATITUDE, 196)
    rs = solar.radiation_from_temperature_range(ra, t_max, t_min, 0.16)
    return reference.eto_fao56(t_max, t_min, ea, rs, u2, 200.0, LATITUDE, 196)


def test_example_20_step_by_step():  # pp. 77-78
    t_max, t_min, u2 = 26.6, 14.8, 2.0
    assert humidity.slope_of_saturation(20.7) == printed(0.150, 3)
    pressure = humidity.pressure_from_elevation(200.0)
    assert humidity.psychrometric_constant(pressure) == printed(0.066, 3)
    ea = humidity.vapour_pressure_from_dew_point(t_min)
    assert ea == printed(1.68, 2)
    es = humidity.mean_saturation_vapour_pressure(t_max, t_min)
    assert es == printed(2.58, 2)
    humidities = humidity.relative_humidity(ea, [t_min, t_max])
    assert humidities.tolist() == [printed(100.0, 0), printed(48.0, 0)]
    assert humidities.mean() == printed(74.0, 0)
    ra = solar.extraterrestrial_radiation(LATITUDE, 196)
    assert ra == pytest.approx(40.55, abs=0.006)  # 40.5551: printed rounded down
    rs = solar.radiation_from_temperature_range(ra, t_max, t_min, 0.16)
    assert rs == printed(22.29, 2)
    rso = solar.clear_sky_radiation(ra, 200.0)
    assert rso == printed(30.58, 2)
    assert reference.net_shortwave(rs) == printed(17.16, 2)
    assert reference.net_longwave(t_max, t_min, ea, rs / rso) == printed(3.68, 2)
    rn = reference.net_radiation(rs, rso, t_max, t_min, ea)
    assert rn == printed(13.48, 2)
    assert reference.penman_monteith(t_max, t_min, es, rn, u2, pressure) == printed(3.17, 2)
    assert reference.penman_monteith(t_max, t_min, ea, 0.0, u2, pressure) == printed(1.39, 2)
    assert example_20(u2) == printed(4.56, 2)


@pytest.mark.parametrize(("u2", "eto"), [(1.0, 4.2), (3.0, 4.8)])
def test_example_20_other_winds(u2, eto):  # p. 78
    assert example_20(u2) == printed(eto, 1)


def test_example_20_hargreaves():  # p. 78, eq. 52
    ra = solar.extraterrestrial_radiation(LATITUDE, 196)
    assert reference.eto_hargreaves(26.6, 14.8, ra) == printed(5.0, 1)


def test_calm_counts_as_half_a_metre_per_second():  # p. 63
    assert example_20(0.0) == example_20(0.5)
    assert example_20(0.6) > example_20(0.5)
    assert np.isnan(example_20(np.nan))
