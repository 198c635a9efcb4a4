"""Sheets of days: counties, stands and stations, one row per day.

Order of columns: who and when; then what a reader asks in turn. For a stand: what the sky asks for, what the plants
do, what the soil holds, what came in, what went out, what there is to do. Rows run through the season of one stand or
county before the next, because that is how a season is read; the filter gives the one day of all.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
import xarray as xr

from etflux.crops import STAGE_WORDS, Stage
from etflux.results import confidence
from etflux.results.summary import CONFIDENCE, says_stress, values
from etflux.results.tables import second_opinion_names
from etflux.variables import System, flag_words, quantity
from etflux.workbook.report_sheet import Column, TableSheet, dates, number, words, write_table
from etflux.workbook.report_words import NEED_STEP, each, marked_words, missing_reason

if TYPE_CHECKING:
    from etflux.results import Results
    from etflux.workbook.report_style import Look

STAND_BLOCKS = (
    ("Sky", ("eto_mm",)),
    ("Plant", ("stage", "days_after_planting", "kcb", "ks", "ground_cover", "plant_height_m", "root_depth_m")),
    ("Soil", ("ke", "de_mm", "dr_mm", "taw_mm", "raw_mm", "water_left_pct")),
    ("Water in", ("rain_stand_mm", "irrigation_mm")),
    ("Water out", ("et_mm", "transpiration_mm", "evaporation_mm", "runoff_mm", "drainage_mm")),
    ("To do", ("need_mm", "days_to_stress")),
)
COUNTY_BLOCKS = (
    ("Water", ("eto_mm", "rain_mm", "et_stands_mm", "et_county_mm", "water_volume_hm3", "represented_pct")),
    ("Latent flux", (
        "le_stands_w_m2", "le_county_w_m2", "le_daytime_w_m2", "le_transpiration_w_m2", "le_evaporation_w_m2",
    )),
    ("Air in the afternoon", (
        "mixing_depth_m", "depth_a0_m", "lcl_m", "theta_mixed_c", "humidity_mixed_g_kg", "dew_point_mixed_c",
        "dew_point_without_c", "contribution_c", "contribution_g_kg", "contribution_same_day_c",
        "contribution_carried_c", "contribution_low_c", "contribution_high_c",
    )),
    ("Heat by day", ("available_energy_mj_m2_d", "sensible_heat_mj_m2_d", "heat_elsewhere_mj_m2_d")),
)  # fmt: skip
# Shorter than the registry's labels, under the name of their block; the note has the label in full.
HEADINGS = {
    "et_stands_mm": "Used by the stands", "et_county_mm": "Used by the county",
    "represented_pct": "County held by stands",
    "le_stands_w_m2": "Stands", "le_county_w_m2": "County", "le_daytime_w_m2": "County, by daylight",
    "le_transpiration_w_m2": "of it through plants", "le_evaporation_w_m2": "of it from wet ground",
    "depth_a0_m": "without entrainment", "lcl_m": "Clouds form at", "theta_mixed_c": "Potential temp.",
    "humidity_mixed_g_kg": "Humidity", "dew_point_mixed_c": "Dew point",
    "dew_point_without_c": "Dew point without crops",
    "contribution_c": "Crops added", "contribution_g_kg": "Crops added", "contribution_same_day_c": "of it today's",
    "contribution_carried_c": "of it carried", "contribution_low_c": "Crops added, at least",
    "contribution_high_c": "Crops added, at most", "available_energy_mj_m2_d": "In all",
    "sensible_heat_mj_m2_d": "Warms the air", "heat_elsewhere_mj_m2_d": "of it from elsewhere",
    "ground_cover": "Ground covered", "water_left_pct": "Water left", "de_mm": "Top layer lacks", "dr_mm": "Roots lack",
    "taw_mm": "Roots can hold", "raw_mm": "Taken without stress", "et_mm": "Crop water use",
    "irrigation_mm": "Irrigation, net", "evaporation_mm": "from the soil", "transpiration_mm": "through the plants",
    "drainage_mm": "Drainage",
}  # fmt: skip
STATION_VALUES = (
    "t_max_c", "t_min_c", "dew_point_c", "rh_min_pct", "rs_mj_m2_d", "u2_m_s", "rain_mm",
)  # fmt: skip


class Window(NamedTuple):
    """Which days and ids of a long table a sheet holds."""

    days: slice
    ids: slice
    whole: bool


def choose_window(n_days: int, n_ids: int, limit: int, day: int) -> Window:
    """Days that fit a number of rows: the ones up to the day of the brief, or the last of a window that ends later.

    Parameters
    ----------
    n_days, n_ids : int
        Size of the table.
    limit : int
        Most rows.
    day : int
        Position of the day of the brief.

    Examples
    --------
    >>> choose_window(100, 10, 200, day=60)
    Window(days=slice(41, 61, None), ids=slice(0, 10, None), whole=False)
    """
    if n_days * n_ids <= limit:
        return Window(slice(0, n_days), slice(0, n_ids), True)
    fitting = max(1, min(n_days, limit // max(n_ids, 1)))
    end = max(fitting, day + 1)
    return Window(slice(end - fitting, end), slice(0, min(n_ids, limit)), False)


def window_sentence(window: Window, dataset: xr.Dataset, file: str) -> str:
    """What a sheet leaves out, and where it is."""
    if window.whole:
        return f"Every day is here; the same rows, in SI units and to the last digit, are in {file}."
    days = dataset["date"].to_numpy()[window.days].astype("datetime64[D]")
    return f"Too many rows for a sheet: {days[0]} to {days[-1]} are here, the whole season is in {file}."


def _spread(dataset: xr.Dataset, name: str, n_days: int) -> np.ndarray:
    """A label of each id, repeated for every day."""
    return np.repeat(dataset[name].to_numpy().astype(object), n_days)


def _by_id(dataset: xr.Dataset, name: str) -> np.ndarray:
    """Values with the days of one id together."""
    return values(dataset, name).T.reshape(-1)


def stand_days(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """Write the sheet of stand-days."""
    own = results.stand.isel(unit_id=np.flatnonzero(results.stand["kind"].to_numpy() == "stand"))
    window = _window(results, own, "unit_id", day)
    stand = own.isel(date=window.days, unit_id=window.ids)
    _title(sheet, look, "Stand-days", window_sentence(window, own, "stand_daily.csv"))
    columns, marked = stand_columns(results, stand, system)
    write_table(sheet, look, 3, columns, marked, frozen=3)


def stand_columns(results: Results, stand: xr.Dataset, system: System) -> tuple[list[Column], np.ndarray]:
    """Columns of the stand-days and which rows are marked."""
    n_days = stand.sizes["date"]
    cover_names, soil_names = results.names_by_id("cover"), results.names_by_id("soil")
    covers, soils = _spread(stand, "cover_id", n_days), _spread(stand, "soil_id", n_days)
    columns = [
        dates("Date", np.tile(stand["date"].to_numpy(), stand.sizes["unit_id"])),
        words("County", _spread(stand, "county_id", n_days), width=8),
        words("Stand", _spread(stand, "stand_id", n_days), width=9),
        words(
            "Part", _part_words(_spread(stand, "part", n_days)), width=7, note="A third of a stand planted over weeks"
        ),
        words("Cover", _named(covers, cover_names), width=20),
        words("Soil", _named(soils, soil_names), width=11),
        words("Water", _spread(stand, "water_regime", n_days), width=9),
    ]
    columns += [
        _stand_column(stand, name, block, system) for block, names in STAND_BLOCKS for name in names
    ]  # fmt: skip
    estimated = _county_of(results, stand, "estimated_share_pct")
    marks = marked_words(estimated, _by_id(stand, "provisional"))
    columns.append(words("Marked", marks, width=30, note="Why the day may still move"))
    return columns, marks != ""


def _stand_column(stand: xr.Dataset, name: str, block: str, system: System) -> Column:
    if name == "stage":
        codes = _by_id(stand, "stage_code").astype(int)
        texts = np.array([STAGE_WORDS[stage] for stage in Stage], dtype=object)
        return words("Growth stage", texts[codes], block, width=11)
    numbers = _by_id(stand, name)
    if name in {"ks", "days_to_stress", "need_mm"}:
        # Before V6 a seedling is not called short of water, and a ripe stand (R6) is not told to irrigate.
        grows = says_stress(_by_id(stand, "stage_code"))
        if name == "need_mm":
            grows = grows & (_spread(stand, "water_regime", stand.sizes["date"]) != "rainfed")
            return number(name, np.where(grows, numbers, np.nan), system, block, step=NEED_STEP[system])
        numbers = np.where(grows, numbers, np.nan)
        if name == "days_to_stress":
            numbers = np.floor(numbers)
    return number(name, numbers, system, block, HEADINGS.get(name, ""))


def county_days(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """Write the sheet of county-days."""
    window = _window(results, results.county, "county_id", day)
    county = results.county.isel(date=window.days, county_id=window.ids)
    _title(sheet, look, "County-days", window_sentence(window, results.county, "county_daily.csv"))
    columns, marked = county_columns(results, county, system)
    write_table(sheet, look, 3, columns, marked, frozen=3)


def county_columns(results: Results, county: xr.Dataset, system: System) -> tuple[list[Column], np.ndarray]:
    """Columns of the county-days and which rows are marked."""
    n_days = county.sizes["date"]
    names = results.names_by_id("county")
    ids = _spread(county, "county_id", n_days)
    flags, provisional = _by_id(county, "flags"), _by_id(county, "provisional")
    contribution, share = _by_id(county, "contribution_c"), _by_id(county, "estimated_share_pct")
    rank = confidence(flags, provisional, contribution, _by_id(county, "profile_distance_km"))
    columns = [
        dates("Date", np.tile(county["date"].to_numpy(), county.sizes["county_id"])),
        words("County", ids, width=9),
        words("Name", _named(ids, names), width=16),
    ]
    columns += [
        number(name, _by_id(county, name), system, block, HEADINGS.get(name, ""))
        for block, members in COUNTY_BLOCKS
        for name in members
    ]  # fmt: skip
    marks = marked_words(share, provisional)
    how = "How sure"
    columns += [
        words("Contribution is", np.array(list(CONFIDENCE.values()), dtype=object)[rank], how, width=16),
        words("Why there is no number", missing_reason(flags, contribution), how, width=28),
        words("Marked", marks, how, "Why the day may still move", width=34),
        words("Remarks on the air", each(flags, "air"), how, width=64),
    ]
    return columns, marks != ""


def station_days(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """Write the sheet of station-days: reference ET, other methods' values, the weather behind it."""
    window = _window(results, results.station, "station_id", day)
    station = results.station.isel(date=window.days, station_id=window.ids)
    _title(sheet, look, "Station-days", window_sentence(window, results.station, "station_daily.csv"))
    names = results.names_by_id("station")
    ids = _spread(station, "station_id", station.sizes["date"])
    columns = [
        dates("Date", np.tile(station["date"].to_numpy(), station.sizes["station_id"])),
        words("Station", ids, width=9),
        words("Name", _named(ids, names), width=16),
    ]
    columns += [number(name, _by_id(station, name), system, "Reference ET") for name in ("eto_mm", "ets_mm", "etr_mm")]
    opinions = second_opinion_names(station)
    columns += [_opinion(station, name, method, system) for name, method in opinions.items()]
    columns += [number(name, _by_id(station, name), system, "Weather") for name in STATION_VALUES]
    estimated = _by_id(station, "estimated_share_pct")
    what = source_words(station)
    columns.append(number("estimated_share_pct", estimated, system, "How sure"))
    columns.append(words("Not measured here", what, "How sure", width=60))
    write_table(sheet, look, 3, columns, what != "", frozen=3)


def _opinion(station: xr.Dataset, name: str, method: str, system: System) -> Column:
    column = number(
        "eto_mm", _by_id(station, name), system, "Second opinions", heading=method.replace("_", " ").title()
    )
    return Column(**{**vars(column), "note": "Reference ET by this method on the same record"})


def source_words(station: xr.Dataset) -> np.ndarray:
    """Which values of each station-day were not measured there, and where they come from."""
    names = [name for name in STATION_VALUES if f"{name}_source" in station]
    if not names:
        return np.full(station.sizes["date"] * station.sizes["station_id"], "", dtype=object)
    bits = np.stack([_by_id(station, f"{name}_source").astype(np.uint8) for name in names], axis=1)
    found, place = np.unique(bits, axis=0, return_inverse=True)
    meaning = flag_words("source")

    def text(row: np.ndarray) -> str:
        parts = []
        for name, value in zip(names, row.tolist(), strict=True):
            why = [word for bit, word in meaning.items() if bit and value & bit]
            if why:
                parts.append(f"{quantity(name).label.lower()}: {', '.join(why)}")
        return "; ".join(parts)

    return np.array([text(row) for row in found], dtype=object)[place.reshape(-1)]


def _window(results: Results, dataset: xr.Dataset, dimension: str, day: np.datetime64) -> Window:
    limit = int(results.settings.get("stand_rows_limit", 200_000))
    position = int(np.searchsorted(dataset["date"].to_numpy().astype("datetime64[D]"), day))
    return choose_window(dataset.sizes["date"], dataset.sizes[dimension], limit, position)


def _title(sheet: TableSheet, look: Look, title: str, sentence: str) -> None:
    sheet.write_string(0, 0, title, look.title())
    sheet.write_string(1, 0, sentence, look.lead())
    sheet.set_row(0, 20)


def _named(ids: np.ndarray, names: dict[str, str]) -> np.ndarray:
    found, place = np.unique(ids.astype(str), return_inverse=True)
    return np.array([names.get(name, name) for name in found], dtype=object)[place] if len(found) else ids


def _part_words(parts: np.ndarray) -> np.ndarray:
    return np.where(parts == "whole", "", parts)


def _county_of(results: Results, stand: xr.Dataset, name: str) -> np.ndarray:
    """Values of each stand's county, in the order of the stand-days."""
    county = results.county.sel(date=stand["date"])
    ids = {identity: position for position, identity in enumerate(county["county_id"].to_numpy().astype(str))}
    place = [ids[identity] for identity in stand["county_id"].to_numpy().astype(str)]
    found: Any = values(county, name)[:, place]
    return found.T.reshape(-1)
