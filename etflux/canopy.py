"""The crop through the season: stage, Kcb, height, roots and ground cover of every unit and day.

Arrays are (day, unit). What depends on what is left in the soil is not here but in ``soilwater``.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, ch. 6, 7, 9 and Annex 8.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux import marks as marking
from etflux.crops import (
    ADJUST_FROM,
    CUT_BACK_DAYS,
    DEAD_COVER_SHARE,
    OBSERVED_MARKS,
    RULE_STAGES,
    Stage,
    climate_adjustment,
    ground_cover_from_kcb,
    kc_upper_limit,
    kcb_from_canopy_cover,
    kcb_from_leaf_area,
    piecewise,
    stage_means,
)  # fmt: skip
from etflux.findings import Finding
from etflux.stands import complete, packaged
from etflux.variables import flag_bits

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case, Settings
    from etflux.weather import StationRecord


@dataclass(frozen=True)
class Canopy:
    """What grows on every unit on every day, arrays (day, unit), and the marks behind it (unit,)."""

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


def canopy(
    units: pd.DataFrame, record: StationRecord, settings: Settings, observations: pd.DataFrame
) -> tuple[Canopy, list[Finding]]:
    """Stage, Kcb, height, roots and cover of every unit and day.

    Parameters
    ----------
    units : DataFrame
        From ``stands.expand``.
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
    seen = _observed(units, observations, record)
    marks, basis = _marks(units, record, settings, seen)
    findings = _frost(units, record, settings, marks, basis, seen)
    annual = (units["habit"] == "annual").to_numpy()
    day = np.arange(len(record.dates), dtype=float)[:, None]
    kcb, provisional = _kcb(units, record, settings, marks, annual, day)
    kcb = _cut_back(kcb, units, settings, seen, day)
    kcb = _measured(kcb, units, observations, record, marks, day)
    stage = _stage(units, marks, annual, day)
    provisional |= _open_greenup(basis, day, marks)
    station = units["station_index"].to_numpy(int)
    u2, rh_min = record.values["u2_m_s"][:, station], record.values["rh_min_pct"][:, station]
    height = _height(kcb, units, annual, stage)
    kc_max = kc_upper_limit(kcb, u2, rh_min, height)
    canopy = Canopy(
        stage=stage,
        kcb=kcb,
        plant_height_m=height,
        root_depth_m=_roots(kcb, units, annual, stage),
        kc_max=kc_max,
        ground_cover=_cover(kcb, kc_max, height, units, stage),
        days_after_planting=np.where(
            (day >= marks["planting"]) & (day < marks["harvest"]), day - marks["planting"], np.nan
        ),
        provisional=provisional,
        marks=marks,
        basis=basis,
    )
    return canopy, findings


def _positions(dates: pd.Series, record: StationRecord) -> np.ndarray:
    """Dates as positions on the record's day axis."""
    import pandas as pd

    days = pd.to_datetime(dates).to_numpy().astype("datetime64[D]")
    where = (days - record.dates[0]).astype(float)
    return np.where(np.isnat(days), np.nan, where)


def _observed(units: pd.DataFrame, observations: pd.DataFrame, record: StationRecord) -> dict[str, np.ndarray]:
    """Observed marks (unit,), and cuts as (day, unit) booleans."""
    found: dict[str, np.ndarray] = {
        name: np.full(len(units), np.nan) for name in (*OBSERVED_MARKS.values(), "harvest", "replant")
    }
    cuts = np.zeros((len(record.dates), len(units)), dtype=bool)
    if len(observations):
        where = _positions(observations["date"], record)
        stand = units["stand_id"].to_numpy(str)
        words = observations["observed"].astype(str).str.strip().str.lower()
        ids = observations["stand_id"].astype(str).to_numpy()
        for row in np.flatnonzero(np.isin(ids, stand) & np.isfinite(where)):
            here, word = stand == ids[row], words.iloc[row]
            if word in ("cut", "grazing"):
                if 0 <= where[row] < len(record.dates):
                    cuts[int(where[row]), here] = True
            elif word in OBSERVED_MARKS or word in ("harvest", "replant"):
                found[OBSERVED_MARKS.get(word, word)][here] = where[row]
    found["cuts"] = cuts
    return found


def _marks(
    units: pd.DataFrame, record: StationRecord, settings: Settings, seen: dict[str, np.ndarray]
) -> tuple[dict[str, np.ndarray], dict[str, np.ndarray]]:
    """Marks of annual and perennial units, and what each unit's rest on."""
    planting = _positions(units["planting_date"], record)
    planting = np.where(np.isnan(seen["replant"]), planting, seen["replant"])
    annual = (units["habit"] == "annual").to_numpy()
    planting = np.where(annual, planting, np.nan)
    dates = record.dates[0] + np.nan_to_num(planting).astype("timedelta64[D]")
    year_start = dates.astype("datetime64[Y]").astype("datetime64[D]")
    doy = np.where(np.isnan(planting), np.nan, (dates - year_start).astype(float) + 1.0)
    with_day = units.assign(planting_doy=doy)
    latitude = units["latitude_deg"].to_numpy(float)
    need, by_heat = marking.requirements(with_day, settings, packaged("heat_units"), latitude)
    marks = marking.annual_marks(units, record, settings, planting, seen, need, by_heat)
    marks = {name: np.where(annual, value, np.nan) for name, value in marks.items()}
    marks["planting"] = planting
    basis = {"marks": np.where(annual, np.where(by_heat, "heat units", "day lengths (FAO-56 Table 11)"), "all year")}
    basis["settled"] = np.ones(len(units), dtype=bool)
    _grass_marks(units, record, settings, marks, basis)
    entered = _positions(units["harvest_date"], record)
    entered = np.where(np.isnan(seen["harvest"]), entered, seen["harvest"])
    own = marks["maturity"] + units["harvest_after_d"].to_numpy(float)
    marks["harvest"] = np.where(np.isnan(entered), own, entered)
    for name in (*marking.ANNUAL_MARKS,):  # a harvest ends whatever was still to come
        marks[name] = np.where(annual, np.minimum(marks[name], marks["harvest"]), marks[name])
    return marks, basis


def _grass_marks(
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    marks: dict[str, np.ndarray],
    basis: dict[str, np.ndarray],
) -> None:
    """Green-up and end of each year's season for covers that follow the freezes; (year, unit) arrays."""
    grass = (units["marks"] == "green-up").to_numpy()
    station = units["station_index"].to_numpy(int)
    entered = _positions(units["greenup_date"], record)
    first_year = int(str(record.dates[0].astype("datetime64[Y]"))) - 1
    last_year = int(str(record.dates[-1].astype("datetime64[Y]")))
    greenups, freezes, ends = [], [], []
    for year in range(first_year, last_year + 1):
        at = marking.freeze_marks(record, settings, year)
        january = (np.datetime64(f"{year:04d}-01-01") - record.dates[0]).astype(int)
        mine = (entered >= january) & (entered < january + 365)
        greenups.append(np.where(grass, np.where(mine, entered, at["greenup"][station]), np.nan))
        freezes.append(np.where(grass, at["freeze"][station], np.nan))
        ends.append(np.where(grass, at["end"][station], np.nan))
        if year == last_year:
            how = np.where(
                at["defaulted"][station], "green-up: mean date of the latitude, a default", "green-up: freezes"
            )
            basis["marks"] = np.where(grass, np.where(mine, "green-up entered", how), basis["marks"])
            basis["settled"] = np.where(grass & ~mine, (at["settled"] | at["defaulted"])[station], basis["settled"])
    marks["greenup"], marks["freeze"], marks["end"] = np.array(greenups), np.array(freezes), np.array(ends)


def _frost(
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    marks: dict[str, np.ndarray],
    basis: dict[str, np.ndarray],
    seen: dict[str, np.ndarray],
) -> list[Finding]:
    """Killing frost ends a crop from mid-season on (changes `marks`); an earlier one asks for a look."""
    station = units["station_index"].to_numpy(int)
    freezing = record.values["t_min_c"] <= settings.frost_kill_c
    hit = freezing.any(axis=0)[station] & (units["frost_kill"] == "yes").to_numpy()
    findings: list[Finding] = []
    if not hit.any():
        return findings
    day = np.arange(len(record.dates))[:, None]
    cold = freezing[:, station]
    late_cold = cold & (day >= marks["full_cover"]) & (day < marks["maturity"])
    killed = hit & late_cold.any(axis=0)
    when = np.where(killed, late_cold.argmax(axis=0), np.nan)
    for name in ("late", "maturity"):
        marks[name] = np.where(killed, np.minimum(marks[name], when), marks[name])
    entered = _positions(units["harvest_date"], record)
    own = when + units["harvest_after_d"].to_numpy(float)
    fixed = np.isfinite(entered) | np.isfinite(seen["harvest"])
    marks["harvest"] = np.where(killed & ~fixed, own, marks["harvest"])
    basis["killed"] = killed
    early = cold & (day >= marks["emergence"]) & (day < marks["full_cover"])
    for unit in np.flatnonzero(hit & early.any(axis=0)):
        date = record.dates[int(early[:, unit].argmax())]
        findings.append(Finding("frost-early", "stands", subject=f"stand {units['unit_id'].iloc[unit]}, {date}"))
    return findings


def _kcb(
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    marks: dict[str, np.ndarray],
    annual: np.ndarray,
    day: np.ndarray,
) -> tuple[np.ndarray, np.ndarray]:
    """Basal coefficient with mid and end values adjusted by the stage's own climate, and its provisional bits."""
    n_days = len(record.dates)
    column = {
        name: units[name].to_numpy(float) for name in ("kcb_ini", "kcb_mid", "kcb_end", "kcb_end_dry", "kcb_dormant")
    }
    bit = flag_bits("provisional")["climate_adjustment"]
    full = np.where(annual, marks["full_cover"], 0.0)
    late = np.where(annual, marks["late"], n_days)
    mid, mid_open = _adjusted(column["kcb_mid"], units, record, settings, full, late)
    end, _ = _adjusted(column["kcb_end"], units, record, settings, late, np.where(annual, marks["maturity"], n_days))
    end = np.where(annual, end, column["kcb_end"])
    end = np.where(marks_killed(units, marks, annual), column["kcb_end_dry"], end)
    dry_until = np.minimum(marks["maturity"] + settings.corn_dry_down_days, marks["harvest"])
    knots = np.stack([marks[name] for name in ("emergence", "cover10", "full_cover", "late", "maturity")] + [dry_until])
    knots = np.maximum.accumulate(np.nan_to_num(knots, nan=np.inf), axis=0)
    values = np.stack([column["kcb_ini"], column["kcb_ini"], mid, mid, end, column["kcb_end_dry"]])
    finite = np.where(np.isfinite(knots), knots, n_days + 1e6)
    grown = piecewise(day, finite, values)
    grown = np.where(day < marks["harvest"], grown, 0.0)
    sod = _sod_curve(units, column, mid, marks, day)
    kcb = np.where(annual, np.where(np.isnan(marks["planting"]), 0.0, grown), sod)
    provisional = np.zeros(kcb.shape, dtype=np.uint8)
    growing = annual & mid_open & (day >= marks["cover10"]) & (day < marks["harvest"])
    provisional[growing] = bit
    return kcb, provisional


def marks_killed(units: pd.DataFrame, marks: dict[str, np.ndarray], annual: np.ndarray) -> np.ndarray:
    """Units whose ripening was cut short: late season and maturity fall on one day before the harvest."""
    return annual & (marks["late"] == marks["maturity"]) & (marks["maturity"] < marks["harvest"])


def _adjusted(
    table: np.ndarray,
    units: pd.DataFrame,
    record: StationRecord,
    settings: Settings,
    first: np.ndarray,
    last: np.ndarray,
) -> tuple[np.ndarray, np.ndarray]:
    """Coefficient adjusted by the stage's mean wind and humidity, and whether the stage is still open."""
    station = units["station_index"].to_numpy(int)
    u2, days = stage_means(record.values["u2_m_s"], station, first, last)
    rh_min, _ = stage_means(record.values["rh_min_pct"], station, first, last)
    adjustable = (units["adjust_climate"] == "yes").to_numpy() & (table >= ADJUST_FROM)
    enough = days >= settings.kcb_climate_days
    change = climate_adjustment(np.nan_to_num(u2, nan=2.0), np.nan_to_num(rh_min, nan=45.0), units["height_max_m"])
    value = table + np.where(adjustable & enough, change, 0.0)
    return value, adjustable & ~(last <= len(record.dates))


def _sod_curve(
    units: pd.DataFrame, column: dict[str, np.ndarray], mid: np.ndarray, marks: dict[str, np.ndarray], day: np.ndarray
) -> np.ndarray:
    """Perennial covers: dormant, green-up over 10 and 20 days, full until the freeze, dormant again; or all year."""
    whole_year = (units["marks"] == "all year").to_numpy()
    curve = np.broadcast_to(
        np.where(whole_year, column["kcb_mid"], column["kcb_dormant"]), (len(day), len(units))
    ).copy()
    first, second = units["len_ini_d"].to_numpy(float), units["len_dev_d"].to_numpy(float)
    far = len(day) + 1e6
    for greenup, freeze, end in zip(marks["greenup"], marks["freeze"], marks["end"], strict=True):
        frost, over = np.nan_to_num(freeze, nan=far), np.nan_to_num(end, nan=far)
        knots = np.stack([greenup, greenup + first, greenup + first + second, frost, over])
        knots = np.maximum.accumulate(np.nan_to_num(knots, nan=far), axis=0)
        values = np.stack([column["kcb_ini"], column["kcb_ini"], mid, mid, column["kcb_end"]])
        inside = (day >= np.nan_to_num(greenup, nan=far)) & (day < over)
        curve = np.where(inside, piecewise(day, knots, values), curve)
    return curve


def _cut_back(
    kcb: np.ndarray, units: pd.DataFrame, settings: Settings, seen: dict[str, np.ndarray], day: np.ndarray
) -> np.ndarray:
    """Cutting or grazing sets the cover back; it regrows to where the season would have it."""
    cuts = seen["cuts"]
    if not cuts.any():
        return kcb
    last = np.maximum.accumulate(np.where(cuts, day, -np.inf), axis=0)
    since = day - last
    low = units["kcb_ini"].to_numpy(float)
    share = np.clip((since - CUT_BACK_DAYS) / settings.regrowth_days, 0.0, 1.0)
    back = np.minimum(low, kcb)
    return np.where(np.isfinite(since), back + share * (kcb - back), kcb)


def _measured(
    kcb: np.ndarray,
    units: pd.DataFrame,
    observations: pd.DataFrame,
    record: StationRecord,
    marks: dict[str, np.ndarray],
    day: np.ndarray,
) -> np.ndarray:
    """Move Kcb to measured canopies: the ratio of measured to computed is drawn linearly between the dates."""
    if not len(observations) or "observed_value" not in observations:
        return kcb
    words = observations["observed"].astype(str).str.strip().str.lower()
    rows = observations[words.isin(["canopy cover", "leaf area"]) & observations["observed_value"].notna()]
    if not len(rows):
        return kcb
    kcb = kcb.copy()
    where = _positions(rows["date"], record)
    stand = units["stand_id"].to_numpy(str)
    for stand_id, group in rows.assign(where=where).groupby(rows["stand_id"].astype(str)):
        group = group[(group["where"] >= 0) & (group["where"] < len(day))].sort_values("where")
        at = group["where"].to_numpy(int)
        area = (words.loc[group.index] == "leaf area").to_numpy()
        value = group["observed_value"].to_numpy(float)
        for unit in np.flatnonzero(stand == stand_id) if len(at) else ():
            full, height = kcb[:, unit].max(), float(units["height_max_m"].iloc[unit])
            target = np.where(area, kcb_from_leaf_area(full, value), kcb_from_canopy_cover(full, value / 100.0, height))
            ratio = target / np.maximum(kcb[at, unit], 0.01)
            kcb[:, unit] = np.minimum(kcb[:, unit] * np.interp(day[:, 0], at, ratio), max(full, target.max()))
    return kcb


def _stage(units: pd.DataFrame, marks: dict[str, np.ndarray], annual: np.ndarray, day: np.ndarray) -> np.ndarray:
    """Stage codes."""
    stage = np.zeros((len(day), len(units)), dtype=np.int8)
    steps = (
        ("planting", Stage.PLANTED), ("emergence", Stage.INITIAL), ("cover10", Stage.DEVELOPMENT),
        ("full_cover", Stage.MIDDLE), ("late", Stage.LATE), ("maturity", Stage.MATURE), ("harvest", Stage.BARE),
    )  # fmt: skip
    for name, code in steps:
        stage[annual & (day >= marks[name])] = code
    grass = (units["marks"] == "green-up").to_numpy()
    stage[:, grass] = Stage.DORMANT
    stage[:, (units["habit"] == "water").to_numpy() & ~grass] = Stage.MIDDLE
    first, second = units["len_ini_d"].to_numpy(float), units["len_dev_d"].to_numpy(float)
    for greenup, freeze, end in zip(marks["greenup"], marks["freeze"], marks["end"], strict=True):
        for begin, code in (
            (greenup, Stage.INITIAL), (greenup + first, Stage.DEVELOPMENT), (greenup + first + second, Stage.MIDDLE),
            (freeze, Stage.LATE), (end, Stage.DORMANT),
        ):  # fmt: skip
            stage[day >= np.nan_to_num(begin, nan=np.inf)] = code
    return stage


def _open_greenup(basis: dict[str, np.ndarray], day: np.ndarray, marks: dict[str, np.ndarray]) -> np.ndarray:
    """Provisional bit of grass whose green-up may still move."""
    open_ = ~basis["settled"] & (day >= np.nan_to_num(marks["greenup"][-1], nan=np.inf) - 30.0)
    return np.where(open_, flag_bits("provisional")["greenup"], 0).astype(np.uint8)


def _relative(kcb: np.ndarray, units: pd.DataFrame) -> np.ndarray:
    """Kcb over its highest of the season."""
    peak = np.maximum(units["kcb_mid"].to_numpy(float), kcb.max(axis=0, initial=0.0))
    return kcb / np.where(peak > 0.0, peak, 1.0)


def _kept(values: np.ndarray, growing: np.ndarray) -> np.ndarray:
    """Running maximum within each growing season, 0 between them."""
    best = np.zeros(values.shape[1])
    kept = np.empty(values.shape)
    for day in range(len(values)):
        best = np.where(growing[day], np.maximum(best, values[day]), 0.0)
        kept[day] = best
    return kept


def _height(kcb: np.ndarray, units: pd.DataFrame, annual: np.ndarray, stage: np.ndarray) -> np.ndarray:
    """Height grows with Kcb; an annual crop does not shrink, grass is set back by a cut.  [FAO56] Annex 8."""
    share = np.minimum(_relative(kcb, units), 1.0)
    growing = (stage >= Stage.INITIAL) & (stage <= Stage.MATURE)
    return units["height_max_m"].to_numpy(float) * np.where(annual, _kept(share, growing), share)


def _roots(kcb: np.ndarray, units: pd.DataFrame, annual: np.ndarray, stage: np.ndarray) -> np.ndarray:
    """Root depth grows with Kcb and does not shrink in season; perennial roots are there.  [FAO56] eq. 8-1."""
    low, peak = (
        units["kcb_ini"].to_numpy(float),
        np.maximum(kcb.max(axis=0, initial=0.0), units["kcb_mid"].to_numpy(float)),
    )
    share = np.clip((kcb - low) / np.where(peak > low, peak - low, 1.0), 0.0, 1.0)
    growing = (stage >= Stage.INITIAL) & (stage <= Stage.MATURE)
    least, most = units["root_min_m"].to_numpy(float), units["root_max_m"].to_numpy(float)
    perennial = np.where((units["habit"] == "sod").to_numpy(), most, least)
    return np.where(annual, least + (most - least) * _kept(share, growing), perennial)


def _cover(
    kcb: np.ndarray, kc_max: np.ndarray, height: np.ndarray, units: pd.DataFrame, stage: np.ndarray
) -> np.ndarray:
    """Ground cover by eq. 76, a sod's own, and of standing dead plants half of what they had."""
    cover = ground_cover_from_kcb(kcb, kc_max, height)
    growing = (stage >= Stage.INITIAL) & (stage <= Stage.MATURE)
    dead = np.where(stage >= Stage.LATE, DEAD_COVER_SHARE * _kept(cover, growing), 0.0)
    cover = np.where(stage <= Stage.PLANTED, 0.0, np.maximum(cover, dead))
    own = units["ground_cover_sod"].to_numpy(float)
    return np.where(np.isnan(own), cover, own)


def rule_windows(
    units: pd.DataFrame, rules: pd.DataFrame, marks: dict[str, np.ndarray], n_days: int
) -> dict[str, np.ndarray]:
    """Days on which irrigation, the late depletion and a word on stress make sense, (day, unit) booleans.

    The irrigation window runs from the rule's first stage (V8 unless it says otherwise) to its last (maturity), at
    perennial covers from green-up to the end of the season.
    """
    day = np.arange(n_days, dtype=float)[:, None]
    annual = (units["habit"] == "annual").to_numpy()
    words = {
        "from_stage": np.full(len(units), "v8", dtype=object),
        "to_stage": np.full(len(units), "maturity", dtype=object),
    }
    if len(rules):
        by_id = rules.drop_duplicates("rule_id").set_index("rule_id")
        for name, chosen in words.items():
            if name in by_id:
                named = units["rule_id"].map(by_id[name])
                for word, mark in RULE_STAGES.items():
                    chosen[(named.astype(str).str.lower() == word.lower()).to_numpy()] = mark
    first = _pick(marks, words["from_stage"])
    last = _pick(marks, words["to_stage"])
    growing = in_season(marks, day)
    irrigated = units["irrigated"].to_numpy(bool)
    return {
        "in_window": np.where(annual, (day >= first) & (day < last), growing) & irrigated,
        "late": annual & (day >= marks["late"]),
        "stress_window": np.where(annual, (day >= marks["cover10"]) & (day < marks["maturity"]), growing),
    }


def _pick(marks: dict[str, np.ndarray], names: np.ndarray) -> np.ndarray:
    """Each unit's own choice of mark."""
    chosen = np.full(len(names), np.nan)
    for name in set(names):
        here = names == name
        chosen[here] = marks[name][here]
    return chosen


def in_season(marks: dict[str, np.ndarray], day: np.ndarray) -> np.ndarray:
    """Perennial covers between green-up and the end of the season."""
    inside = np.zeros((len(day), marks["greenup"].shape[1]), dtype=bool)
    for greenup, end in zip(marks["greenup"], marks["end"], strict=True):
        inside |= (day >= np.nan_to_num(greenup, nan=np.inf)) & (day < np.nan_to_num(end, nan=np.inf))
    return inside


def check(case: Case) -> list[Finding]:
    """Findings on what grows, without weather: dates, cuts and words that do not fit together."""
    stand, seen = case.table("stands"), case.table("observations")
    found: list[Finding] = []
    if not len(stand):
        return found
    covers = complete(case, "covers")
    habit = stand["cover_id"].map(covers["habit"])
    cutting = dict(zip(stand["stand_id"].astype(str), stand["cover_id"].map(covers["cutting"]), strict=True))
    spread = stand.get("planting_date_middle", None)
    planting = stand.get("planting_date", None)
    for row, (stand_id, kind) in enumerate(zip(stand["stand_id"].astype(str), habit, strict=True)):
        about = f"stand {stand_id}"
        dates = [table.iloc[row] for table in (planting, spread) if table is not None and table.notna().iloc[row]]
        if kind == "annual" and not dates:
            found.append(Finding("planting-missing", "stands", row, "planting_date", None, about))
        if kind != "annual" and dates:
            found.append(Finding("planting-not-needed", "stands", row, "planting_date", str(dates[0].date()), about))
        if "harvest_date" in stand and stand["harvest_date"].notna().iloc[row] and dates:
            harvest = stand["harvest_date"].iloc[row]
            if harvest <= dates[0]:
                found.append(
                    Finding("harvest-before-planting", "stands", row, "harvest_date", str(harvest.date()), about)
                )
    for row in range(len(seen)):
        word = str(seen["observed"].iloc[row]).strip().lower()
        stand_id = str(seen["stand_id"].iloc[row])
        about = f"stand {stand_id}"
        if word in ("cut", "grazing") and cutting.get(stand_id) == "averaged":
            found.append(Finding("cut-on-averaged", "observations", row, "observed", word, about))
        value = seen["observed_value"].iloc[row] if "observed_value" in seen else np.nan
        if word in ("canopy cover", "leaf area") and not np.isfinite(np.float64(value)):
            found.append(Finding("observation-without-value", "observations", row, "observed_value", None, about))
    return found
