"""Humidity and tagged water on the layers of every county: moved by the wind, fed by the ground, mixed, carried over.

Tracers are kept as (row, layer, tracer), row = copy of the region and county. The first is humidity; the second its
part that no crop has moistened, so that tags never exceed the difference; then, where asked for, water of crops outside
the region; the tags, source by source and in each by age; and crop water by county of origin. What stayed in its own
county is kept apart (`home`), as is a column without wind (`still`), from which outside air takes its tags.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.column import EDGES, LAYER_MASS, mixing_weights
from etflux.wind import Hour

if TYPE_CHECKING:
    from scipy.sparse import csr_matrix

HUMIDITY, FLOOR = 0, 1
MixedAir = tuple[np.ndarray | None, np.ndarray | None]
CHUNK_BYTES = 1_000_000  # rows worked on together fit in the processor's cache
MANY_PARTS = 8  # fewer are not worth a thread
LEAST_LAYERS = 30  # kept even where the air mixes less; the replaced share counts the lowest 1500 kg m-2


@dataclass(frozen=True)
class Layout:
    """Which tracers there are.

    Parameters
    ----------
    sources, ages : int
    origins : int
        Counties of origin that are told apart, 0 for none.
    outside, home : bool
        Whether water of crops outside the region, and water that stayed in its county, is followed.
    is_crop : ndarray of bool, shape (source,)
    """

    sources: int
    ages: int
    is_crop: np.ndarray
    origins: int = 0
    outside: bool = False
    home: bool = False

    @property
    def tags(self) -> slice:
        """Places of the tags among the tracers."""
        first = 2 + int(self.outside)
        return slice(first, first + self.sources * self.ages)

    @property
    def by_origin(self) -> slice:
        """Places of crop water by county of origin."""
        return slice(self.tags.stop, self.tags.stop + self.origins)

    @property
    def tracers(self) -> int:
        """Number of tracers that the wind moves."""
        return self.tags.stop + self.origins

    @property
    def crop_tags(self) -> np.ndarray:
        """Which tags are crops', shape (tag,) bool."""
        return np.repeat(self.is_crop, self.ages)


@dataclass(frozen=True)
class State:
    """Tracers of the lowest layers that anything has been mixed into, and the humidity of all layers."""

    moved: np.ndarray  # (row, active layer, tracer)
    home: np.ndarray | None  # (row, active layer, tag)
    still: np.ndarray | None  # (row, active layer)
    q_all: np.ndarray  # (row, layer)

    @property
    def layers(self) -> int:
        """Number of active layers."""
        return self.moved.shape[1]


@dataclass(frozen=True)
class Ground:
    """What the ground adds in one hour and how much air takes it, (row, ...)."""

    humidity_mm: np.ndarray  # (row,)
    water_mm: np.ndarray  # (row, source)
    mixed: np.ndarray  # (row,) kg m-2
    mixed_before: np.ndarray | None = None  # (row,) an hour earlier


def active_layers(mixed: np.ndarray, before: State | None) -> int:
    """Layers that today's mixing or yesterday's tags reach."""
    deepest = float(np.nanmax(mixed, initial=0.0))
    reached = int(np.searchsorted(EDGES, deepest - 1e-9, side="left"))
    return min(max(reached, LEAST_LAYERS, 0 if before is None else before.layers), len(LAYER_MASS))


def begin(
    layout: Layout, before: State | None, q_start: np.ndarray, kept: np.ndarray | None, background: np.ndarray,
    early: np.ndarray, floor_mass: np.ndarray, layers: int,
) -> tuple[State, np.ndarray | None]:  # fmt: skip
    """Tracers at sunrise: the morning's humidity with yesterday's tags a day older, less what other air has taken.

    Parameters
    ----------
    layout : Layout
    before : State or None
        Evening of yesterday.
    q_start : ndarray, shape (row, layer)
        Humidity of the morning.
    kept : ndarray, shape (row, layer), or None
        Share of yesterday's tags that is still there.
    background : ndarray, shape (row, layer)
        Humidity of air that no crop has moistened.
    early : ndarray, shape (row,)
        Water that leaves before the time of the morning's profile, which holds it already. [mm]
    floor_mass : ndarray, shape (row,)
        [kg m-2]
    layers : int
        Active layers.

    Returns
    -------
    state : State
    lost : ndarray, shape (row, active layer, tag), or None
        Tags that other air has replaced, for the budget.
    """
    rows = len(q_start)
    moved = np.zeros((rows, layers, layout.tracers))
    home = np.zeros((rows, layers, layout.tags.stop - layout.tags.start)) if layout.home else None
    still = np.zeros((rows, layers)) if layout.outside else None
    lost = None
    if before is not None and kept is not None:
        deep = before.layers
        share = kept[:, :deep]
        old = before.moved * share[:, :, None]
        moved[:, :deep] = old
        lost = before.moved[:, :, layout.tags] - old[:, :, layout.tags]
        moved[:, :deep, layout.tags] = _older(old[:, :, layout.tags], layout)
        if home is not None and before.home is not None:
            home[:, :deep] = _older(before.home * share[:, :, None], layout)
        if still is not None and before.still is not None:
            still[:, :deep] = before.still * share
    q = q_start[:, :layers]
    moved[:, :, HUMIDITY] = q
    free = q - moved[:, :, layout.tags].sum(axis=2)
    in_floor = EDGES[:layers] < np.nanmax(floor_mass, initial=0.0)
    free = free - np.where(in_floor, (early / floor_mass)[:, None], 0.0)
    moved[:, :, FLOOR] = np.clip(np.minimum(background[:, :layers], free), 0.0, None)
    if layout.outside:
        room = np.maximum(q - moved[:, :, FLOOR] - moved[:, :, layout.tags].sum(axis=2), 0.0)
        moved[:, :, 2] = np.minimum(moved[:, :, 2], room)
    return State(moved, home, still, q_start), lost


def _older(tags: np.ndarray, layout: Layout) -> np.ndarray:
    """Tags a day older; the oldest are pooled."""
    if layout.ages == 1:
        return tags
    by_age = tags.reshape(*tags.shape[:2], layout.sources, layout.ages)
    aged = np.zeros_like(by_age)
    aged[..., 1:] = by_age[..., :-1]
    aged[..., -1] += by_age[..., -1]
    return aged.reshape(tags.shape)


class Stepper:
    """Carries a state through hours of wind and mixing, a few rows at a time.

    Parameters
    ----------
    layout : Layout
    copies, counties : int
    area_km2 : ndarray, shape (county,)
        For the budget.
    """

    def __init__(self, layout: Layout, copies: int, counties: int, area_km2: np.ndarray) -> None:
        self.layout, self.copies, self.counties, self.area = layout, copies, counties, area_km2
        self._spare: np.ndarray | None = None
        self._pool: ThreadPoolExecutor | None = None
        self._known: list[tuple[Hour, int, list[tuple[slice, csr_matrix]]]] = []  # matrices in pieces

    def step(self, state: State, winds: list[Hour] | None, ground: Ground | None) -> tuple[State, MixedAir, np.ndarray]:
        """One hour: move, then add and mix.

        Parameters
        ----------
        state : State
            Its arrays are used up.
        winds : list of Hour, one per copy, or None
        ground : Ground or None
            None at night: nothing is added or mixed.

        Returns
        -------
        state : State
        mixed_air : tuple of ndarray or None
            Tracers in the mixed air, (row, tracer), and of the part that stayed at home, (row, tag); None at night.
        left : ndarray, shape (source,)
            Tagged water that the wind took out of the region, every copy. [10^6 kg]
        """
        left = np.zeros(self.layout.sources)
        if winds is not None:
            moved = state.moved
            for copy, hour in enumerate(winds):
                rows = slice(copy * self.counties, (copy + 1) * self.counties)
                for _ in range(hour.substeps):
                    left += self._leaving(moved[rows], hour)
                    moved = self._move(moved, rows, hour, state)
                if state.home is not None:
                    state.home[rows] *= (hour.stays**hour.substeps)[:, None, None]
            state = replace(state, moved=moved)
        return state, (None, None) if ground is None else self._mix_all(state, ground), left

    def still_day(self, state: State, grounds: list[Ground], shown: tuple[int, ...] | None = None) -> list[MixedAir]:
        """All hours of a day without wind at once: what is mixed each hour is what lay below plus all that was added.

        Mixing deeper and deeper forgets the earlier steps, so that the state needs the last one only. With `shown`,
        places of hours, only those are worked out.
        """
        places = list(range(len(grounds))) if shown is None else [min(max(k, 0), len(grounds) - 1) for k in shown]
        water = np.cumsum([ground.water_mm for ground in grounds], axis=0)
        moist = np.cumsum([ground.humidity_mm for ground in grounds], axis=0)
        added = np.stack([self._added(Ground(moist[k], water[k], grounds[k].mixed)) for k in places])
        mixed = np.stack([grounds[k].mixed for k in places])
        hours, rows = mixed.shape
        weights = mixing_weights(mixed.T.reshape(-1), EDGES[: state.layers + 1]).reshape(rows, hours, -1)
        values = (np.matmul(weights, state.moved).swapaxes(0, 1) + added) / mixed[:, :, None]
        home: list[np.ndarray | None] = [None] * hours
        if state.home is not None:
            tags = added[:, :, self.layout.tags]
            home = list((np.matmul(weights, state.home).swapaxes(0, 1) + tags) / mixed[:, :, None])
        self._mix_all(state, Ground(moist[-1], water[-1], grounds[-1].mixed))
        found: list[MixedAir] = [(None, None)] * len(grounds)
        for k, place in enumerate(places):
            found[place] = (values[k], home[k])
        return found

    def _move(self, moved: np.ndarray, rows: slice, hour: Hour, state: State) -> np.ndarray:
        """One sub-step of one copy."""
        layout = self.layout
        old = moved[rows]
        flat = old.reshape(self.counties, -1)
        if self._spare is None or self._spare.shape != moved.shape:
            self._spare = np.empty_like(moved)
        new = self._spare[rows]

        def move(piece: tuple[slice, csr_matrix]) -> None:
            part, matrix = piece
            x = (matrix @ flat).reshape(-1, *old.shape[1:])
            inflow = hour.from_outside[part, None]
            x[:, :, HUMIDITY] += inflow * old[part, :, HUMIDITY]
            x[:, :, FLOOR] += inflow * old[part, :, FLOOR]
            if layout.outside and state.still is not None:
                room = old[part, :, HUMIDITY] - old[part, :, FLOOR]
                x[:, :, 2] += hour.from_land[part, None] * np.minimum(state.still[rows][part], np.maximum(room, 0.0))
            new[part] = x

        self._each(move, self._parts(hour, flat.shape[1]))
        if self.copies == 1:
            self._spare = moved
            return new
        old[...] = new
        return moved

    def _parts(self, hour: Hour, width: int) -> list[tuple[slice, csr_matrix]]:
        """Rows of a matrix in pieces whose results fit in the cache."""
        for known, known_width, parts in self._known:
            if known is hour and known_width == width:
                return parts
        size = max(1, CHUNK_BYTES // (8 * width))
        slices = [slice(k, min(k + size, self.counties)) for k in range(0, self.counties, size)]
        parts = [(part, hour.matrix[part] if len(slices) > 1 else hour.matrix) for part in slices]
        self._known = [*self._known[-2 * self.copies :], (hour, width, parts)]
        return parts

    def _leaving(self, moved: np.ndarray, hour: Hour) -> np.ndarray:
        """Tagged water that leaves the region in a sub-step, by source. [10^6 kg]"""
        edge = np.flatnonzero(hour.to_outside > 0.0)
        weight = self.area[edge] * hour.to_outside[edge]
        mass = LAYER_MASS[: moved.shape[1]]
        by_layer = np.tensordot(weight, moved[edge][:, :, self.layout.tags], axes=1)
        return (mass @ by_layer).reshape(self.layout.sources, self.layout.ages).sum(axis=1)

    def _mix_all(self, state: State, ground: Ground) -> MixedAir:
        """Add an hour's water and mix every row, in place."""
        layout = self.layout
        rows = len(state.moved)
        added = self._added(ground)
        values = np.empty((rows, layout.tracers))
        home_values = None if state.home is None else np.empty((rows, state.home.shape[2]))
        size = max(1, CHUNK_BYTES // (8 * state.layers * layout.tracers))
        weights = mixing_weights(ground.mixed, EDGES[: state.layers + 1])

        def mix(start: int) -> None:
            part = slice(start, start + size)
            moved, mixed, w = state.moved[part], ground.mixed[part], weights[part]
            home = None if state.home is None else state.home[part]
            still = None if state.still is None else state.still[part, :, None]
            upper = None
            if ground.mixed_before is not None:
                upper = UpperPart.of(moved, home, layout, mixed, ground.mixed_before[part])
            values[part] = mix_in_place(moved, added[part], mixed, w, upper)
            if home is not None and home_values is not None:
                home_values[part] = mix_in_place(home, added[part, layout.tags], mixed, w, upper)
            if still is not None:
                crops = ground.water_mm[part][:, layout.is_crop].sum(axis=1)[:, None]
                mix_in_place(still, crops, mixed, w)

        self._each(mix, range(0, rows, size))
        return values, home_values

    def _each(self, work: Callable[[Any], None], parts: Sequence[Any]) -> None:
        """Work on every part, on all processors if there are many; parts share nothing."""
        if len(parts) < MANY_PARTS:
            for part in parts:
                work(part)
            return
        if self._pool is None:
            self._pool = ThreadPoolExecutor(os.cpu_count() or 1)
        for _ in self._pool.map(work, parts):
            pass

    def _added(self, ground: Ground) -> np.ndarray:
        """What enters every tracer, (row, tracer). [kg m-2]"""
        layout = self.layout
        added = np.zeros((len(ground.mixed), layout.tracers))
        added[:, HUMIDITY] = ground.humidity_mm
        added[:, layout.tags.start : layout.tags.stop : layout.ages] = ground.water_mm
        if layout.origins:
            county = np.arange(len(added)) % self.counties
            added[np.arange(len(added)), layout.by_origin.start + county] = ground.water_mm[:, layout.is_crop].sum(
                axis=1
            )
        return added


def mix_in_place(
    x: np.ndarray, added: np.ndarray, mixed: np.ndarray, weights: np.ndarray, upper: UpperPart | None = None
) -> np.ndarray:
    """Mix tracers (row, layer, tracer) from the ground up with what was added; returns the mixed air's (row, tracer).

    As ``column.mix``, but on the array itself and only as far up as any row is mixed. `upper` tells the rows apart
    whose mixed air ended in the same layer an hour before.
    """
    reached = int((weights > 0.0).any(axis=0).sum())
    w = weights[:, :reached]
    part = x[:, :reached]
    total = np.matmul(w[:, None, :], part)[:, 0, :] + added
    above = None
    if upper is not None and len(upper.rows):
        above = upper.value(x)
        here = x[upper.rows, upper.layer]
        # What is mixed of this layer is what was mixed before and the next slice of what lies above it.
        mass, now = LAYER_MASS[upper.layer, None], w[upper.rows, upper.layer, None]
        total[upper.rows] += here * mass - above * (mass - now) - here * now
    value = total / mixed[:, None]
    share = w / LAYER_MASS[:reached]
    whole = int((share == 1.0).all(axis=0).sum())  # layers that every row mixes from top to bottom
    part[:, :whole] = value[:, None, :]
    part[:, whole:] += share[:, whole:, None] * (value[:, None, :] - part[:, whole:])
    if upper is not None and above is not None:
        share = share[upper.rows, upper.layer, None]
        x[upper.rows, upper.layer] = share * value[upper.rows] + (1.0 - share) * above
    return value


@dataclass(frozen=True)
class UpperPart:
    """Rows whose mixed air ends in the layer where it ended an hour before, and how sharply its two parts differ.

    A stored layer is one mean; its lower part was mixed, its upper part was not. Without telling them apart the mixed
    air would leak upwards every hour. The lower part is taken to be like the layer below; the upper one follows from
    the mean, `sharp` (0 to 1, (row,)) of the way, so far that no tracer, nor the room that tags leave, is below 0.
    """

    rows: np.ndarray
    layer: np.ndarray
    mass_before: np.ndarray  # mixed mass of the layer an hour before
    sharp: np.ndarray

    @classmethod
    def of(
        cls, moved: np.ndarray, home: np.ndarray | None, layout: Layout, mixed: np.ndarray, before: np.ndarray
    ) -> UpperPart:
        """Find the rows, and how sharp the parts may be."""
        now, then = (np.searchsorted(EDGES, mass, side="left") - 1 for mass in (mixed, before))
        rows = np.flatnonzero((now == then) & (now > 0) & (now < moved.shape[1]) & (EDGES[then + 1] - before > 1e-6))
        layer = now[rows]
        found = cls(rows, layer, before[rows] - EDGES[layer], np.ones(len(rows)))
        if not len(rows):
            return found
        kept, sharp = [moved], np.ones(len(rows))
        if home is not None:
            kept += [home]
        for x in kept:
            mean, upper = x[rows, layer], found.value(x)
            sharp = np.minimum(sharp, _no_further(mean, upper))
        mean, upper = (values[:, HUMIDITY] - values[:, FLOOR] - values[:, layout.tags].sum(axis=1)
                       for values in (moved[rows, layer], found.value(moved)))  # fmt: skip
        sharp = np.minimum(sharp, _no_further(mean[:, None], upper[:, None]))
        return replace(found, sharp=sharp)

    def value(self, x: np.ndarray) -> np.ndarray:
        """Tracers of the upper part, (row, tracer)."""
        mean, below = x[self.rows, self.layer], x[self.rows, self.layer - 1]
        ratio = self.mass_before / (LAYER_MASS[self.layer] - self.mass_before)
        return mean + (self.sharp * ratio)[:, None] * (mean - below)


def _no_further(mean: np.ndarray, upper: np.ndarray) -> np.ndarray:
    """Share of the way from mean to upper (row, tracer) that keeps all at 0 or above, (row,)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        share = np.where(upper < 0.0, np.maximum(mean, 0.0) / (mean - upper), 1.0)
    return np.clip(np.nan_to_num(share, nan=1.0).min(axis=1), 0.0, 1.0)


def sink(state: State, layout: Layout, share: float) -> tuple[State, np.ndarray]:
    """Let air sink: what comes from above holds no tags, and as much leaves sideways as comes.

    Implicit from the top down, so that any sinking is stable.

    Parameters
    ----------
    state : State
    layout : Layout
    share : float
        Divergence times the time: share of the air below any height that is exchanged.

    Returns
    -------
    state : State
    left : ndarray, shape (row, source)
        Tagged water that left. [kg m-2]
    """
    moved = state.moved.copy()
    mass = LAYER_MASS[: state.layers]
    top = EDGES[1 : state.layers + 1]
    from_above = np.zeros_like(moved[:, 0])
    from_above[:, HUMIDITY] = from_above[:, FLOOR] = moved[:, -1, FLOOR]
    for k in range(state.layers - 1, -1, -1):
        c = share * top[k] / mass[k]
        moved[:, k] = (moved[:, k] + c * from_above) / (1.0 + c)
        from_above = moved[:, k]
    lost = share * np.einsum("clt,l->ct", moved[:, :, layout.tags], mass)
    scaled = [None if other is None else other.copy() for other in (state.home, state.still)]
    for other in scaled:
        if other is not None:
            above = np.zeros_like(other[:, 0])
            for k in range(state.layers - 1, -1, -1):
                c = share * top[k] / mass[k]
                other[:, k] = (other[:, k] + c * above) / (1.0 + c)
                above = other[:, k]
    left = lost.reshape(len(moved), layout.sources, layout.ages).sum(axis=2)
    return replace(state, moved=moved, home=scaled[0], still=scaled[1]), left


def replace_air(state: State, layout: Layout, stays: np.ndarray, still_stays: np.ndarray) -> tuple[State, np.ndarray]:
    """Replace a share of the air by background air (a night without wind).

    Parameters
    ----------
    state : State
        Its arrays are changed.
    layout : Layout
    stays : ndarray, shape (row,)
        Share of the air that stays; 1 where the wind has moved it.
    still_stays : ndarray, shape (row,)
        The same for the column without wind, always by the residence.

    Returns
    -------
    state : State
    lost : ndarray, shape (row, source)
        Tagged water that left. [kg m-2]
    """
    moved = state.moved
    mass = LAYER_MASS[: state.layers]
    gone = np.einsum("clt,l->ct", moved[:, :, layout.tags], mass) * (1.0 - stays)[:, None]
    humidity = moved[:, :, FLOOR] + (moved[:, :, HUMIDITY] - moved[:, :, FLOOR]) * stays[:, None]
    if layout.outside and state.still is not None:
        moved[:, :, 2] = moved[:, :, 2] * stays[:, None] + (1.0 - stays)[:, None] * state.still
        state.still[...] *= still_stays[:, None]
    moved[:, :, HUMIDITY] = humidity
    moved[:, :, layout.tags.start :] *= stays[:, None, None]
    if state.home is not None:
        state.home[...] *= stays[:, None, None]
    return state, gone.reshape(len(moved), layout.sources, layout.ages).sum(axis=2)
