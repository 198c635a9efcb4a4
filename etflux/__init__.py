"""Crop evapotranspiration by county, and the moisture it adds to the boundary layer.

The public names are in ``__all__``; each is loaded when first used, so that ``import etflux`` stays quick.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOME = {
    "Case": "etflux.case",
    "Settings": "etflux.case",
    "with_settings": "etflux.case",
}

__all__ = ["__version__", *_HOME]


def __getattr__(name: str) -> Any:
    if name in _HOME:
        return getattr(import_module(_HOME[name]), name)
    raise AttributeError(f"module 'etflux' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
