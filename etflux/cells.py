"""Cells of the wind: the counties on a plane, from their outlines or from their centroids."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from etflux.outlines import EARTH_RADIUS_KM, Outline
from etflux.wind import OUTSIDE, SMALL_CELL, Region, merge_small

CLIP_RADII = 1.5  # a cell reaches no farther than this many radii of its county from the centroid
LEAST_CENTROIDS = 4
ARC_STEPS = 72
WIDEST_ARC_DEG = 150.0  # wider open sides are cut, so that air can enter on one and leave on the other
PIECE = 0.3  # an edge is cut into pieces of this share of the root of the county's area; wiggles within cancel
ON_A_LINE = 0.02  # breadth over length of the centroids
LEAST_SHARED = 0.5  # share of counties that must touch another for outlines to serve


def region(
    county_ids: tuple[str, ...],
    latitude_deg: np.ndarray,
    longitude_deg: np.ndarray,
    area_km2: np.ndarray,
    outlines: Mapping[str, Outline] | None = None,
    water_edge: np.ndarray | None = None,
) -> Region:
    """Cells and faces of the counties.

    Shared borders of outlines where every county has one and most touch a neighbour; else Voronoi cells of the
    centroids; with fewer than four counties, or all on a line, a square of each county's area, open on all sides.

    Parameters
    ----------
    county_ids : tuple of str
    latitude_deg, longitude_deg, area_km2 : ndarray, shape (county,)
    outlines : mapping of str to Outline, optional
    water_edge : ndarray of bool, shape (county,), optional
        Counties whose outer side is open water.

    Returns
    -------
    Region
        Small cells merged.
    """
    centre = _centre(latitude_deg, longitude_deg)
    x, y = project(latitude_deg, longitude_deg, centre)
    faces, cell_of = None, np.arange(len(x))
    if outlines is not None and all(name in outlines for name in county_ids):
        faces = _from_outlines([outlines[name] for name in county_ids], area_km2, centre)
    if faces is None:
        line = np.linalg.svd(np.stack([x - x.mean(), y - y.mean()]), compute_uv=False)
        scattered = len(x) >= LEAST_CENTROIDS and line[1] > ON_A_LINE * line[0]
        cell_of = _nearest_large(x, y, area_km2) if scattered else cell_of
        faces = _voronoi(x, y, area_km2, cell_of) if scattered else _squares(area_km2)
    first, second, east, north = faces
    water = np.zeros(len(x), dtype=bool) if water_edge is None else np.asarray(water_edge, dtype=bool)
    return merge_small(
        Region(first, second, east, north, cell_of, np.asarray(area_km2, float),
               _turn(latitude_deg, longitude_deg, centre), water)
    )  # fmt: skip


def _centre(latitude_deg: np.ndarray, longitude_deg: np.ndarray) -> tuple[float, float]:
    """Middle of the counties on the sphere. [deg]"""
    lat, lon = np.radians(latitude_deg), np.radians(longitude_deg)
    mean = np.array([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)]).mean(axis=1)
    return float(np.degrees(np.arctan2(mean[2], np.hypot(mean[0], mean[1])))), float(
        np.degrees(np.arctan2(mean[1], mean[0]))
    )


def project(
    latitude_deg: np.ndarray, longitude_deg: np.ndarray, centre: tuple[float, float]
) -> tuple[np.ndarray, np.ndarray]:
    """Lambert's azimuthal equal-area projection of the sphere.

    Parameters
    ----------
    latitude_deg, longitude_deg : ndarray
    centre : tuple of float
        Latitude and longitude where the plane touches. [deg]

    Returns
    -------
    x, y : ndarray
        East and north of the centre. [km]

    References
    ----------
    .. [1] Snyder (1987), Map projections: a working manual, USGS Professional Paper 1395, eqs. 22-4, 24-2 to 24-4
       (from memory).

    Examples
    --------
    >>> x, y = project(np.array([41.0]), np.array([-90.0]), (40.0, -90.0))
    >>> x.round(3).item(), y.round(1).item()
    (0.0, 111.2)
    """
    lat, lon = np.radians(latitude_deg), np.radians(longitude_deg) - np.radians(centre[1])
    middle = np.radians(centre[0])
    cosine = np.sin(middle) * np.sin(lat) + np.cos(middle) * np.cos(lat) * np.cos(lon)
    scale = EARTH_RADIUS_KM * np.sqrt(2.0 / (1.0 + cosine))
    x = scale * np.cos(lat) * np.sin(lon)
    y = scale * (np.cos(middle) * np.sin(lat) - np.sin(middle) * np.cos(lat) * np.cos(lon))
    return x, y


def _turn(latitude_deg: np.ndarray, longitude_deg: np.ndarray, centre: tuple[float, float]) -> np.ndarray:
    """Direction of true north on the plane, clockwise from its y axis. [rad]"""
    step = 1e-4
    x0, y0 = project(latitude_deg - step, longitude_deg, centre)
    x1, y1 = project(latitude_deg + step, longitude_deg, centre)
    return np.arctan2(x1 - x0, y1 - y0)


Faces = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]


def _from_outlines(outlines: list[Outline], area_km2: np.ndarray, centre: tuple[float, float]) -> Faces | None:
    """Faces from outlines that share vertices; None where too few counties touch."""
    county, ring, start, end = _segments(outlines, centre)
    points, vertex = np.unique(np.concatenate([start, end]), axis=0, return_inverse=True)
    a, b = vertex[: len(start)].astype(np.int64), vertex[len(start) :].astype(np.int64)
    key, back = a * len(points) + b, b * len(points) + a
    order = np.argsort(key)
    place = np.minimum(np.searchsorted(key, back, sorter=order), len(key) - 1)
    partner = order[place]
    shared = (key[partner] == back) & (county[partner] != county)
    if len(np.unique(county[shared])) < LEAST_SHARED * len(outlines):
        return None
    # Interior on the left: the outward normal is to the right of the way.
    east, north = end[:, 1] - start[:, 1], start[:, 0] - end[:, 0]
    low = shared & (county < county[partner])
    pair = county[low] * len(outlines) + county[partner[low]]
    code, group = np.unique(pair, return_inverse=True)
    edge = ~shared & ~((key[partner] == back) & (county[partner] == county))
    outer, outer_group = _edge_pieces(county[edge], ring[edge], east[edge], north[edge], area_km2)
    return (
        np.concatenate([code // len(outlines), outer]),
        np.concatenate([code % len(outlines), np.full(len(outer), OUTSIDE)]),
        np.concatenate([np.bincount(group, east[low], len(code)), np.bincount(outer_group, east[edge], len(outer))]),
        np.concatenate([np.bincount(group, north[low], len(code)), np.bincount(outer_group, north[edge], len(outer))]),
    )


def _segments(
    outlines: list[Outline], centre: tuple[float, float]
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Every segment of every ring with the land on its left: county, ring, start and end on the plane. [km]"""
    county, ring_number, starts, ends = [], [], [], []
    number = 0
    for position, outline in enumerate(outlines):
        for polygon in outline.polygons:
            for part, ring in enumerate(polygon):
                x, y = project(ring[:, 1], ring[:, 0], centre)
                points = np.stack([x, y], axis=1)
                signed = np.sum(x[:-1] * y[1:] - x[1:] * y[:-1])
                if (signed > 0.0) != (part == 0):
                    points = points[::-1]
                starts.append(points[:-1])
                ends.append(points[1:])
                county.append(np.full(len(points) - 1, position))
                ring_number.append(np.full(len(points) - 1, number))
                number += 1
    start, end = np.concatenate(starts).round(6), np.concatenate(ends).round(6)  # a millimetre
    moving = (start != end).any(axis=1)
    return np.concatenate(county)[moving], np.concatenate(ring_number)[moving], start[moving], end[moving]


def _edge_pieces(
    county: np.ndarray, ring: np.ndarray, east: np.ndarray, north: np.ndarray, area_km2: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """County of every piece of the region's edge, and the piece of every segment; segments come ring by ring."""
    length = np.hypot(east, north)
    run = np.cumsum(length)
    first = np.concatenate([[True], np.diff(ring) != 0]) if len(ring) else np.zeros(0, dtype=bool)
    run_before = np.maximum.accumulate(np.where(first, run - length, 0.0))
    piece = ((run - run_before) / (PIECE * np.sqrt(area_km2[county]))).astype(np.int64)
    code = ring.astype(np.int64) * (int(piece.max(initial=0)) + 1) + piece
    _, index, group = np.unique(code, return_index=True, return_inverse=True)
    return county[index], group


def _nearest_large(x: np.ndarray, y: np.ndarray, area_km2: np.ndarray) -> np.ndarray:
    """Cell of each county: its own, or that of the nearest county that is not small, (county,) int."""
    from scipy.spatial import cKDTree

    large = np.flatnonzero(area_km2 >= SMALL_CELL * np.median(area_km2))
    return cKDTree(np.stack([x[large], y[large]], axis=1)).query(np.stack([x, y], axis=1))[1]


def _voronoi(x: np.ndarray, y: np.ndarray, area_km2: np.ndarray, cell_of: np.ndarray) -> Faces:
    """Faces of Voronoi cells, none reaching farther from its centroid than 1.5 radii of its county."""
    from scipy.spatial import Voronoi

    n = int(cell_of.max()) + 1
    large = np.flatnonzero(area_km2 >= SMALL_CELL * np.median(area_km2))
    x, y = x[large], y[large]
    radius = CLIP_RADII * np.sqrt(np.bincount(cell_of, area_km2, n) / np.pi)
    reach = 10.0 * (np.hypot(x - x.mean(), y - y.mean()).max() + radius.max())
    angle = np.arange(8) * np.pi / 4.0
    points = np.stack([x, y], axis=1)
    far = np.stack([x.mean() + reach * np.cos(angle), y.mean() + reach * np.sin(angle)], axis=1)
    diagram = Voronoi(np.concatenate([points, far]))  # far points close the outer cells
    pairs, ends = np.asarray(diagram.ridge_points), np.array(diagram.ridge_vertices)
    between = (pairs < n).all(axis=1)
    first, second = pairs[between].T
    a, b = diagram.vertices[ends[between, 0]], diagram.vertices[ends[between, 1]]
    way, over = b - a, points[second] - points[first]
    side = np.sign(way[:, 1] * over[:, 0] - way[:, 0] * over[:, 1])
    normal = np.stack([way[:, 1], -way[:, 0]], axis=1) * side[:, None]
    own, other = _inside(a, b, points[first], radius[first]), _inside(a, b, points[second], radius[second])
    share = np.maximum(np.minimum(own[1], other[1]) - np.maximum(own[0], other[0]), 0.0)
    touch = share > 1e-6
    first, second, faces = first[touch], second[touch], normal[touch] * share[touch, None]
    arcs, arc_way = _arcs(points, radius)
    # Arcs are polygons: what they leave open, and bare pieces of borders, go to each cell's largest open side.
    rest = -_sum(first, faces, n) + _sum(second, faces, n) - _sum(arcs, arc_way, n)
    outer, vectors = _with_rest(arcs, arc_way, rest)
    return (
        np.concatenate([first, outer]), np.concatenate([second, np.full(len(outer), OUTSIDE)]),
        np.concatenate([faces[:, 0], vectors[:, 0]]), np.concatenate([faces[:, 1], vectors[:, 1]]),
    )  # fmt: skip


def _inside(a: np.ndarray, b: np.ndarray, centre: np.ndarray, radius: np.ndarray) -> np.ndarray:
    """Part of each segment from a to b that lies in a circle, as shares of its length; empty: begins after it ends."""
    way, from_centre = b - a, a - centre
    square = np.maximum((way**2).sum(axis=1), 1e-30)
    half = (way * from_centre).sum(axis=1) / square
    root = half**2 - ((from_centre**2).sum(axis=1) - radius**2) / square
    reach = np.sqrt(np.maximum(root, 0.0))
    begin, end = np.clip(-half - reach, 0.0, 1.0), np.clip(-half + reach, 0.0, 1.0)
    return np.where(root > 0.0, np.stack([begin, end]), 0.0)


def _arcs(points: np.ndarray, radius: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Open sides: pieces of each county's circle in its own Voronoi cell, as the county and normal times length."""
    from scipy.spatial import cKDTree

    n, steps = len(points), np.arange(ARC_STEPS)
    angle = (steps + 0.5) * 2.0 * np.pi / ARC_STEPS
    direction = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    on_circle = points[:, None, :] + radius[:, None, None] * direction
    _, nearest = cKDTree(points).query(on_circle.reshape(-1, 2))
    own = nearest.reshape(n, ARC_STEPS) == np.arange(n)[:, None]
    begins = own & ~np.roll(own, 1, axis=1)
    turned = (steps + begins.argmax(axis=1)[:, None]) % ARC_STEPS  # so that no side runs over the end of the row
    own, begins = np.take_along_axis(own, turned, axis=1), np.take_along_axis(begins, turned, axis=1)
    side = np.cumsum(begins, axis=1)
    code = np.arange(n)[:, None] * (ARC_STEPS + 1) + side
    span = np.bincount(code[own], minlength=n * (ARC_STEPS + 1))
    begin = np.full(n * (ARC_STEPS + 1), ARC_STEPS)
    np.minimum.at(begin, code[own], np.broadcast_to(steps, own.shape)[own])
    county, place = np.nonzero(own)
    here = code[own]
    parts = np.ceil(span[here] * 360.0 / ARC_STEPS / WIDEST_ARC_DEG).astype(int)
    part = (place - begin[here]) * parts // span[here]
    _, index, group = np.unique(here * 4 + part, return_index=True, return_inverse=True)
    chord = 2.0 * np.sin(np.pi / ARC_STEPS) * radius[county]
    way = direction[turned[own]] * chord[:, None]
    return county[index], _sum(group, way, len(index))


def _sum(index: np.ndarray, ways: np.ndarray, n: int) -> np.ndarray:
    """Vectors (k, 2) summed by index, (n, 2)."""
    return np.stack([np.bincount(index, ways[:, axis], n) for axis in (0, 1)], axis=1)


def _with_rest(county: np.ndarray, ways: np.ndarray, rest: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Open sides with each cell's rest added to its largest one; a cell without any gets one of its own."""
    order = np.argsort(np.hypot(ways[:, 0], ways[:, 1]), kind="stable")
    largest = np.full(len(rest), -1)
    largest[county[order]] = order
    has = largest >= 0
    ways = ways.copy()
    ways[largest[has]] += rest[has]
    alone = np.flatnonzero(~has & (np.hypot(rest[:, 0], rest[:, 1]) > 1e-9))
    return np.concatenate([county, alone]), np.concatenate([ways, rest[alone]])


def _squares(area_km2: np.ndarray) -> Faces:
    """A square for each county, open on all four sides."""
    side = np.sqrt(np.asarray(area_km2, float))
    n = len(side)
    east = np.concatenate([side, -side, np.zeros(2 * n)])
    north = np.concatenate([np.zeros(2 * n), side, -side])
    return np.tile(np.arange(n), 4), np.full(4 * n, OUTSIDE), east, north
