"""Outlines of the counties, from a file beside the workbook or, for US counties, from the package; what they fill in.

A county joins its outline by id. What does not join is said, and is drawn as a dot.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from etflux import outlines
from etflux.case import Settings
from etflux.findings import CannotRead, Finding
from etflux.outlines import Outline
from etflux.weather.places import great_circle_km
from etflux.workbook.headings import nearest
from etflux.workbook.weather_files import Trouble, beside

if TYPE_CHECKING:
    import pandas as pd

GEOID = re.compile(r"\d{5}\Z")
MEASURED = ("area_km2", "latitude_deg", "longitude_deg")
NAMED_MOST = 5  # ids in one sentence
ELSEWHERE_KM = 100.0  # a county entered farther than this from its GEOID's place is another one

Cells = set[tuple[int, str | None]]


def with_outlines(
    settings: Settings, counties: pd.DataFrame, folder: Path, unread: Cells
) -> tuple[pd.DataFrame, dict[str, Outline], list[Finding]]:
    """Counties with blanks filled from the packaged outlines, outlines by county id, and what is to be said.

    Parameters
    ----------
    settings : Settings
        `outlines_file` names a file beside the workbook.
    counties : DataFrame
        Table of a case; `area_km2`, `latitude_deg` and `longitude_deg` may be NaN.
    folder : Path
        Of the workbook.
    unread : set of (row, quantity)
        Cells that have an error already.

    Returns
    -------
    counties : DataFrame
    outlines : dict of str to Outline
    findings : list of Finding
    """
    packaged, findings = _packaged(counties)
    counties, said = _filled(counties, packaged, unread)
    findings += said
    if settings.outlines_file:
        found, said = _of_file(settings.outlines_file, counties["county_id"].tolist(), folder)
        return counties, found, findings + said
    taken, said = _at_their_place(counties, packaged)
    return counties, taken, findings + said


def _packaged(counties: pd.DataFrame) -> tuple[dict[int, Outline], list[Finding]]:
    """Packaged outline of every row whose id is a GEOID; renumbered ones are said."""
    ids = [str(identity) if identity is not None else "" for identity in counties["county_id"]]
    if not any(GEOID.match(identity) for identity in ids):
        return {}, []
    known, aliases = outlines.us_counties(), outlines.us_county_aliases()
    found: dict[int, Outline] = {}
    findings = []
    for row, identity in enumerate(ids):
        outline = known.get(identity)
        if outline is None and identity in aliases:
            alias = aliases[identity]
            outline = known[alias.outline_geoid] if alias.whole else None
            findings.append(
                Finding("geoid-renumbered", "counties", row, "county_id", identity, f"county {identity}", alias.change)
            )
        if outline is not None:
            found[row] = outline
    return found, findings


def _filled(
    counties: pd.DataFrame, packaged: Mapping[int, Outline], unread: Cells
) -> tuple[pd.DataFrame, list[Finding]]:
    """Blank name, place and area of US counties from their outlines; an error where there is none."""
    counties = counties.copy()
    if "name" not in counties:
        counties["name"] = None
    filled: dict[str, int] = {}
    findings = []
    for row, identity in enumerate(counties["county_id"].tolist()):
        blank = [name for name in MEASURED if np.isnan(counties[name].iloc[row]) and (row, name) not in unread]
        unnamed = counties["name"].iloc[row] in (None, "")
        if row in packaged and (blank or unnamed):
            values = dict(zip(MEASURED, outlines.area_and_centroid(packaged[row]), strict=True))
            for name in blank:
                counties.loc[counties.index[row], name] = values[name]
            if unnamed:
                counties.loc[counties.index[row], "name"] = packaged[row].name
            for name in (*blank, *(["name"] if unnamed else [])):
                filled[name] = filled.get(name, 0) + 1
        elif blank and identity is not None and GEOID.match(str(identity)):
            close = nearest(str(identity), list(outlines.us_counties()))
            findings.append(
                Finding("geoid-unknown", "counties", row, "county_id", identity, f"county {identity}", close)
            )
        else:
            findings += [
                Finding("value-missing", "counties", row, name, None, f"county {identity}" if identity else "")
                for name in blank
            ]
    if filled:
        words = {"area_km2": "outline area", "latitude_deg": "latitude", "longitude_deg": "longitude", "name": "name"}
        detail = ", ".join(f"{words[name]} of {count}" for name, count in filled.items())
        findings.append(Finding("county-from-outline", "counties", detail=detail))
    return counties, findings


def _at_their_place(
    counties: pd.DataFrame, packaged: Mapping[int, Outline]
) -> tuple[dict[str, Outline], list[Finding]]:
    """Packaged outlines by county id, of counties that lie where their GEOID does; each outline once."""
    found: dict[str, Outline] = {}
    findings = []
    ids = counties["county_id"].tolist()
    used: dict[str, int] = {}
    for outline in packaged.values():
        used[outline.county_id] = used.get(outline.county_id, 0) + 1
    for row, outline in packaged.items():
        if used[outline.county_id] > 1:
            continue
        here = counties["latitude_deg"].iloc[row], counties["longitude_deg"].iloc[row]
        _, latitude, longitude = outlines.area_and_centroid(outline)
        km = great_circle_km(*(np.array([value]) for value in (*here, latitude, longitude)))[0, 0]
        if not km <= ELSEWHERE_KM:
            detail = f"{outline.name} is {km:.0f} km away"
            findings.append(
                Finding("geoid-elsewhere", "counties", row, "county_id", ids[row], f"county {ids[row]}", detail)
            )
            continue
        found[ids[row]] = Outline(ids[row], outline.name, outline.polygons)
    return found, findings


def _of_file(name: str, ids: list[str | None], folder: Path) -> tuple[dict[str, Outline], list[Finding]]:
    """Outlines of a file by county id, and what did not join."""

    def said(code: str, value: str | None = None, detail: str = "") -> Finding:
        return Finding(code, "settings", None, "outlines_file", value or name, "", detail)

    path = beside(folder, name)
    if isinstance(path, Trouble):
        return {}, [said(path.code, detail=path.detail)]
    try:
        drawn = outlines.read(path)
    except CannotRead as error:
        return {}, [said("outlines-unreadable", detail=str(error))]
    wanted = [str(identity) for identity in ids if identity is not None]
    alike = {_plain(identity): identity for identity in drawn}
    joined = {identity: drawn.get(identity) or drawn.get(alike.get(_plain(identity), "")) for identity in wanted}
    found = {identity: outline for identity, outline in joined.items() if outline is not None}
    lacking = [identity for identity in wanted if identity not in found]
    if wanted and not found:
        detail = (
            f"the file has {', '.join(list(drawn)[:NAMED_MOST])}; the counties are {', '.join(wanted[:NAMED_MOST])}"
        )
        return {}, [said("outlines-join-nothing", detail=detail)]
    findings = []
    if lacking:
        findings.append(said("county-without-outline", detail=_listed(lacking)))
    used = {outline.county_id for outline in found.values()}
    over = [identity for identity in drawn if identity not in used]
    if over:
        findings.append(said("outline-without-county", detail=_listed(over)))
    return found, findings


def _plain(identity: str) -> str:
    """An id without what programs lose or change: leading zeros, capitals."""
    return identity.strip().casefold().lstrip("0")


def _listed(ids: list[str]) -> str:
    more = f" and {len(ids) - NAMED_MOST} more" if len(ids) > NAMED_MOST else ""
    return f"{len(ids)}: {', '.join(ids[:NAMED_MOST])}{more}"
