"""The package's own tables, and covers and soils of a case on top of them.

Columns of ``covers.csv``, one row per cover; a cover of one's own is a row of the same kind:

cover_id, name
    Id and name for people.
tag
    By which its water is known in the air: corn, soybean, grass, rest.
habit
    annual (planted, harvested), sod (stays; also trees), water, bare.
marks
    What its stages follow: heat units, day lengths (annual); green-up, all year (others).
cutting
    none; averaged (coefficients are means over cuttings or grazings); dated (cut dates are entered).
frost_kill, adjust_climate
    yes or no: killed by a frost from mid-season on; coefficients of at least 0.45 follow wind and humidity (eq. 70).
kcb_ini, kcb_mid, kcb_end, kcb_end_dry, kcb_dormant
    Basal coefficients at the start, at full cover, at maturity or at the season's end, dried in the field, outside the
    season.
height_max_m
    Greatest height. [m]
ground_cover_sod, dead_cover_share
    Share of the ground under live and dead sod all year, blank for eq. 76; share of its greatest cover that a ripening
    crop keeps standing until harvest.
root_min_m, root_max_rainfed_m, root_max_irrigated_m, depletion_fraction
    Root depths [m]; p at 5 mm/day.
emergence_d, len_ini_d, len_dev_d, len_mid_d, len_late_d, harvest_after_d
    Days to emergence, of the four stages, from maturity to harvest. [d] Green-up covers without the lengths of the
    middle and late stages stay full until the first freeze of autumn.
curve_number_class
    A row of ``curve_numbers.csv``.
source
    Of every group of values, with table and page.
"""

from __future__ import annotations

from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import pandas as pd

    from etflux.case import Case


@cache
def packaged(name: str) -> pd.DataFrame:
    """Return a table of the package ("covers", "soils", "curve_numbers", "wetted_fractions", "heat_units")."""
    import pandas as pd

    with files("etflux.tables").joinpath(f"{name}.csv").open(encoding="utf-8") as text:
        return pd.read_csv(text)


def complete(case: Case, name: str) -> pd.DataFrame:
    """Covers or soils of a case on top of the package's own, one row per id.

    A row of one's own replaces the package's row of the same id as a whole.
    """
    import pandas as pd

    own, key = case.table(name), name[:-1] + "_id"
    parts = [table for table in (packaged(name), own) if len(table)]
    rows = pd.concat(parts, ignore_index=True) if len(parts) > 1 else parts[0]
    return rows.drop_duplicates(key, keep="last").set_index(key)
