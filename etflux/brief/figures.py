"""Every figure by the name of what it shows; drawn as a matplotlib Figure, saved as SVG or PNG."""

from __future__ import annotations

import contextlib
import os
import tempfile
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.brief.quantities import QUANTITIES, Shown, days_of, shown_of
from etflux.brief.style import SIZES
from etflux.findings import CannotWrite, Finding, ProblemsFound
from etflux.variables import System

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from etflux.results import Results

__all__ = ["FIGURES", "QUANTITIES", "draw", "save"]

FORMATS = (".svg", ".png")


def draw(
    results: Results,
    show: str,
    on: Any = None,
    *,
    until: Any = None,
    county: str | None = None,
    stand: str | None = None,
    cover: str | None = None,
    units: System | None = None,
    size: str = "slide",
    scale: tuple[float, float] | None = None,
) -> Figure:
    """Draw one figure of a run.

    Parameters
    ----------
    results : Results
        Of a run, or of :func:`etflux.results.read_folder`.
    show : str
        A name of :data:`QUANTITIES`.
    on, until : date or str, optional
        First and last day; the day of the brief alone where they are not given. An episode and the check of the dew
        point without `until` end on `on`; a season without `until` is the whole one, with `on` pointed out.
    county, stand : str, optional
        Ids; for the figures that show one.
    cover : str, optional
        A source of the water or a cover's id, for a map by cover.
    units : "si" or "us", optional
        The run's setting where not given.
    size : str
        "slide" (13.33 by 7.5 in) or "page" (7 in wide).
    scale : (float, float), optional
        Ends of a map's colour scale, in the unit shown, so that maps can be compared.

    Returns
    -------
    Figure
        It belongs to nobody else: no global state of matplotlib is touched.

    Raises
    ------
    ProblemsFound
        For a name, id or day that the run does not have, with the nearest one that it has.
    ValueError
        For another size or unit system.
    """
    shown = shown_of(show)
    system = units or ("us" if results.settings.get("units") == "us" else "si")
    if size not in SIZES or system not in ("si", "us"):
        raise ValueError(f"size {size!r} and units {system!r}: must be of {', '.join(SIZES)} and of si, us")
    if cover is not None and not shown.by_cover:
        names = [name for name, row in QUANTITIES.items() if row.by_cover]
        raise ProblemsFound([Finding("not-by-cover", "show", value=show, detail=", ".join(names))])
    look = {"system": system, "size": SIZES[size]}
    asked = _Asked(days_of(results, on, until), until is not None, county, stand, cover, scale, look)
    return FIGURES[shown.figure](results, shown, asked)


@dataclass(frozen=True)
class _Asked:
    """What was asked for besides the quantity; `span` says whether a last day was named."""

    days: np.ndarray
    span: bool
    county: str | None
    stand: str | None
    cover: str | None
    scale: tuple[float, float] | None
    look: dict[str, Any]


def _map(results: Results, shown: Shown, asked: _Asked) -> Figure:
    from etflux.brief.maps import county_map

    return county_map(
        results, shown, asked.days, cover=asked.cover, county=asked.county, scale=asked.scale, **asked.look
    )


def _volume(results: Results, shown: Shown, asked: _Asked) -> Figure:
    from etflux.brief.volume import counties_by_volume

    return counties_by_volume(results, asked.days, county=asked.county, **asked.look)


def _season(results: Results, shown: Shown, asked: _Asked) -> Figure:
    from etflux.brief.season import stand_season

    day = None if asked.span else asked.days[0]
    return stand_season(results, asked.stand, asked.days if asked.span else None, day=day, **asked.look)


def _episode(results: Results, shown: Shown, asked: _Asked) -> Figure:
    from etflux.brief.episode import episode, episode_days

    days = asked.days if asked.span else episode_days(results, asked.days[-1])
    return episode(results, days, county=asked.county, **asked.look)


def _profile(results: Results, shown: Shown, asked: _Asked) -> Figure:
    from etflux.brief.air import air_by_height

    return air_by_height(results, asked.days[-1], asked.county, **asked.look)


def _dew_point(results: Results, shown: Shown, asked: _Asked) -> Figure:
    from etflux.brief.dew_point import dew_point_check

    last = asked.days[-1]
    days = asked.days if asked.span else results.dates[results.dates <= last]
    return dew_point_check(results, days, county=asked.county, day=last, **asked.look)


FIGURES: Mapping[str, Callable[[Any, Shown, _Asked], Figure]] = {
    "map": _map,
    "volume": _volume,
    "season": _season,
    "episode": _episode,
    "profile": _profile,
    "dew_point": _dew_point,
}


def draw_file(
    folder: Path | str,
    show: str,
    on: Any = None,
    *,
    until: Any = None,
    output: Path | str | None = None,
    **options: Any,
) -> Path:
    """Draw one figure of a folder of results into a file; options as those of :func:`draw`.

    The file is SHOW-DAY.png in the working folder where `output` is not given; its name is returned.
    """
    from etflux.results import read_folder

    shown_of(show)
    output = None if output is None else checked_name(output)
    results = read_folder(folder)
    days = days_of(results, on, until)
    span = f"{days[0]}" if len(days) == 1 else f"{days[0]}-to-{days[-1]}"
    figure = draw(results, show, on, until=until, **options)
    return save(figure, output or Path(f"{show}-{span}.png"))


def names_text() -> str:
    """What can be shown, a name and its label in each line."""
    wide = max(len(name) for name in QUANTITIES)
    return "\n".join(f"{name:<{wide}}  {shown.label}" for name, shown in QUANTITIES.items())


def checked_name(path: Path | str) -> Path:
    """The path, if it names an SVG or PNG; else CannotWrite."""
    path = Path(path)
    if path.suffix.lower() not in FORMATS:
        raise CannotWrite(f"{path.name}: the name must end in {' or '.join(FORMATS)}.")
    return path


def save(figure: Figure, path: Path | str) -> Path:
    """Write a figure as SVG or PNG, by the ending of the file's name; whole or not at all.

    Raises
    ------
    CannotWrite
        If the name ends otherwise, or the file cannot be written.
    """
    path = checked_name(path)
    ending = path.suffix.lower()
    metadata = {"Title": _title(figure)} | ({"Date": None} if ending == ".svg" else {})
    scratch = None
    try:
        handle, scratch = tempfile.mkstemp(prefix=".etflux-figure-", suffix=ending, dir=path.parent)
        with os.fdopen(handle, "wb") as file:
            figure.savefig(file, format=ending[1:], dpi=figure.dpi, metadata=metadata, facecolor="white")
        os.chmod(scratch, 0o666 & ~_umask())
        os.replace(scratch, path)
    except OSError as error:
        raise CannotWrite(f"{path}: cannot be written ({error.strerror}). Choose another place with -o.") from error
    finally:
        if scratch is not None:
            with contextlib.suppress(FileNotFoundError):
                os.unlink(scratch)
    return path


def _umask() -> int:
    """The process's mask for new files; asking for it means setting it for a moment."""
    mask = os.umask(0)
    os.umask(mask)
    return mask


def _title(figure: Figure) -> str:
    """Words of the title, as metadata of the file."""
    for text in figure.texts:
        if text.get_gid() == "title":
            return " ".join(text.get_text().replace(r"\$", "$").split())
    return ""
