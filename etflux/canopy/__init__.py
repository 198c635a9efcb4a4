"""The crop through the season: stage, Kcb, height, roots and ground cover of every unit and day.

Arrays are (day, unit). What depends on the water that is left in the soil is not here but in ``soilwater``.

References
----------
.. [FAO56] Allen, Pereira, Raes, Smith (1998), FAO Irrigation and Drainage Paper 56, ch. 6, 7, 9, 11 and Annex 8.
"""

from etflux.canopy.plants import Canopy, canopy, in_season, rule_windows
from etflux.canopy.problems import check

__all__ = ["Canopy", "canopy", "check", "in_season", "rule_windows"]
