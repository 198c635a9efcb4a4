"""One column of air through one day: layers of fixed mass, the heat that mixes them, and what the mixed air holds.

Layers are the same for every county and day, so that potential temperature, specific humidity and tagged water can be
stored and moved without ever being regridded. Arrays are (county, layer) or (county, layer, tracer); masses in
kg m-2, potential temperature in kelvin referred to the pressure at the ground, humidity in kg/kg, heat as the
temperature-mass product K kg m-2.

References
----------
.. [T73] Tennekes (1973), A model for the dynamics of the inversion above a convective boundary layer, J. Atmos. Sci.
   30, 558-567.
.. [D82] Driedonks (1982), Models and observations of the growth of the atmospheric boundary layer, Boundary-Layer
   Meteorol. 23, 283-306.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from etflux import humidity, solar
from etflux.humidity import FREEZING_K, GAS_CONSTANT_DRY, GRAVITY, HEAT_CAPACITY_AIR, KAPPA, MOLAR_RATIO

VIRTUAL = 1.0 / MOLAR_RATIO - 1.0
JOULES_PER_MJ = 1.0e6
HOURS = np.arange(25.0)  # edges of the day's hours, local solar time

# 60 kg m-2 are about 50 m; 45 of them reach about 2.5 km, the wider ones above end near 5.6 km.
LAYER_MASS = np.concatenate([np.full(45, 60.0), np.full(8, 320.0)])
EDGES = np.concatenate([[0.0], np.cumsum(LAYER_MASS)])


def virtual_theta(theta_k: ArrayLike, q_kg_kg: ArrayLike) -> np.ndarray:
    """Virtual potential temperature. [K]"""
    return np.asarray(theta_k, float) * (1.0 + VIRTUAL * np.asarray(q_kg_kg, float))


def heights(theta_k: ArrayLike, q_kg_kg: ArrayLike, pressure_kpa: ArrayLike, edges: ArrayLike = EDGES) -> np.ndarray:
    """Height of every layer edge above the ground.

    Parameters
    ----------
    theta_k, q_kg_kg : array_like, shape (..., layer)
        Layer means.
    pressure_kpa : array_like, shape (...)
        At the ground.
    edges : array_like, shape (layer + 1,)
        Mass between the ground and each edge. [kg m-2]

    Returns
    -------
    ndarray, shape (..., layer + 1)
        [m]

    References
    ----------
    .. [1] The hypsometric equation, layer by layer.
    """
    ground = np.asarray(pressure_kpa, float)[..., None]
    pressure = ground - GRAVITY * np.asarray(edges, float) / 1000.0
    ratio = np.log(pressure[..., :-1] / pressure[..., 1:])
    middle = 0.5 * (pressure[..., :-1] + pressure[..., 1:])
    t_virtual = virtual_theta(theta_k, q_kg_kg) * (middle / ground) ** KAPPA
    thickness = GAS_CONSTANT_DRY / GRAVITY * t_virtual * ratio
    zero = np.zeros((*thickness.shape[:-1], 1))
    return np.concatenate([zero, np.cumsum(thickness, axis=-1)], axis=-1)


def across(x: np.ndarray, knots: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Linear interpolation with knots and values of each row its own; flat beyond the ends.

    Parameters
    ----------
    x : ndarray, shape (row,)
    knots, values : ndarray, shape (row, knot)
        Knots rising.

    Returns
    -------
    ndarray, shape (row,)
    """
    upper = np.clip((knots < x[:, None]).sum(axis=1), 1, knots.shape[1] - 1)
    row = np.arange(len(x))
    x0, x1, y0, y1 = (
        knots[row, upper - 1], knots[row, upper], values[row, upper - 1], values[row, upper]
    )  # fmt: skip
    share = np.clip((x - x0) / (x1 - x0), 0.0, 1.0)
    return np.where(np.isnan(x), np.nan, y0 + share * (y1 - y0))


class HeatNeed(NamedTuple):
    """Heat that mixes a morning profile up to each layer edge.

    Attributes
    ----------
    need, gap : ndarray, shape (county, layer + 1)
        Supply that is needed with entrainment, and without (G). [K kg m-2]
    slope : ndarray, shape (county, layer)
        Gradient of virtual potential temperature. [K kg-1 m2]
    power : float
        1/A; infinite for no entrainment.
    """

    need: np.ndarray
    gap: np.ndarray
    slope: np.ndarray
    power: float


def heat_need(theta_v_k: np.ndarray, entrainment: float, mass: ArrayLike = LAYER_MASS) -> HeatNeed:
    """Heat supply that mixes a profile to each edge, an exact one-pass integral over the layers.

    With G(M) the integral of theta_v(M) - theta_v below M, and the flux at the top A times that at the ground,

        F_need(M) = M^(-1/A) * integral from 0 to M of G(m) d(m^(1/A)).

    Potential temperature is taken as linear within a layer between values at the edges.

    Parameters
    ----------
    theta_v_k : ndarray, shape (county, layer)
        Virtual potential temperature of the morning, layer means, not falling with height. [K]
    entrainment : float
        A, 0 to 0.4.
    mass : array_like, shape (layer,)
        [kg m-2]

    Returns
    -------
    HeatNeed

    References
    ----------
    .. [1] The zero-order slab of [T73] and [D82], jump dM = A dF and jump = (G - F)/M, integrated.

    Examples
    --------
    Constant stratification: F (1 + 2A) = G.

    >>> theta = 300.0 + 0.001 * (EDGES[:-1] + 0.5 * LAYER_MASS)
    >>> found = heat_need(theta[None], 0.2)
    >>> (found.gap[0, 20] / found.need[0, 20]).round(6).item()
    1.4
    """
    dm = np.asarray(mass, float)
    edge = np.concatenate([[0.0], np.cumsum(dm)])
    at_edge = _edge_values(theta_v_k, dm)
    slope = np.diff(at_edge, axis=1) / dm
    gap = np.concatenate(
        [np.zeros((len(slope), 1)), np.cumsum(0.5 * slope * np.diff(edge**2), axis=1)], axis=1
    )  # integral of m dtheta
    if entrainment <= 0.0:
        return HeatNeed(np.maximum.accumulate(gap, axis=1), gap, slope, np.inf)
    power = 1.0 / entrainment
    need = np.zeros_like(gap)
    for k in range(len(dm)):
        need[:, k + 1] = _need_within(edge[k], edge[k + 1], need[:, k], gap[:, k], slope[:, k], power)
    return HeatNeed(np.maximum.accumulate(need, axis=1), gap, slope, power)


def _need_within(
    below: ArrayLike, mass: ArrayLike, need: np.ndarray, gap: np.ndarray, slope: np.ndarray, power: float
) -> np.ndarray:
    """Heat need at `mass` inside the layer that starts at `below`."""
    a, m = np.asarray(below, float), np.asarray(mass, float)
    base = gap - 0.5 * slope * a**2
    if np.isinf(power):
        return base + 0.5 * slope * m**2
    shrink = (a / m) ** power
    return shrink * need + base * (1.0 - shrink) + 0.5 * slope * power / (power + 2.0) * (m**2 - a**2 * shrink)


def _edge_values(values: np.ndarray, dm: np.ndarray) -> np.ndarray:
    """Values at the edges of layers, linear between the layers' middles and continued at both ends."""
    weight = dm[:-1] / (dm[:-1] + dm[1:])
    inner = values[:, :-1] + weight * np.diff(values, axis=1)
    low, high = 2.0 * values[:, :1] - inner[:, :1], 2.0 * values[:, -1:] - inner[:, -1:]
    return np.concatenate([low, inner, high], axis=1)


def mixed_mass(found: HeatNeed, supply: np.ndarray, mass: ArrayLike = LAYER_MASS) -> np.ndarray:
    """Mass of air that a heat supply mixes.

    Parameters
    ----------
    found : HeatNeed
    supply : ndarray, shape (county,)
        Heat since the morning, F; 0 or less mixes nothing. [K kg m-2]
    mass : array_like, shape (layer,)
        [kg m-2]

    Returns
    -------
    ndarray, shape (county,)
        At most the top of the layers; NaN where the supply is. [kg m-2]
    """
    edge = np.concatenate([[0.0], np.cumsum(np.asarray(mass, float))])
    wanted = np.maximum(supply, 0.0)
    upper = np.clip((found.need < wanted[:, None]).sum(axis=1), 1, len(edge) - 1)
    row = np.arange(len(supply))
    low, high = edge[upper - 1].copy(), edge[upper].copy()
    a, need, gap, slope = (
        edge[upper - 1],
        found.need[row, upper - 1],
        found.gap[row, upper - 1],
        found.slope[row, upper - 1],
    )
    for _ in range(50):  # halving: 60 kg m-2 / 2^50 is rounding
        middle = 0.5 * (low + high)
        above = _need_within(a, middle, need, gap, slope, found.power) >= wanted
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    mixed = np.where(wanted >= found.need[:, -1], edge[-1], 0.5 * (low + high))
    return np.where(np.isnan(supply), np.nan, np.where(wanted > 0.0, mixed, 0.0))


def mixing_weights(mixed: np.ndarray, edges: ArrayLike = EDGES) -> np.ndarray:
    """Mass of each layer that lies within the mixed air, shape (county, layer). [kg m-2]"""
    edge = np.asarray(edges, float)
    return np.clip(mixed[:, None] - edge[:-1], 0.0, np.diff(edge))


def mix(
    tracers: np.ndarray, added: np.ndarray, mixed: np.ndarray, edges: ArrayLike = EDGES
) -> tuple[np.ndarray, np.ndarray]:
    """Mix tracers from the ground up to a mass, with what the ground added.

    Parameters
    ----------
    tracers : ndarray, shape (county, layer, tracer)
        Layer means.
    added : ndarray, shape (county, tracer)
        What entered at the ground: water as kg m-2, heat as K kg m-2.
    mixed : ndarray, shape (county,)
        Mass of the mixed air, above 0. [kg m-2]
    edges : array_like, shape (layer + 1,)
        [kg m-2]

    Returns
    -------
    value : ndarray, shape (county, tracer)
        In the mixed air.
    after : ndarray, shape (county, layer, tracer)
        Layer means; the layer that holds the top is mixed in its lower part only.
    """
    weight = mixing_weights(mixed, edges)
    total = np.matmul(weight[:, None, :], tracers)[:, 0, :] + added
    value = total / mixed[:, None]
    share = (weight / np.diff(np.asarray(edges, float)))[:, :, None]
    return value, tracers + share * (value[:, None, :] - tracers)


class Heat(NamedTuple):
    """Heat and water by the hour, shape (county, hour)."""

    available: np.ndarray  # MJ m-2, net radiation less ground heat, daylight
    sensible: np.ndarray  # MJ m-2, the county's own
    evaporated_share: np.ndarray  # of the day's water, sums to 1


def hourly_heat(
    latitude_deg: np.ndarray,
    day: float,
    rs_mj_m2_d: np.ndarray,
    rnl_mj_m2_d: np.ndarray,
    albedo: np.ndarray,
    ground_share: np.ndarray,
    latent_mj_m2_d: np.ndarray,
) -> Heat:
    """Split a day's radiation and water over the hours of daylight.

    All water leaves in daylight, as a constant share of the available energy; what is left warms the air.

    Parameters
    ----------
    latitude_deg : ndarray, shape (county,)
        [deg]
    day : float
        Day of the year.
    rs_mj_m2_d, rnl_mj_m2_d : ndarray, shape (county,)
        Solar and net outgoing longwave radiation of the day. [MJ m-2 d-1]
    albedo, ground_share : ndarray, shape (county,)
        Of the surface; ground heat over net radiation by day.
    latent_mj_m2_d : ndarray, shape (county,)
        Latent heat of the day's water. [MJ m-2 d-1]

    Returns
    -------
    Heat

    References
    ----------
    .. [1] Evaporative fraction is preserved through the day: Shuttleworth et al. (1989), Crago (1996).
    """
    lat = latitude_deg[:, None]
    share = solar.day_share(lat, day, HOURS[:-1], HOURS[1:])
    sunrise, sunset = solar.sunrise_sunset(lat, day)
    lit = np.clip(np.minimum(HOURS[1:], sunset) - np.maximum(HOURS[:-1], sunrise), 0.0, 1.0)
    net = (1.0 - albedo)[:, None] * rs_mj_m2_d[:, None] * share - rnl_mj_m2_d[:, None] / 24.0 * lit
    available = (1.0 - ground_share)[:, None] * net
    positive = np.maximum(available, 0.0)
    total = positive.sum(axis=1, keepdims=True)
    evaporated = np.where(total > 0.0, positive / np.where(total > 0.0, total, 1.0), share)
    return Heat(available, available - latent_mj_m2_d[:, None] * evaporated, evaporated)


def heat_supply(sensible_mj_m2: np.ndarray) -> np.ndarray:
    """Heat of an hour or a day as temperature times mass. [MJ m-2] to [K kg m-2]"""
    return sensible_mj_m2 * JOULES_PER_MJ / HEAT_CAPACITY_AIR


def saturation_humidity(theta_k: ArrayLike, pressure_kpa: ArrayLike) -> np.ndarray:
    """Specific humidity of saturated air at the ground. [kg kg-1]"""
    e = humidity.saturation_vapour_pressure(np.asarray(theta_k, float) - FREEZING_K)
    return humidity.specific_humidity(e, pressure_kpa)


def contribution(q_kg_kg: ArrayLike, tagged_kg_kg: ArrayLike, pressure_kpa: ArrayLike) -> np.ndarray:
    """How much tagged water raises the dew point: with it minus without it.

    Parameters
    ----------
    q_kg_kg : array_like
        Specific humidity of the mixed air.
    tagged_kg_kg : array_like
        Tagged part of it.
    pressure_kpa : array_like
        At the ground. [kPa]

    Returns
    -------
    ndarray
        NaN where nothing would be left without it. A difference. [degC]

    Examples
    --------
    >>> contribution(0.018, 0.002, 98.0).round(2).item()
    1.91
    """
    with_it = humidity.dew_point_from_specific_humidity(q_kg_kg, pressure_kpa)
    without = humidity.dew_point_from_specific_humidity(
        np.asarray(q_kg_kg, float) - np.asarray(tagged_kg_kg, float), pressure_kpa
    )
    return with_it - without
