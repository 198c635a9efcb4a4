"""Hold a pyranometer against the clear sky; it speaks, and corrects nothing.

The clear-sky radiation is that with water vapour and turbidity. The simpler one from elevation alone condemns good
sensors in humid summers.

References
----------
.. [EWRI2005] ASCE-EWRI (2005), The ASCE Standardized Reference Evapotranspiration Equation, appendix D.
"""

from __future__ import annotations

import numpy as np

from etflux import humidity, solar
from etflux.findings import Finding
from etflux.weather.record import StationRecord

LEAST_DAYS = 60
WINDOW_DAYS = 20
HIGHEST = 3  # clearest days of each window
AGREEING = 0.04  # a window counts when its clearest days agree this well: then they were clear
HIGH_SUN = 0.6  # of the latitude's greatest clear-sky radiation: a low winter sun says little
OFF_SHARE = 0.07
DRIFT_SHARE = 0.05
# [EWRI2005] gives 1.0 for clean air and 0.5 for extremely turbid; farmland in summer lies between
TURBIDITY = 0.8


def clear_day_ratios(rs_mj_m2_d: np.ndarray, clear_mj_m2_d: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Ratio of measured to clear-sky radiation on the clearest days of each window of 20 days.

    Parameters
    ----------
    rs_mj_m2_d, clear_mj_m2_d : ndarray, shape (day,)
        Measured and clear-sky radiation; NaN days are left out. [MJ m-2 d-1]

    Returns
    -------
    middle, ratio : ndarray, shape (window,)
        Day index at the middle of each window with clear days, and the mean ratio of its three highest days.
    """
    ratio = np.where(clear_mj_m2_d >= HIGH_SUN * np.nanmax(clear_mj_m2_d), rs_mj_m2_d / clear_mj_m2_d, np.nan)
    middles, means = [], []
    for start in range(0, len(ratio) - WINDOW_DAYS + 1, WINDOW_DAYS):
        window = ratio[start : start + WINDOW_DAYS]
        window = np.sort(window[np.isfinite(window)])
        if len(window) >= WINDOW_DAYS // 2 and window[-1] - window[-HIGHEST] <= AGREEING:
            middles.append(start + 0.5 * (WINDOW_DAYS - 1))
            means.append(window[-HIGHEST:].mean())
    return np.asarray(middles), np.asarray(means)


def pyranometer_findings(record: StationRecord) -> list[Finding]:
    """Sensors that are off by more than 7 %, or drift by more than 5 % over the record."""
    day = solar.day_of_year(record.dates)[:, None]
    clear = solar.clear_sky_radiation_humid(
        record.latitude_deg,
        day,
        humidity.pressure_from_elevation(record.elevation_m),
        _vapour_pressure(record),
        TURBIDITY,
    )
    rs = np.where(record.forecast, np.nan, record.values["rs_mj_m2_d"])
    findings = []
    for station in range(record.shape[1]):
        if np.isfinite(rs[:, station] / clear[:, station]).sum() < LEAST_DAYS:
            continue
        middle, ratio = clear_day_ratios(rs[:, station], clear[:, station])
        if len(ratio) < LEAST_DAYS // WINDOW_DAYS:  # a line needs three windows
            continue
        level = float(np.median(ratio))
        drift, uncertainty = _drift(middle, ratio)
        station_id = record.station_ids[station]
        about = f"station {station_id}"
        if abs(level - 1.0) > OFF_SHARE:
            findings.append(
                Finding(
                    "pyranometer-off",
                    "weather",
                    None,
                    "rs_mj_m2_d",
                    None,
                    about,
                    f"clear days read {100 * (level - 1):+.0f} % against the clear sky",
                )  # fmt: skip
            )
        if abs(drift) - uncertainty > DRIFT_SHARE:
            findings.append(
                Finding(
                    "pyranometer-drift",
                    "weather",
                    None,
                    "rs_mj_m2_d",
                    None,
                    about,
                    f"clear days moved by {100 * drift:+.0f} % over the record",
                )  # fmt: skip
            )
    return findings


def _drift(middle: np.ndarray, ratio: np.ndarray) -> tuple[float, float]:
    """Change of the ratio over the record by a straight line through it (least squares), and its standard error."""
    x, y = middle - middle.mean(), ratio - ratio.mean()
    slope = float(x @ y / (x @ x))
    error = float(np.sqrt(((y - slope * x) ** 2).sum() / max(len(x) - 2, 1) / (x @ x)))
    span = float(middle[-1] - middle[0])
    return slope * span, error * span


def _vapour_pressure(record: StationRecord) -> np.ndarray:
    """Vapour pressure by the first form at hand; the clear sky needs it only roughly."""
    v = record.values
    forms = (
        v["vapour_pressure_kpa"],
        humidity.vapour_pressure_from_dew_point(v["dew_point_c"]),
        humidity.vapour_pressure_from_rh_max_min(v["t_max_c"], v["t_min_c"], v["rh_max_pct"], v["rh_min_pct"]),
        humidity.vapour_pressure_from_rh_max(v["t_min_c"], v["rh_max_pct"]),
        humidity.vapour_pressure_from_rh_mean(v["t_max_c"], v["t_min_c"], v["rh_mean_pct"]),
        humidity.vapour_pressure_from_dew_point(v["t_min_c"]),
    )
    found = forms[0]
    for candidate in forms[1:]:
        found = np.where(np.isnan(found), candidate, found)
    return found
