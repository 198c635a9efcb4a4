"""Crop evapotranspiration by county, and the moisture it adds to the boundary layer.

The public names are in ``__all__``; each is loaded when first used, so that ``import etflux`` stays quick.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOME = {
    "run_workbook": "etflux.job",
    "run_case": "etflux.run",
    "Results": "etflux.results",
    "check": "etflux.workbook",
    "write_template": "etflux.workbook",
    "EtfluxError": "etflux.findings",
    "ProblemsFound": "etflux.findings",
    "CannotRead": "etflux.findings",
    "CannotWrite": "etflux.findings",
    "Case": "etflux.case",
    "Settings": "etflux.case",
    "with_settings": "etflux.case",
    "saturation_vapour_pressure": "etflux.humidity",
    "dew_point": "etflux.humidity",
    "relative_humidity": "etflux.humidity",
    "specific_humidity": "etflux.humidity",
    "vapour_pressure_from_specific_humidity": "etflux.humidity",
    "latent_heat_of_vaporization": "etflux.humidity",
    "potential_temperature": "etflux.humidity",
    "virtual_temperature": "etflux.humidity",
    "condensation_level": "etflux.humidity",
    "extraterrestrial_radiation": "etflux.solar",
    "clear_sky_radiation": "etflux.solar",
    "daylight_hours": "etflux.solar",
    "solar_from_clock": "etflux.solar",
    "clock_from_solar": "etflux.solar",
    "net_radiation": "etflux.reference",
    "wind_at_2m": "etflux.reference",
    "penman_monteith": "etflux.reference",
    "eto_fao56": "etflux.reference",
    "et_asce": "etflux.reference",
    "et_hourly": "etflux.reference",
    "et_from_hours": "etflux.reference",
    "eto_hargreaves": "etflux.reference",
    "second_opinions": "etflux.reference",
    "latent_flux": "etflux.counties",
}

__all__ = ["__version__", *_HOME]


def __getattr__(name: str) -> Any:
    if name in _HOME:
        return getattr(import_module(_HOME[name]), name)
    raise AttributeError(f"module 'etflux' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
