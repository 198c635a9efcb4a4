"""Heat that a day gives to the air of every county, hour by hour, and when its water leaves the ground."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from etflux import column, reference, solar
from etflux.airmass.inputs import AirInputs, Day
from etflux.column import HOURS
from etflux.humidity import FREEZING_K, latent_heat_of_vaporization

if TYPE_CHECKING:
    from scipy.sparse import csr_matrix

    from etflux.case import Settings

EARTH_RADIUS_KM = 6371.0088
EMISSIVITY = 0.98  # of land, common practice, no source
STEFAN_BOLTZMANN = 5.67e-8  # W m-2 K-4
MJ_PER_W_HOUR = 3.6e-3


class Energy(NamedTuple):
    """Heat and water by the hour, shape (row, hour) or by hour edge, (row, hour + 1)."""

    available: np.ndarray  # MJ m-2
    own: np.ndarray  # sensible heat of the county itself, MJ m-2
    used: np.ndarray  # of the area around, at least the least share, MJ m-2
    short: np.ndarray  # (row,) whether evaporation took more than the area had
    supply: np.ndarray  # by edge: heat and its virtual part since the morning, K kg m-2
    warmth: np.ndarray  # by edge: heat alone, K kg m-2
    water_share: np.ndarray  # by edge: of the day's water, what has left the ground
    water_after: np.ndarray  # by edge: of the day's water, what has left since the morning's profile


def fetch_weights(
    latitude_deg: np.ndarray, longitude_deg: np.ndarray, area_km2: np.ndarray, fetch_km: float
) -> csr_matrix:
    """Area weights of the counties around each, itself included; rows sum to 1. Shape (county, county), sparse."""
    from scipy import sparse
    from scipy.spatial import cKDTree

    lat, lon = np.radians(latitude_deg), np.radians(longitude_deg)
    points = np.stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)], axis=1)
    chord = 2.0 * np.sin(min(fetch_km / (2.0 * EARTH_RADIUS_KM), np.pi / 2.0))
    pairs = cKDTree(points).query_pairs(chord, output_type="ndarray")
    own = np.arange(len(points))
    i, j = np.concatenate([pairs[:, 0], pairs[:, 1], own]), np.concatenate([pairs[:, 1], pairs[:, 0], own])
    weight = sparse.csr_matrix((area_km2[j], (i, j)), shape=(len(points), len(points)))
    return sparse.diags(1.0 / np.asarray(weight.sum(axis=1)).ravel()) @ weight


class Sky(NamedTuple):
    """What a day's sky gives to the counties before any water takes its share, (county, hour)."""

    available: np.ndarray  # net radiation less ground heat, MJ m-2
    evaporated_share: np.ndarray  # of the day's water, sums to 1


def sky_of(inputs: AirInputs, number: int, settings: Settings) -> Sky:
    """Net radiation and ground heat of one day, by the hour."""
    t_max, t_min, rs = inputs.t_max_c[number], inputs.t_min_c[number], inputs.rs_mj_m2_d[number]
    julian = float(solar.day_of_year(inputs.dates[number : number + 1])[0])
    rso = solar.clear_sky_radiation(solar.extraterrestrial_radiation(inputs.latitude_deg, julian), inputs.elevation_m)
    rnl = reference.net_longwave(t_max, t_min, inputs.vapour_pressure_kpa[number], rs / np.maximum(rso, 1e-6))
    cover = np.clip(np.nan_to_num(inputs.ground_cover[number]), 0.0, 1.0)
    ground = settings.ground_heat_bare + (settings.ground_heat_full_cover - settings.ground_heat_bare) * cover
    heat = column.hourly_heat(
        inputs.latitude_deg, julian, rs, rnl, inputs.albedo[number], ground, np.zeros_like(ground)
    )
    return Sky(heat.available, heat.evaporated_share)


def energy_of(
    day: Day, sky: Sky, start_hour: np.ndarray, fetch: csr_matrix, settings: Settings,
    extra_longwave_mj: np.ndarray | None = None,
) -> Energy:  # fmt: skip
    """Latent and sensible heat by the hour.

    Parameters
    ----------
    day : Day
    sky : Sky
        Of one copy of the region.
    start_hour : ndarray, shape (row,)
        Local solar hour of the morning's profile: heat counts from here.
    fetch : csr_matrix, shape (county, county)
        Weights of the area mean.
    settings : Settings
    extra_longwave_mj : ndarray, shape (row, hour), optional
        Longwave radiation that a warmer air loses in addition. [MJ m-2]

    Returns
    -------
    Energy
    """
    copies = len(day.t_max_c) // len(sky.available)
    available, share = (np.tile(part, (copies, 1)) if copies > 1 else part for part in sky)
    total = day.water_mm.sum(axis=1)
    latent = total * latent_heat_of_vaporization(0.5 * (day.t_max_c + day.t_min_c))
    if extra_longwave_mj is not None:
        available = available - extra_longwave_mj
    own = available - latent[:, None] * share
    shared = area_mean(fetch, own)
    used = np.maximum(shared, settings.least_heat_share * np.maximum(available, 0.0))
    after = np.minimum(np.maximum(HOURS[1:] - start_hour[:, None], 0.0), 1.0)
    heat_in = column.heat_supply(used) * after
    water_in = share * after
    theta = (day.t_max_c + FREEZING_K)[:, None]
    return Energy(
        available=available,
        own=own,
        used=used,
        short=shared.sum(axis=1) < 0.0,
        supply=running(heat_in + column.VIRTUAL * theta * water_in * total[:, None]),
        warmth=running(heat_in),
        water_share=running(share),
        water_after=running(water_in),
    )


def area_mean(fetch: csr_matrix, values: np.ndarray) -> np.ndarray:
    """Mean over the area around each county and copy, counties without a value left out; shape (row, hour)."""
    counties = fetch.shape[0]
    blocks = values.reshape(-1, counties, values.shape[1])
    good = np.isfinite(blocks)
    if good.all():
        return np.concatenate([fetch @ block for block in blocks])
    filled, known = np.where(good, blocks, 0.0), good.astype(float)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.concatenate([(fetch @ a) / (fetch @ b) for a, b in zip(filled, known, strict=True)])


def running(values: np.ndarray) -> np.ndarray:
    """Sum up to each hour edge, shape (row, hour + 1), never falling."""
    zero = np.zeros((len(values), 1))
    return np.maximum.accumulate(np.concatenate([zero, np.cumsum(values, axis=1)], axis=1), axis=1)


def warmer_longwave(t_c: np.ndarray, warmer_k: np.ndarray) -> np.ndarray:
    """Longwave radiation that ground warmer by a few kelvin loses in addition, an hour's. [MJ m-2]

    References
    ----------
    .. [1] Stefan's law, linear: 4 emissivity sigma T^3 dT.

    Examples
    --------
    >>> warmer_longwave(30.0, 2.0).round(3).item()
    0.045
    """
    kelvin = np.asarray(t_c, float) + FREEZING_K
    return 4.0 * EMISSIVITY * STEFAN_BOLTZMANN * kelvin**3 * np.asarray(warmer_k, float) * MJ_PER_W_HOUR
