"""How much air the day mixes: by its heat, without entrainment, and where somebody gave a depth."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux import column
from etflux.airmass.inputs import Day, Variation
from etflux.column import EDGES, HOURS
from etflux.profiles import Morning

if TYPE_CHECKING:
    from etflux.case import Settings

DEPTHS_DIFFER = 0.30  # of the depth: beyond, the contribution is a range
STABLE_K_PER_KG = 2.5e-3  # potential temperature gradient above which a night's layer counts as stable


@dataclass(frozen=True)
class Depths:
    """Mass of the mixed air at every hour edge, (row, hour + 1); heights of the layers' edges, (row, edge).

    `water` is what mixes humidity and tags; `by_heat` what sets the temperature. Rows without input have NaN.
    """

    heights: np.ndarray
    floor: np.ndarray  # (row,) mass that the morning wind keeps mixed
    by_heat: np.ndarray
    no_entrainment: np.ndarray
    water: np.ndarray
    given: np.ndarray  # (row,) bool
    break_hour: np.ndarray  # (row,) when the heat reaches the top of the night's stable layer; NaN if it does not

    def metres(self, mass: np.ndarray) -> np.ndarray:
        """Height of masses (row,) or (row, hour) above the ground. [m]"""
        flat = mass[:, None] if mass.ndim == 1 else mass
        return interpolated(flat, EDGES, self.heights).reshape(mass.shape)

    @property
    def evening_m(self) -> np.ndarray:
        """Depth at the end of the day, shape (row,). [m]"""
        return self.metres(self.water[:, -1])


def depths_of(
    day: Day, morning: Morning, supply: np.ndarray, members: tuple[Variation, ...], settings: Settings,
    heat_ratio: np.ndarray | None = None, whole: bool = True,
) -> Depths:  # fmt: skip
    """Mixing depths of one day.

    Parameters
    ----------
    day : Day
    morning : Morning
    supply : ndarray, shape (row, hour + 1)
        Heat since the morning. [K kg m-2]
    members : tuple of Variation
        One for each copy of the region.
    settings : Settings
    heat_ratio : ndarray, shape (row,), optional
        Depth by heat over that of the real world: a given depth is scaled by it in the other worlds.
    whole : bool
        Whether the depth without entrainment and the hour of the stable layer's end are asked for; else NaN.

    Returns
    -------
    Depths
    """
    counties = len(day.t_max_c) // len(members)
    theta_v = np.maximum.accumulate(column.virtual_theta(morning.theta_k, morning.q_kg_kg), axis=1)
    heights = column.heights(morning.theta_k, morning.q_kg_kg, day.pressure_kpa)
    edges = np.broadcast_to(EDGES, heights.shape)
    floor = interpolated(np.full((len(heights), 1), settings.depth_floor_m), heights, edges)
    shares = [settings.entrainment_share if m.entrainment is None else m.entrainment for m in members]
    entrainment = np.repeat(shares, counties)
    by_heat = np.maximum(_masses(theta_v, entrainment, supply, day), floor)
    no_entrainment, break_hour = np.full_like(by_heat, np.nan), np.full(len(by_heat), np.nan)
    if whole:
        no_entrainment = np.maximum(_masses(theta_v, 0.0, supply, day), floor)
        break_hour = _break_hour(morning, by_heat, floor[:, 0])
    given = np.isfinite(day.given_depth_m)
    water = by_heat
    if given.any():
        water = np.where(given[:, None], _given(day, supply, heights, heat_ratio), by_heat)
    water = np.where(np.isnan(by_heat), np.nan, np.maximum(_varied(water, heights, members, counties), floor))
    return Depths(heights, floor[:, 0], by_heat, no_entrainment, water, given, break_hour)


def _masses(theta_v: np.ndarray, entrainment: np.ndarray | float, supply: np.ndarray, day: Day) -> np.ndarray:
    """Mixed mass at every hour edge; between sunset and sunrise nothing changes."""
    first, last = day.daylight
    found = np.zeros_like(supply)
    found[:, first : last + 1] = column.mixed_mass(column.heat_need(theta_v, entrainment), supply[:, first : last + 1])
    found[:, last + 1 :] = found[:, last : last + 1]
    return np.where(np.isnan(found[:, last : last + 1]), np.nan, found)


def interpolated(x: np.ndarray, knots: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Linear interpolation of x (row, k) with values (row, knot) of each row; flat beyond the ends.

    Knots are the same for all rows, (knot,), or each row's own, (row, knot).
    """
    if knots.ndim == 1:
        upper = np.searchsorted(knots, x)
        upper = np.minimum(np.maximum(upper, 1), len(knots) - 1)
        x0, x1 = knots[upper - 1], knots[upper]
    else:
        upper = np.minimum(np.maximum((knots[:, None, :] < x[:, :, None]).sum(axis=2), 1), knots.shape[1] - 1)
        flat = upper + (np.arange(len(knots)) * knots.shape[1])[:, None]
        x0, x1 = knots.ravel()[flat - 1], knots.ravel()[flat]
    flat = upper + (np.arange(len(values)) * values.shape[1])[:, None]
    y0, y1 = values.ravel()[flat - 1], values.ravel()[flat]
    with np.errstate(invalid="ignore", divide="ignore"):
        share = np.minimum(np.maximum((x - x0) / (x1 - x0), 0.0), 1.0)
    return y0 + share * (y1 - y0)


def _given(day: Day, supply: np.ndarray, heights: np.ndarray, heat_ratio: np.ndarray | None) -> np.ndarray:
    """A given depth at its hour; at other hours it goes with the root of the heat supply. [kg m-2]"""
    depth = day.given_depth_m if heat_ratio is None else day.given_depth_m * heat_ratio
    hour = np.where(np.isnan(day.given_hour), HOURS[-1], day.given_hour)[:, None]
    at = interpolated(hour, HOURS, supply)
    with np.errstate(invalid="ignore", divide="ignore"):
        scale = np.sqrt(np.where(at > 0.0, supply / at, 1.0))
    return interpolated(depth[:, None] * scale, heights, np.broadcast_to(EDGES, heights.shape))


def _varied(water: np.ndarray, heights: np.ndarray, members: tuple[Variation, ...], counties: int) -> np.ndarray:
    """Depths of the copies that mix deeper or less deep."""
    factor = np.repeat([member.depth for member in members], counties)[:, None]
    plus = np.repeat([member.depth_plus_m for member in members], counties)[:, None]
    if np.all(factor == 1.0) and np.all(plus == 0.0):
        return water
    edges = np.broadcast_to(EDGES, heights.shape)
    return interpolated(factor * interpolated(water, EDGES, heights) + plus, heights, edges)


def _break_hour(morning: Morning, by_heat: np.ndarray, floor: np.ndarray) -> np.ndarray:
    """Hour at which the mixed air passes the top of the night's stable layer, linear between hours."""
    middle = 0.5 * (EDGES[1:] + EDGES[:-1])
    stable = np.diff(morning.theta_k, axis=1) / np.diff(middle) > STABLE_K_PER_KG
    ended = ~stable & (np.cumsum(stable, axis=1) > 0)
    top = EDGES[1 + ended.argmax(axis=1)]  # lowest layer above stable ones that is not stable
    begins = stable[:, : int(np.searchsorted(EDGES, 600.0))].any(axis=1) & ended.any(axis=1)
    passed = (by_heat >= top[:, None]).argmax(axis=1)
    rows = np.arange(len(by_heat))
    before, after = by_heat[rows, np.maximum(passed - 1, 0)], by_heat[rows, passed]
    with np.errstate(invalid="ignore", divide="ignore"):
        part = np.where(after > before, (top - before) / (after - before), 1.0)
    good = begins & (passed > 0) & (top > floor)
    return np.where(good, HOURS[np.maximum(passed - 1, 0)] + part, np.nan)


def depths_differ(depths: Depths, hour: int) -> np.ndarray:
    """Whether entrainment changes the depth by so much that the contribution is a range, shape (row,)."""
    heat, none = depths.metres(depths.by_heat[:, hour]), depths.metres(depths.no_entrainment[:, hour])
    return (heat - none > DEPTHS_DIFFER * heat) & ~depths.given
