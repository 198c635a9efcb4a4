"""Where counties are drawn on a map: outlines, or dots where there is none."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from etflux.brief import style
from etflux.brief.quantities import county_names
from etflux.brief.style import RULE, SOFT, Box, Size
from etflux.outlines import EARTH_RADIUS_KM
from etflux.variables import System, convert

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.path import Path

    from etflux.outlines import Outline
    from etflux.results import Results

KM_PER_DEGREE = np.pi * EARTH_RADIUS_KM / 180.0
ROUND_KM = np.array([1, 2, 5, 10, 20, 50, 100, 200, 500, 1000, 2000])


@dataclass(frozen=True)
class Land:
    """Where the counties are drawn, in degrees of longitude and latitude."""

    paths: tuple[Path | None, ...]
    longitude_deg: np.ndarray
    latitude_deg: np.ndarray
    area_km2: np.ndarray
    names: tuple[str, ...]

    @cached_property
    def drawn(self) -> np.ndarray:
        """Which counties have an outline."""
        return np.array([path is not None for path in self.paths])

    @cached_property
    def dots(self) -> np.ndarray:
        """Which counties are dots; one without a place is left out."""
        return ~self.drawn & np.isfinite(self.longitude_deg) & np.isfinite(self.latitude_deg)

    @cached_property
    def dot_radius_deg(self) -> np.ndarray:
        """Radius of a dot in degrees of latitude: seven tenths of a disc of the county's area."""
        return 0.7 * np.sqrt(self.area_km2 / np.pi) / KM_PER_DEGREE

    @cached_property
    def extent(self) -> tuple[float, float, float, float]:
        """West, east, south and north end of all that is drawn."""
        corners = [np.asarray(path.vertices) for path in self.paths if path is not None]
        radius = 1.5 * self.dot_radius_deg[self.dots, None]
        places = np.column_stack([self.longitude_deg, self.latitude_deg])[self.dots]
        every = np.concatenate([*corners, places - radius, places + radius])
        every = every if len(every) else np.zeros((1, 2))
        (west, south), (east, north) = every.min(axis=0), every.max(axis=0)
        return float(west), float(east), float(south), float(north)

    @cached_property
    def stretch(self) -> float:
        """How much longer a degree of latitude is than one of longitude, in the middle."""
        _, _, south, north = self.extent
        return 1.0 / max(0.05, float(np.cos(np.radians(0.5 * (south + north)))))

    @cached_property
    def shape(self) -> float:
        """Height over width of the map."""
        west, east, south, north = self.extent
        return (north - south) * self.stretch / max(east - west, 1e-6)

    @cached_property
    def width_deg(self) -> np.ndarray:
        """Width of each county as it is drawn, (county,)."""
        return np.array([
            2.0 * radius * self.stretch if path is None else np.ptp(np.asarray(path.vertices)[:, 0])
            for path, radius in zip(self.paths, self.dot_radius_deg, strict=True)
        ])  # fmt: skip

    def inch_per_degree(self, place: Box) -> float:
        """Inches that a degree of longitude has on a map that fills a place."""
        west, east, south, north = self.extent
        wide, tall = max(east - west, 1e-6), max((north - south) * self.stretch, 1e-6)
        return min(place.width / wide, place.height / tall)

    def edge(self, place: Box) -> dict[str, Any]:
        """Look of the borders: thinner on a map of many counties, none where they would hide the colours."""
        points = 0.012 * 72.0 * float(np.median(self.width_deg)) * self.inch_per_degree(place)
        return {"edgecolor": RULE if points > 0.05 else "face", "linewidth": min(max(points, 0.12), 0.7)}

    @cached_property
    def over_the_date_line(self) -> bool:
        """Whether western longitudes are counted on past 180."""
        return self.extent[1] > 180.0


def land_of(results: Results) -> Land:
    """Where the counties of a run are; those on both sides of the date line are kept together."""
    county = results.county
    outlines: Mapping[str, Outline] = getattr(results, "outlines", None) or {}
    ids = county["county_id"].to_numpy().astype(str)
    longitude = county["longitude_deg"].to_numpy().astype(float)
    rings = [ring[:, 0] for name in ids if name in outlines for polygon in outlines[name].polygons for ring in polygon]
    known = np.concatenate([longitude[np.isfinite(longitude)], *rings])
    turn = bool(np.ptp(known) > 180.0) if len(known) else False
    return Land(
        tuple(_path(outlines[name], turn) if name in outlines else None for name in ids),
        longitude % 360.0 if turn else longitude,
        county["latitude_deg"].to_numpy().astype(float),
        county["area_km2"].to_numpy().astype(float),
        tuple(style.plain(name) for name in county_names(results)),
    )


def _path(outline: Outline, turn: bool) -> Path:
    from matplotlib.path import Path

    rings = [ring for polygon in outline.polygons for ring in polygon]
    if turn:
        rings = [np.column_stack([ring[:, 0] % 360.0, ring[:, 1]]) for ring in rings]
    return Path.make_compound_path(*(Path(ring, closed=True) for ring in rings))


def draw_shapes(axes: Axes, land: Land, here: np.ndarray, gid: str, **look: Any) -> list[tuple[Any, np.ndarray]]:
    """Draw outlines and dots of some counties.

    Returns
    -------
    list of (PathCollection, ndarray of int)
        Each collection with the positions of its counties.
    """
    from matplotlib.collections import PathCollection
    from matplotlib.path import Path

    made: list[tuple[Any, np.ndarray]] = []
    circle = Path.unit_circle()
    for which in (here & land.drawn, here & land.dots):
        at = np.flatnonzero(which)
        if not len(at):
            continue
        paths: list[Any] = [land.paths[number] for number in at]
        if not land.drawn[at[0]]:
            middle = np.column_stack([land.longitude_deg, land.latitude_deg])
            disc = np.asarray(circle.vertices) * (land.stretch, 1.0)
            paths = [Path(disc * land.dot_radius_deg[number] + middle[number], circle.codes) for number in at]
        shapes = PathCollection(paths, transform=axes.transData, **look)
        shapes.set_gid(gid)
        axes.add_collection(shapes, autolim=False)
        made.append((shapes, at))
    return made


def set_extent(axes: Axes, land: Land, anchor: Literal["W", "NW"] = "NW") -> None:
    """Limits and proportions of a map's axes; nothing is drawn around it."""
    west, east, south, north = land.extent
    wide, high = 0.01 * (east - west), 0.02 * (north - south)
    axes.set_xlim(west - wide - 1e-6, east + wide + 1e-6)
    axes.set_ylim(south - high - 1e-6, north + high + 1e-6)
    axes.set_aspect(land.stretch, adjustable="box", anchor=anchor)
    axes.set_axis_off()


def draw_distance(axes: Axes, land: Land, system: System, size: Size) -> None:
    """A bar of a round distance below the map."""
    west, east, south, north = land.extent
    unit = "mi" if system == "us" else "km"
    degree = KM_PER_DEGREE / land.stretch * float(convert(1.0, "km", unit))
    length = int(ROUND_KM[np.abs(ROUND_KM - 0.16 * (east - west) * degree).argmin()])
    y, tall = south - 0.05 * (north - south), 0.012 * (north - south)
    x = [west, west, west + length / degree, west + length / degree]
    axes.plot(x, [y + tall, y, y, y + tall], color=SOFT, linewidth=1.2, clip_on=False, gid="distance")
    axes.text(x[2] + 0.01 * (east - west), y, f"{length} {unit}", fontsize=size.small_pt, color=SOFT, va="center",
              family=style.FAMILY)  # fmt: skip
