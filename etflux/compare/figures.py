"""Figures of a comparison: modelled against measured, and both by day."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.compare.metrics import scores
from etflux.variables import quantity

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.figure import Figure

    from etflux.compare.pairing import Comparison
    from etflux.results import Results

GAP_DAYS = 3  # a line is not drawn across longer gaps of the measurements


def scatter(results: Results, comparison: Comparison, place: str, name: str) -> Figure:
    """Modelled against measured, one panel per series, with the 1:1 line and the measures of agreement."""
    from etflux.brief import style

    pairs = _of(comparison.pairs, place, name)
    series = list(dict.fromkeys(pairs["series"]))
    row, size = quantity(name), style.SIZES["slide"]
    figure = style.new_figure(size)
    title = f"{row.label}: run against measurement, {style.plain(results.name_of('station', place))}"
    box = style.frame(figure, size, results, title, _span(pairs, comparison), ())
    top = float(np.nanmax(pairs[["measured", "modelled"]].to_numpy())) * 1.04
    low = min(0.0, float(np.nanmin(pairs[["measured", "modelled"]].to_numpy())) * 1.04)
    wide = min(1.0 / len(series), 0.5)
    for number, label in enumerate(series):
        part = pairs[pairs["series"] == label]
        axes = box.part(number * wide + 0.05, 0.1, wide - 0.07, 0.86).axes(figure)
        axes.plot([low, top], [low, top], color=style.RULE, linewidth=size.line_pt / 2.0, dashes=(4, 3))
        axes.plot(part["measured"], part["modelled"], "o", color=style.SERIES[number % len(style.SERIES)], alpha=0.6,
                  markersize=size.text_pt / 3.0, markeredgewidth=0.0)  # fmt: skip
        axes.set_xlim(low, top)
        axes.set_ylim(low, top)
        axes.set_aspect("equal", adjustable="box")
        style.dress(axes, size, f"{style.plain(label)} ({row.unit})" if row.unit else style.plain(label),
                    f"Run ({row.unit})" if number == 0 and row.unit else "", grid="both")  # fmt: skip
        axes.text(0.03, 0.97, _words(part), transform=axes.transAxes, va="top", fontsize=size.small_pt,
                  family=style.FAMILY, color=style.INK)  # fmt: skip
    return figure


def time_series(results: Results, comparison: Comparison, place: str, name: str) -> Figure:
    """Modelled and measured by day; the band where several series measured the same."""
    from matplotlib.dates import date2num

    from etflux.brief import style

    pairs, band = _of(comparison.pairs, place, name), _of(comparison.band, place, name)
    row, size = quantity(name), style.SIZES["slide"]
    figure = style.new_figure(size)
    title = f"{row.label} by day, {style.plain(results.name_of('station', place))}"
    box = style.frame(figure, size, results, title, _span(pairs, comparison), ())
    axes = box.part(0.05, 0.08, 0.93, 0.8).axes(figure)
    handles: list[Any] = []
    if len(band):
        days, (low, high) = _spread(band, "low", "high")
        handles.append(axes.fill_between(date2num(days), low, high, color=style.PALETTES["flow"][1], linewidth=0.0,
                                         label="between the series"))  # fmt: skip
    for number, (label, part) in enumerate(pairs.groupby("series", sort=False)):
        days, (values,) = _spread(part, "measured")
        look: dict[str, Any] = {
            "color": style.SERIES[(number + 1) % len(style.SERIES)],
            "linewidth": size.line_pt / 2.0,
        }
        handles += axes.plot(date2num(days), values, marker=".", markersize=size.text_pt / 4.0,
                             label=style.plain(label), **look)  # fmt: skip
    days, (values,) = _spread(pairs.drop_duplicates("date").sort_values("date"), "modelled")
    handles += axes.plot(date2num(days), values, color=style.SERIES[0], linewidth=size.line_pt, label="run")
    style.dress(axes, size, "", f"{row.label} ({row.unit})" if row.unit else row.label)
    style.day_ticks(axes, days.astype("datetime64[D]"))
    style.legend(axes, size, handles, loc="lower left", bbox_to_anchor=(0.0, 1.01), ncols=len(handles))
    return figure


def _of(frame: pd.DataFrame, place: str, name: str) -> pd.DataFrame:
    return frame[(frame["place"] == place) & (frame["quantity"] == name)]


def _span(pairs: pd.DataFrame, comparison: Comparison) -> str:
    first, last = (str(day)[:10] for day in (pairs["date"].min(), pairs["date"].max()))
    source = f", measurements of {comparison.file}" if comparison.file else ""
    return f"{pairs['date'].nunique()} days from {first} to {last}{source}"


def _words(part: pd.DataFrame) -> str:
    found = scores(part["modelled"], part["measured"])
    return (
        f"n {found['n']:.0f}\nbias {found['bias']:+.2f}\nRMSE {found['rmse']:.2f}\nr² {found['r_squared']:.2f}\n"
        f"slope {found['slope_through_origin']:.2f}\nd {found['index_of_agreement']:.2f}"
    )


def _spread(rows: pd.DataFrame, *names: str) -> tuple[np.ndarray, list[np.ndarray]]:
    """Columns on every day from the first to the last, NaN where a longer gap is."""
    days = rows["date"].to_numpy().astype("datetime64[D]")
    order = np.argsort(days)
    days = days[order]
    cut = np.flatnonzero(np.diff(days).astype(int) > GAP_DAYS) + 1
    spread = [np.insert(rows[name].to_numpy(float)[order], cut, np.nan) for name in names]
    return np.insert(days, cut, days[cut - 1] + 1) if len(cut) else days, spread
