"""Sheets on the air of the day of the brief: how much, of what, from when and from where; hour by hour; how sure.

Each sheet answers one question of a forecaster, for one day, one row per county; all other days are in the tidy tables.
Counties come in the order of the question: most crop moisture first, or least certain first.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from etflux.results import confidence
from etflux.results.summary import CONFIDENCE, contribution_on, crop_sources, values
from etflux.variables import System, quantity
from etflux.workbook.report_sheet import Column, TableSheet, number, words, write_table
from etflux.workbook.report_words import BAND_NOTE, WORLD_SENTENCES, day_words, each, missing_reason

if TYPE_CHECKING:
    from etflux.results import Results
    from etflux.workbook.report_style import Look

OLDEST = 7  # days; all older water is one age
MATRIX_UP_TO = 40  # counties; beyond, the largest neighbours of each are listed
LARGEST_ORIGINS = 10

SHOWN_C = 0.05  # ages that add less everywhere go together
# What is varied, short enough to stand over two columns.
VARIED_WORDS = {
    "air from outside without or with crop water": "Air from outside",
    "mixing depth 25 % less or more": "Depth ± 25 %",
    "water use 15 % less or more": "Water use ± 15 %",
    "residence a day shorter or longer": "Residence ± 1 day",
    "crop coefficient 10 % less or more": "Kcb ± 10 %",
    "entrainment 0 to 0.2": "Entrainment 0 to 0.2",
}

# The two columns cover less than their headings promise: what is varied one by one often goes lower.
ENDS_SENTENCE = (
    "At least and at most: by the air from outside, by entrainment where the depth hangs on it, and by what no stand "
    "represents. What the sheet How sure varies may go beyond them."
)
CONTRIBUTION_SENTENCE = (
    "Crops added: dew point of the mixed air less what it would be without the water that crops put there."
)


def crop_moisture(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """How much did the crops add, which, from when, from where, and at which hour."""
    county = results.county.sel(date=day)
    order = _most_first(county)
    hour = float(results.settings.get("contribution_hour", 15.0))
    row = _head(
        sheet, look, "Crop moisture", f"{day_words(day)} at {hour:g} h local solar time. {CONTRIBUTION_SENTENCE}",
        "Shares of one difference, in proportion to the water. What sprinklers lose on the way counts with "
        "the crops; water of the rest of the county is tagged too and does not count.",
        ENDS_SENTENCE,
    )  # fmt: skip
    rows = contribution_on(results, [day])
    rows = rows[rows["cover"].isin(crop_sources(results))]
    ids = county["county_id"].to_numpy().astype(str)

    def column(name: str, heading: str, block: str) -> Column:
        return number(name, values(county, name)[order], system, block, heading)

    def part(picked: pd.DataFrame, heading: str, block: str) -> Column:
        total = picked.groupby("county_id")["contribution_c"].sum().reindex(ids).to_numpy(float)
        shown = np.where(np.isfinite(values(county, "contribution_c")), np.nan_to_num(total), np.nan)
        return number("contribution_c", shown[order], system, block, heading)

    columns = [*_who(results, ids[order])]
    columns += [
        column("dew_point_mixed_c", "Dew point", "Afternoon"),
        column("contribution_c", "Crops added", "Afternoon"),
        column("contribution_low_c", "at least", "Afternoon"),
        column("contribution_high_c", "at most", "Afternoon"),
    ]
    columns += [
        part(rows[rows["cover"] == cover], str(cover).capitalize(), "Which crop") for cover in crop_sources(results)
    ]
    when = "When it left the ground"
    ages = _ages(rows)
    columns += [part(rows[rows["age_d"] == age], _age_words(age), when) for age in ages]
    columns.append(part(rows[~rows["age_d"].isin(ages)], "earlier", when))
    columns += [
        column("contribution_home_c", "this county", "Where it left the ground"),
        column("contribution_other_c", "other counties", "Where it left the ground"),
        column("contribution_outside_c", "outside the region, at most", "Where it left the ground"),
        column("break_hour", "Stable layer breaks at", "Through the day"),
        column("contribution_12_c", "Crops added at 12 h", "Through the day"),
        column("contribution_18_c", "Crops added at 18 h", "Through the day"),
        column("contribution_peak_c", "Crops added at the highest dew point", "Through the day"),
        column("peak_hour", "Highest dew point at", "Through the day"),
    ]
    reason = missing_reason(values(county, "flags"), values(county, "contribution_c"))
    columns.append(words("Why blank", reason[order], width=34))
    write_table(sheet, look, row, columns, frozen=2)


def other_worlds(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """What if nothing but grass grew, and what if nothing evaporated."""
    county = results.county.sel(date=day)
    order = _most_first(county, "effect_of_crops_c")
    if not np.isfinite(values(county, "effect_of_crops_c")).any():
        row = _head(sheet, look, "Other worlds", *WORLD_SENTENCES.values())
        why = "turned off in the settings" if not results.settings.get("air_worlds", True) else "without a number"
        sheet.write_string(row, 0, f"They are {why} on {day_words(day)}.")
        return
    row = _head(
        sheet, look, "Other worlds",
        f"{day_words(day)}. Not to be mixed up with what the crops added: that is tagged water, this is another run.",
        *WORLD_SENTENCES.values(),
    )  # fmt: skip
    columns = [*_who(results, county["county_id"].to_numpy().astype(str)[order])]
    columns += [
        number(name, values(county, name)[order], system, "This world", heading)
        for name, heading in (("dew_point_mixed_c", "Dew point"), ("mixing_depth_m", "Mixing depth"))
    ]
    for world, block in (("crops", "Rest's cover on every stand"), ("evaporation", "No evaporation")):
        theta = values(county, f"theta_without_{world}_c") - values(county, "theta_mixed_c")
        columns += [
            number(f"dew_point_without_{world}_c", values(county, f"dew_point_without_{world}_c")[order], system, block,
                   "Dew point"),
            number(f"effect_of_{world}_c", values(county, f"effect_of_{world}_c")[order], system, block,
                   "Dew point, this world more by"),
            number(f"depth_without_{world}_m", values(county, f"depth_without_{world}_m")[order], system, block,
                   "Mixing depth"),
            number("contribution_c", theta[order], system, block, "Air warmer by"),
        ]  # fmt: skip
    write_table(sheet, look, row, columns, frozen=2)


def hour_by_hour(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """The day's course of every county."""
    row = _head(
        sheet, look, "Hour by hour",
        f"{day_words(day)}. Clock time is local standard time; where daylight saving holds it is an hour more. "
        "All days are in results.nc, the last ones in county_hours.csv.",
    )  # fmt: skip
    at = results.county.sel(date=[day])
    rows = _frame(results, at)
    columns = [*_who(results, rows["county_id"].to_numpy())]
    columns.append(number("hour", rows["hour"], system, "", "Solar time"))
    columns.append(words("Clock time", [_clock(hour) for hour in rows["clock_h"]], width=8))
    columns += [
        number(name, rows[name], system, "Mixed air")
        for name in ("mixing_depth_m", "theta_mixed_c", "dew_point_mixed_c", "rh_mixed_pct", "humidity_mixed_g_kg")
    ]
    columns += [
        number(name, rows[name], system, "From crops", "Crops added")
        for name in ("contribution_c", "contribution_g_kg")
    ]
    write_table(sheet, look, row, columns, frozen=2)


def moistens_whom(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """Which county's crops moisten which: a row for each that is moistened."""
    unit = quantity("contribution_c").unit_in(system)
    row = _head(
        sheet, look, "Who moistens whom",
        f"{day_words(day)}. Across: what the crops of each county added to the dew point of the county in the row "
        f"({unit}).",
        "First-order transport spreads a plume: neighbours get a little more, the far end of a plume a little less.",
    )  # fmt: skip
    dates = pd.to_datetime(results.moistened_by["date"])
    rows = results.moistened_by[dates == pd.Timestamp(day)]
    if not len(rows):
        sheet.write_string(row, 0, "No wind was given for this day, or the region is too large to tell origins apart.")
        return
    ids = results.county["county_id"].to_numpy().astype(str)
    if len(ids) > MATRIX_UP_TO:
        _largest_origins(results, sheet, look, system, row, rows)
        return
    table = rows.pivot_table("contribution_c", "county_id", "from_county_id", "sum").reindex(index=ids, columns=ids)
    columns = [*_who(results, ids)]
    columns.append(number("contribution_c", table.sum(axis=1, min_count=1), system, "", "All counties"))
    names = results.names_by_id("county")
    for origin in ids:
        of_origin = number("contribution_c", table[origin], system, "Crops of", names.get(origin, origin))
        columns.append(Column(names.get(origin, origin), of_origin.values, "Crops of", origin, of_origin.format, 8.3))
    write_table(sheet, look, row, columns, frozen=2)


def how_sure(results: Results, sheet: TableSheet, look: Look, system: System, day: np.datetime64) -> None:
    """Confidence, what was varied one by one and all at random, the observed rise, remarks; least certain first."""
    county = results.county.sel(date=day)
    flags, base = values(county, "flags"), values(county, "contribution_c")
    rank = confidence(flags, values(county, "provisional"), base, values(county, "profile_distance_km"))
    order = np.lexsort((-np.nan_to_num(base), rank))
    row = _head(
        sheet, look, "How sure",
        f"{day_words(day)}, least certain counties first. {CONTRIBUTION_SENTENCE} Each pair: lowest and highest when "
        "one thing is varied.",
        BAND_NOTE,
    )  # fmt: skip
    ids = county["county_id"].to_numpy().astype(str)
    columns = [*_who(results, ids[order])]
    columns.append(words("How sure", [CONFIDENCE[int(code)] for code in rank[order]], width=13))
    columns.append(number("contribution_c", base[order], system, "", "Crops added"))
    columns += _varied_columns(results, ids[order], system, day)
    if results.settings.get("air_draws"):
        block = f"{results.settings['air_draws']} random draws"
        for share, heading in ((10, "10 % below"), (50, "50 % below"), (90, "90 % below")):
            name = f"contribution_p{share}_c"
            columns.append(number(name, values(county, name)[order], system, block, heading))
    rises = (
        ("rise_observed_c", "Observed"), ("rise_mixing_c", "by mixing"), ("rise_same_day_c", "by the day's own water"),
        ("rise_near_ground_c", "near-ground excess"), ("rise_other_c", "the rest"),
    )  # fmt: skip
    if any(np.isfinite(values(county, name)).any() for name, _ in rises):
        columns += [
            number(name, values(county, name)[order], system, "Dew point, morning to afternoon", heading)
            for name, heading in rises
        ]
    columns += _estimate_columns(results, order, system, day)
    columns.append(number("profile_distance_km", values(county, "profile_distance_km")[order], system, "Rests on",
                          "Balloon profile at"))  # fmt: skip
    columns.append(words("Remarks", each(flags[order], "air"), "Rests on", width=60))
    write_table(sheet, look, row, columns, frozen=2)


def _estimate_columns(results: Results, order: np.ndarray, system: System, day: np.datetime64) -> list[Column]:
    """How far the estimate was off on the day before, and on the seven days before."""
    before = results.dates < day
    if not before.any():
        return []
    yesterday = values(results.county, "estimate_error_c", results.dates[before][-1])
    bias = values(results.county, "estimate_bias_c", day)
    if not (np.isfinite(yesterday).any() or np.isfinite(bias).any()):
        return []
    block = "Estimated afternoon dew point less observed"
    return [
        number("estimate_error_c", yesterday[order], system, block, "the day before"),
        number("estimate_bias_c", bias[order], system, block, "mean of 7 days before"),
    ]


def _varied_columns(results: Results, ids: np.ndarray, system: System, day: np.datetime64) -> list[Column]:
    """Two columns for each thing that was varied."""
    rows = results.ranges[pd.to_datetime(results.ranges["date"]) == pd.Timestamp(day)]
    columns = []
    for varied in pd.unique(rows["varied"]):
        one = rows[rows["varied"] == varied].set_index("county_id").reindex(ids)
        block = VARIED_WORDS.get(str(varied), str(varied).capitalize())
        for name, heading in (("contribution_low_c", "lowest"), ("contribution_high_c", "highest")):
            columns.append(number(name, one[name].to_numpy(float), system, block, heading, width=9.5))
    return columns


def _largest_origins(
    results: Results, sheet: TableSheet, look: Look, system: System, row: int, rows: pd.DataFrame
) -> None:
    largest = rows.sort_values("contribution_c", ascending=False).groupby("county_id", sort=False).head(LARGEST_ORIGINS)
    largest = largest.sort_values(["county_id", "contribution_c"], ascending=[True, False])
    names = results.names_by_id("county")
    origins = largest["from_county_id"].astype(str)
    columns = [
        *_who(results, largest["county_id"].to_numpy()),
        words("Crops of", origins.to_numpy(), width=10),
        words("Name", [names.get(origin, "") for origin in origins], width=16),
        number("contribution_c", largest["contribution_c"], system, "", "Added"),
    ]
    write_table(sheet, look, row, columns, frozen=2)


def _head(sheet: TableSheet, look: Look, title: str, *sentences: str) -> int:
    """Title and sentences; gives the first free row."""
    sheet.write_string(0, 0, title, look.title())
    sheet.set_row(0, 20)
    for row, sentence in enumerate(sentences, 1):
        sheet.write_string(row, 0, sentence, look.lead())
    return len(sentences) + 2


def _who(results: Results, ids: np.ndarray) -> tuple[Column, Column]:
    names = results.names_by_id("county")
    texts = [str(identity) for identity in ids]
    return words("County", texts, width=10), words("Name", [names.get(text, "") for text in texts], width=16)


def _most_first(county: object, name: str = "contribution_c") -> np.ndarray:
    return np.argsort(-np.nan_to_num(values(county, name), nan=-np.inf), kind="stable")  # type: ignore[arg-type]


def _ages(rows: pd.DataFrame) -> list[int]:
    """Today, and the days before up to the last that added anything to speak of."""
    most = rows.groupby(["county_id", "age_d"])["contribution_c"].sum().groupby("age_d").max()
    last = max([0, *most[most >= SHOWN_C].index.astype(int)])
    return list(range(min(last, OLDEST - 1) + 1))


def _age_words(age: int) -> str:
    """When water of an age left the ground.

    Examples
    --------
    >>> [_age_words(age) for age in (0, 1, 3)]
    ['today', 'yesterday', '3 days ago']
    """
    return ("today", "yesterday")[age] if age < 2 else f"{age} days ago"


def _clock(hour: float) -> str:
    """Clock time of an hour.

    Examples
    --------
    >>> _clock(15.52), _clock(23.999)
    ('15:31', '00:00')
    """
    minutes = round(hour * 60.0) % 1440
    return f"{minutes // 60:02d}:{minutes % 60:02d}"


def _frame(results: Results, at: object) -> pd.DataFrame:
    from etflux.results.tables import from_dataset

    return from_dataset(at, "county_hours")  # type: ignore[arg-type]
