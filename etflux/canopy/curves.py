"""What annual and perennial covers share: adjusted coefficients, and what a part of the units hands back."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux.crops import ADJUST_FROM, climate_adjustment, stage_means
from etflux.marks import normals_ahead

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings
    from etflux.weather import StationRecord

NORMALS_NEEDED = 0.9  # of a stage's days, for its mean to stand for the stage


@dataclass(frozen=True)
class Grown:
    """Growth of some units: arrays (day, unit); `full` (unit,) is Kcb at full cover; marks (unit,) or (year, unit)."""

    stage: np.ndarray
    kcb: np.ndarray
    share: np.ndarray
    provisional: np.ndarray
    full: np.ndarray
    marks: dict[str, np.ndarray]
    basis: dict[str, np.ndarray]


@dataclass(frozen=True)
class StageClimate:
    """Wind and humidity of every station, continued past the record by the station's normals where it has them.

    Parameters
    ----------
    u2_m_s, rh_min_pct : ndarray, shape (day, station)
        From the record's first day to 200 days past its end; NaN where not known.
    n_days : int
        Days on record.
    """

    u2_m_s: np.ndarray
    rh_min_pct: np.ndarray
    n_days: int

    @classmethod
    def of(cls, record: StationRecord) -> StageClimate:
        """Climate of a record."""
        u2, rh_min = (
            np.concatenate([record.values[name], normals_ahead(record.values[name])])
            for name in ("u2_m_s", "rh_min_pct")
        )
        return cls(u2, rh_min, len(record.dates))

    def adjusted(
        self, table: np.ndarray, units: pd.DataFrame, first: np.ndarray, last: np.ndarray, settings: Settings
    ) -> tuple[np.ndarray, np.ndarray]:
        """Coefficient of a stage adjusted by the stage's own wind and humidity, and whether it may still move.

        The means are those of the stage's days on record, once there are `kcb_climate_days` of them or the stage is
        over; before, those of the whole stage with the station's normals for the days to come; else there is no
        adjustment.

        Parameters
        ----------
        table : ndarray, shape (unit,)
            Tabulated coefficient; below 0.45 it stays.
        first, last : ndarray, shape (unit,)
            The stage, `last` not included.

        References
        ----------
        .. [1] [FAO56] eq. 70, p. 136.
        """
        station = units["station_index"].to_numpy(int)
        adjustable = (units["adjust_climate"] == "yes").to_numpy() & (table >= ADJUST_FROM) & (last > first)
        over = last <= self.n_days
        u2, days = stage_means(self.u2_m_s[: self.n_days], station, first, last)
        rh_min, _ = stage_means(self.rh_min_pct[: self.n_days], station, first, last)
        own = (days >= settings.kcb_climate_days) | (over & (days > 0))
        u2_long, days_long = stage_means(self.u2_m_s, station, first, last)
        rh_min_long, _ = stage_means(self.rh_min_pct, station, first, last)
        with np.errstate(invalid="ignore"):
            normal = days_long >= NORMALS_NEEDED * (last - first)
        u2, rh_min = np.where(own, u2, u2_long), np.where(own, rh_min, rh_min_long)
        known = adjustable & (own | normal) & np.isfinite(u2) & np.isfinite(rh_min)
        change = climate_adjustment(
            np.where(known, u2, 2.0), np.where(known, rh_min, 45.0), units["height_max_m"].to_numpy(float)
        )
        return table + np.where(known, change, 0.0), adjustable & ~over
