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
LEAST_ENTRAINMENT = 0.01
NEWTON_STEPS = 60
MASS_PRECISION = 1e-9  # kg m-2


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
    edge : ndarray, shape (layer + 1,)
        Mass between the ground and each edge. [kg m-2]
    need : ndarray, shape (county, layer + 1)
        Supply that is needed to reach each edge. [K kg m-2]
    gap : ndarray, shape (county, layer)
        Supply that is needed without entrainment (G), at the bottom of each layer. [K kg m-2]
    slope : ndarray, shape (county, layer)
        Gradient of virtual potential temperature. [K kg-1 m2]
    entrainment : ndarray, shape (county,)
    """

    edge: np.ndarray
    need: np.ndarray
    gap: np.ndarray
    slope: np.ndarray
    entrainment: np.ndarray


def heat_need(theta_v_k: np.ndarray, entrainment: ArrayLike, mass: ArrayLike = LAYER_MASS) -> HeatNeed:
    """Heat supply that mixes a profile to each edge, an exact one-pass integral over the layers.

    With G(M) the integral of theta_v(M) - theta_v below M, and the flux at the top A times that at the ground,

        F_need(M) = M^(-1/A) * integral from 0 to M of G(m) d(m^(1/A)).

    Within a layer potential temperature is linear about the layer's mean, so that the heat of a layer is kept; between
    layers it may jump.

    Parameters
    ----------
    theta_v_k : ndarray, shape (county, layer)
        Virtual potential temperature of the morning, layer means, not falling with height. [K]
    entrainment : array_like, scalar or shape (county,)
        A, 0 to 0.4; with 0 (and below 0.01) the need is G.
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
    share = np.broadcast_to(np.asarray(entrainment, float), len(theta_v_k))
    share = np.where(share < LEAST_ENTRAINMENT, 0.0, share)
    slope = _slopes(theta_v_k, dm)
    above_first = theta_v_k - theta_v_k[:, :1]
    heat_below = np.cumsum(above_first * dm, axis=1) - above_first * dm
    gap = edge[:-1] * (above_first - 0.5 * slope * dm) - heat_below
    need = np.zeros((len(slope), len(edge)))
    with_share = share > 0.0
    # Integral of G d(m^(1/A)) layer by layer, masses scaled by the topmost so that high powers stay numbers.
    top = edge[-1]
    power = 1.0 / np.where(with_share, share, 1.0)
    power = power[:1, None] if (power == power[:1]).all() else power[:, None]
    scaled = (edge / top) ** power
    base = gap - 0.5 * slope * edge[:-1] ** 2
    layer = base * np.diff(scaled) + 0.5 * slope * power / (power + 2.0) * top**2 * np.diff(scaled * (edge / top) ** 2)
    need[:, 1:] = np.cumsum(layer, axis=1) / scaled[:, 1:]
    encroached = base + 0.5 * slope * edge[1:] ** 2
    need[:, 1:] = np.where(with_share[:, None], need[:, 1:], encroached)
    return HeatNeed(edge, np.maximum.accumulate(need, axis=1), gap, slope, share)


def _slopes(values: np.ndarray, dm: np.ndarray) -> np.ndarray:
    """Gradient within each layer: the smaller of those to its two neighbours, so that no jump is downward."""
    between = np.diff(values, axis=1) / (0.5 * (dm[1:] + dm[:-1]))
    return np.minimum(
        np.concatenate([between[:, :1], between], axis=1), np.concatenate([between, between[:, -1:]], axis=1)
    )


def mixed_mass(found: HeatNeed, supply: np.ndarray) -> np.ndarray:
    """Mass of air that a heat supply mixes.

    Parameters
    ----------
    found : HeatNeed
    supply : ndarray, shape (county, hour)
        Heat since the morning, F; 0 or less mixes nothing. [K kg m-2]

    Returns
    -------
    ndarray, shape (county, hour)
        At most the top of the layers; NaN where the supply or the profile is. [kg m-2]
    """
    edge, need = found.edge, found.need
    rows, layers = found.slope.shape
    wanted = np.maximum(supply, 0.0)
    upper = np.clip((need[:, None, :] < wanted[:, :, None]).sum(axis=2), 1, layers)
    row = np.arange(rows)[:, None]
    start, end, gap, slope = edge[upper - 1], edge[upper], found.gap[row, upper - 1], found.slope[row, upper - 1]
    share = found.entrainment[:, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        # Without entrainment the supply is the gap; below the gap's jump at an edge the mixed air ends there.
        mixed = np.sqrt(start**2 + 2.0 * np.maximum(wanted - gap, 0.0) / slope)
    mixed = np.where(wanted > gap, np.clip(mixed, start, end), start)
    inner = (share > 0.0) & (wanted > need[row, upper - 1]) & (wanted < need[row, upper])
    pick = np.nonzero(inner)
    if len(pick[0]):
        row_picked, layer = pick[0], upper[pick] - 1
        mixed[pick] = _inside_layer(
            wanted[pick], start[pick], end[pick], need[row_picked, layer], need[row_picked, layer + 1], gap[pick],
            slope[pick], found.entrainment[row_picked],
        )  # fmt: skip
    mixed = np.where(wanted >= need[:, -1:], edge[-1], np.where(wanted > 0.0, mixed, 0.0))
    return np.where(np.isnan(supply) | np.isnan(need[:, -1:]), np.nan, mixed)


def _inside_layer(
    wanted: np.ndarray, start: np.ndarray, end: np.ndarray, need: np.ndarray, need_above: np.ndarray, gap: np.ndarray,
    slope: np.ndarray, entrainment: np.ndarray,
) -> np.ndarray:  # fmt: skip
    """Mass within a layer at which the need is the wanted one: Newton's steps, kept between two bounds."""
    low, high = start.copy(), end.copy()
    part = (wanted - need) / (need_above - need)
    mass = np.sqrt(start**2 + part * (end**2 - start**2))
    base, power = gap - 0.5 * slope * start**2, 1.0 / entrainment
    curve = 0.5 * slope / (1.0 + 2.0 * entrainment)
    for _ in range(NEWTON_STEPS):
        shrink = (start / mass) ** power
        here = shrink * need + base * (1.0 - shrink) + curve * (mass**2 - start**2 * shrink)
        below = here < wanted
        low, high = np.where(below, mass, low), np.where(below, high, mass)
        rate = (base + 0.5 * slope * mass**2 - here) / (entrainment * mass)  # jump over A
        with np.errstate(invalid="ignore", divide="ignore"):
            stepped = mass - (here - wanted) / rate
        inside = (stepped >= low) & (stepped <= high)
        before, mass = mass, np.where(inside, stepped, 0.5 * (low + high))
        if np.abs(mass - before).max() < MASS_PRECISION:
            break
    return mass


def mixing_weights(mixed: np.ndarray, edges: ArrayLike = EDGES) -> np.ndarray:
    """Mass of each layer that lies within the mixed air, shape (county, layer). [kg m-2]"""
    edge = np.asarray(edges, float)
    return np.minimum(np.maximum(mixed[:, None] - edge[:-1], 0.0), np.diff(edge))


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
        Mass of the mixed air; a column with 0 is left as it is and must have nothing added. [kg m-2]
    edges : array_like, shape (layer + 1,)
        [kg m-2]

    Returns
    -------
    value : ndarray, shape (county, tracer)
        In the mixed air; NaN where there is none.
    after : ndarray, shape (county, layer, tracer)
        Layer means; the layer that holds the top is mixed in its lower part only.
    """
    weight = mixing_weights(mixed, edges)
    total = np.matmul(weight[:, None, :], tracers)[:, 0, :] + added
    value = total / np.where(mixed > 0.0, mixed, np.nan)[:, None]
    share = (weight / np.diff(np.asarray(edges, float)))[:, :, None]
    return value, np.where(share > 0.0, tracers + share * (value[:, None, :] - tracers), tracers)


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
