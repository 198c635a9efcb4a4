"""County outlines: read from GeoJSON, shapefile or TopoJSON, measured, and joined to counties by id.

Rings are (vertex, 2) arrays of longitude and latitude in degrees, first vertex repeated at the end. Areas are
those of the drawn outline on a sphere; a generalised outline is a little off the surveyed area, so they are called
outline areas wherever they are shown.
"""

from __future__ import annotations

import csv
import gzip
import json
import math
import re
from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from pathlib import Path
from typing import Any

import numpy as np

from etflux.findings import CannotRead

EARTH_RADIUS_KM = 6371.0088  # mean radius, IUGG
ID_PROPERTIES = ("county_id", "GEOID", "geoid", "GEOID10", "GEOID20", "GEO_ID", "AFFGEOID", "id", "ID")
FIRST_CITY = "510"  # codes of independent cities begin here
NAME_PROPERTIES = ("name", "NAME", "Name")
LARGEST_FILE_BYTES = 60_000_000
_LONG_GEOID = re.compile(r"\d{7}US(\d+)\Z")  # as the Census Bureau writes it in full: 0500000US19169

Polygon = tuple[np.ndarray, ...]  # an outer ring, then its holes


@dataclass(frozen=True)
class Outline:
    """One county's polygons with its id and name."""

    county_id: str
    name: str
    polygons: tuple[Polygon, ...]


@dataclass(frozen=True)
class Border:
    """A stretch of border that two counties share.

    `normal` points from the first county to the second, east and north components, length 1.
    """

    first: str
    second: str
    length_km: float
    normal: tuple[float, float]


def read(path: Path, largest_bytes: int | None = LARGEST_FILE_BYTES) -> dict[str, Outline]:
    """Outlines of a file, by county id.

    Parameters
    ----------
    path : Path
        GeoJSON (.geojson, .json), TopoJSON (.topojson, .json; its first layer) or shapefile (.shp) in degrees.
    largest_bytes : int, optional
        A larger file is refused; None for any.

    Raises
    ------
    CannotRead
        If the file is missing, too large, not of these formats, or has coordinates that are no degrees.
    """
    try:
        size = path.stat().st_size
        if largest_bytes is not None and size > largest_bytes:
            raise CannotRead(f"{path.name}: {size / 1e6:.0f} MB is more than the {largest_bytes / 1e6:.0f} MB read.")
        if path.suffix.lower() == ".shp":
            return _from_features(_shapefile_features(path), path.name)
        document = json.loads(path.read_text(encoding="utf-8-sig"))
    except OSError as error:
        raise CannotRead(f"{path.name}: cannot be opened ({error.strerror}). Put it beside the workbook.") from error
    except (UnicodeDecodeError, ValueError, RecursionError) as error:
        raise CannotRead(f"{path.name}: is not JSON. Save the outlines as GeoJSON or a shapefile.") from error
    kind = document.get("type") if isinstance(document, dict) else None
    if kind == "Topology":
        return _checked(_from_topology(document, path.name), path.name)
    if kind != "FeatureCollection" or not isinstance(document.get("features"), list):
        raise CannotRead(f"{path.name}: is not a GeoJSON feature collection.")
    return _from_features(document["features"], path.name)


def _from_topology(document: Mapping[str, Any], file_name: str) -> dict[str, Outline]:
    try:
        with np.errstate(over="ignore", invalid="ignore"):  # what is not finite is refused afterwards
            return from_topojson(document, next(iter(document["objects"])))
    except (KeyError, IndexError, TypeError, ValueError, AttributeError, StopIteration, OverflowError) as error:
        raise CannotRead(f"{file_name}: is broken TopoJSON. Save the outlines as GeoJSON or a shapefile.") from error


def from_topojson(topology: Mapping[str, Any], layer: str) -> dict[str, Outline]:
    """Outlines of one layer of a TopoJSON document, whose shared arcs stay shared to the last bit."""
    scale = np.asarray(topology.get("transform", {}).get("scale", (1.0, 1.0)), dtype=float)
    shift = np.asarray(topology.get("transform", {}).get("translate", (0.0, 0.0)), dtype=float)
    quantized = "transform" in topology
    arcs = [
        (np.cumsum(arc, axis=0) if quantized else np.asarray(arc, dtype=float))[:, :2] * scale + shift
        for arc in topology["arcs"]
    ]

    def ring(indices: Iterable[int]) -> np.ndarray:
        parts = [arcs[i] if i >= 0 else arcs[~i][::-1] for i in indices]
        return np.concatenate([parts[0], *(part[1:] for part in parts[1:])])

    found: dict[str, Outline] = {}
    for geometry in topology["objects"][layer]["geometries"]:
        if geometry.get("type") == "Polygon":
            shapes = [geometry["arcs"]]
        elif geometry.get("type") == "MultiPolygon":
            shapes = geometry["arcs"]
        else:
            continue
        polygons = tuple(tuple(ring(indices) for indices in shape) for shape in shapes)
        county_id, name = _labels(geometry, id_first=True)
        earlier = found.get(county_id)
        found[county_id] = Outline(county_id, name, (earlier.polygons if earlier else ()) + polygons)
    return found


def _labels(feature: Mapping[str, Any], id_first: bool = False) -> tuple[str, str]:
    """Id ("" for none) and name of a feature; its own id before or after those among its properties."""
    properties = feature.get("properties") or {}
    among = [properties[key] for key in ID_PROPERTIES if properties.get(key) not in (None, "")]
    own = [feature["id"]] if feature.get("id") not in (None, "") else []
    ids = own + among if id_first else among + own
    county_id = _text(ids[0]) if ids else ""
    return county_id, next((str(properties[key]) for key in NAME_PROPERTIES if properties.get(key)), county_id)


def _text(identity: Any) -> str:
    """An id as text; whole numbers that a program keeps as 19169.0, and the Census Bureau's long form, made plain."""
    if isinstance(identity, float) and identity.is_integer():
        identity = int(identity)
    text = str(identity).strip()
    long = _LONG_GEOID.match(text)
    return long[1] if long else text


def _from_features(features: Iterable[Any], file_name: str) -> dict[str, Outline]:
    found: dict[str, Outline] = {}
    for number, feature in enumerate(features, start=1):
        try:
            geometry = feature.get("geometry") or {}
            kind, shapes = geometry.get("type"), geometry.get("coordinates", ())
            county_id, name = _labels(feature)
        except AttributeError as error:
            raise CannotRead(f"{file_name}: outline {number} is not a GeoJSON feature.") from error
        if kind not in ("Polygon", "MultiPolygon"):
            continue
        if not county_id:
            wanted = ", ".join(ID_PROPERTIES[:3])
            raise CannotRead(f"{file_name}: outline {number} has no id. Give it one of the properties {wanted}.")
        try:
            polygons = tuple(
                tuple(_closed(np.asarray(ring, dtype=float)[:, :2]) for ring in shape)
                for shape in ([shapes] if kind == "Polygon" else list(shapes))
            )
        except (ValueError, TypeError, IndexError, OverflowError) as error:
            raise CannotRead(f"{file_name}: outline {county_id!r} has broken coordinates.") from error
        earlier = found.get(county_id)
        found[county_id] = Outline(county_id, name, (earlier.polygons if earlier else ()) + polygons)
    return _checked(found, file_name)


def _closed(ring: np.ndarray) -> np.ndarray:
    """A ring with its first vertex at the end, where a file leaves it out."""
    return ring if (ring[0] == ring[-1]).all() else np.concatenate([ring, ring[:1]])


def _checked(found: dict[str, Outline], file_name: str) -> dict[str, Outline]:
    """Outlines whose rings enclose something and stand in degrees."""
    if not any(outline.polygons for outline in found.values()):
        raise CannotRead(f"{file_name}: has no polygons.")
    if "" in found:
        raise CannotRead(f"{file_name}: an outline has no id. Give it one of {', '.join(ID_PROPERTIES[:3])}.")
    for county_id, outline in found.items():
        for ring in (ring for polygon in outline.polygons for ring in polygon):
            if len(ring) < 4 or not np.isfinite(ring).all() or (np.abs(ring).max(axis=0) > (180.0, 90.0)).any():
                raise CannotRead(f"{file_name}: outline {county_id!r} is not in degrees of longitude and latitude.")
        if not any(len(polygon) for polygon in outline.polygons):
            raise CannotRead(f"{file_name}: outline {county_id!r} has no polygon.")
    return found


def _shapefile_features(path: Path) -> Iterable[Mapping[str, Any]]:
    import struct

    import shapefile

    try:
        with shapefile.Reader(str(path)) as reader:
            return [row.__geo_interface__ for row in reader.iterShapeRecords()]
    except (shapefile.ShapefileException, OSError, UnicodeDecodeError, ValueError, struct.error) as error:
        raise CannotRead(f"{path.name}: is not a readable shapefile (.shp with .dbf and .shx beside it).") from error


def _ring_moments(ring: np.ndarray) -> tuple[float, float, float]:
    """Signed area in km2 of a ring on the sphere, and its first moments about longitude and sine of latitude."""
    x = np.radians(ring[:, 0])
    y = np.sin(np.radians(ring[:, 1]))  # Lambert's cylindrical equal-area ordinate
    x0, y0 = x[0], y[0]
    x, y = x - x0, y - y0
    cross = x[:-1] * y[1:] - x[1:] * y[:-1]
    area = 0.5 * cross.sum()
    if area == 0.0:
        return 0.0, 0.0, 0.0
    cx = ((x[:-1] + x[1:]) * cross).sum() / (6.0 * area) + x0
    cy = ((y[:-1] + y[1:]) * cross).sum() / (6.0 * area) + y0
    km2 = area * EARTH_RADIUS_KM**2
    return km2, km2 * cx, km2 * cy


@dataclass(frozen=True)
class Alias:
    """A GEOID that the packaged outlines do not have: which outline it lies in, whether it is all of it, and why."""

    outline_geoid: str
    whole: bool
    change: str


@cache
def us_counties() -> Mapping[str, Outline]:
    """Counties of the United States by GEOID: Census Bureau cartographic boundaries, 2017 edition, 1:5,000,000.

    Names end in the state's postal code, since many counties share one; where a county and a city of one state do,
    they say which they are. Neighbours share the vertices of their border.

    Examples
    --------
    >>> us_counties()["19169"].name, us_counties()["24510"].name
    ('Story, IA', 'Baltimore city, MD')
    """
    text = gzip.decompress(files("etflux.tables").joinpath("us_counties.topojson.gz").read_bytes())
    postal = {row["state_fips"]: row["postal"] for row in _packaged_rows("us_states.csv")}
    found = from_topojson(json.loads(text), "counties")
    shared = Counter((geoid[:2], outline.name) for geoid, outline in found.items())
    named = {}
    for geoid, outline in found.items():
        kind = "" if shared[geoid[:2], outline.name] == 1 else " city" if geoid[2:] >= FIRST_CITY else " County"
        named[geoid] = Outline(geoid, f"{outline.name}{kind}, {postal[geoid[:2]]}", outline.polygons)
    return named


@cache
def us_county_aliases() -> Mapping[str, Alias]:
    """GEOIDs that came or went before or after the edition of :func:`us_counties`."""
    return {
        row["geoid"]: Alias(row["outline_geoid"], row["whole"] == "yes", row["change"])
        for row in _packaged_rows("us_county_aliases.csv")
    }


def _packaged_rows(name: str) -> list[dict[str, str]]:
    text = files("etflux.tables").joinpath(name).read_text(encoding="utf-8")
    return list(csv.DictReader(text.splitlines()))


def to_geojson(outlines: Mapping[str, Outline]) -> dict[str, Any]:
    """A GeoJSON feature collection, longitude and latitude to a tenth of a metre or so."""
    return {
        "type": "FeatureCollection",
        "features": [
            {
                "type": "Feature",
                "id": county_id,
                "properties": {"county_id": county_id, "name": outline.name},
                "geometry": {
                    "type": "MultiPolygon",
                    "coordinates": [[ring.round(6).tolist() for ring in polygon] for polygon in outline.polygons],
                },
            }
            for county_id, outline in outlines.items()
        ],
    }


def area_and_centroid(outline: Outline) -> tuple[float, float, float]:
    """Outline area on the sphere and its centroid.

    Returns
    -------
    area_km2, latitude_deg, longitude_deg : float
        Of an outline without any area, the middle of its vertices.

    Examples
    --------
    A square of one degree at the equator:

    >>> square = np.array([[0, 0], [1, 0], [1, 1], [0, 1], [0, 0]], float)
    >>> area, lat, lon = area_and_centroid(Outline("a", "a", ((square,),)))
    >>> round(area, 1), round(lat, 3), round(lon, 3)
    (12363.7, 0.5, 0.5)
    """
    total = mx = my = 0.0
    east = np.concatenate([ring[:, 0] for polygon in outline.polygons for ring in polygon])
    over_the_date_line = east.max() - east.min() > 180.0
    for polygon in outline.polygons:
        for position, ring in enumerate(polygon):
            if over_the_date_line:
                ring = np.column_stack([ring[:, 0] % 360.0, ring[:, 1]])
            km2, x, y = _ring_moments(ring)
            sign = math.copysign(1.0, km2) * (1.0 if position == 0 else -1.0)
            total, mx, my = total + sign * km2, mx + sign * x, my + sign * y
    if total <= 0.0 or abs(my) > total:  # nothing inside, or holes that reach out of it
        north = np.concatenate([ring[:, 1] for polygon in outline.polygons for ring in polygon])
        return max(total, 0.0), float(north.mean()), float(east.mean())
    longitude = (math.degrees(mx / total) + 180.0) % 360.0 - 180.0
    return float(total), math.degrees(math.asin(my / total)), longitude


def shared_borders(outlines: Mapping[str, Outline]) -> list[Border]:
    """Stretches of border that two counties share, from identical vertices.

    A segment belongs to two counties when both draw it between the same two vertices; outlines that were simplified
    county by county share none, and the caller must fall back on centroids.
    """
    owner: dict[tuple[tuple[float, float], tuple[float, float]], tuple[str, np.ndarray, np.ndarray]] = {}
    borders = []
    for county_id, outline in outlines.items():
        for polygon in outline.polygons:
            for position, ring in enumerate(polygon):
                forward = (_ring_moments(ring)[0] > 0.0) == (position == 0)
                points = ring if forward else ring[::-1]  # interior on the left
                for start, end in zip(points[:-1], points[1:], strict=True):
                    a, b = (float(start[0]), float(start[1])), (float(end[0]), float(end[1]))
                    if a == b:
                        continue
                    other = owner.pop((b, a), None)
                    if other is None or other[0] == county_id:
                        owner[(a, b)] = (county_id, start, end)
                        continue
                    borders.append(_border(county_id, other[0], start, end))
    return borders


def _border(first: str, second: str, start: np.ndarray, end: np.ndarray) -> Border:
    east = math.radians(end[0] - start[0]) * math.cos(math.radians(0.5 * (start[1] + end[1]))) * EARTH_RADIUS_KM
    north = math.radians(end[1] - start[1]) * EARTH_RADIUS_KM
    length = math.hypot(east, north)
    return Border(first, second, length, (north / length, -east / length))
