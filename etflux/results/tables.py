"""The tidy tables: their columns, and how they are made from datasets and read from files."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from functools import cache
from importlib.resources import files
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from etflux.findings import Finding, ordered
from etflux.variables import flag_words

HOUR_ROWS = 200_000  # of the table of hours; NetCDF has all days
DIMENSION: Mapping[str, str] = {"station": "station_id", "stand": "unit_id", "county": "county_id"}
BIT_KINDS: Mapping[str, str] = {"source": "bit of source", "provisional": "bit of provisional", "air": "bit of flags"}

# What a spreadsheet could take for a formula; an apostrophe in front keeps it text. Text that already begins with
# apostrophes before such a character gets one more, so that reading takes back exactly what writing added.
_FORMULA = re.compile(r"'*[=+\-@\t\r]")
_GUARDED = re.compile(r"''*[=+\-@\t\r]")


@cache
def _registry() -> dict[str, Any]:
    text = files("etflux.tables").joinpath("result_columns.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


SCHEMA_VERSION: str = _registry()["schema_version"]


def table_names() -> tuple[str, ...]:
    """Names of the tidy tables."""
    return tuple(_registry()["tables"])


def columns(name: str) -> tuple[str, ...]:
    """Columns of one tidy table, in order; KeyError for an unknown table."""
    return tuple(_registry()["tables"][name]["columns"])


def source_of(name: str) -> str:
    """Where a table comes from: "station", "stand", "county", "frame" or "findings"."""
    return str(_registry()["tables"][name]["from"])


def column_kind(column: str) -> str:
    """Whether a column holds "text", "date", "whole" numbers or plain "number"s."""
    registry = _registry()
    if column in registry["text"]:
        return "text"
    if column in registry["dates"]:
        return "date"
    return "whole" if column in registry["whole"] or column.endswith("_source") else "number"


def free_text() -> frozenset[str]:
    """Columns that people wrote, where text could begin like a formula."""
    return frozenset(_registry()["free_text"])


def udunits(unit: str) -> str:
    """Spelling of a registry unit that NetCDF readers understand; "1" for none.

    Examples
    --------
    >>> udunits("MJ/m²/day"), udunits("")
    ('MJ m-2 day-1', '1')
    """
    return str(_registry()["udunits"][unit]) if unit else "1"


def from_dataset(dataset: xr.Dataset, name: str) -> pd.DataFrame:
    """Make a tidy table of a dataset: one row per day and id, or per id where the table has no date."""
    if name == "second_opinions":
        return _second_opinions(dataset)
    if name == "county_hours":
        return _county_hours(dataset)
    wanted = columns(name)
    dims = [dim for dim in ("date", DIMENSION[source_of(name)], "tag") if dim in wanted and dim in dataset.dims]
    if "tag" in wanted and source_of(name) == "county" and "tag" not in dims:
        return pd.DataFrame(columns=list(wanted))
    shape = tuple(dataset.sizes[dim] for dim in dims)
    return pd.DataFrame({column: _column(dataset, column, dims, shape) for column in wanted}, copy=False)


def _column(dataset: xr.Dataset, name: str, dims: Sequence[str], shape: tuple[int, ...]) -> np.ndarray:
    """One variable or coordinate spread over all rows; zeros or NaN where the dataset has none."""
    if name not in dataset.variables:
        blank = {"whole": 0, "text": ""}.get(column_kind(name), np.nan)
        return np.full(int(np.prod(shape)), blank, dtype=object if blank == "" else None)
    variable = dataset.variables[name]
    values = variable.to_numpy()
    if column_kind(name) == "text":
        values = values.astype(object)
    axes = [1 if dim not in variable.dims else dataset.sizes[dim] for dim in dims]
    ordered_values = np.transpose(values, [variable.dims.index(dim) for dim in dims if dim in variable.dims])
    return np.broadcast_to(ordered_values.reshape(axes), shape).reshape(-1)


def is_second_opinion(name: str) -> bool:
    """Whether a variable of the station dataset is another method's reference ET, "eto_<method>_mm"."""
    return re.fullmatch(r"eto_.+_mm", name) is not None and name != "eto_spread_mm"


def second_opinion_names(dataset: xr.Dataset) -> dict[str, str]:
    """Variables of the station dataset that hold other methods' reference ET, with the method's name."""
    found = [str(name) for name in dataset.data_vars if is_second_opinion(str(name))]
    return {name: name.removeprefix("eto_").removesuffix("_mm") for name in found}


def _second_opinions(dataset: xr.Dataset) -> pd.DataFrame:
    pieces = []
    for name, method in second_opinion_names(dataset).items():
        shape = (dataset.sizes["date"], dataset.sizes["station_id"])
        dims = ("date", "station_id")
        piece = {column: _column(dataset, column, dims, shape) for column in dims}
        piece["method"] = np.full(int(np.prod(shape)), method, dtype=object)
        piece["eto_mm"] = _column(dataset, name, dims, shape)
        pieces.append(pd.DataFrame(piece))
    blank = pd.DataFrame(columns=list(columns("second_opinions")))
    return pd.concat(pieces, ignore_index=True) if pieces else blank


def _county_hours(dataset: xr.Dataset) -> pd.DataFrame:
    """The day's course of every county; hours before the air begins to mix are left out."""
    wanted = columns("county_hours")
    if "hour" not in dataset.dims or "hourly_dew_point_mixed_c" not in dataset:
        return pd.DataFrame(columns=list(wanted))
    dims = ("date", "county_id", "hour")
    hourly = {f"hourly_{column}": column for column in wanted if f"hourly_{column}" in dataset}
    named = dataset[[*hourly, "clock_minus_solar_h"]].rename(hourly)
    named["clock_h"] = named["hour"] + named["clock_minus_solar_h"]
    shape = tuple(named.sizes[dim] for dim in dims)
    there = np.isfinite(_column(named, "dew_point_mixed_c", dims, shape))
    return pd.DataFrame({column: _column(named, column, dims, shape)[there] for column in wanted})


def last_days(dataset: xr.Dataset, name: str) -> xr.Dataset:
    """The days of a dataset that a table holds: all, but of the day's courses only as many as people can open."""
    if name != "county_hours" or "hour" not in dataset.dims:
        return dataset
    per_day = max(1, dataset.sizes["county_id"] * dataset.sizes["hour"])
    return dataset.isel(date=slice(-max(1, HOUR_ROWS // per_day), None))


def findings_table(findings: Iterable[Finding]) -> pd.DataFrame:
    """Findings as a table, errors first."""
    records = [finding.record() for finding in ordered(findings)]
    frame = pd.DataFrame(records, columns=[*columns("findings"), "value"])
    frame["value_text"] = ["" if value is None else str(value) for value in frame.pop("value")]
    frame["row"] = frame["row"].astype("Int64")
    return frame.reindex(columns=list(columns("findings")))


def findings_of(frame: pd.DataFrame) -> list[Finding]:
    """Findings of a table that was read back; a value is what its text says."""
    return [
        Finding(
            code=row.code,
            table=row.table,
            row=None if pd.isna(row.row) else int(row.row),
            quantity=row.quantity or None,
            value=_parsed(row.value_text),
            subject=row.subject,
            detail=row.detail,
            place=row.place,
        )
        for row in frame.itertuples()
    ]


def _parsed(text: str) -> float | str | None:
    if text == "":
        return None
    try:
        return float(text)
    except ValueError:
        return text


def with_bits(names: pd.DataFrame) -> pd.DataFrame:
    """Names of people's ids and, below them, the words of every bit of flags and sources."""
    bits = [
        {"kind": kind, "id": str(bit), "name": words}
        for registry, kind in BIT_KINDS.items()
        for bit, words in flag_words(registry).items()
    ]
    return pd.concat([names.reindex(columns=list(columns("names"))), pd.DataFrame(bits)], ignore_index=True)


def without_bits(names: pd.DataFrame) -> pd.DataFrame:
    """Names of people's ids alone."""
    return names[~names["kind"].isin(list(BIT_KINDS.values()))].reset_index(drop=True)


def guarded(text: Any) -> Any:
    """Text that no spreadsheet takes for a formula.

    Examples
    --------
    >>> guarded("=1+1"), guarded("Corn"), guarded("'=x")
    ("'=1+1", 'Corn', "''=x")
    """
    return "'" + text if isinstance(text, str) and _FORMULA.match(text) else text


def unguarded(text: Any) -> Any:
    """Text as it was before :func:`guarded`."""
    return text[1:] if isinstance(text, str) and _GUARDED.match(text) else text
