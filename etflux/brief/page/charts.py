"""Charts of the page: drawn once without numbers; the page's script fills them for the chosen county and day."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from etflux.brief.style import FELL, GIVEN, HELD, HELD_EDGE, INK, RULE, SERIES, SOFT

Figure = Any  # bokeh.plotting.figure, whose types do not say what its shorthands return

AGE_COLOURS = ("#163662", "#2C5F8A", "#4F8AA6", "#83B2BD", "#BBD6D2", "#D9E2D6", "#E3DFC9", "#EEE6C8")
AGE_WORDS = ("today", "1 day ago", "2", "3", "4", "5", "6", "7 or more")
HEIGHT = 210


def charts(sources: Sequence[Mapping[str, str]]) -> dict[str, Figure]:
    """Figures by the place that they take on the page.

    Parameters
    ----------
    sources : sequence of mapping
        Name and colour of every crop whose water is told apart.
    """
    return {
        "chart-water": _water(),
        "chart-given": _given(),
        "chart-factors": _factors(),
        "chart-cover": _stacked("cover", [row["name"] for row in sources], [row["colour"] for row in sources],
                                [row["name"] for row in sources]),
        "chart-age": _stacked("age", [f"age{k}" for k in range(len(AGE_WORDS))], AGE_COLOURS, AGE_WORDS),
        "chart-dew": _dew_point(),
        "chart-depth": _depth(),
    }  # fmt: skip


def _blank(name: str, by_hour: bool = False, height: int = HEIGHT, **options: Any) -> Figure:
    """A figure in the page's look, without numbers."""
    from bokeh.models import DatetimeTickFormatter
    from bokeh.models.annotations import Span
    from bokeh.plotting import figure

    made: Figure = figure(
        name=name, height=height, sizing_mode="stretch_width", tools="hover,reset,xbox_zoom", toolbar_location=None,
        x_axis_type="linear" if by_hour else "datetime", min_border_left=58, output_backend="canvas", **options,
    )  # fmt: skip
    made.outline_line_color = None
    made.grid.grid_line_color = RULE
    made.xgrid.grid_line_color = None
    if not by_hour:
        made.xaxis.formatter = DatetimeTickFormatter(days="%-d %b", months="%b", years="%b", strip_leading_zeros=True)
        made.xaxis.ticker.desired_num_ticks = 5
    for axis in made.axis:
        axis.axis_line_color = SOFT
        axis.major_label_text_color = axis.axis_label_text_color = INK
        axis.minor_tick_line_color = None
        axis.axis_label_text_font_style = "normal"
        axis.major_label_text_font_size = axis.axis_label_text_font_size = "12px"
    made.add_layout(Span(location=0, dimension="height", line_color=INK, line_dash="dotted", name=f"{name}-now"))
    return made


def _source(name: str, columns: Sequence[str]) -> Any:
    from bokeh.models import ColumnDataSource

    # Two points to begin with: the library warns of an axis without any.
    return ColumnDataSource({column: [0.0, 1.0] for column in columns}, name=f"{name}-data")


def _legend(made: Figure) -> None:
    legend = made.legend[0]
    legend.orientation, legend.location, legend.margin, legend.padding = "horizontal", "left", 0, 0
    legend.border_line_color = legend.background_fill_color = None
    legend.label_text_font_size, legend.label_text_color = "12px", INK
    legend.glyph_height = legend.glyph_width = 14
    legend.spacing = 10
    legend.ncols = 4
    made.add_layout(legend, "above")


def _hover(made: Figure, *rows: tuple[str, str], by_hour: bool = False) -> None:
    from bokeh.models import HoverTool

    first = ("hour", "@x{0}") if by_hour else ("day", "@x{%F}")
    tool = made.select_one(HoverTool)
    tool.tooltips, tool.mode = [first, *rows], "vline"
    tool.formatters = {} if by_hour else {"@x": "datetime"}
    tool.renderers = [made.renderers[-1]]


def _water() -> Figure:
    """Water held, filled from zero, and where stress begins."""
    made = _blank("water")
    data = _source("water", ("x", "held", "stress"))
    made.varea("x", 0, "held", source=data, fill_color=HELD, fill_alpha=0.9, legend_label="held for the roots")
    made.line("x", "stress", source=data, line_color=INK, line_dash="dashed", legend_label="stress begins")
    made.line("x", "held", source=data, line_color=HELD_EDGE, line_width=1.5)
    made.y_range.start = 0
    _legend(made)
    _hover(made, ("held", "@held{0.0}"), ("stress begins", "@stress{0.0}"))
    return made


def _given() -> Figure:
    """Rain and irrigation."""
    made = _blank("given", height=150)
    data = _source("given", ("x", "rain", "given"))
    day = 0.8 * 86_400_000
    made.vbar_stack(["rain", "given"], x="x", width=day, source=data, color=[FELL, GIVEN],
                    legend_label=["rain", "irrigation"])  # fmt: skip
    made.y_range.start = 0
    _legend(made)
    _hover(made, ("rain", "@rain{0.0}"), ("irrigation", "@given{0.0}"))
    return made


def _factors() -> Figure:
    """Basal coefficient, evaporation coefficient, stress coefficient."""
    made = _blank("factors", height=170, y_range=(0.0, 1.4))
    data = _source("factors", ("x", "kcb", "ke", "ks"))
    for column, colour, dash, label in (
        ("ks", SERIES[2], "dotted", "Ks, stress"), ("ke", SERIES[1], "dashed", "Ke, wet soil"),
        ("kcb", SERIES[0], "solid", "Kcb, plants"),
    ):  # fmt: skip
        made.line("x", column, source=data, line_color=colour, line_dash=dash, line_width=2, legend_label=label)
    _legend(made)
    _hover(made, ("Kcb", "@kcb{0.00}"), ("Ke", "@ke{0.00}"), ("Ks", "@ks{0.00}"))
    return made


def _stacked(name: str, columns: Sequence[str], colours: Sequence[str], words: Sequence[str]) -> Figure:
    """Contribution day by day, parts on top of each other."""
    made = _blank(name)
    keys = [f"part{k}" for k in range(len(columns))]
    data = _source(name, ("x", *keys))
    if keys:
        made.vbar_stack(keys, x="x", width=0.8 * 86_400_000, source=data, color=list(colours), line_color="white",
                        legend_label=list(words))  # fmt: skip
        _legend(made)
        _hover(made, *((word, f"@{key}{{0.0}}") for word, key in zip(words, keys, strict=True)))
    made.y_range.start = 0
    return made


def _dew_point() -> Figure:
    """Dew point through the day, with the crops' water and without it."""
    made = _blank("dew", by_hour=True)
    data = _source("dew", ("x", "with", "without"))
    made.varea("x", "without", "with", source=data, fill_color=GIVEN, fill_alpha=0.35, legend_label="the crops' part")
    made.line("x", "without", source=data, line_color=SOFT, line_dash="dashed", line_width=2,
              legend_label="without crops' water")  # fmt: skip
    made.line("x", "with", source=data, line_color=INK, line_width=2, legend_label="dew point")
    made.xaxis.axis_label = "hour, local solar time"
    _legend(made)
    _hover(made, ("dew point", "@with{0.0}"), ("without crops", "@without{0.0}"), by_hour=True)
    return made


def _depth() -> Figure:
    """Mixing depth through the day."""
    made = _blank("depth", by_hour=True, height=180)
    data = _source("depth", ("x", "depth"))
    made.varea("x", 0, "depth", source=data, fill_color=HELD, fill_alpha=0.5)
    made.line("x", "depth", source=data, line_color=HELD_EDGE, line_width=2)
    made.xaxis.axis_label = "hour, local solar time"
    made.y_range.start = 0
    _hover(made, ("mixing depth", "@depth{0,0}"), by_hour=True)
    return made
