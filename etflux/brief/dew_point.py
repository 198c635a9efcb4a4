"""The afternoon dew point, estimated against observed."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from etflux.brief import style
from etflux.brief.quantities import county_position
from etflux.brief.style import INK, SOFT, Box, Size
from etflux.results.summary import values
from etflux.variables import System, from_si, quantity

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from etflux.results import Results

POINT = "#4F8AA6"


def estimated_and_observed(results: Results, days: np.ndarray) -> pd.DataFrame:
    """Afternoon dew point at 2 m of every county and day that has an observation.

    The estimate is the mixed layer's dew point with the excess near the ground.

    Returns
    -------
    DataFrame
        Columns date, county_id, estimated_c, observed_c. [degC]
    """
    rows = results.county.sel(date=days)
    estimated = values(rows, "dew_point_mixed_c") + values(rows, "rise_near_ground_c")
    observed = estimated - values(rows, "estimate_error_c")
    there = np.isfinite(observed)
    day, county = np.nonzero(there)
    return pd.DataFrame({
        "date": rows["date"].to_numpy()[day], "county_id": rows["county_id"].to_numpy().astype(str)[county],
        "estimated_c": estimated[there], "observed_c": observed[there],
    })  # fmt: skip


def dew_point_check(
    results: Results,
    days: np.ndarray,
    *,
    county: str | None = None,
    system: System,
    size: Size,
    day: np.datetime64 | None = None,
) -> Figure:
    """Estimated against observed afternoon dew point, and the difference by day.

    Parameters
    ----------
    results : Results
    days : array of datetime64[D]
        Days of the run.
    county : str, optional
        One county; all that have an observation where not given.
    system : "si" or "us"
    size : Size
    day : datetime64, optional
        Day to point out.
    """
    found = estimated_and_observed(results, days)
    where = "afternoons of all counties with an observation"
    if county is not None:
        county_position(results, county)
        found = found[found["county_id"] == county]
        where = style.plain(results.name_of("county", county))
    figure = style.new_figure(size, 8.6)
    notes = ["Counties that share a station share its observation. The estimate is at 2 m: the mixed layer with the "
             "excess near the ground."]  # fmt: skip
    box = style.frame(
        figure, size, results, f"Dew point, estimated and observed, {style.days_words(days)}",
        style.sentence(f"{where}{_error_words(found, system)}"), notes,
    )  # fmt: skip
    if not len(found):
        style.say_nothing_there(figure, box, size, "No afternoon dew point was observed on these days.")
        return figure
    under, left = 3.3 * size.text_pt / 72.0, 0.075 * box.width if size.is_slide else 0.1 * box.width
    if size.is_slide:
        side = min(box.height - under, 0.44 * box.width)
        square = Box(box.left + left, box.bottom + under, side, side)
        rest = square.left + side + 1.35
        beside = Box(rest, square.bottom, box.left + box.width - rest - 0.2, side)
    else:
        side = min(0.6 * box.height, 0.88 * box.width)
        square = Box(box.left + left, box.bottom + box.height - side, side, side)
        beside = Box(box.left + left, box.bottom + under, 0.88 * box.width, box.height - side - 2.3 * under)
    today = pd.to_datetime(found["date"]).to_numpy().astype("datetime64[D]") == day
    _draw_square(square.axes(figure), found, today, day, system, size)
    _draw_difference(beside.axes(figure), found, today, days, system, size)
    return figure


def _draw_square(
    axes: Axes, found: pd.DataFrame, today: np.ndarray, day: np.datetime64 | None, system: System, size: Size
) -> None:
    """Estimate over observation, on equal axes, with the line on which they agree."""
    unit = quantity("dew_point_c").unit_in(system)
    style.dress(axes, size, f"Observed ({unit})", f"Estimated ({unit})", grid="both")
    x, y = (from_si(found[name], "dew_point_c", system) for name in ("observed_c", "estimated_c"))
    every = np.array([*x, *y])
    low, high = float(every.min()), float(every.max())
    room = 0.04 * max(high - low, 1.0)
    low, high = low - room, high + room
    handles = axes.plot([low, high], [low, high], color=SOFT, linewidth=0.7 * size.line_pt, gid="equal", label="equal")
    handles += _points(axes, x, y, today, day, size)
    axes.set_xlim(low, high)
    axes.set_ylim(low, high)
    axes.set_aspect("equal", adjustable="box")
    style.legend(axes, size, handles, loc="lower right", borderaxespad=0.6)


def _draw_difference(
    axes: Axes, found: pd.DataFrame, today: np.ndarray, days: np.ndarray, system: System, size: Size
) -> None:
    """Estimate less observation by day."""
    from matplotlib.dates import date2num

    unit = quantity("estimate_error_c").unit_in(system)
    style.dress(axes, size, y_label=f"Estimated less observed ({unit})")
    x = np.asarray(date2num(found["date"].to_numpy()), float)
    error = from_si(found["estimated_c"] - found["observed_c"], "estimate_error_c", system)
    axes.axhline(0.0, color=SOFT, linewidth=0.7 * size.line_pt)
    _points(axes, x, error, today, None, size)
    first, last = (float(date2num(day)) for day in (days[0], days[-1]))
    axes.set_xlim(first - 0.6, last + 0.6)
    style.day_ticks(axes, days)


def _points(
    axes: Axes, x: np.ndarray, y: np.ndarray, today: np.ndarray, day: np.datetime64 | None, size: Size
) -> list[Any]:
    """One point for each county and day, those of one day in black on top."""
    look: dict[str, Any] = {"linestyle": "none", "marker": "o", "markeredgecolor": "#FFFFFF", "markeredgewidth": 0.3}
    small = (0.45 if len(x) < 300 else 0.34) * size.text_pt
    handles = axes.plot(x, y, color=POINT, markersize=small, gid="all", label="a county's day", **look)
    if today.any():
        label = "" if day is None else style.short_day(day)
        handles += axes.plot(
            x[today], y[today], color=INK, markersize=0.5 * size.text_pt, gid="day", label=label, **look
        )
    return handles


def _error_words(found: pd.DataFrame, system: System) -> str:
    """How many, mean error, and how far half of them are off."""
    if not len(found):
        return ""
    error = from_si(found["estimated_c"] - found["observed_c"], "estimate_error_c", system)
    unit = quantity("estimate_error_c").unit_in(system)
    half = float(np.median(np.abs(error)))
    space = "\N{NO-BREAK SPACE}"
    return (
        f"; {len(found)} county-days, mean error {error.mean():+.1f}{space}{unit}, half within {half:.1f}{space}{unit}"
    )
