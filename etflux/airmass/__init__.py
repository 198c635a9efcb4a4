"""The air above all counties, day after day: morning, heat, mixing, wind, and the water each cover put into it."""

from etflux.airmass import frames
from etflux.airmass.inputs import AGES, AirInputs, AirResults, Variation, given_background, given_depths
from etflux.airmass.ledger import unaccounted, unaccounted_by_day
from etflux.airmass.ranges import monte_carlo
from etflux.airmass.season import season
from etflux.airmass.worlds import WORLDS

__all__ = [
    "AGES", "WORLDS", "AirInputs", "AirResults", "Variation", "frames", "given_background",
    "given_depths", "monte_carlo", "season", "unaccounted", "unaccounted_by_day",
]  # fmt: skip
