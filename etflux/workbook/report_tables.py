"""The sheets behind the brief: growth stages, stations, closure, methods, and what was run."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from etflux.findings import ordered
from etflux.results.summary import values, water_budget
from etflux.results.tables import SCHEMA_VERSION, second_opinion_names
from etflux.variables import Quantity, System, convert, from_si, quantities, settings_table
from etflux.workbook.report_sheet import Column, TableSheet, number, put, words, write_small_table, write_table
from etflux.workbook.report_style import BAND, DATE, Look, decimals_format, lines_of
from etflux.workbook.report_words import input_name

if TYPE_CHECKING:
    from xlsxwriter.worksheet import Worksheet

    from etflux.results import Results

# What marks are called on the sheet of growth stages, in the order of a season.
MARK_WORDS = {
    "greenup": "Green-up", "planting": "Planting", "emergence": "Emergence", "cover10": "10 % ground cover",
    "v8": "Irrigation from", "full_cover": "Full cover", "late": "Late season", "maturity": "Maturity",
    "killed": "Killed by frost", "replant": "Replanted", "harvest": "Harvest",
    "freeze": "First freeze", "end": "End of season",
}  # fmt: skip
MARK_NOTES = {
    "cover10": "Corn: V6, six leaves", "v8": "Corn: V8; others: as far into the season",
    "full_cover": "Corn: VT, tassel",
    "late": "Corn: R5, begin dent", "maturity": "Corn: R6, black layer",
}  # fmt: skip
WEATHER_TABLES = ("weather", "stations", "rain_gauges", "profiles", "mixing_depths", "wind")
FINDING_WIDTH = 125
US_OF = {"mm": "in", "MJ/m²/day": "langley/day", "10⁶ m³": "acre-ft", "m": "ft", "°C": "°F", "km²": "acres"}
SMALL_WIDTHS = (16, 24, *[12.5] * 10)


def title(sheet: Worksheet, look: Look, text: str, sentence: str = "") -> int:
    """Title of a sheet and a sentence under it; gives the first free row."""
    sheet.write_string(0, 0, text, look.title())
    sheet.write_string(1, 0, sentence, look.lead())
    sheet.set_row(0, 20)
    return 3


def subtitle(sheet: Worksheet, look: Look, row: int, text: str) -> int:
    """Title of a part of a sheet; gives the row below."""
    sheet.write_string(row, 0, text, look(bold=True, font_size=11))
    sheet.set_row(row, 18)
    return row + 1


def growth_stages(results: Results, sheet: TableSheet, look: Look) -> None:
    """One row per stand: when each stage began, and what the dates rest on."""
    row = title(sheet, look, "Growth stages", "First day of each stage; a date past the record is a projection.")
    stand = results.stand
    own = stand["kind"].to_numpy() == "stand"
    marks = results.marks[results.marks["unit_id"].isin(stand["unit_id"].to_numpy()[own])]
    first = _of_this_season(marks, results.dates)
    basis = marks.groupby("unit_id")["basis"].agg(lambda texts: "; ".join(dict.fromkeys(map(str, texts))))
    units = stand["unit_id"].to_numpy()[own].astype(str)
    covers = results.names_by_id("cover")
    columns = [
        words("County", stand["county_id"].to_numpy()[own], width=10),
        words("Stand", stand["stand_id"].to_numpy()[own], width=12),
        words("Part", ["" if part == "whole" else part for part in stand["part"].to_numpy()[own]], width=9),
        words("Cover", [covers.get(name, name) for name in stand["cover_id"].to_numpy()[own].astype(str)], width=26),
    ]
    known = [name for name in (*MARK_WORDS, *sorted(set(first.columns) - set(MARK_WORDS))) if name in first.columns]
    for name in known:
        days = pd.to_datetime(first[name]).reindex(units).to_numpy().astype("datetime64[D]")
        columns.append(
            Column(
                MARK_WORDS.get(name, name.replace("_", " ").capitalize()),
                days,
                "",
                MARK_NOTES.get(name, ""),
                DATE,
                11.5,
            )
        )
    columns.append(words("Dates from", basis.reindex(units).fillna("").to_numpy(), width=48))
    write_table(sheet, look, row, columns, frozen=2)


def _of_this_season(marks: pd.DataFrame, days: np.ndarray) -> pd.DataFrame:
    """Dates by unit and mark; of a mark that comes every year, the one nearest to the middle of the record."""
    middle = pd.Timestamp(days[len(days) // 2]) if len(days) else pd.Timestamp(0)
    dated = marks.assign(date=pd.to_datetime(marks["date"]))
    dated = dated.assign(away=(dated["date"] - middle).abs()).sort_values("away", kind="stable")
    return dated.drop_duplicates(["unit_id", "mark"]).pivot(index="unit_id", columns="mark", values="date")


def stations(results: Results, sheet: Worksheet, look: Look, system: System) -> None:
    """Can a station be trusted: totals beside other methods', what was filled and how, which checks spoke."""
    _set_widths(sheet, SMALL_WIDTHS)
    row = title(sheet, look, "Stations", "Reference ET of the record, beside other published methods on the same days.")
    row = write_small_table(sheet, look, row, _station_columns(results, system)) + 1
    row = subtitle(sheet, look, row, "What was filled, and how")
    fills = results.fills
    if len(fills):
        labels = [_label(name) for name in fills["quantity"]]
        columns = [
            words("Station", fills["station_id"]), words("Quantity", labels),
            Column("Days", fills["days"].to_numpy(float), format="0"),
            Column("First", _as_days(fills["first"]), format=DATE),
            Column("Last", _as_days(fills["last"]), format=DATE), words("How", fills["method"]),
        ]  # fmt: skip
        row = write_small_table(sheet, look, row, columns) + 1
    else:
        row = _sentence(sheet, look, row, "Nothing was filled: every value was measured at its station.") + 1
    row = subtitle(sheet, look, row, "Checks that spoke")
    spoken = [finding for finding in results.findings if finding.table in WEATHER_TABLES]
    _findings(sheet, look, row, spoken, "No check of the weather spoke.", 10)


def _station_columns(results: Results, system: System) -> list[Column]:
    station = results.station
    ids = station["station_id"].to_numpy().astype(str)
    names = results.names_by_id("station")

    def total(name: str) -> np.ndarray:
        return np.nansum(values(station, name), axis=0)

    share = values(station, "estimated_share_pct")
    columns = [
        words("Station", ids), words("Name", [names.get(name, "") for name in ids]),
        Column("Days", np.full(len(ids), float(station.sizes["date"])), format="0"),
        number("rain_mm", total("rain_mm"), system),
        _depth("Reference ET (FAO-56)", total("eto_mm"), system),
        _depth("ASCE short", total("ets_mm"), system), _depth("ASCE tall", total("etr_mm"), system),
    ]  # fmt: skip
    for name, method in second_opinion_names(station).items():
        columns.append(_depth(method.replace("_", " ").title(), total(name), system))
    columns.append(Column("Days with estimates", np.sum(share > 0.0, axis=0).astype(float), format="0"))
    provisional = values(station, "provisional")
    columns.append(Column("Days provisional", np.sum(provisional != 0, axis=0).astype(float), format="0"))
    return columns


def _depth(heading: str, total_mm: np.ndarray, system: System) -> Column:
    """Total depth of a record."""
    return number("rain_mm", total_mm, system, heading=heading)


def closure(results: Results, sheet: Worksheet, look: Look, system: System) -> None:
    """Closure of water and energy: does anything appear or vanish."""
    _set_widths(sheet, (26, *[13] * 14))
    row = title(
        sheet, look, "Closure", "What came in, what went out, what is left over; left over is 0 when nothing is lost."
    )
    rows = results.budget
    shown = [(str(name), part) for name, part in rows.groupby("balance", sort=False)]
    if "stored_start_mm" in results.stand and "water" not in {name for name, _ in shown}:
        shown.append(("water of each stand", water_budget(results.stand)))
    for name, part in sorted(shown, key=lambda pair: len(pair[1])):
        row = subtitle(sheet, look, row, name.capitalize())
        row = write_small_table(sheet, look, row, budget_columns(part, system)) + 1


def budget_columns(part: pd.DataFrame, system: System) -> list[Column]:
    """A balance with its terms side by side, one row per subject."""
    wide = part.pivot_table("value", "subject", "term", aggfunc="first", sort=False)
    units = part.drop_duplicates("term").set_index("term")["unit"]
    columns = [words("For", wide.index.to_numpy())]
    for term in wide.columns:
        columns.append(_budget_column(str(term), wide[term].to_numpy(float), str(units[term] or ""), system))
    return columns


def _budget_column(term: str, numbers: np.ndarray, unit: str, system: System) -> Column:
    row: Quantity | None = quantities().get(term)
    if row is not None and row.unit == unit:
        shown, people, label = from_si(numbers, term, system), row.unit_in(system), row.label
    else:
        people = US_OF.get(unit, unit) if system == "us" else unit
        shown = convert(numbers, unit, people, "difference") if people != unit else numbers
        label = row.label if row else term.capitalize()
    left_over = term.startswith(("closure", "unaccounted"))
    decimals = 2 if people in {"in", "10⁶ m³", "°C", "°F"} else 1
    return Column(
        f"{label} ({people})" if people else label, shown, format="0.0E+00" if left_over else decimals_format(decimals)
    )


def methods(results: Results, sheet: Worksheet, look: Look) -> None:
    """Methods and where they come from."""
    _set_widths(sheet, (24, 66, 66))
    row = title(sheet, look, "Methods and sources", "What each step does, and the published source that it follows.")
    table = results.methods
    columns = [words("Step", table["step"]), words("Method", table["method"]), words("Source", table["source"])]
    _write_wrapped(sheet, look, row, columns, (24, 66, 66))


def what_was_run(results: Results, sheet: Worksheet, look: Look, system: System) -> None:
    """Input, versions, every setting with those that were changed first, and all findings."""
    _set_widths(sheet, (34, 26, 52, 52, 12))
    row = title(sheet, look, "What was run", "Enough to run it again and to get the same numbers.")
    source = results.source
    facts = (
        ("Run", results.run_id), ("Issued", results.issued.isoformat(sep=" ", timespec="minutes")),
        ("Input", input_name(results)), ("Input sha256", source.get("sha256", "")),
        ("Template version", source.get("etflux_template", source.get("template_version", ""))),
        ("etflux version", results.version), ("Version of the tables", SCHEMA_VERSION),
        ("Days", f"{results.dates[0]} to {results.dates[-1]}" if len(results.dates) else ""),
        ("Stands, counties, stations", f"{_stand_count(results)}, {results.county.sizes['county_id']}, "
         f"{results.station.sizes['station_id']}"),
    )  # fmt: skip
    for name, value in facts:
        put(sheet, row, 0, name, look(bold=True))
        put(sheet, row, 1, str(value), look(num_format="@"))
        row += 1
    row = subtitle(sheet, look, row + 1, "Findings")
    row = _findings(sheet, look, row, results.findings, "The checks found nothing.", 3) + 1
    row = subtitle(sheet, look, row, "Settings")
    _settings(results, sheet, look, row, system)


def _stand_count(results: Results) -> int:
    own = results.stand["kind"].to_numpy() == "stand"
    return len(np.unique(results.stand["stand_id"].to_numpy()[own]))


def _settings(results: Results, sheet: Worksheet, look: Look, row: int, system: System) -> None:
    """All settings in the registry's order, changed ones first."""
    rows = []
    for name, setting in settings_table().items():
        if name not in results.settings:
            continue
        value = results.settings[name]
        changed = value != setting.default
        text, unit = _setting_words(value), setting.unit
        if system == "us" and setting.us_unit and setting.us_unit != setting.unit and isinstance(value, int | float):
            text, unit = f"{convert(value, setting.unit, setting.us_unit).item():.4g}", setting.us_unit
        words_of_value = f"{text} {unit}".strip() or "(blank)"
        rows.append(
            (
                not changed,
                setting.label,
                words_of_value + (" (changed)" if changed else ""),
                setting.sentence,
                setting.source,
            )
        )
    rows.sort(key=lambda item: item[0])
    columns = [
        words(heading, [item[position] for item in rows])
        for position, heading in ((1, "Setting"), (2, "Value"), (3, "What it does"), (4, "Source"))
    ]
    _write_wrapped(sheet, look, row, columns, (34, 26, 52, 52))


def _setting_words(value: Any) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    return f"{value:g}" if isinstance(value, float) else str(value)


def _findings(sheet: Worksheet, look: Look, row: int, findings: Sequence[Any], none: str, last_column: int) -> int:
    """Findings as sentences, errors first, in a band of FINDING_WIDTH characters up to a column."""
    if not findings:
        return _sentence(sheet, look, row, none)
    listed = ordered(findings)
    for finding in listed[:500]:
        put(sheet, row, 0, finding.severity, look(bold=finding.severity == "error", valign="top"))
        sheet.merge_range(row, 1, row, last_column, "", look.wrapped())
        put(sheet, row, 1, finding.sentence(), look.wrapped())
        sheet.set_row(row, 12.0 * lines_of(finding.sentence(), FINDING_WIDTH) + 2)
        row += 1
    if len(listed) > 500:
        row = _sentence(sheet, look, row, f"{len(listed) - 500} more are in findings.csv.")
    return row


def _sentence(sheet: Worksheet, look: Look, row: int, text: str) -> int:
    sheet.write_string(row, 0, text, look())
    return row + 1


def _write_wrapped(sheet: Worksheet, look: Look, row: int, columns: Sequence[Column], widths: Sequence[float]) -> int:
    """A table of running text, rows as high as their longest cell needs."""
    for position, column in enumerate(columns):
        sheet.write_string(row, position, column.heading, look.heading())
    for offset in range(len(columns[0].values)):
        texts = [str(column.values[offset]) for column in columns]
        for position, text in enumerate(texts):
            put(sheet, row + 1 + offset, position, text, look.wrapped(bottom=4, border_color=BAND))
        lines = max(lines_of(text, width) for text, width in zip(texts, widths, strict=True))
        sheet.set_row(row + 1 + offset, 12.0 * lines + 2)
    return row + 1 + len(columns[0].values)


def _set_widths(sheet: Worksheet, widths: Sequence[float]) -> None:
    for position, width in enumerate(widths):
        sheet.set_column(position, position, width)


def _label(name: str) -> str:
    row = quantities().get(str(name))
    return row.label if row else str(name)


def _as_days(column: pd.Series) -> np.ndarray:
    return pd.to_datetime(column).to_numpy().astype("datetime64[D]")
