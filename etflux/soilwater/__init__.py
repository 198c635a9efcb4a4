"""The soil water balance: evaporation, transpiration, stress and what is left in the soil, day by day.

``equations`` has one published relation per function, ``records`` what a stand is and carries, ``step`` a day in the
order of FAO-56, ``season`` the days.
"""

from etflux.soilwater.records import Fluxes, Forcing, Soil, State
from etflux.soilwater.season import (
    DAILY,
    closure,
    daily_closure,
    roots_to_check,
    season,
    soil_from_units,
    soil_problems,
    start_state,
)
from etflux.soilwater.step import day_step

__all__ = [
    "DAILY", "Fluxes", "Forcing", "Soil", "State", "closure", "daily_closure", "day_step", "roots_to_check", "season",
    "soil_from_units", "soil_problems", "start_state",
]  # fmt: skip
