"""The registry of quantities and settings, and the only unit conversions.

``tables/variables.toml`` describes each quantity once: the template's headings, the checks, the headings of the
results, NetCDF attributes and figure labels all come from it. Inside the package everything is in the SI unit given
there; :func:`to_si` and :func:`from_si` are called only where people's files are read or written.
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike

Kind = Literal["value", "difference", "amount", "rate", "share", "label"]
System = Literal["si", "us"]


@dataclass(frozen=True)
class Unit:
    """A unit as people write it: SI value = number * scale + offset (offset not for differences)."""

    symbol: str
    dimension: str
    scale: float
    offset: float = 0.0
    also: tuple[str, ...] = ()


@dataclass(frozen=True)
class Quantity:
    """One row of the registry of quantities.

    `low` and `high` bound plausible values in the SI unit; a value outside is an error in an input.
    """

    name: str
    label: str
    note: str
    unit: str = ""
    us_unit: str = ""
    kind: Kind = "value"
    low: float | None = None
    high: float | None = None
    cf_name: str | None = None
    symbol: str = ""
    decimals: int = 1
    us_decimals: int | None = None

    def unit_in(self, system: System) -> str:
        """Symbol of the unit that people of a unit system read this quantity in."""
        return self.us_unit if system == "us" and self.us_unit else self.unit

    def decimals_in(self, system: System) -> int:
        """Digits after the decimal point that are worth printing."""
        return self.us_decimals if system == "us" and self.us_decimals is not None else self.decimals

    def heading(self, system: System) -> str:
        """Label with the unit in brackets, as printed over a column."""
        unit = self.unit_in(system)
        return f"{self.label} ({unit})" if unit else self.label


def _table(name: str) -> dict[str, Any]:
    return tomllib.loads(files("etflux.tables").joinpath(name).read_text(encoding="utf-8"))


@cache
def units() -> Mapping[str, Unit]:
    """Every unit that is understood, by each of its spellings."""
    found: dict[str, Unit] = {}
    for symbol, row in _table("units.toml").items():
        unit = Unit(symbol, row["dimension"], row["scale"], row.get("offset", 0.0), tuple(row.get("also", ())))
        for spelling in (symbol, *unit.also):
            found[spelling] = unit
    return found


@cache
def quantities() -> Mapping[str, Quantity]:
    """Every quantity of the registry, by name."""
    return {name: Quantity(name=name, **row) for name, row in _table("variables.toml").items()}


def quantity(name: str) -> Quantity:
    """Return one quantity of the registry; KeyError names the quantity that is unknown."""
    return quantities()[name]


def convert(values: ArrayLike, from_unit: str, to_unit: str, kind: Kind = "value") -> np.ndarray:
    """Convert numbers between two units of one dimension.

    Parameters
    ----------
    values : array_like
        Numbers in `from_unit`; NaN stays NaN.
    from_unit, to_unit : str
        Spellings that :func:`units` knows; ValueError if unknown or of different dimension.
    kind : str
        "difference" leaves the offset of temperature scales out: 2.6 degC of difference are 4.7 degF.

    Examples
    --------
    >>> convert(25.0, "°C", "°F").item()
    77.0
    >>> round(convert(2.6, "°C", "°F", kind="difference").item(), 2)
    4.68
    """
    known = units()
    for name in (from_unit, to_unit):
        if name not in known:
            raise ValueError(f"unit {name!r} is not known; known are {', '.join(sorted(known))}")
    source, target = known[from_unit], known[to_unit]
    if source.dimension != target.dimension:
        raise ValueError(f"{from_unit!r} is a unit of {source.dimension}, {to_unit!r} of {target.dimension}")
    numbers = np.asarray(values, dtype=float)
    if source is target:
        return numbers.copy()
    with_offset = kind != "difference"
    si = numbers * source.scale + (source.offset if with_offset else 0.0)
    return (si - (target.offset if with_offset else 0.0)) / target.scale


def to_si(values: ArrayLike, name: str, unit: str) -> np.ndarray:
    """Numbers of the quantity `name` given in `unit`, in its SI unit."""
    row = quantity(name)
    return convert(values, unit, row.unit, row.kind)


def from_si(values: ArrayLike, name: str, system: System) -> np.ndarray:
    """SI numbers of the quantity `name` in the unit that people of `system` read."""
    row = quantity(name)
    unit = row.unit_in(system)
    return np.array(values, dtype=float) if unit == row.unit else convert(values, row.unit, unit, row.kind)


@cache
def flag_bits(registry: str) -> Mapping[str, int]:
    """Bits of one registry of ``tables/flags.toml`` ("source", "provisional" or "air"), by name."""
    return {name: row["bit"] for name, row in _table("flags.toml")[registry].items()}


@cache
def flag_words(registry: str) -> Mapping[int, str]:
    """What each bit of a registry means, in words for people."""
    return {row["bit"]: row["words"] for row in _table("flags.toml")[registry].values()}


def words_of(bits: int, registry: str) -> list[str]:
    """Words of every bit that is set.

    Examples
    --------
    >>> words_of(3, "source")
    ['from a neighbour station', 'estimated by a published equation']
    """
    return [words for bit, words in flag_words(registry).items() if bit and int(bits) & bit]


@dataclass(frozen=True)
class Setting:
    """One row of the registry of settings: every choice of method that a user may change."""

    name: str
    type: Literal["float", "int", "bool", "choice", "text"]
    default: Any
    group: str
    sentence: str
    source: str
    label: str
    unit: str = ""
    us_unit: str = ""
    low: float | None = None
    high: float | None = None
    choices: tuple[str, ...] = ()


@cache
def settings_table() -> Mapping[str, Setting]:
    """Every setting, by name, in the order of the settings sheet."""
    rows = _table("settings.toml")
    return {name: Setting(name=name, **{**row, "choices": tuple(row.get("choices", ()))}) for name, row in rows.items()}
