"""The Harrowbend, a river basin that does not exist: 24 counties about 45 km across, in four rows.

Rows of counties are laid like bricks; each stretch of border between two corners is drawn once, straight where it
would have been surveyed and winding where it would follow water, and used by both neighbours.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pandas as pd

from etflux.outlines import Outline, area_and_centroid
from invented.numbers import normal, stream

ORIGIN_LATITUDE, ORIGIN_LONGITUDE = 41.0, -97.6
KM_PER_DEGREE = 111.195
MIDDLE_LATITUDE = 41.75
ROWS = (5, 6, 7, 6)  # counties from north to south
CENTRES_KM = (172.0, 158.0, 164.0, 150.0)
WIDTH_KM = 46.5
BORDERS_KM = (168.5, 126.0, 84.0, 42.0, 1.5)  # northing of the borders between rows
RIVER = 2  # the border that the river follows
SNAP_KM = 7.0  # corners nearer than this become one
NAMES = (
    "Quillmere", "Skelbarrow", "Noctley", "Umberfold", "Fennimere",
    "Cinderlea", "Brenfallow", "Othermead", "Thistlemoor", "Larkwade", "Isenbrook",
    "Dunsorrow", "Wexmarrow", "Tarnwillow", "Pellgrove", "Rushenholm", "Yarrowstead", "Velmarch",
    "Greyloam", "Oxenreach", "Hathermoss", "Marrowfen", "Sorrelwick", "Avenholt",
)  # fmt: skip
IDS = tuple(f"HB{number:02d}" for number in range(1, 25))

Corner = tuple[float, float]


def degrees(km: np.ndarray) -> np.ndarray:
    """Longitude and latitude of places given in km east and north of the basin's origin."""
    km = np.asarray(km, float)
    east = KM_PER_DEGREE * math.cos(math.radians(MIDDLE_LATITUDE))
    return np.stack([ORIGIN_LONGITUDE + km[..., 0] / east, ORIGIN_LATITUDE + km[..., 1] / KM_PER_DEGREE], axis=-1)


def kilometres(longitude_deg: np.ndarray, latitude_deg: np.ndarray) -> np.ndarray:
    """Inverse of :func:`degrees`."""
    east = KM_PER_DEGREE * math.cos(math.radians(MIDDLE_LATITUDE))
    return np.stack(
        [
            (np.asarray(longitude_deg, float) - ORIGIN_LONGITUDE) * east,
            (np.asarray(latitude_deg, float) - ORIGIN_LATITUDE) * KM_PER_DEGREE,
        ],
        axis=-1,
    )


def ground_m(km: np.ndarray) -> np.ndarray:
    """Height of the ground: a plain that falls to the east, with the river's valley in it. [m]"""
    x, y = np.asarray(km, float)[..., 0], np.asarray(km, float)[..., 1]
    valley = 35.0 * np.exp(-(((y - BORDERS_KM[RIVER]) / 14.0) ** 2))
    return 505.0 - 0.62 * x + 0.12 * np.abs(y - BORDERS_KM[RIVER]) - valley


def outlines() -> dict[str, Outline]:
    """Outlines of the 24 counties by id; neighbours share their vertices to the last digit."""
    corners, rows = _corners()
    lines = _Lines()
    found = {}
    number = 0
    for row, count in enumerate(ROWS):
        for place in range(count):
            top = _between(corners[row], rows[row][place][0], rows[row][place + 1][0])
            bottom = _between(corners[row + 1], rows[row][place][1], rows[row][place + 1][1])
            ring = [*bottom, *top[::-1], bottom[0]]  # against the clock
            borders = [row + 1] * (len(bottom) - 1) + [-1] + [row] * (len(top) - 1) + [-1]
            drawn = [lines.draw(a, b, border) for a, b, border in zip(ring[:-1], ring[1:], borders, strict=True)]
            points = np.concatenate([part[:-1] for part in drawn] + [drawn[0][:1]])
            found[IDS[number]] = Outline(IDS[number], NAMES[number], ((degrees(points).round(5),),))
            number += 1
    return found


def _corners() -> tuple[list[list[Corner]], list[list[tuple[Corner, Corner]]]]:
    """Corners along every border between rows, and the upper and lower end of every side between neighbours."""
    rng = stream(1)
    corners: list[list[Corner]] = [[] for _ in BORDERS_KM]
    rows = []
    for row, count in enumerate(ROWS):
        base = CENTRES_KM[row] + WIDTH_KM * (np.arange(count + 1) - count / 2.0) + 4.0 * (rng.random(count + 1) - 0.5)
        ends = base[:, None] + 7.0 * (rng.random((count + 1, 2)) - 0.5)
        rows.append([(_corner(corners[row], a, row, rng), _corner(corners[row + 1], b, row + 1, rng)) for a, b in ends])
    return [sorted(line) for line in corners], rows


def _corner(line: list[Corner], x: float, border: int, rng: np.random.Generator) -> Corner:
    """Return a corner at x on a border between rows; a corner that is already near serves both."""
    offset = 3.0 * (rng.random() - 0.5)
    for corner in line:
        if abs(corner[0] - x) < SNAP_KM:
            return corner
    y = BORDERS_KM[border] + 3.2 * math.sin(x / 38.0 + 1.7 * border) + offset
    line.append((float(x), y))
    return line[-1]


def _between(line: list[Corner], left: Corner, right: Corner) -> list[Corner]:
    return [corner for corner in line if left[0] <= corner[0] <= right[0]]


class _Lines:
    """Every stretch of border, drawn once."""

    def __init__(self) -> None:
        self.drawn: dict[tuple[Corner, Corner], np.ndarray] = {}
        self.rng = stream(2)

    def draw(self, start: Corner, end: Corner, border: int) -> np.ndarray:
        """Points of a stretch of border from start to end, both included."""
        if (end, start) in self.drawn:
            return self.drawn[(end, start)][::-1]
        if (start, end) not in self.drawn:
            winding = 0.15 if border == RIVER else float(self.rng.choice([0.0, 0.05, 0.11]))
            self.drawn[(start, end)] = self._wind(start, end, winding)
        return self.drawn[(start, end)]

    def _wind(self, start: Corner, end: Corner, winding: float) -> np.ndarray:
        """Halve the line again and again, moving each middle sideways by a share of its stretch."""
        points = np.array([start, end])
        levels = 0 if winding == 0.0 else max(2, min(5, int(np.log2(math.dist(start, end)))))
        for _ in range(levels):
            step = np.diff(points, axis=0)
            aside = np.clip(normal(self.rng, len(step)), -1.3, 1.3) * winding
            middle = points[:-1] + 0.5 * step + np.stack([-step[:, 1], step[:, 0]], axis=1) * aside[:, None]
            points = np.insert(points, np.arange(1, len(points)), middle, axis=0)
        return points


def geojson(shapes: dict[str, Outline]) -> dict[str, Any]:
    """GeoJSON document of the outlines, outer rings against the clock (RFC 7946)."""
    return {
        "type": "FeatureCollection",
        "features": [
            {
                "type": "Feature",
                "properties": {"county_id": shape.county_id, "name": shape.name},
                "geometry": {"type": "Polygon", "coordinates": [ring.tolist() for ring in shape.polygons[0]]},
            }
            for shape in shapes.values()
        ],
    }


def counties(shapes: dict[str, Outline]) -> pd.DataFrame:
    """County table; areas and centroids are those of the outlines."""
    measured = np.array([area_and_centroid(shape) for shape in shapes.values()])
    table = pd.DataFrame(
        {
            "county_id": list(shapes),
            "name": [shape.name for shape in shapes.values()],
            "area_km2": measured[:, 0].round(2),
            "latitude_deg": measured[:, 1].round(4),
            "longitude_deg": measured[:, 2].round(4),
        }
    )
    table["elevation_m"] = ground_m(kilometres(table["longitude_deg"], table["latitude_deg"])).round(0)
    return table
