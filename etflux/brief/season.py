"""A stand's season: coefficients, water held in the root zone, water that came, stages."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.brief import style
from etflux.brief.quantities import unknown
from etflux.brief.style import FAINT, INK, SOFT, Box, Size
from etflux.crops import STAGE_WORDS, Stage
from etflux.results.summary import says_stress
from etflux.variables import System, from_si, quantity, words_of

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from etflux.results import Results

# Kcb, Ke and Ks differ in dashes and width as well, so that they keep apart in grey.
COEFFICIENTS = (
    ("kcb", "#1D3557", "solid", 1.4), ("ke", "#D98E2B", "solid", 0.7), ("ks", "#3A8F8B", (0, (5, 2)), 1.1),
)  # fmt: skip
BAND_TINTS = ("#FFFFFF", "#F1F3F4")
TOOTH = 0.8  # of a day, width of the bars


def unit_of(results: Results, stand: str | None) -> xr.Dataset:
    """Daily values of one stand; of a stand in thirds the middle one.

    Parameters
    ----------
    results : Results
    stand : str, optional
        Id of a stand, or of a unit; the first stand where it is not given.
    """
    units = results.stand["unit_id"].to_numpy().astype(str)
    stands = results.stand["stand_id"].to_numpy().astype(str)
    wanted = stand if stand is not None else str(stands[0]) if len(stands) else ""
    here = np.flatnonzero(units == wanted)
    if not len(here):
        here = np.flatnonzero(stands == wanted)
        parts = results.stand["part"].to_numpy().astype(str)[here]
        here = here[parts == "middle"] if "middle" in parts else here[:1]
    if not len(here):
        raise unknown("id-not-in-results", "stand", wanted, [*stands, *units])
    return results.stand.isel(unit_id=int(here[0]))


def stand_season(
    results: Results,
    stand: str | None,
    days: np.ndarray | None,
    *,
    system: System,
    size: Size,
    day: np.datetime64 | None = None,
) -> Figure:
    """Season of one stand.

    Parameters
    ----------
    results : Results
    stand : str, optional
        Id of a stand or a unit.
    days : array of datetime64[D], optional
        Days of the run to show; all where not given.
    system : "si" or "us"
    size : Size
    day : datetime64, optional
        Day to point out.
    """
    unit = unit_of(results, stand)
    days = results.dates if days is None else days
    unit = unit.sel(date=days)
    figure = style.new_figure(size, 8.4)
    box = style.frame(
        figure, size, results, f"{_name(results, unit)}, {style.days_words(days)}", _words(results, unit),
        _notes(unit),
    )  # fmt: skip
    axis = 0.085 * box.width if size.is_slide else 0.11 * box.width
    right = (0.87 if size.is_slide else 0.83) * box.width
    inner = Box(box.left + axis, box.bottom + 0.05 * box.height, right - axis, 0.9 * box.height)
    top, middle, low = (inner.part(0.0, *part) for part in ((0.70, 1.0, 0.29), (0.265, 1.0, 0.40), (0.0, 1.0, 0.225)))
    first = top.axes(figure)
    axes = [first, middle.axes(figure, sharex=first), low.axes(figure, sharex=first)]
    x = _numbers(days)
    _draw_coefficients(axes[0], unit, x, size)
    _draw_water(axes[1], unit, x, size, system)
    _draw_coming(axes[2], unit, x, size, system)
    style.day_ticks(axes[2], days)
    for panel in axes:
        _draw_stages(panel, unit, x)
        if panel is not axes[2]:
            panel.tick_params(labelbottom=False)
        panel.set_xlim(x[0] - 0.5, x[-1] + 0.5)
        if day is not None:
            panel.axvline(_numbers(np.array([day]))[0], color=INK, linewidth=0.8, linestyle=(0, (1, 2)), gid="day")
    _write_stages(axes[0], unit, x, size, inner.width)
    return figure


def _numbers(days: np.ndarray) -> np.ndarray:
    from matplotlib.dates import date2num

    return np.asarray(date2num(days), float)


def _name(results: Results, unit: xr.Dataset) -> str:
    stand = style.plain(str(unit["stand_id"].item()))
    cover = style.plain(results.name_of("cover", str(unit["cover_id"].item())))
    return f"Stand {stand}: {cover}"


def _words(results: Results, unit: xr.Dataset) -> str:
    """Soil, water regime, county and which third."""
    soil = results.name_of("soil", str(unit["soil_id"].item()))
    parts = [soil, str(unit["water_regime"].item()), results.name_of("county", str(unit["county_id"].item()))]
    if str(unit["part"].item()) != "whole":
        parts.append(f"{unit['part'].item()} third by planting date")
    return style.plain("; ".join(parts))


def _notes(unit: xr.Dataset) -> list[str]:
    bits = unit["provisional"].to_numpy().astype(np.int64) if "provisional" in unit else np.zeros(1, np.int64)
    number = int((bits != 0).sum())
    if not number:
        return []
    days = "day" if number == 1 else "days"
    return [f"{number} provisional {days}: {'; '.join(words_of(int(np.bitwise_or.reduce(bits)), 'provisional'))}."]


def _draw_coefficients(axes: Axes, unit: xr.Dataset, x: np.ndarray, size: Size) -> None:
    """Kcb, Ke and Ks; Ks only while a word on stress makes sense."""
    style.dress(axes, size, y_label="Coefficient (–)")
    shows = says_stress(unit["stage_code"].to_numpy())
    handles = []
    for name, colour, dashes, width in COEFFICIENTS:
        values = unit[name].to_numpy().astype(float)
        values = np.where(shows, values, np.nan) if name == "ks" else values
        row = quantity(name)
        handles += axes.plot(
            x, values, color=colour, linestyle=dashes, linewidth=width * size.line_pt, gid=name,
            label=f"{row.symbol}\n{_key_words(name)}",
        )  # fmt: skip
    axes.set_ylim(0.0, 1.45)
    axes.set_yticks([0.0, 0.5, 1.0])
    _key(axes, size, handles)


def _key_words(name: str) -> str:
    return {"kcb": "plants", "ke": "soil surface", "ks": "1 = no stress"}[name]


def _key(axes: Axes, size: Size, handles: list[Any]) -> None:
    style.legend(axes, size, handles, loc="upper left", bbox_to_anchor=(1.01, 1.0), handlelength=1.4)


def _draw_water(axes: Axes, unit: xr.Dataset, x: np.ndarray, size: Size, system: System) -> None:
    """Water held in the root zone from zero, what it can hold, and where stress begins."""

    def people(values: np.ndarray) -> np.ndarray:
        return from_si(values, "water_left_mm", system)

    taw, raw = unit["taw_mm"].to_numpy().astype(float), unit["raw_mm"].to_numpy().astype(float)
    held = people(np.maximum(taw - unit["dr_mm"].to_numpy(), 0.0))
    style.dress(axes, size, y_label=f"Water held ({quantity('water_left_mm').unit_in(system)})")
    area = axes.fill_between(
        x, 0.0, held, color=style.HELD, linewidth=0.0, gid="water held", label="held in the\nroot zone"
    )
    axes.plot(x, held, color=style.HELD_EDGE, linewidth=0.7 * size.line_pt)
    full = axes.plot(x, people(taw), color=SOFT, linewidth=0.5 * size.line_pt, gid="can hold", label="can hold")
    begins = np.where(says_stress(unit["stage_code"].to_numpy()), people(taw - raw), np.nan)
    dashed = axes.plot(
        x, begins, color=INK, linestyle=(0, (4, 2)), linewidth=0.9 * size.line_pt, gid="stress begins",
        label="stress begins",
    )  # fmt: skip
    top = style.greatest(people(taw))
    axes.set_ylim(0.0, 1.08 * top if top > 0.0 else 1.0)
    _key(axes, size, [area, *full, *dashed])


def _draw_coming(axes: Axes, unit: xr.Dataset, x: np.ndarray, size: Size, system: System) -> None:
    """Rain and irrigation of each day, one on the other."""
    rain = from_si(unit["rain_stand_mm"].to_numpy(), "rain_stand_mm", system)
    given = from_si(unit["irrigation_mm"].to_numpy(), "irrigation_mm", system)
    style.dress(axes, size, y_label=f"Water in ({quantity('rain_stand_mm').unit_in(system)})")
    handles = [axes.bar(x, rain, TOOTH, color=style.FELL, gid="rain", label="rain, snow")]
    if np.nan_to_num(given).any():
        bars = axes.bar(x, given, TOOTH, bottom=np.nan_to_num(rain), color=style.GIVEN, gid="irrigation",
                        label="irrigation")  # fmt: skip
        handles.append(bars)
    top = style.greatest(np.nan_to_num(rain) + np.nan_to_num(given))
    axes.set_ylim(0.0, 1.15 * top if top > 0.0 else 1.0)
    _key(axes, size, handles)


def stage_spans(stage: np.ndarray) -> list[tuple[int, int, Stage]]:
    """Runs of one stage: first day, last day, stage.

    Examples
    --------
    >>> [(first, last, int(what)) for first, last, what in stage_spans(np.array([0, 0, 2, 2, 2, 3]))]
    [(0, 1, 0), (2, 4, 2), (5, 5, 3)]
    """
    change = np.flatnonzero(np.diff(stage)) + 1
    first, last = np.r_[0, change], np.r_[change, len(stage)] - 1
    return [(int(a), int(b), Stage(int(stage[a]))) for a, b in zip(first, last, strict=True)]


def _draw_stages(axes: Axes, unit: xr.Dataset, x: np.ndarray) -> None:
    """Faint bands behind the values, changing at every stage."""
    for number, (first, last, _) in enumerate(stage_spans(unit["stage_code"].to_numpy())):
        axes.axvspan(x[first] - 0.5, x[last] + 0.5, color=BAND_TINTS[number % 2], zorder=-2, linewidth=0.0, gid="stage")
        if number:
            axes.axvline(x[first] - 0.5, color=FAINT, linewidth=0.8, zorder=-1)


def _write_stages(axes: Axes, unit: xr.Dataset, x: np.ndarray, size: Size, wide_in: float) -> None:
    """Names of the stages over the first panel, where they fit."""
    per_day = wide_in / len(x)
    for first, last, stage in stage_spans(unit["stage_code"].to_numpy()):
        word, room = STAGE_WORDS[stage], (last - first + 1) * per_day
        if style.width_in(word, size.small_pt) < room:
            axes.text(
                0.5 * (x[first] + x[last]), 1.02, word, transform=axes.get_xaxis_transform(), ha="center", va="bottom",
                fontsize=size.small_pt, color=SOFT, family=style.FAMILY, gid="stage name",
            )  # fmt: skip
