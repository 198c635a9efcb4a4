"""Bring measurements and a run together: pairs by day, and how well they agree by month, growth stage and season."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import cached_property
from itertools import groupby
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from etflux.compare.measurements import COLUMNS, DEFAULT_SERIES, TABLE, WATER, Measurements
from etflux.compare.metrics import METRICS, outside_band, scores
from etflux.crops import STAGE_WORDS, Stage
from etflux.findings import Finding, ProblemsFound, has_errors
from etflux.humidity import latent_heat_of_vaporization
from etflux.variables import convert, quantity, units

if TYPE_CHECKING:
    import pandas as pd
    import xarray as xr

    from etflux.results import Results

USUAL_T_C = 20.0  # latent heat where a day's own is not known: 2.45 MJ/kg, FAO-56 Annex 3 (p. 223)
MJ_PER_W_DAY = 0.0864
BAND = "between the series"
GROUPS = ("all", "month", "stage", "season")
PAIR_COLUMNS = (
    "place", "kind", "quantity", "unit", "series", "date", "measured", "uncertainty", "modelled", "difference",
    "month", "stage", "season",
)  # fmt: skip
BAND_COLUMNS = ("place", "quantity", "unit", "date", "low", "high", "modelled", "outside", "month", "stage", "season")
METRIC_COLUMNS = (
    "place", "quantity", "unit", "series", "group", "which", *METRICS, "mean_measured", "mean_modelled",
    "sum_measured", "sum_modelled", "low_mean", "high_mean", "rmse_outside", "bias_outside", "inside_pct",
)  # fmt: skip


def _blank(columns: tuple[str, ...]) -> pd.DataFrame:
    import pandas as pd

    return pd.DataFrame(columns=list(columns)).astype({"date": "datetime64[ns]"})


@dataclass(frozen=True)
class Comparison:
    """A run held against measurements; SI units of the registry.

    Parameters
    ----------
    pairs : DataFrame
        One row per place, day, quantity and series: measured, its uncertainty, modelled, their difference, and the
        month, growth stage and season the day belongs to.
    band : DataFrame
        Where several series measured the same on the same day: the lowest and highest of them, and how far the
        modelled value lies outside (0 inside, negative below).
    findings : list of Finding
        What was said about the measurements.
    run_id : str
    file : str
        Name of the measurements' file.
    """

    pairs: pd.DataFrame
    band: pd.DataFrame = field(default_factory=lambda: _blank(BAND_COLUMNS))
    findings: list[Finding] = field(default_factory=list)
    run_id: str = ""
    file: str = ""

    @cached_property
    def metrics(self) -> pd.DataFrame:
        """Measures of agreement: all days, by month, by growth stage, by season; series apart, and the band."""
        import pandas as pd

        rows = [*_series_rows(self.pairs), *_band_rows(self.band)]
        return pd.DataFrame(rows, columns=list(METRIC_COLUMNS))


class _Modelled(NamedTuple):
    """What a run has for one place and quantity, by day of the run."""

    kind: str
    values: np.ndarray
    stage: np.ndarray | None
    county: int
    south: bool


def compare(results: Results, measurements: Measurements) -> Comparison:
    """Hold a run against measurements.

    Parameters
    ----------
    results : Results
    measurements : Measurements
        Of :func:`etflux.compare.read_measurements`, or made in Python.

    Returns
    -------
    Comparison

    Raises
    ------
    ProblemsFound
        If any row has an error: all of them, of the reading and of what the run does not have.
    """
    rows, found = _known_rows(results, measurements)
    if has_errors(found):
        raise ProblemsFound(found)
    pieces = []
    for (place, name), part in rows.groupby(["place", "quantity"], sort=False):
        pieces.append(_pairs(results, str(place), str(name), part))
    pairs = _together(pieces, PAIR_COLUMNS)
    return Comparison(pairs, _band(pairs), found, results.run_id, measurements.file)


def measurements_from(rows: pd.DataFrame, file: str = "") -> Measurements:
    """Measurements made in Python: columns place, date, quantity, value, unit; optional uncertainty, series."""
    frame = rows.copy()
    frame["uncertainty"] = frame.get("uncertainty", np.nan)
    frame["series"] = frame.get("series", DEFAULT_SERIES)
    frame["row"] = np.arange(len(frame))
    frame = frame[frame["value"].notna()]
    return Measurements(frame[[*COLUMNS, "row"]].reset_index(drop=True), [], file)


def _together(pieces: list[pd.DataFrame], columns: tuple[str, ...]) -> pd.DataFrame:
    import pandas as pd

    return pd.concat(pieces, ignore_index=True)[list(columns)] if pieces else _blank(columns)


# --- what of the measurements the run has ---


def _known_rows(results: Results, measurements: Measurements) -> tuple[pd.DataFrame, list[Finding]]:
    """Rows that can be paired, and what is wrong with the others; a fault of many rows is said once."""
    rows, found = measurements.rows, list(measurements.findings)
    known = _places(results)
    for place, part in rows.groupby("place", sort=False):
        if str(place) not in known:
            near = get_close_matches(str(place), known, n=1, cutoff=0.0)
            found.append(_said(measurements, part, "measured-place-unknown", "place", str(place),
                               f"nearest is '{near[0]}'" if near else ""))  # fmt: skip
            continue
        for name, of_place in part.groupby("quantity", sort=False):
            if _modelled(results, str(place), str(name)) is None:
                found.append(_said(measurements, of_place, "measured-quantity-not-computed", "quantity", str(name),
                                   f"for {place}"))  # fmt: skip
    days = rows["date"].to_numpy().astype("datetime64[D]")
    inside = np.isin(days, results.dates)
    if len(rows) and not inside.any():
        span = f"the run has {results.dates[0]} to {results.dates[-1]}"
        found.append(_said(measurements, rows, "measured-days-none", "date", str(days[0]), span))
    elif not inside.all():
        found.append(_said(measurements, rows[~inside], "measured-day-outside", "date", str(days[~inside][0])))
    return rows[inside], found


def _said(
    measurements: Measurements, rows: pd.DataFrame, code: str, name: str, value: str, detail: str = ""
) -> Finding:  # fmt: skip
    row = int(rows["row"].iloc[0])
    more = f"and {len(rows) - 1} more rows" if len(rows) > 1 else ""
    detail = ", ".join(part for part in (detail, more) if part)
    return Finding(code, TABLE, row, name, value, detail=detail).at(f"{measurements.file or TABLE} line {row + 2}")


def _places(results: Results) -> list[str]:
    ids = [
        results.stand["unit_id"],
        results.stand["stand_id"],
        results.station["station_id"],
        results.county["county_id"],
    ]
    return list(dict.fromkeys(str(name) for values in ids for name in values.to_numpy()))


def _modelled(results: Results, place: str, name: str) -> _Modelled | None:
    """A run's values for a place: the unit or stand of that id, else the station, else the county."""
    if name in results.stand.data_vars:
        for label in ("unit_id", "stand_id"):
            here = np.flatnonzero(results.stand[label].to_numpy().astype(str) == place)
            if len(here):
                return _of_stand(results, name, here)
    for kind, dataset in (("station", results.station), ("county", results.county)):
        label = f"{kind}_id"
        here = np.flatnonzero(dataset[label].to_numpy().astype(str) == place)
        if len(here) and name in dataset and dataset[name].dims == ("date", label):
            south = float(dataset["latitude_deg"].to_numpy()[here[0]]) < 0.0 if "latitude_deg" in dataset else False
            county = int(here[0]) if kind == "county" else -1
            return _Modelled(kind, dataset[name].to_numpy()[:, here[0]].astype(float), None, county, south)
    return None


def _of_stand(results: Results, name: str, here: np.ndarray) -> _Modelled:
    """Area mean over the parts of a stand; its stage is that of the middle part."""
    stand: xr.Dataset = results.stand
    area = stand["area_km2"].to_numpy()[here]
    values = stand[name].to_numpy()[:, here].astype(float) @ (area / area.sum())
    stage = stand["stage_code"].to_numpy()[:, here[len(here) // 2]] if "stage_code" in stand else None
    county_ids = results.county["county_id"].to_numpy().astype(str)
    county = int(np.flatnonzero(county_ids == str(stand["county_id"].to_numpy()[here[0]]))[0])
    south = float(results.county["latitude_deg"].to_numpy()[county]) < 0.0
    return _Modelled("stand", values, stage, county, south)


# --- pairs ---


def _pairs(results: Results, place: str, name: str, rows: pd.DataFrame) -> pd.DataFrame:
    model = _modelled(results, place, name)
    assert model is not None  # _known_rows has refused what a run does not have
    at = np.searchsorted(results.dates, rows["date"].to_numpy().astype("datetime64[D]"))
    heat = _latent_heat(results, model.county)[at]
    factor = np.array([1.0])
    measured, uncertainty = rows["value"].to_numpy(float).copy(), rows["uncertainty"].to_numpy(float).copy()
    for unit in rows["unit"].unique():
        here = (rows["unit"] == unit).to_numpy()
        measured[here] = _converted(measured[here], name, unit, heat[here])
        factor = _converted(np.ones(here.sum()), name, unit, heat[here]) - _converted(
            np.zeros(here.sum()), name, unit, heat[here]
        )
        uncertainty[here] = np.abs(factor) * uncertainty[here]
    dates = rows["date"].to_numpy().astype("datetime64[ns]")
    stage, season = _stage_words(model, results.dates, at)
    month = dates.astype("datetime64[M]").astype(str)
    found = rows[["place", "quantity", "series"]].assign(
        kind=model.kind, unit=quantity(name).unit, date=dates, measured=measured, uncertainty=uncertainty,
        modelled=model.values[at], difference=model.values[at] - measured, month=month, stage=stage, season=season,
    )  # fmt: skip
    return found[np.isfinite(found["difference"].to_numpy(float))]


def _converted(values: np.ndarray, name: str, unit: str, heat_mj_kg: np.ndarray) -> np.ndarray:
    """Numbers in the quantity's unit; a depth of water and the heat it carries turn into each other by the latent heat.

    One millimetre is one kilogram per square metre.
    """
    row = quantity(name)
    if not row.unit:
        return values
    from_dimension, to_dimension = units()[unit].dimension, units()[row.unit].dimension
    if from_dimension == to_dimension:
        return convert(values, unit, row.unit, row.kind)
    if from_dimension == "radiation":
        return convert(values, unit, "MJ/m²/day") / heat_mj_kg
    depth = convert(values, unit, "mm" if from_dimension == "water depth" else "mm/day")
    if to_dimension in WATER - {"radiation"}:
        return depth
    return convert(depth * heat_mj_kg, "MJ/m²/day", row.unit)


def _latent_heat(results: Results, county: int) -> np.ndarray:
    """Latent heat of each day as the run used it over a county, else that at 20 degC. [MJ kg-1]"""
    usual = np.full(len(results.dates), float(latent_heat_of_vaporization(USUAL_T_C)))
    if county < 0 or not {"le_county_w_m2", "et_county_mm"} <= set(results.county.data_vars):
        return usual
    flux = results.county["le_county_w_m2"].to_numpy()[:, county]
    depth = results.county["et_county_mm"].to_numpy()[:, county]
    with np.errstate(invalid="ignore", divide="ignore"):
        own = flux * MJ_PER_W_DAY / depth
    return np.where(np.isfinite(own) & (depth > 1e-6), own, usual)


def _stage_words(model: _Modelled, dates: np.ndarray, at: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Growth stage and season of the days: a stand's own growing season, else the half year."""
    days = dates[at]
    month = days.astype("datetime64[M]").astype(int) % 12 + 1
    summer = ((month >= 4) & (month <= 9)) != model.south
    if model.stage is None:
        year = days.astype("datetime64[Y]").astype(str)
        return np.full(len(at), ""), np.char.add(np.where(summer, "summer half ", "winter half "), year)
    growing = ~np.isin(model.stage, (Stage.BARE, Stage.DORMANT))
    season = np.empty(len(dates), dtype=object)
    for alive, part in groupby(range(len(dates)), key=lambda day: bool(growing[day])):
        run = list(part)
        first, last = (str(dates[day])[:4] for day in (run[0], run[-1]))
        years = first if first == last else f"{first} to {last}"
        season[run] = f"growing season {years}" if alive else f"between seasons {years}"
    words = np.array([STAGE_WORDS[Stage(int(code))] for code in model.stage], dtype=object)
    return words[at].astype(str), season[at].astype(str)


def _band(pairs: pd.DataFrame) -> pd.DataFrame:
    """Lowest and highest of several series of one place, quantity and day."""
    several = pairs.groupby(["place", "quantity"])["series"].transform("nunique") > 1
    if not several.any():
        return _blank(BAND_COLUMNS)
    keys = ["place", "quantity", "unit", "date", "month", "stage", "season"]
    by_day = pairs[several].groupby(keys, sort=False)
    band = by_day.agg(
        low=("measured", "min"), high=("measured", "max"), modelled=("modelled", "first"), count=("series", "nunique")
    ).reset_index()
    band = band[band["count"] > 1]
    outside = outside_band(band["modelled"], band["low"], band["high"])
    return band.assign(outside=outside)[list(BAND_COLUMNS)].reset_index(drop=True)


# --- measures ---


def _grouped(frame: pd.DataFrame) -> Iterator[tuple[str, str, pd.DataFrame]]:
    """Whole, months, stages and seasons of some rows."""
    yield "all", "", frame
    for group in GROUPS[1:]:
        for which, part in frame.groupby(group, sort=group != "stage"):
            if which:
                yield group, str(which), part


def _series_rows(pairs: pd.DataFrame) -> Iterator[dict[str, object]]:
    for (place, name, series), rows in pairs.groupby(["place", "quantity", "series"], sort=False):
        for group, which, part in _grouped(rows):
            model, truth = part["modelled"].to_numpy(), part["measured"].to_numpy()
            yield {
                "place": place, "quantity": name, "unit": part["unit"].iloc[0], "series": series, "group": group,
                "which": which, **scores(model, truth), "mean_measured": truth.mean(), "mean_modelled": model.mean(),
                "sum_measured": truth.sum(), "sum_modelled": model.sum(),
            }  # fmt: skip


def _band_rows(band: pd.DataFrame) -> Iterator[dict[str, object]]:
    for (place, name), rows in band.groupby(["place", "quantity"], sort=False):
        for group, which, part in _grouped(rows):
            outside = part["outside"].to_numpy()
            yield {
                "place": place, "quantity": name, "unit": part["unit"].iloc[0], "series": BAND, "group": group,
                "which": which, "n": float(len(part)), "mean_modelled": part["modelled"].mean(),
                "sum_modelled": part["modelled"].sum(), "low_mean": part["low"].mean(),
                "high_mean": part["high"].mean(), "rmse_outside": float(np.sqrt(np.mean(outside**2))),
                "bias_outside": outside.mean(), "inside_pct": 100.0 * np.mean(outside == 0.0),
            }  # fmt: skip
