"""Spreadsheets: the template, the reader, the results workbook. Knows no equation."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from etflux.case import Case
    from etflux.findings import Finding
    from etflux.workbook.cells import Limits
    from etflux.workbook.places import Places

    Progress = Callable[[str, float], None]

__all__ = ["check", "read", "write_template"]


def read(
    path: Path | str, limits: Limits | None = None, progress: Progress | None = None
) -> tuple[Case | None, list[Finding], Places]:
    """Read a filled workbook: a case, what is wrong with its cells, and where everything stands."""
    from etflux.workbook.reader import read as read_workbook

    return read_workbook(path, limits, progress)


def check(path: Path | str, limits: Limits | None = None, progress: Progress | None = None) -> list[Finding]:
    """Everything that is wrong or doubtful in a filled workbook, each finding with its place, errors first.

    Raises
    ------
    CannotRead
        If the file is not a workbook that can be read.
    """
    return checked(path, limits, progress)[1]


def checked(
    path: Path | str, limits: Limits | None = None, progress: Progress | None = None
) -> tuple[Case | None, list[Finding]]:
    """Case of a workbook, and everything found in its cells and between its tables, errors first."""
    from etflux.checks import case_findings
    from etflux.findings import ordered

    case, findings, places = read(path, limits, progress)
    if case is not None:
        unread = {(found.table, found.row, found.quantity) for found in findings if found.severity == "error"}
        findings = findings + [places.placed(finding) for finding in case_findings(case, unread)]
    return case, ordered(findings)


def write_template(path: Path | str, system: Any = "si", replace: bool = False) -> Path:
    """Make an empty workbook to fill in."""
    from etflux.workbook.template import write

    return write(path, system, replace=replace)
