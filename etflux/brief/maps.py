"""County maps of any daily quantity."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any, Literal, NamedTuple

import numpy as np

from etflux.brief import style
from etflux.brief.land import KM_PER_DEGREE, Land, draw_distance, draw_shapes, land_of, set_extent
from etflux.brief.map_key import Scale, draw_key, draw_scale, missing_words, scale_of, unranked_words
from etflux.brief.quantities import (
    Shown,
    county_position,
    county_values,
    provisional_note,
    represented_least_pct,
    sources_of,
)
from etflux.brief.style import GAPS_HATCH, INK, MISSING_HATCH, PAPER, SOFT, UNRANKED_HATCH, Box, Size
from etflux.variables import System, from_si, quantity

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from etflux.results import Results

ARROWS = 60  # one for each county up to this many, else one for each square of a grid
BY_SOURCE = ("et_mm", "le_by_tag_w_m2")  # a map for each source where no cover is named


class Panel(NamedTuple):
    """One map of a figure: its heading, values in people's unit and where a mean leaves days out, (county,)."""

    name: str
    values: np.ndarray
    gaps: np.ndarray


def county_map(
    results: Results,
    shown: Shown,
    days: np.ndarray,
    *,
    system: System,
    size: Size,
    cover: str | None = None,
    county: str | None = None,
    scale: tuple[float, float] | None = None,
) -> Figure:
    """Map of a quantity by county.

    Parameters
    ----------
    results : Results
    shown : Shown
        A map's.
    days : array of datetime64[D]
        Days of the run; their sum or mean is shown.
    system : "si" or "us"
    size : Size
    cover : str, optional
        One source of the water or one cover; without it a quantity by source gets a map for each.
    county : str, optional
        A county to point out.
    scale : (float, float), optional
        Ends of the colour scale in the unit shown, so that maps can be compared; else from the values.

    Returns
    -------
    Figure
        Counties without a value and those that are not ranked are hatched.
    """
    land = land_of(results)
    panels, ends = _panels(results, shown, days, cover, system), _ends_of_range(results, shown, days, system)
    figure = style.new_figure(size, _page_height(land, len(panels), bool(ends)))
    title = shown.label if cover is None else f"{shown.label}: {_cover_words(results, cover)}"
    box = style.frame(
        figure, size, results, f"{title}, {style.days_words(days)}", _subtitle(results, shown, days, cover),
        [*_unplaced_note(land), *provisional_note(results, days)],
    )  # fmt: skip
    main, side, small = _places(box, size, len(panels), bool(ends))
    unranked = unranked_counties(results, shown, days)
    colours = scale_of([panel.values for panel in panels], shown, system, scale)
    marks: set[str] = set()
    for place, panel in zip(main, panels, strict=True):
        axes = place.axes(figure)
        marks |= _draw_panel(axes, place, land, panel, colours, unranked, size, "W" if len(panels) == 1 else "NW")
        if len(panels) == 1:
            marks |= _draw_weather(axes, results, land, days, size)
            _write_values(axes, results, land, panel.values, place, size, colours, shown.decimals(system))
            draw_distance(axes, land, system, size)
        if county is not None:
            one = np.arange(len(unranked)) == county_position(results, county)
            draw_shapes(axes, land, one, "pointed out", facecolor="none", edgecolor=INK, linewidth=1.4 * size.line_pt)
    under = draw_scale(figure, side, size, shown.heading(system), colours)
    words = _key_words(results, shown, days, system)
    draw_key(figure, side, under, size, {name: text for name, text in words.items() if name in marks})
    if ends:
        _draw_ends(figure, small, land, ends, shown, unranked, size, system, scale)
    return figure


def map_inset(results: Results, shown: Shown, days: np.ndarray, *, system: System, width_in: float = 4.6) -> Figure:
    """A small map with its scale alone, to stand on a sheet that has title, key and cautions.

    Counties that are not ranked or have no value are hatched as on the large map.
    """
    size = replace(style.INSET, width_in=width_in)
    land = land_of(results)
    (panel,) = _panels(results, shown, days, None, system)
    scale_height, margin = 0.36, 0.03
    height = min(width_in * land.shape, 0.95 * width_in) + scale_height + 0.08
    figure = style.new_figure(size, height)
    figure.set_size_inches(width_in, height)
    colours = scale_of([panel.values], shown, system)
    wide = width_in - 2.0 * margin
    place = Box(margin, scale_height, wide, height - scale_height - margin)
    axes = place.axes(figure)
    _draw_panel(axes, place, land, panel, colours, unranked_counties(results, shown, days), size, "W")
    _draw_weather(axes, results, land, days, size)
    _write_values(axes, results, land, panel.values, place, size, colours, shown.decimals(system))
    draw_scale(figure, Box(margin, 0.0, wide, scale_height - 0.04), size, "", colours)
    return figure


def _unplaced_note(land: Land) -> list[str]:
    number = int((~land.drawn & ~land.dots).sum())
    return [f"Not drawn, having neither outline nor place: {number} of {len(land.paths)} counties."] if number else []


def _key_words(results: Results, shown: Shown, days: np.ndarray, system: System) -> dict[str, str]:
    """What each kind of hatching and mark means."""
    return {
        "unranked": unranked_words(results),
        "gaps": "some days have no value: mean of the others",
        "missing": missing_words(results, shown, days),
        "stations": "weather station",
        "wind": _wind_words(results, days, system),
    }


def _page_height(land: Land, panels: int, ends: bool) -> float:
    """Height of a page's figure that leaves no hole around the maps. [in]"""
    wide = style.SIZES["page"].width_in
    one = min(wide * land.shape, 6.5) + 0.3
    several = -(-panels // 2) * (min(0.5 * wide * land.shape, 4.0) + 0.3)
    return 1.45 + (one if panels == 1 else several) + _below(panels, ends)


def _below(panels: int, ends: bool) -> float:
    """Room for the scale and its key under the maps of a page. [in]"""
    return 1.9 if ends else 1.5 if panels == 1 else 1.1


def _places(box: Box, size: Size, panels: int, ends: bool) -> tuple[list[Box], Box, Box]:
    """Where the large maps, the scale with its key, and the small maps go."""
    if size.is_slide:
        maps = Box(box.left, box.bottom + 0.25, 0.68 * box.width, box.height - 0.25)
        side = box.part(0.71, 0.46 if ends else 0.0, 0.29, 0.54 if ends else 1.0)
        small = box.part(0.71, 0.0, 0.29, 0.44)
    else:
        below = _below(panels, ends)
        maps = Box(box.left, box.bottom + below + 0.25, box.width, box.height - below - 0.25)
        side = Box(box.left, box.bottom, (0.5 if ends else 1.0) * box.width, below)
        small = Box(box.left + 0.54 * box.width, box.bottom, 0.46 * box.width, below)
    if panels == 1:
        return [maps], side, small
    columns = 2 if panels <= 4 or not size.is_slide else 3
    rows = -(-panels // columns)
    head = 1.7 * size.text_pt / 72.0
    wide, tall = maps.width / columns, maps.height / rows
    large = [
        Box(maps.left + (n % columns) * wide, maps.bottom + maps.height - (n // columns + 1) * tall, 0.96 * wide,
            tall - head)
        for n in range(panels)
    ]  # fmt: skip
    return large, side, small


def _panels(results: Results, shown: Shown, days: np.ndarray, cover: str | None, system: System) -> list[Panel]:
    """Every large map."""
    if shown.name not in BY_SOURCE or cover is not None:
        values, gaps = county_values(results, shown, days, cover)
        return [Panel("", shown.people(values, system), gaps)]
    tags = set(results.stand["tag"].to_numpy().astype(str))
    found = []
    for name in sources_of(results):
        if name in tags or shown.source == "tag":
            values, gaps = county_values(results, shown, days, name)
            if np.nan_to_num(values).any():
                found.append(Panel(_cover_words(results, name), shown.people(values, system), gaps))
    if found:
        return found
    nothing = np.full(results.county.sizes["county_id"], np.nan)
    return [Panel("", nothing, np.isfinite(nothing))]


def _ends_of_range(results: Results, shown: Shown, days: np.ndarray, system: System) -> list[Panel]:
    """The two ends of the range, where there is one."""
    found = []
    if shown.name == "contribution_c":
        for name, words in (("contribution_low_c", "Lower end"), ("contribution_high_c", "Upper end")):
            row = Shown(name, words, "map", "county", "mean", shown.palette, ranked=True)
            values, gaps = county_values(results, row, days)
            if np.isfinite(values).any():
                found.append(Panel(words, row.people(values, system), gaps))
    return found


def _cover_words(results: Results, cover: str) -> str:
    """A cover's name for people; sources of the water are words already."""
    return style.plain(cover if cover in sources_of(results) else results.name_of("cover", cover))


def unranked_counties(results: Results, shown: Shown, days: np.ndarray) -> np.ndarray:
    """Counties whose contribution is a range only, because too little of them is represented, (county,)."""
    county = results.county
    if not shown.ranked or "represented_pct" not in county:
        return np.zeros(county.sizes["county_id"], bool)
    least = represented_least_pct(results)
    return np.asarray((county["represented_pct"].sel(date=days).to_numpy() < least).any(axis=0))


def _draw_panel(
    axes: Axes,
    place: Box,
    land: Land,
    panel: Panel,
    colours: Scale,
    unranked: np.ndarray,
    size: Size,
    anchor: Literal["W", "NW"],
) -> set[str]:
    """Counties in colour; hatching over what has no value, is not ranked, or leaves days out. What was hatched."""
    has = np.isfinite(panel.values)
    for shapes, here in draw_shapes(axes, land, has, "counties", **land.edge(place)):
        shapes.set_cmap(colours.palette)
        shapes.set_norm(colours.steps)
        shapes.set_array(panel.values[here])
    marks = set()
    # White stripes on dark counties, closer ones where counties are small.
    dark = np.array([style.ink_on(colours.colour(value)) == PAPER for value in np.nan_to_num(panel.values)]) & has
    dense = 1 if 72.0 * np.median(land.width_deg) * land.inch_per_degree(place) > 24.0 else 2
    for name, here, hatch in (
        ("missing", ~has, MISSING_HATCH),
        ("unranked", has & unranked, UNRANKED_HATCH),
        ("gaps", has & panel.gaps & ~unranked, GAPS_HATCH),
    ):
        marks |= {name} if here.any() else set()
        for part, stripes in ((here & dark, PAPER), (here & ~dark, SOFT)):
            look = {"facecolor": "none" if name != "missing" else PAPER, "edgecolor": stripes}
            draw_shapes(axes, land, part, name, hatch=dense * hatch, **look, linewidth=land.edge(place)["linewidth"])
    set_extent(axes, land, anchor)
    if panel.name:
        axes.set_title(panel.name, fontsize=size.text_pt, color=INK, family=style.FAMILY, loc="left", pad=2.0)
    return marks


def _draw_ends(
    figure: Figure, place: Box, land: Land, ends: Sequence[Panel], shown: Shown, unranked: np.ndarray, size: Size,
    system: System, scale: tuple[float, float] | None,
) -> None:  # fmt: skip
    """The two ends of the range as small maps over a scale of their own, which reaches further."""
    colours = scale_of([panel.values for panel in ends], shown, system, scale)
    head, bar = 1.9 * size.text_pt / 72.0, 0.55 if size.is_slide else 0.36
    wide = 0.5 * place.width
    tall = min(place.height - head - bar, 0.96 * wide * land.shape)
    for number, panel in enumerate(ends):
        part = Box(place.left + number * wide, place.bottom + bar, 0.96 * wide, tall)
        axes = part.axes(figure)
        _draw_panel(axes, part, land, panel, colours, unranked, size, "NW")
    draw_scale(figure, Box(place.left, place.bottom, place.width, bar), size, "", colours)


def _write_values(
    axes: Axes, results: Results, land: Land, values: np.ndarray, place: Box, size: Size, colours: Scale, decimals: int
) -> None:
    """A county's name and value on it, where both can be read; moved off a station."""
    from matplotlib.patheffects import withStroke

    inch_per_degree = land.inch_per_degree(place)
    room = land.width_deg * inch_per_degree
    points = min(size.text_pt, 0.27 * 72.0 * float(np.median(room)))
    if points < 0.6 * size.text_pt:
        return
    line = 1.1 * points / 72.0 / inch_per_degree / land.stretch
    x, y = land.longitude_deg, land.latitude_deg + 0.05 * line
    y = y + _off_stations(x, y, *stations_of(results, land), line, line * land.stretch)
    small = 0.68 * points
    for number in np.flatnonzero(np.isfinite(x) & np.isfinite(y)):
        has = bool(np.isfinite(values[number]))
        ground = colours.colour(values[number]) if has else PAPER
        look: dict[str, Any] = {"ha": "center", "va": "center", "color": style.ink_on(ground), "family": style.FAMILY}
        look |= {"clip_on": True, "path_effects": [withStroke(linewidth=0.22 * points, foreground=ground)], "zorder": 6}
        if has:
            word = f"{values[number]:,.{decimals}f}"
            axes.text(x[number], y[number], word, fontsize=points, weight="bold", gid="value", **look)
        name = style.shortened(land.names[number], small, 0.94 * room[number])
        axes.text(x[number], y[number] + (line if has else 0.0), name, fontsize=small, gid="name", **look)


def _off_stations(
    x: np.ndarray, y: np.ndarray, station_x: np.ndarray, station_y: np.ndarray, line: float, wide: float
) -> np.ndarray:
    """How far to move labels of two lines, the lower at (x, y), so that none covers a station, (county,)."""
    if not len(station_x):
        return np.zeros(len(x))
    above = station_y - y[:, None]
    over = (np.abs(station_x - x[:, None]) < 2.0 * wide) & (above > -0.8 * line) & (above < 1.7 * line)
    up, down = above + 0.8 * line, above - 1.6 * line
    move = np.where(up <= -down, up, down)
    first = over.argmax(axis=1)
    return np.where(over.any(axis=1), move[np.arange(len(x)), first], 0.0)


def stations_of(results: Results, land: Land) -> tuple[np.ndarray, np.ndarray]:
    """Longitude and latitude of the stations that have a place. [deg]"""
    station = results.station
    if not {"latitude_deg", "longitude_deg"} <= set(station.variables):
        return np.zeros(0), np.zeros(0)
    x, y = (station[name].to_numpy().astype(float) for name in ("longitude_deg", "latitude_deg"))
    there = np.isfinite(x) & np.isfinite(y)
    return (x[there] % 360.0 if land.over_the_date_line else x[there]), y[there]


def _draw_weather(axes: Axes, results: Results, land: Land, days: np.ndarray, size: Size) -> set[str]:
    """Stations and wind arrows; which of them there were."""
    marks = set()
    station_x, station_y = stations_of(results, land)
    if len(station_x):
        axes.plot(station_x, station_y, gid="stations", zorder=5, **style.station_look(size))
        marks.add("stations")
    if _draw_wind(axes, results, land, days, size):
        marks.add("wind")
    return marks


def wind_of(results: Results, days: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Mean wind of each county over the days that have one, towards east and north. [m s-1]"""
    rows = [Shown(name, "", "map", "county", "mean") for name in ("wind_east_m_s", "wind_north_m_s")]
    east, north = (county_values(results, row, days)[0] for row in rows)
    return east, north


def _wind_words(results: Results, days: np.ndarray, system: System) -> str:
    speed = np.nan_to_num(np.hypot(*wind_of(results, days)))
    fastest = from_si(speed.max(), "wind_east_m_s", system).item()
    return f"wind by day; the longest arrow is {fastest:.1f} {quantity('wind_east_m_s').unit_in(system)}"


def _draw_wind(axes: Axes, results: Results, land: Land, days: np.ndarray, size: Size) -> bool:
    """Arrows below the counties' middles; of many counties one arrow for each square of a grid."""
    east, north = wind_of(results, days)
    good = np.isfinite(east) & np.isfinite(north) & np.isfinite(land.longitude_deg) & np.isfinite(land.latitude_deg)
    if not good.any():
        return False
    west, far_east, south, far_north = land.extent
    x, y, u, v = land.longitude_deg[good], land.latitude_deg[good], east[good], north[good]
    if len(x) > ARROWS:
        columns = ((x - west) / (far_east - west) * 9.999).astype(int)
        rows = ((y - south) / (far_north - south) * 6.999).astype(int)
        _, cell = np.unique(columns * 10 + rows, return_inverse=True)
        count = np.bincount(cell)
        x, y, u, v = (np.bincount(cell, part) / count for part in (x, y, u, v))
    else:
        side = np.sqrt(np.median(land.area_km2)) / KM_PER_DEGREE
        y = y - 0.27 * side
        station_x, station_y = stations_of(results, land)
        near = (np.abs(station_x - x[:, None]) < 0.25 * side * land.stretch) & (
            np.abs(station_y - y[:, None]) < 0.25 * side
        )
        x = x + np.where(near.any(axis=1), 0.25 * side * land.stretch, 0.0)
    longest = 0.40 if size.is_slide else 0.25  # in
    arrows = axes.quiver(
        x, y, u, v, units="inches", scale_units="inches", scale=max(float(np.hypot(u, v).max()), 0.1) / longest,
        pivot="middle", width=size.text_pt / 480.0, headwidth=4.4, headlength=4.8, headaxislength=4.2, color=INK,
        edgecolor=PAPER, linewidth=0.5, zorder=4,
    )  # fmt: skip
    arrows.set_gid("wind")
    return True


def _subtitle(results: Results, shown: Shown, days: np.ndarray, cover: str | None) -> str:
    """The run's title, what the days make, what is averaged, the hour."""
    parts = [style.plain(results.settings.get("title"))]
    if len(days) > 1:
        parts.append(f"{shown.over_days} of {len(days)} days")
    if shown.name in BY_SOURCE and cover is None:
        parts.append("over each source's own ground" if shown.source == "stand" else "spread over the whole county")
    elif shown.source == "stand":
        parts.append("area mean over the stands")
    if shown.hour:
        hour = float(results.settings.get("contribution_hour", 15.0))
        parts.append(f"at {hour:.0f}:00 local solar time")
    return style.sentence("; ".join(part for part in parts if part))
