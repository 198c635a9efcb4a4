"""What can be said about crops and observations before any weather is looked at."""

from __future__ import annotations

import difflib
from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from etflux.canopy.observed import CANOPIES, CUTS
from etflux.crops import OBSERVED, OBSERVED_MARKS, RULE_STAGES
from etflux.findings import Finding
from etflux.stands import complete, packaged

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case

PLANTINGS = ("planting_date", "planting_date_early", "planting_date_middle", "planting_date_late")
# Heat units to black layer outside of which a hybrid is worth a second look: 2000 and 3250 °F-days, common practice.
USUAL_HYBRID = (2000.0 / 1.8, 3250.0 / 1.8)


def check(case: Case) -> list[Finding]:
    """Findings on what grows: dates, hybrids, covers, cuts, observations and words that do not fit together.

    Unknown ids, missing numbers of a cover and days outside the season are the business of ``checks``.
    """
    stand = case.table("stands")
    covers = complete(case, "covers")
    found = [*_words(case)]
    if len(stand):
        cover = covers.reindex(stand["cover_id"].astype(str)).reset_index()
        found += [*_plantings(stand, cover), *_hybrids(stand, cover)]
        found += [*_observations(case, stand, cover), *_uncut(case, stand, cover)]
    return found


def _column(table: pd.DataFrame, name: str) -> pd.Series:
    """A column, blank where the table has none."""
    import pandas as pd

    return table[name] if name in table else pd.Series(np.nan, index=table.index, dtype=object)


def _dates(table: pd.DataFrame, name: str) -> np.ndarray:
    """A column of dates, NaT where blank or absent."""
    import pandas as pd

    return pd.to_datetime(_column(table, name)).to_numpy().astype("datetime64[D]")


def _rows(mask: np.ndarray | pd.Series) -> list[int]:
    return np.flatnonzero(mask).tolist()


def _about(stand: pd.DataFrame, row: int) -> str:
    return f"stand {stand['stand_id'].iloc[row]}"


def _plantings(stand: pd.DataFrame, cover: pd.DataFrame) -> Iterator[Finding]:
    """Planting dates of annual covers, none of the others, and a harvest after them."""
    dates = {name: _dates(stand, name) for name in PLANTINGS}
    given = np.stack([~np.isnat(days) for days in dates.values()])
    annual, known = (cover["habit"] == "annual").to_numpy(), cover["habit"].notna().to_numpy()
    spread = given[1:].all(axis=0)
    for row in _rows(annual & ~given[0] & ~given[1:].any(axis=0)):
        yield Finding("planting-missing", "stands", row, "planting_date", None, _about(stand, row))
    for row in _rows(known & ~annual & given.any(axis=0)):
        name = PLANTINGS[int(given[:, row].argmax())]
        yield Finding("planting-not-needed", "stands", row, name, str(dates[name][row]), _about(stand, row))
    for row in _rows(annual & given[0] & spread):
        value = str(dates["planting_date"][row])
        yield Finding("planting-twice", "stands", row, "planting_date", value, _about(stand, row))
    last = np.where(spread, dates["planting_date_late"], dates["planting_date"])
    harvest = _dates(stand, "harvest_date")
    for row in _rows(annual & (harvest <= last)):
        value = str(harvest[row])
        yield Finding("harvest-before-planting", "stands", row, "harvest_date", value, _about(stand, row))
    greenup = ~np.isnat(_dates(stand, "greenup_date"))
    for row in _rows(known & greenup & (cover["marks"] != "green-up").to_numpy()):
        value = str(_dates(stand, "greenup_date")[row])
        yield Finding("greenup-not-needed", "stands", row, "greenup_date", value, _about(stand, row))


def _hybrids(stand: pd.DataFrame, cover: pd.DataFrame) -> Iterator[Finding]:
    """Heat units of a hybrid where they mean something, and in a usual range."""
    hybrid = _column(stand, "hybrid_heat_units").astype(float).to_numpy()
    corn = (cover["tag"] == "corn").to_numpy()
    low, high = USUAL_HYBRID
    for row in _rows(~np.isnan(hybrid) & corn & ((hybrid < low) | (hybrid > high))):
        value = float(hybrid[row])
        yield Finding("hybrid-unusual", "stands", row, "hybrid_heat_units", value, _about(stand, row))
    for row in _rows(~np.isnan(hybrid) & ~corn & cover["tag"].notna().to_numpy()):
        value = float(hybrid[row])
        yield Finding("hybrid-not-needed", "stands", row, "hybrid_heat_units", value, _about(stand, row))


def _words(case: Case) -> Iterator[Finding]:
    """Words for stages and observations that are not in the list; covers whose words lead nowhere."""
    for table, name, known in (
        ("observations", "observed", OBSERVED),
        ("irrigation_rules", "from_stage", tuple(RULE_STAGES)),
        ("irrigation_rules", "to_stage", tuple(RULE_STAGES)),
    ):
        words = _column(case.table(table), name)
        lower = {word.lower(): word for word in known}
        for row in _rows(words.notna()):
            word = str(words.iloc[row]).strip().lower()
            if word not in lower:
                near = difflib.get_close_matches(word, lower, n=1, cutoff=0.0)
                detail = f"nearest is '{lower[near[0]]}'" if near else f"known are {', '.join(known)}"
                yield Finding("stage-unknown", table, row, name, str(words.iloc[row]), "", detail)
    yield from _own_covers(case)


def _own_covers(case: Case) -> Iterator[Finding]:
    """Stages by heat units need a row of heat units; a runoff class is one of the table."""
    own = case.table("covers")
    heat, classes = set(packaged("heat_units")["cover_id"]), set(packaged("curve_numbers")["cover_class"])
    for row in range(len(own)):
        cover = own.iloc[row]
        about = f"cover {cover['cover_id']}"
        marks, known = cover.get("marks"), {cover["cover_id"], cover.get("tag")} & heat
        if marks == "heat units" and not known:
            yield Finding("heat-units-unknown", "covers", row, "marks", marks, about)
        name = cover.get("curve_number_class")
        if isinstance(name, str) and name not in classes:
            yield Finding("runoff-class-unknown", "covers", row, "curve_number_class", name, about)


def _observations(case: Case, stand: pd.DataFrame, cover: pd.DataFrame) -> Iterator[Finding]:
    """Observations that the cover has no use for, that lack a value, or that follow each other the wrong way."""
    seen = case.table("observations")
    if not len(seen):
        return
    ids = stand["stand_id"].astype(str)
    of = cover.set_index(ids.to_numpy())[["habit", "cutting"]]
    of = of[~of.index.duplicated()].reindex(seen["stand_id"].astype(str)).reset_index(drop=True)
    words = seen["observed"].astype(str).str.strip().str.lower().to_numpy(str)
    value = _column(seen, "observed_value").astype(float).to_numpy()
    dates = _dates(seen, "date")
    for row, word in enumerate(words):
        about = f"stand {seen['stand_id'].iloc[row]}, {dates[row]}"
        habit, cutting = of["habit"].iloc[row], of["cutting"].iloc[row]
        if habit != habit:  # an unknown stand is another check's finding
            continue
        stage = word in OBSERVED_MARKS or word in ("harvest", "replant")
        if word in CUTS and cutting == "averaged":
            yield Finding("cut-on-averaged", "observations", row, "observed", word, about)
        elif (word in CUTS and cutting != "dated") or (stage and habit != "annual"):
            yield Finding("observation-without-use", "observations", row, "observed", word, about)
        if word in CANOPIES and not value[row] >= 0.0:
            yield Finding("observation-without-value", "observations", row, "observed_value", None, about)
        if word == "canopy cover" and 0.0 < value[row] <= 1.0:
            yield Finding("canopy-cover-fraction", "observations", row, "observed_value", float(value[row]), about)
    yield from _order(seen, words, dates, stand)


def _order(seen: pd.DataFrame, words: np.ndarray, dates: np.ndarray, stand: pd.DataFrame) -> Iterator[Finding]:
    """Stages of one stand come one after the other, after planting; a replant starts them anew."""
    rank = {word: place for place, word in enumerate((*OBSERVED_MARKS, "harvest"))}
    planted = dict(zip(stand["stand_id"].astype(str), _first_planting(stand), strict=True))
    ids = seen["stand_id"].astype(str).to_numpy()
    rows = _rows(np.isin(words, [*rank, "replant"]) & ~np.isnat(dates))
    last: dict[str, tuple[np.datetime64, int, str]] = {}
    for row in sorted(rows, key=lambda row: (ids[row], dates[row], rank.get(str(words[row]), -1))):
        start = planted.get(ids[row], np.datetime64("NaT"))
        day, place, word = last.get(ids[row], (start, -1, "planting"))
        if words[row] == "replant":
            last[ids[row]] = (dates[row], -1, "replant")
            continue
        subject = f"stand {ids[row]}, {dates[row]}"
        if rank[words[row]] <= place or dates[row] < day:
            detail = f"{word} on {day}"
            yield Finding("observation-order", "observations", row, "date", words[row], subject, detail)
        last[ids[row]] = (dates[row], max(place, rank[words[row]]), words[row])


def _first_planting(stand: pd.DataFrame) -> np.ndarray:
    """First planting date of each stand."""
    dates = np.stack([_dates(stand, name) for name in PLANTINGS])
    return np.fmin.reduce(dates, axis=0)


def _uncut(case: Case, stand: pd.DataFrame, cover: pd.DataFrame) -> Iterator[Finding]:
    """A cover that lives by cut dates but has none is never cut."""
    seen = case.table("observations")
    words = seen["observed"].astype(str).str.strip().str.lower() if len(seen) else []
    cut = set(seen["stand_id"].astype(str)[np.isin(words, CUTS)]) if len(seen) else set()
    dated = (cover["cutting"] == "dated").to_numpy() & ~stand["stand_id"].astype(str).isin(cut).to_numpy()
    for row in _rows(dated):
        yield Finding("never-cut", "stands", row, "cover_id", str(stand["cover_id"].iloc[row]), _about(stand, row))
