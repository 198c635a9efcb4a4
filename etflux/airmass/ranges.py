"""How far the contribution moves when what it rests on is varied, one thing at a time or all at random.

Each variation is one more copy of the region in the same arrays. A range covers the parameters named, not the error of
the method.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from etflux import column
from etflux.airmass.inputs import AirInputs, Variation
from etflux.airmass.march import March
from etflux.airmass.tracers import HUMIDITY, Layout

if TYPE_CHECKING:
    from etflux.case import Settings

NOTE = "The band covers the parameters that were varied, not the error of the method."
ROWS_AT_ONCE = 6000
QUANTILES = (0.1, 0.5, 0.9)
# Standard deviations of the random draws: common practice, no source.
DEPTH_SPREAD, WATER_SPREAD, WIND_SPREAD, RESIDENCE_SPREAD_D = 0.15, 0.10, 0.20, 0.6
ENTRAINMENT_LIMITS = (0.1, 0.3)  # reported, Tennekes 1973

# What is varied, and how; a single variation is set against the run itself ("what would change it").
VARIED: Mapping[str, tuple[Variation, ...]] = {
    "mixing depth 25 % less or more": (Variation(depth=0.75), Variation(depth=1.25)),
    "water use 15 % less or more": (Variation(water=0.85), Variation(water=1.15)),
    "residence a day shorter or longer": (Variation(residence_plus_d=-1.0), Variation(residence_plus_d=1.0)),
    "crop coefficient 10 % less or more": (Variation(transpiration=0.9), Variation(transpiration=1.1)),
    "entrainment 0 to 0.2": (Variation(entrainment=0.0), Variation(entrainment=0.2)),
    "500 m deeper": (Variation(depth_plus_m=500.0),),
    "wind doubled": (Variation(wind=2.0),),
}
EDGE = "air from outside without or with crop water"


def pooled(inputs: AirInputs) -> AirInputs:
    """The inputs with all crops as one source and all else as another."""
    crop = inputs.is_crop

    def two(values: np.ndarray) -> np.ndarray:
        return np.stack([values[..., crop].sum(axis=-1), values[..., ~crop].sum(axis=-1)], axis=-1)

    moved = None if inputs.transpiration_mm is None else two(inputs.transpiration_mm)
    return replace(inputs, sources=("crops", "rest"), water_mm=two(inputs.water_mm), transpiration_mm=moved)


def contributions(
    inputs: AirInputs,
    settings: Settings,
    members: tuple[Variation, ...],
    progress: Callable[[float], None] | None = None,
) -> np.ndarray:
    """Contribution of every copy at the contribution hour.

    Parameters
    ----------
    inputs : AirInputs
    settings : Settings
    members : tuple of Variation
    progress : callable, optional

    Returns
    -------
    ndarray, shape (member, day, county)
        [degC]
    """
    lean = pooled(inputs)
    layout = Layout(sources=2, ages=1, is_crop=np.array([True, False]))
    n_days, counties = inputs.t_max_c.shape
    hour, crops = round(settings.contribution_hour), layout.tags.start
    found = np.empty((len(members), n_days, counties))
    at_once = max(1, ROWS_AT_ONCE // counties)
    for start in range(0, len(members), at_once):
        part = members[start : start + at_once]
        for course in March(lean, settings, layout, part):
            values = course.values[hour]
            c = column.contribution(values[:, HUMIDITY], values[:, crops], course.day.pressure_kpa)
            found[start : start + len(part), course.day.number] = c.reshape(len(part), counties)
            if progress is not None:
                progress((start + len(part) * (course.day.number + 1) / n_days) / len(members))
    return found


def spread(inputs: AirInputs, settings: Settings, found: Mapping[str, np.ndarray]) -> dict[str, np.ndarray]:
    """Lowest and highest contribution by what was varied, (2, day, county); blank where the contribution is."""
    base = found["contribution_c"]
    chosen = {
        name: members
        for name, members in VARIED.items()
        if inputs.transpiration_mm is not None or not any(member.transpiration != 1.0 for member in members)
    }
    varied = contributions(inputs, settings, tuple(member for members in chosen.values() for member in members))
    result = {EDGE: np.stack([base, base + found["contribution_outside_c"]])}
    start = 0
    for name, members in chosen.items():
        part = varied[start : start + len(members)]
        start += len(members)
        ends = np.concatenate([part, base[None]])
        low, high = np.fmin.reduce(ends), np.fmax.reduce(ends)
        result[name] = np.where(np.isnan(base), np.nan, np.stack([low, high]))
    return result


def draw(number: int, seed: int) -> tuple[Variation, ...]:
    """Random variations of everything at once, the same for the same seed.

    Examples
    --------
    >>> draw(2, 1) == draw(2, 1), draw(2, 1) == draw(2, 2)
    (True, False)
    """
    rng = np.random.default_rng(seed)
    depth, wind = np.exp(rng.normal(0.0, [[DEPTH_SPREAD], [WIND_SPREAD]], (2, number)))
    water, transpiration = rng.normal(1.0, WATER_SPREAD, (2, number))
    residence = rng.normal(0.0, RESIDENCE_SPREAD_D, number)
    entrainment = rng.uniform(*ENTRAINMENT_LIMITS, number)
    return tuple(
        Variation(
            water=float(water[k]), transpiration=float(transpiration[k]), depth=float(depth[k]), wind=float(wind[k]),
            residence_plus_d=float(residence[k]), entrainment=float(entrainment[k]),
        )
        for k in range(number)
    )  # fmt: skip


def monte_carlo(
    inputs: AirInputs, settings: Settings, draws: int, seed: int = 0, progress: Callable[[float], None] | None = None
) -> np.ndarray:
    """Contribution that 10, 50 and 90 % of the random draws do not exceed.

    Parameters
    ----------
    inputs : AirInputs
    settings : Settings
    draws : int
        Number of random variations.
    seed : int
    progress : callable, optional
        Called with the share of the work that is done.

    Returns
    -------
    ndarray, shape (3, day, county)
        NaN where fewer than half of the draws have a value. The band covers the parameters that were varied, not the
        error of the method. [degC]
    """
    found = contributions(inputs, settings, draw(draws, seed), progress)
    enough = np.isfinite(found).sum(axis=0) >= 0.5 * draws
    bands = np.nanquantile(np.where(enough, found, 0.0), QUANTILES, axis=0)
    return np.where(enough, bands, np.nan)
