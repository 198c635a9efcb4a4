"""The colour scale of a map, and the key to its hatching and marks."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from etflux.brief import style
from etflux.brief.quantities import Shown, represented_least_pct
from etflux.brief.style import FAINT, GAPS_HATCH, INK, MISSING_HATCH, PAPER, RULE, SOFT, UNRANKED_HATCH, Box, Size
from etflux.variables import System, flag_bits, words_of

if TYPE_CHECKING:
    from matplotlib.colors import BoundaryNorm, Colormap
    from matplotlib.figure import Figure

    from etflux.results import Results

STEPS = 7  # of a colour scale, at most: more cannot be told apart on a projector


class Scale(NamedTuple):
    """Colours in steps with round edges."""

    palette: Colormap
    steps: BoundaryNorm

    def colour(self, value: float) -> Any:
        """Colour of one value, in the unit shown."""
        return self.palette(self.steps(value))


def scale_of(
    values: Sequence[np.ndarray], shown: Shown, system: System, ends: tuple[float, float] | None = None
) -> Scale:
    """Steps over all values in the unit shown, none finer than the last digit worth printing.

    With given `ends` the steps go from one to the other, and there is one more on each side.
    """
    from matplotlib.colors import BoundaryNorm
    from matplotlib.ticker import MaxNLocator

    every = np.concatenate([part[np.isfinite(part)] for part in values])
    low, high = (float(every.min()), float(every.max())) if len(every) else (0.0, 1.0)
    if ends is not None:
        low, high = ends
        if not low < high:
            raise ValueError(f"the ends of a scale must rise: {ends}")
    digit = 10.0 ** -shown.decimals(system)
    high = max(high, low + 2.0 * digit)
    edges = np.asarray(MaxNLocator(nbins=STEPS, steps=[1, 2, 2.5, 5, 10]).tick_values(low, high), float)
    if edges[1] - edges[0] < 0.999 * digit:
        edges = digit * np.arange(np.floor(low / digit + 1e-9), np.ceil(high / digit - 1e-9) + 1.0)
    palette = style.sequential(shown.palette, shown.dark_low)
    return Scale(palette, BoundaryNorm(edges, palette.N, extend="neither" if ends is None else "both"))


def draw_scale(figure: Figure, place: Box, size: Size, label: str, scale: Scale) -> float:
    """The colour scale with its label over it, at the top of a place; where it ends below, in inches."""
    from matplotlib.cm import ScalarMappable

    tall = 0.24 if size.is_slide else 0.13
    top = place.bottom + place.height
    if label:
        label = style.wrapped(label, size.text_pt, place.width, 2)
        style.write(figure, place.left, top, label, size.text_pt, gid="scale label")
        top -= (label.count("\n") + 1) * size.text_pt * 1.3 / 72.0 + 0.06
    wide = min(place.width, 3.7) - 0.3
    axes = Box(place.left + 0.1, top - tall, wide, tall).axes(figure)
    edges = scale.steps.boundaries
    bar = figure.colorbar(
        ScalarMappable(scale.steps, scale.palette), cax=axes, orientation="horizontal", ticks=edges, spacing="uniform"
    )
    bar.outline.set_edgecolor(RULE)
    bar.ax.tick_params(labelsize=size.small_pt, colors=INK, length=3, color=RULE, labelfontfamily=style.FAMILY)
    bar.ax.set_xticks(edges, [f"{edge:,.6g}" for edge in np.round(edges, 10)])
    bar.ax.set_gid("scale")
    return top - tall - 2.1 * size.small_pt / 72.0


def draw_key(figure: Figure, place: Box, top: float, size: Size, words: Mapping[str, str]) -> None:
    """What hatching and marks mean, from `top` (in inches) down; `words` by "unranked", "gaps", "missing", ..."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    points = 1.1 * size.small_pt
    characters = max(12, int((place.width * 72.0 - 3.5 * points) / (0.56 * points)))
    hatches = {"unranked": (UNRANKED_HATCH, FAINT), "gaps": (GAPS_HATCH, FAINT), "missing": (MISSING_HATCH, PAPER)}
    arrow: dict[str, Any] = {"marker": "$\N{RIGHTWARDS ARROW}$", "markersize": 1.2 * size.text_pt, "color": INK}
    rows: list[Any] = []
    for name, text in words.items():
        label = "\n".join(textwrap.wrap(text, characters))
        if name in hatches:
            hatch, ground = hatches[name]
            rows.append(Patch(facecolor=ground, edgecolor=SOFT, hatch=hatch, linewidth=0.6, label=label))
        else:
            look = style.station_look(size) if name == "stations" else {**arrow, "linestyle": "none"}
            rows.append(Line2D([], [], label=label, **look))
    if rows:
        width, height = figure.get_size_inches()
        at = (place.left / width, (top - 0.4 * size.text_pt / 72.0) / height)
        style.legend(figure, size, rows, loc="upper left", bbox_to_anchor=at)


def unranked_words(results: Results) -> str:
    """Why counties are not ranked."""
    return f"under {represented_least_pct(results):.0f} % of the county represented: a range, not ranked"


def missing_words(results: Results, shown: Shown, days: np.ndarray) -> str:
    """Why counties have no value, in the words of the registry."""
    if shown.source in {"stand", "tag"}:
        return "no such stand" if shown.name != "ks" else "no crop between ten percent cover and maturity"
    county = results.county.sel(date=days)
    if not (shown.ranked or shown.of_air) or "flags" not in county or shown.name not in county:
        return "no value"
    from etflux.workbook.report_words import BLANKING, NOT_COMPUTED

    blanking = sum(flag_bits("air")[name] for name in BLANKING)
    blank = np.isnan(county[shown.name].to_numpy().astype(float))
    bits = int(np.bitwise_or.reduce(county["flags"].to_numpy().astype(np.int64)[blank] & blanking, initial=0))
    return "no value: " + "; or ".join(words_of(bits, "air") or [NOT_COMPUTED])
