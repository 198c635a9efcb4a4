"""The forecaster's flags of a county and day, and what leaves a blank."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from etflux import column
from etflux.airmass.depths import depths_differ
from etflux.airmass.inputs import AirInputs
from etflux.airmass.march import Course
from etflux.airmass.tracers import FLOOR
from etflux.humidity import FREEZING_K
from etflux.variables import flag_bits

if TYPE_CHECKING:
    from etflux.case import Settings

AIR = flag_bits("air")
HEAVY_RAIN_MM = 20.0
DRY_Q = 0.006  # kg/kg
ELSEWHERE_SHARE = 0.30
TEMPERATURE_OFF_K = 2.0
GIVEN_RATIO = (0.5, 2.0)
TINY_DEPTH_M = 50.0
EDGE_CROSSING_H = 24.0

BLANKS = ("saturated", "energy_short", "tags_above_humidity", "depth_tiny")


def flags_of(
    inputs: AirInputs, settings: Settings, course: Course, found: dict[str, np.ndarray], hour: int
) -> np.ndarray:
    """Bits of ``tables/flags.toml`` [air] of one day, shape (row,)."""
    depths, pressure = course.depths, course.day.pressure_kpa
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = found["mixing_depth_m"] / depths.metres(depths.by_heat[:, hour])
    q = course.values[hour][:, 0]
    saturated = q > column.saturation_humidity(found["theta_mixed_c"] + FREEZING_K, pressure)
    all_tags = found["tag_contribution_g_kg"].sum(axis=(1, 2)) / 1000.0
    conditions = {
        "cumulus": found["lcl_m"] < found["mixing_depth_m"],
        "depth_floor": depths.water[:, hour] <= depths.floor * (1.0 + 1e-9),
        "heat_elsewhere": found["heat_elsewhere_mj_m2_d"]
        > ELSEWHERE_SHARE * np.maximum(found["sensible_heat_mj_m2_d"], 1e-9),
        "dry_region": q < DRY_Q,
        "replaced": found["replaced_share"] > 0.5,
        "heavy_rain": inputs.rain_mm[course.day.number] > HEAVY_RAIN_MM,
        "temperature_off": np.abs(found["theta_mixed_c"] - course.day.t_max_c) > TEMPERATURE_OFF_K,
        "forecast": course.day.forecast.astype(bool),
        "saturated": saturated,
        "depths_differ": depths_differ(depths, hour),
        "given_depth_ratio": depths.given & ((ratio < GIVEN_RATIO[0]) | (ratio > GIVEN_RATIO[1])),
        "energy_short": course.energy.short,
        "tags_above_humidity": all_tags > q - course.values[hour][:, FLOOR] + 1e-9,
        "represented_low": inputs.represented < settings.represented_least_pct / 100.0,
        "depth_tiny": found["mixing_depth_m"] < TINY_DEPTH_M,
        "edge_dependent": found["crossing_h"] < EDGE_CROSSING_H,
    }
    flags = course.morning.flags.astype(np.int64)
    for name, holds in conditions.items():
        flags = flags | np.where(holds, AIR[name], 0)
    return flags


def _bits(names: tuple[str, ...]) -> int:
    return sum(AIR[name] for name in names)


def blank_rows(flags: np.ndarray) -> np.ndarray:
    """Whether the flags leave no number for the contribution."""
    return (flags & _bits(BLANKS)) > 0
