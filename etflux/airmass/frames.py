"""The air's results as long tables, rows without any water left out."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from etflux.airmass.inputs import NOT_CROPS, AirResults

if TYPE_CHECKING:
    import pandas as pd

# Tags and the county's contribution at the other hours, and the hour; NaN for the hour of the highest dew point.
OTHER_HOURS = (
    ("g_kg_12", "contribution_12_c", 12.0), ("g_kg_18", "contribution_18_c", 18.0),
    ("g_kg_peak", "contribution_peak_c", np.nan),
)  # fmt: skip


def contribution(dates: np.ndarray, county_ids: np.ndarray, air: AirResults, hour: float) -> pd.DataFrame:
    """Contribution at the hour by county, day, cover and age, and the part of it from the county itself."""
    import pandas as pd

    g_kg, c = air.tags["contribution_g_kg"], air.tags["contribution_c"]
    home = air.tags.get("home_g_kg", g_kg)
    day, place, source, age = np.nonzero(np.nan_to_num(g_kg) > 0.0)
    return pd.DataFrame(
        {
            "date": dates[day],
            "county_id": county_ids[place],
            "hour": hour,
            "cover": np.array(air.sources, dtype=object)[source],
            "age_d": age,
            "contribution_c": c[day, place, source, age],
            "contribution_g_kg": g_kg[day, place, source, age],
            "home_g_kg": home[day, place, source, age],
        }
    )


def other_hours(dates: np.ndarray, county_ids: np.ndarray, air: AirResults) -> pd.DataFrame:
    """Contribution by cover at 12 h, 18 h and the hour of the highest dew point."""
    import pandas as pd

    pieces = []
    crops = np.array([source not in NOT_CROPS for source in air.sources])
    for name, total_c, hour in OTHER_HOURS:
        g_kg = air.tags[name].sum(axis=3)
        with np.errstate(invalid="ignore", divide="ignore"):
            c = g_kg / g_kg[:, :, crops].sum(axis=2)[:, :, None] * air.county[total_c][:, :, None]
        day, place, source = np.nonzero(np.nan_to_num(g_kg) > 0.0)
        at = air.county["peak_hour"][day, place] if np.isnan(hour) else np.full(len(day), hour)
        pieces.append(
            pd.DataFrame(
                {
                    "date": dates[day],
                    "county_id": county_ids[place],
                    "hour": at,
                    "hour_kind": "highest dew point" if np.isnan(hour) else "hour",
                    "cover": np.array(air.sources, dtype=object)[source],
                    "contribution_c": c[day, place, source],
                    "contribution_g_kg": g_kg[day, place, source],
                }
            )
        )
    return pd.concat(pieces, ignore_index=True)


def ranges(dates: np.ndarray, county_ids: np.ndarray, air: AirResults) -> pd.DataFrame:
    """Lowest and highest contribution by what was varied; rows in which nothing moved are kept."""
    import pandas as pd

    pieces = []
    for name, (low, high) in air.ranges.items():
        day, place = np.nonzero(np.isfinite(low) & np.isfinite(high))
        pieces.append(
            pd.DataFrame(
                {
                    "date": dates[day],
                    "county_id": county_ids[place],
                    "varied": name,
                    "contribution_low_c": low[day, place],
                    "contribution_high_c": high[day, place],
                }
            )
        )
    columns = ["date", "county_id", "varied", "contribution_low_c", "contribution_high_c"]
    return pd.concat(pieces, ignore_index=True) if pieces else pd.DataFrame(columns=columns)


def moistened_by(dates: np.ndarray, county_ids: np.ndarray, air: AirResults) -> pd.DataFrame:
    """Who moistens whom: crop water over a county by the county that it left; days without wind are left out."""
    import pandas as pd

    columns = ["date", "county_id", "from_county_id", "contribution_c", "contribution_g_kg"]
    if air.origins_g_kg is None:
        return pd.DataFrame(columns=columns)
    g_kg = air.origins_g_kg
    with np.errstate(invalid="ignore", divide="ignore"):
        c = g_kg / air.county["contribution_g_kg"][:, :, None] * air.county["contribution_c"][:, :, None]
    windy = np.isfinite(air.county["crossing_h"]).any(axis=1)
    day, place, origin = np.nonzero((np.nan_to_num(g_kg) > 1e-4) & windy[:, None, None])
    return pd.DataFrame(
        {
            "date": dates[day],
            "county_id": county_ids[place],
            "from_county_id": county_ids[origin],
            "contribution_c": c[day, place, origin],
            "contribution_g_kg": g_kg[day, place, origin],
        }
    )
