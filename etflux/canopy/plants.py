"""The canopy of every unit and day put together, and the windows that the irrigation rule asks for."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux.canopy import annual, perennial
from etflux.canopy.curves import Grown
from etflux.canopy.observed import Seen, moved_to_canopies, observed
from etflux.crops import RULE_STAGES, Stage, ground_cover_from_kcb, kc_upper_limit
from etflux.findings import Finding

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings
    from etflux.weather import StationRecord

ANNUAL = ("planting", "emergence", "cover10", "v8", "full_cover", "late", "maturity", "killed", "replant", "harvest")
SEASONAL = ("greenup", "full_season", "freeze", "end")


@dataclass(frozen=True)
class Canopy:
    """What grows on every unit on every day.

    Parameters
    ----------
    stage : ndarray of int8, shape (day, unit)
        Codes of :class:`etflux.crops.Stage`.
    kcb : ndarray, shape (day, unit)
        Basal coefficient, eqs. 66 and 70.
    plant_height_m, root_depth_m : ndarray, shape (day, unit)
        [m]
    kc_max : ndarray, shape (day, unit)
        Upper limit, eq. 72.
    ground_cover : ndarray, shape (day, unit)
        fc, eq. 76 or the sod's own.
    days_after_planting : ndarray, shape (day, unit)
        NaN outside the season.
    provisional : ndarray of uint8, shape (day, unit)
        Bits of ``tables/flags.toml``.
    marks : dict of str to ndarray
        Days as positions on the record's axis, NaN where a mark did not come: of annual crops (unit,), of perennial
        covers (year, unit).
    basis : dict of str to ndarray of str, shape (unit,)
        What each mark rests on; "marks" where it has no entry of its own.
    """

    stage: np.ndarray
    kcb: np.ndarray
    plant_height_m: np.ndarray
    root_depth_m: np.ndarray
    kc_max: np.ndarray
    ground_cover: np.ndarray
    days_after_planting: np.ndarray
    provisional: np.ndarray
    marks: dict[str, np.ndarray]
    basis: dict[str, np.ndarray]

    def basis_of(self, mark: str) -> np.ndarray:
        """What one mark rests on, by unit."""
        return self.basis.get(mark, self.basis["marks"])


def canopy(
    units: pd.DataFrame, record: StationRecord, settings: Settings, observations: pd.DataFrame
) -> tuple[Canopy, list[Finding]]:
    """Stage, Kcb, height, roots and cover of every unit and day.

    Parameters
    ----------
    units : DataFrame
        From ``stands.expand``; any part of it.
    record : StationRecord
        Filled.
    settings : Settings
    observations : DataFrame
        Table of a case: stand_id, date, observed, observed_value.

    Returns
    -------
    Canopy
    list of Finding
        "frost-early": a frost before mid-season, to be looked at in the field.
    """
    seen = observed(units, observations, record.dates)
    is_annual = (units["habit"] == "annual").to_numpy()
    crops, lasting = np.flatnonzero(is_annual), np.flatnonzero(~is_annual)
    parts: list[tuple[np.ndarray, Grown]] = []
    findings: list[Finding] = []
    if len(crops):
        grown, findings = annual.grow(_rows(units, crops), record, settings, _part(seen, crops))
        parts.append((crops, grown))
    if len(lasting):
        parts.append((lasting, perennial.grow(_rows(units, lasting), record, settings, _part(seen, lasting))))

    shape = (len(record.dates), len(units))
    stage, provisional = _whole(parts, "stage", shape, np.int8), _whole(parts, "provisional", shape, np.uint8)
    kcb, share, full = (_whole(parts, name, shape[-n:], float) for name, n in (("kcb", 2), ("share", 2), ("full", 1)))
    marks, basis = _marks(parts, len(units))
    season = _season(marks, is_annual, marks.pop("full_season"))
    kcb = moved_to_canopies(kcb, seen.canopies, full, units["height_max_m"].to_numpy(float), season)
    station = units["station_index"].to_numpy(int)
    u2, rh_min = record.values["u2_m_s"][:, station], record.values["rh_min_pct"][:, station]
    height = units["height_max_m"].to_numpy(float) * _height_share(kcb, share, full, stage, is_annual)
    kc_max = kc_upper_limit(kcb, u2, rh_min, height)
    day = np.arange(shape[0], dtype=float)[:, None]
    planted = (day >= marks["planting"]) & (day < marks["harvest"])
    found = Canopy(
        stage=stage,
        kcb=kcb,
        plant_height_m=height,
        root_depth_m=_roots(share, units, is_annual),
        kc_max=kc_max,
        ground_cover=_cover(kcb, kc_max, height, units, stage),
        days_after_planting=np.where(planted, day - marks["planting"], np.nan),
        provisional=provisional,
        marks=marks,
        basis=basis,
    )
    return found, findings


def _rows(units: pd.DataFrame, which: np.ndarray) -> pd.DataFrame:
    return units.iloc[which].reset_index(drop=True)


def _part(seen: Seen, which: np.ndarray) -> Seen:
    """Observations of some units; measured canopies are applied to all units at once."""
    first, second = ({name: days[which] for name, days in marks.items()} for marks in (seen.first, seen.second))
    return Seen(seen.replant[which], first, second, seen.cuts[:, which], seen.canopies[:0])


def _whole(parts: list[tuple[np.ndarray, Grown]], name: str, shape: tuple[int, ...], kind: type) -> np.ndarray:
    """One array of all units from those of the parts."""
    found: np.ndarray = np.zeros(shape, dtype=kind)
    for which, grown in parts:
        found[..., which] = getattr(grown, name)
    return found


def _marks(parts: list[tuple[np.ndarray, Grown]], n_units: int) -> tuple[dict[str, np.ndarray], dict[str, np.ndarray]]:
    """Marks and their basis for all units, NaN and blank where a cover has none of them."""
    years = max((len(grown.marks["greenup"]) for _, grown in parts if "greenup" in grown.marks), default=1)
    marks = {name: np.full(n_units, np.nan) for name in ANNUAL}
    marks |= {name: np.full((years, n_units), np.nan) for name in SEASONAL}
    basis = {"marks": np.full(n_units, "", dtype=object)}
    for which, grown in parts:
        for name, days in grown.marks.items():
            marks[name][..., which] = days
        for name, words in grown.basis.items():
            basis.setdefault(name, np.full(n_units, "", dtype=object))[which] = words
    return marks, basis


def _season(
    marks: dict[str, np.ndarray], is_annual: np.ndarray, full_season: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Start, full cover and end of every season, (season, unit); annual crops have one, in the first row."""
    start, full = marks["greenup"].copy(), full_season.copy()
    end = np.nan_to_num(marks["end"], nan=np.inf)
    start[0, is_annual] = marks["emergence"][is_annual]
    full[0, is_annual] = np.nan_to_num(marks["full_cover"][is_annual], nan=np.inf)
    end[0, is_annual] = marks["harvest"][is_annual]
    return start, full, end


def _height_share(
    kcb: np.ndarray, share: np.ndarray, full: np.ndarray, stage: np.ndarray, is_annual: np.ndarray
) -> np.ndarray:
    """Height over the greatest: with Kcb, an annual crop not shrinking in season.  [FAO56] Annex 8, box 8.1."""
    growing = (stage >= Stage.INITIAL) & (stage <= Stage.MATURE)
    tall = np.minimum(kcb / np.where(full > 0.0, full, 1.0), 1.0)
    return np.where(is_annual, _kept(tall, growing), share)


def _kept(values: np.ndarray, growing: np.ndarray) -> np.ndarray:
    """Running maximum within the growing season, 0 outside; a second crop in a season starts anew."""
    best = np.zeros(values.shape[1])
    kept = np.empty(values.shape)
    for day in range(len(values)):
        best = np.where(growing[day], np.maximum(best, values[day]), 0.0)
        kept[day] = best
    return kept


def _roots(share: np.ndarray, units: pd.DataFrame, is_annual: np.ndarray) -> np.ndarray:
    """Root depth grows with Kcb and does not shrink in season; perennial roots are there.  [FAO56] eqs. 8-1, 8-2."""
    least, most = units["root_min_m"].to_numpy(float), units["root_max_m"].to_numpy(float)
    perennial = np.where((units["habit"] == "sod").to_numpy(), most, least)
    return np.where(is_annual, least + (most - least) * share, perennial)


def _cover(
    kcb: np.ndarray, kc_max: np.ndarray, height: np.ndarray, units: pd.DataFrame, stage: np.ndarray
) -> np.ndarray:
    """Ground cover by eq. 76, a sod's own, and what standing dead plants keep of theirs."""
    cover = ground_cover_from_kcb(kcb, kc_max, height)
    growing = (stage >= Stage.INITIAL) & (stage <= Stage.MATURE)
    dead = np.nan_to_num(units["dead_cover_share"].to_numpy(float)) * _kept(cover, growing)
    cover = np.where((stage == Stage.LATE) | (stage == Stage.MATURE), np.maximum(cover, dead), cover)
    cover = np.where(stage <= Stage.PLANTED, 0.0, cover)
    own = units["ground_cover_sod"].to_numpy(float)
    return np.where(np.isnan(own), cover, own)


def rule_windows(
    units: pd.DataFrame, rules: pd.DataFrame, marks: dict[str, np.ndarray], n_days: int
) -> dict[str, np.ndarray]:
    """Days on which irrigation, the late depletion and a word on stress make sense, (day, unit) booleans.

    The irrigation window runs from the rule's first stage (V8 unless it says otherwise) to its last (maturity), at
    perennial covers from green-up to the end of the season. A killed or harvested crop needs no water.

    Parameters
    ----------
    units : DataFrame
        From ``stands.expand``.
    rules : DataFrame
        Irrigation rules of a case.
    marks : dict of str to ndarray
        Of a :class:`Canopy`.
    n_days : int
    """
    day = np.arange(n_days, dtype=float)[:, None]
    annual_units = (units["habit"] == "annual").to_numpy()
    words = {
        "from_stage": np.full(len(units), "v8", dtype=object),
        "to_stage": np.full(len(units), "maturity", dtype=object),
    }
    if len(rules):
        by_id = rules.drop_duplicates("rule_id").set_index("rule_id")
        for name, chosen in words.items():
            if name in by_id:
                named = units["rule_id"].map(by_id[name]).astype(str).str.strip().str.lower()
                for word, mark in RULE_STAGES.items():
                    chosen[(named == word.lower()).to_numpy()] = mark
    alive = np.fmin(marks["harvest"], marks["killed"])
    first = _pick(marks, words["from_stage"])
    last = np.fmin(_pick(marks, words["to_stage"]), alive)
    growing = in_season(marks, day)
    irrigated = units["irrigated"].to_numpy(bool)
    return {
        "in_window": np.where(annual_units, (day >= first) & (day < last), growing) & irrigated,
        "late": annual_units & (day >= marks["late"]),
        "stress_window": np.where(
            annual_units, (day >= marks["cover10"]) & (day < np.fmin(marks["maturity"], alive)), growing
        ),
    }


def _pick(marks: dict[str, np.ndarray], names: np.ndarray) -> np.ndarray:
    """Each unit's own choice of mark."""
    chosen = np.full(len(names), np.nan)
    for name in set(names):
        here = names == name
        chosen[here] = marks[name][here]
    return chosen


def in_season(marks: dict[str, np.ndarray], day: np.ndarray) -> np.ndarray:
    """Days on which perennial covers are between green-up and the end of the season, (day, unit)."""
    inside = np.zeros((len(day), marks["greenup"].shape[1]), dtype=bool)
    for greenup, end in zip(marks["greenup"], marks["end"], strict=True):
        inside |= (day >= np.nan_to_num(greenup, nan=np.inf)) & (day < np.nan_to_num(end, nan=np.inf))
    return inside
