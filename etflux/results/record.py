"""The results of a run as one record."""

from __future__ import annotations

import datetime as dt
import hashlib
import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from etflux import __version__
from etflux.case import settings_record
from etflux.findings import Finding
from etflux.outlines import Outline
from etflux.results import tables


def _empty(name: str) -> Any:
    return field(default_factory=lambda: pd.DataFrame(columns=list(tables.columns(name))))


@dataclass(frozen=True)
class Results:
    """Everything a run gives, in SI units, by the names of the registry.

    Parameters
    ----------
    station, stand, county : Dataset
        Dimensions (date, station_id), (date, unit_id), (date, county_id); county has le_by_tag_w_m2 with a third
        dimension, tag. What of a unit or county does not change with the day is a coordinate on its dimension;
        `stored_start_mm` (unit_id) of the stands is the water held before the first day, counted from field capacity.
        A variable that a run has no values for may be left out.
    contribution, contribution_hours, ranges, moistened_by, budget, marks, fills, names, methods : DataFrame
        Columns of ``tables/result_columns.toml``. `term` of a budget is a name of the registry, or words.
    findings : sequence of Finding
        What the checks said.
    outlines : mapping of str to Outline
        Of the counties that have one.
    settings : mapping or Settings
        The choices of method; kept as a mapping.
    source : mapping
        What the case was read from: path, sha256, template version.
    run_id : str
        Of :func:`run_identity`; found from the rest where blank.
    issued : datetime
        With a time zone.
    version : str
        Of this package.
    """

    station: xr.Dataset
    stand: xr.Dataset
    county: xr.Dataset
    contribution: pd.DataFrame = _empty("contribution")
    contribution_hours: pd.DataFrame = _empty("contribution_hours")
    ranges: pd.DataFrame = _empty("ranges")
    moistened_by: pd.DataFrame = _empty("moistened_by")
    budget: pd.DataFrame = _empty("budget")
    marks: pd.DataFrame = _empty("marks")
    fills: pd.DataFrame = _empty("fills")
    names: pd.DataFrame = _empty("names")
    methods: pd.DataFrame = _empty("methods")
    findings: Sequence[Finding] = ()
    outlines: Mapping[str, Outline] = field(default_factory=dict)
    settings: Any = field(default_factory=dict)
    source: Mapping[str, Any] = field(default_factory=dict)
    run_id: str = ""
    issued: dt.datetime = field(default_factory=lambda: dt.datetime.now(dt.UTC).replace(microsecond=0))
    version: str = __version__

    def __post_init__(self) -> None:
        if not isinstance(self.settings, Mapping):
            object.__setattr__(self, "settings", settings_record(self.settings))
        if not self.run_id:
            object.__setattr__(self, "run_id", run_identity(self.source, self.settings, self.version))

    def table(self, name: str) -> pd.DataFrame:
        """One tidy table, with the columns of the checked-in list in its order.

        Parameters
        ----------
        name : str
            One of :func:`etflux.results.table_names`; KeyError if not.

        Returns
        -------
        DataFrame
            SI units; NaN where a run has no value.
        """
        source = tables.source_of(name)
        if source == "frame":
            frame = tables.with_bits(self.names) if name == "names" else getattr(self, name)
            return frame.reindex(columns=list(tables.columns(name)))
        if source == "findings":
            return tables.findings_table(self.findings)
        return tables.from_dataset(tables.last_days(getattr(self, source), name), name)

    def blocks(self, name: str, rows: int) -> Iterator[pd.DataFrame]:
        """The table in pieces of whole days, of about `rows` rows each, so that a long one need not fit in memory."""
        source = tables.source_of(name)
        if source in {"frame", "findings"} or "date" not in tables.columns(name):
            yield self.table(name)
            return
        dataset = tables.last_days(getattr(self, source), name)
        step = max(1, rows // max(1, dataset.sizes[tables.DIMENSION[source]]))
        for first in range(0, dataset.sizes["date"], step):
            yield tables.from_dataset(dataset.isel(date=slice(first, first + step)), name)

    @property
    def air_profiles(self) -> pd.DataFrame:
        """Morning air of the last days by layer: height, potential temperature, humidity with and without crops.

        Columns date, county_id, height_m, theta_c, humidity_g_kg, humidity_without_g_kg; empty where a run has none.
        """
        names = [name for name in self.county.data_vars if str(name).startswith("profile_") and "layer" in
                 self.county[name].dims]  # fmt: skip
        found = self.county[names].to_dataframe().reset_index() if names else pd.DataFrame()
        shown = {str(name): str(name).removeprefix("profile_") for name in names}
        columns = ["date", "county_id", "height_m", "theta_c", "humidity_g_kg", "humidity_without_g_kg"]
        return found.rename(columns={"profile_date": "date", **shown}).reindex(columns=columns)

    @property
    def dates(self) -> np.ndarray:
        """Days of the run, datetime64[D]."""
        return self.county["date"].to_numpy().astype("datetime64[D]")

    def day(self, on: dt.date | str | None = None) -> np.datetime64:
        """Day of the brief: the given one, else the setting's, else the last; ValueError if it is not in the run."""
        wanted = on or self.settings.get("brief_date") or None
        day = self.dates[-1] if wanted is None else np.datetime64(str(wanted), "D")
        if day not in self.dates:
            raise ValueError(f"{day} is not a day of this run: {self.dates[0]} to {self.dates[-1]}")
        return day

    def summary(self, on: dt.date | str | None = None) -> dict[str, Any]:
        """Numbers of one day for the terminal and the brief; see :func:`etflux.results.summarise`."""
        from etflux.results.summary import summarise

        return summarise(self, self.day(on))

    def name_of(self, kind: str, identity: str) -> str:
        """Name that people gave an id ("county", "station", "cover", "soil"), or the id itself."""
        return self.names_by_id(kind).get(identity, identity)

    def names_by_id(self, kind: str) -> dict[str, str]:
        """Names of one kind, by id; only those that have one."""
        rows = self.names[self.names["kind"] == kind]
        given = rows["name"].notna() & (rows["name"] != "")
        return dict(zip(rows["id"][given].astype(str), rows["name"][given].astype(str), strict=True))


def run_identity(source: Mapping[str, Any], settings: Mapping[str, Any], version: str = __version__) -> str:
    """Name of a run: the same input, files beside it included, settings and version give the same one.

    Examples
    --------
    >>> run_identity({"sha256": "aa"}, {"units": "si"}, "1.0")
    '2acf79dd464d'
    """
    beside = [source[key] for key in ("weather_files", "profile_files", "outlines_file") if source.get(key)]
    text = json.dumps([source.get("sha256", ""), dict(settings), version, *beside], sort_keys=True, default=str)
    return hashlib.sha256(text.encode()).hexdigest()[:12]
