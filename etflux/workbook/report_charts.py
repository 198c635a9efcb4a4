"""Charts of the brief, drawn by the spreadsheet itself, and the sheet of numbers behind them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
import pandas as pd

from etflux.results.summary import region_contribution, values
from etflux.variables import System, from_si, quantity
from etflux.workbook.report_sheet import put
from etflux.workbook.report_style import INK, RULE, Look, series_look, set_page
from etflux.workbook.report_words import clean_text, identity_line

if TYPE_CHECKING:
    from xlsxwriter.chart import Chart
    from xlsxwriter.workbook import Workbook
    from xlsxwriter.worksheet import Worksheet

    from etflux.results import Results

EPISODE_DAYS = 7
SMOOTHED_DAYS = 7
CHART_FONT = {"name": "Arial", "size": 9, "color": INK}
CHART_SHEET = "Chart data"


class Place(NamedTuple):
    """Where a chart's numbers are on the sheet of chart data."""

    first_column: int
    names: list[str]
    rows: int


def charts_of(results: Results, book: Workbook, look: Look, system: System, day: np.datetime64) -> list[Chart]:
    """Latent flux by cover through the season; the contribution of each cover through the last days."""
    data = book.add_worksheet(CHART_SHEET)
    set_page(data, system, identity_line(results))
    data.write_string(0, 0, "Numbers of the charts on the brief", look.title())
    flux = flux_by_cover(results)
    place = _put_frame(
        data, look, 0, "Latent flux over each cover's own ground (W/m²), mean of 7 days", flux, "0", "yyyy-mm-dd"
    )
    charts = [_line_chart(book, place)] if place.rows and place.names else []
    shares = episode(results, day)
    if len(shares.columns) and shares.notna().any(axis=None):
        degrees = quantity("contribution_c").unit_in(system)
        people = pd.DataFrame(from_si(shares.to_numpy(), "contribution_c", system), shares.index, shares.columns)
        start = place.first_column + len(place.names) + 2
        bars = _put_frame(
            data, look, start, f"What the crops added to the dew point ({degrees})", people, "0.0", "d mmm"
        )
        charts.append(_bar_chart(book, bars, degrees))
    return charts


def flux_by_cover(results: Results) -> pd.DataFrame:
    """Latent flux of each source over its own ground, mean of the last seven days. [W m-2]"""
    county, stand = results.county, results.stand
    if "le_by_tag_w_m2" not in county:
        return pd.DataFrame(index=pd.to_datetime(results.dates))
    area = county["area_km2"].to_numpy()
    by_tag = np.einsum("dct,c->dt", np.nan_to_num(county["le_by_tag_w_m2"].to_numpy()), area)
    ground = pd.Series(stand["area_km2"].to_numpy()).groupby(stand["tag"].to_numpy().astype(str)).sum()
    tags = [str(tag) for tag in county["tag"].to_numpy()]
    there = [position for position, tag in enumerate(tags) if ground.get(tag, 0.0) > 0.0]
    own = by_tag[:, there] / np.array([ground[tags[position]] for position in there])
    frame = pd.DataFrame(own, pd.to_datetime(results.dates), [tags[position] for position in there])
    return frame.rolling(SMOOTHED_DAYS, min_periods=1).mean()


def episode(results: Results, day: np.datetime64) -> pd.DataFrame:
    """Contribution by cover on the days up to `day` that have one, at most a week. [degC of difference]"""
    days = results.dates
    last = int(np.searchsorted(days, day))
    has = np.isfinite(values(results.county, "contribution_c")).any(axis=1)
    first = last
    while first > 0 and has[first - 1] and last - first < EPISODE_DAYS - 1:
        first -= 1
    found = region_contribution(results, days[first : last + 1])
    order = found.sum().sort_values(ascending=False).index if len(found.columns) else found.columns
    return found[list(order)]


def _put_frame(
    sheet: Worksheet, look: Look, column: int, what: str, frame: pd.DataFrame, shape: str, date_shape: str
) -> Place:
    sheet.write_string(2, column, "Date", look.heading())
    sheet.set_column(column, column, 11)
    for offset, name in enumerate(frame.columns):
        sheet.write_string(2, column + 1 + offset, f"{clean_text(name)}", look.heading())
    sheet.write_string(1, column, what, look.lead())
    for row, date in enumerate(frame.index.to_numpy().astype("datetime64[D]")):
        put(sheet, 3 + row, column, date, look(num_format=date_shape, align="left"))
        for offset in range(len(frame.columns)):
            put(sheet, 3 + row, column + 1 + offset, frame.iat[row, offset], look(num_format=shape))
    return Place(column, [str(name) for name in frame.columns], len(frame))


def _series(place: Place, position: int) -> dict[str, Any]:
    """Names, dates and numbers of one series."""
    column, last = place.first_column + 1 + position, 2 + place.rows
    return {
        "name": [CHART_SHEET, 2, column],
        "categories": [CHART_SHEET, 3, place.first_column, last, place.first_column],
        "values": [CHART_SHEET, 3, column, last, column],
    }


def _line_chart(book: Workbook, place: Place) -> Chart:
    chart = book.add_chart({"type": "line"})
    for position, name in enumerate(place.names):
        colour, dash = series_look(position, name)
        line = {"color": colour, "width": 1.75, "dash_type": dash}
        chart.add_series({**_series(place, position), "line": line})
    _dress(chart, f"Latent flux by cover, {SMOOTHED_DAYS}-day mean (W/m²)")
    font = CHART_FONT
    chart.set_x_axis(
        {"date_axis": True, "num_format": "mmm", "major_unit": 1, "major_unit_type": "months", "num_font": font,
         "line": {"color": RULE}}
    )  # fmt: skip
    return chart


def _bar_chart(book: Workbook, place: Place, degrees: str) -> Chart:
    chart = book.add_chart({"type": "column", "subtype": "stacked"})
    for position, name in enumerate(place.names):
        colour, _ = series_look(position, name)
        fill = {"color": colour}
        chart.add_series({**_series(place, position), "fill": fill, "border": {"color": "#FFFFFF"}, "gap": 60})
    _dress(chart, f"Crops added to the dew point, by cover ({degrees})", "0.0")
    chart.set_x_axis({"num_format": "d mmm", "num_font": CHART_FONT, "text_axis": True, "line": {"color": RULE}})
    return chart


def _dress(chart: Chart, title: str, shape: str = "0") -> None:
    chart.set_title({"name": title, "name_font": {**CHART_FONT, "size": 10, "bold": True}, "overlay": False})
    grid = {"visible": True, "line": {"color": "#DDE2E5", "width": 0.5}}
    font = CHART_FONT
    chart.set_y_axis({"num_format": shape, "num_font": font, "major_gridlines": grid, "line": {"none": True}, "min": 0})
    chart.set_legend({"position": "right", "font": CHART_FONT})
    chart.set_chartarea({"border": {"none": True}})
    chart.show_blanks_as("gap")
