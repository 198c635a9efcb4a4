"""Stands and the rest of each county as units of the water balance, with everything they need resolved.

A unit is a stand, or a third of one (planting spread), or a part of a county's rest. Rows are sorted by county. From
here on the science takes plain arrays, one value per unit.
"""

from etflux.stands.problems import check
from etflux.stands.tables import complete, packaged
from etflux.stands.texture import class_available_water, water_retention
from etflux.stands.units import SPREAD, expand

__all__ = [
    "SPREAD", "check", "class_available_water", "complete", "expand", "packaged", "water_retention",
]  # fmt: skip
