"""Give the stations' weather to the counties: which station, and whose rain."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from etflux.findings import Finding
from etflux.weather.places import great_circle_km
from etflux.weather.record import SOURCE, StationRecord

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case


@dataclass(frozen=True)
class CountyWeather:
    """What the counties take from the stations.

    Parameters
    ----------
    station_index : ndarray of int, shape (county,)
        Position of each county's station.
    distance_km : ndarray, shape (county,)
        From the county's centroid to it.
    rain_mm : ndarray, shape (day, county)
        NaN from the first day on that no rule could fill.
    rain_source : ndarray of uint8, shape (day, county)
    season_end : ndarray of int, shape (county,)
        Number of days that can be computed.
    """

    station_index: np.ndarray
    distance_km: np.ndarray
    rain_mm: np.ndarray
    rain_source: np.ndarray
    season_end: np.ndarray


def to_counties(case: Case, record: StationRecord) -> tuple[CountyWeather, list[Finding]]:
    """Station and rain of every county.

    Rain: the county's own gauge wins; else its station; else the nearest station with rain that day within the
    setting's distance; else, only if the setting says so, 0. Where none serves the county's season stops there.

    Parameters
    ----------
    case : Case
    record : StationRecord
        Filled.

    Returns
    -------
    CountyWeather
    list of Finding
        "rain-missing", "rain-treated-as-zero".
    """
    counties = case.table("counties")
    distance = great_circle_km(
        counties["latitude_deg"].to_numpy(float), counties["longitude_deg"].to_numpy(float),
        record.latitude_deg, record.longitude_deg,
    )  # fmt: skip
    index = _station_index(counties, record, distance)
    rows = np.arange(len(counties))
    rain, source = _own_rain(case, record, index)
    near = case.settings.rain_neighbour_km
    order = np.argsort(distance, axis=1, kind="stable")
    for rank in range(order.shape[1] if len(counties) else 0):
        day, county = np.nonzero(np.isnan(rain))
        within = distance[county, order[county, rank]] <= near
        day, county = day[within], county[within]
        if not len(day):
            break
        lender = order[county, rank]
        value = record.values["rain_mm"][day, lender]
        good = np.isfinite(value)
        day, county, lender = day[good], county[good], lender[good]
        rain[day, county] = value[good]
        source[day, county] = SOURCE["neighbour"] | record.source["rain_mm"][day, lender]  # a forecast stays one
    findings = _missing_rain(case, record, rain, source)
    gap = np.isnan(rain) | np.isnan(record.values["t_max_c"] + record.values["t_min_c"])[:, index]
    stopped = np.where(gap.any(axis=0), gap.argmax(axis=0), len(record.dates))
    return CountyWeather(index, distance[rows, index], rain, source, stopped), findings


def _station_index(counties: pd.DataFrame, record: StationRecord, distance: np.ndarray) -> np.ndarray:
    """The station a county names, else the nearest."""
    import pandas as pd

    nearest = distance.argmin(axis=1) if distance.size else np.zeros(len(counties), dtype=int)
    if "station_id" not in counties:
        return nearest
    named = pd.Index(record.station_ids).get_indexer(pd.Index(counties["station_id"].fillna("").astype(str)))
    return np.where(named >= 0, named, nearest)


def _own_rain(case: Case, record: StationRecord, index: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The county's station's rain, with its own gauge's on top."""
    import pandas as pd

    rain = record.values["rain_mm"][:, index].copy()
    source = record.source["rain_mm"][:, index].copy()
    gauges = case.table("rain_gauges")
    if len(gauges) and len(record.dates):
        county = pd.Index(case.table("counties")["county_id"].astype(str)).get_indexer(
            pd.Index(gauges["county_id"].astype(str))
        )
        days = pd.to_datetime(gauges["date"]).to_numpy().astype("datetime64[D]")
        value = gauges["rain_mm"].to_numpy(float, na_value=np.nan)
        good = np.isfinite(value) & (county >= 0) & ~np.isnat(days)
        day = np.where(good, (days - record.dates[0]).astype(float), -1.0).astype(int)
        good &= (day >= 0) & (day < len(record.dates))
        rain[day[good], county[good]] = value[good]
        source[day[good], county[good]] = SOURCE["measured"]
    return rain, source


def _missing_rain(case: Case, record: StationRecord, rain: np.ndarray, source: np.ndarray) -> list[Finding]:
    """Findings for counties whose rain is still missing; fills in 0 only where that was asked for."""
    findings = []
    ids = case.table("counties")["county_id"].astype(str).to_numpy()
    missing = np.isnan(rain)
    as_zero = case.settings.missing_rain == "treat as 0"
    for county in np.flatnonzero(missing.any(axis=0)):
        days = np.flatnonzero(missing[:, county])
        findings.append(
            Finding(
                "rain-treated-as-zero" if as_zero else "rain-missing",
                "counties",
                int(county),
                "county_id",
                ids[county],
                f"county {ids[county]}",
                f"{len(days)} days without rain data, first {record.dates[days[0]]}, last {record.dates[days[-1]]}",
            )  # fmt: skip
        )
    if as_zero:
        rain[missing] = 0.0
        source[missing] = SOURCE["treated_as_zero"]
    return findings
