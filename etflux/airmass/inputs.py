"""What the air above the counties is given and what it gives."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux import humidity, solar
from etflux.profiles import SiteProfile
from etflux.wind import Region, Winds

if TYPE_CHECKING:
    import pandas as pd

AGES = 8  # 0 to 6 days, 7 for older
NOT_CROPS = ("rest",)


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
    region, winds : Region and Winds, optional
        Cells of the counties and the wind over them; without both the air stays for `residence_days`.
    dew_point_afternoon_c, u2_m_s : ndarray, optional
        Observed in the afternoon, and the day's wind at 2 m: they split the observed rise.
    transpiration_mm : ndarray, shape (day, county, source), optional
        The part of `water_mm` that passed through plants: the range of Kcb moves it.
    water_without_crops_mm : ndarray, optional
        Water of a county whose stands have the rest's cover. Where it is missing the rest's own depth stands in.
    background_dew_point_c : ndarray, shape (day,), optional
        Of air that no crop has moistened; NaN on days that take the setting.
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
    region: Region | None = None
    winds: Winds | None = None
    dew_point_afternoon_c: np.ndarray | None = None
    u2_m_s: np.ndarray | None = None
    transpiration_mm: np.ndarray | None = None
    water_without_crops_mm: np.ndarray | None = None
    background_dew_point_c: np.ndarray | None = None

    @property
    def is_crop(self) -> np.ndarray:
        """Whether each source counts as crops, shape (source,)."""
        return np.array([name not in NOT_CROPS for name in self.sources])

    @property
    def pressure_kpa(self) -> np.ndarray:
        """At the ground, shape (county,). [kPa]"""
        return humidity.pressure_from_elevation(self.elevation_m)


@dataclass(frozen=True)
class AirResults:
    """What the air gives.

    Parameters
    ----------
    county : dict of ndarray, shape (day, county)
        By the names of the registry.
    tags : dict of ndarray, shape (day, county, source, age)
        `contribution_c` and `contribution_g_kg` at the contribution hour, and `home_g_kg`, the part of it from the
        county itself; `g_kg_12`, `g_kg_18` and `g_kg_peak` at the other hours.
    hours : ndarray
        1 to 23, local solar time.
    hourly : dict of ndarray, shape (day, county, hour)
        The day's course; NaN before sunrise; after sunset the air keeps what it had.
    sources : tuple of str
    budget : list of dict
        Rows of the budget table.
    ledger : dict of ndarray, shape (day, source)
        The same by day: where tagged water came from and went, 10^6 kg.
    origins_g_kg : ndarray, shape (day, county, county), or None
        Crop water over each county by the county that it left.
    ranges : dict of ndarray, shape (2, day, county)
        Lowest and highest contribution by what was varied. [degC]
    profiles : ndarray, shape (day, 4, county, layer), or None
        Morning air of the last days: height of the layers' middles [m], potential temperature [degC], humidity and
        humidity without the crops' water [g kg-1].
    """

    county: dict[str, np.ndarray]
    tags: dict[str, np.ndarray]
    hours: np.ndarray
    hourly: dict[str, np.ndarray]
    sources: tuple[str, ...]
    budget: list[dict[str, Any]]
    ledger: dict[str, np.ndarray] = field(default_factory=dict)
    origins_g_kg: np.ndarray | None = None
    ranges: dict[str, np.ndarray] = field(default_factory=dict)
    profiles: np.ndarray | None = None


def given_depths(table: pd.DataFrame, dates: np.ndarray, county_ids: tuple[str, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Entered mixing depths and their hours as (day, county); a row without a county holds for all others."""
    import pandas as pd

    depth = np.full((len(dates), len(county_ids)), np.nan)
    hour = depth.copy()
    if not len(table) or not len(dates):
        return depth, hour
    named = table["county_id"].fillna("").astype(str)
    position = pd.Index(county_ids).get_indexer(pd.Index(named))
    everywhere = (named == "").to_numpy()
    day = (pd.to_datetime(table["date"]).to_numpy().astype("datetime64[D]") - dates[0]).astype(int)
    value = table["mixing_depth_m"].to_numpy(float)
    at = table["hour"].to_numpy(float) if "hour" in table else np.full(len(table), np.nan)
    inside = (day >= 0) & (day < len(dates))
    for rows, here in (
        (inside & everywhere, slice(None)),
        (inside & ~everywhere & (position >= 0), position),  # rows of one county win
    ):
        chosen = here if isinstance(here, slice) else here[rows]
        spread = (slice(None), None) if isinstance(here, slice) else ()
        depth[day[rows], chosen] = value[rows][spread]
        hour[day[rows], chosen] = at[rows][spread]
    return depth, hour


def given_background(table: pd.DataFrame, dates: np.ndarray) -> np.ndarray | None:
    """Entered dew points of air that no crop has moistened, (day,); None where there are none. [degC]"""
    if not len(table):
        return None
    days = table["date"].to_numpy().astype("datetime64[D]")
    place = (days - dates[0]).astype(int) if len(dates) else np.empty(0, int)
    found = np.full(len(dates), np.nan)
    inside = (place >= 0) & (place < len(dates))
    found[place[inside]] = table["background_dew_point_c"].to_numpy(float)[inside]
    return found


@dataclass(frozen=True)
class Variation:
    """What one copy of the region does otherwise; factors act on every county and day.

    Parameters
    ----------
    water, transpiration : float
        Factors on all water that leaves the ground, and on the crops' transpiration.
    depth, depth_plus_m : float
        Factor on the mixing depth of the water, and what is added to it. [m]
    residence_plus_d : float
        [d]
    wind : float
        Factor on the wind.
    entrainment : float, optional
        Instead of the setting.
    """

    water: float = 1.0
    transpiration: float = 1.0
    depth: float = 1.0
    depth_plus_m: float = 0.0
    residence_plus_d: float = 0.0
    wind: float = 1.0
    entrainment: float | None = None


@dataclass(frozen=True)
class Day:
    """One day of the inputs, every copy of the region after the other: arrays (row,) with row = copy, county."""

    number: int
    date: np.datetime64
    julian: float
    sunrise: np.ndarray
    sunset: np.ndarray
    latitude_deg: np.ndarray
    longitude_deg: np.ndarray
    elevation_m: np.ndarray
    pressure_kpa: np.ndarray
    t_max_c: np.ndarray
    t_min_c: np.ndarray
    t_max_mean_c: np.ndarray  # of the ten days before
    dew_point_c: np.ndarray
    dew_point_morning_c: np.ndarray
    vapour_pressure_kpa: np.ndarray
    rs_mj_m2_d: np.ndarray
    albedo: np.ndarray
    ground_cover: np.ndarray
    forecast: np.ndarray
    given_depth_m: np.ndarray
    given_hour: np.ndarray
    water_mm: np.ndarray  # (row, source)
    valid: np.ndarray  # bool: nothing that the day needs is missing

    @property
    def daylight(self) -> tuple[int, int]:
        """First and last hour edge of the region's day, which hold every county's sunrise and sunset."""
        return int(np.floor(self.sunrise.min())), int(np.ceil(self.sunset.max()))


def day_of(inputs: AirInputs, number: int, members: tuple[Variation, ...]) -> Day:
    """One day's inputs for every copy of the region."""
    copies = len(members)

    def rows(values: np.ndarray) -> np.ndarray:
        return values if copies == 1 else np.tile(values, copies)

    julian = float(solar.day_of_year(inputs.dates[number : number + 1])[0])
    sunrise, sunset = solar.sunrise_sunset(inputs.latitude_deg, julian)
    water = np.concatenate([_water(inputs, number, member) for member in members])
    daily = {
        name: rows(getattr(inputs, name)[number])
        for name in (
            "t_max_c", "t_min_c", "dew_point_c", "dew_point_morning_c", "vapour_pressure_kpa", "rs_mj_m2_d", "albedo",
            "ground_cover", "forecast", "given_depth_m", "given_hour",
        )
    }  # fmt: skip
    needed = sum(daily[name] for name in ("t_max_c", "t_min_c", "dew_point_c", "vapour_pressure_kpa", "rs_mj_m2_d"))
    return Day(
        number=number,
        date=inputs.dates[number],
        julian=julian,
        sunrise=rows(sunrise),
        sunset=rows(sunset),
        latitude_deg=rows(inputs.latitude_deg),
        longitude_deg=rows(inputs.longitude_deg),
        elevation_m=rows(inputs.elevation_m),
        pressure_kpa=rows(inputs.pressure_kpa),
        t_max_mean_c=rows(inputs.t_max_c[max(0, number - 10) : max(1, number)].mean(axis=0)),
        water_mm=water,
        valid=np.isfinite(needed + water.sum(axis=1)),
        **daily,
    )


def _water(inputs: AirInputs, number: int, member: Variation) -> np.ndarray:
    """Water of one copy, (county, source)."""
    water = inputs.water_mm[number]
    if member.transpiration != 1.0 and inputs.transpiration_mm is not None:
        water = water + (member.transpiration - 1.0) * inputs.transpiration_mm[number] * inputs.is_crop
    return water if member.water == 1.0 else member.water * water
