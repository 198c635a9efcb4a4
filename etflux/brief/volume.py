"""Counties by the volume of water that their ground gave to the air."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from etflux.brief import style
from etflux.brief.quantities import county_names, county_position, county_values, provisional_note, shown_of, sources_of
from etflux.brief.style import INK, PAPER, Box, Size
from etflux.variables import System

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from etflux.results import Results

LARGEST_SHOWN = {"slide": 20, "page": 32}  # as many names as can be read


def counties_by_volume(
    results: Results, days: np.ndarray, *, system: System, size: Size, county: str | None = None
) -> Figure:
    """Counties by the volume of water that their ground gave to the air, by source, the largest first.

    Parameters
    ----------
    results : Results
    days : array of datetime64[D]
        Days of the run; their sum is shown.
    system : "si" or "us"
    size : Size
    county : str, optional
        A county to point out.
    """
    if county is not None:
        county_position(results, county)
    row = shown_of("water_volume_hm3")
    volume, _ = county_values(results, row, days)
    order = np.argsort(-np.nan_to_num(volume, nan=-1.0), kind="stable")
    order = order[np.isfinite(volume[order])]
    shown = order[: LARGEST_SHOWN[size.name]]
    figure = style.new_figure(size, 1.9 + 0.21 * max(len(shown), 8))
    whole = row.people(np.nansum(volume), system).item()
    subtitle = [style.plain(results.settings.get("title"))]
    decimals = 0 if whole >= 100.0 else row.decimals(system)  # a sum is not known better than its parts
    subtitle += [f"all {len(order)} counties gave {whole:,.{decimals}f} {row.unit(system)}"]
    if len(shown) < len(order):
        share = 100.0 * volume[shown].sum() / volume[order].sum()
        subtitle += [f"the {len(shown)} largest are shown, {share:.0f} % of it"]
    box = style.frame(
        figure, size, results, f"{row.label} by county, {style.days_words(days)}",
        "; ".join(part for part in subtitle if part), provisional_note(results, days),
    )  # fmt: skip
    ids = results.county["county_id"].to_numpy().astype(str)[shown]
    every = county_names(results)
    names = [style.plain(every[number]) for number in shown]
    points = min(size.text_pt, 0.74 * 72.0 * 0.9 * box.height / max(len(shown), 1))
    room = min(max([style.width_in(name, points) for name in names], default=0.0), 0.3 * box.width) + 0.1
    under = 3.2 * size.text_pt / 72.0
    axes = Box(box.left + room, box.bottom + under, box.width - room - 0.1, box.height - under).axes(figure)
    _draw_bars(axes, results, volume_by_source(results, days), shown, size, system)
    for number, (name, identity) in enumerate(zip(names, ids, strict=True)):
        axes.text(
            -0.008, number, style.shortened(name, points, room - 0.1), fontsize=points, ha="right", va="center",
            transform=axes.get_yaxis_transform(), color=INK, family=style.FAMILY, gid="name",
            weight="bold" if identity == county else "normal",
        )  # fmt: skip
    return figure


def volume_by_source(results: Results, days: np.ndarray) -> dict[str, np.ndarray]:
    """Volume of water over some days by source, (county,). [10⁶ m³]

    Sources share a county's volume as they share its latent flux.
    """
    county = results.county.sel(date=days)
    volume = county["water_volume_hm3"].to_numpy().astype(float)
    if "le_by_tag_w_m2" not in county:
        return {"": volume.sum(axis=0)}
    flux = county["le_by_tag_w_m2"].to_numpy().astype(float)
    whole = flux.sum(axis=-1, keepdims=True)
    share = np.divide(flux, whole, out=np.zeros_like(flux), where=whole > 0.0)
    parts = (share * volume[..., None]).sum(axis=0)
    tags = [str(tag) for tag in county["tag"].to_numpy()]
    return {name: parts[:, tags.index(name)] for name in sources_of(results) if name in tags}


def _draw_bars(
    axes: Axes, results: Results, parts: Mapping[str, np.ndarray], shown: np.ndarray, size: Size, system: System
) -> None:
    from matplotlib.ticker import FuncFormatter

    row = shown_of("water_volume_hm3")
    start = np.zeros(len(shown))
    order = sources_of(results)
    handles = []
    for name, values in parts.items():
        wide = row.people(values[shown], system)
        colour = style.source_colour(name, order) if name else style.HELD_EDGE
        bars = axes.barh(np.arange(len(shown)), wide, left=start, height=0.74, color=colour, edgecolor=PAPER,
                         linewidth=0.8, label=style.plain(name), gid=f"volume {name}",
                         hatch=style.source_hatch(name))  # fmt: skip
        handles += [bars] if name and wide.max(initial=0.0) > 0.002 * max(start.max(initial=0.0), 1e-9) else []
        start = start + wide
    axes.set_xlim(0.0, 1.03 * float(start.max(initial=0.0)) or 1.0)
    axes.set_ylim(len(shown) - 0.4, -0.6)
    style.dress(axes, size, row.heading(system), grid="x")
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:,.6g}"))
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    if handles:
        style.legend(axes, size, handles, loc="lower right")
