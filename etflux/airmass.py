"""The air above all counties, day after day: morning, heat, mixing, and the water each cover put into it.

Every tracer (specific humidity and each tag) is kept as (county, layer, tracer) on the layers of ``column`` and never
regridded. A tag is water known by its source (a cover, the rest, sprinkler loss) and its age in days; tags are moved,
mixed and replaced by the same operations as the humidity itself.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux import column, humidity, profiles, reference, solar
from etflux.column import EDGES, HOURS
from etflux.humidity import FREEZING_K, latent_heat_of_vaporization
from etflux.profiles import Morning, SiteProfile
from etflux.variables import flag_bits
from etflux.weather import great_circle_km

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings

AGES = 8  # 0 to 6 days, 7 for older
AIR = flag_bits("air")
NOT_CROPS = ("rest",)
FIRST_RESIDUAL_M = 1500.0  # before the first day; common practice, no source
REPORT_HOURS = (12.0, 15.0, 18.0)
HEAVY_RAIN_MM = 20.0
DRY_Q = 0.006  # kg/kg
DEPTHS_DIFFER = 0.30
ELSEWHERE_SHARE = 0.30
TEMPERATURE_OFF_K = 2.0
GIVEN_RATIO = (0.5, 2.0)


@dataclass(frozen=True)
class AirInputs:
    """What the air is given, arrays (day, county) unless said.

    Parameters
    ----------
    dates : ndarray of datetime64[D], shape (day,)
    county_ids : tuple of str
    latitude_deg, longitude_deg, elevation_m, area_km2 : ndarray, shape (county,)
    t_max_c, t_min_c, dew_point_c, vapour_pressure_kpa, rs_mj_m2_d, rain_mm : ndarray
    dew_point_morning_c : ndarray
        Observed near sunrise; NaN where not.
    albedo, ground_cover : ndarray
    forecast : ndarray of bool
    sources : tuple of str
        Names of the sources of water.
    water_mm : ndarray, shape (day, county, source)
        Water that left the ground, over the whole county. [mm d-1]
    represented : ndarray, shape (county,)
        Share of the county that stands represent.
    given_depth_m, given_hour : ndarray
        Entered mixing depths and their hours (NaN: the day's greatest); NaN where none.
    sites : list of SiteProfile
        Morning profiles.
    """

    dates: np.ndarray
    county_ids: tuple[str, ...]
    latitude_deg: np.ndarray
    longitude_deg: np.ndarray
    elevation_m: np.ndarray
    area_km2: np.ndarray
    t_max_c: np.ndarray
    t_min_c: np.ndarray
    dew_point_c: np.ndarray
    vapour_pressure_kpa: np.ndarray
    rs_mj_m2_d: np.ndarray
    rain_mm: np.ndarray
    dew_point_morning_c: np.ndarray
    albedo: np.ndarray
    ground_cover: np.ndarray
    forecast: np.ndarray
    sources: tuple[str, ...]
    water_mm: np.ndarray
    represented: np.ndarray
    given_depth_m: np.ndarray
    given_hour: np.ndarray
    sites: list[SiteProfile] = field(default_factory=list)


@dataclass(frozen=True)
class AirResults:
    """What the air gives: county variables (day, county), the course by the hour, contributions and the budget.

    `contribution_c` and `contribution_g_kg` in `tags` have the shape (day, county, source, age) and are those of the
    contribution hour; `hourly` arrays have the shape (day, county, hour) with `hours` in local solar time.
    """

    county: dict[str, np.ndarray]
    tags: dict[str, np.ndarray]
    hours: np.ndarray
    hourly: dict[str, np.ndarray]
    sources: tuple[str, ...]
    budget: list[dict[str, Any]]


def given_depths(table: pd.DataFrame, dates: np.ndarray, county_ids: tuple[str, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Entered mixing depths and their hours as (day, county); a row without a county holds for all others."""
    import pandas as pd

    depth = np.full((len(dates), len(county_ids)), np.nan)
    hour = depth.copy()
    if not len(table) or not len(dates):
        return depth, hour
    named = table["county_id"].fillna("").astype(str)
    position = pd.Index(county_ids).get_indexer(pd.Index(named))
    day = (pd.to_datetime(table["date"]).to_numpy().astype("datetime64[D]") - dates[0]).astype(float)
    value = table["mixing_depth_m"].to_numpy(float)
    at = table["hour"].to_numpy(float) if "hour" in table else np.full(len(table), np.nan)
    inside = (day >= 0) & (day < len(dates))
    for everywhere in (True, False):  # rows of one county win
        for row in np.flatnonzero(inside & ((named == "").to_numpy() == everywhere)):
            here = slice(None) if everywhere else position[row]
            depth[int(day[row]), here], hour[int(day[row]), here] = value[row], at[row]
    return depth, hour


@dataclass
class _State:
    """What one day hands to the next: the evening's tracers, mixing depth and highest temperature."""

    tracers: np.ndarray  # (county, layer, 1 + source * age)
    depth_m: np.ndarray
    t_max_c: np.ndarray
    t_max_mean_c: np.ndarray


def season(inputs: AirInputs, settings: Settings, progress: Callable[[float], None] | None = None) -> AirResults:
    """Run the air above all counties through all days.

    Parameters
    ----------
    inputs : AirInputs
    settings : Settings
    progress : callable, optional
        Called with the share of days that are done.

    Returns
    -------
    AirResults
    """
    n_days, n_counties = inputs.t_max_c.shape
    pressure = humidity.pressure_from_elevation(inputs.elevation_m)
    fetch = fetch_weights(inputs.latitude_deg, inputs.longitude_deg, inputs.area_km2, settings.heat_fetch_km)
    background = profiles.background_humidity(pressure, settings)
    days: list[dict[str, np.ndarray]] = []
    ledger = _Ledger(inputs.sources, inputs.area_km2)
    state: _State | None = None
    for day in range(n_days):
        state, found = _one_day(inputs, settings, day, state, pressure, fetch, background, ledger)
        days.append(found)
        if progress is not None:
            progress((day + 1) / n_days)
    if state is not None:
        ledger.close(state.tracers)
    names = days[0].keys() if days else ()
    stacked = {name: np.stack([found[name] for found in days]) for name in names}
    hourly = {name[7:]: stacked.pop(name) for name in list(stacked) if name.startswith("hourly_")}
    tags = {name[4:]: stacked.pop(name) for name in list(stacked) if name.startswith("tag_")}
    return AirResults(stacked, tags, HOURS[1:-1], hourly, inputs.sources, ledger.rows())


def fetch_weights(
    latitude_deg: np.ndarray, longitude_deg: np.ndarray, area_km2: np.ndarray, fetch_km: float
) -> np.ndarray:
    """Area weights of the counties around each, itself included; rows sum to 1. Shape (county, county)."""
    near = great_circle_km(latitude_deg, longitude_deg, latitude_deg, longitude_deg) <= fetch_km
    np.fill_diagonal(near, True)
    weight = near * area_km2
    return weight / weight.sum(axis=1, keepdims=True)


def _one_day(
    inputs: AirInputs,
    settings: Settings,
    day: int,
    before: _State | None,
    pressure: np.ndarray,
    fetch: np.ndarray,
    background: np.ndarray,
    ledger: _Ledger,
) -> tuple[_State, dict[str, np.ndarray]]:
    """Morning, heat, mixing and contribution of one day."""
    julian = float(solar.day_of_year(inputs.dates[day : day + 1])[0])
    sunrise, sunset = solar.sunrise_sunset(inputs.latitude_deg, julian)
    morning, t_max_mean = _morning(inputs, settings, day, before, pressure, sunrise)
    background = np.minimum(background, settings.background_share * morning.q_kg_kg)
    tracers, replaced = _start_tracers(inputs, morning, before, background, ledger)

    water = inputs.water_mm[day]
    total = water.sum(axis=1)
    heat = _heat(inputs, settings, day, julian, total)
    own = heat.sensible
    shared = _area_mean(fetch, own)
    used = np.maximum(shared, settings.least_heat_share * np.maximum(heat.available, 0.0))
    after_start = np.clip(HOURS[1:] - morning.start_hour[:, None], 0.0, 1.0)
    theta = (inputs.t_max_c[day] + FREEZING_K)[:, None]
    heat_in = column.heat_supply(used) * after_start
    water_in = heat.evaporated_share * after_start * total[:, None]
    supply = _running(heat_in + column.VIRTUAL * theta * water_in)
    warmth = _running(heat_in)
    wet_share = _running(heat.evaporated_share)  # of the day's water, for the tags
    wet_after = _running(heat.evaporated_share * after_start)  # and of what the morning air did not hold yet

    depth = _Depth(morning, pressure, settings, supply, inputs.given_depth_m[day], inputs.given_hour[day])
    found = _hours(inputs, settings, day, pressure, morning, tracers, depth, wet_share, wet_after, warmth, sunset)
    found |= {
        "available_energy_mj_m2_d": heat.available.sum(axis=1),
        "sensible_heat_mj_m2_d": used.sum(axis=1),
        "heat_elsewhere_mj_m2_d": (used - own).sum(axis=1),
        "replaced_share": replaced,
        "profile_distance_km": morning.distance_km,
    }
    short = shared.sum(axis=1) < 0.0
    _flags(inputs, settings, day, found, morning, depth, short, background[:, 0])
    _no_mixed_air(found, (found["flags"] & AIR["saturated"]) > 0)
    _blank(found, (found["flags"] & (AIR["saturated"] | AIR["energy_short"] | AIR["tags_above_humidity"])) > 0)

    evening = _evening(inputs, settings, day, tracers, depth, wet_share[:, -1], wet_after[:, -1], background, ledger)
    return _State(evening, depth.top_m, inputs.t_max_c[day], t_max_mean), found


def _running(values: np.ndarray) -> np.ndarray:
    """Sum up to each hour edge, shape (county, hour + 1), never falling."""
    zero = np.zeros((len(values), 1))
    return np.maximum.accumulate(np.concatenate([zero, np.cumsum(values, axis=1)], axis=1), axis=1)


def _area_mean(weights: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Weighted mean over neighbours, leaving out those without a value."""
    good = np.isfinite(values)
    if good.all():
        return weights @ values
    return (weights @ np.where(good, values, 0.0)) / np.maximum(weights @ good.astype(float), 1e-300)


def _morning(
    inputs: AirInputs, settings: Settings, day: int, before: _State | None, pressure: np.ndarray, sunrise: np.ndarray
) -> tuple[Morning, np.ndarray]:
    """Profile or standard air, and the running mean of highest temperatures behind it."""
    t_max = inputs.t_max_c[day]
    window = inputs.t_max_c[max(0, day - 10) : max(1, day)]
    mean = window.mean(axis=0)
    if before is None:
        yesterday, residual = t_max, np.full(len(t_max), FIRST_RESIDUAL_M)
    else:
        yesterday, residual = before.t_max_c, before.depth_m - settings.residual_depth_less_m
    residual = np.clip(residual, settings.residual_depth_low_m, settings.residual_depth_high_m)
    dew = inputs.dew_point_morning_c[day]
    estimate = np.fmin(inputs.dew_point_c[day], inputs.t_min_c[day])
    free_air = mean + settings.free_air_above_c
    if settings.free_air == "fixed":
        free_air = np.full(len(mean), settings.free_air_theta_c)
    standard = profiles.standard_profile(
        inputs.t_min_c[day], yesterday, residual, np.where(np.isnan(dew), estimate, dew), free_air, pressure, settings
    )
    sites = [site for site in inputs.sites if site.date == inputs.dates[day]]
    morning = profiles.blend(
        sites, inputs.latitude_deg, inputs.longitude_deg, settings.profile_distance_km, standard, pressure, sunrise
    )
    no_dew = np.isnan(dew) & (morning.flags & AIR["standard_profile"] > 0)
    flags = morning.flags | np.where(no_dew, AIR["estimated_dew_point"], 0)
    return Morning(morning.theta_k, morning.q_kg_kg, morning.start_hour, flags, morning.distance_km), mean


def _start_tracers(
    inputs: AirInputs, morning: Morning, before: _State | None, background: np.ndarray, ledger: _Ledger
) -> tuple[np.ndarray, np.ndarray]:
    """The morning's humidity with yesterday's tags a day older, less what other air has taken away.

    Layer by layer every tag is multiplied by r = (q_obs - q_bg)/(q_mod - q_bg), kept to 0-1: air that was replaced
    takes its tags with it.
    """
    n_tags = len(inputs.sources) * AGES
    tracers = np.zeros((*morning.q_kg_kg.shape, 1 + n_tags))
    tracers[:, :, 0] = morning.q_kg_kg
    if before is None:
        return tracers, np.full(len(tracers), np.nan)
    above = before.tracers[:, :, 0] - background
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = np.where(above > 0.0, (morning.q_kg_kg - background) / above, 0.0)
    kept = np.clip(np.where(np.isnan(ratio), 0.0, ratio), 0.0, 1.0)
    old = np.nan_to_num(before.tracers[:, :, 1:])
    ledger.add("replaced by other air", old * (1.0 - kept)[:, :, None])
    old = (old * kept[:, :, None]).reshape(*kept.shape, len(inputs.sources), AGES)
    aged = np.zeros_like(old)
    aged[..., 1:] = old[..., :-1]
    aged[..., -1] += old[..., -1]
    tracers[:, :, 1:] = aged.reshape(*kept.shape, n_tags)
    low = EDGES[1:] <= 1500.0
    mass = column.LAYER_MASS[low]
    return tracers, 1.0 - (kept[:, low] * mass).sum(axis=1) / mass.sum()


def _heat(inputs: AirInputs, settings: Settings, day: int, julian: float, total_mm: np.ndarray) -> column.Heat:
    """Net radiation, ground heat and latent heat of the counties, by the hour."""
    ra = solar.extraterrestrial_radiation(inputs.latitude_deg, julian)
    rso = solar.clear_sky_radiation(ra, inputs.elevation_m)
    t_max, t_min = inputs.t_max_c[day], inputs.t_min_c[day]
    rs = inputs.rs_mj_m2_d[day]
    rnl = reference.net_longwave(t_max, t_min, inputs.vapour_pressure_kpa[day], rs / np.maximum(rso, 1e-6))
    cover = np.clip(np.nan_to_num(inputs.ground_cover[day]), 0.0, 1.0)
    ground = settings.ground_heat_bare + (settings.ground_heat_full_cover - settings.ground_heat_bare) * cover
    latent = total_mm * latent_heat_of_vaporization(0.5 * (t_max + t_min))
    return column.hourly_heat(inputs.latitude_deg, julian, rs, rnl, inputs.albedo[day], ground, latent)


class _Depth:
    """Mass of the mixed air at every hour edge: by heat with and without entrainment, and where a depth was given."""

    def __init__(
        self, morning: Morning, pressure: np.ndarray, settings: Settings, supply: np.ndarray, given_m: np.ndarray,
        given_hour: np.ndarray,
    ) -> None:  # fmt: skip
        theta_v = column.virtual_theta(morning.theta_k, morning.q_kg_kg)
        theta_v = np.maximum.accumulate(theta_v, axis=1)
        self.heights = column.heights(morning.theta_k, morning.q_kg_kg, pressure)
        counties = len(pressure)
        edges = np.broadcast_to(EDGES, (counties, len(EDGES)))
        floor = column.across(np.full(counties, settings.depth_floor_m), self.heights, edges)
        self.on_floor_mass = floor
        self.by_heat = self._masses(theta_v, settings.entrainment_share, supply, floor)
        self.no_entrainment = self._masses(theta_v, 0.0, supply, floor)
        self.given = np.isfinite(given_m)
        self.water = self._with_given(supply, given_m, given_hour, edges, floor)
        self.top_m = column.across(self.water[:, -1], edges, self.heights)

    @staticmethod
    def _masses(theta_v: np.ndarray, entrainment: float, supply: np.ndarray, floor: np.ndarray) -> np.ndarray:
        need = column.heat_need(theta_v, entrainment)
        return np.maximum(column.mixed_mass(need, supply), floor[:, None])

    def _with_given(
        self, supply: np.ndarray, given_m: np.ndarray, given_hour: np.ndarray, edges: np.ndarray, floor: np.ndarray
    ) -> np.ndarray:
        """Where a depth is given it sets the water's mixing; other hours scale as the root of the heat supply."""
        if not self.given.any():
            return self.by_heat
        mass = column.across(given_m, self.heights, edges)
        hours = np.broadcast_to(HOURS, supply.shape)
        at = column.across(np.where(np.isnan(given_hour), HOURS[-1], given_hour), hours, supply)
        with np.errstate(invalid="ignore", divide="ignore"):
            scale = np.sqrt(np.where(at[:, None] > 0.0, supply / at[:, None], 1.0))
        scaled = np.clip(mass[:, None] * scale, floor[:, None], EDGES[-1])
        return np.where(self.given[:, None], scaled, self.by_heat)

    def metres(self, mass: np.ndarray) -> np.ndarray:
        """Height of a mass above the ground. [m]"""
        return column.across(mass, np.broadcast_to(EDGES, self.heights.shape), self.heights)


def _hours(
    inputs: AirInputs, settings: Settings, day: int, pressure: np.ndarray, morning: Morning, tracers: np.ndarray,
    depth: _Depth, wet_share: np.ndarray, wet_after: np.ndarray, warmth: np.ndarray, sunset: np.ndarray,
) -> dict[str, np.ndarray]:  # fmt: skip
    """Mixed air at every full hour, and the day's values at the contribution hour."""
    n_sources = len(inputs.sources)
    crops = np.repeat([name not in NOT_CROPS for name in inputs.sources], AGES)
    hourly: dict[str, list[np.ndarray]] = {
        name: [] for name in ("mixing_depth_m", "dew_point_c", "theta_c", "contribution_c")
    }
    keep: dict[float, dict[str, np.ndarray]] = {}
    for hour in HOURS[1:-1]:
        at = _mixed_at(inputs, day, int(hour), pressure, morning, tracers, depth, wet_share, wet_after, warmth)
        at["crop_tags"] = at["tags"][:, crops].sum(axis=1)
        at["contribution_c"] = column.contribution(at["q"], at["crop_tags"], pressure)
        at["dew_point_c"] = humidity.dew_point_from_specific_humidity(at["q"], pressure)
        at["theta_c"] = at["theta"] - FREEZING_K
        for name, values in hourly.items():
            values.append(at[name])
        keep[float(hour)] = at
    course = {f"hourly_{name}": np.stack(values, axis=1) for name, values in hourly.items()}
    found: dict[str, np.ndarray] = dict(course)
    at = keep[float(round(settings.contribution_hour))]
    same_day = np.tile(np.arange(AGES) == 0, n_sources)
    share = at["tags"] / np.where(at["crop_tags"] > 0.0, at["crop_tags"], 1.0)[:, None]
    each_c = share * at["contribution_c"][:, None]
    found |= {
        "mixing_depth_m": at["mixing_depth_m"],
        "depth_a0_m": depth.metres(depth.no_entrainment[:, round(settings.contribution_hour)]),
        "humidity_mixed_g_kg": 1000.0 * at["q"],
        "theta_mixed_c": at["theta_c"],
        "dew_point_mixed_c": at["dew_point_c"],
        "dew_point_without_c": at["dew_point_c"] - at["contribution_c"],
        "contribution_c": at["contribution_c"],
        "contribution_g_kg": 1000.0 * at["crop_tags"],
        "contribution_same_day_c": each_c[:, crops & same_day].sum(axis=1),
        "contribution_carried_c": each_c[:, crops & ~same_day].sum(axis=1),
        "lcl_m": humidity.condensation_level(at["theta_c"], at["dew_point_c"]),
        "tag_contribution_c": each_c.reshape(-1, n_sources, AGES),
        "tag_contribution_g_kg": 1000.0 * at["tags"].reshape(-1, n_sources, AGES),
    }
    for hour, name in ((12.0, "contribution_12_c"), (18.0, "contribution_18_c")):
        found[name] = keep[hour]["contribution_c"]
    daylight = (HOURS[1:-1] >= 9.0) & (HOURS[1:-1] <= sunset[:, None])
    dew = np.where(daylight, course["hourly_dew_point_c"], -np.inf)
    peak = np.nan_to_num(dew, nan=-np.inf).argmax(axis=1)
    found["peak_hour"] = HOURS[1:-1][peak]
    found["contribution_peak_c"] = course["hourly_contribution_c"][np.arange(len(peak)), peak]
    found |= _range(
        inputs, settings, day, pressure, morning, tracers, depth, wet_share, wet_after, warmth, crops, found
    )
    return found


def _mixed_at(
    inputs: AirInputs, day: int, hour: int, pressure: np.ndarray, morning: Morning, tracers: np.ndarray, depth: _Depth,
    wet_share: np.ndarray, wet_after: np.ndarray, warmth: np.ndarray, mass: np.ndarray | None = None,
) -> dict[str, np.ndarray]:  # fmt: skip
    """Humidity, tags and potential temperature of the mixed air at one hour."""
    mixed = depth.water[:, hour] if mass is None else mass
    added = _added(inputs.water_mm[day], wet_share[:, hour], wet_after[:, hour])
    weight = column.mixing_weights(mixed)
    value = (np.matmul(weight[:, None, :], tracers)[:, 0, :] + added) / mixed[:, None]
    warm_mass = depth.by_heat[:, hour]
    theta = ((column.mixing_weights(warm_mass) * morning.theta_k).sum(axis=1) + warmth[:, hour]) / warm_mass
    return {
        "q": value[:, 0], "tags": value[:, 1:], "theta": theta, "mixing_depth_m": depth.metres(mixed),
    }  # fmt: skip


def _added(water_mm: np.ndarray, share: np.ndarray, share_after: np.ndarray) -> np.ndarray:
    """Water that entered so far, as (county, tracer): all of it for the tags, what the morning air lacked for q."""
    n_counties, n_sources = water_mm.shape
    added = np.zeros((n_counties, 1 + n_sources * AGES))
    added[:, 0] = water_mm.sum(axis=1) * share_after
    added[:, 1::AGES] = water_mm * share[:, None]
    return added


def _range(
    inputs: AirInputs, settings: Settings, day: int, pressure: np.ndarray, morning: Morning, tracers: np.ndarray,
    depth: _Depth, wet_share: np.ndarray, wet_after: np.ndarray, warmth: np.ndarray, crops: np.ndarray,
    found: dict[str, np.ndarray],
) -> dict[str, np.ndarray]:  # fmt: skip
    """Ends of the range: without entrainment where that matters, and the rest like the stands where little is known."""
    hour = round(settings.contribution_hour)
    base = found["contribution_c"]
    shallow = _mixed_at(
        inputs,
        day,
        hour,
        pressure,
        morning,
        tracers,
        depth,
        wet_share,
        wet_after,
        warmth,
        depth.no_entrainment[:, hour],
    )
    other = column.contribution(shallow["q"], shallow["tags"][:, crops].sum(axis=1), pressure)
    differ = _differ(found) & ~depth.given
    low = np.where(differ, np.fmin(base, other), base)
    high = np.where(differ, np.fmax(base, other), base)
    little = inputs.represented < settings.represented_least_pct / 100.0
    known = np.clip(inputs.represented, 0.05, 1.0)
    high = np.where(little, high / known, high)
    return {"contribution_low_c": low, "contribution_high_c": high}


def _differ(found: dict[str, np.ndarray]) -> np.ndarray:
    """Whether entrainment changes the depth by so much that the contribution is a range."""
    return found["mixing_depth_m"] - found["depth_a0_m"] > DEPTHS_DIFFER * found["mixing_depth_m"]


def _flags(
    inputs: AirInputs, settings: Settings, day: int, found: dict[str, np.ndarray], morning: Morning, depth: _Depth,
    short: np.ndarray, background: np.ndarray,
) -> None:  # fmt: skip
    """Write the forecaster's flags into `found`."""
    hour = round(settings.contribution_hour)
    pressure = humidity.pressure_from_elevation(inputs.elevation_m)
    heat_m = depth.metres(depth.by_heat[:, hour])
    ratio = found["mixing_depth_m"] / heat_m
    q = found["humidity_mixed_g_kg"] / 1000.0
    saturated = q > column.saturation_humidity(found["theta_mixed_c"] + FREEZING_K, pressure)
    all_tags = np.nansum(found["tag_contribution_g_kg"], axis=(1, 2)) / 1000.0
    conditions = {
        "cumulus": found["lcl_m"] < found["mixing_depth_m"],
        "depth_floor": depth.water[:, hour] <= depth.on_floor_mass * (1.0 + 1e-9),
        "heat_elsewhere": found["heat_elsewhere_mj_m2_d"]
        > ELSEWHERE_SHARE * np.maximum(found["sensible_heat_mj_m2_d"], 1e-9),
        "dry_region": q < DRY_Q,
        "replaced": found["replaced_share"] > 0.5,
        "heavy_rain": inputs.rain_mm[day] > HEAVY_RAIN_MM,
        "temperature_off": np.abs(found["theta_mixed_c"] - inputs.t_max_c[day]) > TEMPERATURE_OFF_K,
        "forecast": inputs.forecast[day],
        "saturated": saturated,
        "depths_differ": _differ(found) & ~depth.given,
        "given_depth_ratio": depth.given & ((ratio < GIVEN_RATIO[0]) | (ratio > GIVEN_RATIO[1])),
        "energy_short": short,
        "tags_above_humidity": all_tags > np.maximum(q - background, 0.0) + 1e-9,
        "represented_low": inputs.represented < settings.represented_least_pct / 100.0,
    }
    flags = morning.flags.astype(np.int64)
    for name, holds in conditions.items():
        flags = flags | np.where(holds, AIR[name], 0)
    found["flags"] = flags


def _no_mixed_air(found: dict[str, np.ndarray], saturated: np.ndarray) -> None:
    """Mixed air that would be saturated is no mixed air: its humidity is no number either."""
    for name in ("dew_point_mixed_c", "humidity_mixed_g_kg", "lcl_m"):
        found[name] = np.where(saturated, np.nan, found[name])


def _blank(found: dict[str, np.ndarray], blank: np.ndarray) -> None:
    """No number where the flags say that none is valid."""
    for name in (
        "contribution_c", "contribution_g_kg", "contribution_low_c", "contribution_high_c", "contribution_12_c",
        "contribution_18_c", "contribution_peak_c", "contribution_same_day_c", "contribution_carried_c",
        "dew_point_without_c", "tag_contribution_c", "tag_contribution_g_kg",
    ):  # fmt: skip
        found[name] = np.where(blank.reshape(-1, *(1,) * (found[name].ndim - 1)), np.nan, found[name])


def _evening(
    inputs: AirInputs, settings: Settings, day: int, tracers: np.ndarray, depth: _Depth, share: np.ndarray,
    share_after: np.ndarray, background: np.ndarray, ledger: _Ledger,
) -> np.ndarray:  # fmt: skip
    """Tracers after the day's mixing, a share of the air replaced by background air."""
    water = np.nan_to_num(inputs.water_mm[day])
    added = _added(water, share, share_after)
    ledger.emit(added[:, 1:])
    _, after = column.mix(tracers, added, depth.water[:, -1])
    stays = float(np.exp(-1.0 / settings.residence_days))
    ledger.add("carried away by the wind", after[:, :, 1:] * (1.0 - stays))
    after[:, :, 1:] *= stays
    after[:, :, 0] = background + (after[:, :, 0] - background) * stays
    return after


class _Ledger:
    """Where every tagged kilogram went, summed over the season."""

    def __init__(self, sources: tuple[str, ...], area_km2: np.ndarray) -> None:
        self.sources, self.area = sources, area_km2
        self.terms: dict[str, np.ndarray] = {}
        self.emitted = np.zeros(len(sources))

    def emit(self, added: np.ndarray) -> None:
        """Water that left the ground, (county, tag) in kg m-2."""
        self.emitted += self._by_source(np.einsum("ct,c->t", added, self.area))

    def add(self, term: str, tracers: np.ndarray) -> None:
        """Tagged water that left the column by one way, (county, layer, tag) in kg/kg."""
        total = self._by_source(np.einsum("clt,l,c->t", tracers, column.LAYER_MASS, self.area))
        self.terms[term] = self.terms.get(term, np.zeros(len(self.sources))) + total

    def close(self, tracers: np.ndarray) -> None:
        """What is still in the air at the end."""
        self.add("still in the air", np.nan_to_num(tracers[:, :, 1:]))

    def _by_source(self, values: np.ndarray) -> np.ndarray:
        return values.reshape(len(self.sources), AGES).sum(axis=1)

    def rows(self) -> list[dict[str, Any]]:
        """Budget as rows, in 10^6 m3 of water."""
        scale = 1e-3  # kg m-2 over km2 to 10^6 m3
        rows = []
        for k, source in enumerate(self.sources):
            parts = {"left the ground": self.emitted[k], **{term: values[k] for term, values in self.terms.items()}}
            parts["unaccounted"] = self.emitted[k] - sum(values[k] for values in self.terms.values())
            rows += [
                {
                    "balance": "tagged water",
                    "subject": source,
                    "term": term,
                    "value": scale * float(value),
                    "unit": "10⁶ m³",
                }
                for term, value in parts.items()
            ]
        return rows
