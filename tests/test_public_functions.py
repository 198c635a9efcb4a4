"""One suite for every public science function: shapes, missing values, containers, inputs left alone.

To add a function, add one row to ``ROWS``: the function, then a plausible number for each argument that takes an
array. Options of a row:

- ``fixed``: arguments that are no arrays (a surface, a method);
- ``passes``: arguments whose missing value need not make the result missing, each with the reason.

``test_nothing_is_left_out`` fails when a function of the modules it lists has neither a row nor a reason to have none.
"""

import inspect
from dataclasses import dataclass, field
from types import ModuleType
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import etflux
from etflux import column, counties, crops, humidity, marks, reference, solar
from etflux.soilwater import equations
from etflux.stands import texture


@dataclass(frozen=True)
class Row:
    function: Any
    arguments: dict[str, float]
    fixed: dict[str, Any] = field(default_factory=dict)
    passes: dict[str, str] = field(default_factory=dict)

    def __str__(self) -> str:
        fixed = "-".join(str(value) for value in self.fixed.values())
        return f"{self.function.__module__.removeprefix('etflux.')}.{self.function.__name__}" + (
            f"-{fixed}" if fixed else ""
        )

    def call(self, arguments: dict[str, Any]) -> list[np.ndarray]:
        found = self.function(**arguments, **self.fixed)
        return [np.asarray(part) for part in (found if isinstance(found, tuple) else (found,))]


def row(
    function: Any, *, fixed: dict[str, Any] | None = None, passes: dict[str, str] | None = None, **arguments: float
) -> Row:
    return Row(function, arguments, fixed or {}, passes or {})


T, E, P, Q = {"t_c": 24.0}, {"vapour_pressure_kpa": 1.6}, {"pressure_kpa": 98.0}, {"q_kg_kg": 0.011}
RANGE = {"t_max_c": 29.0, "t_min_c": 16.0}
SUN = {"latitude_deg": 42.0, "day": 190.0}
DAILY = RANGE | E | {"rs_mj_m2_d": 22.0, "u2_m_s": 2.5, "elevation_m": 250.0} | SUN

ROWS = [
    row(humidity.saturation_vapour_pressure, **T),
    row(humidity.slope_of_saturation, **T),
    row(humidity.pressure_from_elevation, elevation_m=250.0),
    row(humidity.psychrometric_constant, **P),
    row(humidity.vapour_pressure_from_dew_point, dew_point_c=15.0),
    row(humidity.vapour_pressure_from_psychrometer, t_dry_c=25.0, t_wet_c=19.0, **P),
    row(humidity.vapour_pressure_from_rh_max_min, **RANGE, rh_max_pct=95.0, rh_min_pct=45.0),
    row(humidity.vapour_pressure_from_rh_max, t_min_c=16.0, rh_max_pct=95.0),
    row(humidity.vapour_pressure_from_rh_mean, **RANGE, rh_mean_pct=70.0),
    row(humidity.vapour_pressure_from_deficit, **RANGE, vpd_kpa=1.0),
    row(humidity.mean_saturation_vapour_pressure, **RANGE),
    row(humidity.dew_point, **E),
    row(humidity.relative_humidity, **E, **T),
    row(humidity.latent_heat_of_vaporization, **T),
    row(humidity.mixing_ratio, **E, **P),
    row(humidity.specific_humidity, **E, **P),
    row(humidity.vapour_pressure_from_specific_humidity, **Q, **P),
    row(humidity.dew_point_from_specific_humidity, **Q, **P),
    row(humidity.potential_temperature, **T, **P, reference_kpa=100.0),
    row(humidity.virtual_temperature, **T, **Q),
    row(humidity.condensation_temperature, **T, dew_point_c=15.0),
    row(humidity.condensation_pressure, **T, dew_point_c=15.0, **P),
    row(humidity.condensation_level, **T, dew_point_c=15.0, **P),
    row(solar.inverse_relative_distance, day=190.0),
    row(solar.declination, day=190.0),
    row(solar.sunset_hour_angle, **SUN),
    row(solar.daylight_hours, **SUN),
    row(solar.sunrise_sunset, **SUN),
    row(solar.extraterrestrial_radiation, **SUN),
    row(solar.seasonal_correction, day=190.0),
    row(solar.solar_from_clock, clock_hour=14.5, day=190.0, longitude_deg=-93.0, utc_offset_h=-6.0),
    row(solar.clock_from_solar, solar_hour=14.5, day=190.0, longitude_deg=-93.0, utc_offset_h=-6.0),
    row(solar.sun_elevation, **SUN, solar_hour=9.5),
    row(solar.mean_sun_elevation, **SUN),
    row(solar.extraterrestrial_radiation_hourly, **SUN, solar_hour=9.5, length_h=1.0),
    row(solar.day_share, **SUN, from_hour=9.0, to_hour=10.0),
    row(solar.clear_sky_radiation, ra_mj_m2_d=40.0, elevation_m=250.0),
    row(solar.clear_sky_index, elevation_rad=0.9, **P, **E, turbidity=0.9),
    row(solar.clear_sky_index, elevation_rad=0.9, **P, **E, fixed={"form": "fao56"}),
    row(solar.clear_sky_radiation_humid, **SUN, **P, **E, turbidity=0.9),
    row(solar.radiation_from_sunshine, ra_mj_m2_d=40.0, sunshine_h=9.0, daylight_h=15.0),
    row(solar.radiation_from_temperature_range, ra_mj_m2_d=40.0, **RANGE, coefficient=0.16, clear_sky_mj_m2_d=31.0),
    row(reference.wind_at_2m, wind_m_s=3.0, height_m=10.0),
    row(reference.net_shortwave, rs=22.0, albedo=0.23),
    row(reference.cloudiness_factor, rs_over_rso=0.7),
    row(reference.net_longwave, **RANGE, **E, rs_over_rso=0.7),
    row(reference.net_longwave_hourly, **T, **E, rs_over_rso=0.7),
    row(reference.net_radiation, rs_mj_m2_d=22.0, rso_mj_m2_d=31.0, **RANGE, **E, albedo=0.23),
    row(reference.soil_heat_flux_month, t_before_c=14.0, t_after_c=19.0),
    row(reference.soil_heat_flux_month_so_far, t_before_c=14.0, t_month_c=17.0),
    *(
        row(
            reference.penman_monteith,
            **RANGE,
            **E,
            rn_mj_m2_d=14.0,
            u2_m_s=2.5,
            **P,
            g_mj_m2_d=0.2,
            fixed={"surface": surface},
        )
        for surface in ("short", "tall")
    ),
    row(reference.eto_fao56, **DAILY),
    *(row(reference.et_asce, **DAILY, fixed={"surface": surface}) for surface in ("short", "tall")),
    row(reference.eto_hargreaves, **RANGE, ra_mj_m2_d=40.0),
    *(
        row(reference.et_hourly, **T, **E, rn_mj_m2_h=1.2, u2_m_s=2.5, **P, fixed={"method": method})
        for method in ("fao56", "asce_short", "asce_tall")
    ),
    row(reference.et_from_hours, **T, **E, rs_mj_m2_h=1.9, u2_m_s=2.5, elevation_m=250.0, **SUN, solar_hour=12.5),
    row(counties.latent_flux, et_mm=5.0, t_mean_c=22.0, hours=15.0),
    row(counties.water_volume, depth_mm=5.0, area_km2=1500.0),
    row(crops.climate_adjustment, u2_m_s=2.5, rh_min_pct=50.0, height_m=2.0),
    row(crops.kc_upper_limit, kcb=0.9, u2_m_s=2.5, rh_min_pct=50.0, height_m=2.0),
    row(crops.ground_cover_from_kcb, kcb=0.9, kc_max=1.2, height_m=1.5),
    row(crops.growth_share, kcb=0.6, kcb_ini=0.15, kcb_mid=1.1),
    row(crops.kcb_from_leaf_area, kcb_full=1.1, leaf_area=2.0),
    row(crops.kcb_from_canopy_cover, kcb_full=1.1, cover_share=0.4, height_m=0.5),
    row(marks.heat_units, t_max_c=29.0, t_min_c=16.0),
    row(equations.snow_balance, precipitation_mm=4.0, t_mean_c=1.5, snow_mm=10.0, melt_factor_mm=4.0),
    row(equations.curve_number_dry, curve_number=75.0),
    row(equations.curve_number_wet, curve_number=75.0),
    row(equations.wetness_limits, rew_mm=9.0, tew_mm=24.0),
    row(equations.runoff, water_mm=40.0, curve_number=75.0),
    row(equations.total_evaporable_water, theta_fc=0.32, theta_wp=0.15, evaporation_depth_m=0.1),
    row(equations.evaporation_reduction, de_mm=15.0, tew_mm=24.0, rew_mm=9.0),
    row(equations.bare_share, residue_share=0.3),
    row(equations.exposed_wetted_fraction, ground_cover=0.4, fw=0.8, drip_shade=0.2, bare_share=0.9),
    row(equations.evaporation_coefficient, kr=0.5, kcb=0.6, kc_max=1.2, few=0.5, bare_share=0.9),
    row(
        equations.surface_uptake,
        transpiration_mm=5.0,
        de_mm=10.0,
        tew_mm=20.0,
        depletion_mm=60.0,
        taw_mm=120.0,
        evaporation_depth_m=0.1,
        root_depth_m=0.6,
        layer_available_mm=15.0,
    ),
    row(texture.water_retention, sand_pct=20.0, clay_pct=15.0, organic_matter_pct=2.5),
    row(equations.total_available_water, theta_fc=0.32, theta_wp=0.15, root_depth_m=1.0),
    row(equations.depletion_fraction, p_table=0.55, etc_mm=6.0),
    row(equations.stress_coefficient, depletion_mm=90.0, taw_mm=150.0, raw_mm=80.0),
    row(column.saturation_humidity, theta_k=300.0, **P),
    row(column.contribution, **Q, tagged_kg_kg=0.002, **P),
]

# Functions without a row, and why
WITHOUT = {
    "day_of_year": "takes dates",
    "held_ratio": "takes whole hours with flags; tested with the hourly examples",
    "second_opinions": "takes whole records; tested with the witness library",
    "county_sums": "sums over units",
}

COMPLETE: list[ModuleType] = [humidity, solar, reference, counties]

every_row = pytest.mark.parametrize("case", ROWS, ids=str)


def varied(case: Row, shape: tuple[int, ...]) -> dict[str, np.ndarray]:
    """The arguments spread by up to 1 % over an array."""
    steps = np.linspace(1.0, 1.01, int(np.prod(shape))).reshape(shape)
    return {name: value * steps for name, value in case.arguments.items()}


def assert_equal(found: list[np.ndarray], expected: list[np.ndarray]) -> None:
    assert len(found) == len(expected)
    for one, other in zip(found, expected, strict=True):
        np.testing.assert_allclose(one, other, rtol=1e-12, atol=1e-14)


@every_row
def test_numbers_give_numbers(case):
    for part in case.call(case.arguments):
        assert part.shape == ()
        assert np.isfinite(part)


@every_row
@pytest.mark.parametrize("shape", [(5,), (3, 2), (2, 1, 3)], ids=str)
def test_arrays_give_what_their_numbers_give(case, shape):
    arguments = varied(case, shape)
    found = case.call(arguments)
    assert all(part.shape == shape for part in found)
    for index in np.ndindex(*shape):
        one = case.call({name: values[index] for name, values in arguments.items()})
        assert_equal([part[index] for part in found], one)


@every_row
def test_shapes_broadcast(case):
    names = list(case.arguments)
    down = case.arguments[names[0]] * np.linspace(1.0, 1.01, 3)[:, None]
    across = {name: case.arguments[name] * np.linspace(1.0, 1.01, 2) for name in names[1:]}
    expected = {name: np.broadcast_to(values, (3, 2)) for name, values in {names[0]: down, **across}.items()}
    if across:
        found = case.call({names[0]: down, **across})
        # a part of a tuple may rest on some of the arguments alone
        assert_equal([np.broadcast_to(part, (3, 2)) for part in found], case.call(expected))


@every_row
def test_a_missing_value_stays_missing_where_it_is(case):
    whole = case.call(varied(case, (3,)))
    for name in case.arguments.keys() - case.passes.keys():
        arguments = varied(case, (3,))
        arguments[name][1] = np.nan
        found = case.call(arguments)
        assert any(np.isnan(part[1]) for part in found), f"{name} is missing, the result is not"
        for part, before in zip(found, whole, strict=True):
            np.testing.assert_allclose(part[[0, 2]], before[[0, 2]], rtol=1e-12, atol=1e-14, err_msg=name)


@every_row
def test_pandas_xarray_and_lists_are_taken(case):
    arguments = varied(case, (3,))
    expected = case.call(arguments)
    assert_equal(case.call({name: pd.Series(values) for name, values in arguments.items()}), expected)
    assert_equal(case.call({name: values.tolist() for name, values in arguments.items()}), expected)
    table = varied(case, (3, 2))
    labelled = {name: xr.DataArray(values, dims=("day", "station")) for name, values in table.items()}
    assert_equal(case.call(labelled), case.call(table))


@every_row
def test_inputs_are_left_alone(case):
    arguments = varied(case, (3, 2))
    copies = {name: values.copy() for name, values in arguments.items()}
    for values in arguments.values():
        values.flags.writeable = False
    case.call(arguments)
    for name, values in arguments.items():
        np.testing.assert_array_equal(values, copies[name])


@every_row
def test_documented(case):
    text = inspect.getdoc(case.function)
    assert text
    assert "[" in text, "no unit or source"


def test_nothing_is_left_out():
    with_a_row = {case.function for case in ROWS}
    missing = []
    for module in COMPLETE:
        names = getattr(module, "__all__", None) or [name for name in vars(module) if not name.startswith("_")]
        for name in names:
            found = getattr(module, name)
            if inspect.isfunction(found) and found.__module__.startswith(module.__name__) and name not in WITHOUT:
                missing += [f"{module.__name__}.{name}"] if found not in with_a_row else []
    assert not missing


def test_public_science_functions_have_a_row():
    science = {"etflux.humidity", "etflux.solar", "etflux.reference", "etflux.counties", "etflux.crops"}
    public = [getattr(etflux, name) for name in etflux.__all__ if etflux._HOME.get(name) in science]
    assert (
        not {found.__name__ for found in public if inspect.isfunction(found)}
        - WITHOUT.keys()
        - {case.function.__name__ for case in ROWS}
    )
