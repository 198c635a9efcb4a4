"""When and how much to irrigate: dated depths, and a rule that waits for the root zone to dry.

A rule says from which to which stage it holds, at which depletion it starts, how far it fills, and what the system
can bring. It decides on the depletion at the day's start against the readily available water with yesterday's p.
Depths are net (what infiltrates) unless they are called gross (what is pumped).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from etflux.findings import Finding

if TYPE_CHECKING:
    import pandas as pd

# What a blank in a rule means. start_below 0: when all readily available water is used (FAO-56 p. 171);
# 60 % late: extension practice for the last irrigation of corn; interval: common practice, no source.
DEFAULTS: Mapping[str, float] = {
    "start_below_pct": 0.0,
    "late_depletion_pct": 60.0,
    "fill_to_pct": 100.0,
    "least_mm": 0.0,
    "most_mm": np.inf,
    "shortest_interval_d": 4.0,
    "capacity_mm_d": np.inf,
    "rain_room_mm": 0.0,
    "season_limit_mm": np.inf,
}


@dataclass(frozen=True)
class Rule:
    """Irrigation rules of the units, arrays of shape (unit,).

    Parameters
    ----------
    start_below_share : ndarray
        Start when no more than this share of the readily available water is left, 0-1.
    late_depletion_share : ndarray
        Share of all available water that may be used late (corn: from begin dent), 0-1.
    fill_to_share : ndarray
        Fill to this share of all available water, 0-1.
    least_mm, most_mm : ndarray
        Net depth at once, `most_mm` also by what the system brings in the shortest interval; less than the least is
        not brought, the rule waits. `most_mm` 0: no rule. [mm]
    shortest_interval_d : ndarray
        Days from one irrigation to the next at least. [d]
    rain_room_mm : ndarray
        Net depth left unfilled for rain. [mm]
    season_limit_mm : ndarray
        Gross depth in a season, dated depths included. [mm]
    """

    start_below_share: np.ndarray
    late_depletion_share: np.ndarray
    fill_to_share: np.ndarray
    least_mm: np.ndarray
    most_mm: np.ndarray
    shortest_interval_d: np.ndarray
    rain_room_mm: np.ndarray
    season_limit_mm: np.ndarray

    @cached_property
    def used_share(self) -> np.ndarray:
        """Share of the readily available water that is used when irrigation starts."""
        return 1.0 - self.start_below_share

    @cached_property
    def unfilled_share(self) -> np.ndarray:
        """Share of all available water that is left unfilled."""
        return 1.0 - self.fill_to_share


@dataclass(frozen=True)
class Events:
    """Dated irrigations: positions of day and unit, and the gross depth. [mm]"""

    day: np.ndarray
    unit: np.ndarray
    gross_mm: np.ndarray


def rule_depth(
    rule: Rule,
    dr_mm: ArrayLike,
    taw_mm: ArrayLike,
    raw_mm: ArrayLike,
    days_since: ArrayLike,
    season_gross_mm: ArrayLike,
    efficiency: ArrayLike,
    in_window: ArrayLike = True,
    late: ArrayLike = False,
) -> np.ndarray:
    """Net depth that the rule brings today.

    Parameters
    ----------
    rule : Rule
        Rules of the units.
    dr_mm, taw_mm, raw_mm : array_like
        Root zone depletion at the day's start, what the roots can hold, what they take up without stress. [mm]
    days_since : array_like
        Days since the last irrigation: 1 if it was yesterday. [d]
    season_gross_mm : array_like
        Pumped so far this season. [mm]
    efficiency : array_like
        Net over gross, above 0 to 1.
    in_window, late : array_like of bool
        Whether the rule holds today; whether the late depletion is allowed.

    Returns
    -------
    ndarray
        0 where nothing is due; NaN where the depletion is NaN. [mm]
    """
    dr, taw = np.asarray(dr_mm, float), np.asarray(taw_mm, float)
    allowed = np.where(late, rule.late_depletion_share * taw, rule.used_share * np.asarray(raw_mm, float))
    due = (dr >= allowed) & np.asarray(in_window) & (np.asarray(days_since) >= rule.shortest_interval_d)
    unfilled = np.maximum(rule.unfilled_share * taw, rule.rain_room_mm)
    within_limit = (rule.season_limit_mm - np.asarray(season_gross_mm, float)) * np.asarray(efficiency, float)
    depth = np.minimum(dr - unfilled, np.minimum(rule.most_mm, within_limit))
    return np.maximum(depth, 0.0) * (due & (depth >= rule.least_mm))


def gross_parts(
    net_mm: ArrayLike, efficiency: ArrayLike, loss_to_air: ArrayLike
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Gross depth of a net one, and where the difference goes.

    Parameters
    ----------
    net_mm : array_like
        Depth that infiltrates into the root zone. [mm]
    efficiency : array_like
        Net over gross, above 0 to 1.
    loss_to_air : array_like of bool
        True for sprinklers, whose loss evaporates before it reaches the ground; the loss of a surface method or of
        drip reaches the ground and passes below the roots.

    Returns
    -------
    gross, to_air, below : ndarray
        gross = net + to_air + below. [mm]

    Examples
    --------
    >>> gross, to_air, below = gross_parts([15.0, 15.0], 0.75, [True, False])
    >>> gross, to_air, below
    (array([20., 20.]), array([5., 0.]), array([0., 5.]))
    """
    net = np.asarray(net_mm, float)
    gross = net / np.asarray(efficiency, float)
    loss = gross - net
    to_air = loss * np.asarray(loss_to_air, float)
    return gross, to_air, loss - to_air


def rules_for_units(units: pd.DataFrame, rules: pd.DataFrame) -> Rule:
    """Rules of the units by their `rule_id`; a unit without one, or a rainfed one, gets a rule that brings nothing.

    Parameters
    ----------
    units : DataFrame
        Columns rule_id, efficiency (net over gross) and irrigated; a unit whose irrigated is False has no rule.
    rules : DataFrame
        The table irrigation_rules of a case; blanks mean :data:`DEFAULTS`.

    Returns
    -------
    Rule
    """
    by_id = rules.drop_duplicates("rule_id").set_index("rule_id")
    position = np.full(len(units), -1)
    if "rule_id" in units:
        position = by_id.index.get_indexer(units["rule_id"].array)
    has = position >= 0
    if "irrigated" in units:
        has &= units["irrigated"].to_numpy(bool)

    def column(name: str, scale: float = 1.0) -> np.ndarray:
        given = by_id[name].to_numpy(float) if name in by_id else np.full(len(by_id), np.nan)
        given = np.append(np.where(np.isnan(given), DEFAULTS[name], given), DEFAULTS[name])
        return given[position] * scale

    system = column("capacity_mm_d") * np.maximum(column("shortest_interval_d"), 1.0)
    most = np.minimum(column("most_mm"), system * units["efficiency"].to_numpy(float))
    return Rule(
        start_below_share=column("start_below_pct", 0.01),
        late_depletion_share=column("late_depletion_pct", 0.01),
        fill_to_share=column("fill_to_pct", 0.01),
        least_mm=column("least_mm"),
        most_mm=np.where(has, most, 0.0),
        shortest_interval_d=column("shortest_interval_d"),
        rain_room_mm=column("rain_room_mm"),
        season_limit_mm=column("season_limit_mm"),
    )


def dated_events(units: pd.DataFrame, events: pd.DataFrame, dates: np.ndarray) -> Events:
    """Dated irrigations of a case as positions; all parts of a stand get the stand's depth.

    Parameters
    ----------
    units : DataFrame
        Columns stand_id and efficiency (net over gross).
    events : DataFrame
        The table irrigation_events: stand_id, date, depth_gross_mm or depth_net_mm; the gross depth wins.
    dates : ndarray of datetime64[D], shape (day,)
        Days of the run, one after the other; events outside are left out.

    Returns
    -------
    Events
        Sorted by day.
    """
    day = (events["date"].to_numpy("datetime64[D]") - dates[0]).astype(int)
    inside = (day >= 0) & (day < len(dates))
    stand_id, unit_stand = events["stand_id"].to_numpy(object), units["stand_id"].to_numpy(object)
    order = np.argsort(unit_stand.astype(str), kind="stable")
    sorted_ids = unit_stand[order].astype(str)
    first = np.searchsorted(sorted_ids, stand_id.astype(str), "left")
    count = np.where(inside, np.searchsorted(sorted_ids, stand_id.astype(str), "right") - first, 0)
    event = np.repeat(np.arange(len(events)), count)
    nth = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count)
    unit = order[first[event] + nth]

    nothing = np.full(len(events), np.nan)
    gross, net = (
        events[name].to_numpy(float) if name in events else nothing for name in ("depth_gross_mm", "depth_net_mm")
    )
    efficiency = units["efficiency"].to_numpy(float)[unit]
    depth = np.where(np.isnan(gross[event]), net[event] / efficiency, gross[event])
    by_day = np.argsort(day[event], kind="stable")
    return Events(day[event][by_day], unit[by_day], depth[by_day])


def rule_problems(rules: pd.DataFrame) -> list[Finding]:
    """Rules that could never irrigate, because the least depth is above what may or can be brought at once."""

    def column(name: str) -> np.ndarray:
        given = rules[name].to_numpy(float) if name in rules else np.full(len(rules), np.nan)
        return np.where(np.isnan(given), DEFAULTS[name], given)

    system = column("capacity_mm_d") * np.maximum(column("shortest_interval_d"), 1.0)
    least = column("least_mm")
    return [
        Finding(
            "irrigation-least-too-high", "irrigation_rules", int(row), "least_mm", float(least[row]),
            f"rule {rules['rule_id'].iloc[row]}",
        )
        for row in np.flatnonzero(least > np.minimum(column("most_mm"), system))
    ]  # fmt: skip
