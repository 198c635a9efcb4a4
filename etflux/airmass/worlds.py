"""The other worlds: the same days with other water. Not to be mixed up with the contribution, which is tagged water.

They run by the same code from the same first morning. Every later morning is the real one less the tags that the real
world carried, plus those that the other world itself carries, with its own residual depth. Energy that no water takes
warms the air, less the longwave radiation that a warmer ground loses in addition.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from etflux.airmass.depths import Depths
from etflux.airmass.energy import Energy, warmer_longwave
from etflux.airmass.inputs import AirInputs, Day, Variation
from etflux.airmass.march import Course, Hooks, March, mixed_theta
from etflux.airmass.record import RealDays
from etflux.airmass.tracers import HUMIDITY, Layout
from etflux.humidity import dew_point_from_specific_humidity
from etflux.profiles import Morning

if TYPE_CHECKING:
    from etflux.case import Settings

WORLDS: Mapping[str, str] = {
    "crops": "the same days had every stand the cover of the county's rest",
    "evaporation": "the same days had no water left the ground in the region",
}
LONGWAVE_ROUNDS = 2  # a kelvin changes the loss by 6 W m-2: two rounds leave under 0.05 K


def water_without_crops(inputs: AirInputs) -> np.ndarray:
    """Water of each county if every stand had the rest's cover, (day, county). [mm]

    The given one; else the rest's own depth spread over the county; else, where a county has no rest, the mean depth of
    the others' rest. NaN where nothing is known.
    """
    if inputs.water_without_crops_mm is not None:
        return inputs.water_without_crops_mm
    rest_share = np.clip(1.0 - inputs.represented, 0.0, 1.0)
    rest = inputs.water_mm[:, :, ~inputs.is_crop].sum(axis=2)
    with np.errstate(invalid="ignore", divide="ignore"):
        depth = np.where(rest_share > 1e-6, rest / rest_share, np.nan)
    known = np.isfinite(depth)
    weight = known * inputs.area_km2
    with np.errstate(invalid="ignore", divide="ignore"):
        others = (np.where(known, depth, 0.0) * weight).sum(axis=1) / weight.sum(axis=1)
    missing = ~known & np.isfinite(inputs.water_mm.sum(axis=2))
    return np.where(missing, others[:, None], depth)


def courses(inputs: AirInputs, settings: Settings, real: RealDays, water_mm: np.ndarray) -> March:
    """March through both other worlds at once: first without crops, then without evaporation.

    Parameters
    ----------
    inputs : AirInputs
    settings : Settings
    real : RealDays
    water_mm : ndarray, shape (day, county)
        Water of the first; the second has none.

    Returns
    -------
    March
        Two copies of the region.
    """
    other = replace(inputs, sources=("ground",), water_mm=water_mm[:, :, None], transpiration_mm=None)

    def twice(values: np.ndarray) -> np.ndarray:
        return np.concatenate([values, values])

    def morning(number: int) -> tuple[np.ndarray, np.ndarray]:
        return twice(real.carried[number]), twice(real.kept[number])

    def heat(march: March, day: Day, air: Morning) -> tuple[Energy, Depths]:
        theta, heat_m = twice(real.theta_k[day.number]), twice(real.heat_m[day.number])
        hour = round(settings.contribution_hour)
        energy, depths = march.energy_and_depths(day, air)
        for _ in range(LONGWAVE_ROUNDS):
            warmer = np.nan_to_num(np.maximum(mixed_theta(air, energy, depths) - theta, 0.0))
            lit = energy.available > 0.0
            extra = warmer_longwave(day.t_max_c[:, None], 0.5 * (warmer[:, 1:] + warmer[:, :-1])) * lit
            ratio = depths.metres(depths.by_heat)[:, hour] / heat_m[:, hour]
            energy, depths = march.energy_and_depths(day, air, extra, ratio)
        return energy, depths

    layout = Layout(sources=1, ages=1, is_crop=np.array([True]))
    return March(other, settings, layout, (Variation(), Variation(water=0.0)), Hooks(morning, heat))


def effects(
    inputs: AirInputs, settings: Settings, real: RealDays, found: Mapping[str, np.ndarray]
) -> dict[str, np.ndarray]:
    """Dew point and depth of both worlds at the contribution hour, and what the real one has more, (day, county)."""
    hour = round(settings.contribution_hour)
    days = [_at_the_hour(course, hour) for course in courses(inputs, settings, real, water_without_crops(inputs))]
    counties = len(inputs.area_km2)
    shown = np.isfinite(found["contribution_c"])
    result: dict[str, np.ndarray] = {}
    for copy, world in enumerate(WORLDS):
        part = slice(copy * counties, (copy + 1) * counties)
        dew, depth, theta = (np.stack([day[k][part] for day in days]) for k in range(3))
        result |= {
            f"dew_point_without_{world}_c": np.where(shown, dew, np.nan),
            f"depth_without_{world}_m": np.where(shown, depth, np.nan),
            f"theta_without_{world}_c": np.where(shown, theta, np.nan),
            f"effect_of_{world}_c": np.where(shown, found["dew_point_mixed_c"] - dew, np.nan),
        }
    return result


def _at_the_hour(course: Course, hour: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    q = course.values[hour][:, HUMIDITY]
    return (
        dew_point_from_specific_humidity(q, course.day.pressure_kpa),
        course.depths.metres(course.depths.water[:, hour]),
        course.theta_k[:, hour] - 273.15,
    )
