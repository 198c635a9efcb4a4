"""Wind over the counties: cells and their borders, the flow through them, and what an hour of it moves.

Counties become cells on a plane (equal-area projection about the region's centre). Through each border goes the wind of
its two counties; the flow is then adjusted by least squares so that every cell's net outflow is zero, because air that
gathers from nowhere would carry tagged water with it. First-order upwind differences move all levels and tracers by one
sparse matrix. Upwinding spreads a puff: after a day it is blurred over a few counties.

References
----------
.. [S70] Sasaki (1970), Some basic formalisms in numerical variational analysis, Mon. Wea. Rev. 98, 875-883.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from scipy.sparse import csr_matrix

OUTSIDE = -1
KM_PER_HOUR = 3.6  # of 1 m/s
LARGEST_COURANT = 0.9
SMALL_CELL = 0.1  # of the median area: merged for transport


@dataclass(frozen=True)
class Region:
    """Cells of the counties and the faces between them, on a plane.

    Parameters
    ----------
    first, second : ndarray of int, shape (face,)
        Cells on both sides; `second` is OUTSIDE at the region's edge.
    east_km, north_km : ndarray, shape (face,)
        Normal times length, pointing from `first` to `second`; sums to zero around every cell.
    cell_of : ndarray of int, shape (county,)
        Cell of each county; small counties share one with a neighbour.
    area_km2 : ndarray, shape (county,)
    turn_rad : ndarray, shape (county,)
        Direction of true north on the plane, clockwise from its northward axis.
    water_edge : ndarray of bool, shape (county,)
        Whether air enters the county from over water where it lies at the edge.
    """

    first: np.ndarray
    second: np.ndarray
    east_km: np.ndarray
    north_km: np.ndarray
    cell_of: np.ndarray
    area_km2: np.ndarray
    turn_rad: np.ndarray
    water_edge: np.ndarray

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return int(self.cell_of.max()) + 1

    @property
    def cell_area_km2(self) -> np.ndarray:
        """Area of each cell, shape (cell,)."""
        return np.bincount(self.cell_of, self.area_km2, self.n_cells)


def merge_small(region: Region) -> Region:
    """The region with cells under a tenth of the median area joined to the neighbour behind their longest border."""
    area = region.cell_area_km2
    small = area < SMALL_CELL * np.median(area)
    if not small.any():
        return region
    inner = region.second != OUTSIDE
    length = np.hypot(region.east_km, region.north_km)
    ends = np.concatenate([region.first[inner], region.second[inner]])
    others = np.concatenate([region.second[inner], region.first[inner]])
    order = np.argsort(np.concatenate([length[inner], length[inner]]), kind="stable")
    target = np.arange(region.n_cells)
    target[ends[order]] = others[order]  # the longest comes last
    target = np.where(small, target, np.arange(region.n_cells))
    for _ in range(int(np.ceil(np.log2(region.n_cells + 1))) + 1):  # small cells that lean on small cells
        onward = target[target]
        loop = onward == np.arange(region.n_cells)
        target = np.where(loop, np.minimum(target, np.arange(region.n_cells)), onward)
    _, cell = np.unique(target, return_inverse=True)
    first = cell[region.first]
    second = np.where(inner, cell[np.where(inner, region.second, 0)], OUTSIDE)
    keep = first != second
    return Region(
        first[keep], second[keep], region.east_km[keep], region.north_km[keep], cell[region.cell_of],
        region.area_km2, region.turn_rad, region.water_edge,
    )  # fmt: skip


@dataclass(frozen=True)
class Hour:
    """What an hour of wind does to anything the counties' air holds.

    Parameters
    ----------
    matrix : csr_matrix, shape (county, county)
        One sub-step: what each county's air is made of after it, the air from outside left out.
    from_outside, from_land : ndarray, shape (county,)
        Share of a county's air that comes from outside the region in a sub-step, and the part of it from over land.
    to_outside : ndarray, shape (county,)
        Share that leaves the region in a sub-step.
    substeps : int
        Sub-steps of an hour; no cell loses more than 0.9 of its air in one.
    crossing_h : float
        Hours in which the region's air is exchanged; infinite in calm air.
    removed_per_day : float
        Divergence that the adjustment took away, mean over the cells of its size. [d-1]
    net_per_day : float
        Largest net outflow of a cell that is left, share of its air. [d-1]
    """

    matrix: csr_matrix
    from_outside: np.ndarray
    from_land: np.ndarray
    to_outside: np.ndarray
    substeps: int
    crossing_h: float
    removed_per_day: float
    net_per_day: float

    @property
    def stays(self) -> np.ndarray:
        """Share of a county's own air that stays in a sub-step, shape (county,)."""
        return self.matrix.diagonal()


class Transport:
    """Turns the wind of the counties into :class:`Hour` matrices; what depends on the region alone is done once.

    Parameters
    ----------
    region : Region
    """

    def __init__(self, region: Region) -> None:
        from scipy import sparse

        self.region = region
        n, faces = region.n_cells, len(region.first)
        inner = region.second != OUTSIDE
        rows = np.concatenate([region.first, region.second[inner]])
        columns = np.concatenate([np.arange(faces), np.flatnonzero(inner)])
        signs = np.concatenate([np.ones(faces), -np.ones(int(inner.sum()))])
        self._out = sparse.csr_matrix((signs, (rows, columns)), shape=(n, faces))  # net outflow of cells from faces
        # Corrections in proportion to a border's length; a border whose pieces cancel still lets some air through.
        length = np.hypot(region.east_km, region.north_km)
        self._weight = np.maximum(length, 1e-3 * np.sqrt(region.cell_area_km2[region.first]))
        laplace = (self._out @ sparse.diags(self._weight) @ self._out.T).tocsc()
        self._solve = sparse.linalg.factorized(laplace)

    def flow(self, u_m_s: np.ndarray, v_m_s: np.ndarray) -> tuple[np.ndarray, float, float]:
        """Flow through every face, adjusted so that no cell gathers or loses air.

        Parameters
        ----------
        u_m_s, v_m_s : ndarray, shape (county,)
            Wind towards east and north. [m s-1]

        Returns
        -------
        flow : ndarray, shape (face,)
            From first to second, per unit depth. [km2 h-1]
        removed_per_day, net_per_day : float
            As in :class:`Hour`.

        References
        ----------
        .. [1] Least change of the wind on the borders under the constraint of no net outflow [S70].
        """
        region = self.region
        cosine, sine = np.cos(region.turn_rad), np.sin(region.turn_rad)
        east, north = u_m_s * cosine + v_m_s * sine, v_m_s * cosine - u_m_s * sine
        area = region.cell_area_km2
        u, v = (np.bincount(region.cell_of, wind * region.area_km2, len(area)) / area for wind in (east, north))
        other = np.where(region.second == OUTSIDE, region.first, region.second)
        flow = KM_PER_HOUR * 0.5 * (
            (u[region.first] + u[other]) * region.east_km + (v[region.first] + v[other]) * region.north_km
        )  # fmt: skip
        gathered = self._out @ flow
        for _ in range(2):  # the second takes away what rounding left
            flow = flow - self._weight * (self._out.T @ self._solve(self._out @ flow))
        net = np.abs(self._out @ flow) / area * 24.0
        return flow, float(np.mean(np.abs(gathered) / area * 24.0)), float(net.max(initial=0.0))

    def hour(self, u_m_s: np.ndarray, v_m_s: np.ndarray) -> Hour:
        """What an hour of wind moves: see :meth:`flow` for the arguments."""
        from scipy import sparse

        region, area = self.region, self.region.cell_area_km2
        flow, removed, left = self.flow(u_m_s, v_m_s)
        n = len(area)
        inner = region.second != OUTSIDE
        source = np.where(flow >= 0.0, region.first, region.second)
        sink = np.where(flow >= 0.0, region.second, region.first)
        size = np.abs(flow)
        leaves = np.bincount(source[source != OUTSIDE], size[source != OUTSIDE], n)
        substeps = max(1, int(np.ceil(np.max(leaves / area, initial=0.0) / LARGEST_COURANT)))
        step = 1.0 / substeps
        enters = np.bincount(sink[source == OUTSIDE], size[source == OUTSIDE], n) / area * step
        exits = np.bincount(source[sink == OUTSIDE], size[sink == OUTSIDE], n) / area * step
        between = sparse.csr_matrix(
            (size[inner] * step / area[sink[inner]], (sink[inner], source[inner])), shape=(n, n)
        )  # fmt: skip
        counties = len(region.cell_of)
        index = np.arange(counties)
        spread = sparse.csr_matrix((np.ones(counties), (index, region.cell_of)), shape=(counties, n))
        share = region.area_km2 / area[region.cell_of]
        gather = sparse.csr_matrix((share, (region.cell_of, index)), shape=(n, counties))
        stays = 1.0 - leaves / area * step
        matrix = (spread @ between @ gather + sparse.diags(stays[region.cell_of])).tocsr()
        out_total = float((exits * area).sum() / step)
        cell = region.cell_of
        return Hour(
            matrix=matrix,
            from_outside=enters[cell],
            from_land=np.where(region.water_edge, 0.0, enters[cell]),
            to_outside=exits[cell],
            substeps=substeps,
            crossing_h=float(area.sum() / out_total) if out_total > 0.0 else np.inf,
            removed_per_day=removed,
            net_per_day=left,
        )


@dataclass(frozen=True)
class Winds:
    """Wind by day and night of every county, (day, county) each; NaN on days without any."""

    u_day: np.ndarray
    v_day: np.ndarray
    u_night: np.ndarray
    v_night: np.ndarray

    def of(self, day: int, part: str) -> tuple[np.ndarray, np.ndarray] | None:
        """Wind of a part ("day", "night") of a day, or None."""
        u, v = (self.u_day, self.v_day) if part == "day" else (self.u_night, self.v_night)
        return None if np.isnan(u[day]).any() else (u[day], v[day])


def winds(
    table: Any, dates: np.ndarray, county_ids: tuple[str, ...], latitude_deg: np.ndarray, longitude_deg: np.ndarray,
    settings: Any,
) -> Winds:  # fmt: skip
    """Wind of every county, day and part from the rows that people entered.

    A row without a county holds for the whole region. Where only some counties have a wind, the others take those by
    inverse distance, or the region's row. Where only the day or only the night has one, it serves for both. Low winds
    are raised to `wind_top_m` by a power law.

    Parameters
    ----------
    table : DataFrame
        Table of a case.
    dates : ndarray of datetime64[D], shape (day,)
    county_ids : tuple of str
    latitude_deg, longitude_deg : ndarray, shape (county,)
    settings : Settings

    Returns
    -------
    Winds
    """
    import pandas as pd

    days, counties = len(dates), len(county_ids)
    given = np.full((2, 2, days, counties + 1), np.nan)  # component, part, day, county (last: the region)
    if len(table) and days:
        named = table["county_id"].fillna("").astype(str)
        position = pd.Index(county_ids).get_indexer(pd.Index(named))
        position = np.where((named == "").to_numpy(), counties, position)
        day = (pd.to_datetime(table["date"]).to_numpy().astype("datetime64[D]") - dates[0]).astype(int)
        parts = table["day_part"].fillna("both").astype(str) if "day_part" in table else pd.Series("both", table.index)
        inside = (day >= 0) & (day < days) & (position >= 0)
        for part, name in enumerate(("day", "night")):
            rows = inside & parts.isin([name, "both", ""]).to_numpy()
            for component, values in enumerate(_components(table, settings, name)):
                given[component, part, day[rows], position[rows]] = values[rows]
    filled = _fill_counties(given, latitude_deg, longitude_deg)
    filled = np.where(np.isnan(filled), filled[:, ::-1], filled)
    return Winds(filled[0, 0], filled[1, 0], filled[0, 1], filled[1, 1])


def _components(table: Any, settings: Any, part: str) -> tuple[np.ndarray, np.ndarray]:
    """Wind towards east and north of each row, raised from its height."""

    def column(name: str) -> np.ndarray:
        return table[name].to_numpy(float) if name in table else np.full(len(table), np.nan)

    speed, angle, height = column("wind_speed_m_s"), np.radians(column("wind_from_deg")), column("height_m")
    u, v = column("u_m_s"), column("v_m_s")
    u = np.where(np.isnan(u), -speed * np.sin(angle), u)
    v = np.where(np.isnan(v), -speed * np.cos(angle), v)
    power = settings.wind_power_day if part == "day" else settings.wind_power_night
    top = settings.wind_top_m
    low = np.where(np.isnan(height), top, np.clip(height, 2.0, top))
    return u * (top / low) ** power, v * (top / low) ** power


def _fill_counties(given: np.ndarray, latitude_deg: np.ndarray, longitude_deg: np.ndarray) -> np.ndarray:
    """Counties without a wind take the region's, else that of the others by inverse distance."""
    from etflux.weather import great_circle_km

    own, region = given[..., :-1], given[..., -1:]
    found = np.where(np.isnan(own), region, own)
    known, missing = np.isfinite(own), np.isnan(found)
    if (known.any(axis=-1) & missing.any(axis=-1)).any():
        km = great_circle_km(latitude_deg, longitude_deg, latitude_deg, longitude_deg)
        weight = 1.0 / np.maximum(km, 1.0)
        total = known @ weight
        with np.errstate(invalid="ignore", divide="ignore"):
            blended = (np.where(known, own, 0.0) @ weight) / total
        found = np.where(missing, blended, found)
    return found
