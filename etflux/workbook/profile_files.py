"""Balloon soundings in files of NOAA's archive (IGRA v2) beside the workbook: rows of the table of profiles.

Of each site and morning of the season one sounding is kept; what is left out is counted.
"""

from __future__ import annotations

import zipfile
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path, PurePath
from typing import IO

import numpy as np

from etflux import humidity, igra
from etflux.findings import CannotRead
from etflux.igra import Contents, Sounding
from etflux.profiles import LEAST_LEVELS, is_morning, local_solar
from etflux.variables import quantity
from etflux.workbook.cells import Limits
from etflux.workbook.places import Origin
from etflux.workbook.rows import Block
from etflux.workbook.sheets import sheet_of

SEPARATOR = ";"
LONGEST_LINE = 4096  # bytes; a line of the format has 71 at most
CHUNK = 1 << 20
FAULTS_MOST = 10  # of one kind, said one by one
CODES = {"line": "sounding-line", "time": "sounding-time", "flag": "sounding-flag"}
TOP_KPA = 20.0  # above the column of air, whatever the ground's height
FIELDS = {"height_m": "Geopotential height", "pressure_kpa": "Pressure", "temperature_c": "Temperature",
          "dew_point_c": "Dew point depression", "rh_mean_pct": "Relative humidity"}  # fmt: skip


def names(words: str) -> list[str]:
    """Names of files that a setting gives, in order, each once.

    Examples
    --------
    >>> names("a-data.txt.zip; b-data.txt;")
    ['a-data.txt.zip', 'b-data.txt']
    """
    return list(dict.fromkeys(word.strip() for word in words.split(SEPARATOR) if word.strip()))


def read_file(path: Path, name: str, first: np.datetime64, last: np.datetime64, limits: Limits | None = None) -> Block:
    """Read one file of soundings.

    Parameters
    ----------
    path : Path
        Text, or a zip with one text in it, as the archive gives it out.
    name : str
        As the workbook names it.
    first, last : datetime64[D]
        Days of the case; only soundings of their mornings are kept, of each morning the last.
    limits : Limits, optional

    Returns
    -------
    Block
        Of the table of profiles: heights above the ground, times in UTC.
    """
    block = Block(sheet_of("profiles"), Origin(name, is_sheet=False))
    try:
        with _opened(path, limits or Limits()) as stream:
            found = igra.read(_lines(stream), first, last)
    except CannotRead as error:
        block.say("soundings-unreadable", detail=str(error))
        return block
    if not found.headers:
        block.say("soundings-unreadable", detail="no line starts with #" if found.faults else "it is empty")
        return block
    block.origin.texts = dict(FIELDS)
    _say_faults(block, found)
    kept = _mornings(block, found, first, last)
    _take(block, kept)
    return block


@contextmanager
def _opened(path: Path, limits: Limits) -> Iterator[IO[bytes]]:
    """The text of a file, or of the one text in a zip, as a stream; what is damaged or too large is refused."""
    try:
        size = path.stat().st_size
        with path.open("rb") as plain:
            packed = plain.read(4) in (b"PK\x03\x04", b"PK\x05\x06")
            plain.seek(0)
            if not packed:
                if size > limits.unpacked_bytes:
                    raise CannotRead(f"it has more than {limits.unpacked_bytes:,} bytes")
                yield plain
                return
        if size > limits.file_bytes:
            raise CannotRead(f"it has more than {limits.file_bytes:,} bytes")
        with zipfile.ZipFile(path) as archive:
            member = _text_in(archive, limits)
            with archive.open(member) as stream:
                yield stream
    except (zipfile.BadZipFile, zlib.error, EOFError, ValueError, OverflowError, NotImplementedError) as error:
        raise CannotRead("it is damaged or was cut short") from error
    except RuntimeError as error:
        raise CannotRead("it is locked by a password") from error
    except OSError as error:
        raise CannotRead(str(error.strerror or error)) from error


def _text_in(archive: zipfile.ZipFile, limits: Limits) -> zipfile.ZipInfo:
    texts = [member for member in archive.infolist() if PurePath(member.filename).suffix.lower() == ".txt"]
    if len(texts) != 1:
        raise CannotRead(f"a zip must hold one text file (.txt); this one has {len(texts):,}")
    size = texts[0].file_size
    swollen = size > 1_000_000 and size > limits.ratio * max(texts[0].compress_size, 1)
    if size > limits.unpacked_bytes or swollen:
        raise CannotRead(f"it would unpack to {size:,} bytes")
    return texts[0]


def _lines(stream: IO[bytes]) -> Iterator[str]:
    """Lines of a stream of bytes, one character a byte so that columns keep their place."""
    rest = stream.read(CHUNK)
    if b"\0" in rest or rest[:2] in (b"\xff\xfe", b"\xfe\xff"):
        raise CannotRead("it is not plain text (ASCII)")
    rest = rest.removeprefix(b"\xef\xbb\xbf")
    while rest:
        whole, end, rest = rest.rpartition(b"\n")
        lines = whole.decode("latin-1").split("\n") if end else []
        if max(map(len, lines), default=0) > LONGEST_LINE or len(rest) > LONGEST_LINE:
            raise CannotRead(f"it has lines of more than {LONGEST_LINE:,} characters")
        yield from lines
        more = stream.read(CHUNK)
        if not more and rest:
            yield rest.decode("latin-1")
        rest = rest + more if more else b""


def _say_faults(block: Block, found: Contents) -> None:
    """Each fault at its line; of many of one kind the first ones and a count."""
    by_kind: dict[str, list[igra.Fault]] = {}
    for fault in found.faults:
        by_kind.setdefault(fault.kind, []).append(fault)
    for kind, faults in by_kind.items():
        for count, fault in enumerate(faults[:FAULTS_MOST], start=1):
            left = len(faults) - FAULTS_MOST
            more = f"; and {left} more lines" if count == FAULTS_MOST and left > 0 else ""
            block.say(CODES[kind], detail=fault.detail + more, place=f"{block.origin.name} line {fault.line}")


def _mornings(block: Block, found: Contents, first: np.datetime64, last: np.datetime64) -> list[Sounding]:
    """The last sounding of each site's mornings within the days; notes on the others."""
    best: dict[tuple[str, np.datetime64], Sounding] = {}
    other_days, other_hours, repeated = found.elsewhen, 0, 0
    no_place = []
    for sounding in sorted(found.soundings, key=lambda each: each.time):
        if np.isnan(sounding.latitude_deg) or np.isnan(sounding.longitude_deg):
            no_place.append(sounding)
            continue
        date, hour = local_solar(sounding.time, sounding.longitude_deg)
        if not first <= date <= last:
            other_days += 1
        elif not is_morning(date, hour, sounding.latitude_deg):
            other_hours += 1
        else:
            key = sounding.site_id, date
            before = best.get(key)
            repeated += before is not None
            if before is None or _usable(sounding).sum() >= min(LEAST_LEVELS, _usable(before).sum()):
                best[key] = sounding
    _say_once(block, "sounding-place", no_place)
    counts = {"of other days": other_days, "at other hours": other_hours, "earlier on the same morning": repeated}
    left = ", ".join(f"{count:,} {words}" for words, count in counts.items() if count)
    if not best:
        block.say("soundings-none", detail=left)
    elif left:
        block.say("soundings-left-out", detail=f"{len(best):,} are kept; {left}")
    return list(best.values())


def _usable(sounding: Sounding) -> np.ndarray:
    """Levels with pressure, temperature and humidity, from the surface level up."""
    known = np.isfinite(sounding.pressure_kpa + sounding.temperature_c) & (sounding.pressure_kpa >= TOP_KPA)
    known &= np.isfinite(sounding.dew_point_c) | np.isfinite(sounding.rh_pct)
    ground = sounding.pressure_kpa[sounding.surface]
    return known & (sounding.pressure_kpa <= ground[0]) if len(ground) and np.isfinite(ground[0]) else known


def _take(block: Block, kept: list[Sounding]) -> None:
    """Soundings to rows from the ground up."""
    pieces: dict[str, list[np.ndarray]] = {}
    bare, groundless = [], []
    for sounding in kept:
        use = _rising(sounding, np.flatnonzero(_usable(sounding)))
        if not len(use):
            bare.append(sounding)
            continue
        if not sounding.surface[use[0]]:
            groundless.append(sounding)
        for name, values in _columns(sounding, use).items():
            pieces.setdefault(name, []).append(values)
        block.rows += sounding.lines[use].tolist()
    _say_once(block, "sounding-bare", bare)
    _say_once(block, "sounding-surface", groundless)
    block.columns = {name: np.concatenate(values) for name, values in pieces.items()}
    block.understood = True


def _say_once(block: Block, code: str, soundings: list[Sounding]) -> None:
    """A remark at the header of the first sounding that earns it, with the count of the others."""
    if soundings:
        first, more = soundings[0], len(soundings) - 1
        place = f"{block.origin.name} line {first.line}"
        block.say(code, None, None, f"{first.time} UTC", f"and {more:,} more" if more else "", place)


def _rising(sounding: Sounding, use: np.ndarray) -> np.ndarray:
    """Levels in order of pressure, without those that lie no higher than one before: heights are whole metres."""
    use = use[np.argsort(-sounding.pressure_kpa[use], kind="stable")]
    height = np.nan_to_num(sounding.height_m[use], nan=-np.inf)
    before = np.concatenate([[-np.inf], np.maximum.accumulate(height)[:-1]])
    falling = np.diff(sounding.pressure_kpa[use], prepend=np.inf) < 0.0
    return use[falling & ((height > before) | np.isneginf(height))]


def _columns(sounding: Sounding, use: np.ndarray) -> dict[str, np.ndarray]:
    """Columns of the table of profiles for the levels in use, the first of which is the ground."""
    elevation = sounding.height_m[use[0]]
    t, dew_point, rh = sounding.temperature_c[use], sounding.dew_point_c[use], sounding.rh_pct[use]
    # Air so dry that its dew point is none of a day's weather is told by its relative humidity.
    with np.errstate(invalid="ignore"):
        dry = dew_point < (quantity("dew_point_c").low or 0.0)
    e = humidity.vapour_pressure_from_dew_point(dew_point)
    rh = np.where(dry, humidity.relative_humidity(e, t), np.where(np.isnan(dew_point), rh, np.nan))
    whole = {
        "site_id": np.array(sounding.site_id, object), "time": sounding.time, "latitude_deg": sounding.latitude_deg,
        "longitude_deg": sounding.longitude_deg, "elevation_m": elevation,
    }  # fmt: skip
    return {name: np.full(len(use), value) for name, value in whole.items()} | {
        "height_m": sounding.height_m[use] - elevation,
        "pressure_kpa": sounding.pressure_kpa[use],
        "temperature_c": t,
        "dew_point_c": np.where(dry, np.nan, dew_point),
        "rh_mean_pct": rh,
    }
