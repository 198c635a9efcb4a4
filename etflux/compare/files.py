"""What people get of a comparison: two tables as CSV, a workbook, figures, one page for the browser."""

from __future__ import annotations

import base64
import html
import os
import re
import shutil
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from etflux.compare import figures
from etflux.findings import CannotWrite
from etflux.results import tables
from etflux.variables import System, quantity

if TYPE_CHECKING:
    import pandas as pd

    from etflux.compare.pairing import Comparison
    from etflux.results import Results

METRICS_FILE, PAIRS_FILE = "comparison.csv", "comparison_pairs.csv"
WORKBOOK, PAGE = "comparison.xlsx", "comparison.html"
DECIMALS = 6
MOST_FIGURES = 12  # places and quantities drawn; the tables have all
FIGURE_ROWS = 24  # of the workbook, for one figure
WORDS = {
    "place": "Place", "quantity": "Quantity", "unit": "Unit", "series": "Series", "group": "Days by", "which": "Which",
    "n": "Pairs", "bias": "Bias", "rmse": "RMSE", "r_squared": "r²", "slope_through_origin": "Slope through origin",
    "index_of_agreement": "Index of agreement", "mean_measured": "Mean measured", "mean_modelled": "Mean of the run",
    "sum_measured": "Sum measured", "sum_modelled": "Sum of the run", "low_mean": "Mean of the lowest series",
    "high_mean": "Mean of the highest series", "rmse_outside": "RMSE outside the band",
    "bias_outside": "Mean outside the band", "inside_pct": "Days inside the band (%)", "kind": "Kind", "date": "Day",
    "measured": "Measured", "uncertainty": "Uncertainty", "modelled": "Run", "difference": "Run less measured",
    "month": "Month", "stage": "Growth stage", "season": "Season",
}  # fmt: skip
_STYLE = """body{font:15px/1.45 Arial,sans-serif;color:#22303c;max-width:75em;margin:1.5em auto;padding:0 1em}
table{border-collapse:collapse;font-size:13px}th,td{padding:.25em .7em;border-bottom:1px solid #dde2e5;text-align:right}
th{background:#e4e9ec}td.t,th.t{text-align:left}img{max-width:100%;height:auto}p.s{color:#5b6770}.w{overflow-x:auto}"""


def write_comparison(results: Results, comparison: Comparison, folder: Path | str) -> Path:
    """Write every file of a comparison: all under temporary names, then renamed.

    Parameters
    ----------
    results : Results
        The run that was compared.
    comparison : Comparison
    folder : path
        Made when it is not there; files of an earlier comparison are replaced.

    Returns
    -------
    Path
        The folder: comparison.csv, comparison_pairs.csv, comparison.xlsx, comparison.html, and for each place and
        quantity a scatter and a course by day as PNG and SVG.

    Raises
    ------
    CannotWrite
    """
    folder = Path(folder)
    try:
        folder.mkdir(parents=True, exist_ok=True)
        scratch = Path(tempfile.mkdtemp(prefix=".etflux-comparing-", dir=folder))
        try:
            drawn = _draw(results, comparison, scratch)
            _csv(comparison.metrics, scratch / METRICS_FILE)
            _csv(comparison.pairs, scratch / PAIRS_FILE)
            _workbook(results, comparison, scratch, drawn)
            (scratch / PAGE).write_text(_page(results, comparison, scratch, drawn), encoding="utf-8")
            for path in sorted(scratch.iterdir()):
                os.replace(path, folder / path.name)
        finally:
            shutil.rmtree(scratch, ignore_errors=True)
    except OSError as error:
        what = error.filename or folder
        raise CannotWrite(f"cannot write {what}: {error.strerror or error}. Close it elsewhere or choose -o") from error
    return folder


def _draw(results: Results, comparison: Comparison, folder: Path) -> list[str]:
    """Figures of the first places and quantities; names without ending."""
    wanted = comparison.pairs[["place", "quantity"]].drop_duplicates().head(MOST_FIGURES)
    drawn = []
    for place, name in wanted.itertuples(index=False):
        for word, draw in (("scatter", figures.scatter), ("days", figures.time_series)):
            stem = f"comparison_{re.sub(r'[^A-Za-z0-9_.-]', '_', place)}_{name}_{word}"
            figure = draw(results, comparison, place, name)
            figure.savefig(folder / f"{stem}.png")
            figure.savefig(folder / f"{stem}.svg", metadata={"Date": None})
            drawn.append(stem)
    return drawn


def _shown(frame: pd.DataFrame) -> pd.DataFrame:
    """Dates as text, text that no spreadsheet takes for a formula."""
    found = frame.copy()
    for name in found:
        if found[name].dtype.kind == "M":
            found[name] = found[name].dt.strftime("%Y-%m-%d")
        elif found[name].dtype == object:
            found[name] = found[name].map(tables.guarded)
    return found


def _csv(frame: pd.DataFrame, path: Path) -> None:
    _shown(frame).round(DECIMALS).to_csv(path, index=False, lineterminator="\n", encoding="utf-8")


def _workbook(results: Results, comparison: Comparison, folder: Path, drawn: list[str]) -> None:
    import xlsxwriter

    from etflux.workbook.report_style import Look, set_page

    system: System = "us" if results.settings.get("units") == "us" else "si"
    options = {"strings_to_formulas": False, "strings_to_urls": False, "strings_to_numbers": False}
    with xlsxwriter.Workbook(str(folder / WORKBOOK), options) as book:
        look = Look(book)
        for title, lead, frame in (
            ("Agreement", "How well the run agrees with what was measured; SI units.", comparison.metrics),
            ("Pairs", "Every day that was measured and computed; SI units.", comparison.pairs),
        ):
            sheet = book.add_worksheet(title)
            sheet.write_string(0, 0, title, look.title())
            sheet.write_string(1, 0, lead, look.lead())
            _rows(sheet, look, frame)
            sheet.freeze_panes(4, 4)
            set_page(sheet, system, f"Run {results.run_id}, etflux {results.version}, {comparison.file}")
        if drawn:
            sheet = book.add_worksheet("Figures")
            for number, stem in enumerate(drawn):
                place = {"x_scale": 0.5, "y_scale": 0.5, "description": stem}
                sheet.insert_image(number * FIGURE_ROWS, 0, str(folder / f"{stem}.png"), place)
            sheet.set_h_pagebreaks([number * FIGURE_ROWS for number in range(1, len(drawn))])
            set_page(sheet, system, f"Run {results.run_id}, etflux {results.version}, {comparison.file}")


def _rows(sheet: Any, look: Any, frame: pd.DataFrame) -> None:
    for column, name in enumerate(frame.columns):
        numeric = frame[name].dtype.kind == "f"
        sheet.write_string(3, column, WORDS[name], look.heading(over_text=not numeric))
        sheet.set_column(column, column, 11 if numeric else 18)
        form = look(num_format="0" if name == "n" else "0.00") if numeric else look()
        for row, value in enumerate(_shown(frame[[name]])[name], start=4):
            if numeric:
                if np.isfinite(value):
                    sheet.write_number(row, column, float(value), form)
            elif isinstance(value, str):
                sheet.write_string(row, column, value, form)
    if len(frame):
        sheet.autofilter(3, 0, 3 + len(frame), len(frame.columns) - 1)


def _page(results: Results, comparison: Comparison, folder: Path, drawn: list[str]) -> str:
    """One file with tables and figures in it."""
    parts = []
    whole = comparison.metrics[comparison.metrics["group"] == "all"]
    parts.append(_table(whole.drop(columns=["group", "which"]).dropna(axis=1, how="all")))
    for stem in drawn:
        picture = base64.b64encode((folder / f"{stem}.png").read_bytes()).decode("ascii")
        parts.append(f'<p><img alt="{html.escape(stem)}" src="data:image/png;base64,{picture}"></p>')
    for group in ("season", "stage", "month"):
        some = comparison.metrics[comparison.metrics["group"] == group].drop(columns="group")
        if len(some):
            parts.append(f"<h2>By {group}</h2>{_table(some.dropna(axis=1, how='all'))}")
    lead = f"Run {results.run_id}, etflux {results.version}; measurements of {comparison.file or 'a table'}. SI units."
    return (
        '<!doctype html><html lang="en"><meta charset="utf-8"><title>Run against measurements</title>'
        '<meta name="viewport" content="width=device-width"><meta http-equiv="Content-Security-Policy" '
        "content=\"default-src 'none'; img-src data:; style-src 'unsafe-inline'\">"
        f"<style>{_STYLE}</style><h1>Run against measurements</h1><p class=s>{html.escape(lead)}</p>"
        f"{''.join(parts)}</html>\n"
    )


def _table(frame: pd.DataFrame) -> str:
    def cell(name: str, value: Any) -> str:
        if isinstance(value, str):
            text = quantity(value).label if name == "quantity" else value
            return f"<td class=t>{html.escape(text)}</td>"
        return f"<td>{'' if value != value else format(value, '.0f' if name == 'n' else '.2f')}</td>"

    text = {name for name in frame if frame[name].dtype == object}
    head = "".join(f"<th{' class=t' if name in text else ''}>{html.escape(WORDS[str(name)])}</th>" for name in frame)
    rows = "".join(
        f"<tr>{''.join(cell(str(name), value) for name, value in zip(frame.columns, row, strict=True))}</tr>"
        for row in frame.itertuples(index=False)
    )
    return f"<div class=w><table><thead><tr>{head}</tr></thead><tbody>{rows}</tbody></table></div>"


def summary_text(comparison: Comparison, folder: Path) -> str:
    """Agreement over all days in a few lines for the terminal, and where the files are."""
    whole = comparison.metrics[comparison.metrics["group"] == "all"]
    lines = [finding.sentence() for finding in comparison.findings]
    for row in whole.itertuples():
        label, unit = quantity(row.quantity).label, f" {row.unit}" if row.unit else ""
        if np.isfinite(row.bias):
            lines.append(
                f"{row.place}, {label} against {row.series}: {row.n:.0f} days, bias {row.bias:+.2f}{unit}, "
                f"RMSE {row.rmse:.2f}{unit}, r² {row.r_squared:.2f}"
            )
        else:
            lines.append(
                f"{row.place}, {label} {row.series}: {row.inside_pct:.0f} % of {row.n:.0f} days inside, "
                f"RMSE outside {row.rmse_outside:.2f}{unit}"
            )
    return "\n".join([*lines, f"Tables and figures: {folder}"])
