"""Where in the workbook, or in a CSV file beside it, a row and a column of a case's table stand."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from etflux.findings import Finding
from etflux.variables import convert, quantities
from etflux.workbook.sheet_xml import letters


@dataclass
class Origin:
    """A sheet or a CSV file that rows came from: its name, heading row and columns, by registry name, from 1."""

    name: str
    heading_row: int = 1
    columns: dict[str, int] = field(default_factory=dict)
    texts: dict[str, str] = field(default_factory=dict)  # headings as written
    units: dict[str, str] = field(default_factory=dict)  # of the numbers below them
    is_sheet: bool = True

    def place(self, row: int, quantity: str | None) -> str:
        """Cell, or line and column, of a row (counted in the file) and a quantity; without one, the row's first."""
        column = self.columns.get(quantity or "", min(self.columns.values(), default=1))
        if self.is_sheet:
            return f"{self.name}!{letters(column)}{row}"
        named = f", column {self.texts[quantity]}" if quantity in self.texts else ""
        return f"{self.name} line {row}{named}"


@dataclass
class Places:
    """Origin and file row of every row of every table."""

    rows: dict[str, list[tuple[Origin, int]]] = field(default_factory=dict)
    origins: dict[str, list[Origin]] = field(default_factory=dict)
    settings: dict[str, str] = field(default_factory=dict)  # cell of each setting's value
    files: dict[str, str] = field(default_factory=dict)  # station -> file that its days came from
    titles: dict[str, str] = field(default_factory=dict)

    def of(self, table: str, row: int | None = None, quantity: str | None = None, subject: str = "") -> str:
        """Place of a row and quantity of a table; of the heading without a row; of the sheet without either."""
        if table == "settings":
            return self.settings.get(quantity or "", self.titles.get("settings", "Settings"))
        rows = self.rows.get(table, [])
        if row is not None and 0 <= row < len(rows):
            origin, number = rows[row]
            return origin.place(number, quantity)
        if row is not None and self.origins.get(table):
            return f"{self.titles.get(table, table)} (packaged row)"
        headed = self._origin(table, subject)
        if headed is None:
            return self.titles.get(table, table)
        if quantity in headed.columns:
            return headed.place(headed.heading_row, quantity)
        return headed.name

    def _origin(self, table: str, subject: str) -> Origin | None:
        """Where a table's headings stand; for weather of one station, in its own file."""
        origins = self.origins.get(table, [])
        station = subject.removeprefix("station ").partition(",")[0] if subject.startswith("station ") else ""
        named = self.files.get(station)
        return next((origin for origin in origins if origin.name == named), origins[0] if origins else None)

    def placed(self, finding: Finding) -> Finding:
        """Return a finding with its place filled in, unless it has one; its number as it was written there."""
        if finding.place:
            return finding
        place = self.of(finding.table, finding.row, finding.quantity, finding.subject)
        return self._as_written(finding).at(place)

    def _as_written(self, finding: Finding) -> Finding:
        """A number, and the range it should lie in, in the unit of its heading instead of the SI unit."""
        rows = self.rows.get(finding.table, [])
        quantity = quantities().get(finding.quantity or "")
        if (
            quantity is None
            or finding.row is None
            or not finding.row < len(rows)
            or not isinstance(finding.value, float)
        ):
            return finding
        unit = rows[finding.row][0].units.get(quantity.name, "")
        if not unit or unit == quantity.unit:
            return finding

        def written(number: float) -> float:
            return float(f"{convert(number, quantity.unit, unit, quantity.kind).item():.6g}")

        detail = finding.detail
        if finding.code == "range" and quantity.low is not None and quantity.high is not None:
            detail = f"from {written(quantity.low):.4g} to {written(quantity.high):.4g} {unit}"
        return replace(finding, value=written(finding.value), detail=detail)
