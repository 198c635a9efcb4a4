"""A station's record: arranged, checked, filled and labelled, and given to the counties."""

from etflux.weather.allocation import CountyWeather, to_counties
from etflux.weather.filling import fill
from etflux.weather.places import great_circle_km
from etflux.weather.quality import quality
from etflux.weather.record import Fill, StationRecord, arrange

__all__ = [
    "CountyWeather",
    "Fill",
    "StationRecord",
    "arrange",
    "fill",
    "great_circle_km",
    "quality",
    "to_counties",
]
