"""What can be said about stands, counties and their rest before any weather is looked at."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from etflux.findings import Finding
from etflux.stands.units import SPREAD, hydrologic_letter

if TYPE_CHECKING:
    from etflux.case import Case


def check(case: Case) -> list[Finding]:
    """Findings on stands that need no weather: areas, shares, spreads, soil groups.

    Unknown ids, and water without a way to bring it, are the business of ``checks``.
    """
    return [*_areas(case), *_shares(case), *_rest(case), *_spreads(case), *_groups(case)]


def _areas(case: Case) -> Iterator[Finding]:
    """The stands of a county fit into it."""
    stand, counties = case.table("stands"), case.table("counties")
    if not len(stand) or not len(counties):
        return
    total = stand.groupby(stand["county_id"].astype(str))["area_km2"].sum()
    used = counties["county_id"].astype(str).map(total).fillna(0.0).to_numpy(float)
    area = counties["area_km2"].to_numpy(float)
    for row in np.flatnonzero(used > area * (1.0 + 1e-6)):
        about = f"county {counties['county_id'].iloc[row]}"
        detail = f"stands there sum to {used[row]:.4g} km², the county has {area[row]:.4g} km²"
        yield Finding("stands-above-county", "counties", int(row), "area_km2", float(area[row]), about, detail)


def _shares(case: Case) -> Iterator[Finding]:
    """The parts of a county's rest are no more than all of it."""
    rest = case.table("rest")
    if not len(rest):
        return
    county = rest["county_id"].fillna("").astype(str)
    total = rest.groupby(county)["share_pct"].sum()
    for county_id, share in total[total > 100.0 + 1e-6].items():
        row = int(np.flatnonzero(county == county_id)[-1])
        about, value = f"county {county_id or '(all)'}", float(rest["share_pct"].iloc[row])
        yield Finding("rest-above-100", "rest", row, "share_pct", value, about, f"parts sum to {share:g} %")


def _rest(case: Case) -> Iterator[Finding]:
    """A rest like the stands needs stands."""
    rest, stand = case.table("rest"), case.table("stands")
    if not len(rest) or "treatment" not in rest:
        return
    with_stands = set(stand["county_id"].astype(str)) if len(stand) else set()
    for row in np.flatnonzero(rest["treatment"] == "like the stands"):
        county_id = rest["county_id"].iloc[row]
        if isinstance(county_id, str) and county_id and county_id not in with_stands:
            about = f"county {county_id}"
            yield Finding("rest-without-stands", "rest", int(row), "treatment", "like the stands", about)


def _spreads(case: Case) -> Iterator[Finding]:
    """The three planting dates of a spread are all there, in order."""
    stand = case.table("stands")
    names = [name for name in SPREAD if name in stand]
    if not len(stand) or not names:
        return
    dates = stand.reindex(columns=list(SPREAD))
    given = dates.notna()
    for row in np.flatnonzero(given.any(axis=1)):
        about = f"stand {stand['stand_id'].iloc[row]}"
        days = dates.iloc[row]
        if not given.iloc[row].all():
            blank = SPREAD[int(np.flatnonzero(~given.iloc[row])[0])]
            yield Finding("spread-incomplete", "stands", int(row), blank, None, about)
        elif not days.is_monotonic_increasing:
            yield Finding("spread-order", "stands", int(row), SPREAD[0], str(days.iloc[0].date()), about)


def _groups(case: Case) -> Iterator[Finding]:
    """Hydrologic groups are A to D, or two of them."""
    for name in ("stands", "soils"):
        table = case.table(name)
        if not len(table) or "hydrologic_group" not in table:
            continue
        group = table["hydrologic_group"]
        both = [hydrologic_letter(group, np.full(len(table), drained)) for drained in (True, False)]
        good = np.isin(both[0].astype(str), list("ABCD")) & np.isin(both[1].astype(str), list("ABCD"))
        for row in np.flatnonzero(group.notna().to_numpy() & ~good):
            about = f"{name[:-1]} {table[name[:-1] + '_id'].iloc[row]}"
            yield Finding("hydrologic-group-unknown", name, int(row), "hydrologic_group", str(group.iloc[row]), about)
