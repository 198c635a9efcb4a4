"""What is wrong between the tables of a case: ids, areas, days, irrigation; and what the science says about each.

No check needs a file. Each finding names table, row and quantity; the reader of the file knows where that is.
"""

from __future__ import annotations

from collections.abc import Iterable, Set
from dataclasses import replace
from difflib import get_close_matches
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux import air_checks, canopy, stands, weather
from etflux.case import TABLES
from etflux.findings import Finding, has_errors
from etflux.irrigation import rule_problems
from etflux.soilwater import soil_problems
from etflux.variables import quantities

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case
    from etflux.weather import StationRecord

Unread = Set[tuple[str, int | None, str | None]]

FAR_KM = 300.0
WITHOUT = "station-without-weather"
HOURS_APART = 6.0  # clocks and longitude; political time zones stray 3 hours at most
# Whose ids a column names.
REFERENCES: tuple[tuple[str, str, str], ...] = (
    ("weather", "station_id", "stations"), ("counties", "station_id", "stations"), ("stands", "station_id", "stations"),
    ("rain_gauges", "county_id", "counties"), ("rest", "county_id", "counties"), ("stands", "county_id", "counties"),
    ("mixing_depths", "county_id", "counties"), ("wind", "county_id", "counties"),
    ("stands", "cover_id", "covers"), ("rest", "cover_id", "covers"),
    ("stands", "soil_id", "soils"), ("rest", "soil_id", "soils"), ("stands", "rule_id", "irrigation_rules"),
    ("irrigation_events", "stand_id", "stands"), ("observations", "stand_id", "stands"),
)  # fmt: skip
KEYS = {
    "stations": "station_id", "counties": "county_id", "stands": "stand_id", "soils": "soil_id", "covers": "cover_id",
    "irrigation_rules": "rule_id",
}  # fmt: skip
NEEDED = ("stations", "counties", "stands")  # without rows they are missed as a whole
# What a cover of each habit cannot do without; the annual ones' lengths also serve where heat units are not known.
OF_ALL_COVERS = (
    "cutting", "frost_kill", "adjust_climate", "kcb_ini", "kcb_mid", "kcb_end", "kcb_end_dry", "kcb_dormant",
    "height_max_m", "root_min_m", "root_max_rainfed_m", "root_max_irrigated_m", "depletion_fraction",
    "curve_number_class",
)  # fmt: skip
OF_HABIT = {
    "annual": ("emergence_d", "len_ini_d", "len_dev_d", "len_mid_d", "len_late_d", "harvest_after_d"),
    "sod": ("ground_cover_sod",),
}
OF_GREEN_UP = ("len_ini_d", "len_dev_d")
# Ranges that another check knows better.
RANGED_ELSEWHERE = {("wind", "wind_from_deg"), ("mixing_depths", "hour")}
DATED = ("rain_gauges", "irrigation_events", "observations", "mixing_depths", "wind", "background_air")


def case_findings(case: Case, unread: Unread = frozenset()) -> list[Finding]:
    """Everything that can be said about a case before it is run.

    Parameters
    ----------
    case : Case
        With or without errors; values that could not be read are missing.
    unread : set of (table, row, quantity)
        What has an error already (row None: a whole column); nothing is said that only follows from it.

    Returns
    -------
    list of Finding
        By check; :func:`etflux.findings.ordered` sorts them.
    """
    found = [
        *_twice(case), *_unknown(case), *_ranges(case), *_covers(case), *_where(case), *_without_stands(case),
        *soil_problems(case.table("soils")), *rule_problems(case.table("irrigation_rules")),
        *_irrigation(case, unread), *stands.check(case), *canopy.check(case), *air_checks.check(case),
    ]  # fmt: skip
    if len(case.table("weather")) and len(case.table("stations")):
        record = weather.arrange(_on_the_globe(case))
        found += [*_season(case, record.dates), *_of_weather(case, record, unread)]
        if not unread and not has_errors(found):
            found += _gaps(case, record, {finding.subject for finding in found if finding.code == WITHOUT})
    return [finding for finding in found if (finding.table, finding.row, finding.quantity) not in unread]


def _on_the_globe(case: Case) -> Case:
    """Return the case with impossible places of stations blank: nothing can be said of the sun and air there."""
    station = case.table("stations")
    possible = {}
    for name in ("latitude_deg", "longitude_deg", "elevation_m", "wind_height_m", "utc_offset_h"):
        if name in station:
            values, limits = station[name].astype(float), quantities()[name]
            possible[name] = values.where(values.between(limits.low, limits.high))
    return replace(case, tables={**case.tables, "stations": station.assign(**possible)})


def _at_reading(days: pd.DataFrame, finding: Finding) -> Finding:
    """Return a finding with the row that holds its value: at morning observers the next day's reading."""
    if finding.row is None or finding.quantity not in days or not isinstance(finding.value, float):
        return finding
    if days[finding.quantity].iloc[finding.row] == finding.value:
        return finding
    station, date = days["station_id"].iloc[finding.row], days["date"].iloc[finding.row]
    rows = _rows((days["station_id"] == station) & (days["date"] == date + np.timedelta64(1, "D")))
    found = [row for row in rows if days[finding.quantity].iloc[row] == finding.value]
    return replace(finding, row=found[0]) if found else finding


def _of_weather(case: Case, record: StationRecord, unread: Unread) -> list[Finding]:
    """What the record says of itself, with the station's row; missing days only where every row found its place."""
    whole = not any(table == "weather" and row is None for table, row, _ in unread)
    station, days = case.table("stations"), case.table("weather")
    ids = _texts(station, "station_id").tolist()
    placed = whole and days["date"].notna().all() and _texts(days, "station_id").isin(ids).all() and "" not in ids
    found = []
    for finding in weather.quality(record):
        if finding.code == WITHOUT:
            finding = replace(finding, row=ids.index(finding.value) if finding.value in ids else None)
        lost = ("stations", finding.row, "weather_file") in unread
        if finding.code not in (WITHOUT, "days-missing") or (placed and not lost):
            found.append(_at_reading(days, finding))
    return found


def _gaps(case: Case, record: StationRecord, without: set[str]) -> list[Finding]:
    """What filling the record and giving it to the counties will say: days at which a season must stop."""
    if not len(record.dates) or not len(case.table("counties")):
        return []
    filled, of_stations = weather.fill(record, case.settings)
    known = [finding for finding in of_stations if finding.subject not in without]
    return [*known, *weather.to_counties(case, filled)[1]]


def _about(table: str, row: pd.Series) -> str:
    """Who and when, in words."""
    for name, word in (("stand_id", "stand"), ("station_id", "station"), ("county_id", "county"), ("rule_id", "rule"),
                       ("soil_id", "soil"), ("cover_id", "cover"), ("site_id", "site")):  # fmt: skip
        if name == KEYS.get(table) or (name == TABLES[table][0][0]):
            who = f"{word} {row[name]}" if isinstance(row[name], str) else ""
            when = str(row["date"])[:10] if "date" in row and row["date"] == row["date"] else ""
            return ", ".join(part for part in (who, when) if part)
    return ""


def _finding(
    case: Case, code: str, table: str, row: int, name: str | None, value: Any = None, detail: str = ""
) -> Finding:  # fmt: skip
    return Finding(code, table, int(row), name, value, _about(table, case.table(table).iloc[row]), detail)


def _rows(mask: Any) -> list[int]:
    return np.flatnonzero(mask).tolist()


def _texts(table: pd.DataFrame, name: str) -> pd.Series:
    """An id column as text, blanks empty."""
    return table[name].fillna("").astype(str)


# --- ids ---


def _twice(case: Case) -> Iterable[Finding]:
    """Ids that are there twice, or differ only by capitals; days that are there twice."""
    for name, key in KEYS.items():
        table = case.table(name)
        if not len(table):
            continue
        ids = _texts(table, key)
        again = (ids.duplicated() & (ids != "")).to_numpy()
        for row in _rows(again):
            yield _finding(case, "id-twice", name, row, key, ids.iloc[row])
        alike = ids.str.casefold().duplicated().to_numpy() & ~again & (ids != "").to_numpy()
        for row in _rows(alike):
            yield _finding(case, "id-same-but-for-case", name, row, key, ids.iloc[row])
    for name, key, code in (("weather", "station_id", "row-repeated"), ("rain_gauges", "county_id", "row-repeated"),
                            ("irrigation_events", "stand_id", "event-twice")):  # fmt: skip
        table = case.table(name)
        known = table[key].notna() & table["date"].notna()
        rows = _rows((table.duplicated([key, "date"]) & known).to_numpy())
        if not len(rows):
            continue
        for _, same in table.iloc[rows].groupby(key):
            more = f"and {len(same) - 1} more days" if len(same) > 1 else ""
            row = int(same.index[0])
            yield _finding(case, code, name, row, "date", str(table["date"].iloc[row])[:10], more)


def _unknown(case: Case) -> Iterable[Finding]:
    """Ids that their own table does not list, each said once for a column, with the nearest known one.

    A list that has blank ids is no list: what it names cannot be known, and the blanks are said already.
    """
    known = {name: _listed(case, name) for name in KEYS}
    for name, column, target in REFERENCES:
        table, ids = case.table(name), known[target]
        if ids is None or not len(table) or column not in table:
            continue
        named = _texts(table, column)
        wrong = _rows(~named.isin(ids).to_numpy() & (named != "").to_numpy())
        for word, rows in table.iloc[wrong].groupby(named.iloc[wrong], sort=False):
            more = f"and {len(rows) - 1} more rows" if len(rows) > 1 else ""
            detail = "; ".join(part for part in (_nearest(str(word), ids), more) if part)
            yield _finding(case, "id-unknown", name, int(rows.index[0]), column, word, detail)
    cover, ids = case.settings.rest_cover, known["covers"]
    if ids is not None and cover not in ids:
        yield Finding("id-unknown", "settings", None, "rest_cover", cover, "", _nearest(cover, ids))


def _listed(case: Case, name: str) -> set[str] | None:
    """Ids of a table; None where nothing can be known: no rows where some are needed, or a blank among them."""
    table = case.table(name)
    own = set(_texts(table, KEYS[name])) if len(table) else set()
    if "" in own or (not own and name in NEEDED):
        return None
    return {str(word) for word in stands.complete(case, name).index} if name in ("covers", "soils") else own


def _nearest(word: str, known: Iterable[str]) -> str:
    spelled = {name.casefold(): name for name in known}
    close = get_close_matches(word.casefold(), spelled, n=1)
    return f"the nearest known id is {spelled[close[0]]!r}" if close else ""


# --- numbers ---


def _ranges(case: Case) -> Iterable[Finding]:
    """Values outside the plausible range; weather has its own check."""
    for name in TABLES:
        table = case.table(name)
        if name == "weather" or not len(table):
            continue
        for column in table.columns:
            row = quantities().get(column)
            if row is None or row.low is None or row.high is None or (name, column) in RANGED_ELSEWHERE:
                continue
            values = table[column].to_numpy(float)
            with np.errstate(invalid="ignore"):
                outside = (values < row.low * (1.0 - 1e-9) - 1e-12) | (values > row.high * (1.0 + 1e-9) + 1e-12)
            if row.low < 0.0:
                outside = (values < row.low - 1e-9) | (values > row.high + 1e-9)
            for place in _rows(outside):
                code = "rain-negative" if column == "rain_mm" and values[place] < 0.0 else "range"
                limits = f"from {row.low:g} to {row.high:g} {row.unit}".rstrip() if code == "range" else ""
                yield _finding(case, code, name, place, column, float(values[place]), limits)


def _covers(case: Case) -> Iterable[Finding]:
    """Covers that lack what their habit needs."""
    table = case.table("covers")
    for row in range(len(table)):
        cover = table.iloc[row]
        habit = cover.get("habit")
        if not isinstance(habit, str):
            continue
        lengths = OF_GREEN_UP if cover.get("marks") == "green-up" else ()
        for name in (*OF_ALL_COVERS, *OF_HABIT.get(habit, ()), *lengths):
            value = cover.get(name)
            if value is None or value != value:
                yield _finding(case, "cover-incomplete", "covers", row, name)


# --- places ---


def _where(case: Case) -> Iterable[Finding]:
    """Longitudes with the wrong sign, counties far from every station."""
    station, county = case.table("stations"), case.table("counties")
    if len(station) and "utc_offset_h" in station:
        offset, longitude = station["utc_offset_h"].to_numpy(float), station["longitude_deg"].to_numpy(float)
        apart = np.abs((offset - longitude / 15.0 + 12.0) % 24.0 - 12.0)
        for row in _rows(apart > HOURS_APART):
            detail = f"hours from UTC: {offset[row]:g}"
            yield _finding(case, "longitude-sign", "stations", row, "longitude_deg", float(longitude[row]), detail)
    if len(station) and len(county):
        km = weather.great_circle_km(
            *(county[name].to_numpy(float) for name in ("latitude_deg", "longitude_deg")),
            *(station[name].to_numpy(float) for name in ("latitude_deg", "longitude_deg")),
        )
        nearest = np.where(np.isnan(km), np.inf, km).min(axis=1)
        for row in _rows(np.isfinite(nearest) & (nearest > FAR_KM)):
            detail = f"the nearest is {nearest[row]:.0f} km away"
            value = float(county["latitude_deg"].iloc[row])
            yield _finding(case, "far-from-stations", "counties", row, "latitude_deg", value, detail)


def _without_stands(case: Case) -> Iterable[Finding]:
    stand, county = case.table("stands"), case.table("counties")
    if not len(stand):
        return
    for row in _rows(~_texts(county, "county_id").isin(_texts(stand, "county_id")).to_numpy()):
        if isinstance(county["county_id"].iloc[row], str):
            yield _finding(case, "county-without-stands", "counties", row, "county_id", county["county_id"].iloc[row])


# --- irrigation ---


def _irrigation(case: Case, unread: Unread) -> Iterable[Finding]:
    """Events without a depth, water on rainfed stands, irrigated stands that never get any."""
    stand, event = case.table("stands"), case.table("irrigation_events")
    rainfed, watered = set[str](), set[str]()
    if len(stand):
        regime = stand["water_regime"].fillna("rainfed") if "water_regime" in stand else "rainfed"
        read = np.array([("stands", row, "water_regime") not in unread for row in range(len(stand))])
        known = stand["stand_id"].notna() & read
        rainfed = set(stand.loc[known & (regime == "rainfed"), "stand_id"])
        watered = set(stand.loc[known & (regime != "rainfed"), "stand_id"])
    if len(event):
        gross, net = (
            event[name].to_numpy(float) if name in event else np.full(len(event), np.nan)
            for name in ("depth_gross_mm", "depth_net_mm")
        )
        for row in range(len(event)):
            if np.isnan(gross[row]) and np.isnan(net[row]):
                yield _finding(case, "irrigation-depth-missing", "irrigation_events", row, "depth_gross_mm")
            elif net[row] > gross[row]:
                yield _finding(case, "irrigation-net-above-gross", "irrigation_events", row, "depth_net_mm", net[row])
            elif np.isfinite(gross[row]) and np.isfinite(net[row]):
                yield _finding(case, "irrigation-depth-twice", "irrigation_events", row, "depth_net_mm", net[row])
            if event["stand_id"].iloc[row] in rainfed:
                name = event["stand_id"].iloc[row]
                yield _finding(case, "irrigation-on-rainfed", "irrigation_events", row, "stand_id", name)
    if not len(stand):
        return
    ruled = stand["rule_id"].notna() if "rule_id" in stand else np.zeros(len(stand), bool)
    dated = stand["stand_id"].isin(event["stand_id"] if len(event) else [])
    for row in range(len(stand)):
        name = stand["stand_id"].iloc[row]
        if name in rainfed and ruled[row]:
            yield _finding(case, "irrigation-on-rainfed", "stands", row, "rule_id", stand["rule_id"].iloc[row])
        elif name in watered and not ruled[row] and not dated[row]:
            yield _finding(case, "irrigation-never", "stands", row, "water_regime", stand["water_regime"].iloc[row])


# --- days ---


def _season(case: Case, dates: np.ndarray) -> Iterable[Finding]:
    """Days that the run does not have."""
    settings = case.settings
    if settings.season_start and settings.season_end and settings.season_end < settings.season_start:
        yield Finding("season-order", "settings", None, "season_end", settings.season_end)
        return
    days = case.table("weather")["date"]
    if not days.notna().any():
        return
    first, last = days.min(), days.max()
    if (settings.season_start and np.datetime64(settings.season_start) > last) or (
        settings.season_end and np.datetime64(settings.season_end) < first
    ):
        name = "season_start" if settings.season_start and np.datetime64(settings.season_start) > last else "season_end"
        detail = f"the record has {str(first)[:10]} to {str(last)[:10]}"
        yield Finding("season-without-weather", "settings", None, name, getattr(settings, name), "", detail)
        return
    if not len(dates):
        return
    start, end = dates[0].astype("datetime64[ns]"), dates[-1].astype("datetime64[ns]")
    span = f"the run has {dates[0]} to {dates[-1]}"
    brief = settings.brief_date
    if brief and not start <= np.datetime64(brief) <= end:
        yield Finding("day-outside-season", "settings", None, "brief_date", brief, "", span)
    for name in DATED:
        yield from _outside(case, name, start, end, span)
    yield from _planting(case, start, end, span)


def _outside(case: Case, name: str, start: Any, end: Any, span: str) -> Iterable[Finding]:
    """Rows of other tables that no day of the run uses; said once for a table."""
    table = case.table(name)
    if not len(table):
        return
    date = table["date"].to_numpy("datetime64[ns]")
    rows = _rows((date < start) | (date > end))
    if len(rows):
        more = f"and {len(rows) - 1} more rows" if len(rows) > 1 else ""
        detail = "; ".join(part for part in (span, more) if part)
        yield _finding(case, "day-outside-season", name, rows[0], "date", str(date[rows[0]])[:10], detail)


def _planting(case: Case, start: Any, end: Any, span: str) -> Iterable[Finding]:
    stand = case.table("stands")
    for name in ("planting_date", *stands.SPREAD):
        if not len(stand) or name not in stand:
            continue
        date = stand[name].to_numpy("datetime64[ns]")
        for code, wrong in (("planting-after-season", date > end), ("planting-before-season", date < start)):
            for row in _rows(wrong):
                yield _finding(case, code, "stands", row, name, str(date[row])[:10], span)
