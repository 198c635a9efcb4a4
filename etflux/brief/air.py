"""The air by height: the morning and the mixed layer, with and without the crops' water."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from etflux.brief import style
from etflux.brief.quantities import county_position, represented_least_pct
from etflux.brief.style import INK, SOFT, Box, Size
from etflux.results.summary import values
from etflux.variables import System, from_si, quantity, words_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from etflux.results import Results

HOURS = (12.0, 15.0, 18.0)
HOUR_COLOURS = ("#E0A458", "#B0603A", "#522A36")  # light to dark as the day goes on
MORNING = "#33617F"
SHOWN_ABOVE = 1.6  # times the greatest mixing depth


def air_by_height(
    results: Results, day: np.datetime64, county: str | None = None, *, system: System, size: Size
) -> Figure:
    """Potential temperature and humidity against height: the morning, and the mixed layer at 12, 15 and 18 h.

    Parameters
    ----------
    results : Results
    day : datetime64[D]
        A day of the run.
    county : str, optional
        The ranked county with the largest contribution where not given.
    system : "si" or "us"
    size : Size
    """
    county = chosen_county(results, day) if county is None else county
    here = results.county.isel(county_id=county_position(results, county)).sel(date=day)
    morning = morning_of(results, day, county)
    hours = mixed_hours(results, day, county)
    figure = style.new_figure(size, 6.4)
    name = style.plain(results.name_of("county", county))
    subtitle = "Upright lines: the mixed layer at 12, 15 and 18 h local solar time, up to its depth; "
    subtitle += "dashed: without the crops' water" + _world_words(here)
    title = f"The air over {name}, {style.days_words(np.array([day]))}"
    box = style.frame(figure, size, results, title, subtitle, _notes(here, morning, hours))
    if not len(morning) and not len(hours):
        style.say_nothing_there(figure, box, size, "The run keeps no air by height of this day.")
        return figure
    axes = _two_axes(figure, box, size)
    top = _top(morning, hours, here)
    _draw_theta(axes[0], morning, hours, here, size, system)
    _draw_humidity(axes[1], morning, hours, size, system)
    heights = quantity("height_m")
    for panel, label in zip(axes, (f"Height above the ground ({heights.unit_in(system)})", ""), strict=True):
        panel.set_ylim(0.0, from_si(top, "height_m", system).item())
        panel.set_ylabel(label, family=style.FAMILY, fontsize=size.text_pt, color=INK)
    _fit(axes[0], morning["height_m"], [morning["theta_c"]], hours["theta_mixed_c"], top, "theta_mixed_c", system)
    drawn = [morning["humidity_g_kg"], morning["humidity_without_g_kg"]]
    mixed = pd.concat([hours["humidity_mixed_g_kg"], hours["humidity_without_g_kg"]])
    _fit(axes[1], morning["height_m"], drawn, mixed, top, "humidity_mixed_g_kg", system)
    axes[1].tick_params(labelleft=False)
    handles = [*axes[0].get_legend_handles_labels()[0], *axes[1].get_legend_handles_labels()[0]]
    unique = {handle.get_label(): handle for handle in handles}
    width, height = figure.get_size_inches()
    at = ((box.left + 0.80 * box.width) / width, (box.bottom + 0.95 * box.height) / height)
    style.legend(figure, size, list(unique.values()), loc="upper left", bbox_to_anchor=at)
    return figure


def chosen_county(results: Results, day: np.datetime64) -> str:
    """The ranked county with the largest contribution; the first one where none is ranked."""
    today = results.county.sel(date=day)
    found = values(today, "contribution_c").astype(float)
    ranked = np.where(values(today, "represented_pct") >= represented_least_pct(results), found, np.nan)
    position = int(np.nanargmax(ranked)) if np.isfinite(ranked).any() else 0
    return str(results.county["county_id"].to_numpy()[position])


def morning_of(results: Results, day: np.datetime64, county: str) -> pd.DataFrame:
    """The morning's layers of one county from the ground up; empty where the run keeps none."""
    rows = getattr(results, "air_profiles", None)
    columns = ["height_m", "theta_c", "humidity_g_kg", "humidity_without_g_kg"]
    if rows is None or not len(rows):
        return pd.DataFrame(columns=columns, dtype=float)
    days = pd.to_datetime(rows["date"]).to_numpy().astype("datetime64[D]")
    rows = rows[(days == day) & (rows["county_id"].astype(str) == county).to_numpy()]
    return rows.sort_values("height_m")[columns].astype(float).reset_index(drop=True)


def mixed_hours(results: Results, day: np.datetime64, county: str) -> pd.DataFrame:
    """The mixed layer at 12, 15 and 18 h, a row for each hour that has one."""
    names = ("mixing_depth_m", "theta_mixed_c", "humidity_mixed_g_kg", "contribution_g_kg")
    data = results.county
    if "hour" not in data.dims or any(f"hourly_{name}" not in data for name in names):
        return pd.DataFrame(columns=["hour", *names, "humidity_without_g_kg"], dtype=float)
    here = data.isel(county_id=county_position(results, county)).sel(date=day)
    hour = here["hour"].to_numpy().astype(float)
    found = pd.DataFrame({"hour": hour, **{name: here[f"hourly_{name}"].to_numpy() for name in names}})
    found = found[np.isin(hour, HOURS) & np.isfinite(found["theta_mixed_c"])]
    return found.assign(humidity_without_g_kg=found["humidity_mixed_g_kg"] - found["contribution_g_kg"])


def _world(here: Any) -> tuple[float, float]:
    """Potential temperature and depth of the mixed layer if the rest's cover grew on every stand."""
    return (
        float(here["theta_without_crops_c"]) if "theta_without_crops_c" in here else float("nan"),
        float(here["depth_without_crops_m"]) if "depth_without_crops_m" in here else float("nan"),
    )


def _world_words(here: Any) -> str:
    return "; dotted: 15 h, had the rest's cover grown on every stand" if np.isfinite(_world(here)).all() else ""


def _notes(here: Any, morning: pd.DataFrame, hours: pd.DataFrame) -> list[str]:
    notes = []
    if not len(morning):
        notes.append("The run keeps no morning air of this day.")
    if not len(hours):
        notes.append("The air of this day was not computed.")
    bits = int(here["flags"]) if "flags" in here else 0
    if bits:
        notes.append("Remarks: " + "; ".join(words_of(bits, "air")) + ".")
    return notes


def _two_axes(figure: Figure, box: Box, size: Size) -> list[Axes]:
    left = 0.075 if size.is_slide else 0.1
    low, tall, wide = 0.14 if not size.is_slide else 0.12, 0.83, 0.32
    first = box.part(left, low, wide, tall).axes(figure)
    return [first, box.part(left + wide + 0.03, low, wide, tall).axes(figure)]


def _top(morning: pd.DataFrame, hours: pd.DataFrame, here: Any) -> float:
    """Height that the figure reaches. [m]"""
    depths = [*hours["mixing_depth_m"], _world(here)[1]]
    greatest = style.greatest(depths)
    if greatest > 0.0:
        return max(SHOWN_ABOVE * greatest, 800.0)
    return min(float(morning["height_m"].max()), 3000.0) if len(morning) else 1000.0


def _draw_theta(axes: Axes, morning: pd.DataFrame, hours: pd.DataFrame, here: Any, size: Size, system: System) -> None:
    unit = quantity("theta_mixed_c").unit_in(system)
    style.dress(axes, size, x_label=f"Potential temperature ({unit})", grid="both")
    _curve(axes, morning["theta_c"], morning["height_m"], "theta_mixed_c", system, size, "morning", "solid", "morning")
    for hour, colour in zip(HOURS, HOUR_COLOURS, strict=True):
        for row in hours[hours["hour"] == hour].itertuples():
            _column(axes, row.theta_mixed_c, row.mixing_depth_m, "theta_mixed_c", system, size, colour, "solid",
                    f"{hour:.0f} h", f"mixed {hour:.0f}")  # fmt: skip
            _lid(axes, morning["theta_c"], morning["height_m"], row.theta_mixed_c, row.mixing_depth_m, "theta_mixed_c",
                 system, size, colour)  # fmt: skip
    theta, depth = _world(here)
    if np.isfinite([theta, depth]).all():
        _column(axes, theta, depth, "theta_mixed_c", system, size, SOFT, (0, (1, 1.2)),
                "15 h, rest's cover\neverywhere", "world 15")  # fmt: skip


def _draw_humidity(axes: Axes, morning: pd.DataFrame, hours: pd.DataFrame, size: Size, system: System) -> None:
    unit = quantity("humidity_mixed_g_kg").unit_in(system)
    style.dress(axes, size, x_label=f"Specific humidity ({unit})", grid="both")
    name = "humidity_mixed_g_kg"
    dashed = (0, (3, 1.6))
    _curve(axes, morning["humidity_g_kg"], morning["height_m"], name, system, size, "morning", "solid", "morning")
    _curve(axes, morning["humidity_without_g_kg"], morning["height_m"], name, system, size, "without the\ncrops' water",
           dashed, "morning without")  # fmt: skip
    for hour, colour in zip(HOURS, HOUR_COLOURS, strict=True):
        for row in hours[hours["hour"] == hour].itertuples():
            _column(axes, row.humidity_mixed_g_kg, row.mixing_depth_m, name, system, size, colour, "solid",
                    f"{hour:.0f} h", f"mixed {hour:.0f}")  # fmt: skip
            _column(axes, row.humidity_without_g_kg, row.mixing_depth_m, name, system, size, colour, dashed, None,
                    f"without {hour:.0f}")  # fmt: skip
            _lid(axes, morning["humidity_g_kg"], morning["height_m"], row.humidity_mixed_g_kg, row.mixing_depth_m, name,
                 system, size, colour)  # fmt: skip


def _curve(
    axes: Axes, x: Any, height: Any, name: str, system: System, size: Size, label: str, dashes: Any, gid: str
) -> None:
    if len(x):
        axes.plot(
            from_si(x, name, system), from_si(height, "height_m", system), color=MORNING, linestyle=dashes,
            linewidth=size.line_pt * (1.0 if dashes == "solid" else 0.8), label=label, gid=gid,
        )  # fmt: skip


def _column(
    axes: Axes, value: float, depth_m: float, name: str, system: System, size: Size, colour: str, dashes: Any,
    label: str | None, gid: str,
) -> None:  # fmt: skip
    """A mixed layer: one value from the ground to its depth."""
    x = from_si([value, value], name, system)
    axes.plot(x, from_si([0.0, depth_m], "height_m", system), color=colour, linestyle=dashes,
              linewidth=1.3 * size.line_pt, solid_capstyle="butt", label=label, gid=gid)  # fmt: skip


def _lid(
    axes: Axes, x: Any, height: Any, value: float, depth_m: float, name: str, system: System, size: Size, colour: str
) -> None:
    """A thin line from the top of a mixed layer to the morning's air at that height."""
    if len(x):
        above = float(np.interp(depth_m, height, x))
        h = from_si(depth_m, "height_m", system).item()
        axes.plot(from_si([value, above], name, system), [h, h], color=colour, linewidth=0.5 * size.line_pt)


def _fit(axes: Axes, height: Any, curves: list[Any], mixed: Any, top_m: float, name: str, system: System) -> None:
    """Limits of the axis across: what is drawn below the top, with some room."""
    below = np.asarray(height, float) <= top_m
    parts = [np.asarray(curve, float)[below] for curve in curves] + [np.asarray(mixed, float)]
    every = np.concatenate(parts)
    every = every[np.isfinite(every)]
    if len(every):
        low, high = from_si([every.min(), every.max()], name, system)
        room = 0.06 * max(high - low, 1.0)
        axes.set_xlim(low - room, high + room)
