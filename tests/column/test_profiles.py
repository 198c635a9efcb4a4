"""Morning profiles: from tables to layers, stable from the ground up, continued, blended, and the standard profile."""

import numpy as np
import pandas as pd
import pytest

from etflux import humidity, profiles
from etflux.case import Settings
from etflux.column import EDGES, LAYER_MASS, virtual_theta
from etflux.humidity import FREEZING_K, KAPPA
from etflux.variables import flag_bits

AIR = flag_bits("air")
LEVELS_M = np.array([2.0, 60.0, 150.0, 300.0, 600.0, 1000.0, 1400.0, 1600.0, 2200.0, 3000.0, 4000.0, 5500.0, 6500.0])


def sounding(site="a", time="2031-07-27 11:30", latitude=42.0, longitude=-93.0, elevation=300.0, **columns):
    """Stable below 150 m, neutral to 1400 m, a cap, free air; dew point 2 K and more below."""
    z = columns.pop("height_m", LEVELS_M)
    t = np.interp(z, [2.0, 150.0], [20.0, 25.0]) - 0.0085 * np.maximum(z - 150.0, 0.0)
    t += np.interp(z, [1400.0, 1600.0], [0.0, 4.0]) + 0.0035 * np.maximum(z - 1600.0, 0.0)
    rows = pd.DataFrame(
        {
            "site_id": site, "time": pd.Timestamp(time), "latitude_deg": latitude, "longitude_deg": longitude,
            "elevation_m": elevation, "height_m": z, "temperature_c": t,
            "dew_point_c": np.minimum(19.0 - 0.004 * z - np.interp(z, [1400.0, 1600.0], [0.0, 8.0]), t - 0.5),
        }
    )  # fmt: skip
    return rows.assign(**columns)


def water(q):
    return (q * LAYER_MASS).sum(axis=-1)


def test_levels_by_height_and_by_pressure_agree():
    rows = sounding()
    (by_height,) = profiles.site_profiles(rows)
    e = humidity.vapour_pressure_from_dew_point(rows["dew_point_c"].to_numpy())
    pressure = profiles._pressures(
        rows["height_m"].to_numpy(), rows["temperature_c"].to_numpy(), e, float(humidity.pressure_from_elevation(300.0))
    )
    (by_pressure,) = profiles.site_profiles(rows.drop(columns="height_m").assign(pressure_kpa=pressure))
    assert by_pressure.theta_k == pytest.approx(by_height.theta_k, abs=1e-6)
    assert by_pressure.q_kg_kg == pytest.approx(by_height.q_kg_kg, abs=1e-9)
    assert by_height.ground_kpa == pytest.approx(97.8, abs=0.1)  # FAO-56 Table 2.1, 300 m


def test_relative_humidity_serves_where_the_dew_point_is_blank():
    rows = sounding()
    e = humidity.vapour_pressure_from_dew_point(rows["dew_point_c"].to_numpy())
    rh = humidity.relative_humidity(e, rows["temperature_c"].to_numpy())
    (one,) = profiles.site_profiles(rows)
    (other,) = profiles.site_profiles(rows.assign(dew_point_c=np.nan, rh_mean_pct=rh))
    assert other.q_kg_kg == pytest.approx(one.q_kg_kg, rel=1e-9)


def test_layer_means_keep_the_integral():
    mass = np.array([0.0, 130.0, 900.0, 2500.0, EDGES[-1] + 500.0])
    values = np.array([290.0, 296.0, 297.0, 301.0, 330.0])
    x = np.union1d(np.linspace(0.0, EDGES[-1], 200_001), mass[mass < EDGES[-1]])
    exact = np.trapezoid(np.interp(x, mass, values), x)
    assert water(profiles.layer_means(mass, values)) == pytest.approx(exact, rel=1e-12)


def test_unstable_layers_are_mixed_from_the_ground_up_and_conserve():
    rng = np.random.default_rng(5)
    theta = 300.0 + 0.003 * EDGES[1:] + rng.normal(0.0, 1.0, len(LAYER_MASS))
    q = 0.012 * rng.random(len(LAYER_MASS))
    stable, moist = profiles.mixed_dry(theta, q)
    assert (np.diff(virtual_theta(stable, moist)) > -1e-10).all()
    assert water(stable) == pytest.approx(water(theta), rel=1e-12)
    assert water(moist) == pytest.approx(water(q), rel=1e-12)
    again = profiles.mixed_dry(stable, moist)
    assert again[0] == pytest.approx(stable, abs=1e-9)


def test_flags_of_a_profile():
    (plain,) = profiles.site_profiles(sounding())
    assert plain.flags == 0
    rows = sounding()
    warm = rows["temperature_c"] + np.where(rows["height_m"] < 30.0, 9.0, 0.0)
    (unstable,) = profiles.site_profiles(rows.assign(temperature_c=warm))
    assert unstable.flags == AIR["unstable_morning"]
    (short,) = profiles.site_profiles(rows[rows["height_m"] <= 3000.0])
    assert short.flags == AIR["extended_profile"]
    above = np.isclose(EDGES[1:], EDGES[-1])
    assert (np.diff(short.theta_k)[above[1:]] >= 0.003 * 320.0 - 1e-9).all()  # at least 3 K/km
    dry = rows["dew_point_c"] - np.where(rows["height_m"] < 200.0, 6.0, 0.0)
    (moist_above,) = profiles.site_profiles(rows.assign(dew_point_c=dry))
    assert moist_above.flags == AIR["moist_above"]


@pytest.mark.parametrize(
    ("time", "used"),
    [
        ("2031-07-27 06:30", True),  # 0.2 h local solar
        ("2031-07-27 05:50", False),  # 23.5 h of the day before
        ("2031-07-27 13:45", True),  # 7.4 h, sunrise 4.7 h
        ("2031-07-27 14:40", False),  # 8.4 h
        ("2031-07-28 00:00", False),  # afternoon
    ],
)
def test_hours_of_a_morning_profile(time, used):
    assert bool(profiles.site_profiles(sounding(time=time))) is used


def test_later_of_two_profiles_of_one_morning_and_too_few_levels():
    both = pd.concat([sounding(time="2031-07-27 08:00"), sounding(time="2031-07-27 11:30")], ignore_index=True)
    (site,) = profiles.site_profiles(both)
    assert site.solar_hour == pytest.approx(5.2, abs=0.1)
    assert profiles.site_profiles(sounding(height_m=LEVELS_M[[0, 3, 6, 9]])) == []


def _blend(sites, latitude, longitude, within=250.0, pressure=97.8):
    n = len(latitude)
    standard = (np.full((n, len(LAYER_MASS)), 280.0), np.full((n, len(LAYER_MASS)), 0.004))
    return profiles.blend(
        sites, np.array(latitude), np.array(longitude), within, standard, np.full(n, pressure), np.full(n, 4.7)
    )


def test_sites_are_blended_by_inverse_distance_and_far_counties_take_the_standard_profile():
    table = pd.concat([sounding("a"), sounding("b", longitude=-91.0, elevation=300.0).assign(
        temperature_c=lambda rows: rows["temperature_c"] + 2.0)], ignore_index=True)  # fmt: skip
    sites = profiles.site_profiles(table)
    found = _blend(sites, [42.0, 42.0, 42.0, 50.0], [-92.0, -92.5, -93.0, -92.0], pressure=sites[0].ground_kpa)
    a, b = (site.theta_k for site in sites)
    assert found.theta_k[0] == pytest.approx(0.5 * (a + b), abs=1e-6)
    assert found.theta_k[1] == pytest.approx(0.75 * a + 0.25 * b, abs=0.01)
    assert found.theta_k[2] == pytest.approx(a, abs=0.02)  # beside the site
    assert (found.theta_k[3] == 280.0).all()
    assert found.flags.tolist() == [0, 0, 0, AIR["standard_profile"]]
    assert np.isnan(found.distance_km[3])
    assert found.distance_km[0] == pytest.approx(82.6, abs=0.5)
    assert found.start_hour[0] == pytest.approx(5.3, abs=0.2)
    assert found.start_hour[3] == 4.7


def test_a_profile_over_higher_ground_is_referred_to_that_ground():
    sites = profiles.site_profiles(sounding())
    low = _blend(sites, [42.0], [-93.0], pressure=sites[0].ground_kpa)
    high = _blend(sites, [42.0], [-93.0], pressure=0.9 * sites[0].ground_kpa)
    assert high.theta_k == pytest.approx(low.theta_k * 0.9**KAPPA, rel=1e-12)


def _standard(t_min=18.0, t_max=30.0, depth=1500.0, dew=17.0, free=31.0, settings=None):
    one = np.array([1.0])
    return profiles.standard_profile(
        t_min * one, t_max * one, depth * one, dew * one, free * one, 98.0 * one, settings or Settings()
    )


def test_standard_profile():
    theta, q = _standard()
    assert (np.diff(theta[0]) >= 0.0).all()
    assert theta[0, 0] - FREEZING_K == pytest.approx(18.0, abs=1.5)
    inside = (EDGES[1:] > 400.0) & (EDGES[1:] < 1550.0)  # residual layer: yesterday's highest less 1 K
    assert theta[0, inside] - FREEZING_K == pytest.approx(np.full(inside.sum(), 29.0), abs=1e-9)
    jump = np.diff(theta[0]).max()
    assert jump >= 0.5
    assert q[0, 0] == pytest.approx(humidity.specific_humidity(humidity.saturation_vapour_pressure(17.0), 98.0))
    assert (np.diff(q[0]) <= 0.0).all()
    assert q[0, -1] < 0.5 * q[0, 0]


def test_standard_profile_keeps_a_cap_and_takes_nan():
    theta, _ = _standard(t_max=36.0, free=20.0)  # free air colder than the residual layer: half a kelvin of cap
    assert (np.diff(theta[0]) >= 0.0).all()
    theta, q = _standard(t_min=np.nan)
    assert np.isnan(theta).all()
    theta, q = _standard(dew=np.nan)
    assert np.isfinite(theta).all()
    assert np.isnan(q).all()
