"""Convective energy of the afternoon air, with the crops' water and without it; computed by MetPy, which is an extra.

Two parcels of every column are lifted: the mixed air from the ground, and the air of the greatest equivalent potential
temperature within 300 hPa of it. The same air with the crops' water taken out, at the same potential temperature, is
lifted as well: the difference is what the water alone makes, not what the day would have been without crops.

The layers end near 5.6 km; above them the air is assumed. On an invented day of 4,200 J/kg, 0.5 K/km more or less up
there made 12 % of CAPE, 6 % of what the crops' water adds to it, and nothing of CIN.

References
----------
.. [1] May et al. (2022), MetPy: a meteorological Python library for data analysis and visualization, Bull. Amer.
   Meteor. Soc. 103, E2273-E2284: parcel paths, CAPE and CIN with virtual temperatures.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from etflux import column, humidity
from etflux.column import EDGES, LAYER_MASS
from etflux.findings import NotInstalled
from etflux.humidity import FREEZING_K, GAS_CONSTANT_DRY, GRAVITY, KAPPA

if TYPE_CHECKING:
    from etflux.airmass import AirInputs, AirResults
    from etflux.case import Settings

HPA_PER_KPA = 10.0
SEARCH_HPA = 300.0  # the most unstable parcel is looked for this far up
BEYOND_BOLTON_K = 0.5  # his formula varies by as much within well-mixed air
DRIEST_KG_KG = 1e-5
# Above the layers: the lapse rate and the temperature of the tropopause of ISO 2533:1975 (from memory).
LAPSE_K_M, TROPOPAUSE_K = 0.0065, 216.65
TOP_HPA, UPPER_LEVELS = 100.0, 18


class Energy(NamedTuple):
    """CAPE and CIN of the mixed air and of the most unstable air, (column,). [J kg-1]

    CIN is the energy that lifting costs, 0 or more; NaN where the parcel never becomes free (CAPE is 0 there).
    """

    cape_mixed_j_kg: np.ndarray
    cin_mixed_j_kg: np.ndarray
    cape_most_j_kg: np.ndarray
    cin_most_j_kg: np.ndarray


def require() -> Any:
    """MetPy's calculations.

    Raises
    ------
    NotInstalled
        With the command that installs it.
    """
    try:
        import metpy.calc
    except ImportError as error:
        raise NotInstalled('CAPE needs MetPy, which is not installed: pip install "etflux[cape]"') from error
    return metpy.calc


def afternoon(
    theta_k: ArrayLike, q_kg_kg: ArrayLike, mixed_kg_m2: ArrayLike, theta_mixed_k: ArrayLike, q_mixed: ArrayLike,
) -> tuple[np.ndarray, np.ndarray]:  # fmt: skip
    """Potential temperature and humidity by layer after the day's mixing.

    Parameters
    ----------
    theta_k, q_kg_kg : array_like, shape (column, layer)
        Of the morning, on the layers of ``column.LAYER_MASS``. [K], [kg kg-1]
    mixed_kg_m2 : array_like, shape (column,)
        Mass of the mixed air.
    theta_mixed_k, q_mixed : array_like, shape (column,)
        Of the mixed air.

    Returns
    -------
    theta_k, q_kg_kg : ndarray, shape (column, layer)
        The layer that holds the top is mixed in its lower part only; nothing above is potentially colder than the
        mixed air.

    Examples
    --------
    >>> theta, q = afternoon(np.full((1, 53), 300.0), np.full((1, 53), 0.01), [90.0], [302.0], [0.012])
    >>> theta[0, :3].tolist(), q[0, :3].round(3).tolist()
    ([302.0, 302.0, 302.0], [0.012, 0.011, 0.01])
    """
    theta, q = np.asarray(theta_k, float), np.asarray(q_kg_kg, float)
    share = column.mixing_weights(np.asarray(mixed_kg_m2, float)) / LAYER_MASS
    warm, moist = np.asarray(theta_mixed_k, float)[:, None], np.asarray(q_mixed, float)[:, None]
    return np.maximum(theta + share * (warm - theta), warm), q + share * (moist - q)


def levels(
    pressure_kpa: ArrayLike, theta_k: ArrayLike, q_kg_kg: ArrayLike, theta_mixed_k: ArrayLike, q_mixed: ArrayLike
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Sounding of every column: the ground, the middles of the layers, and air above them up to 100 hPa.

    Above the layers the air cools by 6.5 K/km down to 216.65 K and keeps its dew point depression.

    Parameters
    ----------
    pressure_kpa : array_like, shape (column,)
        At the ground, to which potential temperature refers.
    theta_k, q_kg_kg : array_like, shape (column, layer)
    theta_mixed_k, q_mixed : array_like, shape (column,)
        At the ground.

    Returns
    -------
    pressure_hpa, temperature_c, dew_point_c : ndarray, shape (column, level)
    """
    ground = np.asarray(pressure_kpa, float)[:, None]
    middle = ground - GRAVITY * 0.5 * (EDGES[1:] + EDGES[:-1]) / 1000.0
    p = np.concatenate([ground, middle], axis=1)
    theta = np.concatenate([np.asarray(theta_mixed_k, float)[:, None], np.asarray(theta_k, float)], axis=1)
    q = np.concatenate([np.asarray(q_mixed, float)[:, None], np.asarray(q_kg_kg, float)], axis=1)
    t = theta * (p / ground) ** KAPPA - FREEZING_K
    dew_point = humidity.dew_point_from_specific_humidity(np.maximum(q, DRIEST_KG_KG), p)
    dew_point = np.minimum(dew_point, t)
    upper, t_upper = _above(p[:, -1:], t[:, -1:])
    depression = t[:, -1:] - dew_point[:, -1:]
    return (
        np.concatenate([HPA_PER_KPA * p, upper], axis=1),
        np.concatenate([t, t_upper], axis=1),
        np.concatenate([dew_point, t_upper - depression], axis=1),
    )


def _above(top_kpa: np.ndarray, t_top_c: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Pressures and temperatures above the layers: as many steps for every column, equal in the logarithm."""
    top = HPA_PER_KPA * top_kpa
    p = top * (TOP_HPA / top) ** (np.arange(1, UPPER_LEVELS + 1) / UPPER_LEVELS)
    kelvin = (t_top_c + FREEZING_K) * (p / top) ** (GAS_CONSTANT_DRY * LAPSE_K_M / GRAVITY)
    return p, np.maximum(kelvin, np.minimum(TROPOPAUSE_K, t_top_c + FREEZING_K)) - FREEZING_K


def parcels(pressure_hpa: ArrayLike, temperature_c: ArrayLike, dew_point_c: ArrayLike) -> Energy:
    """CAPE and CIN of the parcel from the lowest level and of the most unstable one.

    Parameters
    ----------
    pressure_hpa, temperature_c, dew_point_c : array_like, shape (column, level)
        From the ground up.

    Returns
    -------
    Energy
        NaN where a column has a missing value. The most unstable air is whichever of the two parcels has more energy.

    Raises
    ------
    NotInstalled
        Without MetPy.
    """
    calc = require()
    from metpy.units import units

    p, t, dew_point = (np.asarray(values, float) for values in (pressure_hpa, temperature_c, dew_point_c))
    whole = np.isfinite(p + t + dew_point).all(axis=1)
    found = np.full((len(p), 4), np.nan)
    for row in np.flatnonzero(whole):  # MetPy lifts one parcel at a time
        pressure, warmth, dew = p[row] * units.hPa, t[row] * units.degC, dew_point[row] * units.degC
        mixed = most = _lifted(calc, pressure, warmth, dew)
        near = p[row] >= p[row, 0] - SEARCH_HPA
        theta_e = calc.equivalent_potential_temperature(pressure[near], warmth[near], dew[near]).m_as("kelvin")
        start = int(theta_e.argmax())
        if theta_e[start] > theta_e[0] + BEYOND_BOLTON_K:
            elevated = _lifted(calc, pressure[start:], warmth[start:], dew[start:])
            most = max(mixed, elevated, key=lambda energy: energy[0])
        found[row] = *mixed, *most
    return Energy(*found.T)


def _lifted(calc: Any, pressure: Any, temperature: Any, dew_point: Any) -> tuple[float, float]:
    """CAPE and CIN of the parcel from the first level; its path has a level at condensation."""
    with warnings.catch_warnings():
        # Condensation at the first level or above the last one: MetPy then has no level to add, and says so.
        warnings.filterwarnings("ignore", "Interpolation point out of data bounds")
        p, t, td, path = calc.parcel_profile_with_lcl(pressure, temperature, dew_point)
    cape, cin = (float(value.m_as("J/kg")) for value in calc.cape_cin(p, t, td, path))
    return (cape, abs(cin)) if cape > 0.0 else (0.0, np.nan)


def of_columns(
    pressure_kpa: ArrayLike, theta_k: ArrayLike, q_kg_kg: ArrayLike, q_without: ArrayLike, mixed_kg_m2: ArrayLike,
    theta_mixed_k: ArrayLike, q_mixed: ArrayLike, q_mixed_without: ArrayLike,
) -> tuple[Energy, Energy]:  # fmt: skip
    """Convective energy of columns of air with the crops' water and without it.

    Parameters
    ----------
    pressure_kpa : array_like, shape (column,)
        At the ground.
    theta_k, q_kg_kg, q_without : array_like, shape (column, layer)
        Of the morning; potential temperature refers to the pressure at the ground. [K], [kg kg-1]
    mixed_kg_m2, theta_mixed_k, q_mixed, q_mixed_without : array_like, shape (column,)
        Of the mixed air at the hour.

    Returns
    -------
    with_crops, without_crops : Energy
    """
    both = []
    for morning, mixed in ((q_kg_kg, q_mixed), (q_without, q_mixed_without)):
        theta, q = afternoon(theta_k, morning, mixed_kg_m2, theta_mixed_k, mixed)
        both.append(parcels(*levels(pressure_kpa, theta, q, theta_mixed_k, mixed)))
    return both[0], both[1]


def with_energy(
    inputs: AirInputs, air: AirResults, settings: Settings, progress: Callable[[float], None] | None = None
) -> AirResults:
    """Results of the air with the convective energy of the days that the settings ask for.

    Parameters
    ----------
    inputs : AirInputs
    air : AirResults
        With morning profiles; days without them stay blank.
    settings : Settings
        `cape_days` up to `brief_date` (or the last day), at the hour `contribution_hour`.
    progress : callable, optional
        Called with the share of the days that are done.

    Returns
    -------
    AirResults
        `county` has eight more quantities, (day, county). Where a mixing depth is entered it is that of heat too.
    """
    require()
    dates = inputs.dates.astype("datetime64[D]")
    names = [f"{name}{end}" for end in ("_j_kg", "_without_crops_j_kg") for name in _stems()]
    found = {name: np.full((len(dates), len(inputs.county_ids)), np.nan) for name in names}
    if air.profiles is not None:
        brief = np.datetime64(settings.brief_date, "D") if settings.brief_date else dates[-1]
        wanted = (dates <= brief) & (dates > brief - np.timedelta64(int(settings.cape_days), "D"))
        wanted[: len(dates) - len(air.profiles)] = False
        for count, day in enumerate(np.flatnonzero(wanted)):
            if progress:
                progress(count / wanted.sum())
            for name, values in zip(names, _of_day(inputs, air, int(day)), strict=True):
                found[name][day] = values
    return replace(air, county=air.county | found)


def _stems() -> list[str]:
    return [name.removesuffix("_j_kg") for name in Energy._fields]


def _of_day(inputs: AirInputs, air: AirResults, day: int) -> tuple[np.ndarray, ...]:
    """The eight quantities of one day, each (county,)."""
    assert air.profiles is not None
    _, theta_c, q, q_without = air.profiles[day - len(inputs.dates)].astype(float)
    theta, q, q_without = theta_c + FREEZING_K, q / 1000.0, q_without / 1000.0
    county = {name: air.county[name][day] for name in ("mixing_depth_m", "theta_mixed_c", "humidity_mixed_g_kg")}
    crops = air.county["contribution_g_kg"][day]
    height = column.heights(theta, q, inputs.pressure_kpa)
    mass = column.across(county["mixing_depth_m"], height, np.broadcast_to(EDGES, height.shape))
    mixed = county["humidity_mixed_g_kg"]
    with_crops, without = of_columns(
        inputs.pressure_kpa, theta, q, q_without, mass, county["theta_mixed_c"] + FREEZING_K, mixed / 1000.0,
        np.maximum(mixed - crops, 0.0) / 1000.0,
    )  # fmt: skip
    return (*with_crops, *without)


def summary(values: Mapping[str, ArrayLike]) -> dict[str, float]:
    """Medians over the counties of one day by the quantities' names; NaN where no county has a value."""
    found = {}
    for name in (f"{stem}{end}" for stem in _stems() for end in ("_j_kg", "_without_crops_j_kg")):
        numbers = np.asarray(values[name], float)
        there = numbers[np.isfinite(numbers)]
        found[name] = float(np.median(there)) if len(there) else float("nan")
    return found


def sentences(numbers: Mapping[str, float]) -> tuple[str, str]:
    """Two plain sentences on the day's convective energy.

    Parameters
    ----------
    numbers : mapping of str to float
        Of :func:`summary`, or of one county.

    Returns
    -------
    tuple of str
        Both blank where nothing was computed.

    Examples
    --------
    >>> for text in sentences({
    ...     "cape_mixed_j_kg": 1846.0, "cape_mixed_without_crops_j_kg": 1203.0, "cin_mixed_j_kg": 31.0,
    ...     "cin_mixed_without_crops_j_kg": 58.0, "cape_most_j_kg": 1846.0, "cape_most_without_crops_j_kg": 1410.0}):
    ...     print(text)
    Lifted from the ground, the mixed air would have 1,850 J/kg of energy for storms (CAPE), and 1,200 J/kg at the
    same temperature without the crops' water; it would first have to be raised against 31 J/kg, without that water
    against 58 J/kg.
    The most unstable air would have 1,850 J/kg, without the crops' water 1,410 J/kg: what rising air could set free,
    not a forecast that it will rise.
    """
    cape, bare = numbers["cape_mixed_j_kg"], numbers["cape_mixed_without_crops_j_kg"]
    most, most_bare = numbers["cape_most_j_kg"], numbers["cape_most_without_crops_j_kg"]
    if not np.isfinite(cape + bare + most + most_bare):
        return "", ""
    cin, cin_bare = numbers["cin_mixed_j_kg"], numbers["cin_mixed_without_crops_j_kg"]
    against = ""
    if np.isfinite(cin) and np.isfinite(cin_bare):
        against = f"; it would first have to be raised against {cin:,.0f} J/kg, without that water against "
        against += f"{cin_bare:,.0f} J/kg"
    first = f"Lifted from the ground, the mixed air would have {_tens(cape)} J/kg of energy for storms (CAPE), and "
    first += f"{_tens(bare)} J/kg at the same temperature without the crops' water{against}."
    second = f"The most unstable air would have {_tens(most)} J/kg, without the crops' water {_tens(most_bare)} J/kg: "
    return first, second + "what rising air could set free, not a forecast that it will rise."


def _tens(value: float) -> str:
    return f"{round(value, -1):,.0f}"
