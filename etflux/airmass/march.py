"""Day after day: morning, heat, depth, then hour by hour wind, water and mixing; the night; the next morning.

One iteration serves the real world, the other worlds, the ranges and the random draws: they differ in the tags that are
told apart, in the copies of the region, and in what :class:`Hooks` put into a day.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from etflux import column
from etflux.airmass import mornings, tracers
from etflux.airmass.depths import Depths, depths_of, interpolated
from etflux.airmass.energy import Energy, Sky, energy_of, fetch_weights, sky_of
from etflux.airmass.inputs import AirInputs, Day, Variation, day_of
from etflux.airmass.mornings import Evening
from etflux.airmass.tracers import FLOOR, HUMIDITY, Ground, Layout, State, Stepper
from etflux.column import EDGES, HOURS, LAYER_MASS
from etflux.profiles import Morning
from etflux.wind import Hour, Transport

if TYPE_CHECKING:
    from etflux.case import Settings

IDLE_MASS = 240.0  # mixed where a county has no input that day, so that its air goes on; nothing of it is shown
SUBSIDENCE_HEIGHT_M = 1000.0
EMITTED, WIND, REPLACED = "left the ground", "carried out of the region by the wind", "replaced by other air"
BACKGROUND, TOP = "replaced by background air at night", "left below sinking air"
MIXED, ALOFT = "in the mixed air", "aloft, not mixed again"

Ledger = dict[str, np.ndarray]


@dataclass(frozen=True)
class Course:
    """One day of every row: what drove it and what the mixed air held, by hour edge 0 to 24.

    Parameters
    ----------
    day, morning, energy, depths
        The day's inputs and drivers.
    values : ndarray, shape (hour + 1, row, tracer)
        Tracers in the mixed air; NaN before sunrise and where input is missing.
    home : ndarray, shape (hour + 1, row, tag), or None
        The part of the tags that stayed in its county.
    theta_k : ndarray, shape (row, hour + 1)
        Of the air that the heat has mixed.
    kept : ndarray, shape (row, layer), or None
        Share of yesterday's air that is still there; None on the first day.
    carried : ndarray, shape (row, active layer)
        All tags at sunrise.
    crops_carried : ndarray, shape (row, active layer)
        Those of the crops.
    ledger : dict of ndarray, shape (source,)
        Where tagged water came from and went, `MIXED` and `ALOFT` at the end of the night. [10^6 kg]
    wind : Hour or None
        An hour of the day's wind.
    """

    day: Day
    morning: Morning
    energy: Energy
    depths: Depths
    values: np.ndarray
    home: np.ndarray | None
    theta_k: np.ndarray
    kept: np.ndarray | None
    carried: np.ndarray
    crops_carried: np.ndarray
    ledger: Ledger
    wind: Hour | None


@dataclass(frozen=True)
class Hooks:
    """What the other worlds put into a day.

    Parameters
    ----------
    morning : callable, optional
        Takes the number of the day; gives the tags that the real morning carried, (row, layer), and the share of
        yesterday's air that was kept there: the world's morning is the real one less those plus its own.
    heat : callable, optional
        Takes the march, the day and its morning; gives energy and depths.
    """

    morning: Callable[[int], tuple[np.ndarray, np.ndarray]] | None = None
    heat: Callable[[March, Day, Morning], tuple[Energy, Depths]] | None = None


class March:
    """The days of one set of inputs, as an iterator of :class:`Course`.

    Parameters
    ----------
    inputs : AirInputs
    settings : Settings
    layout : Layout
    members : tuple of Variation
        Copies of the region.
    hooks : Hooks
    """

    def __init__(
        self, inputs: AirInputs, settings: Settings, layout: Layout, members: tuple[Variation, ...] = (Variation(),),
        hooks: Hooks | None = None,
    ) -> None:  # fmt: skip
        self.inputs, self.settings, self.layout, self.members = inputs, settings, layout, members
        self.hooks = hooks or Hooks()
        self.counties = len(inputs.area_km2)
        self.fetch = fetch_weights(inputs.latitude_deg, inputs.longitude_deg, inputs.area_km2, settings.heat_fetch_km)
        self.background = np.empty(0)  # of the day, (layer,)
        self.stepper = Stepper(layout, len(members), self.counties, inputs.area_km2)
        self.transport = None if inputs.region is None or inputs.winds is None else Transport(inputs.region)
        self._sky: tuple[int, Sky] | None = None
        self.state: State | None = None
        self.evening: Evening | None = None

    def __iter__(self) -> Iterator[Course]:
        for number in range(len(self.inputs.dates)):
            yield self._one_day(number)

    def energy_and_depths(
        self, day: Day, morning: Morning, extra_longwave_mj: np.ndarray | None = None,
        heat_ratio: np.ndarray | None = None,
    ) -> tuple[Energy, Depths]:  # fmt: skip
        """Heat of the day and the depth that it mixes."""
        if self._sky is None or self._sky[0] != day.number:
            self._sky = (day.number, sky_of(self.inputs, day.number, self.settings))
        energy = energy_of(day, self._sky[1], morning.start_hour, self.fetch, self.settings, extra_longwave_mj)
        whole = self.layout.outside  # only the real world shows the depth without entrainment
        return energy, depths_of(day, morning, energy.supply, self.members, self.settings, heat_ratio, whole)

    def _one_day(self, number: int) -> Course:
        day, ledger = day_of(self.inputs, number, self.members), Ledger()
        self.background = mornings.background(self.inputs, number, self.settings)
        morning, kept = self._morning(day)
        of_day = self.hooks.heat
        energy, depths = self.energy_and_depths(day, morning) if of_day is None else of_day(self, day, morning)
        state = self._begin(day, morning, energy, depths, kept, ledger)
        tags = state.moved[:, :, self.layout.tags]
        carried, of_crops = tags.sum(axis=2), tags[:, :, self.layout.crop_tags].sum(axis=2)
        hours = self._hours(number, "day")
        state, values, home = self._daylight(day, energy, depths, state, hours, ledger)
        state = self._night(day, state, ledger)
        self._stock(state, depths, ledger)
        self.state, self.evening = state, Evening(depths.evening_m, day.t_max_c)
        return Course(
            day, morning, energy, depths, values, home, mixed_theta(morning, energy, depths), kept, carried, of_crops,
            ledger, None if hours is None else hours[0],
        )  # fmt: skip

    def _morning(self, day: Day) -> tuple[Morning, np.ndarray | None]:
        """Morning air, and the share of yesterday's that is still in it."""
        morning = mornings.morning_of(self.inputs, day, self.evening, self.settings)
        if self.state is None:
            return morning, None
        layers, q_model, q = self.state.layers, self.state.q_all, morning.q_kg_kg
        floor = np.minimum(self.background, q_model)
        floor[:, :layers] = self.state.moved[:, :, FLOOR]
        floor = np.minimum(floor, self.settings.background_share * np.where(np.isnan(q), q_model, q))
        goes_on = mornings.carries_model(day, morning) | np.isnan(q).any(axis=1)
        kept = np.where(goes_on[:, None], 1.0, mornings.kept_share(q, q_model, floor))
        if self.hooks.morning is not None:
            less, kept = self.hooks.morning(day.number)
            own = np.zeros_like(q)
            own[:, :layers] = self.state.moved[:, :, self.layout.tags].sum(axis=2)
            q = np.maximum(q - less + own * kept, 0.0)
        return replace(morning, q_kg_kg=np.where(goes_on[:, None], q_model, q)), kept

    def _begin(
        self, day: Day, morning: Morning, energy: Energy, depths: Depths, kept: np.ndarray | None, ledger: Ledger
    ) -> State:
        """State at sunrise."""
        q = np.where(np.isnan(morning.q_kg_kg), self.background, morning.q_kg_kg)
        total = np.where(day.valid, day.water_mm.sum(axis=1), 0.0)
        early = np.nan_to_num(total * (energy.water_share - energy.water_after)[:, -1])
        floor = np.where(np.isnan(depths.floor), IDLE_MASS, depths.floor)
        layers = tracers.active_layers(depths.water[:, -1], self.state)
        background = np.minimum(self.background, self.settings.background_share * q)
        state, lost = tracers.begin(self.layout, self.state, q, kept, background, early, floor, layers)
        if lost is not None:
            self._book(ledger, REPLACED, self._by_source(lost))
        return state

    def _daylight(
        self, day: Day, energy: Energy, depths: Depths, state: State, hours: list[Hour] | None, ledger: Ledger
    ) -> tuple[State, np.ndarray, np.ndarray | None]:
        """Hours from sunrise to sunset: wind, water, mixing."""
        values = np.full((len(HOURS), len(day.t_max_c), self.layout.tracers), np.nan)
        home = None if state.home is None else np.full((*values.shape[:2], state.home.shape[2]), np.nan)
        water = np.where(day.valid[:, None], day.water_mm, 0.0)
        mixed = np.where(np.isnan(depths.water) | ~day.valid[:, None], IDLE_MASS, depths.water)
        share, after = (np.diff(np.nan_to_num(part)) for part in (energy.water_share, energy.water_after))
        first, last = day.daylight
        grounds = [
            Ground(
                water.sum(axis=1) * after[:, hour], water * share[:, hour, None], mixed[:, hour + 1],
                mixed[:, hour] if hour > first else None,
            )
            for hour in range(first, last)
        ]  # fmt: skip
        self._book(ledger, EMITTED, water * share[:, first:last].sum(axis=1)[:, None])
        if hours is None and self.settings.subsidence_m <= 0.0:
            shown = (
                None if self.layout.outside else (round(self.settings.contribution_hour) - first - 1, last - first - 1)
            )
            found = self.stepper.still_day(state, grounds, shown)
        else:
            found = []
            for ground in grounds:
                state, mixed_air, left = self.stepper.step(state, hours, ground)
                found.append(mixed_air)
                ledger[WIND] = ledger.get(WIND, 0.0) + left
                state = self._sink(state, ledger)
        for place, (all_values, home_values) in enumerate(found, first + 1):
            if all_values is not None:
                values[place] = all_values
            if home is not None and home_values is not None:
                home[place] = home_values
        for record in (values, home):
            if record is not None:
                record[last + 1 :] = record[last]  # after sunset the air keeps what it had
                record[:, ~day.valid] = np.nan
        return state, values, home

    def _night(self, day: Day, state: State, ledger: Ledger) -> State:
        """Hours from sunset to sunrise: wind, or a share of the air replaced by background air."""
        first, last = day.daylight
        hours = self._hours(day.number, "night")
        longer = np.repeat([member.residence_plus_d for member in self.members], self.counties)
        by_residence = np.exp(-1.0 / np.maximum(self.settings.residence_days + longer, 0.05))
        for _ in range(24 - (last - first)):
            if hours is not None:
                state, _, left = self.stepper.step(state, hours, None)
                ledger[WIND] = ledger.get(WIND, 0.0) + left
            state = self._sink(state, ledger)
        stays = by_residence if hours is None else np.ones_like(by_residence)
        state, lost = tracers.replace_air(state, self.layout, stays, by_residence)
        self._book(ledger, BACKGROUND, lost)
        q_all = state.q_all.copy()
        q_all[:, : state.layers] = state.moved[:, :, HUMIDITY]
        return replace(state, q_all=q_all)

    def _sink(self, state: State, ledger: Ledger) -> State:
        """An hour of air from above, where the settings ask for it."""
        if self.settings.subsidence_m <= 0.0:
            return state
        share = self.settings.subsidence_m / SUBSIDENCE_HEIGHT_M / 24.0
        state, lost = tracers.sink(state, self.layout, share)
        self._book(ledger, TOP, lost)
        return state

    def _hours(self, number: int, part: str) -> list[Hour] | None:
        """An hour of wind for every copy; None on days without wind."""
        if self.transport is None or self.inputs.winds is None:
            return None
        wind = self.inputs.winds.of(number, part)
        if wind is None:
            return None
        made = {
            factor: self.transport.hour(factor * wind[0], factor * wind[1])
            for factor in {member.wind for member in self.members}
        }
        return [made[member.wind] for member in self.members]

    def _by_source(self, tags: np.ndarray) -> np.ndarray:
        """Column sums of tags (row, layer, tag) by source, (row, source). [kg m-2]"""
        total = np.einsum("clt,l->ct", tags, LAYER_MASS[: tags.shape[1]])
        return total.reshape(len(tags), self.layout.sources, self.layout.ages).sum(axis=2)

    def _book(self, ledger: Ledger, term: str, water: np.ndarray) -> None:
        """Enter water (row, source) of every county into the ledger. [kg m-2] to [10^6 kg]"""
        area = np.tile(self.inputs.area_km2, len(self.members))
        ledger[term] = ledger.get(term, np.zeros(self.layout.sources)) + area @ water

    def _stock(self, state: State, depths: Depths, ledger: Ledger) -> None:
        """Enter what is in the air at the end of the night, below and above the depth of the day."""
        top = np.nan_to_num(depths.water[:, -1], nan=IDLE_MASS)
        below = column.mixing_weights(top, EDGES[: state.layers + 1]) / LAYER_MASS[: state.layers]
        tags = state.moved[:, :, self.layout.tags]
        self._book(ledger, MIXED, self._by_source(tags * below[:, :, None]))
        self._book(ledger, ALOFT, self._by_source(tags * (1.0 - below)[:, :, None]))


def mixed_theta(morning: Morning, energy: Energy, depths: Depths) -> np.ndarray:
    """Potential temperature of the air that the heat has mixed, (row, hour + 1). [K]"""
    return (mean_below(morning.theta_k, depths.by_heat) * depths.by_heat + energy.warmth) / depths.by_heat


def mean_below(values: np.ndarray, mass: np.ndarray) -> np.ndarray:
    """Mean of layers (row, layer) between the ground and masses (row, k)."""
    base = values[:, :1]
    total = np.concatenate([np.zeros((len(values), 1)), np.cumsum((values - base) * LAYER_MASS, axis=1)], axis=1)
    return base + interpolated(mass, EDGES, total) / mass
