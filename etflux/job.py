"""The whole job on one workbook: read, check, run, write, and say in a few lines what came out."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas as pd

    from etflux.findings import Finding
    from etflux.results import Results
    from etflux.variables import System
    from etflux.workbook.report_brief import Picture

    Progress = Callable[[str, float], None]

PAGE = "brief.html"  # opens from disk in any browser
MOVED = "moved.csv"  # days that an earlier run in the same folder gave otherwise


def run_workbook(
    path: Path | str,
    output: Path | str | None = None,
    on: str | dt.date | None = None,
    progress: Progress | None = None,
    draws: int | None = None,
) -> Results:
    """Read a filled workbook, check it, compute it and write the results folder.

    Parameters
    ----------
    path : Path or str
        The filled workbook; it is never written to.
    output : Path or str, optional
        Folder for the results; ``<workbook name>-etflux`` in the current folder when not given.
    on : date or str, optional
        Day of the brief; the setting `brief_date`, else the last day of the record, when not given.
    progress : callable, optional
        Called with the step's name and the share of the work that is done.
    draws : int, optional
        Random draws of the air, instead of the setting `air_draws`.

    Returns
    -------
    Results

    Raises
    ------
    ProblemsFound
        If the workbook has errors; the exception has all of them, each with its cell.
    CannotRead, CannotWrite
        If the workbook cannot be read, or the results cannot be written.
    """
    from etflux.brief.page import write_page
    from etflux.case import with_settings
    from etflux.findings import ProblemsFound, has_errors
    from etflux.results import write_folder
    from etflux.run import run_case
    from etflux.workbook import checked
    from etflux.workbook.report import write_report

    tell = progress or (lambda step, share: None)
    tell("reading and checking", 0.0)
    case, findings = checked(path, progress=lambda step, share: tell("reading and checking", 0.2 * share))
    if case is None or has_errors(findings):
        raise ProblemsFound(findings)
    if draws is not None:
        case = replace(case, settings=with_settings(case.settings, air_draws=draws))
    results = run_case(case, findings, lambda step, share: tell(step, 0.2 + 0.4 * share))
    day = brief_day(results, on)
    folder = results_folder(path, output)
    moved = moved_days(results, folder)
    if moved is not None and len(moved):
        results = replace(results, findings=[*results.findings, _moved_note(moved, results.settings["moved_et_mm"])])
    others: dict[str, Any] = {PAGE: lambda given, where: write_page(given, where, on=day)}
    if moved is not None:
        others[MOVED] = lambda given, where: moved.to_csv(where, index=False)
    tell("writing", 0.6)
    write_folder(
        results,
        folder,
        workbook_writer=lambda given, where: write_report(given, where, on=day, picture=map_picture(given, day)),
        progress=lambda step, share: tell(step, 0.6 + 0.4 * share),
        others=others,
    )
    return results


def map_picture(results: Results, on: str | dt.date | None = None) -> Picture | None:
    """Map of the brief: what the crops added, or the water use on a day without a number for it; none of one county."""
    from io import BytesIO

    import numpy as np

    from etflux.brief.maps import map_inset
    from etflux.brief.quantities import shown_of
    from etflux.workbook.report_brief import Picture

    if results.county.sizes["county_id"] < 2:
        return None
    day = results.day(on)
    added = results.county["contribution_c"].sel(date=day) if "contribution_c" in results.county else np.array(np.nan)
    shown = shown_of("contribution_c" if np.isfinite(added).any() else "et_county_mm")
    system: System = "us" if results.settings.get("units") == "us" else "si"
    figure = map_inset(results, shown, np.array([day]), system=system)
    store = BytesIO()
    figure.savefig(store, format="png", dpi=200)
    width, height = figure.get_size_inches()
    hatched = "; hatched: a range only, or no value" if shown.ranked else ""
    title = f"{shown.heading(system)}. Triangles: stations; arrows: wind by day{hatched}"
    return Picture(store.getvalue(), 96.0 * width, 96.0 * height, title)


def moved_days(results: Results, folder: Path) -> pd.DataFrame | None:
    """Days whose crop water use moved since the earlier run in a folder by more than the setting says.

    Stage means and projected marks make the last weeks of an open season provisional; this lists what came of them.

    Returns
    -------
    DataFrame or None
        date, unit_id, et_before_mm, et_mm; None where the folder holds no complete run.
    """
    from etflux.results import folder_state, read_tables

    if not folder_state(folder).complete or not (folder / "stand_daily.csv").exists():
        return None
    keys = ["date", "unit_id"]
    before = read_tables(folder, ["stand_daily"])["stand_daily"][[*keys, "et_mm"]]
    both = results.table("stand_daily")[[*keys, "et_mm"]].merge(before, on=keys, suffixes=("", "_before"))
    far = (both["et_mm"] - both["et_mm_before"]).abs() > results.settings["moved_et_mm"]
    return both[far].rename(columns={"et_mm_before": "et_before_mm"})[[*keys, "et_before_mm", "et_mm"]]


def _moved_note(moved: pd.DataFrame, limit: float) -> Finding:
    from etflux.findings import Finding

    first, last = str(moved["date"].min())[:10], str(moved["date"].max())[:10]
    detail = f"{len(moved)} stand-days of {moved['unit_id'].nunique()} stands by over {limit:g} mm, {first} to {last}"
    return Finding("days-moved", "stands", detail=detail)


def results_folder(path: Path | str, output: Path | str | None = None) -> Path:
    """Where the results of a workbook go: the folder asked for, else one named after the workbook."""
    from etflux.results import default_folder

    return Path(output) if output is not None else default_folder(Path(path))


def brief_day(results: Results, on: str | dt.date | None) -> dt.date | None:
    """Day of the brief: the one asked for, else that of the settings, else None for the last.

    Raises
    ------
    ProblemsFound
        If the day is no date, or not in the record.
    """
    import pandas as pd

    from etflux.findings import Finding, ProblemsFound

    asked = on if on not in (None, "") else results.settings["brief_date"]
    if asked in (None, ""):
        return None
    dates = pd.DatetimeIndex(results.county["date"].to_numpy())
    span = f"the record runs from {dates[0].date()} to {dates[-1].date()}"
    day = pd.to_datetime(str(asked), errors="coerce", format="%Y-%m-%d")
    if day is pd.NaT or day not in dates:
        raise ProblemsFound([Finding("brief-day", "settings", None, "brief_date", str(asked), detail=span)])
    return day.date()


def summary_text(results: Results, on: str | dt.date | None = None, folder: Path | str | None = None) -> str:
    """What came out, in a few lines for the terminal."""
    from etflux.findings import report
    from etflux.workbook.report_words import paragraph

    summary: dict[str, Any] = results.summary(brief_day(results, on))
    lines = [paragraph(results, summary, results.settings["units"])]
    if results.findings:
        lines += ["", report(results.findings, limit=6)]
    if folder is not None:
        lines += ["", f"Results are in {folder}: open brief.html or results.xlsx first."]
    return "\n".join(lines)
