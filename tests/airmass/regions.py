"""Invented regions for the air: a grid of square counties with plausible summer days."""

from dataclasses import replace

import numpy as np

from etflux.airmass import AirInputs
from etflux.wind import OUTSIDE, Region, Winds

SOURCES = ("corn", "soybean", "rest")


def plane(nx=5, ny=4, side_km=40.0, turn=0.0, water_edge=None):
    """Square cells on a plane, turned about the origin; counties by row from the south-west."""
    number = np.arange(nx * ny).reshape(ny, nx)
    first, second, east, north = [], [], [], []

    def face(a, b, way):
        for i, j in zip(np.ravel(a), np.ravel(b), strict=True):
            first.append(i), second.append(j), east.append(way[0] * side_km), north.append(way[1] * side_km)

    out = np.full(nx * ny, OUTSIDE)
    face(number[:, :-1], number[:, 1:], (1.0, 0.0))
    face(number[:-1], number[1:], (0.0, 1.0))
    for edge, way in (
        (number[:, -1], (1.0, 0.0)), (number[:, 0], (-1.0, 0.0)), (number[-1], (0.0, 1.0)), (number[0], (0.0, -1.0)),
    ):  # fmt: skip
        face(edge, out[: edge.size], way)
    e, n = np.array(east), np.array(north)
    c, s = np.cos(turn), np.sin(turn)
    water = np.zeros(nx * ny, dtype=bool) if water_edge is None else water_edge
    return Region(
        np.array(first), np.array(second), c * e - s * n, s * e + c * n, np.arange(nx * ny),
        np.full(nx * ny, side_km**2), np.zeros(nx * ny), water,
    )  # fmt: skip


def steady(u, v, days, counties):
    """The same wind every day and night everywhere."""
    east, north = np.full((days, counties), float(u)), np.full((days, counties), float(v))
    return Winds(east, north, east.copy(), north.copy())


def summer(
    days=5, nx=5, ny=4, side_km=40.0, et_mm=5.0, shares=(0.5, 0.3, 0.2), depth_m=np.nan, wind=None, latitude=42.0,
    longitude=-93.0, **changes,
):  # fmt: skip
    """Humid July days: 31/20 degC, 23 MJ m-2, air of 18 degC dew point; `wind` is u, v or a Winds."""
    n = nx * ny
    km_deg = 111.195
    y, x = np.divmod(np.arange(n), nx)
    lat = latitude + (y - (ny - 1) / 2.0) * side_km / km_deg
    lon = longitude + (x - (nx - 1) / 2.0) * side_km / (km_deg * np.cos(np.radians(latitude)))

    def daily(value):
        return np.full((days, n), float(value))

    water = et_mm * np.asarray(shares) * np.ones((days, n, 1))
    inputs = AirInputs(
        dates=np.datetime64("2031-07-20") + np.arange(days),
        county_ids=tuple(f"c{k:03d}" for k in range(n)),
        latitude_deg=lat,
        longitude_deg=lon,
        elevation_m=np.full(n, 300.0),
        area_km2=np.full(n, side_km**2),
        t_max_c=daily(31.0),
        t_min_c=daily(20.0),
        dew_point_c=daily(19.0),
        vapour_pressure_kpa=daily(2.2),
        rs_mj_m2_d=daily(24.0),
        rain_mm=daily(0.0),
        dew_point_morning_c=daily(18.5),
        albedo=daily(0.23),
        ground_cover=daily(0.9),
        forecast=np.zeros((days, n), dtype=bool),
        sources=SOURCES,
        water_mm=water,
        represented=np.full(n, float(np.sum(shares[:-1]))),
        given_depth_m=daily(depth_m),
        given_hour=daily(np.nan),
    )
    if wind is not None:
        winds = wind if isinstance(wind, Winds) else steady(*wind, days, n)
        inputs = replace(inputs, region=plane(nx, ny, side_km), winds=winds)
    return replace(inputs, **changes) if changes else inputs


def noisy(days, counties, seed=1, mean=(3.0, 1.0), spread=3.0):
    """Winds that gather and part without sense."""
    rng = np.random.default_rng(seed)
    return Winds(*(rng.normal(mean[k % 2], spread, (days, counties)) for k in range(4)))
