"""The season of the real world: what the forecaster reads, by county and day."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np

from etflux import column, humidity
from etflux.airmass import ranges, rise, worlds
from etflux.airmass.depths import depths_differ
from etflux.airmass.flags import AIR, blank_rows, flags_of
from etflux.airmass.inputs import AGES, AirInputs, AirResults
from etflux.airmass.ledger import budget_rows
from etflux.airmass.march import Course, March
from etflux.airmass.mornings import replaced_share
from etflux.airmass.record import RealDays
from etflux.airmass.tracers import FLOOR, HUMIDITY, Layout
from etflux.column import HOURS
from etflux.humidity import FREEZING_K

if TYPE_CHECKING:
    from etflux.case import Settings

ORIGINS_UP_TO = 300  # counties: beyond, only home and other are told apart
PROFILES_UP_TO = 10_000  # morning columns that are kept; of a long run over many counties, the last days
PEAK_FROM_HOUR = 9  # the highest dew point is looked for from here to sunset
EXTRA_WORK = 0.4  # share of the work in the other worlds and the ranges
LONG_WORK = 0.9  # share of the work in the random draws


def season(inputs: AirInputs, settings: Settings, progress: Callable[[float], None] | None = None) -> AirResults:
    """Run the air above all counties through all days.

    Parameters
    ----------
    inputs : AirInputs
    settings : Settings
        `air_worlds` and `air_ranges` ask for the other worlds and the ranges.
    progress : callable, optional
        Called with the share of the work that is done.

    Returns
    -------
    AirResults
    """
    tell = progress or (lambda share: None)
    n_days, counties = inputs.t_max_c.shape
    moved_by_wind = inputs.region is not None and inputs.winds is not None
    layout = Layout(
        sources=len(inputs.sources), ages=AGES, is_crop=inputs.is_crop, outside=True, home=moved_by_wind,
        origins=counties if moved_by_wind and counties <= ORIGINS_UP_TO else 0,
    )  # fmt: skip
    found: dict[str, np.ndarray] = {}
    ledgers: list[dict[str, np.ndarray]] = []
    profiles: list[np.ndarray] = []
    first_profile = max(0, n_days - max(1, PROFILES_UP_TO // max(counties, 1)))
    real = RealDays()
    extra = settings.air_worlds or settings.air_ranges
    for course in March(inputs, settings, layout):
        for name, values in _one_day(inputs, settings, layout, course).items():
            if name not in found:
                found[name] = np.empty((n_days, *values.shape), values.dtype)
            found[name][course.day.number] = values
        ledgers.append(course.ledger)
        if course.day.number >= first_profile:
            profiles.append(_profile(course))
        if settings.air_worlds:
            real.keep(course)
        tell(len(ledgers) / n_days * (1.0 - EXTRA_WORK * extra) * (1.0 - LONG_WORK * (settings.air_draws > 0)))
    if found:
        rise.add_bias(found)
    if settings.air_worlds and found:
        found |= worlds.effects(inputs, settings, real, found)
        real.clear()
    spread = ranges.spread(inputs, settings, found) if settings.air_ranges and found else {}
    if settings.air_draws and found:
        found |= _bands(inputs, settings, found, lambda share: tell(1.0 - LONG_WORK * (1.0 - share)))
    tell(1.0)
    ledger = {term: np.stack([day.get(term, np.zeros(layout.sources)) for day in ledgers]) for term in _terms(ledgers)}
    hourly = {name[7:]: found.pop(name) for name in list(found) if name.startswith("hourly_")}
    tags = {name[4:]: found.pop(name) for name in list(found) if name.startswith("tag_")}
    origins = found.pop("origins_g_kg", None)
    return AirResults(
        found, tags, HOURS[1:-1], hourly, inputs.sources, budget_rows(inputs, ledger), ledger, origins, spread,
        np.stack(profiles) if profiles else None,
    )  # fmt: skip


def _bands(
    inputs: AirInputs, settings: Settings, found: dict[str, np.ndarray], tell: Callable[[float], None]
) -> dict[str, np.ndarray]:
    """Contribution that 10, 50 and 90 % of the random draws do not exceed; blank where the contribution is."""
    bands = ranges.monte_carlo(inputs, settings, settings.air_draws, settings.air_seed, tell)
    shown = np.isfinite(found["contribution_c"])
    return {
        f"contribution_p{share}_c": np.where(shown, band, np.nan)
        for share, band in zip((10, 50, 90), bands, strict=True)
    }


def _terms(ledgers: list[dict[str, np.ndarray]]) -> list[str]:
    return list(dict.fromkeys(term for day in ledgers for term in day))


def _one_day(inputs: AirInputs, settings: Settings, layout: Layout, course: Course) -> dict[str, np.ndarray]:
    """Everything that is shown of one day, by county."""
    hour = round(settings.contribution_hour)
    pressure = course.day.pressure_kpa
    by_hour = _by_hour(layout, course, pressure)
    found = _at_the_hour(layout, course, by_hour, hour, pressure)
    found |= _range(inputs, settings, layout, course, by_hour, hour)
    found |= {
        "available_energy_mj_m2_d": course.energy.available.sum(axis=1),
        "sensible_heat_mj_m2_d": course.energy.used.sum(axis=1),
        "heat_elsewhere_mj_m2_d": (course.energy.used - course.energy.own).sum(axis=1),
        "replaced_share": np.full(len(pressure), np.nan) if course.kept is None else replaced_share(course.kept),
        "profile_distance_km": course.morning.distance_km,
        "crossing_h": np.full(len(pressure), np.nan if course.wind is None else course.wind.crossing_h),
        **_wind_of_day(inputs, course),
    }
    found |= rise.terms(inputs, course, found, hour)
    found["flags"] = flags_of(inputs, settings, course, found, hour)
    saturated = (found["flags"] & AIR["saturated"]) > 0
    for name in ("dew_point_mixed_c", "humidity_mixed_g_kg", "lcl_m"):  # mixed air that is saturated is no mixed air
        found[name] = np.where(saturated, np.nan, found[name])
    blank = blank_rows(found["flags"])
    for name, values in found.items():
        if name.startswith(("contribution_", "tag_", "origins_")) or name == "dew_point_without_c":
            found[name] = np.where(blank.reshape(-1, *(1,) * (values.ndim - 1)), np.nan, values)
    return found | {f"hourly_{name}": values[:, 1:-1] for name, values in by_hour.items() if name[0] != "_"}


def _wind_of_day(inputs: AirInputs, course: Course) -> dict[str, np.ndarray]:
    """Daytime wind that moved the air, (county,); NaN on days without."""
    wind = None if inputs.winds is None else inputs.winds.of(course.day.number, "day")
    east, north = (np.full(len(inputs.area_km2), np.nan),) * 2 if wind is None else wind
    return {"wind_east_m_s": east, "wind_north_m_s": north}


def _profile(course: Course) -> np.ndarray:
    """Morning air by layer: height, potential temperature, humidity, humidity without crops; (4, county, layer)."""
    height = course.depths.heights
    theta, q = course.morning.theta_k - FREEZING_K, course.morning.q_kg_kg
    crops = np.zeros_like(q)
    crops[:, : course.crops_carried.shape[1]] = course.crops_carried
    middle = 0.5 * (height[:, 1:] + height[:, :-1])
    return np.stack([middle, theta, 1000.0 * q, 1000.0 * np.maximum(q - crops, 0.0)]).astype(np.float32)


def _by_hour(layout: Layout, course: Course, pressure: np.ndarray) -> dict[str, np.ndarray]:
    """The day's course, (row, hour edge); names with an underscore are not shown."""
    q = course.values[:, :, HUMIDITY].T
    tags = course.values[:, :, layout.tags]
    crops = tags[:, :, layout.crop_tags].sum(axis=2).T
    dew = humidity.dew_point_from_specific_humidity(q, pressure[:, None])
    shown = np.isfinite(q)
    theta = np.where(shown, course.theta_k - FREEZING_K, np.nan)
    e = humidity.vapour_pressure_from_specific_humidity(q, pressure[:, None])
    return {
        "mixing_depth_m": np.where(shown, course.depths.metres(course.depths.water), np.nan),
        "dew_point_mixed_c": dew,
        "theta_mixed_c": theta,
        "rh_mixed_pct": np.minimum(humidity.relative_humidity(e, theta), 100.0),
        "humidity_mixed_g_kg": 1000.0 * q,
        "contribution_c": column.contribution(q, crops, pressure[:, None]),
        "contribution_g_kg": 1000.0 * crops,
        "_q": q,
        "_crops": crops,
    }


def _at_the_hour(
    layout: Layout, course: Course, by_hour: dict[str, np.ndarray], hour: int, pressure: np.ndarray
) -> dict[str, np.ndarray]:
    """Values at the contribution hour, and the contribution at the other hours."""
    rows = np.arange(len(pressure))
    q, crops, contribution = by_hour["_q"][:, hour], by_hour["_crops"][:, hour], by_hour["contribution_c"]
    values = course.values[hour]
    peak = _peak_hour(by_hour["dew_point_mixed_c"], course)
    share = values[:, layout.tags] / np.where(crops > 0.0, crops, 1.0)[:, None]
    each = share * contribution[:, hour, None]
    crop, same_day = layout.crop_tags, np.tile(np.arange(layout.ages) == 0, layout.sources)
    home = crops if course.home is None else course.home[hour][:, crop].sum(axis=1)
    home_share = np.where(crops > 0.0, home / np.where(crops > 0.0, crops, 1.0), 0.0)
    shape = (len(rows), layout.sources, layout.ages)
    found = {
        "mixing_depth_m": by_hour["mixing_depth_m"][:, hour],
        "depth_a0_m": course.depths.metres(course.depths.no_entrainment[:, hour]),
        "humidity_mixed_g_kg": 1000.0 * q,
        "theta_mixed_c": by_hour["theta_mixed_c"][:, hour],
        "dew_point_mixed_c": by_hour["dew_point_mixed_c"][:, hour],
        "dew_point_without_c": by_hour["dew_point_mixed_c"][:, hour] - contribution[:, hour],
        "contribution_c": contribution[:, hour],
        "contribution_g_kg": 1000.0 * crops,
        "contribution_same_day_c": each[:, crop & same_day].sum(axis=1),
        "contribution_carried_c": each[:, crop & ~same_day].sum(axis=1),
        "contribution_home_c": home_share * contribution[:, hour],
        "contribution_other_c": (1.0 - home_share) * contribution[:, hour],
        "contribution_12_c": contribution[:, 12],
        "contribution_18_c": contribution[:, 18],
        "contribution_peak_c": contribution[rows, peak],
        "peak_hour": np.where(np.isfinite(q), HOURS[peak], np.nan),
        "break_hour": course.depths.break_hour,
        "lcl_m": humidity.condensation_level(
            by_hour["theta_mixed_c"][:, hour], by_hour["dew_point_mixed_c"][:, hour], pressure
        ),
        "tag_contribution_c": each.reshape(shape),
        "tag_contribution_g_kg": 1000.0 * values[:, layout.tags].reshape(shape),
        "tag_g_kg_12": 1000.0 * course.values[12][:, layout.tags].reshape(shape),
        "tag_g_kg_18": 1000.0 * course.values[18][:, layout.tags].reshape(shape),
        "tag_g_kg_peak": 1000.0 * course.values[peak, rows][:, layout.tags].reshape(shape),
    }
    if course.home is not None:
        found["tag_home_g_kg"] = 1000.0 * course.home[hour].reshape(shape)
    if layout.origins:
        found["origins_g_kg"] = 1000.0 * values[:, layout.by_origin]
    return found


def _peak_hour(dew_point_c: np.ndarray, course: Course) -> np.ndarray:
    """Hour edge of the highest dew point of the mixed air, from 9 h to sunset; (row,) int."""
    hours = HOURS[None, :]
    looked = (hours >= PEAK_FROM_HOUR) & (hours <= course.day.sunset[:, None]) & np.isfinite(dew_point_c)
    return np.where(looked, dew_point_c, -np.inf).argmax(axis=1)


def _range(
    inputs: AirInputs, settings: Settings, layout: Layout, course: Course, by_hour: dict[str, np.ndarray], hour: int
) -> dict[str, np.ndarray]:
    """Ends of the contribution's range: by the edge, by entrainment where it matters, by what no stand represents."""
    pressure, depths = course.day.pressure_kpa, course.depths
    base = by_hour["contribution_c"][:, hour]
    tags = course.values[hour][:, layout.tags]
    same_day = np.tile(np.arange(layout.ages) == 0, layout.sources)
    mass, shallow = depths.water[:, hour], depths.no_entrainment[:, hour]
    # With less air the day's own water is denser; what older water there is lies in the whole layer.
    denser = mass / shallow - 1.0
    crops = by_hour["_crops"][:, hour] + denser * tags[:, layout.crop_tags & same_day].sum(axis=1)
    q = by_hour["_q"][:, hour] + denser * tags[:, same_day].sum(axis=1)
    other = np.where(depths_differ(depths, hour), column.contribution(q, crops, pressure), base)
    with_outside = base
    if layout.outside:
        room = by_hour["_q"][:, hour] - course.values[hour][:, FLOOR]
        outside = np.minimum(by_hour["_crops"][:, hour] + course.values[hour][:, 2], room)
        with_outside = np.fmax(base, column.contribution(by_hour["_q"][:, hour], outside, pressure))
    little = inputs.represented < settings.represented_least_pct / 100.0
    high = np.fmax(with_outside, other)
    return {
        "contribution_outside_c": with_outside - base,
        "contribution_low_c": np.fmin(base, other),
        "contribution_high_c": np.where(little, high / np.clip(inputs.represented, 0.05, 1.0), high),
    }
