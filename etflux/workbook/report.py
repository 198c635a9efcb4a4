"""The results workbook: what a run gives, for people, in the units they chose.

Sheets in the order of a reader's questions: what is it today (brief); how much did the crops add, from what, when and
where, at which hour, how sure is it, and what if there were no crops (six sheets of the day); where and when
(county-days), what does each field need (stand-days, growth stages), can the weather be trusted (stations), does it add
up (closure), how was it done (methods), what exactly was run.
"""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import TYPE_CHECKING

from etflux.variables import System
from etflux.workbook import report_air, report_days, report_tables
from etflux.workbook.report_brief import Picture, write_brief
from etflux.workbook.report_sheet import TableSheet
from etflux.workbook.report_style import Look, set_page
from etflux.workbook.report_words import clean_text, identity_line

if TYPE_CHECKING:
    from xlsxwriter.workbook import Workbook

    from etflux.results import Results

SHEETS = (
    "Brief", "Crop moisture", "How sure", "Hour by hour", "Who moistens whom", "Other worlds", "County days",
    "Stand days", "Growth stages", "Stations", "Station days", "Closure", "Methods", "What was run",
)  # fmt: skip


def write_report(
    results: Results, path: Path | str, on: dt.date | str | None = None, picture: Picture | None = None
) -> None:
    """Write the results workbook.

    Parameters
    ----------
    results : Results
        Its setting `units` decides the units of every sheet.
    path : path
        File to make.
    on : date, optional
        Day of the brief; the setting's, else the last day of the run.
    picture : Picture, optional
        A map for the brief.

    Raises
    ------
    OSError
        If the file cannot be written.
    """
    import xlsxwriter

    system: System = "us" if results.settings.get("units") == "us" else "si"
    day = results.day(on)
    book = xlsxwriter.Workbook(
        str(path),
        {
            "strings_to_formulas": False,
            "strings_to_urls": False,
            "strings_to_numbers": False,
            "default_format_properties": {"font_name": "Arial", "font_size": 10},
        },
    )
    filled = False
    try:
        _write_sheets(results, book, system, day, picture)
        filled = True
    finally:
        book.fileclosed = not filled  # else the library would still save what there is, when it is thrown away
    _close(book)


def _write_sheets(results, book: Workbook, system: System, day, picture) -> None:  # type: ignore[no-untyped-def]
    look = Look(book)
    book.set_properties(
        {"title": clean_text(results.settings.get("title")) or "Crop water use", "comments": identity_line(results)}
    )
    sheets = {name: book.add_worksheet(name, worksheet_class=TableSheet) for name in SHEETS}
    for name in SHEETS[1:]:
        set_page(sheets[name], system, identity_line(results))
    write_brief(results, book, sheets["Brief"], look, system, day, picture)
    if results.county.sizes["date"]:
        report_air.crop_moisture(results, sheets["Crop moisture"], look, system, day)
        report_air.how_sure(results, sheets["How sure"], look, system, day)
        report_air.hour_by_hour(results, sheets["Hour by hour"], look, system, day)
        report_air.moistens_whom(results, sheets["Who moistens whom"], look, system, day)
        report_air.other_worlds(results, sheets["Other worlds"], look, system, day)
    report_days.county_days(results, sheets["County days"], look, system, day)
    report_days.stand_days(results, sheets["Stand days"], look, system, day)
    report_tables.growth_stages(results, sheets["Growth stages"], look)
    report_tables.stations(results, sheets["Stations"], look, system)
    report_days.station_days(results, sheets["Station days"], look, system, day)
    report_tables.closure(results, sheets["Closure"], look, system)
    report_tables.methods(results, sheets["Methods"], look)
    report_tables.what_was_run(results, sheets["What was run"], look, system)


def _close(book: Workbook) -> None:
    from xlsxwriter.exceptions import FileCreateError

    try:
        book.close()
    except FileCreateError as error:
        raise OSError(str(error)) from error
    missing = [sheet.get_name() for sheet in book.worksheets() if not getattr(sheet, "rows_written", True)]
    if missing:
        raise RuntimeError(f"the rows of {', '.join(missing)} were not written: this XlsxWriter works differently")
