"""What the crops added to the dew point through an episode, by cover and by age of the water."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from etflux.brief import style
from etflux.brief.quantities import county_position, provisional_note, represented_least_pct, sources_of
from etflux.brief.style import INK, PAPER, SOFT, Box, Size
from etflux.results.summary import area_mean, contribution_on, crop_sources, region_contribution, values
from etflux.variables import System, from_si, quantity

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from etflux.results import Results

EPISODE_DAYS = 7
OLDEST = 4  # days; older water is shown with it
# Dark for today's water, lighter the older it is.
AGE_COLOURS = ("#522A36", "#9A5A3E", "#CE8F4C", "#EBC583", "#F6E6C6")


def episode_days(results: Results, last: np.datetime64) -> np.ndarray:
    """Days up to one that have a contribution without a break, at most a week."""
    days = results.dates
    end = int(np.searchsorted(days, last))
    has = np.isfinite(values(results.county, "contribution_c")).any(axis=1)
    first = end
    while first > 0 and has[first - 1] and end - first < EPISODE_DAYS - 1:
        first -= 1
    return days[first : end + 1]


def contribution_by(results: Results, days: np.ndarray, by: str, county: str | None = None) -> pd.DataFrame:
    """Contribution of the crops' water by day and "cover" or "age_d"; of a county, or the area mean. [degC]

    Days without a value are NaN. The area mean is over the counties that have one.
    """
    if county is None:
        found = region_contribution(results, days, by)
    else:
        rows = contribution_on(results, days)
        rows = rows[(rows["county_id"].astype(str) == county) & rows["cover"].isin(crop_sources(results))]
        rows = rows.assign(date=pd.to_datetime(rows["date"]))
        found = rows.pivot_table(index="date", columns=by, values="contribution_c", aggfunc="sum", observed=True)
        found = found.reindex(pd.to_datetime(days))
    total = results.county.sel(date=days)["contribution_c"].to_numpy()
    here = np.isfinite(total) if county is None else np.isfinite(total[:, [county_position(results, county)]])
    return found.fillna(0.0).where(np.broadcast_to(here.any(axis=1)[:, None], found.shape))


def by_age(found: pd.DataFrame) -> pd.DataFrame:
    """The columns of ages with the oldest ones in one."""
    ages = found.columns.to_numpy().astype(int)
    return pd.DataFrame({
        age: found.loc[:, ages == age if age < OLDEST else ages >= OLDEST].sum(axis=1, min_count=1)
        for age in range(OLDEST + 1)
    })  # fmt: skip


def ends_of_range(results: Results, days: np.ndarray, county: str | None) -> tuple[np.ndarray, np.ndarray]:
    """Lower and upper end of the contribution by day; the area mean of the counties' ends for the region. [degC]"""
    rows = results.county.sel(date=days)
    area = rows["area_km2"].to_numpy()
    ends = [values(rows, name) for name in ("contribution_low_c", "contribution_high_c")]
    if county is not None:
        position = county_position(results, county)
        return ends[0][:, position], ends[1][:, position]
    low, high = (np.array([area_mean(day, area) for day in end]) for end in ends)
    return low, high


def episode(results: Results, days: np.ndarray, *, county: str | None = None, system: System, size: Size) -> Figure:
    """Contribution on some days, stacked by cover and by age of the water.

    Parameters
    ----------
    results : Results
    days : array of datetime64[D]
        Days of the run.
    county : str, optional
        A county; the area mean of all that have a value where not given.
    system : "si" or "us"
    size : Size
    """
    if county is not None:
        county_position(results, county)
    order = sources_of(results)
    covers = contribution_by(results, days, "cover", county)
    covers = covers[[name for name in order if name in covers]]
    ages = by_age(contribution_by(results, days, "age_d", county))
    low, high = ends_of_range(results, days, county)
    figure = style.new_figure(size, 7.6)
    where = "area mean of the counties that have a value"
    if county is not None:
        where = style.plain(results.name_of("county", county))
    hour = float(results.settings.get("contribution_hour", 15.0))
    subtitle = f"{style.sentence(where)}; at {hour:.0f}:00 local solar time; thin bars: from end to end of the range"
    title = f"What the crops added to the dew point, {style.days_words(days)}"
    box = style.frame(figure, size, results, title, subtitle, _notes(results, days, county))
    top = 1.12 * style.greatest([high, low, ages.sum(axis=1).to_numpy()], 0.1)
    top = from_si(top, "contribution_c", system).item()
    for place, name, frame, colours, labels in (
        (0, "By cover", covers, [style.source_colour(str(name), order) for name in covers], list(covers)),
        (1, "By age of the water", ages, list(AGE_COLOURS), [_age_words(age) for age in ages]),
    ):
        part = _place(box, size, place)
        axes = part.axes(figure)
        numbers = from_si(frame.to_numpy(), "contribution_c", system).reshape(frame.shape)
        _stack(axes, days, numbers, colours, [style.plain(word) for word in labels], size)
        ends = from_si(np.array([low, high]), "contribution_c", system)
        _draw_range(axes, ends, size)
        axes.set_ylim(0.0, top)
        axes.set_title(name, loc="left", fontsize=size.text_pt, color=INK, family=style.FAMILY, weight="bold")
        unit = quantity("contribution_c").unit_in(system)
        style.dress(axes, size, y_label=f"Added to the dew point ({unit})" if place == 0 or not size.is_slide else "")
        seen = np.nan_to_num(numbers).max(axis=0, initial=0.0) > 0.004 * top
        handles = [bar for bar, there in zip(axes.containers, seen, strict=True) if there][::-1]  # as they are stacked
        style.legend(axes, size, handles, loc="upper left", bbox_to_anchor=(1.01, 1.0), handlelength=1.0)
        step = 1 if len(days) <= 9 else -(-len(days) // 8)
        axes.set_xticks(range(0, len(days), step), _tick_words(days[::step]))
    return figure


def _place(box: Box, size: Size, number: int) -> Box:
    """Where a panel goes: side by side on a slide, one over the other on a page."""
    if size.is_slide:
        return Box(box.left + 0.06 * box.width + number * 0.5 * box.width, box.bottom + 0.08 * box.height,
                   0.29 * box.width, 0.84 * box.height)  # fmt: skip
    return Box(box.left + 0.09 * box.width, box.bottom + (0.55 - 0.51 * number) * box.height, 0.68 * box.width,
               0.39 * box.height)  # fmt: skip


def _tick_words(days: np.ndarray) -> list[str]:
    """Days of the month, with the month below where it begins."""
    words = [style.short_day(day).split(" ") for day in days]
    return [
        day if number and month == words[number - 1][1] else f"{day}\n{month}"
        for number, (day, month) in enumerate(words)
    ]


def _age_words(age: int) -> str:
    if age == 0:
        return "same day"
    if age < OLDEST:
        return f"carried {age} day" + ("" if age == 1 else "s")
    return f"{OLDEST} days or more"


def _stack(
    axes: Axes, days: np.ndarray, numbers: np.ndarray, colours: list[str], labels: list[str], size: Size
) -> None:
    """Stacked bars; days without a value are hatched and say so."""
    x = np.arange(len(days))
    start = np.zeros(len(days))
    for position, (colour, label) in enumerate(zip(colours, labels, strict=True)):
        part = numbers[:, position]
        axes.bar(
            x, np.nan_to_num(part), 0.72, bottom=start, color=colour, edgecolor=PAPER, linewidth=0.8, label=label,
            gid=f"part {position}",
        )  # fmt: skip
        start = start + np.nan_to_num(part)
    empty = ~np.isfinite(numbers).any(axis=1) if numbers.shape[1] else np.ones(len(days), bool)
    for day in np.flatnonzero(empty):
        axes.axvspan(day - 0.36, day + 0.36, facecolor=PAPER, edgecolor=SOFT, hatch="xxx", linewidth=0.0, gid="missing")
        axes.text(float(day), 0.5, "no value", rotation=90, ha="center", va="center", fontsize=size.small_pt, color=INK,
                  family=style.FAMILY, transform=axes.get_xaxis_transform(),
                  bbox={"facecolor": PAPER, "edgecolor": "none", "pad": 2.0})  # fmt: skip
    axes.set_xlim(-0.6, len(days) - 0.4)


def _draw_range(axes: Axes, ends: np.ndarray, size: Size) -> None:
    """A thin bar from the lower to the upper end of each day."""
    good = np.flatnonzero(np.isfinite(ends).all(axis=0) & (ends[1] - ends[0] > 0.0))
    lines = axes.vlines(good, ends[0, good], ends[1, good], color=INK, linewidth=0.6 * size.line_pt, gid="range")
    lines.set_zorder(4)
    for end in ends:
        axes.plot(good, end[good], "_", color=INK, markersize=0.7 * size.text_pt, markeredgewidth=0.6 * size.line_pt,
                  zorder=4)  # fmt: skip


def _notes(results: Results, days: np.ndarray, county: str | None) -> list[str]:
    """How much of what is shown rests on little, or may still move."""
    shares = values(results.county.sel(date=days), "represented_pct")
    here = slice(None) if county is None else [county_position(results, county)]
    low = np.asarray((shares[:, here] < represented_least_pct(results)).any(axis=0))
    notes = []
    if low.any():
        who = "The county is" if county is not None else f"{int(low.sum())} of {len(low)} counties are"
        notes.append(f"{who} represented to under {represented_least_pct(results):.0f} %: a range, not ranked.")
    return notes + provisional_note(results, days, county)
