"""What a day's numbers rest on: each input, how old it is, and what stood in where it was missing."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux.results.summary import values
from etflux.variables import flag_bits

if TYPE_CHECKING:
    from etflux.results.record import Results

AIR, SOURCE = flag_bits("air"), flag_bits("source")
WEATHER = {
    "t_max_c": "temperature", "vapour_pressure_kpa": "humidity", "rs_mj_m2_d": "solar radiation", "u2_m_s": "wind",
}  # fmt: skip


@dataclass(frozen=True)
class Rest:
    """One input of a day: what it is, where it comes from and how old it is, and whether something stands in for it."""

    name: str
    text: str
    fallback: bool


def rests_on(results: Results, day: np.datetime64) -> list[Rest]:
    """What the numbers of a day rest on, in the order of the chain.

    Parameters
    ----------
    results : Results
    day : datetime64
        A day of the run.

    Returns
    -------
    list of Rest
        Weather, rain, balloon profile, mixing depth, wind.
    """
    return [_weather(results, day), _rain(results, day), _profile(results, day), _wind(results, day)]


def _weather(results: Results, day: np.datetime64) -> Rest:
    """At how many stations the day was measured in full, what stood in, and how old the last measurement is."""
    station = results.station
    names = [name for name in WEATHER if f"{name}_source" in station]
    n = station.sizes["station_id"]
    if not names or not n:
        return Rest("Weather", "not recorded", False)
    dates = station["date"].to_numpy().astype("datetime64[D]")
    source = {name: station[f"{name}_source"].to_numpy()[dates <= day] for name in names}
    whole = np.logical_and.reduce([bits == 0 for bits in source.values()])  # (day, station)
    here = int(whole[-1].sum())
    if here == n:
        return Rest("Weather", "measured at the station" if n == 1 else f"measured at all {n} stations", False)
    parts = [_counted(WEATHER[name], bits[-1]) for name, bits in source.items() if (bits[-1] > 0).any()]
    measured = np.flatnonzero(whole.any(axis=1))
    if not here:
        age = int((day - dates[measured[-1]]).astype(int)) if len(measured) else 0
        parts.append(
            f"last measured in full {age} day{'s' if age > 1 else ''} before" if age else "never measured in full"
        )
    return Rest("Weather", f"measured in full at {here} of {n} stations; {'; '.join(parts)}", True)


def _counted(label: str, bits: np.ndarray) -> str:
    """At how many stations a quantity was not measured, by what stood in; the first that holds counts."""
    order = (("forecast", "forecast"), ("neighbour", "from a neighbour"), ("estimated", "estimated"))
    left, words = bits.copy(), []
    for name, word in order:
        there = (left & SOURCE[name]) > 0
        words += [f"{word} at {int(there.sum())}"] if there.any() else []
        left = np.where(there, 0, left)
    words += [f"mean or default at {int((left > 0).sum())}"] if (left > 0).any() else []
    return f"{label} {', '.join(words)}"


def _rain(results: Results, day: np.datetime64) -> Rest:
    """For how many counties rain was measured near, and what stood in."""
    rain = values(results.county, "rain_mm", day)
    source = np.nan_to_num(values(results.county, "rain_mm_source", day)).astype(int)
    n = len(rain)
    counts = {
        "from a station farther off": ((source & SOURCE["neighbour"]) > 0).sum(),
        "forecast": ((source & SOURCE["forecast"]) > 0).sum(),
        "missing and treated as 0": ((source & SOURCE["treated_as_zero"]) > 0).sum(),
        "missing": np.isnan(rain).sum(),
    }
    parts = [f"{word} in {count} of {n} counties" for word, count in counts.items() if count]
    return Rest("Rain", "; ".join(parts) if parts else "measured", bool(parts))


def _profile(results: Results, day: np.datetime64) -> Rest:
    flags = values(results.county, "flags", day).astype(np.int64)
    distance = values(results.county, "profile_distance_km", day)
    n, standard = len(flags), int(((flags & AIR["standard_profile"]) > 0).sum())
    estimated = int(((flags & AIR["estimated_dew_point"]) > 0).sum())
    dew = f", morning dew point estimated in {estimated}" if estimated else ""
    if standard == 0 and np.isfinite(distance).any():
        near, far = np.nanmin(distance), np.nanmax(distance)
        return Rest("Morning air", f"balloon of the day, {near:.0f} to {far:.0f} km away", False)
    if standard == 0:
        return Rest("Morning air", "none used: the air was not computed", False)
    if standard == n:
        return Rest("Morning air", f"no balloon: standard profile in all counties{dew}", True)
    return Rest("Morning air", f"balloon of the day; standard profile in {standard} of {n} counties{dew}", True)


def _wind(results: Results, day: np.datetime64) -> Rest:
    if np.isfinite(values(results.county, "crossing_h", day)).any():
        return Rest("Wind", "entered for the day", False)
    residence = results.settings.get("residence_days")
    kept = f"air stays {residence:g} days by the settings" if residence else "residence by the settings"
    return Rest("Wind", f"none for the day: {kept}", True)
