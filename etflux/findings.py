"""What is wrong with an input, said so that a person can mend it; and the exceptions of the package.

Checks anywhere in the package return :class:`Finding` objects that name a table, a row and a quantity. Only
the reader of a file knows where that is (sheet and cell, line of a CSV); it fills `place` in. Rule and remedy of
every code live in ``tables/findings.toml``, so that a problem is worded once.
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterable, Mapping
from dataclasses import asdict, dataclass, replace
from functools import cache
from importlib.resources import files
from typing import Any, Literal

Severity = Literal["error", "warning", "note"]
_ORDER: Mapping[str, int] = {"error": 0, "warning": 1, "note": 2}


class EtfluxError(Exception):
    """Anything this package raises on purpose."""


class CannotRead(EtfluxError):
    """An input file is missing, locked, encrypted, damaged, too large, or not what its name says."""


class NotInstalled(EtfluxError):
    """What was asked for needs an extra of the package that is not installed."""


class CannotWrite(EtfluxError):
    """A result cannot be written where it was asked for."""


@dataclass(frozen=True)
class Rule:
    """One row of the table of codes."""

    code: str
    severity: Severity
    rule: str
    remedy: str


@cache
def rules() -> Mapping[str, Rule]:
    """Every code a finding can carry, with its rule and remedy."""
    text = files("etflux.tables").joinpath("findings.toml").read_text(encoding="utf-8")
    return {code: Rule(code=code, **row) for code, row in tomllib.loads(text).items()}


@dataclass(frozen=True)
class Finding:
    """One thing found in an input.

    Parameters
    ----------
    code : str
        A key of ``tables/findings.toml``; severity, rule and remedy follow from it.
    table : str
        Table of the case: "weather", "stands", ...
    row : int, optional
        Row of that table counted from 0; None for the table as a whole.
    quantity : str, optional
        Column of that table (a name of the registry); None for the row as a whole.
    value : object
        The offending value, as the person wrote it where that is known.
    subject : str
        Who or when, in words: "station N2, 2031-07-03".
    detail : str
        Completes the rule ("nearest known id is 'N2'").
    place : str
        Where to look: "Weather!E14", "weather_n2.csv line 12". Filled in by the reader.
    """

    code: str
    table: str
    row: int | None = None
    quantity: str | None = None
    value: Any = None
    subject: str = ""
    detail: str = ""
    place: str = ""

    @property
    def severity(self) -> Severity:
        """Severity of this finding's code."""
        return rules()[self.code].severity

    def at(self, place: str) -> Finding:
        """Return the same finding with its place filled in."""
        return replace(self, place=place)

    def sentence(self) -> str:
        """Place, value, rule and remedy in one line for a person."""
        rule = rules()[self.code]
        place = self.place or self.table
        value = "" if self.value is None else f"  {_shown(self.value)}"
        subject = f" ({self.subject})" if self.subject else ""
        detail = f" ({self.detail})" if self.detail else ""
        return f"{place}{value}{subject}: {rule.rule}{detail}. {rule.remedy}"

    def record(self) -> dict[str, Any]:
        """Return a JSON-ready record."""
        rule = rules()[self.code]
        value = self.value if isinstance(self.value, int | float | str | bool | None) else str(self.value)
        return {
            **asdict(self),
            "value": value,
            "severity": rule.severity,
            "rule": rule.rule,
            "remedy": rule.remedy,
        }


def _shown(value: Any) -> str:
    text = f"{value:g}" if isinstance(value, float) else str(value)
    return text if len(text) <= 60 else text[:57] + "..."


def ordered(findings: Iterable[Finding]) -> list[Finding]:
    """Errors before warnings before notes, otherwise in the order found."""
    return sorted(findings, key=lambda finding: _ORDER[finding.severity])


def has_errors(findings: Iterable[Finding]) -> bool:
    """Whether any finding forbids a run."""
    return any(finding.severity == "error" for finding in findings)


def report(findings: Iterable[Finding], limit: int = 20) -> str:
    """All problems as lines for a person: errors first, the first `limit`, and the count."""
    rows = ordered(findings)
    lines = [f"{finding.severity}: {finding.sentence()}" for finding in rows[:limit]]
    if len(rows) > limit:
        lines.append(f"... and {len(rows) - limit} more (--json lists all)")
    counts = {name: sum(finding.severity == name for finding in rows) for name in _ORDER}
    lines.append(", ".join(f"{n} {name}{'' if n == 1 else 's'}" for name, n in counts.items()))
    return "\n".join(lines)


class ProblemsFound(EtfluxError):
    """The input has errors; `findings` has all of them, errors first."""

    def __init__(self, findings: Iterable[Finding]) -> None:
        self.findings = ordered(findings)
        super().__init__(report(self.findings))
