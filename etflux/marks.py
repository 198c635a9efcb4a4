"""Growth marks: the days on which a stand emerges, covers the ground and ripens; when grass is green.

Every mark is a position on the record's day axis, as a float: below 0 before the record, past its end if the record
stops earlier (then projected), NaN where the mark does not exist. An annual crop's marks follow one clock, heat units
or days, which an observed date sets right for everything that comes after it.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, ch. 6, table 11.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings
    from etflux.weather import StationRecord

ANNUAL_MARKS = ("emergence", "cover10", "v8", "full_cover", "late", "maturity")
BASE_C, CEILING_C = 10.0, 30.0  # 50 and 86 °F
F_DAYS_TO_C = 5.0 / 9.0
PACE_DAYS = 10  # the pace of so many days carries heat units past the record's ends
LEAST_YEARS = 3  # earlier years that make a mean of a calendar day worth using
AHEAD_DAYS = 200  # marks are projected at most so far past the record
V8_SHARE = (600.0 - 475.0) / (1135.0 - 475.0)  # V8 between 10 % and full cover, corn's heat units
DAYS_PER_YEAR = 365.2425

LATE_PLANTED_FROM = (5, 10)  # soybean planted later hurries
LATE_PLANTED_MOST = 60.0
GREENUP_LATEST = (5, 15)  # after 15 May the green-up no longer moves
GREENUP_RECORD_FROM = (2, 15)
GREENUP_MEAN_C = 5.0
FREEZE_MARGIN_DAYS = 7  # [FAO56] table 11, note 4
AUTUMN_FROM = (8, 1)
HALF_YEAR = 184


def heat_units(t_max_c: ArrayLike, t_min_c: ArrayLike) -> np.ndarray:
    """Heat units of a day, each temperature kept between 10 and 30 °C before averaging.

    Parameters
    ----------
    t_max_c, t_min_c : array_like
        [degC]

    Returns
    -------
    ndarray
        [degC d]

    References
    ----------
    .. [1] The corn growing degree days of university extension, 86/50 °F.

    Examples
    --------
    A day of 87 and 63 °F has 24.5 °F-days:

    >>> (heat_units((87 - 32) / 1.8, (63 - 32) / 1.8) * 1.8).round(1).item()
    24.5
    """
    high = np.clip(np.asarray(t_max_c, float), BASE_C, CEILING_C)
    low = np.clip(np.asarray(t_min_c, float), BASE_C, CEILING_C)
    return 0.5 * (high + low) - BASE_C


def normals_ahead(values: np.ndarray, days: int = AHEAD_DAYS) -> np.ndarray:
    """Mean of the same calendar days in earlier years of the record, for the days after its end.

    Parameters
    ----------
    values : ndarray, shape (day, station)
    days : int
        How many days ahead.

    Returns
    -------
    ndarray, shape (days, station)
        NaN where fewer than three earlier years have a value.
    """
    n_days = len(values)
    ahead = np.arange(n_days, n_days + days)
    back = np.round(DAYS_PER_YEAR * np.arange(1, n_days // 365 + 2)).astype(int)[:, None]
    where = ahead - back
    there = (where >= 0)[..., None]
    found = np.where(there, values[np.clip(where, 0, n_days - 1)], np.nan)
    known = np.isfinite(found)
    count = known.sum(axis=0)
    return np.where(count >= LEAST_YEARS, np.where(known, found, 0.0).sum(axis=0) / np.maximum(count, 1), np.nan)


@dataclass(frozen=True)
class HeatClock:
    """Running heat units of every station, carried past both ends of the record.

    Parameters
    ----------
    sums : ndarray, shape (day, station)
        From the record's first day to 200 days past its end: normals of the station where it has them, else the pace
        of the last ten days. [degC d]
    pace : ndarray, shape (station,)
        Of the first ten days, for crops planted before the record. [degC]
    """

    sums: np.ndarray
    pace: np.ndarray

    @classmethod
    def of(cls, record: StationRecord) -> HeatClock:
        """Clock of a record."""
        daily = np.nan_to_num(heat_units(record.values["t_max_c"], record.values["t_min_c"]))
        ahead = normals_ahead(daily)
        last = daily[-PACE_DAYS:].mean(axis=0)
        sums = np.cumsum(np.concatenate([daily, np.where(np.isnan(ahead), last, ahead)]), axis=0)
        return cls(sums, daily[:PACE_DAYS].mean(axis=0))

    def read(self, day: np.ndarray, station: np.ndarray) -> np.ndarray:
        """Heat units up to and with a day; NaN where the day is."""
        inside = np.clip(np.nan_to_num(day), 0, len(self.sums) - 1).astype(int)
        start = self.sums[0, station] + (day + 0.0) * self.pace[station]
        return np.where(np.isnan(day), np.nan, np.where(day < 0.0, start, self.sums[inside, station]))

    def day_reaching(self, target: np.ndarray, station: np.ndarray) -> np.ndarray:
        """First day on which the sum reaches a target, for every unit at its station.

        Before the record at the pace of its first days; one day past the projection where it is never reached.
        """
        n_days, n_stations = self.sums.shape
        top = max(float(self.sums[-1].max(initial=0.0)), 0.0) + 1.0  # keeps the stations apart on one sorted axis
        flat = (self.sums + top * np.arange(n_stations)).T.ravel()
        wanted = np.clip(np.nan_to_num(target), 0.0, top) + top * station
        day = (np.searchsorted(flat, wanted, side="left") - n_days * station).astype(float)
        early = target - self.sums[0, station]
        with np.errstate(divide="ignore", invalid="ignore"):
            before = np.ceil(early / self.pace[station])
        day = np.where((early < 0.0) & np.isfinite(before), before, day)
        return np.where(np.isnan(target), np.nan, day)


def annual_marks(
    clock: HeatClock,
    station: np.ndarray,
    planting: np.ndarray,
    observed: Mapping[str, np.ndarray],
    requirement: np.ndarray,
    by_heat: np.ndarray,
) -> dict[str, np.ndarray]:
    """Marks of annual crops from planting on, by heat units or days, corrected by observed dates.

    Parameters
    ----------
    clock : HeatClock
    station : ndarray of int, shape (unit,)
    planting : ndarray, shape (unit,)
        Day of planting, NaN for none; its own heat units do not count.
    observed : mapping of str to ndarray, shape (unit,)
        Observed days by mark; NaN where none.
    requirement : ndarray, shape (mark, unit)
        Heat units [degC d] or days from planting to each of ANNUAL_MARKS.
    by_heat : ndarray of bool, shape (unit,)
        Whether the clock is heat units.

    Returns
    -------
    dict of str to ndarray, shape (unit,)
        Never one before the other.
    """
    base_day, base_need, last = planting, np.zeros(len(planting)), planting
    marks = {}
    for name, need in zip(ANNUAL_MARKS, requirement, strict=True):
        lack = need - base_need
        by_sum = clock.day_reaching(clock.read(base_day, station) + lack, station)
        seen = observed.get(name, np.full(len(planting), np.nan))
        dated = ~np.isnan(seen) & ~np.isnan(planting)
        day = np.where(dated, seen, np.where(by_heat, by_sum, base_day + lack))
        marks[name] = last = np.maximum(day, last)
        base_day = np.where(dated, seen, base_day)
        base_need = np.where(dated, need, base_need)
    return marks


def requirements(
    units: pd.DataFrame, settings: Settings, table: pd.DataFrame, planted: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """What each mark needs from planting on, and whether that is heat units.

    Parameters
    ----------
    units : DataFrame
        Cover columns, `hybrid_heat_units`, `latitude_deg`.
    settings : Settings
        `corn_marks` and `soybean_marks` decide for the covers of those ids, the cover's own `marks` for all others.
    table : DataFrame
        ``tables/heat_units.csv``, by the cover's id or else its tag.
    planted : ndarray of datetime64[D], shape (unit,)

    Returns
    -------
    requirement : ndarray, shape (mark, unit)
        [degC d] or whole [d].
    by_heat : ndarray of bool, shape (unit,)
    """
    cover = units["cover_id"].to_numpy(str)
    key = np.where(np.isin(cover, table["cover_id"].unique()), cover, units["tag_of_cover"].to_numpy(str))
    wanted = units["marks"].to_numpy(str).astype(object)
    wanted[cover == "corn"] = settings.corn_marks
    wanted[cover == "soybean"] = settings.soybean_marks
    by_heat = (wanted == "heat units") & np.isin(key, table["cover_id"].unique())

    ini, dev, mid, late = (
        units[name].to_numpy(float) for name in ("len_ini_d", "len_dev_d", "len_mid_d", "len_late_d")
    )
    emergence = np.minimum(np.nan_to_num(units["emergence_d"].to_numpy(float)), ini)
    steps = np.stack([emergence, ini - emergence, V8_SHARE * dev, (1.0 - V8_SHARE) * dev, mid, late])
    days = np.round(np.cumsum(steps, axis=0) * _late_planted(units, settings, ini + dev + mid + late, planted))
    heat = np.full(days.shape, np.nan)
    hybrid = units["hybrid_heat_units"].to_numpy(float)
    hybrid = np.where(np.isnan(hybrid), settings.default_hybrid_heat_units, hybrid)
    for row in table.itertuples():
        here = key == row.cover_id
        scale = hybrid / (row.of_hybrid_f * F_DAYS_TO_C) if row.of_hybrid_f else np.ones(len(units))
        heat[ANNUAL_MARKS.index(row.mark), here] = (row.heat_units_f * F_DAYS_TO_C * scale)[here]
    return np.where(by_heat, heat, days), by_heat


def _late_planted(units: pd.DataFrame, settings: Settings, total: np.ndarray, planted: np.ndarray) -> np.ndarray:
    """Soybean planted late hurries through all stages: a day less for every few days after 10 May (south: November)."""
    if not settings.soybean_late_planting_days:
        return np.ones(len(total))
    south = units["latitude_deg"].to_numpy(float) < 0.0
    year = planted.astype("datetime64[Y]")
    year = np.where(south & (_month(planted) <= 6), year - 1, year)
    month, day = LATE_PLANTED_FROM
    from_day = (year.astype("datetime64[M]") + month - 1 + np.where(south, 6, 0)).astype("datetime64[D]") + day - 1
    delay = np.where(np.isnat(planted), 0.0, (planted - from_day).astype(float))
    shorter = np.clip(delay, 0.0, LATE_PLANTED_MOST) / settings.soybean_late_planting_days
    return np.where(
        units["tag_of_cover"].to_numpy(str) == "soybean", 1.0 - shorter / np.where(total > 0, total, 1), 1.0
    )


def _month(dates: np.ndarray) -> np.ndarray:
    """Month of the year, 1 to 12."""
    return (dates.astype("datetime64[M]") - dates.astype("datetime64[Y]").astype("datetime64[M]")).astype(int) + 1


def freeze_marks(record: StationRecord, settings: Settings, year: int) -> dict[str, Any]:
    """When a year's grass season begins and ends at each station, from its freezes.

    Green-up: 7 days before the latest day of spring at or below the freeze limit, and then the first day whose 10-day
    mean is above 5 °C; settled after 15 May. The season ends 7 days after the first such freeze of autumn. Half a
    year later in the southern hemisphere. A record that starts after 15 February cannot tell; then the latitude's
    mean date is taken and called a default.

    Returns
    -------
    dict
        greenup, freeze, end : ndarray, shape (station,), day positions (NaN: not on record); defaulted,
        settled : ndarray of bool.

    References
    ----------
    .. [1] [FAO56] table 11, note 4: from 7 days before the last -4 °C of spring until 7 days after the first of
       autumn. The 10-day mean, and the mean date by latitude, are common practice, no source.
    """
    n_days, _ = record.shape
    south = record.latitude_deg < 0.0
    day = np.arange(n_days)[:, None]

    def at(month: int, dom: int) -> np.ndarray:
        """Position of a date in this season's year, half a year on in the south."""
        here = np.datetime64(f"{year:04d}-{month:02d}-{dom:02d}", "D")
        return (here - record.dates[0]).astype(int) + np.where(south, HALF_YEAR, 0)

    freezing = record.values["t_min_c"] <= settings.grass_freeze_c
    spring = (day >= at(1, 1)) & (day <= at(*GREENUP_LATEST))
    in_spring = freezing & spring
    last = np.where(in_spring.any(axis=0), n_days - 1 - in_spring[::-1].argmax(axis=0), at(1, 1) + FREEZE_MARGIN_DAYS)
    mild = _running_mean(record.values["t_mean_c"]) > GREENUP_MEAN_C
    warm = mild & (day >= last - FREEZE_MARGIN_DAYS)
    from_record = np.where(warm.any(axis=0), warm.argmax(axis=0), np.nan)
    told = at(*GREENUP_RECORD_FROM) >= 0  # the record shows this winter's end
    poleward = np.clip(np.abs(record.latitude_deg) - 35.0, 0.0, 25.0)
    mean_date = at(1, 1) + np.round(63.0 + 4.5 * poleward)
    in_autumn = freezing & (day >= at(*AUTUMN_FROM)) & (day < at(*AUTUMN_FROM) + 200)
    freeze = np.where(in_autumn.any(axis=0), in_autumn.argmax(axis=0).astype(float), np.nan)
    mean_freeze = at(1, 1) + np.round(320.0 - 4.5 * poleward)
    freeze = np.where(np.isnan(freeze) & (mean_freeze < 0.0), mean_freeze, freeze)  # an autumn before the record
    return {
        "greenup": np.where(told, from_record, mean_date),
        "freeze": freeze,
        "end": freeze + FREEZE_MARGIN_DAYS,
        "defaulted": ~told,
        "settled": at(*GREENUP_LATEST) < n_days,
    }


def _running_mean(t_mean_c: np.ndarray, days: int = 10) -> np.ndarray:
    """Mean of the ten days up to each; the first days take what there is."""
    good = np.isfinite(t_mean_c)
    sums = np.cumsum(np.where(good, t_mean_c, 0.0), axis=0)
    count = np.cumsum(good, axis=0)
    sums[days:] = sums[days:] - sums[:-days].copy()
    count[days:] = count[days:] - count[:-days].copy()
    return sums / np.maximum(count, 1)
