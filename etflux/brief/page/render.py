"""From results to the text of the page: numbers, charts, script and words in one file that asks for nothing else."""

from __future__ import annotations

import html
import json
from importlib.resources import files
from pathlib import Path
from string import Template
from typing import TYPE_CHECKING, Any

from etflux.brief.page.charts import charts
from etflux.brief.page.payload import map_height, payload
from etflux.results.rests import rests_on
from etflux.workbook.report_words import (
    BAND_NOTE,
    CAUTIONS,
    WORLD_SENTENCES,
    clean_text,
    day_words,
    identity_line,
    paragraph,
)

if TYPE_CHECKING:
    import datetime as dt

    import numpy as np

    from etflux.results import Results

# Nothing is fetched and nothing is sent: the browser itself refuses what is not in the file.
POLICY = (
    "default-src 'none'; script-src 'unsafe-inline'; style-src 'unsafe-inline'; img-src data: blob:; font-src data:; "
    "base-uri 'none'; form-action 'none'"
)


def write_page(results: Results, path: Path | str, on: dt.date | str | None = None) -> None:
    """Write the page of a run.

    Parameters
    ----------
    results : Results
        Its setting `units` decides the units that the page opens with.
    path : path
        File to make.
    on : date, optional
        Day that the page opens on; the setting's, else the last day of the run.
    """
    Path(path).write_text(page_text(results, on), encoding="utf-8")


def page_text(results: Results, on: dt.date | str | None = None) -> str:
    """The page as text; see :func:`write_page`."""
    from bokeh.embed import components
    from bokeh.resources import INLINE

    day = results.day(on)
    numbers = payload(results, day)
    script, places = components(charts(numbers["sources"]))
    title = _line(results.settings.get("title")) or "Crop water use and its moisture in the air"
    parts = {
        "policy": POLICY,
        "title": html.escape(title),
        "identity": html.escape(identity_line(results)),
        "rests": _rests(results, day),
        "paragraph": html.escape(paragraph(results, results.summary(str(day)), numbers["system"])),
        "paragraph_day": html.escape(day_words(day)),
        "last": str(len(numbers["dates"]) - 1),
        "height": f"{map_height(results):g}",
        "cautions": "".join(f"<li>{html.escape(text)}</li>" for text in CAUTIONS),
        "worlds": "".join(f"<li>{html.escape(text)}</li>" for text in (*WORLD_SENTENCES.values(), BAND_NOTE)),
        "methods": _methods(results),
        "style": _packaged("page.css"),
        "library": INLINE.js_raw[0],
        "charts": script,
        "data": _inert(numbers),
        "script": _packaged("page.js"),
        **{place.replace("-", "_"): str(div) for place, div in places.items()},
    }
    return Template(_packaged("template.html")).substitute(parts)


def _line(text: object) -> str:
    """People's text on one line, whatever separators it holds."""
    return " ".join(clean_text(text).split())


def _packaged(name: str) -> str:
    return files("etflux.brief.page").joinpath(name).read_text(encoding="utf-8")


def _inert(numbers: dict[str, Any]) -> str:
    """JSON that no browser takes for markup, whatever the names in it hold."""
    text = json.dumps(numbers, ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    for mark, safe in (
        ("&", "\\u0026"),
        ("<", "\\u003c"),
        (">", "\\u003e"),
        ("\u2028", "\\u2028"),
        ("\u2029", "\\u2029"),
    ):
        text = text.replace(mark, safe)
    return text


def _rests(results: Results, day: np.datetime64) -> str:
    """What the day rests on; what stands in for something is strong."""
    listed = []
    for part in rests_on(results, day):
        text = html.escape(f"{part.name}: {part.text}")
        listed.append(f"<li><strong>{text}</strong></li>" if part.fallback else f"<li>{text}</li>")
    return "".join(listed)


def _methods(results: Results) -> str:
    rows = results.methods
    cells = zip(rows["step"], rows["method"], rows["source"], strict=True)
    return "".join(
        "<tr>" + "".join(f"<td>{html.escape(clean_text(text))}</td>" for text in row) + "</tr>" for row in cells
    )
