"""The whole job on one workbook: read, check, run, write, and say in a few lines what came out."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from etflux.results import Results

    Progress = Callable[[str, float], None]


def run_workbook(
    path: Path | str,
    output: Path | str | None = None,
    on: str | dt.date | None = None,
    progress: Progress | None = None,
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
    results = run_case(case, findings, lambda step, share: tell(step, 0.2 + 0.4 * share))
    day = brief_day(results, on)
    tell("writing", 0.6)
    write_folder(
        results,
        results_folder(path, output),
        workbook_writer=lambda given, where: write_report(given, where, on=day),
        progress=lambda step, share: tell(f"writing {step}", 0.6 + 0.4 * share),
    )
    return results


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
        lines += ["", f"Results are in {folder}: open results.xlsx first."]
    return "\n".join(lines)
