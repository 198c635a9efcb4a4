"""County maps of any daily quantity, and counties by volume of water."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.brief import style
from etflux.brief.quantities import Shown, county_values, shown_of, sources_of
from etflux.brief.style import FAINT, INK, PAPER, RULE, SOFT, Box, Size
from etflux.outlines import EARTH_RADIUS_KM
from etflux.variables import System, convert, from_si, quantity, words_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.colors import Normalize
    from matplotlib.figure import Figure
    from matplotlib.path import Path

    from etflux.outlines import Outline
    from etflux.results import Results

STEPS = 7  # of a colour scale, at most: more cannot be told apart on a projector
UNRANKED_HATCH, MISSING_HATCH, GAPS_HATCH = "///", "xxx", "..."
LARGEST_SHOWN = 24  # counties by volume
KM_PER_DEGREE = np.pi * EARTH_RADIUS_KM / 180.0


@dataclass(frozen=True)
class Land:
    """Where the counties are drawn: an outline each, or a dot in degrees of longitude and latitude."""

    paths: tuple[Path | None, ...]
    longitude_deg: np.ndarray
    latitude_deg: np.ndarray
    area_km2: np.ndarray
    names: tuple[str, ...]

    @property
    def drawn(self) -> np.ndarray:
        """Which counties have an outline."""
        return np.array([path is not None for path in self.paths])

    @property
    def dot_radius_deg(self) -> np.ndarray:
        """Radius of a dot, in degrees of latitude: seven tenths of a disc of the county's area."""
        return 0.7 * np.sqrt(self.area_km2 / np.pi) / KM_PER_DEGREE

    @property
    def stretch(self) -> float:
        """Height over width of a degree at the middle latitude."""
        low, high = self.span[1]
        return 1.0 / max(0.05, float(np.cos(np.radians(0.5 * (low + high)))))

    @property
    def span(self) -> tuple[tuple[float, float], tuple[float, float]]:
        """West and east, south and north end of all that is drawn."""
        corners = [path.vertices for path in self.paths if path is not None]
        dots = ~self.drawn & np.isfinite(self.longitude_deg) & np.isfinite(self.latitude_deg)
        radius = 1.5 * self.dot_radius_deg[dots, None] * [1.0, -1.0]
        places = np.column_stack([self.longitude_deg[dots], self.latitude_deg[dots]])
        corners += [(places[:, None, :] + radius[:, :, None]).reshape(-1, 2)]
        every = np.concatenate(corners)
        (west, south), (east, north) = every.min(axis=0), every.max(axis=0)
        return (float(west), float(east)), (float(south), float(north))


def land_of(results: Results) -> Land:
    """Where the counties of a run are; those over the date line are kept together."""
    county = results.county
    outlines: Mapping[str, Outline] = getattr(results, "outlines", None) or {}
    ids = county["county_id"].to_numpy().astype(str)
    longitude = county["longitude_deg"].to_numpy().astype(float)
    turn = bool(np.nanmax(longitude) - np.nanmin(longitude) > 180.0)
    paths = tuple(_path(outlines[name], turn) if name in outlines else None for name in ids)
    return Land(
        paths,
        longitude % 360.0 if turn else longitude,
        county["latitude_deg"].to_numpy().astype(float),
        county["area_km2"].to_numpy().astype(float),
        tuple(style.plain(results.name_of("county", name)) for name in ids),
    )


def _path(outline: Outline, turn: bool) -> Path:
    from matplotlib.path import Path

    rings = [ring for polygon in outline.polygons for ring in polygon]
    if turn:
        rings = [np.column_stack([ring[:, 0] % 360.0, ring[:, 1]]) for ring in rings]
    return Path.make_compound_path(*(Path(ring, closed=True) for ring in rings))


def county_map(
    results: Results,
    shown: Shown,
    days: np.ndarray,
    *,
    system: System,
    size: Size,
    cover: str | None = None,
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
    scale : (float, float), optional
        Ends of the colour scale in the unit shown, so that maps can be compared; else from the values.

    Returns
    -------
    Figure
        Counties without a value and those that are not ranked are hatched.
    """
    land = land_of(results)
    panels = _panels(results, shown, days, cover, system)
    ranges = _range_panels(results, shown, days, system)
    figure = style.new_figure(size, 8.6 if ranges or len(panels) > 1 else 7.3)
    title = shown.label if cover is None else f"{shown.label}: {_cover_words(results, cover)}"
    box = style.frame(
        figure, size, results, f"{title}, {style.days_words(days)}", _subtitle(results, shown, days),
        [*_sure_notes(results, shown, days)],
    )  # fmt: skip
    norm = _norm([values for _, values, _ in (*panels, *ranges)], scale)
    unranked = unranked_counties(results, shown, days)
    main, side, small = _places(box, size, len(panels), len(ranges))
    marks: set[str] = set()
    for place, (name, values, gaps) in zip((*main, *small), (*panels, *ranges), strict=True):
        axes = place.axes(figure)
        marks |= _draw_counties(axes, land, values, shown, norm, unranked, gaps)
        _set_span(axes, land)
        if name:
            axes.set_title(name, fontsize=size.text_pt, color=INK, family=style.FAMILY, loc="left", pad=3.0)
        if len(panels) == 1 and place is main[0]:
            decimals = shown.decimals(system)
            _write_values(axes, land, values, place, size, shown, norm, decimals)
            marks |= _draw_weather(axes, results, land, days, size)
            _draw_distance(axes, land, system, size)
    _draw_scale(figure, side, size, shown, norm, system)
    _draw_key(figure, side, size, results, shown, days, system, marks)
    return figure


def _panels(
    results: Results, shown: Shown, days: np.ndarray, cover: str | None, system: System
) -> list[tuple[str, np.ndarray, np.ndarray]]:
    """Name, values in people's unit and gaps of every large map."""
    by_source = shown.name in {"et_mm", "le_by_tag_w_m2"} and cover is None
    covers: Sequence[str | None] = [cover]
    if by_source:
        tags = set(results.stand["tag"].to_numpy().astype(str)) if shown.source == "stand" else None
        covers = [name for name in sources_of(results) if tags is None or name in tags]
    found = []
    for name in covers:
        values, gaps = county_values(results, shown, days, name)
        words = _cover_words(results, name) if by_source and name else ""
        if not by_source or np.nan_to_num(values).any():
            found.append((words, shown.people(values, system), gaps))
    return found or [("", np.full(results.county.sizes["county_id"], np.nan), np.zeros(0, bool))]


def _range_panels(
    results: Results, shown: Shown, days: np.ndarray, system: System
) -> list[tuple[str, np.ndarray, np.ndarray]]:
    """The two ends of the range, where there is one."""
    found = []
    if shown.name == "contribution_c":
        for name, words in (("contribution_low_c", "Lower end"), ("contribution_high_c", "Upper end")):
            row = Shown(name, words, "map", "county", "mean", shown.palette, ranked=True)
            values, gaps = county_values(results, row, days)
            if np.isfinite(values).any():
                found.append((words, row.people(values, system), gaps))
    return found


def _cover_words(results: Results, cover: str) -> str:
    """A cover's name for people; sources of the water are words already."""
    return style.plain(results.name_of("cover", cover) if cover not in sources_of(results) else cover)


def unranked_counties(results: Results, shown: Shown, days: np.ndarray) -> np.ndarray:
    """Counties whose contribution is a range only, because too little of them is represented, (county,)."""
    county = results.county
    if not shown.ranked or "represented_pct" not in county:
        return np.zeros(county.sizes["county_id"], bool)
    least = float(results.settings.get("represented_least_pct", 70.0))
    return (county["represented_pct"].sel(date=days).to_numpy() < least).any(axis=0)


def _places(box: Box, size: Size, panels: int, ranges: int) -> tuple[list[Box], Box, list[Box]]:
    """Where the large maps, the scale with its key, and the small maps go."""
    if size.is_slide:
        maps = box.part(0.0, 0.0, 0.68, 1.0)
        side = box.part(0.71, 0.0, 0.29, 1.0) if not ranges else box.part(0.71, 0.48, 0.29, 0.52)
        small = [box.part(0.71 + 0.15 * number, 0.0, 0.14, 0.40) for number in range(ranges)]
    else:
        share = 0.6 if ranges or panels > 1 else 0.72
        maps = box.part(0.0, 1.0 - share, 1.0, share)
        below = 0.97 - share
        side = box.part(0.0, 0.0, 1.0 if not ranges else 0.5, below)
        small = [box.part(0.53 + 0.24 * number, 0.0, 0.23, 0.9 * below) for number in range(ranges)]
    if panels == 1:
        return [maps], side, small
    columns = 2 if panels <= 4 else 3
    rows = -(-panels // columns)
    large = [
        maps.part((n % columns) / columns, 1.0 - (n // columns + 1) / rows, 0.96 / columns, 0.88 / rows)
        for n in range(panels)
    ]
    return large, side, small


def _norm(values: Sequence[np.ndarray], scale: tuple[float, float] | None) -> Any:
    """Colour steps with round edges over all values, or from end to end of a given scale."""
    from matplotlib.colors import BoundaryNorm
    from matplotlib.ticker import MaxNLocator

    every = np.concatenate([part[np.isfinite(part)] for part in values])
    low, high = scale or ((float(every.min()), float(every.max())) if len(every) else (0.0, 1.0))
    if high - low < 1e-9:
        low, high = low - max(0.05 * abs(low), 0.05), high + max(0.05 * abs(high), 0.05)
        low = max(low, 0.0) if every.size and every.min() >= 0.0 else low
    edges = MaxNLocator(nbins=STEPS, steps=[1, 2, 2.5, 5, 10], min_n_ticks=4).tick_values(low, high)
    return BoundaryNorm(edges, 256, extend="both" if scale else "neither")


def _draw_counties(
    axes: Axes,
    land: Land,
    values: np.ndarray,
    shown: Shown,
    norm: Normalize,
    unranked: np.ndarray,
    gaps: np.ndarray,
) -> set[str]:
    """Counties in colour, and hatching over what has no value, is not ranked, or leaves days out."""
    has = np.isfinite(values)
    gaps = gaps if len(gaps) else np.zeros(len(values), bool)
    colours = style.sequential(shown.palette, shown.dark_low)
    filled = _shapes(axes, land, has, facecolor=None, edgecolor=PAPER, linewidth=0.8, gid="counties")
    for shapes, here in filled:
        shapes.set_cmap(colours)
        shapes.set_norm(norm)
        shapes.set_array(values[here])
    marks = set()
    for name, here, hatch, ground in (
        ("missing", ~has, MISSING_HATCH, PAPER),
        ("unranked", has & unranked, UNRANKED_HATCH, "none"),
        ("gaps", has & gaps & ~unranked, GAPS_HATCH, "none"),
    ):
        if here.any():
            marks.add(name)
            _shapes(axes, land, here, facecolor=ground, edgecolor=SOFT, linewidth=0.6, hatch=hatch, gid=name)
    return marks


def _shapes(axes: Axes, land: Land, here: np.ndarray, gid: str, **look: Any) -> list[tuple[Any, np.ndarray]]:
    """Outlines and dots of some counties; each collection with the positions of its counties."""
    from matplotlib.collections import PathCollection
    from matplotlib.path import Path

    made = []
    drawn = land.drawn
    for which in (here & drawn, here & ~drawn & np.isfinite(land.longitude_deg)):
        at = np.flatnonzero(which)
        if not len(at):
            continue
        paths: list[Any] = [land.paths[number] for number in at]
        if not drawn[at[0]]:
            circle = Path.unit_circle()
            paths = [
                Path(circle.vertices * land.dot_radius_deg[number] * (land.stretch, 1.0)
                     + (land.longitude_deg[number], land.latitude_deg[number]), circle.codes)
                for number in at
            ]  # fmt: skip
        shapes = PathCollection(paths, transform=axes.transData, **{k: v for k, v in look.items() if v is not None})
        shapes.set_gid(gid)
        axes.add_collection(shapes, autolim=False)
        made.append((shapes, at))
    return made


def _set_span(axes: Axes, land: Land) -> None:
    (west, east), (south, north) = land.span
    wide, high = 0.02 * (east - west or 1.0), 0.02 * (north - south or 1.0)
    axes.set_xlim(west - wide, east + wide)
    axes.set_ylim(south - high, north + high)
    axes.set_aspect(land.stretch, adjustable="box", anchor="W")
    axes.set_axis_off()


def _write_values(
    axes: Axes, land: Land, values: np.ndarray, place: Box, size: Size, shown: Shown, norm: Any, decimals: int
) -> None:
    """A county's name and value on it, where both can be read."""
    (west, east), (south, north) = land.span
    inch_per_degree = min(place.width / (east - west or 1.0), place.height / ((north - south or 1.0) * land.stretch))
    room = np.array([
        np.ptp(path.vertices[:, 0]) if path is not None else 2.0 * radius * land.stretch
        for path, radius in zip(land.paths, land.dot_radius_deg, strict=True)
    ]) * inch_per_degree  # fmt: skip
    points = min(size.text_pt, 0.28 * 72.0 * float(np.median(room)))
    if points < 0.62 * size.text_pt:
        return
    colours = style.sequential(shown.palette, shown.dark_low)
    for number in np.flatnonzero(np.isfinite(land.longitude_deg)):
        has = np.isfinite(values[number])
        colour = style.ink_on(colours(norm(values[number]))) if has else INK
        x, y = land.longitude_deg[number], land.latitude_deg[number]
        look: dict[str, Any] = {"ha": "center", "color": colour, "family": style.FAMILY, "clip_on": True}
        if has:
            word = f"{values[number]:,.{decimals}f}"
            axes.text(x, y, word, fontsize=points, va="center", weight="bold", gid="value", **look)
        small = 0.62 * points
        name = style.shortened(land.names[number], small, 0.94 * room[number])
        rise = 1.15 * points / 72.0 / inch_per_degree / land.stretch
        axes.text(x, y + (rise if has else 0.0), name, fontsize=small, va="center", gid="name", **look)


def _draw_weather(axes: Axes, results: Results, land: Land, days: np.ndarray, size: Size) -> set[str]:
    """Stations and wind arrows; which of them there were."""
    marks = set()
    station = results.station
    if {"latitude_deg", "longitude_deg"} <= set(station.variables):
        x, y = station["longitude_deg"].to_numpy().astype(float), station["latitude_deg"].to_numpy().astype(float)
        x = x % 360.0 if np.nanmax(land.longitude_deg) > 180.0 else x
        inside = np.isfinite(x) & np.isfinite(y)
        if inside.any():
            axes.plot(x[inside], y[inside], gid="stations", **_station_look(size))
            marks.add("stations")
    if _draw_wind(axes, results, land, days, size):
        marks.add("wind")
    return marks


def _station_look(size: Size) -> dict[str, Any]:
    return {"linestyle": "none", "marker": "^", "markersize": 0.55 * size.text_pt, "markerfacecolor": PAPER,
            "markeredgecolor": INK, "markeredgewidth": 1.1}  # fmt: skip


def wind_of(results: Results, days: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Mean wind vector of each county over the days that have one. [m s-1]"""
    found = []
    for name in ("wind_east_m_s", "wind_north_m_s"):
        row = shown_of("eto_mm")
        found.append(county_values(results, Shown(name, row.label, "map", "county", "mean"), days)[0])
    return found[0], found[1]


def _draw_wind(axes: Axes, results: Results, land: Land, days: np.ndarray, size: Size) -> bool:
    """Arrows below the counties' middles; of many counties one arrow each for a grid of squares."""
    east, north = wind_of(results, days)
    good = np.isfinite(east) & np.isfinite(north) & np.isfinite(land.longitude_deg)
    if not good.any():
        return False
    (west, far_east), (south, far_north) = land.span
    x, y, u, v = land.longitude_deg[good], land.latitude_deg[good], east[good], north[good]
    if len(x) > 60:
        columns = ((x - west) / (far_east - west) * 9.999).astype(int)
        rows = ((y - south) / (far_north - south) * 6.999).astype(int)
        _, cell = np.unique(columns * 10 + rows, return_inverse=True)
        count = np.bincount(cell)
        x, y, u, v = (np.bincount(cell, part) / count for part in (x, y, u, v))
    else:
        y = y - 0.27 * np.sqrt(np.median(land.area_km2)) / KM_PER_DEGREE
    fastest = float(np.hypot(u, v).max())
    inches = 0.42 if size.is_slide else 0.26  # of the longest arrow
    arrows = axes.quiver(
        x, y, u, v, units="inches", scale_units="inches", scale=max(fastest, 0.1) / inches, pivot="middle",
        width=size.text_pt / 500.0, headwidth=4.2, headlength=4.8, headaxislength=4.2, color=INK, edgecolor=PAPER,
        linewidth=0.5, zorder=4,
    )  # fmt: skip
    arrows.set_gid("wind")
    return True


def _draw_distance(axes: Axes, land: Land, system: System, size: Size) -> None:
    """A bar of a round distance below the map."""
    (west, east), (south, north) = land.span
    unit = "mi" if system == "us" else "km"
    degree = KM_PER_DEGREE / land.stretch * (float(convert(1.0, "km", unit)))
    steps = np.array([1, 2, 5, 10, 20, 50, 100, 200, 500, 1000, 2000])
    length = int(steps[np.abs(steps - 0.2 * (east - west) * degree).argmin()])
    y, tall = south - 0.035 * (north - south), 0.008 * (north - south)
    x = [west, west, west + length / degree, west + length / degree]
    axes.plot(x, [y + tall, y, y, y + tall], color=SOFT, linewidth=1.2, clip_on=False, gid="distance")
    axes.text(
        x[2] + 0.01 * (east - west), y, f"{length} {unit}", fontsize=size.small_pt, color=SOFT, va="center",
        family=style.FAMILY,
    )  # fmt: skip


def _draw_scale(figure: Figure, side: Box, size: Size, shown: Shown, norm: Any, system: System) -> None:
    """The colour scale with the unit over it."""
    from matplotlib.cm import ScalarMappable

    tall = 0.26 if size.is_slide else 0.14
    label = style.wrapped(shown.heading(system), size.text_pt, side.width, 2)
    lines = label.count("\n") + 1
    under = side.bottom + side.height - lines * size.text_pt * 1.3 / 72.0 - tall - 0.06
    style.write(figure, side.left, side.bottom + side.height, label, size.text_pt, gid="scale label")
    wide = min(side.width, 3.4) * 0.96
    axes = Box(side.left + 0.06, under, wide, tall).axes(figure)
    bar = figure.colorbar(
        ScalarMappable(norm, style.sequential(shown.palette, shown.dark_low)), cax=axes, orientation="horizontal",
        ticks=norm.boundaries, spacing="uniform",
    )  # fmt: skip
    bar.outline.set_edgecolor(RULE)
    bar.ax.tick_params(labelsize=size.small_pt, colors=INK, length=3, color=RULE, labelfontfamily=style.FAMILY)
    bar.ax.set_xticks(norm.boundaries, [f"{edge:g}" for edge in np.round(norm.boundaries, 10)])


def _draw_key(
    figure: Figure, side: Box, size: Size, results: Results, shown: Shown, days: np.ndarray, system: System,
    marks: set[str],
) -> None:  # fmt: skip
    """What hatching and marks mean, below the scale."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    characters = int(side.width * 72.0 / (0.5 * size.small_pt * 1.1)) - 8
    rows: list[Any] = []
    for name, hatch, ground, words in (
        ("unranked", UNRANKED_HATCH, FAINT, _unranked_words(results)),
        ("gaps", GAPS_HATCH, FAINT, "some days have no value: mean of the others"),
        ("missing", MISSING_HATCH, PAPER, _missing_words(results, shown, days)),
    ):
        if name in marks:
            label = _folded(words, characters)
            rows.append(Patch(facecolor=ground, edgecolor=SOFT, hatch=hatch, linewidth=0.6, label=label))
    if "stations" in marks:
        rows.append(Line2D([], [], label="weather station", **_station_look(size)))
    if "wind" in marks:
        speed = np.hypot(*wind_of(results, days))
        fastest = from_si(np.nanmax(speed), "wind_east_m_s", system).item()
        unit = quantity("wind_east_m_s").unit_in(system)
        words = f"wind by day; the longest arrow is {fastest:.0f} {unit}"
        marker: dict[str, Any] = {
            "marker": r"$\rightarrow$",
            "markersize": size.text_pt,
            "color": INK,
            "linestyle": "none",
        }
        rows.append(Line2D([], [], label=_folded(words, characters), **marker))
    if rows:
        width, height = figure.get_size_inches()
        top = side.bottom + side.height - (1.25 if size.is_slide else 0.72)
        style.legend(figure, size, rows, loc="upper left", bbox_to_anchor=(side.left / width, top / height))


def _folded(words: str, characters: int) -> str:
    import textwrap

    return "\n".join(textwrap.wrap(words, max(characters, 12)))


def _unranked_words(results: Results) -> str:
    least = float(results.settings.get("represented_least_pct", 70.0))
    return f"under {least:.0f} % of the county represented: a range, not ranked"


def _missing_words(results: Results, shown: Shown, days: np.ndarray) -> str:
    """Why counties have no value, in the words of the registry."""
    if shown.source == "stand":
        return "none there" if shown.name != "ks" else "no crop that could be short of water"
    county = results.county.sel(date=days)
    if not (shown.ranked or shown.name.startswith(("dew_point", "humidity"))) or "flags" not in county:
        return "no value"
    from etflux.variables import flag_bits
    from etflux.workbook.report_words import BLANKING, NOT_COMPUTED

    blanking = sum(flag_bits("air")[name] for name in BLANKING)
    blank = np.isnan(county["contribution_c"].to_numpy())
    bits = np.bitwise_or.reduce(county["flags"].to_numpy().astype(np.int64)[blank] & blanking, initial=0)
    reasons = words_of(int(bits), "air") or [NOT_COMPUTED]
    return "no value: " + "; or ".join(reasons)


def _subtitle(results: Results, shown: Shown, days: np.ndarray) -> str:
    """The run's title, and what the days make."""
    parts = [style.plain(results.settings.get("title"))]
    if len(days) > 1:
        parts.append(f"{'sum' if shown.over_days == 'sum' else 'mean'} of {len(days)} days")
    if shown.source == "stand":
        parts.append("area mean over the stands")
    if shown.name in {"contribution_c", "contribution_same_day_c", "contribution_carried_c"}:
        hour = float(results.settings.get("contribution_hour", 15.0))
        parts.append(f"at {hour:.0f}:00 local solar time")
    return "; ".join(part for part in parts if part)


def _sure_notes(results: Results, shown: Shown, days: np.ndarray) -> list[str]:
    """What marks a map that rests on estimates or may still move."""
    county = results.county.sel(date=days)
    if "provisional" not in county:
        return []
    bits = county["provisional"].to_numpy().astype(np.int64)
    number = int((bits != 0).any(axis=0).sum())
    if not number:
        return []
    reasons = "; ".join(words_of(int(np.bitwise_or.reduce(bits, axis=None)), "provisional"))
    return [f"Provisional in {number} of {bits.shape[1]} counties: {reasons}."]


def counties_by_volume(
    results: Results, days: np.ndarray, *, system: System, size: Size, county: str | None = None
) -> Figure:
    """Counties by the volume of water that their ground gave to the air, by source, the largest first.

    Sources share a county's volume as they share its latent flux. `county` is pointed out.
    """
    row = shown_of("water_volume_hm3")
    volume, _ = county_values(results, row, days)
    order = np.argsort(-np.nan_to_num(volume, nan=-1.0), kind="stable")
    order = order[np.isfinite(volume[order])]
    shown = order[:LARGEST_SHOWN]
    parts = volume_by_source(results, days)
    figure = style.new_figure(size, 7.4)
    whole = row.people(np.nansum(volume), system).item()
    subtitle = [style.plain(results.settings.get("title"))]
    subtitle += [f"all {len(order)} counties gave {whole:,.{row.decimals(system)}f} {row.unit(system)}"]
    if len(shown) < len(order):
        share = 100.0 * volume[shown].sum() / volume[order].sum()
        subtitle += [f"the {len(shown)} largest, {share:.0f} % of it, are shown"]
    title = f"{row.label} by county, {style.days_words(days)}"
    box = style.frame(figure, size, results, title, "; ".join(part for part in subtitle if part),
                      _sure_notes(results, row, days))  # fmt: skip
    names = [style.plain(results.name_of("county", name)) for name in results.county["county_id"].to_numpy()[shown]]
    points = min(size.text_pt, 0.72 * 72.0 * 0.86 * box.height / max(len(shown), 1))
    room = min(max([style.width_in(name, points) for name in names], default=0.0), 0.3 * box.width) + 0.1
    axes = Box(box.left + room, box.bottom + 0.09 * box.height, box.width - room - 0.1, 0.83 * box.height).axes(figure)
    _draw_bars(axes, results, parts, shown, size, system)
    bold = list(results.county["county_id"].to_numpy().astype(str)[shown])
    for number, name in enumerate(names):
        weight = "bold" if county is not None and bold[number] == county else "normal"
        axes.text(-0.008, number, style.shortened(name, points, room - 0.1), fontsize=points, ha="right", va="center",
                  transform=axes.get_yaxis_transform(), color=INK, family=style.FAMILY, weight=weight)  # fmt: skip
    return figure


def volume_by_source(results: Results, days: np.ndarray) -> dict[str, np.ndarray]:
    """Volume of water over some days by source, (county,). [10⁶ m³]"""
    county = results.county.sel(date=days)
    volume = county["water_volume_hm3"].to_numpy()
    if "le_by_tag_w_m2" not in county:
        return {"": volume.sum(axis=0)}
    flux = county["le_by_tag_w_m2"].to_numpy().astype(float)
    whole = flux.sum(axis=-1)
    share = np.divide(flux, whole[..., None], out=np.zeros_like(flux), where=whole[..., None] > 0.0)
    parts = (share * volume[..., None]).sum(axis=0)
    tags = [str(tag) for tag in county["tag"].to_numpy()]
    return {name: parts[:, tags.index(name)] for name in sources_of(results) if name in tags}


def _draw_bars(
    axes: Axes, results: Results, parts: Mapping[str, np.ndarray], shown: np.ndarray, size: Size, system: System
) -> None:
    row = shown_of("water_volume_hm3")
    start = np.zeros(len(shown))
    order = sources_of(results)
    y = np.arange(len(shown))
    for name, values in parts.items():
        wide = row.people(values[shown], system)
        if not wide.any():
            continue
        colour = style.source_colour(name, order) if name else style.HELD_EDGE
        axes.barh(y, wide, left=start, height=0.72, color=colour, edgecolor=PAPER, linewidth=0.8, label=name or None,
                  gid=f"volume {name}")  # fmt: skip
        start = start + wide
    axes.set_ylim(len(shown) - 0.4, -0.6)
    style.dress(axes, size, row.heading(system), grid="x")
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    if len(parts) > 1:
        style.legend(axes, size, axes.get_legend_handles_labels()[0], loc="lower right", title=None)
