"""What the figures can show: which quantity, from where, and what several days of it make."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from typing import TYPE_CHECKING, Literal

import numpy as np

from etflux.findings import Finding, ProblemsFound
from etflux.variables import System, from_si, quantity, words_of

if TYPE_CHECKING:
    import xarray as xr

    from etflux.results import Results


@dataclass(frozen=True)
class Shown:
    """One thing that a figure can show.

    `source` is "county", "stand" (area means over a county's stands), "tag" (by source of the water), or blank for a
    figure that is no map. `over_days` is what several days make. `ranked` marks what is a range only, and not ranked,
    where too little of a county is represented. `dark_low` puts the dark end of the palette at low values.
    """

    name: str
    label: str
    figure: Literal["map", "season", "episode", "profile", "dew_point", "volume"] = "map"
    source: Literal["county", "stand", "tag", ""] = ""
    over_days: Literal["sum", "mean", ""] = ""
    palette: str = "flow"
    ranked: bool = False
    dark_low: bool = False

    @property
    def of_air(self) -> bool:
        """Whether it is a property of the mixed air."""
        return self.name.startswith(("dew_point", "humidity", "lcl", "theta"))

    @property
    def hour(self) -> bool:
        """Whether it is of the run's hour of the contribution."""
        fixed = ("contribution_12_c", "contribution_18_c", "contribution_peak_c")
        return self.figure == "map" and (self.ranked or self.of_air) and self.name not in fixed

    @property
    def by_cover(self) -> bool:
        """Whether it can be shown for one cover alone."""
        return self.source in {"stand", "tag"}

    def unit(self, system: System) -> str:
        """Unit of what is shown; a sum of days has no "/day", a figure that is no map has none."""
        if self.figure != "map":
            return ""
        unit = quantity(self.name).unit_in(system)
        return unit.removesuffix("/day") if self.over_days == "sum" else unit

    def heading(self, system: System) -> str:
        """Label with the unit in brackets."""
        return f"{self.label} ({self.unit(system)})" if self.unit(system) else self.label

    def people(self, values: np.ndarray, system: System) -> np.ndarray:
        """SI values in the unit that people of `system` read."""
        return from_si(values, self.name, system)

    def decimals(self, system: System) -> int:
        """Digits after the decimal point that are worth printing."""
        return quantity(self.name).decimals_in(system)


Source = Literal["county", "stand", "tag", ""]
OverDays = Literal["sum", "mean", ""]
_MAPS: tuple[tuple[str, Source, OverDays, str, bool], ...] = (  # name, source, over days, palette, ranked
    ("contribution_c", "county", "mean", "dew", True),
    ("contribution_same_day_c", "county", "mean", "dew", True),
    ("contribution_carried_c", "county", "mean", "dew", True),
    ("contribution_home_c", "county", "mean", "dew", True),
    ("contribution_other_c", "county", "mean", "dew", True),
    ("contribution_12_c", "county", "mean", "dew", True),
    ("contribution_18_c", "county", "mean", "dew", True),
    ("contribution_peak_c", "county", "mean", "dew", True),
    ("contribution_g_kg", "county", "mean", "dew", True),
    ("effect_of_crops_c", "county", "mean", "dew", True),
    ("dew_point_mixed_c", "county", "mean", "dew", False),
    ("dew_point_without_c", "county", "mean", "dew", False),
    ("humidity_mixed_g_kg", "county", "mean", "dew", False),
    ("mixing_depth_m", "county", "mean", "air", False),
    ("lcl_m", "county", "mean", "air", False),
    ("replaced_share", "county", "mean", "air", False),
    ("eto_mm", "county", "sum", "flow", False),
    ("et_county_mm", "county", "sum", "flow", False),
    ("et_stands_mm", "county", "sum", "flow", False),
    ("et_mm", "stand", "sum", "flow", False),
    ("evaporation_mm", "stand", "sum", "flow", False),
    ("transpiration_mm", "stand", "sum", "flow", False),
    ("water_volume_hm3", "county", "sum", "flow", False),
    ("le_county_w_m2", "county", "mean", "flow", False),
    ("le_stands_w_m2", "county", "mean", "flow", False),
    ("le_daytime_w_m2", "county", "mean", "flow", False),
    ("le_hour_w_m2", "county", "mean", "flow", False),
    ("le_transpiration_w_m2", "county", "mean", "flow", False),
    ("le_evaporation_w_m2", "county", "mean", "flow", False),
    ("le_by_tag_w_m2", "tag", "mean", "flow", False),
    ("rain_mm", "county", "sum", "store", False),
    ("irrigation_mm", "stand", "sum", "store", False),
    ("water_left_pct", "stand", "mean", "store", False),
    ("water_left_mm", "stand", "mean", "store", False),
    ("ks", "stand", "mean", "dew", False),
    ("represented_pct", "county", "mean", "air", False),
    ("estimated_share_pct", "county", "mean", "air", False),
)
_LABELS = {"ks": "Stress coefficient, 1 = no stress"}
_FIGURES = (
    Shown("season", "A stand's season", "season"),
    Shown("episode", "What the crops added to the dew point, day by day", "episode", ranked=True),
    Shown("profile", "Morning air and the mixed layer, by height", "profile"),
    Shown("dew_point", "Afternoon dew point, estimated against observed", "dew_point"),
    Shown("volume", "Counties by volume of water", "volume"),
)

QUANTITIES: Mapping[str, Shown] = {
    **{
        name: Shown(name, _LABELS.get(name, quantity(name).label), "map", source, over, palette, ranked, name == "ks")
        for name, source, over, palette, ranked in _MAPS
    },
    **{shown.name: shown for shown in _FIGURES},
}


def unknown(code: str, what: str, value: object, known: Iterable[str]) -> ProblemsFound:
    """The problem of a word that is none of the known ones, with the nearest of them."""
    spelled = {str(word).casefold(): str(word) for word in known}
    close = get_close_matches(str(value).casefold(), spelled, n=1, cutoff=0.3)
    detail = f"the nearest known is {spelled[close[0]]!r}" if close else ""
    return ProblemsFound([Finding(code, what, value=str(value), detail=detail)])


def shown_of(name: str) -> Shown:
    """What a name shows; ProblemsFound for an unknown one."""
    if name not in QUANTITIES:
        raise unknown("show-unknown", "show", name, QUANTITIES)
    return QUANTITIES[name]


def days_of(results: Results, on: object = None, until: object = None) -> np.ndarray:
    """Days from `on` to `until`, datetime64[D]; ProblemsFound for a day that is none of the run.

    `on` is the day of the brief where it is not given, `until` is `on`.
    """
    first = _day(results, "on", on)
    last = first if until is None else _day(results, "until", until)
    if last < first:
        raise ProblemsFound([Finding("days-exchanged", "until", value=str(last), detail=f"the first is {first}")])
    days = results.dates
    return days[(days >= first) & (days <= last)]


def _day(results: Results, what: str, day: object) -> np.datetime64:
    try:
        return results.day(None if day is None else str(day))
    except ValueError as error:
        span = f"its days are {results.dates[0]} to {results.dates[-1]}"
        raise ProblemsFound([Finding("day-not-in-run", what, value=str(day), detail=span)]) from error


def county_position(results: Results, county: str) -> int:
    """Position of a county; ProblemsFound for an unknown id."""
    ids = results.county["county_id"].to_numpy().astype(str).tolist()
    if county not in ids:
        raise unknown("id-not-in-results", "county", county, ids)
    return ids.index(county)


def county_names(results: Results) -> list[str]:
    """Names of the counties for people, in the order of the run: theirs, the outline's, or the id."""
    given, outlines = results.names_by_id("county"), getattr(results, "outlines", None) or {}
    ids = results.county["county_id"].to_numpy().astype(str)
    return [given.get(name) or (outlines[name].name if name in outlines else str(name)) for name in ids]


def represented_least_pct(results: Results) -> float:
    """Share of a county under which its contribution is a range, and not ranked. [%]"""
    return float(results.settings.get("represented_least_pct", 70.0))


def provisional_note(results: Results, days: np.ndarray, county: str | None = None) -> list[str]:
    """One sentence on days that rest on estimates or may still move; none where there are none."""
    rows = results.county.sel(date=days)
    if "provisional" not in rows:
        return []
    here = slice(None) if county is None else slice(county_position(results, county), None)
    bits = rows["provisional"].to_numpy().astype(np.int64)[:, here]
    bits = bits if county is None else bits[:, :1]
    number = int((bits != 0).any(axis=0).sum())
    if not number:
        return []
    where = f" in {number} of {bits.shape[1]} counties" if county is None else ""
    return [f"Provisional{where}: {'; '.join(words_of(int(np.bitwise_or.reduce(bits, axis=None)), 'provisional'))}."]


def sources_of(results: Results) -> list[str]:
    """Sources of the water by the ground they cover, the largest first; the rest and sprinkler loss last."""
    tags, area = results.stand["tag"].to_numpy().astype(str), results.stand["area_km2"].to_numpy()
    ground = {str(tag): float(area[tags == tag].sum()) for tag in np.unique(tags)}
    if "tag" in results.county:
        ground = {**{str(tag): 0.0 for tag in results.county["tag"].to_numpy()}, **ground}
    late = {"rest": 1, "sprinkler loss": 2}
    return sorted(ground, key=lambda tag: (late.get(tag, 0), -ground[tag], tag))


def covers_of(results: Results) -> list[str]:
    """What `cover` may be: sources of the water, then covers by id."""
    ids = [str(name) for name in np.unique(results.stand["cover_id"].to_numpy().astype(str))]
    return list(dict.fromkeys([*sources_of(results), *ids]))


def county_values(
    results: Results, shown: Shown, days: np.ndarray, cover: str | None = None
) -> tuple[np.ndarray, np.ndarray]:
    """Values of every county over some days.

    Parameters
    ----------
    results : Results
    shown : Shown
        A map's.
    days : array of datetime64[D]
        Days of the run.
    cover : str, optional
        A source of the water, or a cover's id; only where `shown.by_cover`.

    Returns
    -------
    values : ndarray, (county,)
        SI. A sum is NaN where a day is missing; a mean is over the days that have a value.
    gaps : ndarray of bool, (county,)
        Where a mean leaves days out.
    """
    daily = daily_values(results, shown, days, cover)
    there = np.isfinite(daily)
    if shown.over_days == "sum":
        return daily.sum(axis=0), np.zeros(daily.shape[1], bool)
    count = there.sum(axis=0)
    total = np.where(there, daily, 0.0).sum(axis=0)
    values = np.where(count > 0, total / np.maximum(count, 1), np.nan)
    return values, (count > 0) & (count < len(days))


def daily_values(results: Results, shown: Shown, days: np.ndarray, cover: str | None = None) -> np.ndarray:
    """Values by (day, county), SI; NaN where there is none."""
    if shown.source == "stand":
        return _stand_means(results, shown.name, days, cover)
    county = results.county.sel(date=days)
    blank = np.full((len(days), county.sizes["county_id"]), np.nan)
    if shown.name not in county:
        return blank
    if shown.source == "tag" and cover is not None:
        tags = [str(tag) for tag in county["tag"].to_numpy()]
        if cover not in tags:
            raise unknown("id-not-in-results", "cover", cover, tags)
        return county[shown.name].to_numpy()[..., tags.index(cover)].astype(float)
    if shown.source == "tag":
        return county[shown.name].to_numpy().astype(float).sum(axis=-1)
    return county[shown.name].to_numpy().astype(float)


def _stand_means(results: Results, name: str, days: np.ndarray, cover: str | None) -> np.ndarray:
    """Area means over the units of each county that have a value, (day, county)."""
    stand = results.stand
    counties = results.county["county_id"].to_numpy().astype(str)
    here = _units_of(results, cover)
    stand = stand.isel(unit_id=here).sel(date=days)
    found = np.full((len(days), len(counties)), np.nan)
    if name not in stand or not here.any():
        return found
    values = np.where(_counts(stand, name), stand[name].to_numpy().astype(float), np.nan)
    position = {county: number for number, county in enumerate(counties)}
    index = np.array([position[county] for county in stand["county_id"].to_numpy().astype(str)])
    area = stand["area_km2"].to_numpy().astype(float)
    for day in range(len(days)):
        weight = np.where(np.isfinite(values[day]), area, 0.0)
        ground = np.bincount(index, weight, len(counties))
        total = np.bincount(index, weight * np.nan_to_num(values[day]), len(counties))
        np.divide(total, ground, out=found[day], where=ground > 0.0)
    return found


def _units_of(results: Results, cover: str | None) -> np.ndarray:
    """Which units count: every stand, or those of one cover."""
    stand = results.stand
    if cover is None:
        return stand["kind"].to_numpy().astype(str) == "stand"
    here = (stand["tag"].to_numpy().astype(str) == cover) | (stand["cover_id"].to_numpy().astype(str) == cover)
    if not here.any():
        raise unknown("id-not-in-results", "cover", cover, covers_of(results))
    return here


def _counts(stand: xr.Dataset, name: str) -> np.ndarray:
    """Where a value says something: water left where roots can hold any, stress only while a crop can show it."""
    from etflux.results.summary import says_stress

    if name == "ks":
        return says_stress(stand["stage_code"].to_numpy())
    if name.startswith("water_left"):
        return stand["taw_mm"].to_numpy() > 0.0
    return np.ones((stand.sizes["date"], stand.sizes["unit_id"]), bool)
