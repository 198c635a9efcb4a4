"""Kinds of broken workbooks: how each is made from the good one, and exactly what must be found in it.

Places: headings stand in row 3, rows from row 4; Weather has station N1 in rows 4 to 33 and N2 in 34 to 63. A cell of
the settings sheet is called by its setting's label; FILE is the workbook as a whole.
"""

import datetime as dt
import hashlib
import io
from typing import Any, NamedTuple

import pytest
from openpyxl import load_workbook
from openpyxl.utils import get_column_letter

from etflux.workbook import check


class Broken(NamedTuple):
    """A name, a function that changes an openpyxl workbook, and the findings: (sheet, cell, code)."""

    name: str
    change: Any
    found: set[tuple[str, str, str]]


def put(sheet, **cells):
    """Change cells; text that begins like a formula becomes one."""

    def change(book):
        for address, value in cells.items():
            book[sheet][address].value = value

    return change


def text(sheet, address, words):
    """Write text that is not taken for a formula."""

    def change(book):
        book[sheet][address].value = words
        book[sheet][address].data_type = "s"

    return change


def error(sheet, address, words):
    """Write a stored error value."""

    def change(book):
        book[sheet][address].value = words
        book[sheet][address].data_type = "e"

    return change


def style(sheet, address, number_format, value):
    """Write a number with a number format."""

    def change(book):
        book[sheet][address].value = value
        book[sheet][address].number_format = number_format

    return change


def drop(*sheets):
    """Remove sheets."""

    def change(book):
        for sheet in sheets:
            del book[sheet]

    return change


def rename(old, new):
    def change(book):
        book[old].title = new

    return change


def empty(sheet):
    """Remove every row below the headings."""

    def change(book):
        book[sheet].delete_rows(4, book[sheet].max_row)

    return change


def column(sheet, letter, function):
    """Change every cell of a column below the heading."""

    def change(book):
        for (cell,) in book[sheet][f"{letter}4:{letter}{book[sheet].max_row}"]:
            if cell.value is not None:
                cell.value = function(cell.value)

    return change


def merge(sheet, reference):
    def change(book):
        book[sheet].merge_cells(reference)

    return change


def remove_column(sheet, number):
    def change(book):
        book[sheet].delete_cols(number)

    return change


def remove_row(sheet, number):
    def change(book):
        book[sheet].delete_rows(number)

    return change


def copy_row(sheet, number, to):
    def change(book):
        for cell in book[sheet][number]:
            book[sheet].cell(to, cell.column).value = cell.value

    return change


def setting(label, value):
    """Enter a setting."""

    def change(book):
        book["Settings"].cell(setting_row(book, label), 3).value = value

    return change


def setting_row(book, label):
    return next(row for row in range(4, 200) if book["Settings"].cell(row, 2).value == label)


def both(*changes):
    def change(book):
        for one in changes:
            one(book)

    return change


def epoch_1904(book):
    from openpyxl.utils.datetime import CALENDAR_MAC_1904

    book.epoch = CALENDAR_MAC_1904


def add_row(sheet, **by_letter):
    """Append a row below the last filled one."""

    def change(book):
        page = book[sheet]
        row = max(cell.row for line in page.iter_rows() for cell in line if cell.value is not None) + 1
        for letter, value in by_letter.items():
            page[f"{letter}{row}"].value = value

    return change


def stray(book):
    book["Weather"][f"{get_column_letter(16384)}1048576"].value = "x"


def stray_in_table(book):
    book["Weather"]["A1048576"].value = "N1"


def new_cover(**values):
    """A cover of one's own: corn with some columns changed."""

    def change(book):
        page = book["Covers"]
        names = {page.cell(3, number).value: number for number in range(1, page.max_column + 1)}
        row = next(number for number in range(4, 60) if page.cell(number, 1).value is None)
        for number in range(1, page.max_column + 1):
            page.cell(row, number).value = page.cell(4, number).value
        page.cell(row, 1).value = "sweetcorn"
        for label, value in values.items():
            page.cell(row, names[label.replace("_", " ")]).value = value

    return change


D = dt.date
HOT = {"C": 30.0, "D": 15.0}

BROKEN = [
    # --- sheets ---
    Broken(
        "no sheet of ours",
        lambda book: [setattr(page, "title", f"x{n}") for n, page in enumerate(book)],
        {("FILE", "", "sheets-missing")},
    ),
    Broken("stations sheet missing", drop("Stations"), {("Stations", "", "sheet-missing")}),
    Broken("weather sheet missing", drop("Weather"), {("Weather", "", "sheet-missing")}),
    Broken("counties sheet missing", drop("Counties"), {("Counties", "", "sheet-missing")}),
    Broken("stands sheet missing", drop("Stands"), {("Stands", "", "sheet-missing")}),
    Broken("settings sheet missing", drop("Settings"), {("Settings", "", "settings-missing")}),
    Broken("soils and covers missing", drop("Soils", "Covers"), {("Stands", "D7", "id-unknown")}),
    Broken(
        "sheet renamed",
        rename("Stands", "Stand list"),
        {("Stand list", "", "sheet-unknown"), ("Stands", "", "sheet-missing")},
    ),
    Broken("sheet of one's own", lambda book: book.create_sheet("Remarks"), {("Remarks", "", "sheet-unknown")}),
    Broken("stations empty", empty("Stations"), {("Stations", "", "sheet-empty")}),
    Broken("weather empty", empty("Weather"), {("Weather", "", "sheet-empty")}),
    Broken("counties empty", empty("Counties"), {("Counties", "", "sheet-empty")}),
    Broken("stands empty", empty("Stands"), {("Stands", "", "sheet-empty")}),
    Broken("stands without anything", lambda book: book["Stands"].delete_rows(1, 100), {("Stands", "", "sheet-empty")}),
    Broken("read first missing", drop("Read first"), set()),
    Broken(
        "newer template",
        lambda book: setattr(book.custom_doc_props["etflux_template"], "value", 2),
        {("Read first", "", "template-version-newer")},
    ),
    # --- headings and units ---
    Broken(
        "needed heading renamed",
        put("Weather", C3="Max temp (°C)"),
        {("Weather", "A3", "column-missing"), ("Weather", "C3", "heading-unknown")},
    ),
    Broken("optional heading renamed", put("Weather", I3="Dewpoint (°C)"), {("Weather", "I3", "heading-unknown")}),
    Broken("heading twice", put("Weather", E3="Highest temperature (°C)"), {("Weather", "E3", "heading-twice")}),
    Broken("headings gone", lambda book: book["Weather"].delete_rows(1, 3), {("Weather", "", "headings-missing")}),
    Broken("needed column gone", remove_column("Counties", 6), {("Counties", "A3", "column-missing")}),
    Broken("column of one's own", put("Stations", L3="Owner", L4="me"), {("Stations", "L3", "heading-unknown")}),
    Broken("cell without heading", put("Stations", N5="look here"), {("Stations", "N5", "cells-without-heading")}),
    Broken("unit missing", put("Weather", O3="Rain"), {("Weather", "O3", "unit-missing")}),
    Broken("unit unknown", put("Weather", N3="Wind speed (furlong/fortnight)"), {("Weather", "N3", "unit-unknown")}),
    Broken("unit of something else", put("Weather", O3="Rain (°C)"), {("Weather", "O3", "unit-wrong")}),
    Broken("unit of the other system", put("Weather", N3="Wind speed (mph)"), {("Weather", "N3", "unit-other-system")}),
    Broken(
        "temperature unit swapped",
        put("Weather", C3="Highest temperature (°F)", D3="Lowest temperature (°F)"),
        {
            ("Weather", "C3", "unit-other-system"),
            ("Weather", "C3", "unit-suspected"),
            ("Weather", "D3", "unit-suspected"),
        },
    ),
    Broken(
        "rain in inches by heading",
        put("Weather", O3="Rain (in)"),
        {("Weather", "O3", "unit-other-system"), ("Weather", "O3", "unit-suspected")},
    ),
    Broken(
        "area in acres by heading",
        put("Counties", F3="Area (acres)"),
        {
            ("Counties", "F3", "unit-other-system"),
            ("Counties", "F4", "stands-above-county"),
            ("Counties", "F5", "stands-above-county"),
        },
    ),
    Broken("unit where none is", put("Soils", C3="Water held at field capacity (mm)"), {("Soils", "C3", "unit-wrong")}),
    # --- cells that are not values ---
    Broken("text for a number", put("Weather", L9="n.d."), {("Weather", "L9", "text-for-number")}),
    Broken("mark of missing", put("Weather", L9="NA"), {("Weather", "L9", "missing-mark")}),
    Broken("decimal comma as text", put("Weather", L9="12,5"), {("Weather", "L9", "number-as-text")}),
    Broken("number as text", put("Weather", L9="12.5"), {("Weather", "L9", "number-as-text")}),
    Broken("thousands as text", put("Counties", F4="1,000"), {("Counties", "F4", "number-as-text")}),
    Broken("number with unit", put("Stands", E4="400 km2"), {("Stands", "E4", "number-as-text")}),
    Broken("trace of rain", put("Weather", O9="T"), {("Weather", "O9", "text-for-number")}),
    Broken("error value", error("Weather", "C9", "#DIV/0!"), {("Weather", "C9", "cell-error")}),
    Broken("error value in an id", error("Stands", "C5", "#N/A"), {("Stands", "C5", "cell-error")}),
    Broken("formula without value", put("Weather", C9="=1+1"), {("Weather", "C9", "formula-not-calculated")}),
    Broken(
        "formula in an id without value", put("Stands", A5="=Counties!A4"), {("Stands", "A5", "formula-not-calculated")}
    ),
    Broken("yes for a number", put("Stands", E4=True), {("Stands", "E4", "yes-no-for-number")}),
    Broken(
        "date for a number", style("Weather", "C9", "d-mmm", D(2031, 5, 26)), {("Weather", "C9", "date-for-number")}
    ),
    Broken("merged rows", merge("Stands", "B4:B5"), {("Stands", "B4", "merged-cells")}),
    Broken("merged columns", merge("Weather", "C9:D9"), {("Weather", "C9", "merged-cells")}),
    Broken("merged title", merge("Weather", "A1:F1"), set()),
    # --- dates ---
    Broken("date as text", text("Weather", "B9", "2031-06-06"), {("Weather", "B9", "date-as-text")}),
    Broken("date ambiguous", text("Weather", "B9", "06/07/2031"), {("Weather", "B9", "date-ambiguous")}),
    Broken("date in words", text("Stands", "G4", "second of June"), {("Stands", "G4", "date-unreadable")}),
    Broken("no such day", text("Stands", "G4", "2031-02-30"), {("Stands", "G4", "date-unreadable")}),
    Broken("date as a number", style("Stands", "G4", "General", 48001), {("Stands", "G4", "date-as-number")}),
    Broken("date as eight digits", style("Stands", "G4", "General", 20310602), {("Stands", "G4", "date-unreadable")}),
    Broken("day of the year for a date", style("Stands", "G4", "General", 153), {("Stands", "G4", "date-implausible")}),
    Broken("date with a time", put("Weather", B9=dt.datetime(2031, 6, 6, 7, 0)), {("Weather", "B9", "date-with-time")}),
    Broken("dates of 1904", epoch_1904, set()),
    Broken(
        "numbers as dates of 1904",
        both(epoch_1904, style("Stands", "G4", "General", 48001 - 1462)),
        {("Stands", "G4", "date-as-number")},
    ),
    Broken("date missing", put("Weather", B9=None), {("Weather", "B9", "value-missing")}),
    Broken(
        "duplicate day",
        put("Weather", B9=D(2031, 6, 5)),
        {("Weather", "B3", "days-missing"), ("Weather", "B9", "row-repeated")},
    ),
    Broken(
        "day missing", remove_row("Weather", 9), {("Counties", "A4", "rain-missing"), ("Weather", "B3", "days-missing")}
    ),
    Broken(
        "profile time without zone",
        text("Profiles", "B4", "2031-06-20 11:30"),
        {("Profiles", "B4", "time-without-zone")},
    ),
    Broken("profile time with zone", text("Profiles", "B4", "2031-06-20T05:30-06:00"), set()),
    # --- ids ---
    Broken("unknown station of weather", put("Weather", A9="N3"), {("Weather", "A9", "id-unknown")}),
    Broken(
        "unknown station everywhere",
        column("Weather", "A", lambda word: "North" if word == "N1" else word),
        {("Weather", "A4", "id-unknown")},
    ),
    Broken("unknown county", put("Stands", B4="A11"), {("Stands", "B4", "id-unknown")}),
    Broken("unknown cover", put("Stands", C4="maize"), {("Stands", "C4", "id-unknown")}),
    Broken("unknown soil", put("Stands", D4="silt loam"), {("Stands", "D4", "id-characters")}),
    Broken("unknown soil with a near one", put("Stands", D4="silt_lom"), {("Stands", "D4", "id-unknown")}),
    Broken("unknown rule", put("Stands", U6="pivit"), {("Stands", "U6", "id-unknown")}),
    Broken(
        "unknown stand of an irrigation",
        put("Irrigation dates", A4="B-con"),
        {("Irrigation dates", "A4", "id-unknown")},
    ),
    Broken(
        "unknown stand of an observation", put("Observations", A5="a-beans"), {("Observations", "A5", "id-unknown")}
    ),
    Broken("unknown station of a county", put("Counties", G4="N9"), {("Counties", "G4", "id-unknown")}),
    Broken("unknown county of a depth", put("Mixing depths", A4="Z9"), {("Mixing depths", "A4", "id-unknown")}),
    Broken(
        "two stations with one id",
        put("Stations", A5="N1"),
        {("Stations", "A5", "id-twice"), ("Weather", "A34", "id-unknown")},
    ),
    Broken(
        "ids that differ by capitals",
        both(put("Stations", A5="n1"), column("Weather", "A", str.lower), column("Counties", "G", str.lower)),
        {("Stations", "A5", "id-same-but-for-case"), ("Weather", "A34", "id-unknown")},
    ),
    Broken(
        "two stands with one id",
        put("Stands", A5="A-corn"),
        {("Observations", "A5", "id-unknown"), ("Stands", "A5", "id-twice")},
    ),
    Broken(
        "county id as a number",
        both(
            put("Counties", A4=19103),
            put("Stands", B4=19103, B5=19103),
            put("Mixing depths", A4=19103),
            put("Rest of county", A5=19103),
            put("Wind", A5=19103),
        ),
        {("Counties", "", "county-without-packaged-outline")},  # a US county where it is; its neighbour is none
    ),
    Broken(
        "county id of four digits",
        both(
            put("Counties", A4=1001),
            put("Stands", B4="1001", B5=1001),
            put("Mixing depths", A4=1001),
            put("Rest of county", A5=1001),
            put("Wind", A5=1001),
        ),
        {
            ("Counties", "A4", "geoid-elsewhere"),
            ("Counties", "A4", "id-padded"),
            ("Mixing depths", "A4", "id-padded"),
            ("Rest of county", "A5", "id-padded"),
            ("Stands", "B4", "id-padded"),
            ("Wind", "A5", "id-padded"),
        },
    ),
    Broken("id with a blank", put("Stands", A4="A corn"), {("Stands", "A4", "id-characters")}),
    Broken("id too long", put("Stands", A5="b" * 65), {("Stands", "A5", "id-long")}),
    Broken("id as a fraction", put("Stations", A4=1.5), {("Stations", "A4", "id-characters")}),
    Broken("id taken for a date", style("Stands", "A5", "d-mmm", D(2031, 6, 1)), {("Stands", "A5", "date-for-id")}),
    Broken("id missing", put("Stands", A5=None), {("Stands", "A5", "value-missing")}),
    # --- weather ---
    Broken("highest below lowest", put("Weather", D9=31.0), {("Weather", "C9", "t-max-below-t-min")}),
    Broken("temperature implausible", put("Weather", C9=66.0), {("Weather", "C9", "range")}),
    Broken(
        "humidity as a fraction",
        both(column("Weather", "F", lambda x: x / 100), column("Weather", "G", lambda x: x / 100)),
        {("Weather", "F3", "humidity-fraction"), ("Weather", "G3", "humidity-fraction")},
    ),
    Broken("humidity above 100", put("Weather", F9=140.0), {("Weather", "F9", "range")}),
    Broken("humidities exchanged", put("Weather", F9=30.0, G9=90.0), {("Weather", "F9", "humidity-order")}),
    Broken("negative rain", put("Weather", O9=-1.0), {("Weather", "O9", "rain-negative")}),
    Broken("mark -9999", put("Weather", L9=-9999), {("Weather", "L9", "range")}),
    Broken("blank rain", put("Weather", O9=None), {("Counties", "A4", "rain-missing")}),
    Broken("very heavy rain", put("Weather", O9=300.0), {("Weather", "O9", "rain-heavy")}),
    Broken("radiation in W/m²", column("Weather", "L", lambda x: x / 0.0864), {("Weather", "L3", "unit-suspected")}),
    Broken("radiation above the sky", put("Weather", L9=44.0), {("Weather", "L9", "radiation-above-sky")}),
    Broken("dew point above highest", put("Weather", I9=33.0), {("Weather", "I9", "dew-point-above-t-max")}),
    Broken(
        "temperatures in °F",
        both(column("Weather", "C", lambda x: 1.8 * x + 32), column("Weather", "D", lambda x: 1.8 * x + 32)),
        {("Weather", "C3", "unit-suspected"), ("Weather", "D3", "unit-suspected")},
    ),
    Broken(
        "sensor stuck",
        put("Weather", L9=20.0, L10=20.0, L11=20.0, L12=20.0, L13=20.0, L14=20.0),
        {("Weather", "L14", "value-repeated")},
    ),
    Broken("wind calm", column("Weather", "N", lambda x: x / 10), {("Weather", "N3", "wind-calm")}),
    Broken(
        "station without weather",
        add_row("Stations", A="N3", C=41.6, D=-90.9, E=240.0, F=2.0),
        {("Stations", "A6", "station-without-weather")},
    ),
    Broken(
        "temperature gap",
        both(*(put("Weather", **{f"C{row}": None, f"C{row + 30}": None}) for row in range(9, 14))),
        {("Weather", "", "temperature-gap")},
    ),
    # --- places ---
    Broken("longitude without sign", put("Stations", D4=91.0), {("Stations", "D4", "longitude-sign")}),
    Broken(
        "latitude and longitude exchanged",
        put("Stations", C4=-91.0, D4=41.5),
        {("Stations", "C4", "range"), ("Stations", "D4", "longitude-sign")},
    ),
    Broken("county far away", put("Counties", C4=21.5), {("Counties", "C4", "far-from-stations")}),
    Broken("elevation implausible", put("Stations", E4=25000), {("Stations", "E4", "range")}),
    Broken("wind height missing", put("Stations", F5=None), {("Stations", "F5", "value-missing")}),
    # --- counties and stands ---
    Broken("stands above the county", put("Stands", E4=700.0), {("Counties", "F4", "stands-above-county")}),
    Broken("negative area", put("Stands", E4=-5.0), {("Stands", "E4", "range")}),
    Broken(
        "rest above 100",
        add_row("Rest of county", A="A1", B="water", C=50.0, D="cover", E="water", F="loam"),
        {("Rest of county", "C6", "rest-above-100")},
    ),
    Broken(
        "county without stands",
        both(put("Stands", B6="A1", B7="A1", E6=50.0, E7=50.0), put("Counties", F4=2000.0)),
        {("Counties", "A5", "county-without-stands")},
    ),
    Broken(
        "planting after the season",
        put("Stands", G4=D(2032, 6, 2)),
        {("Observations", "B4", "observation-order"), ("Stands", "G4", "planting-after-season")},
    ),
    Broken(
        "planting before the season", put("Stands", G4=D(2031, 4, 20)), {("Stands", "G4", "planting-before-season")}
    ),
    Broken("planting missing", put("Stands", G4=None), {("Stands", "G4", "planting-missing")}),
    Broken("planting of grass", put("Stands", G7=D(2031, 6, 2)), {("Stands", "G7", "planting-not-needed")}),
    Broken("harvest before planting", put("Stands", L4=D(2031, 6, 1)), {("Stands", "L4", "harvest-before-planting")}),
    Broken(
        "spread incomplete",
        put("Stands", G4=None, H4=D(2031, 6, 1), I4=D(2031, 6, 4)),
        {("Stands", "J4", "spread-incomplete")},
    ),
    Broken(
        "spread out of order",
        put("Stands", G4=None, H4=D(2031, 6, 9), I4=D(2031, 6, 4), J4=D(2031, 6, 12)),
        {("Stands", "H4", "spread-order")},
    ),
    Broken("regime unknown", put("Stands", F6="centre pivot"), {("Stands", "F6", "choice-unknown")}),
    Broken("tillage in capitals", put("Stands", N4="Reduced "), set()),
    Broken("drained unknown", put("Stands", P4="maybe"), {("Stands", "P4", "choice-unknown")}),
    Broken("group unknown", put("Stands", Q4="E"), {("Stands", "Q4", "choice-unknown")}),
    Broken("residue above 100", put("Stands", O4=130.0), {("Stands", "O4", "range")}),
    Broken("available water in wrong unit", put("Stands", R4=2.0), {("Stands", "R4", "range")}),
    # --- soils and covers ---
    Broken(
        "wilting point above capacity",
        put("Soils", D12=0.4),
        {("Soils", "D12", "packaged-row-changed"), ("Soils", "D12", "wilting-point-not-below-field-capacity")},
    ),
    Broken(
        "REW not below TEW",
        put("Soils", C12=0.16, D12=0.14, E12=9.0),
        {
            ("Soils", "C12", "packaged-row-changed"),
            ("Soils", "D12", "packaged-row-changed"),
            ("Soils", "E12", "packaged-row-changed"),
            ("Soils", "E12", "rew-not-below-tew"),
        },
    ),
    Broken("packaged soil changed", put("Soils", C4=0.13), {("Soils", "C4", "packaged-row-changed")}),
    Broken(
        "two soils with one id",
        add_row("Soils", A="sand", C=0.12, D=0.045, E=4.5, F=0.1, G="A"),
        {("Soils", "A14", "id-twice")},
    ),
    Broken(
        "cover incomplete", new_cover(Habit="annual", Depletion_fraction=None), {("Covers", "T7", "cover-incomplete")}
    ),
    Broken("cover with unknown habit", new_cover(Habit="tree"), {("Covers", "D7", "choice-unknown")}),
    Broken("cover of one's own", new_cover(Name="Sweet corn"), set()),
    # --- irrigation, observations, air ---
    Broken(
        "irrigation without depth",
        put("Irrigation dates", C4=None),
        {("Irrigation dates", "C4", "irrigation-depth-missing")},
    ),
    Broken(
        "irrigation net above gross",
        put("Irrigation dates", D4=25.0),
        {("Irrigation dates", "D4", "irrigation-net-above-gross")},
    ),
    Broken(
        "irrigation of a rainfed stand",
        put("Irrigation dates", A4="A-corn"),
        {("Irrigation dates", "A4", "irrigation-on-rainfed")},
    ),
    Broken("rule of a rainfed stand", put("Stands", U4="pivot"), {("Stands", "U4", "irrigation-on-rainfed")}),
    Broken("irrigation twice", put("Irrigation dates", B5=D(2031, 6, 10)), {("Irrigation dates", "B5", "event-twice")}),
    Broken(
        "irrigation outside the season",
        put("Irrigation dates", B4=D(2030, 6, 10)),
        {("Irrigation dates", "B4", "day-outside-season")},
    ),
    Broken(
        "irrigated without water",
        both(put("Stands", U6=None), empty("Irrigation dates")),
        {("Stands", "F6", "irrigation-never")},
    ),
    Broken(
        "rule that never irrigates",
        put("Irrigation rules", G4=40.0),
        {("Irrigation rules", "G4", "irrigation-least-too-high")},
    ),
    Broken("stage unknown", put("Irrigation rules", B4="V99"), {("Irrigation rules", "B4", "choice-unknown")}),
    Broken("observation unknown", put("Observations", C4="flowering"), {("Observations", "C4", "choice-unknown")}),
    Broken(
        "observation without value", put("Observations", D5=None), {("Observations", "D5", "observation-without-value")}
    ),
    Broken(
        "cut of an averaged cover",
        add_row("Observations", A="B-grass", B=D(2031, 6, 20), C="cut"),
        {("Observations", "C6", "cut-on-averaged")},
    ),
    Broken("depth below the floor", put("Mixing depths", C4=120.0), {("Mixing depths", "C4", "depth-below-floor")}),
    Broken(
        "profile without place",
        put("Profiles", C4=None, C5=None, C6=None, C7=None, C8=None, C9=None),
        {("Profiles", "C4", "profile-place")},
    ),
    Broken(
        "profile in the afternoon",
        column("Profiles", "B", lambda when: dt.datetime(2031, 6, 20, 20, 0)),
        {("Profiles", "B4", "profile-hour")},
    ),
    Broken(
        "profile above the sea",
        column("Profiles", "F", lambda height: height + 250.0),
        {("Profiles", "F4", "profile-above-sea")},
    ),
    Broken("profile not rising", put("Profiles", F6=100.0), {("Profiles", "F6", "profile-not-rising")}),
    Broken("profile humidity missing", put("Profiles", I6=None), {("Profiles", "I6", "profile-humidity")}),
    Broken("wind without direction", put("Wind", F4=None), {("Wind", "E4", "wind-incomplete")}),
    Broken(
        "background air twice", put("Background air", A5=D(2031, 6, 20)), {("Background air", "A5", "row-repeated")}
    ),
    Broken("background air too moist", put("Background air", B4=31.0), {("Background air", "B4", "range")}),
    Broken("background air in words", put("Background air", B4="dry"), {("Background air", "B4", "text-for-number")}),
    Broken("gauge twice", put("Rain gauges", B5=D(2031, 6, 1)), {("Rain gauges", "B5", "row-repeated")}),
    Broken("gauge negative", put("Rain gauges", C5=-2.0), {("Rain gauges", "C5", "rain-negative")}),
    # --- settings ---
    Broken(
        "setting unknown",
        add_row("Settings", B="Colour of the barn", C="red"),
        {("Settings", "Colour of the barn", "setting-unknown")},
    ),
    Broken("setting out of range", setting("Albedo", 0.9), {("Settings", "Albedo", "range")}),
    Broken("setting as text", setting("Albedo", "0,23"), {("Settings", "Albedo", "number-as-text")}),
    Broken(
        "setting without its unit",
        both(
            setting("Killing frost", -2.0),
            lambda book: setattr(book["Settings"].cell(setting_row(book, "Killing frost"), 4), "value", None),
        ),
        {("Settings", "Killing frost", "setting-unit-missing")},
    ),
    Broken(
        "setting with a wrong choice",
        setting("Missing rain", "ignore"),
        {("Settings", "Missing rain", "choice-unknown")},
    ),
    Broken("setting not whole", setting("Corn dry-down", 10.5), {("Settings", "Corn dry-down", "number-not-whole")}),
    Broken(
        "settings headings gone", lambda book: book["Settings"].delete_rows(3), {("Settings", "", "headings-missing")}
    ),
    Broken(
        "season ends before it starts", setting("Last day", D(2031, 5, 1)), {("Settings", "Last day", "season-order")}
    ),
    Broken(
        "season without weather",
        both(setting("First day", D(2030, 6, 1)), setting("Last day", D(2030, 6, 30))),
        {
            ("Settings", "Last day", "season-without-weather"),
            ("Stations", "A4", "station-without-weather"),
            ("Stations", "A5", "station-without-weather"),
        },
    ),
    Broken(
        "day of the brief outside",
        setting("Day of the brief", D(2031, 7, 27)),
        {("Settings", "Day of the brief", "day-outside-season")},
    ),
    Broken(
        "outlines outside the folder",
        setting("County outlines", "../shapes.geojson"),
        {("Settings", "County outlines", "file-outside-folder")},
    ),
    Broken(
        "outlines missing",
        setting("County outlines", "shapes.geojson"),
        {("Settings", "County outlines", "file-missing")},
    ),
    Broken(
        "cover of the rest unknown",
        setting("Cover of the rest", "prairie"),
        {("Settings", "Cover of the rest", "id-unknown")},
    ),
    Broken(
        "units setting against headings",
        setting("Units for people", "us"),
        {
            ("Background air", "B3", "unit-other-system"),
            ("Counties", "E3", "unit-other-system"),
            ("Covers", "N3", "unit-other-system"),
            ("Irrigation dates", "C3", "unit-other-system"),
            ("Irrigation rules", "G3", "unit-other-system"),
            ("Mixing depths", "C3", "unit-other-system"),
            ("Profiles", "E3", "unit-other-system"),
            ("Rain gauges", "C3", "unit-other-system"),
            ("Soils", "E3", "unit-other-system"),
            ("Stands", "E3", "unit-other-system"),
            ("Stations", "E3", "unit-other-system"),
            ("Weather", "C3", "unit-other-system"),
            ("Wind", "D3", "unit-other-system"),
        },
    ),
    # --- text that could hurt ---
    Broken(
        "formula text in a name",
        text("Stations", "B4", '=HYPERLINK("http://x")'),
        {("Stations", "B4", "text-like-code")},
    ),
    Broken(
        "page code in a name",
        text("Counties", "B4", "<script>alert(1)</script>"),
        {("Counties", "B4", "text-like-code")},
    ),
    Broken("name too long", put("Stations", B4="x" * 600), {("Stations", "B4", "text-long")}),
    Broken("stray cell in the last row", stray, {("Weather", "XFD1048576", "cells-without-heading")}),
    Broken("stray id in the last row", stray_in_table, {("Weather", "B1048576", "value-missing")}),
    Broken(
        "hidden sheet and rows",
        lambda book: (
            setattr(book["Stands"], "sheet_state", "hidden"),
            setattr(book["Weather"].row_dimensions[5], "hidden", True),
        ),
        set(),
    ),
]


def found_in(path, book):
    """What the check finds: (sheet, cell, code)."""
    page = {page.title: page for page in book}.get("Settings")
    found = []
    for finding in check(path):
        sheet, _, cell = finding.place.partition("!")
        if sheet == path.name:
            sheet = "FILE"
        if sheet == "Settings" and cell:
            cell = page.cell(page[cell].row, 2).value
        found.append((sheet, cell, finding.code))
        assert finding.sentence()
        assert finding.record()["place"] == finding.place
    return found


@pytest.mark.parametrize("broken", BROKEN, ids=lambda broken: broken.name)
def test_exactly_what_is_wrong_is_found(broken, bare_bytes, tmp_path):
    book = load_workbook(io.BytesIO(bare_bytes))
    broken.change(book)
    path = tmp_path / "broken.xlsx"
    book.save(path)
    before = hashlib.sha256(path.read_bytes()).hexdigest()
    assert set(found_in(path, book)) == broken.found
    assert hashlib.sha256(path.read_bytes()).hexdigest() == before
    assert list(tmp_path.iterdir()) == [path]


def test_nothing_is_wrong_with_the_good_ones(good_path, bare_bytes, tmp_path):
    assert check(good_path) == []
    path = tmp_path / "bare.xlsx"
    path.write_bytes(bare_bytes)
    assert check(path) == []


def test_names_of_the_kinds_are_unique_and_enough():
    assert len({broken.name for broken in BROKEN}) == len(BROKEN) >= 80
