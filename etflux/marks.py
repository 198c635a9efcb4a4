"""Growth marks: the days on which a stand emerges, covers the ground, ripens and is harvested.

Every mark is a position on the record's day axis, as a float: below 0 before the record, past its end if the record
stops earlier (then projected), NaN where the mark does not exist. An annual crop's marks follow one clock, heat units
or days, which an observed date sets right for everything that comes after it.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, ch. 6, table 11.
"""

from __future__ import annotations

from collections.abc import Mapping
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
PROJECTION_DAYS = 10  # the pace of the last days carries marks past the record's end
LONGEST_PROJECTION = 150.0
V8_SHARE = (600.0 - 475.0) / (1135.0 - 475.0)  # V8 between 10 % and full cover, corn's heat units

GREENUP_LATEST = (5, 15)  # after 15 May the green-up no longer moves
GREENUP_RECORD_FROM = (2, 15)
GREENUP_MEAN_C = 5.0
GREENUP_DAYS = 7
AUTUMN_FROM = (8, 1)


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


def first_day_reaching(sums: np.ndarray, station: np.ndarray, target: np.ndarray) -> np.ndarray:
    """First day on which a running sum reaches a target, for every unit at its station.

    Parameters
    ----------
    sums : ndarray, shape (day, station)
        Running sums, never falling.
    station : ndarray of int, shape (unit,)
    target : ndarray, shape (unit,)

    Returns
    -------
    ndarray, shape (unit,)
        Past the record's end projected at the pace of its last ten days; NaN where the target is.
    """
    n_days, n_stations = sums.shape
    stride = float(sums.max(initial=0.0)) + 1.0  # keeps the stations apart on one sorted axis
    flat = (sums + stride * np.arange(n_stations)).T.ravel()
    wanted = np.clip(np.nan_to_num(target), 0.0, stride) + stride * station
    day = np.searchsorted(flat, wanted, side="left") - n_days * station
    last = sums[-1, station]
    back = max(0, n_days - 1 - PROJECTION_DAYS)
    pace = (last - sums[back, station]) / max(1, n_days - 1 - back)
    with np.errstate(divide="ignore", invalid="ignore"):
        ahead = np.ceil((target - last) / pace)
    projected = n_days - 1 + np.minimum(np.where(np.isfinite(ahead), ahead, LONGEST_PROJECTION), LONGEST_PROJECTION)
    return np.where(np.isnan(target), np.nan, np.where(target > last, projected, day.astype(float)))


def annual_marks(
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    planting: np.ndarray,
    observed: Mapping[str, np.ndarray],
    requirement: np.ndarray,
    by_heat: np.ndarray,
) -> dict[str, np.ndarray]:
    """Marks of annual crops from planting on, by heat units or day lengths, corrected by observed dates.

    Parameters
    ----------
    units : DataFrame
        With `station_index`.
    record : StationRecord
    settings : Settings
    planting : ndarray, shape (unit,)
        Day of planting; NaN for perennial covers.
    observed : mapping of str to ndarray, shape (unit,)
        Observed days by mark; NaN where none.
    requirement : ndarray, shape (mark, unit)
        Heat units [degC d] or days from planting to each of ANNUAL_MARKS.
    by_heat : ndarray of bool, shape (unit,)
        Whether the clock is heat units.

    Returns
    -------
    dict of str to ndarray, shape (unit,)
    """
    station = units["station_index"].to_numpy(int)
    daily = heat_units(record.values["t_max_c"], record.values["t_min_c"])
    sums = np.cumsum(np.nan_to_num(daily), axis=0)

    def clock(day: np.ndarray) -> np.ndarray:
        inside = np.clip(np.nan_to_num(day), 0, len(sums) - 1).astype(int)
        at = np.where(day < 0, 0.0, sums[inside, station])
        return np.where(by_heat, np.where(np.isnan(day), np.nan, at), day)

    base_day, base_need = planting, np.zeros(len(planting))
    marks = {}
    for position, name in enumerate(ANNUAL_MARKS):
        need = requirement[position]
        target = clock(base_day) + need - base_need
        day = np.where(by_heat, first_day_reaching(sums, station, target), target)
        seen = observed.get(name, np.full(len(planting), np.nan))
        marks[name] = np.where(np.isnan(seen), day, seen)
        base_day = np.where(np.isnan(seen), base_day, seen)
        base_need = np.where(np.isnan(seen), base_need, need)
    return marks


def requirements(
    units: pd.DataFrame, settings: Settings, table: pd.DataFrame, latitude: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """What each mark needs from planting on, and whether that is heat units.

    Parameters
    ----------
    units : DataFrame
        Cover columns, `hybrid_heat_units`, `planting_doy`.
    settings : Settings
    table : DataFrame
        ``tables/heat_units.csv``.
    latitude : ndarray, shape (unit,)
        The southern season is half a year away. [deg]

    Returns
    -------
    requirement : ndarray, shape (mark, unit)
        [degC d] or [d].
    by_heat : ndarray of bool, shape (unit,)
    """
    cover = units["cover_id"].to_numpy(str)
    wanted = units["marks"].to_numpy(str).astype(object)
    wanted[cover == "corn"] = settings.corn_marks
    wanted[cover == "soybean"] = settings.soybean_marks
    by_heat = (wanted == "heat units") & np.isin(cover, table["cover_id"].unique())

    lengths = {name: units[name].to_numpy(float) for name in ("len_ini_d", "len_dev_d", "len_mid_d", "len_late_d")}
    lengths = _late_planted(units, settings, lengths, cover, latitude)
    cover10 = lengths["len_ini_d"]
    full = cover10 + lengths["len_dev_d"]
    late = full + lengths["len_mid_d"]
    days = np.stack(
        [
            np.minimum(units["emergence_d"].to_numpy(float), cover10),
            cover10,
            cover10 + V8_SHARE * lengths["len_dev_d"],
            full,
            late,
            late + lengths["len_late_d"],
        ]
    )
    heat = np.full(days.shape, np.nan)
    hybrid = units["hybrid_heat_units"].to_numpy(float)
    hybrid = np.where(np.isnan(hybrid), settings.default_hybrid_heat_units, hybrid)
    for row in table.itertuples():
        here = cover == row.cover_id
        scale = hybrid / (row.of_hybrid_f * F_DAYS_TO_C) if row.of_hybrid_f else np.ones(len(units))
        heat[ANNUAL_MARKS.index(row.mark), here] = (row.heat_units_f * F_DAYS_TO_C * scale)[here]
    return np.where(by_heat, heat, days), by_heat


def _late_planted(
    units: pd.DataFrame, settings: Settings, lengths: dict[str, np.ndarray], cover: np.ndarray, latitude: np.ndarray
) -> dict[str, np.ndarray]:
    """Soybean planted late hurries: a day less for every few days of delay after 10 May (10 November in the south)."""
    if not settings.soybean_late_planting_days:
        return lengths
    reference = np.where(latitude >= 0.0, 130.0, 314.0)
    delay = np.clip(units["planting_doy"].to_numpy(float) - reference, 0.0, 60.0)
    shorter = np.where(cover == "soybean", delay / settings.soybean_late_planting_days, 0.0)
    after = lengths["len_dev_d"] + lengths["len_mid_d"] + lengths["len_late_d"]
    share = 1.0 - np.nan_to_num(shorter) / np.where(after > 0.0, after, 1.0)
    return {name: (value if name == "len_ini_d" else value * share) for name, value in lengths.items()}


def freeze_marks(record: StationRecord, settings: Settings, year: int) -> dict[str, Any]:
    """When a year's grass season begins and ends at each station, from its freezes.

    Green-up: the latest day of spring at or below the freeze limit, less 7 days, and then the first day whose 10-day
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
    n_days, n_stations = record.shape
    south = record.latitude_deg < 0.0
    day = np.arange(n_days)[:, None]

    def at(month: int, dom: int) -> np.ndarray:
        """Position of a date in this season's year, half a year on in the south."""
        here = np.datetime64(f"{year:04d}-{month:02d}-{dom:02d}", "D")
        shift = np.where(south, 184, 0)
        return (here - record.dates[0]).astype(int) + shift

    t_min = record.values["t_min_c"]
    freezing = t_min <= settings.grass_freeze_c
    spring = (day >= at(1, 1)) & (day <= at(*GREENUP_LATEST))
    in_spring = freezing & spring
    last = np.where(in_spring.any(axis=0), n_days - 1 - in_spring[::-1].argmax(axis=0), at(1, 1) + GREENUP_DAYS)
    warm = (_running_mean(record.values["t_mean_c"]) > GREENUP_MEAN_C) & (day >= last - GREENUP_DAYS)
    from_record = np.where(warm.any(axis=0), warm.argmax(axis=0), np.nan)
    told = at(*GREENUP_RECORD_FROM) >= 0  # the record shows this winter's end
    mean_date = at(1, 1) + 63.0 + 4.5 * np.clip(np.abs(record.latitude_deg) - 35.0, 0.0, 25.0)
    in_autumn = freezing & (day >= at(*AUTUMN_FROM)) & (day < at(*AUTUMN_FROM) + 200)
    freeze = np.where(in_autumn.any(axis=0), in_autumn.argmax(axis=0).astype(float), np.nan)
    mean_freeze = at(1, 1) + 320.0 - 4.5 * np.clip(np.abs(record.latitude_deg) - 35.0, 0.0, 25.0)
    freeze = np.where(np.isnan(freeze) & (mean_freeze < 0.0), mean_freeze, freeze)  # an autumn before the record
    return {
        "greenup": np.where(told, from_record, mean_date),
        "freeze": freeze,
        "end": freeze + GREENUP_DAYS,
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
