"""A witness from outside: reference ET against the library pyet, on random plausible weather.

What pyet does differently, and how the inputs are matched:

- it has no least wind: winds here are above 0.5 m/s;
- its sigma is 4.903e-9 also for ASCE-EWRI, whose own is 4.901e-9: ours is given pyet's;
- pi is 3.141592654 in its radiation: 1.3e-10 relative;
- negative values become 0 in both.

Saturation, slope, pressure, clear-sky radiation and the limits 0.3 and 1 of Rs/Rso are the same equations of FAO-56.
"""

import subprocess
import sys

import numpy as np
import pandas as pd
import pyet
import pytest
import xarray as xr

from etflux import humidity, reference, solar

REL = 1e-6


@pytest.fixture(scope="module")
def weather():
    """Two years at 12 places between 55 south and 65 north, from -25 to 45 degC, clear and overcast, dry and moist."""
    rng = np.random.default_rng(20)
    dates = pd.date_range("2031-01-01", "2032-12-31")
    shape = (len(dates), 12)
    latitude = np.linspace(-55.0, 65.0, shape[1])
    day = solar.day_of_year(dates)[:, None]
    season = -np.cos(2.0 * np.pi * (day - 20.0) / 365.0) * np.sign(latitude)
    t_min = 8.0 + 12.0 * season + rng.normal(0.0, 5.0, shape)
    t_max = t_min + rng.uniform(1.0, 20.0, shape)
    return {
        "dates": dates,
        "day": day,
        "latitude": latitude,
        "elevation": rng.uniform(0.0, 2500.0, shape[1]),
        "t_max": t_max,
        "t_min": t_min,
        "ea": humidity.saturation_vapour_pressure(t_min) * rng.uniform(0.3, 1.05, shape),
        "rs": solar.extraterrestrial_radiation(latitude, day) * rng.uniform(0.05, 0.80, shape),
        "u2": rng.uniform(0.6, 9.0, shape),
    }


def labelled(weather):
    time = weather["dates"]

    def days(name):
        return xr.DataArray(weather[name], dims=("time", "station"), coords={"time": time})

    return {
        "tmean": 0.5 * (days("t_max") + days("t_min")),
        "wind": days("u2"),
        "rs": days("rs"),
        "tmax": days("t_max"),
        "tmin": days("t_min"),
        "ea": days("ea"),
        "elevation": xr.DataArray(weather["elevation"], dims="station"),
        "lat": xr.DataArray(np.radians(weather["latitude"]), dims="station"),
    }


def ours(weather):
    names = ("t_max", "t_min", "ea", "rs", "u2", "elevation", "latitude", "day")
    return [weather[name] for name in names]


def agree(found, witness):
    assert np.isfinite(witness).all()
    assert (witness > 0.5).mean() > 0.5  # weather worth comparing
    np.testing.assert_allclose(found, witness, rtol=REL, atol=1e-9)


def test_daily_fao56(weather):
    agree(reference.eto_fao56(*ours(weather)), pyet.pm_fao56(**labelled(weather)).values)


@pytest.mark.parametrize(("surface", "etype"), [("short", "os"), ("tall", "rs")])
def test_daily_asce(weather, surface, etype):
    found = reference.et_asce(*ours(weather), surface, sigma=4.903e-9)
    agree(found, pyet.pm_asce(**labelled(weather), etype=etype).values)


def test_sigma_of_asce_is_what_is_left(weather):
    own = reference.et_asce(*ours(weather), "short")
    witness = pyet.pm_asce(**labelled(weather)).values
    difference = own - witness
    assert np.all(difference >= -1e-9)  # a smaller sigma loses less
    assert 0.0005 < difference.max() < 0.003


def test_relative_humidity_of_the_witness(weather):
    rng = np.random.default_rng(3)
    rh_max, rh_min = rng.uniform(70.0, 100.0, weather["ea"].shape), rng.uniform(20.0, 60.0, weather["ea"].shape)
    ea = humidity.vapour_pressure_from_rh_max_min(weather["t_max"], weather["t_min"], rh_max, rh_min)
    given = labelled(weather)
    del given["ea"]
    like = given["tmean"]
    witness = pyet.pm_fao56(**given, rhmax=like.copy(data=rh_max), rhmin=like.copy(data=rh_min))
    agree(reference.eto_fao56(*ours(weather | {"ea": ea})), witness.values)


def test_radiation(weather):
    witness = pyet.extraterrestrial_r(weather["dates"], xr.DataArray(np.radians(weather["latitude"]), dims="station"))
    ra = solar.extraterrestrial_radiation(weather["latitude"], weather["day"])
    np.testing.assert_allclose(ra, witness.values, rtol=REL)
    hours = pyet.daylight_hours(weather["dates"], xr.DataArray(np.radians(weather["latitude"]), dims="station"))
    np.testing.assert_allclose(solar.daylight_hours(weather["latitude"], weather["day"]), hours, rtol=REL)


# --- second opinions ---


def opinions(weather, **changes):
    given = weather | changes
    ra = solar.extraterrestrial_radiation(given["latitude"], given["day"])
    rso = solar.clear_sky_radiation(ra, given["elevation"])
    rn = reference.net_radiation(given["rs"], rso, given["t_max"], given["t_min"], given["ea"])
    found = reference.second_opinions(
        given["dates"], given["t_max"], given["t_min"], given["ea"], given["rs"], given["u2"], rn,
        given["elevation"], given["latitude"],
    )  # fmt: skip
    return found, rn


def test_second_opinions_station_by_station(weather):
    found, rn = opinions(weather)
    for station in (1, 7, 10):
        series = {
            name: pd.Series(weather[name][:, station], weather["dates"])
            for name in ("t_max", "t_min", "rs", "u2", "ea")
        }
        t = 0.5 * (series["t_max"] + series["t_min"])
        z, lat = float(weather["elevation"][station]), float(np.radians(weather["latitude"][station]))
        alone = {
            "eto_hargreaves_mm": pyet.hargreaves(t, series["t_max"], series["t_min"], lat),
            "eto_makkink_mm": pyet.makkink(t, series["rs"], elevation=z),
            "eto_priestley_taylor_mm": pyet.priestley_taylor(
                t, rn=pd.Series(rn[:, station], weather["dates"]), elevation=z
            ),
        }
        for name, values in alone.items():
            np.testing.assert_allclose(found[name][:, station], values, rtol=1e-9, atol=1e-12)


def test_hargreaves_of_the_witness_and_of_fao56(weather):
    found, _ = opinions(weather)
    ra = solar.extraterrestrial_radiation(weather["latitude"], weather["day"])
    t_mean = 0.5 * (weather["t_max"] + weather["t_min"])
    # eq. 52 divides by 2.45 (0.408), the library by the latent heat of the air
    own = reference.eto_hargreaves(weather["t_max"], weather["t_min"], ra) / 0.408
    own = np.maximum(own, 0.0) / humidity.latent_heat_of_vaporization(t_mean)
    np.testing.assert_allclose(found["eto_hargreaves_mm"], own, rtol=1e-6, atol=1e-9)


def test_second_opinions_are_opinions_on_the_same_weather(weather):
    found, _ = opinions(weather)
    assert list(found) == [
        "eto_hargreaves_mm", "eto_priestley_taylor_mm", "eto_makkink_mm",
        "eto_turc_mm", "eto_penman_mm", "eto_spread_mm",
    ]  # fmt: skip
    methods = np.stack([values for name, values in found.items() if name != "eto_spread_mm"])
    assert np.all(methods >= 0.0)
    np.testing.assert_array_equal(found["eto_spread_mm"], methods.max(axis=0) - methods.min(axis=0))
    eto = reference.eto_fao56(*ours(weather))
    warm = eto > 2.0
    for values in methods:
        assert np.corrcoef(values[warm], eto[warm])[0, 1] > 0.5


def test_second_opinions_of_days_at_exactly_zero_and_below(weather):
    # the library divides the temperature by itself and so loses a day at 0 degC
    t_max, t_min = weather["t_max"].copy(), weather["t_min"].copy()
    t_max[0], t_min[0] = 5.0, -5.0
    t_max[1], t_min[1] = -10.0, -25.0
    ea = np.minimum(weather["ea"], humidity.saturation_vapour_pressure(t_min))
    found, _ = opinions(weather, t_max=t_max, t_min=t_min, ea=ea)
    assert found["eto_turc_mm"][:2].max() == 0.0
    missing = weather["rs"].copy()
    missing[0, 3] = np.nan
    assert np.isnan(opinions(weather, t_max=t_max, t_min=t_min, ea=ea, rs=missing)[0]["eto_turc_mm"][0, 3])
    assert all(np.isfinite(values).all() for values in found.values())


def test_second_opinions_keep_missing_days_missing(weather):
    rs = weather["rs"].copy()
    rs[4, 2] = np.nan
    found, _ = opinions(weather, rs=rs)
    for name, values in found.items():
        assert np.isnan(values[4, 2]) == (name != "eto_hargreaves_mm")  # which needs no radiation
        assert np.isnan(values).sum() <= 1
    found, _ = opinions(weather, rs=np.full_like(rs, np.nan))
    assert all(np.isnan(values).all() for values in found.values())


def test_second_opinions_of_one_station():
    dates = np.arange("2031-06-01", "2031-06-04", dtype="datetime64[D]")
    found = reference.second_opinions(
        dates, [28.0, 30.0, 31.0], [15.0, 16.0, 18.0], [1.6, 1.7, 1.9], [24.0, 25.0, 22.0], [2.0, 2.5, 3.0],
        [14.0, 15.0, 13.0], 300.0, 42.0,
    )  # fmt: skip
    assert all(values.shape == (3,) for values in found.values())
    assert all(np.all((values > 0.0) & (values < 10.0)) for values in found.values())


def test_the_witness_is_loaded_when_asked_for():
    code = "import sys; import etflux.reference; print('pyet' in sys.modules, 'xarray' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["False", "False"]
