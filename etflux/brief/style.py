"""The one look of the figures: sizes, fonts, palettes, the frame around every figure. Nothing global is set."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from etflux.workbook.report_style import FAINT, INK, LOSS, REST, RULE, SERIES, SOFT
from etflux.workbook.report_words import clean_text, day_words

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.colors import Colormap
    from matplotlib.figure import Figure
    from matplotlib.text import Text

    from etflux.results import Results

__all__ = ["FAINT", "INK", "LOSS", "PALETTES", "REST", "RULE", "SERIES", "SIZES", "SOFT", "Box", "Size"]

FAMILY = "DejaVu Sans"  # comes with matplotlib, so a figure looks alike everywhere
PAPER = "#FFFFFF"
HELD, HELD_EDGE = "#8FB3C7", "#33617F"  # water held in the soil
FELL, GIVEN = "#33617F", "#D98E2B"  # rain, irrigation
UNRANKED_HATCH, MISSING_HATCH, GAPS_HATCH = "///", "xxx", "..."
CAUTION = "Planning estimate, not a warning product or an official forecast."

# Light to dark, luminance falling evenly, so that they keep their order in grey and for every kind of colour vision;
# one hue path for each kind of thing, so that maps side by side are not taken for each other.
PALETTES: Mapping[str, tuple[str, ...]] = {
    "flow": ("#EEF3EA", "#BBD6D2", "#83B2BD", "#4F8AA6", "#2C5F8A", "#163662"),  # water into the air
    "dew": ("#FBF1DC", "#F0D095", "#DDA457", "#BB7440", "#8C4A3D", "#522A36"),  # what is in the air
    "store": ("#F1EFF5", "#CDC6E0", "#A59BCB", "#7B72B2", "#544D94", "#2F2A66"),  # water in the soil
    "air": ("#F2F2EA", "#CFD5C3", "#A3B5A3", "#738F87", "#47686D", "#21404F"),  # the air itself
}


@dataclass(frozen=True)
class Size:
    """A size of figure with the text that is legible on it.

    `height_in` is a figure's usual height; on a page each figure has the height it needs.
    """

    name: str
    width_in: float
    height_in: float
    text_pt: float
    dpi: int

    @property
    def is_slide(self) -> bool:
        """Whether it fills a screen."""
        return self.name == "slide"

    @property
    def title_pt(self) -> float:
        """Size of the title."""
        return 1.5 * self.text_pt

    @property
    def small_pt(self) -> float:
        """Size of what is read close by."""
        return 0.8 * self.text_pt

    @property
    def line_pt(self) -> float:
        """Width of a line that carries values."""
        return self.text_pt / 6.5


# A slide of 1920 by 1080 dots; the text width of an upright A4 or letter page.
SIZES: Mapping[str, Size] = {
    "slide": Size("slide", 40.0 / 3.0, 7.5, 15.0, 144),
    "page": Size("page", 7.0, 5.6, 8.5, 200),
}
INSET = Size("inset", 4.6, 3.2, 8.5, 150)  # on a page among other things: a map and its scale, no words of its own


@dataclass(frozen=True)
class Box:
    """A rectangle of a figure, in inches from its lower left corner."""

    left: float
    bottom: float
    width: float
    height: float

    def part(self, left: float, bottom: float, width: float, height: float) -> Box:
        """A part of it, in shares of its own width and height."""
        return Box(
            self.left + left * self.width, self.bottom + bottom * self.height, width * self.width, height * self.height
        )

    def axes(self, figure: Figure, **options: Any) -> Axes:
        """Axes that fill it."""
        width, height = figure.get_size_inches()
        return figure.add_axes(
            (self.left / width, self.bottom / height, self.width / width, self.height / height), **options
        )


def new_figure(size: Size, page_height_in: float | None = None) -> Figure:
    """An empty figure of a size, drawn without any global state."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure as NewFigure

    height = size.height_in if size.is_slide or page_height_in is None else page_height_in
    figure = NewFigure(figsize=(size.width_in, height), dpi=size.dpi, facecolor=PAPER)
    FigureCanvasAgg(figure)
    return figure


def plain(text: Any) -> str:
    """People's text as a figure can show it: one line, no mathematics, no character that the font has not.

    Examples
    --------
    >>> print(plain("a $x$\\n<b>"), plain(None))
    a \\$x\\$ <b>
    """
    line = " ".join(clean_text(text).split())
    known = _characters()
    return "".join(mark if ord(mark) in known else "\N{REPLACEMENT CHARACTER}" for mark in line).replace("$", r"\$")


@cache
def _characters() -> frozenset[int]:
    from matplotlib import font_manager

    return frozenset(font_manager.get_font(font_manager.findfont(FAMILY)).get_charmap())


@cache
def _ruler() -> Any:
    from matplotlib.backends.backend_agg import RendererAgg

    return RendererAgg(8, 8, 72)


def width_in(text: str, points: float, bold: bool = False) -> float:
    """Width of a line of text, in inches."""
    from matplotlib.font_manager import FontProperties

    font = FontProperties(family=FAMILY, size=points, weight="bold" if bold else "normal")
    return float(_ruler().get_text_width_height_descent(text.replace(r"\$", "$"), font, False)[0]) / 72.0


def shortened(text: str, points: float, room_in: float, bold: bool = False) -> str:
    """The text, or as much of its beginning as fits, with an ellipsis.

    Examples
    --------
    >>> shortened("Upper Basin", 10.0, 9.0), shortened("Upper Basin", 10.0, 0.5)
    ('Upper Basin', 'Uppe…')
    """
    if width_in(text, points, bold) <= room_in:
        return text
    low, high = 0, len(text)
    while low < high:
        middle = (low + high + 1) // 2
        if width_in(text[:middle] + "…", points, bold) <= room_in:
            low = middle
        else:
            high = middle - 1
    return text[:low].rstrip("\\ ") + "…"


def wrapped(text: str, points: float, room_in: float, lines: int, bold: bool = False) -> str:
    """The text on at most `lines` lines of a width; what does not fit is cut with an ellipsis."""
    done: list[str] = []
    words = [word for word in text.split(" ") if word]  # a no-break space keeps a number with its unit
    while words and len(done) < lines - 1:
        count = 1
        while count < len(words) and width_in(" ".join(words[: count + 1]), points, bold) <= room_in:
            count += 1
        done.append(shortened(" ".join(words[:count]), points, room_in, bold))
        words = words[count:]
    rest = [shortened(" ".join(words), points, room_in, bold)] if words else []
    return "\n".join(done + rest)


def greatest(values: Any, least: float = 0.0) -> float:
    """The greatest finite value, or `least` if that is more or there is none.

    Examples
    --------
    >>> greatest([1.0, float("nan")]), greatest([float("nan")], 2.0)
    (1.0, 2.0)
    """
    numbers = np.asarray(values, float)
    return float(np.max(numbers[np.isfinite(numbers)], initial=least))


def sentence(text: str) -> str:
    """The text with a capital at its beginning.

    Examples
    --------
    >>> sentence("area mean"), sentence("")
    ('Area mean', '')
    """
    return text[:1].upper() + text[1:]


def station_look(size: Size) -> dict[str, Any]:
    """How a weather station is drawn."""
    return {"linestyle": "none", "marker": "^", "markersize": 0.55 * size.text_pt, "markerfacecolor": PAPER,
            "markeredgecolor": INK, "markeredgewidth": 1.1}  # fmt: skip


def write(figure: Figure, x_in: float, y_in: float, text: str, points: float, **options: Any) -> Text:
    """Text at a place in inches."""
    width, height = figure.get_size_inches()
    look = {"color": INK, "family": FAMILY, "ha": "left", "va": "top", "linespacing": 1.25, **options}
    return figure.text(x_in / width, y_in / height, text, fontsize=points, **look)


def frame(figure: Figure, size: Size, results: Results, title: str, subtitle: str, notes: Sequence[str] = ()) -> Box:
    """Title and subtitle above, notes and cautions below; what is left between them."""
    width, height = figure.get_size_inches()
    margin = 0.045 * width if size.is_slide else 0.012 * width
    room = width - 2.0 * margin
    line = size.text_pt * 1.35 / 72.0
    top = height - (0.35 if size.is_slide else 0.06)
    head = wrapped(title, size.title_pt, room, 2, bold=True)
    write(figure, margin, top, head, size.title_pt, weight="bold", gid="title")
    top -= (head.count("\n") + 1) * line * 1.5 + 0.3 * line
    below = wrapped(subtitle, size.text_pt, room, 3)
    if below:
        write(figure, margin, top, below, size.text_pt, color=SOFT, gid="subtitle")
        top -= (below.count("\n") + 1) * line * 1.05
    run = f"{CAUTION} Run {results.run_id}, etflux {results.version}, issued {results.issued:%Y-%m-%d %H:%M}."
    foot = [wrapped(plain(note), size.small_pt, room, 2) for note in (*notes, run)]
    words = "\n".join(foot)
    bottom = 0.22 if size.is_slide else 0.05
    write(figure, margin, bottom, words, size.small_pt, color=SOFT, va="bottom", gid="notes")
    bottom += (words.count("\n") + 1) * line * 0.85 + 0.5 * line
    return Box(margin, bottom, room, top - 0.6 * line - bottom)


def dress(axes: Axes, size: Size, x_label: str = "", y_label: str = "", grid: Literal["x", "y", "both"] = "y") -> None:
    """Put axes into the style: labels with units, quiet ticks, a faint grid behind the values."""
    font: dict[str, Any] = {"family": FAMILY, "fontsize": size.text_pt, "color": INK}
    axes.set_xlabel(x_label, **font)
    axes.set_ylabel(y_label, **font)
    axes.tick_params(labelsize=size.small_pt * 1.1, colors=INK, length=size.text_pt / 4.0, color=RULE, width=0.8,
                     labelfontfamily=FAMILY)  # fmt: skip
    for side, spine in axes.spines.items():
        spine.set_visible(side in {"left", "bottom"})
        spine.set_color(RULE)
    axes.set_axisbelow(True)
    axes.grid(True, axis=grid, color=FAINT, linewidth=0.8)


def legend(target: Axes | Figure, size: Size, handles: Sequence[Any], **options: Any) -> Any:
    """A legend without a box, in the style's font."""
    font = {"family": FAMILY, "size": size.small_pt * 1.1}
    look = {"frameon": False, "labelcolor": INK, "handlelength": 1.9, "borderaxespad": 0.0, "labelspacing": 0.45}
    return target.legend(handles=list(handles), prop=font, **{**look, **options})


@cache
def sequential(name: str, dark_low: bool = False) -> Colormap:
    """A sequential palette of :data:`PALETTES`."""
    from matplotlib.colors import LinearSegmentedColormap

    colours = PALETTES[name][::-1] if dark_low else PALETTES[name]
    return LinearSegmentedColormap.from_list(f"etflux {name}", colours)


def luminance(colour: Any) -> float:
    """Relative luminance of a colour, 0 black to 1 white (the sRGB definition, WCAG 2).

    Examples
    --------
    >>> luminance("#ffffff"), luminance("#000000")
    (1.0, 0.0)
    """
    from matplotlib.colors import to_rgb

    rgb = np.array(to_rgb(colour))
    linear = np.where(rgb <= 0.03928, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    return round(float(linear @ (0.2126, 0.7152, 0.0722)), 9)


def ink_on(colour: Any) -> str:
    """Dark or white text, whichever has the higher contrast on a colour."""
    ground = luminance(colour)
    return PAPER if 1.05 / (ground + 0.05) > (ground + 0.05) / (luminance(INK) + 0.05) else INK


def source_colour(name: str, order: Sequence[str]) -> str:
    """Colour of a source of water, the same in every figure of a run."""
    if name in {"rest", "sprinkler loss"}:
        return REST if name == "rest" else LOSS
    return SERIES[list(order).index(name) % len(SERIES)]


def source_hatch(name: str) -> str | None:
    """White stripes on the rest of the counties, which would look like a crop in grey."""
    return "////" if name == "rest" else None


def say_nothing_there(figure: Figure, box: Box, size: Size, words: str) -> None:
    """Words in the middle of a figure that has nothing to show."""
    write(figure, box.left + 0.5 * box.width, box.bottom + 0.5 * box.height, words, size.text_pt, ha="center",
          va="center", color=SOFT, gid="nothing")  # fmt: skip


def days_words(days: np.ndarray) -> str:
    """One day or a span of days in words.

    Examples
    --------
    >>> days_words(np.array(["2031-07-24"], "datetime64[D]"))
    '24 July 2031'
    >>> days_words(np.array(["2031-07-24", "2031-07-27"], "datetime64[D]"))
    '24 to 27 July 2031'
    """
    first, last = day_words(days[0]), day_words(days[-1])
    if first == last:
        return first
    words, others = first.split(" "), last.split(" ")
    if words[2] != others[2]:
        return f"{first} to {last}"
    return f"{words[0]} to {last}" if words[1] == others[1] else f"{words[0]} {words[1]} to {last}"


def day_ticks(axes: Axes, days: np.ndarray) -> None:
    """Ticks of an axis of days (matplotlib day numbers): first days of months, or every day of a short span."""
    from matplotlib.dates import date2num

    if len(days) <= 16:
        shown = days[:: 1 if len(days) <= 9 else 2]
    else:
        month = days.astype("datetime64[M]")
        shown = np.unique(month).astype("datetime64[D]")
        if len(shown) < 3:
            shown = days[::7]
        shown = shown[(shown >= days[0]) & (shown <= days[-1])]
    axes.set_xticks(date2num(shown), [short_day(day) for day in shown])


def short_day(day: np.datetime64) -> str:
    """Day and month.

    Examples
    --------
    >>> short_day(np.datetime64("2031-07-04"))
    '4 Jul'
    """
    words = day_words(day).split(" ")
    return f"{words[0]} {words[1][:3]}"
