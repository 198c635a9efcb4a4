"""Balloon soundings in the text format of NOAA's Integrated Global Radiosonde Archive, version 2.

A file is a series of soundings: one header line that starts with ``#`` and, after it, one line a level, in fixed
columns. Nothing here touches a file: lines in, soundings and faults out. Levels of soundings of other days are passed
over, so that a record of decades takes a second or two.

References
----------
.. [1] National Centers for Environmental Information, "Format Description of IGRA 2 Sounding Data Files"
   (igra2-data-format.txt): columns, special values, flags. The scale of latitude and longitude (1/10000 degree) is
   from memory; the description does not give it.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field

import numpy as np

# Columns as the format description counts them, from 1, both ends included.
HEADER = {
    "year": (14, 17), "month": (19, 20), "day": (22, 23), "hour": (25, 26), "release time": (28, 31),
    "levels": (33, 36), "latitude": (56, 62), "longitude": (64, 71),
}  # fmt: skip
LEVEL = {
    "elapsed time": (4, 8), "pressure": (10, 15), "height": (17, 21), "temperature": (23, 27),
    "relative humidity": (29, 33), "dew point depression": (35, 39), "wind direction": (41, 45),
    "wind speed": (47, 51),
}  # fmt: skip
FLAGS = {"pressure": 16, "height": 22, "temperature": 28}
KNOWN_FLAGS = " AB"  # not checked against a climate; within its limits, all days; within those of day and hour
HEADER_LENGTH, LEVEL_LENGTH = 71, 51
REMOVED, MISSING = -8888, -9999
NO_HOUR, NO_MINUTE, NO_RELEASE = 99, 99, 9999
SURFACE = "1"  # second digit of a level's type
LEVEL_TYPE = re.compile(r"[123][012]\Z")
NUMBER = re.compile(r" *-?[0-9]+ *\Z")
DEGREE = 10000.0
DAY = np.timedelta64(1, "D")


@dataclass(frozen=True)
class Fault:
    """What is wrong in a line (counted from 1): kind "line", "time" or "flag", and a detail in words."""

    line: int
    kind: str
    detail: str


@dataclass(frozen=True)
class Sounding:
    """One sounding.

    Attributes
    ----------
    site_id : str
    time : datetime64[m]
        Of release, UTC.
    latitude_deg, longitude_deg : float
        NaN where the file has none.
    line : int
        Of the header.
    lines : ndarray of int, shape (level,)
    surface : ndarray of bool, shape (level,)
    pressure_kpa, height_m, temperature_c, rh_pct, dew_point_c, wind_from_deg, wind_speed_m_s : ndarray, shape (level,)
        Height is geopotential, above the sea. NaN where missing or removed by the archive.
    """

    site_id: str
    time: np.datetime64
    latitude_deg: float
    longitude_deg: float
    line: int
    lines: np.ndarray
    surface: np.ndarray
    pressure_kpa: np.ndarray
    height_m: np.ndarray
    temperature_c: np.ndarray
    rh_pct: np.ndarray
    dew_point_c: np.ndarray
    wind_from_deg: np.ndarray
    wind_speed_m_s: np.ndarray


@dataclass
class Contents:
    """Soundings of the days that were asked for, faults in them, headers seen, and soundings of other days."""

    soundings: list[Sounding] = field(default_factory=list)
    faults: list[Fault] = field(default_factory=list)
    headers: int = 0
    elsewhen: int = 0


class _BadLine(Exception):
    """Why a line is none of the format."""


def read(lines: Iterable[str], first: np.datetime64, last: np.datetime64) -> Contents:
    """Soundings of a span of days, the day before and the day after included (local days are not days of UTC).

    Parameters
    ----------
    lines : iterable of str
        Of one file.
    first, last : datetime64[D]

    Returns
    -------
    Contents
        A sounding with a line that is none of the format is left out whole, with a fault at that line.

    Examples
    --------
    >>> day = np.datetime64("2031-07-24")
    >>> found = read(
    ...     ["#ZZM00099999 2031 07 24 12 1107    1 made-up  made-up   415000  -910000",
    ...      "21     0  97500B  250B  180B  940    10   180    20"], day, day)
    >>> balloon = found.soundings[0]
    >>> str(balloon.time), balloon.longitude_deg, balloon.pressure_kpa.item(), balloon.dew_point_c.item()
    ('2031-07-24T11:07', -91.0, 97.5, 17.0)
    """
    found = Contents()
    for number, header, below in _groups(lines):
        if not header:
            if any(text.strip() for text in below):
                detail = "a header that starts with # must come before the levels"
                found.faults.append(Fault(number, "line", detail))
            continue
        found.headers += 1
        try:
            values, date = _header(header)
        except _BadLine as error:
            found.faults.append(Fault(number, "line", str(error)))
            continue
        if not first - DAY <= date <= last + DAY:
            found.elsewhen += 1
            continue
        time = release_time(date, values["hour"], values["release time"])
        if time is None:
            found.faults.append(Fault(number, "time", "neither hour nor release time"))
            continue
        levels = [(line, text) for line, text in enumerate(below, start=number + 1) if text.strip()]
        _take(found, number, header, values, time, levels)
    return found


def _groups(lines: Iterable[str]) -> Iterator[tuple[int, str, list[str]]]:
    """Line number and text of each header, and all lines below it; first of all the lines before the first header."""
    start, header = 1, ""
    below: list[str] = []
    for number, text in enumerate(lines, start=1):
        if text[:1] == "#":
            yield start, header, below
            start, header, below = number, text, []
        else:
            below.append(text)
    yield start, header, below


def release_time(date: np.datetime64, hour: int, release: int) -> np.datetime64 | None:
    """Time at which a balloon was let go.

    Parameters
    ----------
    date : datetime64[D]
        Of the nominal hour.
    hour : int
        Nominal hour, UTC; 99: missing.
    release : int
        HHMM, UTC; HH99: minutes missing, the half hour is taken; 9999: missing, the nominal hour is taken.

    Returns
    -------
    datetime64[m] or None
        On the day that brings it nearest the nominal hour: a balloon of 00 UTC leaves late on the day before. None
        where both are missing.

    Examples
    --------
    >>> day = np.datetime64("2031-07-04")
    >>> str(release_time(day, 0, 2315)), str(release_time(day, 12, 1199)), str(release_time(day, 12, 9999))
    ('2031-07-03T23:15', '2031-07-04T11:30', '2031-07-04T12:00')
    """
    midnight = date.astype("datetime64[m]")
    nominal = None if hour == NO_HOUR else 60 * hour
    if release == NO_RELEASE:
        return None if nominal is None else midnight + np.timedelta64(nominal, "m")
    minute = 60 * (release // 100) + (30 if release % 100 == NO_MINUTE else release % 100)
    if nominal is not None:
        minute = min((minute - 1440, minute, minute + 1440), key=lambda each: abs(each - nominal))
    return midnight + np.timedelta64(minute, "m")


def _take(
    found: Contents, number: int, header: str, values: dict[str, int], time: np.datetime64,
    levels: list[tuple[int, str]],
) -> None:  # fmt: skip
    """Add one sounding, or what is wrong with it."""
    rows, flags = [], []
    for line, text in levels:
        try:
            row, unknown = _level(text)
        except _BadLine as error:
            found.faults.append(Fault(line, "line", str(error)))
            return
        rows.append(row)
        flags += [Fault(line, "flag", f"{name}: {flag!r}") for name, flag in unknown]
    if len(rows) != values["levels"]:
        detail = f"{values['levels']} levels are announced and {len(rows)} follow"
        found.faults.append(Fault(number, "line", detail))
        return
    found.faults += flags
    surface, pressure, height, t, rh, depression, wind_from, wind_speed = np.array(rows, float).reshape(-1, 8).T
    latitude, longitude = values["latitude"] / DEGREE, values["longitude"] / DEGREE
    placed = abs(latitude) <= 90.0 and abs(longitude) <= 180.0
    found.soundings.append(
        Sounding(
            site_id=header[1:12].strip(),
            time=time,
            latitude_deg=latitude if placed else np.nan,
            longitude_deg=longitude if placed else np.nan,
            line=number,
            lines=np.array([line for line, _ in levels], int),
            surface=surface > 0.0,
            pressure_kpa=pressure / 1000.0,
            height_m=height,
            temperature_c=t / 10.0,
            rh_pct=rh / 10.0,
            dew_point_c=(t - depression) / 10.0,
            wind_from_deg=wind_from,
            wind_speed_m_s=wind_speed / 10.0,
        )
    )


def _header(text: str) -> tuple[dict[str, int], np.datetime64]:
    """Numbers of a header line, and its date."""
    text = _whole(text, HEADER_LENGTH, "a header")
    if not text[1:12].strip():
        raise _BadLine("no station in columns 2-12")
    values = {name: _number(text, name, *at) for name, at in HEADER.items()}
    try:
        date = np.datetime64(f"{values['year']:04d}-{values['month']:02d}-{values['day']:02d}", "D")
    except ValueError:
        raise _BadLine(f"no date in columns 14-23: {text[13:23]!r}") from None
    if not (0 <= values["hour"] <= 23 or values["hour"] == NO_HOUR):
        raise _BadLine(f"no hour in columns 25-26: {text[24:26]!r}")
    hour, minute = divmod(values["release time"], 100)
    if not (0 <= hour <= 23 and (minute <= 59 or minute == NO_MINUTE)) and values["release time"] != NO_RELEASE:
        raise _BadLine(f"no release time in columns 28-31: {text[27:31]!r}")
    return values, date


def _level(text: str) -> tuple[list[float], list[tuple[str, str]]]:
    """Whether a level is the surface, then its numbers from pressure on; flags that the format does not know."""
    text = _whole(text, LEVEL_LENGTH, "a level")
    if not LEVEL_TYPE.match(text[:2]):
        raise _BadLine(f"no level type in columns 1-2: {text[:2]!r}")
    numbers = {name: float(_number(text, name, *at)) for name, at in LEVEL.items()}
    unknown = [(name, text[at - 1]) for name, at in FLAGS.items() if text[at - 1] not in KNOWN_FLAGS]
    numbers |= {name: np.nan for name, _ in unknown}
    known = [np.nan if value in (REMOVED, MISSING) else value for value in list(numbers.values())[1:]]
    return [float(text[1] == SURFACE), *known], unknown


def _whole(text: str, length: int, what: str) -> str:
    text = text.rstrip()
    if len(text) != length:
        raise _BadLine(f"{what} has {length} characters, this line {len(text)}")
    return text


def _number(text: str, name: str, start: int, end: int) -> int:
    word = text[start - 1 : end]
    if not NUMBER.match(word):
        raise _BadLine(f"no number in columns {start}-{end} ({name}): {word!r}")
    return int(word)
