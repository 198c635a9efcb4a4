"""Outlines of the counties, from a file beside the workbook or, for US counties, from the package; what they fill in.

A county joins its outline by id. What does not join is said, and is drawn as a dot.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Mapping
from difflib import get_close_matches
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from etflux import outlines
from etflux.case import Settings
from etflux.findings import CannotRead, Finding
from etflux.outlines import Outline
from etflux.weather.places import great_circle_km
from etflux.workbook.weather_files import Trouble, beside

if TYPE_CHECKING:
    import pandas as pd

GEOID = re.compile(r"\d{5}\Z")
MEASURED = ("area_km2", "latitude_deg", "longitude_deg")
NAMED_MOST = 5  # ids in one sentence
NO_OUTLINES = "none"  # value of the setting
ELSEWHERE_KM = 100.0  # a county entered farther than this from its GEOID's outline is another one

Cells = set[tuple[int, str | None]]


def with_outlines(
    settings: Settings, counties: pd.DataFrame, folder: Path, unread: Cells
) -> tuple[pd.DataFrame, dict[str, Outline], list[Finding]]:
    """Counties with blanks filled from the packaged outlines, outlines by county id, and what is to be said.

    Parameters
    ----------
    settings : Settings
        `outlines_file` names a file beside the workbook, or is "none"; blank: the packaged outlines of US counties.
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
    packaged, elsewhere = _at_their_place(counties, packaged)
    counties, said = _filled(counties, packaged, unread)
    findings += said
    if is_none(settings.outlines_file):
        return counties, {}, findings
    if settings.outlines_file:
        found, said = _of_file(settings.outlines_file, counties, folder)
        return counties, found, findings + said
    found, said = _each_once(counties["county_id"].tolist(), packaged)
    return counties, found, findings + elsewhere + said


def is_none(named: str) -> bool:
    """Whether the setting asks for no outlines at all."""
    return named.strip().casefold() == NO_OUTLINES


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
            near = known[alias.outline_geoid]
            outline = near if alias.whole else None
            which = f"its outline is that of {near.county_id}, {near.name}" if alias.whole else "no outline is used"
            detail = f"{alias.change}; {which}"
            findings.append(
                Finding("geoid-renumbered", "counties", row, "county_id", identity, f"county {identity}", detail)
            )
        if outline is not None:
            found[row] = outline
    return found, findings


def _filled(
    counties: pd.DataFrame, packaged: Mapping[int, Outline], unread: Cells
) -> tuple[pd.DataFrame, list[Finding]]:
    """Blank name, place and area of US counties from their outlines; an error where there is none."""
    columns = {name: counties[name].to_numpy(dtype=float, copy=True) for name in MEASURED}
    names = counties["name"].tolist() if "name" in counties else [None] * len(counties)
    filled: Counter[str] = Counter()
    findings = []
    for row, identity in enumerate(counties["county_id"].tolist()):
        blank = [name for name in MEASURED if np.isnan(columns[name][row]) and (row, name) not in unread]
        if row in packaged:
            values = dict(zip(MEASURED, outlines.area_and_centroid(packaged[row]), strict=True)) if blank else {}
            for name in blank:
                columns[name][row] = values[name]
            unnamed = ["name"] if names[row] in (None, "") else []
            names[row] = packaged[row].name if unnamed else names[row]
            filled.update(blank + unnamed)
            continue
        subject = f"county {identity}" if identity is not None else ""
        if blank and identity is not None and GEOID.match(str(identity)) and identity not in outlines.us_counties():
            findings.append(
                Finding("geoid-unknown", "counties", row, "county_id", identity, subject, _near(str(identity)))
            )
        else:
            findings += [Finding("value-missing", "counties", row, name, None, subject) for name in blank]
    if filled:
        words = {"area_km2": "outline area", "latitude_deg": "latitude", "longitude_deg": "longitude", "name": "name"}
        detail = ", ".join(f"{word} of {filled[name]}" for name, word in words.items() if filled[name])
        findings.append(Finding("county-from-outline", "counties", subject="cells of US counties", detail=detail))
    return counties.assign(name=np.array(names, dtype=object), **columns), findings


def _at_their_place(
    counties: pd.DataFrame, packaged: Mapping[int, Outline]
) -> tuple[dict[int, Outline], list[Finding]]:
    """Packaged outlines of the counties that lie where their GEOID does, as far as a place is entered."""
    found: dict[int, Outline] = {}
    findings = []
    for row, outline in packaged.items():
        entered = counties["latitude_deg"].iloc[row], counties["longitude_deg"].iloc[row]
        middle = outlines.area_and_centroid(outline)[1:]
        here = [own if np.isfinite(own) else known for own, known in zip(entered, middle, strict=True)]
        corners = np.concatenate([ring for polygon in outline.polygons for ring in polygon] + [[middle[::-1]]])
        km = great_circle_km(np.array(here[:1]), np.array(here[1:]), corners[:, 1], corners[:, 0]).min()
        if km <= ELSEWHERE_KM:
            found[row] = outline
            continue
        identity = counties["county_id"].iloc[row]
        detail = f"{outline.name} is {km:.0f} km away"
        findings.append(
            Finding("geoid-elsewhere", "counties", row, "county_id", identity, f"county {identity}", detail)
        )
    return found, findings


def _each_once(
    ids: list[str | None], packaged: Mapping[int, Outline]
) -> tuple[dict[str, Outline], list[Finding]]:  # fmt: skip
    """Packaged outlines by county id, none of them twice; a note where only some counties have one."""
    used = Counter(outline.county_id for outline in packaged.values())
    found = {
        str(ids[row]): Outline(str(ids[row]), outline.name, outline.polygons)
        for row, outline in packaged.items()
        if used[outline.county_id] == 1
    }
    lacking = [str(identity) for identity in ids if identity is not None and identity not in found]
    if not found or not lacking:
        return found, []
    return found, [
        Finding("county-without-packaged-outline", "counties", subject="some counties", detail=_listed(lacking))
    ]


def _near(geoid: str) -> str:
    """The packaged county that an unknown GEOID may mean, in words."""
    known = outlines.us_counties()
    alias = outlines.us_county_aliases().get(geoid)
    if alias is not None:
        return f"the nearest outline is {alias.outline_geoid}, {known[alias.outline_geoid].name}, of another extent"
    digits = _digits()
    mine = np.array([int(digit) for digit in geoid])
    wrong = (digits != mine).sum(axis=1)
    turned = (np.sort(digits, axis=1) == np.sort(mine)).all(axis=1)  # the same digits in another order: one mistake
    far = np.abs((digits - mine) @ 10 ** np.arange(len(mine))[::-1])
    close = list(known)[np.lexsort((far, np.where(turned, 1, wrong)))[0]]
    return f"the nearest known is {close}, {known[close].name}"


@cache
def _digits() -> np.ndarray:
    """Digits of the packaged GEOIDs, (county, 5)."""
    return np.array([[int(digit) for digit in geoid] for geoid in outlines.us_counties()])


def _of_file(name: str, counties: pd.DataFrame, folder: Path) -> tuple[dict[str, Outline], list[Finding]]:
    """Outlines of a file by county id, and what did not join."""

    def said(code: str, detail: str = "") -> Finding:
        return Finding(code, "settings", None, "outlines_file", name, "", detail)

    path = beside(folder, name)
    if isinstance(path, Trouble):
        return {}, [said(path.code, path.detail)]
    try:
        drawn = outlines.read(path)
    except CannotRead as error:
        return {}, [said("outlines-unreadable", str(error))]
    names = {
        str(identity): str(called or "")
        for identity, called in zip(counties["county_id"], counties["name"], strict=True)
        if identity is not None
    }
    found = {identity: drawn[identity] for identity in names if identity in drawn}
    alike = _alike([identity for identity in names if identity not in found], [i for i in drawn if i not in found])
    found |= {identity: drawn[other] for identity, other in alike.items()}
    lacking = {identity: called for identity, called in names.items() if identity not in found}
    if names and not found:
        there, wanted = (", ".join(list(ids)[:NAMED_MOST]) for ids in (drawn, names))
        return {}, [said("outlines-join-nothing", f"the file has {there}; the counties are {wanted}")]
    findings = []
    if alike:
        findings.append(said("outline-id-alike", _listed([f"{there} as {here}" for here, there in alike.items()])))
    free = [identity for identity in drawn if identity not in {outline.county_id for outline in found.values()}]
    if lacking:
        words = [f"{identity} {called}".strip() + _close(identity, free) for identity, called in lacking.items()]
        findings.append(said("county-without-outline", _listed(words)))
    if free:
        findings.append(said("outline-without-county", _listed(free)))
    return {identity: found[identity] for identity in names if identity in found}, findings


def _alike(wanted: list[str], drawn: list[str]) -> dict[str, str]:
    """Ids of a file by the county id that differs in leading zeros or capitals alone; none where two would fit."""
    plain_wanted, plain_drawn = Counter(map(_plain, wanted)), Counter(map(_plain, drawn))
    by_plain = {_plain(identity): identity for identity in drawn}
    return {
        identity: by_plain[_plain(identity)]
        for identity in wanted
        if plain_wanted[_plain(identity)] == 1 and plain_drawn[_plain(identity)] == 1
    }


def _close(identity: str, free: list[str]) -> str:
    """The id in the file that a county's may mean, in words."""
    close = get_close_matches(identity, free, n=1)
    return f" (the file has {close[0]})" if close else ""


def _plain(identity: str) -> str:
    """An id without what programs lose or change: leading zeros, capitals."""
    return identity.strip().casefold().lstrip("0")


def _listed(ids: list[str]) -> str:
    more = f"; and {len(ids) - NAMED_MOST} more" if len(ids) > NAMED_MOST else ""
    return f"{len(ids)}: {', '.join(ids[:NAMED_MOST])}{more}"
