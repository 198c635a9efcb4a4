"""What every sheet of the template holds: columns from the registry, what must be filled in, drop-downs, notes.

The template is written from this description and the reader reads by it.
"""

from __future__ import annotations

import csv
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import Literal

from etflux.case import TABLES
from etflux.crops import OBSERVED, RULE_STAGES
from etflux.variables import Quantity, System, quantity

Kind = Literal["number", "date", "time", "yes or no", "choice", "id", "text", "file"]
Need = Literal["needed", "useful", "air", "ready"]

VERSION = 1
VERSION_PROPERTY = "etflux_template"
VERSION_LABEL = "Template version"
READ_FIRST, SETTINGS, CHOICES = "Read first", "Settings", "Choices"

DATES = (
    "date", "planting_date", "planting_date_early", "planting_date_middle", "planting_date_late", "greenup_date",
    "harvest_date",
)  # fmt: skip
TIMES = ("time",)
YES_NO = ("drained", "forecast")
FILES = ("weather_file",)
TEXTS = ("name", "source", "tag")
FREE_TEXT = ("name", "source")
# An id, and the table that lists it; a profile's site is listed nowhere else.
IDS: Mapping[str, str] = {
    "station_id": "stations", "county_id": "counties", "soil_id": "soils", "cover_id": "covers",
    "stand_id": "stands", "rule_id": "irrigation_rules", "site_id": "",
}  # fmt: skip
DATE_SETTINGS = ("season_start", "season_end", "brief_date")
# Needed as a column, but a cell may be blank: filled by a named procedure, or "for all counties".
MAY_BE_BLANK = {
    ("weather", "t_max_c"), ("weather", "t_min_c"), ("rest", "county_id"), ("mixing_depths", "county_id"),
    ("wind", "county_id"), ("rain_gauges", "rain_mm"), ("rest", "treatment"),
    *(("counties", name) for name in ("area_km2", "latitude_deg", "longitude_deg")),  # of a US county: from its GEOID
}  # fmt: skip


@dataclass(frozen=True)
class Column:
    """One column of a sheet.

    `needed`: the column must be there; `filled`: its cells must not be blank. `of` is the table whose ids it names.
    """

    name: str
    kind: Kind
    needed: bool
    filled: bool
    label: str
    note: str
    choices: tuple[str, ...] = ()
    of: str = ""

    @property
    def quantity(self) -> Quantity:
        """Row of the registry."""
        return quantity(self.name)

    def heading(self, system: System) -> str:
        """Label with the unit in brackets."""
        unit = "UTC" if self.kind == "time" else self.quantity.unit_in(system)
        return f"{self.label} ({unit})" if unit else self.label


@dataclass(frozen=True)
class Sheet:
    """One sheet: the table it holds, its title, what a row is, and how many rows the empty template rules."""

    table: str
    title: str
    need: Need
    purpose: str
    columns: tuple[Column, ...]
    ruled_rows: int

    def column(self, name: str) -> Column:
        """One column by its name in the registry."""
        return next(column for column in self.columns if column.name == name)


@cache
def packaged_rows(name: str) -> tuple[Mapping[str, str], ...]:
    """Rows of a table of the package as text."""
    text = files("etflux.tables").joinpath(f"{name}.csv").read_text(encoding="utf-8")
    return tuple(csv.DictReader(text.splitlines()))


@cache
def choices(name: str) -> tuple[str, ...]:
    """Words that a column of choices takes; empty for other columns.

    Examples
    --------
    >>> choices("climate")
    ('humid', 'arid')
    """
    fixed: dict[str, tuple[str, ...]] = {
        "climate": ("humid", "arid"),
        "situation": ("interior", "coast"),
        "part": ("grass", "woods", "water", "wetland", "developed"),
        "treatment": ("cover", "like the stands", "no water"),
        "hydrologic_group": ("A", "B", "C", "D", "A/D", "B/D", "C/D"),
        "tillage": ("conventional", "reduced", "no-till"),
        "observed": OBSERVED,
        "from_stage": tuple(RULE_STAGES),
        "to_stage": tuple(RULE_STAGES),
        "day_part": ("day", "night", "both"),
        "edge": ("land", "water"),
        "habit": ("annual", "sod", "water", "bare"),
        "marks": ("heat units", "day lengths", "green-up", "all year"),
        "cutting": ("none", "averaged", "dated"),
        "frost_kill": ("yes", "no"),
        "adjust_climate": ("yes", "no"),
    }
    if name == "water_regime":
        return tuple(row["water_regime"] for row in packaged_rows("wetted_fractions"))
    if name == "curve_number_class":
        return tuple(row["cover_class"] for row in packaged_rows("curve_numbers"))
    return fixed.get(name, ())


# Words that fit one sheet better than the registry's general ones: (table, column) -> (label, note); "" keeps it.
WORDS: Mapping[tuple[str, str], tuple[str, str]] = {
    ("stations", "latitude_deg"): ("", "Degrees north, decimal."),
    ("stations", "longitude_deg"): ("", "Degrees east, decimal; west is negative."),
    ("stations", "utc_offset_h"): ("", "Of standard time, not daylight saving; west is negative. Blank: from "
                                       "longitude."),
    ("stations", "observation_hour"): ("", "When the day is read; blank or 24: midnight. Before 12, rain and highest "
                                           "temperature go to the day before."),
    ("stations", "climate"): ("", "humid or arid; used where no humidity is measured. Blank: humid."),
    ("stations", "situation"): ("", "interior or coast; used where no radiation is measured. Blank: interior."),
    ("stations", "weather_file"): ("", "CSV file beside this workbook with the station's days, instead of rows in "
                                       "the Weather sheet."),
    ("weather", "station_id"): ("", "As in the Stations sheet."),
    ("weather", "rain_mm"): ("", "With melted snow. Blank is missing; write 0 for a dry day."),
    ("weather", "forecast"): ("", "yes for a forecast day; blank: observed."),
    ("weather", "dew_point_morning_c"): ("", "Nearest sunrise; for the air above the county."),
    ("weather", "dew_point_afternoon_c"): ("", "Nearest 15:00; to compare with."),
    ("rain_gauges", "county_id"): ("", "As in the Counties sheet."),
    ("rain_gauges", "rain_mm"): ("", "Goes before the station's rain. Blank is missing; write 0 for a dry day."),
    ("counties", "county_id"): ("", "In the United States the GEOID, five digits: name, middle and area may then be "
                                    "blank and are filled in."),
    ("counties", "area_km2"): ("", "Of the whole county, land and water. US county: may be blank."),
    ("counties", "latitude_deg"): ("", "Of the middle; degrees north, decimal. US county: may be blank."),
    ("counties", "longitude_deg"): ("", "Of the middle; degrees east, west is negative. US county: may be blank."),
    ("counties", "elevation_m"): ("", "Mean above sea level. Blank: its station's."),
    ("counties", "station_id"): ("Weather station", "Blank: the nearest."),
    ("rest", "county_id"): ("", "Blank: every county without rows of its own."),
    ("rest", "share_pct"): ("", "Of what no stand represents; 100 or less in sum."),
    ("rest", "treatment"): ("", "as a cover, like the stands, or no water (roofs, roads)."),
    ("rest", "cover_id"): ("", "Blank: the cover of the rest in the settings."),
    ("rest", "soil_id"): ("", "Blank: the county's commonest soil."),
    ("soils", "soil_id"): ("Soil id", "Letters, digits and _ . -"),
    ("soils", "theta_fc"): ("", "Share of the soil's volume."),
    ("soils", "theta_wp"): ("", "Share of the soil's volume."),
    ("soils", "evaporation_depth_m"): ("", "Soil that evaporation dries. Blank: 0.10 m (4 in)."),
    ("soils", "hydrologic_group"): ("", "A to D; of B/D the first letter holds where drained, else the second. "
                                        "Blank: B."),
    ("covers", "cover_id"): ("Cover id", "Letters, digits and _ . -"),
    ("covers", "tag"): ("Counted as", "Water in the air is summed by this word."),
    ("covers", "kcb_ini"): ("", "At the start of the season."),
    ("covers", "kcb_mid"): ("", "At full cover."),
    ("covers", "kcb_end"): ("", "At maturity, or when growth ends."),
    ("covers", "kcb_dormant"): ("", "Outside the season; 0 for annual covers."),
    ("covers", "height_max_m"): ("", "At full cover."),
    ("covers", "root_min_m"): ("", "When it comes up, and outside the season."),
    ("covers", "root_max_rainfed_m"): ("", "Of stands without irrigation."),
    ("covers", "root_max_irrigated_m"): ("", "Of irrigated stands."),
    ("stands", "stand_id"): ("", "One cover, soil and water regime in one county."),
    ("stands", "county_id"): ("", "As in the Counties sheet."),
    ("stands", "cover_id"): ("", "As in the Covers sheet."),
    ("stands", "soil_id"): ("", "As in the Soils sheet."),
    ("stands", "area_km2"): ("", "All fields of this kind together."),
    ("stands", "water_regime"): ("", "How the water is brought. Blank: rainfed."),
    ("stands", "planting_date"): ("", "Of corn and soybean; not for grassland."),
    ("stands", "planting_date_early"): ("", "Instead of one planting date: three, each for a third of the area."),
    ("stands", "planting_date_middle"): ("", "Half is planted."),
    ("stands", "planting_date_late"): ("", "Nearly all is planted."),
    ("stands", "greenup_date"): ("", "Grassland. Blank: from temperature."),
    ("stands", "hybrid_heat_units"): ("", "Corn, base 10/30 °C (50/86 °F), planting to black layer. Blank: settings."),
    ("stands", "tillage"): ("", "Tells the residue where none is entered."),
    ("stands", "residue_pct"): ("", "Blank: by tillage."),
    ("stands", "drained"): ("", "yes or no, for groups such as B/D."),
    ("stands", "hydrologic_group"): ("", "Blank: the soil's."),
    ("stands", "available_water_mm_m"): ("", "From the soil survey. Blank: the soil's, often too low."),
    ("stands", "station_id"): ("Weather station", "Blank: the county's."),
    ("stands", "rule_id"): ("", "As in the Irrigation rules sheet. Blank: only dated irrigation."),
    ("irrigation_events", "stand_id"): ("", "As in the Stands sheet."),
    ("irrigation_events", "depth_gross_mm"): ("", "Gross, with what is lost on the way. One of the two depths."),
    ("irrigation_events", "depth_net_mm"): ("", "Net, what infiltrates."),
    ("irrigation_rules", "rule_id"): ("Rule id", "Named in the Stands sheet."),
    ("irrigation_rules", "from_stage"): ("", "Blank: V8."),
    ("irrigation_rules", "to_stage"): ("", "Blank: maturity."),
    ("irrigation_rules", "start_below_pct"): ("", "Of the easily available water left. Blank: 0, when stress begins."),
    ("irrigation_rules", "late_depletion_pct"): ("", "Of all available water, from begin dent on. Blank: 60."),
    ("irrigation_rules", "fill_to_pct"): ("", "Of all available water. Blank: 100."),
    ("irrigation_rules", "least_mm"): ("", "Net. Blank: 0."),
    ("irrigation_rules", "most_mm"): ("", "Net. Blank: no limit."),
    ("irrigation_rules", "shortest_interval_d"): ("", "Blank: 4."),
    ("irrigation_rules", "capacity_mm_d"): ("", "Gross, what the system brings in a day. Blank: no limit."),
    ("irrigation_rules", "rain_room_mm"): ("", "Net depth left unfilled for rain. Blank: 0."),
    ("irrigation_rules", "efficiency_pct"): ("", "Net over gross. Blank: usual for the water regime."),
    ("irrigation_rules", "season_limit_mm"): ("", "Gross. Blank: no limit."),
    ("observations", "stand_id"): ("", "As in the Stands sheet."),
    ("observations", "observed_value"): ("", "Canopy cover in %, leaf area in m²/m²; otherwise blank."),
    ("mixing_depths", "county_id"): ("", "Blank: every county without its own row that day."),
    ("mixing_depths", "hour"): ("", "Local standard time. Blank: the day's greatest depth."),
    ("profiles", "site_id"): ("", "A name for the place of the balloon."),
    ("profiles", "time"): ("", "Date and time in UTC, on every level; or text with a zone: 2031-07-24T06:30-05:00."),
    ("profiles", "latitude_deg"): ("", "Once in a profile is enough."),
    ("profiles", "longitude_deg"): ("", "Once in a profile is enough; west is negative."),
    ("profiles", "elevation_m"): ("", "Of the ground at the site."),
    ("profiles", "height_m"): ("", "Above the ground, rising. Height or pressure."),
    ("profiles", "pressure_kpa"): ("", "Falling. Height or pressure."),
    ("profiles", "temperature_c"): ("", "Of the air at the level."),
    ("profiles", "dew_point_c"): ("", "At the level. Dew point or relative humidity."),
    ("profiles", "rh_mean_pct"): ("Relative humidity", "At the level. Dew point or relative humidity."),
    ("wind", "county_id"): ("", "Blank: the whole region."),
    ("wind", "day_part"): ("", "day, night or both. Blank: both."),
    ("wind", "height_m"): ("", "Above the ground."),
    ("wind", "wind_speed_m_s"): ("", "Mean of the part of the day. Speed and direction, or the two below."),
    ("wind", "u_m_s"): ("", "Instead of speed and direction."),
    ("wind", "v_m_s"): ("", "Instead of speed and direction."),
    ("background_air", "background_dew_point_c"): ("", "At the ground, of the air that comes in from outside."),
}  # fmt: skip


def _kind(name: str) -> Kind:
    if name in DATES:
        return "date"
    if name in TIMES:
        return "time"
    if name in YES_NO:
        return "yes or no"
    if name in FILES:
        return "file"
    if name in IDS:
        return "id"
    if name in TEXTS:
        return "text"
    return "choice" if choices(name) else "number"


def _column(table: str, name: str, needed: bool) -> Column:
    row = quantity(name)
    label, note = WORDS.get((table, name), ("", ""))
    return Column(
        name=name,
        kind=_kind(name),
        needed=needed,
        filled=needed and (table, name) not in MAY_BE_BLANK,
        label=label or row.label,
        note=note or row.note,
        choices=choices(name),
        of="" if IDS.get(name) == table else IDS.get(name, ""),
    )


ORDERED = ("stations", "counties", "soils", "profiles")
# Cells of a cover that may be blank, whatever its habit; checks.py knows what each habit needs.
COVER_NEEDED = ("cover_id", "tag", "habit", "marks")


def _columns(table: str) -> tuple[Column, ...]:
    if table == "covers":
        return tuple(_column(table, name, name in COVER_NEEDED) for name in packaged_rows("covers")[0])
    must, may = TABLES[table]
    # as a person writes them down: a name next to its id, a balloon's place before its levels
    first = (*must[:1], "name", "time", "latitude_deg", "longitude_deg", "elevation_m", "height_m", "pressure_kpa")
    order = dict.fromkeys(name for name in (*(first if table in ORDERED else must[:1]), *must, *may))
    return tuple(_column(table, name, name in must) for name in order if name in (*must, *may))


# Order of the sheets, from "what do I need to fill in first?": first the four without which nothing runs, each after
# those whose ids it uses; then what makes the answer better, as a person comes to know it through the season; then
# what the air above needs; last what is filled in already and is looked up or changed.
_SHEETS: tuple[tuple[str, str, Need, str, int], ...] = (
    ("stations", "Stations", "needed", "One row for each place with daily weather.", 12),
    ("weather", "Weather", "needed", "One row for each station and day. What a station does not measure stays blank; "
     "long records may be CSV files, named in the Stations sheet.", 50),
    ("counties", "Counties", "needed", "One row for each county or other area that is reported.", 24),
    ("stands", "Stands", "needed", "One row for each cover on one soil under one water regime in one county, with its "
     "whole area there.", 28),
    ("rain_gauges", "Rain gauges", "useful", "Rain read in the counties themselves, one row for each county and day.",
     24),
    ("irrigation_rules", "Irrigation rules", "useful", "Ways to decide on irrigation, one row each, named in the "
     "Stands sheet. What is blank takes the value in the note.", 10),
    ("irrigation_events", "Irrigation dates", "useful", "Irrigation that was given, one row for each stand and day.",
     22),
    ("observations", "Observations", "useful", "What was seen in the field: stages, canopy, cuts, grazing, a replant. "
     "It goes before what is computed.", 22),
    ("rest", "Rest of county", "useful", "What covers the part of a county that no stand represents; without rows it "
     "is extensively grazed grassland.", 20),
    ("mixing_depths", "Mixing depths", "air", "Depth of the air mixed by the day's heating, where it is known; "
     "otherwise it is computed.", 22),
    ("profiles", "Profiles", "air", "Morning balloon profiles, one row for each level, from the ground up; without "
     "them a standard profile is taken.", 25),
    ("wind", "Wind", "air", "Wind in the mixed air by day and night: it carries the crops' water from county to "
     "county.", 22),
    ("background_air", "Background air", "air", "How humid air is that no crop has moistened, where it is known for a "
     "day; the other days take the setting.", 12),
    ("soils", "Soils", "ready", "Ready to use. Change a row, or add soils of your own below.", 4),
    ("covers", "Covers", "ready", "Ready to use. Change a row, or add covers of your own below.", 4),
)  # fmt: skip


@cache
def sheets() -> tuple[Sheet, ...]:
    """Every sheet that holds a table, in the order of the workbook."""
    return tuple(
        Sheet(table, title, need, purpose, _columns(table), rows) for table, title, need, purpose, rows in _SHEETS
    )


def sheet_of(table: str) -> Sheet:
    """Sheet of a table."""
    return next(sheet for sheet in sheets() if sheet.table == table)
