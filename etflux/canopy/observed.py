"""What was seen in the field: stages, cuts, canopies, as positions on the record's day axis."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux.crops import OBSERVED_MARKS, kcb_from_canopy_cover, kcb_from_leaf_area

if TYPE_CHECKING:
    import pandas as pd

CANOPIES = ("canopy cover", "leaf area")
CUTS = ("cut", "grazing")


def positions(dates: pd.Series, first: np.datetime64) -> np.ndarray:
    """Dates as days from the first day of the record, NaN where blank."""
    import pandas as pd

    days = pd.to_datetime(dates).to_numpy().astype("datetime64[D]")
    return np.where(np.isnat(days), np.nan, (days - first).astype(float))


@dataclass(frozen=True)
class Seen:
    """Observations by unit.

    Parameters
    ----------
    replant : ndarray, shape (unit,)
        Day of a replant; NaN where none.
    first, second : dict of str to ndarray, shape (unit,)
        Days of stages and of the harvest seen before the replant, and from it on; NaN where none.
    cuts : ndarray of bool, shape (day, unit)
    canopies : DataFrame
        Measured canopies: unit, day, is_area, value.
    """

    replant: np.ndarray
    first: dict[str, np.ndarray]
    second: dict[str, np.ndarray]
    cuts: np.ndarray
    canopies: pd.DataFrame


def observed(units: pd.DataFrame, observations: pd.DataFrame, dates: np.ndarray) -> Seen:
    """Sort the observations of a case by what they are and by unit.

    A stage that was seen on a stand with a planting spread is that of its middle third; the other thirds are as far
    ahead or behind as they were planted.

    Parameters
    ----------
    units : DataFrame
        From ``stands.expand``.
    observations : DataFrame
        stand_id, date, observed, observed_value.
    dates : ndarray of datetime64[D]
        Of the record.
    """
    import pandas as pd

    rows = pd.DataFrame({"stand_id": observations["stand_id"].astype(str)})
    rows["word"] = observations["observed"].astype(str).str.strip().str.lower()
    rows["day"] = positions(observations["date"], dates[0])
    rows["value"] = observations["observed_value"].astype(float) if "observed_value" in observations else np.nan
    owners = pd.DataFrame({"stand_id": units["stand_id"].astype(str), "unit": np.arange(len(units))})
    rows = rows[rows["day"].notna()].merge(owners, on="stand_id")
    spread = positions(units["planting_date"], dates[0]) - positions(units["planting_date_middle"], dates[0])
    shift = np.where(units["part"].isin(("early", "late")), np.nan_to_num(spread), 0.0)

    def days_of(rows: pd.DataFrame, word: str) -> np.ndarray:
        found = rows[rows["word"] == word]
        unit = found["unit"].to_numpy(int)
        days = np.full(len(units), np.nan)
        days[unit] = found["day"].to_numpy(float) + (shift[unit] if word in OBSERVED_MARKS else 0.0)
        return days

    replant = days_of(rows, "replant")
    again = (rows["day"] >= replant[rows["unit"]]).to_numpy()
    names = {**OBSERVED_MARKS, "harvest": "harvest"}
    first, second = (
        {name: days_of(part, word) for word, name in names.items()} for part in (rows[~again], rows[again])
    )
    cuts = np.zeros((len(dates), len(units)), dtype=bool)
    found = rows[rows["word"].isin(CUTS) & rows["day"].between(0, len(dates) - 1)]
    cuts[found["day"].to_numpy(int), found["unit"].to_numpy(int)] = True
    cuts &= (units["cutting"] == "dated").to_numpy()
    canopies = rows[rows["word"].isin(CANOPIES) & rows["value"].notna() & rows["day"].between(0, len(dates) - 1)]
    canopies = canopies.assign(is_area=canopies["word"] == "leaf area").sort_values(["unit", "day"])
    return Seen(replant, first, second, cuts, canopies)


def moved_to_canopies(
    kcb: np.ndarray,
    canopies: pd.DataFrame,
    full: np.ndarray,
    height_m: np.ndarray,
    season: tuple[np.ndarray, np.ndarray, np.ndarray],
) -> np.ndarray:
    """Kcb moved to measured canopies.

    On a measured day Kcb is that of the canopy. The difference to the computed curve grows linearly from 0 at the
    season's start and runs linearly between measurements. After the last one it fades until full cover; if that is
    past, the stand is thinner or denser than the table's and stays so in proportion.

    Parameters
    ----------
    kcb : ndarray, shape (day, unit)
    canopies : DataFrame
        As in :class:`Seen`.
    full, height_m : ndarray, shape (unit,)
        Kcb at full cover; greatest height [m].
    season : tuple of ndarray, shape (season, unit)
        Days of each season's start, full cover and end.

    References
    ----------
    .. [1] [FAO56] eqs. 97 and 98; the way between measurements is a choice of this project.
    """
    if not len(canopies):
        return kcb
    kcb = kcb.copy()
    for unit, rows in canopies.groupby("unit"):
        value = rows["value"].to_numpy(float)
        by_area = kcb_from_leaf_area(full[unit], value)
        by_cover = kcb_from_canopy_cover(full[unit], np.clip(value / 100.0, 0.0, 1.0), height_m[unit])
        target = np.where(rows["is_area"].to_numpy(bool), by_area, by_cover)
        at = rows["day"].to_numpy(int)
        for start, cover, end in zip(*(days[:, unit] for days in season), strict=True):
            here = (at >= start) & (at < end) & (kcb[at, unit] > 0.0)
            if here.any():
                kcb[:, unit] = _through(kcb[:, unit], at[here], target[here], (start, cover, end), full[unit])
    return kcb


def _through(
    curve: np.ndarray, at: np.ndarray, target: np.ndarray, season: tuple[float, float, float], full: float
) -> np.ndarray:
    """One season's curve led through measured points, the rest of it as it was."""
    start, cover, end = season
    day = np.arange(len(curve), dtype=float)
    knots, differences = np.append(start, at), np.append(0.0, target - curve[at])
    last = at[-1]
    if last < cover:
        knots, differences = np.append(knots, cover), np.append(differences, 0.0)
        moved = curve + np.interp(day, knots, differences)
    else:
        moved = np.where(day <= last, curve + np.interp(day, knots, differences), curve * target[-1] / curve[last])
    inside = (day >= start) & (day < end)
    return np.where(inside, np.clip(moved, 0.0, np.maximum(full, curve)), curve)
