"""Annual crops: from planting through the marks to the harvest, with frost, replanting and dry-down."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from etflux import marks as marking
from etflux.canopy.curves import Grown, StageClimate
from etflux.canopy.observed import Seen, positions
from etflux.crops import Stage, growth_share, piecewise
from etflux.findings import Finding
from etflux.stands import packaged
from etflux.variables import flag_bits

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Settings
    from etflux.weather import StationRecord

STEPS = (
    ("planting", Stage.PLANTED), ("emergence", Stage.INITIAL), ("cover10", Stage.DEVELOPMENT),
    ("full_cover", Stage.MIDDLE), ("late", Stage.LATE), ("maturity", Stage.MATURE), ("killed", Stage.MATURE),
    ("harvest", Stage.BARE),
)  # fmt: skip
KNOTS = ("emergence", "cover10", "full_cover", "late", "maturity")
FAR = 1e6


def grow(units: pd.DataFrame, record: StationRecord, settings: Settings, seen: Seen) -> tuple[Grown, list[Finding]]:
    """Growth of annual crops; a replanted stand grows its first crop until the day of the replant.

    Parameters
    ----------
    units : DataFrame
        Annual units of ``stands.expand``.
    record : StationRecord
        Filled.
    settings : Settings
    seen : Seen
        Of these units.
    """
    planting = positions(units["planting_date"], record.dates[0])
    first, findings = _sown(units, record, settings, planting, seen.first, seen.replant)
    second_crop = np.flatnonzero(~np.isnan(seen.replant))
    if not len(second_crop):
        return first, findings
    part = units.iloc[second_crop].reset_index(drop=True)
    later = {name: days[second_crop] for name, days in seen.second.items()}
    never = np.full(len(part), np.nan)
    second, found = _sown(part, record, settings, seen.replant[second_crop], later, never)
    second.basis["planting"][:] = "replanted"
    return _joined(first, second, second_crop, seen.replant), findings + found


def _joined(first: Grown, second: Grown, where: np.ndarray, again: np.ndarray) -> Grown:
    """First crop up to the day of the replant, second from it on; the marks are the second's."""
    after = np.arange(len(first.kcb))[:, None] >= again[where]
    for name in ("stage", "kcb", "share", "provisional"):
        values, new = getattr(first, name), getattr(second, name)
        values[:, where] = np.where(after, new, values[:, where])
    first.full[where] = second.full
    for kept, new in ((first.marks, second.marks), (first.basis, second.basis)):
        for name, values in new.items():
            kept[name][where] = values
    first.marks["replant"] = again
    return first


def _sown(
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    planting: np.ndarray,
    seen: dict[str, np.ndarray],
    until: np.ndarray,
) -> tuple[Grown, list[Finding]]:
    """One crop of each unit from its planting to its harvest, or to the day `until`."""
    n_days, station = len(record.dates), units["station_index"].to_numpy(int)
    planted = record.dates[0] + np.nan_to_num(planting).astype("timedelta64[D]")
    planted = np.where(np.isnan(planting), np.datetime64("NaT"), planted)
    need, by_heat = marking.requirements(units, settings, packaged("heat_units"), planted)
    grown = marking.annual_marks(marking.HeatClock.of(record), station, planting, seen, need, by_heat)
    entered = positions(units["harvest_date"], record.dates[0])
    entered = np.where(np.isnan(seen["harvest"]), entered, seen["harvest"])
    entered = np.where(entered >= planting, entered, np.nan)
    rest_days = np.nan_to_num(units["harvest_after_d"].to_numpy(float))
    killed, findings = _frost(units, record, settings, grown, np.fmin(np.fmin(entered, until), grown["maturity"]))
    harvest = np.where(np.isnan(entered), np.fmin(grown["maturity"], killed) + rest_days, entered)
    harvest = np.fmin(harvest, until)
    kcb, full, provisional = _kcb(units, record, settings, grown, killed, harvest, by_heat)
    stop = np.fmin(harvest, killed)
    marks = {name: np.where(day >= stop, np.nan, day) for name, day in grown.items()}
    marks = {"planting": planting, **marks, "killed": killed, "harvest": harvest}
    day = np.arange(n_days, dtype=float)[:, None]
    stage = np.zeros((n_days, len(units)), dtype=np.int8)
    for name, code in STEPS:
        stage[day >= marks[name]] = code
    growing = (stage >= Stage.INITIAL) & (stage <= Stage.MATURE)
    share = growth_share(kcb, units["kcb_ini"].to_numpy(float), full)
    share = np.where(growing, np.maximum.accumulate(np.where(growing, share, 0.0), axis=0), 0.0)
    basis = _basis(units, seen, by_heat, grown, n_days)
    basis["harvest"] = np.where(np.isnan(entered), "days after maturity, a default", "entered").astype(object)
    basis["planting"] = np.full(len(units), "entered", dtype=object)
    basis["killed"] = np.full(len(units), "frost", dtype=object)
    return Grown(stage, kcb, share, provisional, full, marks, basis), findings


def _basis(
    units: pd.DataFrame, seen: dict[str, np.ndarray], by_heat: np.ndarray, grown: dict[str, np.ndarray], n_days: int
) -> dict[str, np.ndarray]:
    """What each mark rests on, in words."""
    by_days = np.where(units["cover_id"] == "corn", "FAO-56 Table 11, arid row, nearest in length", "FAO-56 Table 11")
    by_days = np.where(units["cover_id"].isin(("corn", "soybean")), by_days, "day lengths of the cover table")
    usual = np.where(by_heat, "heat units", by_days).astype(object)
    basis = {"marks": usual}
    for name, day in grown.items():
        rest = np.where(by_heat & (day >= n_days), "heat units, projected past the record", usual)
        dated = ~np.isnan(seen.get(name, np.full(len(day), np.nan)))
        basis[name] = np.where(dated, "observed", rest).astype(object)
    return basis


def _frost(
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    grown: dict[str, np.ndarray],
    alive_until: np.ndarray,
) -> tuple[np.ndarray, list[Finding]]:
    """Day of the frost that kills a crop from mid-season on; an earlier one asks for a look at the field."""
    station = units["station_index"].to_numpy(int)
    freezing = record.values["t_min_c"] <= settings.frost_kill_c
    killed = np.full(len(units), np.nan)
    findings: list[Finding] = []
    hit = np.flatnonzero(freezing.any(axis=0)[station] & (units["frost_kill"] == "yes").to_numpy())
    if not len(hit):
        return killed, findings
    day = np.arange(len(record.dates))[:, None]
    cold = freezing[:, station[hit]] & (day < np.nan_to_num(alive_until[hit], nan=FAR))
    late = cold & (day >= grown["full_cover"][hit])
    killed[hit] = np.where(late.any(axis=0), late.argmax(axis=0), np.nan)
    early = cold & (day >= grown["emergence"][hit]) & (day < grown["full_cover"][hit])
    own = (units["kind"] == "stand").to_numpy()[hit]
    for place in np.flatnonzero(early.any(axis=0) & own):
        unit, date = units.iloc[hit[place]], record.dates[int(early[:, place].argmax())]
        subject = f"stand {unit['stand_id']}" + ("" if unit["part"] == "whole" else f", {unit['part']} third")
        findings.append(Finding("frost-early", "stands", int(unit["stand_row"]), None, str(date), subject))
    return killed, findings


def _kcb(
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    grown: dict[str, np.ndarray],
    killed: np.ndarray,
    harvest: np.ndarray,
    by_heat: np.ndarray,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Basal coefficient by day, at full cover, and the provisional bits.

    Eq. 66 between the marks; after maturity down to the dried value; a killed crop has at most that; 0 from the
    harvest on. A frost or a harvest ends the curve and does not bend what came before ([FAO56] p. 125).
    """
    n_days = len(record.dates)
    day = np.arange(n_days, dtype=float)[:, None]
    climate = StageClimate.of(record)
    ini, mid, end, dry = (units[name].to_numpy(float) for name in ("kcb_ini", "kcb_mid", "kcb_end", "kcb_end_dry"))
    dry, stop = np.fmin(dry, end), np.fmin(harvest, killed)
    middle = (grown["full_cover"], np.fmin(grown["late"], stop))
    mid, mid_open = climate.adjusted(mid, units, *middle, settings)
    end, end_open = climate.adjusted(end, units, grown["late"], np.fmin(grown["maturity"], stop), settings)
    knots = [grown[name] for name in KNOTS] + [grown["maturity"] + settings.corn_dry_down_days]
    at = np.nan_to_num(np.stack(knots), nan=FAR)
    kcb = piecewise(day, at, np.stack([ini, ini, mid, mid, end, dry]))
    kcb = np.where(day >= killed, np.minimum(kcb, dry), kcb)
    growing = (day >= grown["emergence"]) & (day < harvest)
    kcb = np.where(growing, kcb, 0.0)

    bits = flag_bits("provisional")
    by_climate = (mid_open & (day >= grown["cover10"])) | (end_open & (day >= grown["late"]))
    sloping = np.zeros(kcb.shape, dtype=bool)
    for begin, finish in (("cover10", "full_cover"), ("late", "maturity")):
        sloping |= by_heat & (grown[finish] >= n_days) & (day >= grown[begin])
    alive = growing & ~(day >= killed)
    provisional = np.where(alive & by_climate, bits["climate_adjustment"], 0)
    provisional |= np.where(alive & sloping, bits["marks"], 0)
    return kcb, mid, provisional.astype(np.uint8)
