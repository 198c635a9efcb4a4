"""Results as NetCDF-4 with CF metadata: one group each for stations, stands and counties."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import DTypeLike

from etflux.crops import STAGE_WORDS
from etflux.results import tables
from etflux.variables import flag_bits, quantities

if TYPE_CHECKING:
    from etflux.results.record import Results

CONVENTIONS = "CF-1.11"  # the first that knows units_metadata
GROUPS = ("station", "stand", "county")
ENGINE: Literal["h5netcdf"] = "h5netcdf"
_COMPRESSED = {"zlib": True, "complevel": 1, "shuffle": True}  # 4 is 3 times slower here and 6 % smaller
MOST_CELLS = 20_000_000  # of an array of the contribution; the long tables have every row
_CONTRIBUTION = {
    "contribution_by_cover_and_age_c": "What the water of each source and age added to the dew point; crops and rest",
    "contribution_by_origin_c": "What the crops of each county added to the dew point",
    "contribution_lowest_c": "Lowest contribution when one thing is varied",
    "contribution_highest_c": "Highest contribution when one thing is varied",
}
_OPINION = "reference evapotranspiration by another published method"


def write_netcdf(results: Results, path: Path) -> None:
    """Write the three datasets, SI, values to the last bit, and the contribution by cover, age, origin and range.

    Parameters
    ----------
    results : Results
    path : Path
        File to make.
    """
    about = {
        "Conventions": CONVENTIONS,
        "title": results.settings.get("title") or "Crop water use and its moisture in the air",
        "source": f"etflux {results.version}",
        "history": f"{results.issued.isoformat()} etflux {results.version} run {results.run_id}",
        "run_id": results.run_id,
        "schema_version": tables.SCHEMA_VERSION,
        "input_sha256": str(results.source.get("sha256", "")),
        "settings": json.dumps(dict(results.settings), ensure_ascii=False, default=str),
        "comment": "Planning estimate, not a warning product or an official forecast.",
    }
    xr.Dataset(attrs=about).to_netcdf(path, engine=ENGINE, mode="w")
    for group in GROUPS:
        described = describe(getattr(results, group))
        described.to_netcdf(path, engine=ENGINE, mode="a", group=group, encoding=_encoding(described))
    arrays = contribution_arrays(results)
    arrays.to_netcdf(path, engine=ENGINE, mode="a", group="contribution", encoding=_encoding(arrays))


def contribution_arrays(results: Results) -> xr.Dataset:
    """The contribution's long tables as arrays: by cover and age, by county of origin, and its ranges.

    Dimensions (date, county_id, cover, age_d), (date, county_id, from_county_id) and (date, county_id, varied). Water
    that is not there is 0; a county-day without a contribution, a day without origins (no wind) and what was not varied
    are NaN.
    """
    county = results.county
    labels = {name: county[name].to_numpy() for name in ("date", "county_id")}
    shape = tuple(len(values) for values in labels.values())
    base = county["contribution_c"].to_numpy() if "contribution_c" in county else np.full(shape, np.nan)
    found = xr.Dataset(coords=labels)
    for name, table, of, values in (
        ("contribution_by_cover_and_age_c", results.contribution, ("cover", "age_d"), "contribution_c"),
        ("contribution_by_origin_c", results.moistened_by, ("from_county_id",), "contribution_c"),
        ("contribution_lowest_c", results.ranges, ("varied",), "contribution_low_c"),
        ("contribution_highest_c", results.ranges, ("varied",), "contribution_high_c"),
    ):
        if not len(table):
            continue
        kinds = {column: pd.unique(table[column]) for column in of}
        cells = int(np.prod([*shape, *(len(values) for values in kinds.values())]))
        if cells > MOST_CELLS:
            continue
        index = [
            pd.Index(values).get_indexer(pd.Index(column))
            for values, column in (
                (labels["date"], pd.to_datetime(table["date"])),
                (labels["county_id"].astype(object), table["county_id"].astype(object)),
                *((values, table[column]) for column, values in kinds.items()),
            )
        ]
        dense = np.zeros((*shape, *(len(values) for values in kinds.values())))
        np.add.at(dense, tuple(index), np.nan_to_num(table[values].to_numpy(float)))
        given = np.zeros(dense.shape, dtype=bool)
        given[tuple(index)] = True
        if of == ("varied",):
            dense[~given] = np.nan
        elif of == ("from_county_id",):
            dense[~given.any(axis=(1, 2))] = np.nan  # without wind nobody's origins are known: 0 would say none
        dense[np.isnan(base)] = np.nan
        dims = ("date", "county_id", *of)
        found[name] = xr.DataArray(dense, dims=dims, coords={**labels, **kinds})
        found[name].attrs = {
            "long_name": _CONTRIBUTION[name], "units": "degC", "units_metadata": "temperature: difference"
        }  # fmt: skip
    return found


def read_netcdf(path: Path) -> dict[str, xr.Dataset]:
    """Read the three datasets into memory, by group."""
    found = {}
    for group in GROUPS:
        with xr.open_dataset(path, engine=ENGINE, group=group, decode_timedelta=False) as dataset:
            found[group] = dataset.load()
    return found


def describe(dataset: xr.Dataset) -> xr.Dataset:
    """Copy of a dataset whose variables carry CF attributes of the registry."""
    described = dataset.copy()
    if "stage" in described:
        described = described.drop_vars("stage")  # words; the codes are there
    for name in described.variables:
        attributes = attributes_of(str(name))
        if f"{name}_source" in described.variables:
            attributes["ancillary_variables"] = f"{name}_source"
        described[name].attrs = attributes
    return described


def attributes_of(name: str) -> dict[str, Any]:
    """CF attributes of one variable.

    Examples
    --------
    >>> attributes_of("contribution_c")["units_metadata"]
    'temperature: difference'
    >>> attributes_of("t_max_c")["standard_name"]
    'air_temperature'
    """
    if name.endswith("_source"):
        of = quantities().get(name.removesuffix("_source"))
        label = f"{of.label if of else name.removesuffix('_source')}: where it comes from"
        return {"long_name": label, "standard_name": "status_flag", **_masks("source", np.uint8)}
    if name == "provisional":
        return {"long_name": "Why the day may still move", **_masks("provisional", np.uint8)}
    if name == "flags":
        return {"long_name": "Remarks on the air", **_masks("air", np.int32)}
    if name == "hour":
        return {"long_name": "Hour of the day", "units": "hour", "comment": "Local solar time"}
    if name == "stage_code":
        words = " ".join(word.replace(" ", "_") for word in STAGE_WORDS.values())
        values = np.array([int(stage) for stage in STAGE_WORDS], dtype=np.int8)
        return {"long_name": "Growth stage", "flag_values": values, "flag_meanings": words}
    if name.startswith("hourly_"):
        daily = attributes_of(name.removeprefix("hourly_"))
        return {**daily, "long_name": f"{daily['long_name']}, by the hour"}
    row = quantities().get(name)
    if row is None:
        return {"long_name": _OPINION, "units": "mm day-1"} if tables.is_second_opinion(name) else {"long_name": name}
    attributes: dict[str, Any] = {"long_name": row.label}
    if row.kind == "label":
        return attributes
    attributes["units"] = {"latitude_deg": "degrees_north", "longitude_deg": "degrees_east"}.get(
        name, tables.udunits(row.unit)
    )
    if row.cf_name:
        attributes["standard_name"] = row.cf_name
    if row.kind == "difference" and row.unit == "°C":
        attributes["units_metadata"] = "temperature: difference"
    elif row.unit == "°C":
        attributes["units_metadata"] = "temperature: on_scale"
    if row.note:
        attributes["comment"] = row.note
    return attributes


def _masks(registry: str, kind: DTypeLike) -> dict[str, Any]:
    bits: Mapping[str, int] = {name: bit for name, bit in flag_bits(registry).items() if bit}
    masks: np.ndarray = np.array(list(bits.values()), dtype=kind)
    nothing = "0: measured here" if registry == "source" else "0: no remark"
    return {"flag_masks": masks, "flag_values": masks, "flag_meanings": " ".join(bits), "comment": nothing}


def _encoding(dataset: xr.Dataset) -> dict[str, dict[str, Any]]:
    encoding: dict[str, dict[str, Any]] = {}
    for name, variable in dataset.variables.items():
        if name in {"date", "profile_date"}:
            encoding[str(name)] = {"units": "days since 1970-01-01", "dtype": "int32", "calendar": "standard"}
        elif variable.dtype.kind == "f":
            encoding[str(name)] = {**_COMPRESSED, "_FillValue": np.nan} if variable.ndim else {"_FillValue": np.nan}
        elif variable.dtype.kind in "iu" and variable.ndim:
            encoding[str(name)] = dict(_COMPRESSED)
    return encoding
