"""The numbers of the page: what a browser needs to draw every day of a run, packed small.

A number travels as a whole number of small steps (a tenth of the last digit shown), 16 bits where that is enough; the
smallest whole number stands for a missing value.
"""

from __future__ import annotations

import base64
from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.brief.quantities import QUANTITIES, county_names
from etflux.brief.style import PALETTES
from etflux.outlines import EARTH_RADIUS_KM
from etflux.results import confidence
from etflux.results.summary import CONFIDENCE, crop_sources, says_stress, values
from etflux.variables import flag_words, from_si, quantity

if TYPE_CHECKING:
    from etflux.outlines import Outline
    from etflux.results import Results

MOST_BYTES = 6_000_000  # of packed numbers; beyond, the hours and then the stands keep only the last days
MAP_UNITS = 1000  # width of the map in its own units
HOURS = range(5, 21)  # local solar time; the air keeps its values after sunset
# What the page can show, in the order of a forecaster's questions; those a run has not are left out.
ON_THE_MAP = (
    "contribution_c", "contribution_same_day_c", "contribution_carried_c", "contribution_home_c",
    "contribution_other_c", "contribution_low_c", "contribution_high_c", "effect_of_crops_c", "dew_point_mixed_c",
    "dew_point_without_c", "mixing_depth_m", "replaced_share", "le_county_w_m2", "le_daytime_w_m2", "et_county_mm",
    "et_stands_mm", "eto_mm", "water_volume_hm3", "rain_mm",
)  # fmt: skip
OF_STANDS = {
    "water_left_pct": "Soil water left, mean of the stands",
    "stressed_pct": "Stands' area short of water",
    "need_mm": "Irrigation need, mean of irrigated stands",
}
HOURLY = ("dew_point_mixed_c", "contribution_c", "mixing_depth_m")
STAND_LINES = ("water_left_mm", "stress_mm", "rain_stand_mm", "irrigation_mm", "kcb", "ke", "ks")
AGES = 8


def payload(results: Results, day: np.datetime64) -> dict[str, Any]:
    """Everything that the page's script reads.

    Parameters
    ----------
    results : Results
    day : datetime64
        Day that the page opens on.

    Returns
    -------
    dict
        Of plain values, lists and packed arrays.
    """
    whole = len(results.dates)
    results = _in_a_window(results, day)
    dates = results.dates
    county = {name: values(results.county, name) for name in ON_THE_MAP if name in results.county}
    county |= _of_stands(results)
    judged = ("flags", "provisional", "contribution_c", "profile_distance_km")
    rank = confidence(*(values(results.county, name) for name in judged))
    flags = values(results.county, "flags").astype(np.int64)
    packed = {name: _pack(numbers, _digits(name)) for name, numbers in county.items() if np.isfinite(numbers).any()}
    sources = _sources(results)
    found: dict[str, Any] = {
        "system": "us" if results.settings.get("units") == "us" else "si",
        "dates": [str(date) for date in dates],
        "daysLeftOut": whole - len(dates),
        "day": int(np.flatnonzero(dates == day)[0]),
        "counties": _counties(results),
        "stations": _stations(results),
        "quantities": [_quantity(name) for name in packed],
        "values": packed,
        "confidence": {"words": list(CONFIDENCE.values()), "codes": _pack(rank.astype(float), 0)},
        "flags": {"words": {str(bit): text for bit, text in flag_words("air").items() if bit}, "bits": _bits(flags)},
        "sources": [{"name": name, "colour": _colour(name, sources)} for name in sources],
        "byCover": _pack(_contribution(results, sources, "cover"), 3),
        "byAge": _pack(_contribution(results, list(range(AGES)), "age_d"), 3),
        "wind": _wind(results),
        "off": {name: _pack(values(results.county, f"estimate_{name}_c"), 2) for name in ("error", "bias")},
        "units": _units(),
    }
    return found | _hours(results) | _stands(results)


def _in_a_window(results: Results, day: np.datetime64) -> Results:
    """Results of as many days as fit: the last ones, or those up to a day that lies before them."""
    per_day = 2.7 * (len(ON_THE_MAP) + len(OF_STANDS) + 12) * results.county.sizes["county_id"]
    kept = max(7, int(0.6 * MOST_BYTES / max(per_day, 1.0)))
    dates = results.dates
    if len(dates) <= kept:
        return results
    end = max(int(np.flatnonzero(dates == day)[0]) + 1, kept) if day < dates[-kept] else len(dates)
    window = slice(end - kept, end)
    rows = results.contribution
    inside = rows["date"].between(dates[window][0], dates[window][-1]) if len(rows) else slice(0)
    return replace(
        results, county=results.county.isel(date=window), stand=results.stand.isel(date=window),
        station=results.station.isel(date=window), contribution=rows[inside],
    )  # fmt: skip


def _digits(name: str) -> int:
    """Decimals that travel: the step is a tenth of the last digit shown, in either unit system, or less."""
    if name == "stressed_pct":
        return 1
    row = quantity(name)
    zero, one = (float(from_si(value, name, "us")) for value in (0.0, 1.0))
    customary = np.ceil(np.log10(abs(one - zero)) + row.decimals_in("us") + 1.0)
    return int(np.clip(max(row.decimals_in("si") + 1, customary), 0, 6))


def _pack(numbers: np.ndarray, digits: int) -> dict[str, Any]:
    """Numbers as base64 of little-endian whole numbers of 10^-digits, with the shape and what is missing."""
    step = 10.0**-digits
    whole = np.round(np.asarray(numbers, float) / step)
    largest = np.nanmax(np.abs(whole), initial=0.0)
    kind, missing = ("<i2", -(2**15)) if largest < 2**15 - 1 else ("<i4", -(2**31))
    filled = np.where(np.isfinite(whole), whole, missing).astype(kind)
    text = base64.b64encode(np.ascontiguousarray(filled).tobytes()).decode("ascii")
    return {"b": text, "bits": 16 if kind == "<i2" else 32, "step": step, "shape": list(filled.shape)}


def _bits(flags: np.ndarray) -> dict[str, Any]:
    return _pack(flags.astype(float), 0)


def _quantity(name: str) -> dict[str, Any]:
    """How people read a quantity: label, units, decimals, palette."""
    shown = QUANTITIES.get(name)
    if name == "stressed_pct":
        return {"name": name, "label": OF_STANDS[name], "unit": {"si": "%", "us": "%"}, "decimals": {"si": 0, "us": 0},
                "to": {"si": [1.0, 0.0], "us": [1.0, 0.0]}, "palette": list(PALETTES["dew"]), "ranked": False,
                "difference": False}  # fmt: skip
    row = quantity(name)
    zero, one = (float(from_si(value, name, "us")) for value in (0.0, 1.0))
    palette = shown.palette if shown else "dew" if name.startswith("contribution") else "store"
    return {
        "name": name,
        "label": OF_STANDS.get(name, row.label),
        "note": row.note,
        "unit": {"si": row.unit, "us": row.unit_in("us")},
        "decimals": {"si": row.decimals_in("si"), "us": row.decimals_in("us")},
        "to": {"si": [1.0, 0.0], "us": [one - zero, zero]},
        "palette": list(PALETTES[palette]),
        "ranked": name.startswith("contribution"),
    }


def _units() -> dict[str, Any]:
    """Units of what only the charts show."""
    return {name: _quantity(name) for name in ("water_left_mm", "rain_stand_mm", "mixing_depth_m", "contribution_c",
            "dew_point_mixed_c")}  # fmt: skip


def _of_stands(results: Results) -> dict[str, np.ndarray]:
    """Area means over the stands of each county, (day, county)."""
    stand = results.stand
    own = np.flatnonzero(stand["kind"].to_numpy() == "stand")
    if not len(own):
        return {}
    ids = results.county["county_id"].to_numpy().astype(str)
    place = np.searchsorted(np.sort(ids), stand["county_id"].to_numpy().astype(str)[own])
    place = np.argsort(ids)[place]
    area = stand["area_km2"].to_numpy()[own]
    grows = says_stress(values(stand, "stage_code")[:, own])
    ks, need = values(stand, "ks")[:, own], values(stand, "need_mm")[:, own]
    watered = (stand["water_regime"].to_numpy().astype(str)[own] != "rainfed") & grows
    member = np.zeros((len(own), len(ids)))
    member[np.arange(len(own)), place] = area

    def mean(numbers: np.ndarray, where: np.ndarray) -> np.ndarray:
        good = np.isfinite(numbers) & where
        total = good.astype(float) @ member
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.where(total > 0.0, (np.where(good, numbers, 0.0) @ member) / total, np.nan)

    everywhere = np.ones_like(grows)
    return {
        "water_left_pct": mean(values(stand, "water_left_pct")[:, own], everywhere),
        "stressed_pct": mean(np.where(grows & (ks < 1.0), 100.0, np.where(np.isnan(ks), np.nan, 0.0)), everywhere),
        "need_mm": mean(need, watered),
    }


def _sources(results: Results) -> list[str]:
    return [str(name) for name in crop_sources(results)] if len(results.contribution) else []


def _colour(name: str, order: list[str]) -> str:
    from etflux.brief.style import source_colour

    return source_colour(name, order)


def _contribution(results: Results, order: list[Any], by: str) -> np.ndarray:
    """Contribution of the crops by cover or age, (day, county, part); NaN where a county has none."""
    ids = results.county["county_id"].to_numpy().astype(str)
    base = values(results.county, "contribution_c")
    found = np.zeros((*base.shape, len(order)))
    rows = results.contribution
    rows = rows[rows["cover"].isin(crop_sources(results))] if len(rows) else rows
    if len(rows):
        day = np.searchsorted(results.dates, rows["date"].to_numpy().astype("datetime64[D]"))
        at = {name: place for place, name in enumerate(ids)}
        place = rows["county_id"].astype(str).map(at).to_numpy()
        if by == "age_d":
            part = np.minimum(rows[by].to_numpy(int), len(order) - 1)
        else:
            part = rows[by].map({name: number for number, name in enumerate(order)}).to_numpy(int)
        np.add.at(found, (day, place, part), np.nan_to_num(rows["contribution_c"].to_numpy(float)))
    return np.where(np.isfinite(base)[..., None], found, np.nan)


def _hours(results: Results) -> dict[str, Any]:
    """The day's course, (day, county, hour), of as many of the last days as fit."""
    county = results.county
    if not all(f"hourly_{name}" in county for name in HOURLY):
        return {"hours": None}
    chosen = [hour for hour in county["hour"].to_numpy().tolist() if hour in HOURS]
    part = county.sel(hour=chosen)
    per_day = 2.7 * len(HOURLY) * len(chosen) * county.sizes["county_id"]
    kept = int(min(county.sizes["date"], max(7, 0.6 * MOST_BYTES / max(per_day, 1.0))))
    part = part.isel(date=slice(-kept, None))
    digits = {"mixing_depth_m": 0}
    packed = {name: _pack(part[f"hourly_{name}"].to_numpy(), digits.get(name, 2)) for name in HOURLY}
    clock = part["clock_minus_solar_h"].to_numpy() if "clock_minus_solar_h" in part else np.zeros(0)
    return {
        "hours": {
            "hour": chosen, "first": county.sizes["date"] - kept, "values": packed,
            "clock": _pack(clock, 2) if clock.size else None,
        }
    }  # fmt: skip


def _stands(results: Results) -> dict[str, Any]:
    """Every stand's season, (day, stand), of as many stands as fit, the largest first."""
    stand = results.stand
    own = np.flatnonzero(stand["kind"].to_numpy() == "stand")
    per_stand = 2.7 * len(STAND_LINES) * stand.sizes["date"]
    most = int(max(10, 0.4 * MOST_BYTES / max(per_stand, 1.0)))
    area = stand["area_km2"].to_numpy()[own]
    left_out = max(0, len(own) - most)
    own = np.sort(own[np.argsort(-area, kind="stable")[:most]])
    part = stand.isel(unit_id=own)
    numbers: Mapping[str, np.ndarray] = {name: values(part, name) for name in STAND_LINES if name != "stress_mm"}
    lines = {**numbers, "stress_mm": values(part, "taw_mm") - values(part, "raw_mm")}
    digits = {"kcb": 2, "ke": 2, "ks": 2, "water_left_mm": 1, "stress_mm": 1, "rain_stand_mm": 1, "irrigation_mm": 1}
    covers = results.names_by_id("cover")
    listed = [
        {"id": str(row["id"]), "county": str(row["county"]), "text": _stand_words(row, covers)}
        for row in (
            {"id": part["unit_id"].to_numpy()[k], "county": part["county_id"].to_numpy()[k],
             "stand": part["stand_id"].to_numpy()[k], "part": part["part"].to_numpy()[k],
             "cover": part["cover_id"].to_numpy()[k], "water": part["water_regime"].to_numpy()[k]}
            for k in range(len(own))
        )
    ]  # fmt: skip
    packed = {name: _pack(lines[name], digits.get(name, 2)) for name in STAND_LINES}
    return {"stands": {"list": listed, "values": packed, "leftOut": left_out}}


def _stand_words(row: Mapping[str, Any], covers: Mapping[str, str]) -> str:
    part = "" if row["part"] == "whole" else f", {row['part']} planted"
    return f"{row['stand']}{part}: {covers.get(str(row['cover']), row['cover'])}, {row['water']}"


def _counties(results: Results) -> list[dict[str, Any]]:
    """Ids, names and shapes of the counties, in the units of the map."""
    county = results.county
    ids = county["county_id"].to_numpy().astype(str)
    latitude, longitude = county["latitude_deg"].to_numpy(), county["longitude_deg"].to_numpy()
    area = county["area_km2"].to_numpy()
    names = county_names(results)
    frame = _frame_of(results)
    radius = 0.7 * np.sqrt(area / np.pi) / (np.pi * EARTH_RADIUS_KM / 180.0) * frame["per_degree"]
    listed = []
    for k, identity in enumerate(ids):
        x, y = _on_map(frame, longitude[k], latitude[k])
        outline = results.outlines.get(identity)
        listed.append(
            {
                "id": identity, "name": names[k], "x": round(x, 1), "y": round(y, 1), "r": round(float(radius[k]), 1),
                "area": round(float(area[k]), 1), "path": _path(frame, outline) if outline else "",
            }
        )  # fmt: skip
    return listed


def _frame_of(results: Results) -> dict[str, float]:
    """Ends of the map in degrees and its scale; a degree of longitude is shortened by the middle latitude."""
    corners = [ring for outline in results.outlines.values() for polygon in outline.polygons for ring in polygon[:1]]
    county, station = results.county, results.station
    places = np.column_stack([county["longitude_deg"].to_numpy(), county["latitude_deg"].to_numpy()])
    reach = np.sqrt(county["area_km2"].to_numpy() / np.pi)[:, None] / (np.pi * EARTH_RADIUS_KM / 180.0)
    rims = [places - reach * [1.4, 1.0], places + reach * [1.4, 1.0]]
    if "longitude_deg" in station.coords:
        rims.append(np.column_stack([station["longitude_deg"].to_numpy(), station["latitude_deg"].to_numpy()]))
    every = np.concatenate([*corners, *rims])
    (west, south), (east, north) = np.nanmin(every, axis=0), np.nanmax(every, axis=0)
    narrow = max(0.05, float(np.cos(np.radians(0.5 * (south + north)))))
    per_degree = (MAP_UNITS - 20.0) / max((east - west) * narrow, 1e-6)
    return {"west": west, "north": north, "narrow": narrow, "per_degree": per_degree,
            "height": (north - south) * per_degree + 20.0}  # fmt: skip


def _on_map(frame: Mapping[str, float], longitude: Any, latitude: Any) -> tuple[Any, Any]:
    x = 10.0 + (longitude - frame["west"]) * frame["narrow"] * frame["per_degree"]
    return x, 10.0 + (frame["north"] - latitude) * frame["per_degree"]


def _path(frame: Mapping[str, float], outline: Outline) -> str:
    """SVG path of an outline, points closer than the eye sees left out."""
    pieces = []
    for polygon in outline.polygons:
        for ring in polygon:
            x, y = _on_map(frame, ring[:, 0], ring[:, 1])
            points = np.round(np.column_stack([x, y]), 1)
            keep = np.concatenate([[True], np.any(np.diff(points, axis=0) != 0.0, axis=1)])
            points = points[keep]
            if len(points) > 2:
                pieces.append("M" + "L".join(f"{px:g},{py:g}" for px, py in points) + "Z")
    return "".join(pieces)


def _stations(results: Results) -> list[dict[str, Any]]:
    station = results.station
    if "longitude_deg" not in station.coords:
        return []
    frame = _frame_of(results)
    names = results.names_by_id("station")
    found = []
    for k, identity in enumerate(station["station_id"].to_numpy().astype(str)):
        x, y = _on_map(frame, float(station["longitude_deg"][k]), float(station["latitude_deg"][k]))
        found.append({"name": names.get(identity, identity), "x": round(x, 1), "y": round(y, 1)})
    return found


def map_height(results: Results) -> float:
    """Height of the map in its own units."""
    return round(_frame_of(results)["height"], 1)


def _wind(results: Results) -> dict[str, Any] | None:
    east, north = (values(results.county, name) for name in ("wind_east_m_s", "wind_north_m_s"))
    if not np.isfinite(east).any():
        return None
    speed = {"decimals": {"si": 1, "us": 0}, "unit": {"si": "m/s", "us": "kt"},
             "factor": {"si": 1.0, "us": float(from_si(1.0, "wind_east_m_s", "us"))}}  # fmt: skip
    return {"east": _pack(east, 1), "north": _pack(north, 1), **speed}
