"""The brief: one printed page that answers, for one day, how much, where, from what, and how sure.

From the top: the numbers a briefing opens with; a paragraph to paste; the counties, least certain first so that nobody
reads a number without its doubt; the season and the episode as charts; what the letters mean; the cautions; which run.
"""

from __future__ import annotations

from dataclasses import dataclass
from io import BytesIO
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from etflux.results import confidence
from etflux.results.rests import rests_on
from etflux.results.summary import CONFIDENCE, says_stress, values
from etflux.variables import System, from_si, quantity
from etflux.workbook.report_charts import charts_of
from etflux.workbook.report_days import stand_columns
from etflux.workbook.report_sheet import put
from etflux.workbook.report_style import (
    FAINT,
    INK,
    MARKED,
    SOFT,
    Look,
    lines_of,
    number_format,
    set_page,
)
from etflux.workbook.report_words import (
    CAUTIONS,
    NOT_COMPUTED,
    clean_text,
    day_words,
    identity_line,
    marked_words,
    missing_reason,
    paragraph,
    remark_letters,
    shown,
)

if TYPE_CHECKING:
    import xarray as xr
    from xlsxwriter.chart import Chart
    from xlsxwriter.workbook import Workbook
    from xlsxwriter.worksheet import Worksheet

    from etflux.results import Results

WIDTHS = (17, 8, 9, 8, 8, 8, 10, 8, 8, 12, 16, 1.5, 10.5, 10.5, 10.5, 10.5, 10.5)
LAST_OF_TABLE, CHART_COLUMN, LAST = 10, 12, len(WIDTHS) - 1
TILES = ((0, 1), (2, 4), (5, 7), (8, 9), (10, 12), (13, LAST))
MOST_COUNTIES = 30
FEW_COUNTIES = 8  # with so few there is room for stands, and the charts go below the tables, not beside them
MOST_STANDS = 14
STAND_COLUMNS = (
    "Stand", "Cover", "Growth stage", "Crop water use", "Water left", "Irrigation need", "Days to stress", "Marked",
)  # fmt: skip
ROW_POINTS, ROW_PIXELS = 15.75, 21
PIXELS_PER_CHARACTER = 7.4
HEADING_POINTS = 40.0


@dataclass(frozen=True)
class Picture:
    """A picture for the brief: PNG, its size in pixels of the screen at full size, and what it shows."""

    png: bytes
    width: float
    height: float
    title: str


def write_brief(
    results: Results, book: Workbook, sheet: Worksheet, look: Look, system: System, day: np.datetime64,
    picture: Picture | None = None,
) -> None:  # fmt: skip
    """Write the brief and, on a sheet of their own, the numbers of its charts."""
    numbers = results.summary(str(day))
    set_page(sheet, system, identity_line(results))
    sheet.fit_to_pages(1, 1)
    sheet.hide_gridlines(2)
    for column, width in enumerate(WIDTHS):
        sheet.set_column(column, column, width)
    _head(results, sheet, look, numbers)
    _tiles(sheet, look, numbers, system)
    text = paragraph(results, numbers, system)
    sheet.merge_range(6, 0, 6, LAST, text, look.wrapped(font_size=10))
    sheet.set_row(6, 13.5 * lines_of(text, sum(WIDTHS), 10) + 2)
    _rests(results, sheet, look, day)
    few = results.county.sizes["county_id"] <= FEW_COUNTIES
    end, legend = _county_table(results, sheet, look, system, day, 8)
    if few:
        end = _stand_table(results, sheet, look, system, day, end + 1)
    charts = charts_of(results, book, look, system, day)
    end = _place_charts(sheet, look, charts, picture, few, end)
    end = _foot(sheet, look, end + 1, legend)
    sheet.print_area(0, 0, end, LAST)


def _head(results: Results, sheet: Worksheet, look: Look, numbers: dict[str, Any]) -> None:
    title = clean_text(numbers["title"]) or "Crop water use and its moisture in the air"
    sheet.merge_range(0, 0, 0, LAST, "", look())
    sheet.write_string(0, 0, f"{title}: {day_words(numbers['day'])}", look(bold=True, font_size=16))
    sheet.set_row(0, 24)
    sheet.merge_range(1, 0, 1, LAST, "", look())
    season = f"Record {numbers['first_day']} to {numbers['last_day']}. {identity_line(results)}"
    sheet.write_string(1, 0, season, look(font_color=SOFT))


def _rests(results: Results, sheet: Worksheet, look: Look, day: np.datetime64) -> None:
    """What the day rests on, with what stands in for a missing station, balloon or wind in bold."""
    parts = rests_on(results, day)
    plain, strong = look(font_size=8, font_color=SOFT), look(font_size=8, bold=True)
    rich: list[Any] = [plain, "Rests on "]
    for place, part in enumerate(parts):
        rich += [strong if part.fallback else plain, f"{part.name.lower()}: {part.text}"]
        rich += [plain, "." if place == len(parts) - 1 else "; "]
    text = "".join(piece for piece in rich if isinstance(piece, str))
    shape = look.wrapped(font_size=8)
    sheet.merge_range(7, 0, 7, LAST, "", shape)
    sheet.write_rich_string(7, 0, *rich, shape)
    sheet.set_row(7, 11.5 * lines_of(text, sum(WIDTHS), 8) + 5)


def _tiles(sheet: Worksheet, look: Look, numbers: dict[str, Any], system: System) -> None:
    """Headline numbers: what it is, the number, what stands beside it."""

    def of(name: str) -> str:
        return shown(name, numbers[name], system)

    stands = numbers["stands"]
    has_air = np.isfinite(numbers["contribution_c"])
    area = shown("area_km2", numbers["county_area_km2"], system, decimals=0)
    need = f"{stands['need']} with an irrigation need"
    parts, without = "no value: see the remarks", ""
    if has_air:
        parts = f"{of('contribution_same_day_c')} today's water, {of('contribution_carried_c')} carried"
        without = f"{of('dew_point_without_c')} without the crops' water"
    rows = (
        ("Crops added to the dew point", of("contribution_c"), parts),
        ("Dew point of the mixed air", of("dew_point_mixed_c"), without),
        ("Latent flux, mean of the day", of("le_county_w_m2"), f"{of('le_daytime_w_m2')} by daylight"),
        ("Water use of the counties", of("et_county_mm"), f"reference ET {of('eto_mm')}"),
        ("Water into the air", of("water_volume_hm3"), f"from {area}"),
        ("Stands short of water", f"{stands['stressed']} of {stands['count']}", need),
    )  # fmt: skip
    for (first, last), (label, value, beside) in zip(TILES, rows, strict=True):
        for row, text, look_of in (
            (2, label, look(font_color=SOFT, top=2, border_color=INK, align="left")),
            (3, value, look(bold=True, font_size=15, align="left")),
            (4, beside, look(font_color=SOFT, align="left", font_size=8)),
        ):
            sheet.merge_range(row, first, row, last, text, look_of)
    sheet.set_row(2, 15)
    sheet.set_row(3, 21)
    sheet.set_row(4, 13)
    sheet.set_row(5, 6)


def _county_table(
    results: Results, sheet: Worksheet, look: Look, system: System, day: np.datetime64, first_row: int
) -> tuple[int, list[str]]:
    """Counties on the day, least certain first; gives the row below and the legend."""
    today = results.county.sel(date=day)
    flags, provisional, share = (values(today, name) for name in ("flags", "provisional", "estimated_share_pct"))
    contribution = values(today, "contribution_c")
    rank = confidence(flags, provisional, contribution, values(today, "profile_distance_km"))
    order = np.lexsort((-np.nan_to_num(contribution, nan=-np.inf), rank))
    listed = order[:MOST_COUNTIES]
    letters, legend = remark_letters(flags[listed], provisional[listed])
    cells = {column: text[listed] for column, text in _county_cells(results, today, system, rank, day).items()}
    marked = marked_words(share, provisional)[listed] != ""
    for offset, remark in enumerate(letters):
        estimated = f"{share[listed[offset]]:.0f} % est." if share[listed[offset]] > 0.0 else ""
        cells[LAST_OF_TABLE][offset] = ", ".join(part for part in (remark, estimated) if part)
    _county_headings(sheet, look, system, first_row)
    shapes = {1: "le_county_w_m2", 2: "et_county_mm", 4: "mixing_depth_m", 5: "dew_point_mixed_c"}
    for offset in range(len(listed)):
        row = first_row + 1 + offset
        sheet.set_row(row, ROW_POINTS)
        shape = _cell_look(look, bool(marked[offset]))
        for column, texts in cells.items():
            side = {0: "left", 3: "center", 9: "left", LAST_OF_TABLE: "left"}.get(column, "right")
            written = number_format(shapes.get(column, "contribution_c"), system) if side == "right" else "@"
            put(sheet, row, column, texts[offset], shape(written, side))
    if (missing_reason(flags, contribution) == NOT_COMPUTED).any():
        legend.append(f"no value: {NOT_COMPUTED}")
    if len(order) > len(listed):
        legend.insert(0, f"The {len(listed)} least certain of {len(order)} counties; all are on the sheet County days")
    if np.nansum(share[listed]) > 0.0:
        legend.append("est.: the share of the day's weather that was estimated")
    return first_row + 1 + len(listed), legend


def _county_cells(
    results: Results, today: xr.Dataset, system: System, rank: np.ndarray, day: np.datetime64
) -> dict[int, np.ndarray]:
    """What stands in each column for each county: a number, or a range where no single one is known well enough."""

    def people(name: str) -> np.ndarray:
        return from_si(values(today, name), name, system)

    names, ids = results.names_by_id("county"), today["county_id"].to_numpy().astype(str)
    short, of = _short_of_water(results, day)
    ends = [people(name) for name in ("contribution_low_c", "contribution_high_c")]
    places = quantity("contribution_c").decimals_in(system)
    ranges = [f"{low:.{places}f} to {high:.{places}f}" for low, high in zip(*ends, strict=True)]
    a_range = (rank == 1) & np.isfinite(ends[0]) & np.isfinite(ends[1])
    columns: dict[int, Any] = {
        0: [names.get(name, name) for name in ids],
        1: people("le_county_w_m2"),
        2: people("et_county_mm"),
        3: [f"{some} of {whole}" if whole else "none" for some, whole in zip(short, of, strict=True)],
        4: np.round(people("mixing_depth_m"), -1),  # no depth is known to a metre or a foot
        5: people("dew_point_mixed_c"),
        6: np.where(a_range, np.array(ranges, dtype=object), people("contribution_c").astype(object)),
        7: np.where(rank > 1, people("contribution_same_day_c"), np.nan),
        8: np.where(rank > 1, people("contribution_carried_c"), np.nan),
        9: [CONFIDENCE[int(code)] for code in rank],
        LAST_OF_TABLE: [""] * len(ids),
    }
    return {column: np.array(list(texts), dtype=object) for column, texts in columns.items()}


def _cell_look(look: Look, marked: bool) -> Any:
    tint = {"bg_color": MARKED} if marked else {}

    def made(number_format_: str, align: str = "right") -> Any:
        indent = {"indent": 1} if align == "left" else {}
        return look(num_format=number_format_, align=align, bottom=1, border_color=FAINT, **tint, **indent)

    return made


def _county_headings(sheet: Worksheet, look: Look, system: System, row: int) -> None:
    def unit(name: str) -> str:
        return quantity(name).unit_in(system)

    degrees = unit("contribution_c")
    headings = (
        "County", f"Latent flux ({unit('le_county_w_m2')})", f"Water use ({unit('et_county_mm')})",
        "Stands short of water",
        f"Mixing depth ({unit('mixing_depth_m')})", f"Dew point ({degrees})", f"Crops added ({degrees})",
        f"of it today's ({degrees})", f"of it carried ({degrees})", "How sure", "Remarks",
    )  # fmt: skip
    for column, heading in enumerate(headings):
        sheet.write_string(row, column, heading, look.heading(over_text=column in {0, 9, LAST_OF_TABLE}))
    sheet.set_row(row, HEADING_POINTS)


def _stand_table(
    results: Results, sheet: Worksheet, look: Look, system: System, day: np.datetime64, first_row: int
) -> int:
    """Stands on the day, those that will be short of water soonest first; gives the row below."""
    own = results.stand.isel(unit_id=np.flatnonzero(results.stand["kind"].to_numpy() == "stand")).sel(date=[day])
    if not own.sizes["unit_id"]:
        return first_row - 1
    columns, marked = stand_columns(results, own, system)
    by_name = {column.heading.split(" (")[0]: column for column in columns}
    soon = by_name["Days to stress"].values
    order = np.lexsort((by_name["Water left"].values, np.nan_to_num(soon, nan=np.inf)))[:MOST_STANDS]
    spans = ((0, 0), (1, 2), (3, 4), (5, 5), (6, 6), (7, 7), (8, 8), (9, LAST))
    for (first, last), name in zip(spans, STAND_COLUMNS, strict=True):
        column = by_name[name]
        over_text = column.values.dtype.kind == "O"
        _spread_cell(sheet, first_row, first, last, column.heading, look.heading(over_text=over_text))
        for offset, place in enumerate(order):
            cell = _cell_look(look, bool(marked[place]))
            value = column.values[place]
            if name == "Stand" and by_name["Part"].values[place]:
                value = f"{value}, {by_name['Part'].values[place]}"
            if name == "Days to stress" and value == 0.0:
                value = "now"
            shape = cell(column.format, "left" if over_text else "right")
            _spread_cell(sheet, first_row + 1 + offset, first, last, value, shape)
    sheet.set_row(first_row, HEADING_POINTS)
    end = first_row + 1 + len(order)
    if own.sizes["unit_id"] > len(order):
        more = f"The {len(order)} that will be short soonest of {own.sizes['unit_id']}; all are on Stand days."
        sheet.write_string(end, 0, more, look(font_color=SOFT, font_size=8))
        end += 1
    return end


def _spread_cell(sheet: Worksheet, row: int, first: int, last: int, value: Any, shape: Any) -> None:
    """One value over one or more columns."""
    if last > first:
        sheet.merge_range(row, first, row, last, "", shape)
    put(sheet, row, first, value, shape)


def _short_of_water(results: Results, day: np.datetime64) -> tuple[list[int], list[int]]:
    """Stands short of water and stands in all, by county."""
    stand = results.stand.sel(date=day)
    own = stand["kind"].to_numpy() == "stand"
    short = own & says_stress(values(stand, "stage_code")) & (values(stand, "ks") < 1.0)
    rows = pd.DataFrame(
        {"county": stand["county_id"].to_numpy().astype(str), "stand": stand["stand_id"].to_numpy(), "short": short}
    )[own]
    by_stand = rows.groupby(["county", "stand"])["short"].any().groupby("county")
    ids = results.county["county_id"].to_numpy().astype(str)
    counts = by_stand.agg(["sum", "size"]).reindex(ids).fillna(0).astype(int)
    return counts["sum"].tolist(), counts["size"].tolist()


def _place_charts(
    sheet: Worksheet, look: Look, charts: list[Chart], picture: Picture | None, few: bool, end: int
) -> int:
    """Map and charts beside the table, one above the other; below it, side by side, when there are few counties."""
    number = len(charts) + (picture is not None)
    if not number:
        return end
    if few:
        width, height = sum(WIDTHS) * PIXELS_PER_CHARACTER / number, 16.0 * ROW_PIXELS
        if picture:
            _place_picture(sheet, look, picture, end + 1, 0, width - 10.0, height - ROW_PIXELS)
        for position, chart in enumerate(charts, number - len(charts)):
            chart.set_size({"width": width - 10.0, "height": height})
            sheet.insert_chart(end + 1, 0, chart, {"x_offset": position * width, "object_position": 2})
        return end + 18
    width = sum(WIDTHS[CHART_COLUMN:]) * PIXELS_PER_CHARACTER
    top, rows = 8, max(end - 8, 30 if picture else 24)
    left = (HEADING_POINTS / ROW_POINTS + rows - 1) * ROW_PIXELS
    start = 0.0
    if picture:
        start = HEADING_POINTS / ROW_POINTS * ROW_PIXELS
        start += _place_picture(sheet, look, picture, top, CHART_COLUMN, width, 0.42 * left) + 8.0
    each = (left - start) / max(len(charts), 1)
    for position, chart in enumerate(charts):
        chart.set_size({"width": width, "height": each - 6.0})
        sheet.insert_chart(top, CHART_COLUMN, chart, {"y_offset": start + position * each, "object_position": 2})
    return top + rows


def _place_picture(
    sheet: Worksheet, look: Look, picture: Picture, row: int, column: int, width: float, height: float
) -> float:
    """Title in a row, the picture from the next one, as large as fits; gives its height in pixels."""
    last = LAST if column else 4
    sheet.merge_range(row, column, row, last, picture.title, look.wrapped(bold=True, font_size=9))
    if not column:
        sheet.set_row(row, 1.7 * ROW_POINTS)
    scale = min(width / picture.width, height / picture.height)
    sheet.insert_image(
        row + 1, column, "map.png",
        {"image_data": BytesIO(picture.png), "x_scale": scale, "y_scale": scale, "object_position": 2,
         "description": picture.title},
    )  # fmt: skip
    return scale * picture.height


def _foot(sheet: Worksheet, look: Look, row: int, legend: list[str]) -> int:
    """What letters mean, and the cautions."""
    order = (
        "Least certain first, then by what the crops added. Tinted rows rest on estimated weather or may still move."
    )
    if legend:
        order += " Remarks: " + "; ".join(legend) + "."
    for text, extra in ((order, {"font_size": 8}), (" ".join(CAUTIONS), {"bold": True})):
        sheet.merge_range(row, 0, row, LAST, text, look.wrapped(**extra))
        sheet.set_row(row, 12.0 * lines_of(text, sum(WIDTHS), 8 if "font_size" in extra else 9.5) + 3)
        row += 1
    return row - 1
