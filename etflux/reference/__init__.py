"""Net radiation and reference evapotranspiration, daily and hourly, and second opinions by other methods.

Shapes broadcast; daily arrays are (day, station). NaN where an input is NaN.

- ``radiation``: wind to 2 m, net radiation, soil heat flux by the month
- ``daily``: FAO-56 and ASCE-EWRI from daily weather, Hargreaves
- ``hourly``: the same from hourly weather
- ``opinions``: other published methods on the same record
"""

from etflux.reference.daily import SURFACES, Surface, et_asce, eto_fao56, eto_hargreaves, penman_monteith
from etflux.reference.hourly import et_from_hours, et_hourly, held_ratio
from etflux.reference.opinions import second_opinions
from etflux.reference.radiation import (
    ALBEDO,
    LEAST_WIND_M_S,
    cloudiness_factor,
    net_longwave,
    net_longwave_hourly,
    net_radiation,
    net_shortwave,
    soil_heat_flux_month,
    soil_heat_flux_month_so_far,
    wind_at_2m,
)

__all__ = [
    "ALBEDO",
    "LEAST_WIND_M_S",
    "SURFACES",
    "Surface",
    "cloudiness_factor",
    "et_asce",
    "et_from_hours",
    "et_hourly",
    "eto_fao56",
    "eto_hargreaves",
    "held_ratio",
    "net_longwave",
    "net_longwave_hourly",
    "net_radiation",
    "net_shortwave",
    "penman_monteith",
    "second_opinions",
    "soil_heat_flux_month",
    "soil_heat_flux_month_so_far",
    "wind_at_2m",
]
