"""Speed of daily reference ET: 3,000 stations by 365 days, one thread, against pyet.pm_fao56 in the same run.

Both get the same arrays (temperatures, vapour pressure, solar radiation, wind, elevation, latitude) and both work out
pressure, clear-sky and net radiation. They run in turn, so that both meet the same machine; the ratio is of the best
times. Run: pytest tests/benchmarks/test_reference_et.py --benchmark-enable -s. Times are printed, never asserted.
"""

import time

import numpy as np
import pandas as pd
import pyet
import pytest
import xarray as xr

from etflux import humidity, reference, solar
from etflux.reference import daily

N_STATIONS, N_DAYS = 3_000, 365


@pytest.fixture(scope="module")
def weather():
    rng = np.random.default_rng(1)
    shape = (N_DAYS, N_STATIONS)
    dates = pd.date_range("2031-01-01", periods=N_DAYS)
    day = solar.day_of_year(dates)[:, None]
    latitude = rng.uniform(25.0, 50.0, N_STATIONS)
    t_min = rng.uniform(-5.0, 20.0, shape)
    return {
        "t_max": t_min + rng.uniform(5.0, 15.0, shape),
        "t_min": t_min,
        "ea": humidity.saturation_vapour_pressure(t_min) * rng.uniform(0.5, 1.0, shape),
        "rs": solar.extraterrestrial_radiation(latitude, day) * rng.uniform(0.2, 0.75, shape),
        "u2": rng.uniform(0.6, 6.0, shape),
        "elevation": rng.uniform(0.0, 1500.0, N_STATIONS),
        "latitude": latitude,
        "day": day,
        "dates": dates,
    }


def peer_arguments(weather):
    def days(values):
        return xr.DataArray(values, dims=("time", "station"), coords={"time": weather["dates"]})

    return {
        "tmean": days(0.5 * (weather["t_max"] + weather["t_min"])),
        "tmax": days(weather["t_max"]),
        "tmin": days(weather["t_min"]),
        "ea": days(weather["ea"]),
        "rs": days(weather["rs"]),
        "wind": days(weather["u2"]),
        "elevation": xr.DataArray(weather["elevation"], dims="station"),
        "lat": xr.DataArray(np.radians(weather["latitude"]), dims="station"),
    }


def best_of(calls, rounds):
    best = [np.inf] * len(calls)
    for _ in range(rounds):
        for index, call in enumerate(calls):
            start = time.perf_counter()
            call()
            best[index] = min(best[index], time.perf_counter() - start)
    return best


def test_daily_eto(weather, benchmark, capsys):
    ours = [weather[name] for name in ("t_max", "t_min", "ea", "rs", "u2", "elevation", "latitude", "day")]
    peer = peer_arguments(weather)
    found = benchmark(reference.eto_fao56, *ours)
    np.testing.assert_allclose(found, pyet.pm_fao56(**peer).values, rtol=1e-6, atol=1e-9)
    if benchmark.enabled:
        fast, slow = best_of([lambda: reference.eto_fao56(*ours), lambda: pyet.pm_fao56(**peer)], 10)
        with capsys.disabled():
            values = N_STATIONS * N_DAYS
            print(
                f"\ndaily ETo, {N_STATIONS} stations x {N_DAYS} days, {daily.BLOCK_VALUES} values a block, one thread: "
                f"{values / fast / 1e6:.1f} million station-days/s, {slow / fast:.1f} x pyet.pm_fao56"
            )


def test_blocks_against_all_days_at_once(weather, benchmark, monkeypatch, capsys):
    ours = [weather[name] for name in ("t_max", "t_min", "ea", "rs", "u2", "elevation", "latitude", "day")]
    in_blocks = reference.eto_fao56(*ours)

    def whole():
        with monkeypatch.context() as patch:
            patch.setattr(daily, "BLOCK_VALUES", N_STATIONS * N_DAYS)
            return reference.eto_fao56(*ours)

    np.testing.assert_array_equal(benchmark(whole), in_blocks)
    if benchmark.enabled:
        fast, slow = best_of([lambda: reference.eto_fao56(*ours), whole], 8)
        with capsys.disabled():
            print(f"\ndaily ETo in blocks: {slow / fast:.1f} x all days at once")


def test_second_opinions(weather, benchmark, capsys):
    rso = solar.clear_sky_radiation(
        solar.extraterrestrial_radiation(weather["latitude"], weather["day"]), weather["elevation"]
    )
    rn = reference.net_radiation(weather["rs"], rso, weather["t_max"], weather["t_min"], weather["ea"])
    names = ("dates", "t_max", "t_min", "ea", "rs", "u2")
    arguments = [*(weather[name] for name in names), rn, weather["elevation"], weather["latitude"]]
    found = benchmark.pedantic(reference.second_opinions, arguments, rounds=3)
    assert all(np.isfinite(values).all() for values in found.values())
    if benchmark.enabled:
        with capsys.disabled():
            print(f"\nfive second opinions, {N_STATIONS} stations x {N_DAYS} days: {benchmark.stats['min']:.2f} s")
