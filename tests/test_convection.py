"""CAPE and CIN of the afternoon column: against MetPy called by itself, and against limits that are known.

MetPy (May et al. 2022, Bull. Amer. Meteor. Soc. 103, E2273) is the witness; the columns are invented.
"""

import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from etflux import air_checks, column, convection, humidity
from etflux.case import Case, Settings, with_settings
from etflux.column import EDGES
from etflux.findings import NotInstalled
from etflux.humidity import FREEZING_K, GAS_CONSTANT_DRY, HEAT_CAPACITY_AIR
from etflux.run import run_case
from etflux.workbook import read

calc = pytest.importorskip("metpy.calc")
from metpy.units import units  # noqa: E402

EXAMPLE = Path(__file__).parents[1] / "station_examples" / "tallgrove_us.xlsx"
MIDDLE = 0.5 * (EDGES[1:] + EDGES[:-1])
PRESSURE = np.array([98.0, 97.0, 95.0])
MIXED = np.array([1500.0, 1100.0, 1900.0])
THETA_MIXED = np.array([305.5, 304.0, 306.5])
Q_MIXED = np.array([0.0155, 0.0170, 0.0130])


@pytest.fixture
def morning():
    """Three mornings: stable to the ground, a residual layer, a free atmosphere of 4 K/km; humidity falling."""
    height = MIDDLE / 1.1
    theta = 298.0 + np.minimum(height / 300.0, 1.0) * 4.0 + 0.004 * np.maximum(height - 1300.0, 0.0)
    q = 0.015 * 0.5 ** (np.maximum(height - 900.0, 0.0) / 1800.0)
    return np.tile(theta, (3, 1)), np.tile(q, (3, 1))


@pytest.fixture
def sounding(morning):
    theta, q = convection.afternoon(*morning, MIXED, THETA_MIXED, Q_MIXED)
    return convection.levels(PRESSURE, theta, q, THETA_MIXED, Q_MIXED)


def test_mixed_air_is_metpys_own_answer_for_the_same_parcel(sounding):
    found = convection.parcels(*sounding)
    for row, (p, t, td) in enumerate(zip(*sounding, strict=True)):
        p, t, td = p * units.hPa, t * units.degC, td * units.degC
        cape, cin = calc.cape_cin(*calc.parcel_profile_with_lcl(p, t, td))
        assert found.cape_mixed_j_kg[row] == pytest.approx(cape.m, rel=1e-12)
        assert found.cin_mixed_j_kg[row] == pytest.approx(-cin.m, rel=1e-12)
        assert cape.m > 300.0


def test_surface_parcel_of_metpy_agrees_with_ours(sounding):
    for row, (p, t, td) in enumerate(zip(*sounding, strict=True)):
        direct, _ = calc.surface_based_cape_cin(p * units.hPa, t * units.degC, td * units.degC)
        assert convection.parcels(*sounding).cape_mixed_j_kg[row] == pytest.approx(direct.m, rel=1e-9)


def test_most_unstable_air_is_found_where_it_is_aloft(sounding):
    p, t, td = (values.copy() for values in sounding)
    t[0, :12], td[0, :12] = t[0, :12] - 6.0, td[0, :12] - 9.0  # cool dry air flows in below
    found = convection.parcels(p, t, td)
    direct, cin = calc.most_unstable_cape_cin(p[0] * units.hPa, t[0] * units.degC, td[0] * units.degC)
    assert found.cape_most_j_kg[0] == pytest.approx(direct.m, rel=1e-9)
    assert found.cin_most_j_kg[0] == pytest.approx(-cin.m, rel=1e-9)
    assert found.cape_most_j_kg[0] > found.cape_mixed_j_kg[0] + 200.0


def test_most_unstable_air_never_has_less_than_the_mixed_air(sounding):
    found = convection.parcels(*sounding)
    assert (found.cape_most_j_kg >= found.cape_mixed_j_kg).all()
    for row, (p, t, td) in enumerate(zip(*sounding, strict=True)):
        direct, _ = calc.most_unstable_cape_cin(p * units.hPa, t * units.degC, td * units.degC)
        assert found.cape_most_j_kg[row] == pytest.approx(direct.m, rel=0.03)  # his start differs within the mixed air


def test_a_dry_adiabatic_column_has_no_energy():
    theta = np.full((1, len(MIDDLE)), 300.0)
    dry = np.full((1, len(MIDDLE)), 1e-5)
    found = convection.parcels(*convection.levels([98.0], theta, dry, [300.0], [1e-5]))
    assert found.cape_mixed_j_kg[0] == 0.0
    assert np.isnan(found.cin_mixed_j_kg[0])


def test_energy_of_a_column_that_is_a_constant_colder_than_its_parcel():
    """CAPE is R times the integral of the virtual excess over ln p: 2 K from 700 to 300 hPa, analytic."""
    p = np.linspace(980.0, 300.0, 341)
    parcel = calc.parcel_profile(p * units.hPa, 30.0 * units.degC, 20.0 * units.degC).m_as("K")
    cape = convection.parcels(*_colder(p, parcel, 2.0)).cape_mixed_j_kg[0]
    more = convection.parcels(*_colder(p, parcel, 3.0)).cape_mixed_j_kg[0]
    assert more - cape == pytest.approx(GAS_CONSTANT_DRY * np.log(700.0 / 300.0), rel=0.005)


def _colder(p, parcel_k, excess):
    """A bone-dry environment this much colder than the parcel above 700 hPa, as warm as the parcel below."""
    t = parcel_k - FREEZING_K - np.where(p <= 700.0, excess, 0.0)
    td = np.where(p < 979.0, -60.0, 20.0)
    return p[None], t[None], np.minimum(td, t)[None]


def test_taking_moisture_out_never_gives_the_mixed_air_more_energy(morning):
    theta, q = morning
    before = None
    for share in (1.0, 0.95, 0.9, 0.8, 0.6, 0.3):
        found, _ = convection.of_columns(
            PRESSURE, theta, q * share, q * share, MIXED, THETA_MIXED, Q_MIXED * share, Q_MIXED * share
        )
        if before is not None:
            assert (found.cape_mixed_j_kg <= before + 1e-9).all()
        before = found.cape_mixed_j_kg
    assert (before == 0.0).all()


def test_without_crops_is_the_column_with_the_tags_taken_out(morning):
    theta, q = morning
    tags = np.where(MIDDLE < 1200.0, 0.001, 0.0)
    with_crops, without = convection.of_columns(
        PRESSURE, theta, q, q - tags, MIXED, THETA_MIXED, Q_MIXED, Q_MIXED - 0.002
    )
    alone, same = convection.of_columns(
        PRESSURE, theta, q - tags, q - tags, MIXED, THETA_MIXED, Q_MIXED - 0.002, Q_MIXED - 0.002
    )
    np.testing.assert_array_equal(without, alone)
    np.testing.assert_array_equal(alone, same)
    assert (without.cape_mixed_j_kg < with_crops.cape_mixed_j_kg - 100.0).all()


def test_moisture_makes_the_energy_that_the_trade_expects(sounding):
    """One more g/kg in the mixed air adds some 2.5 K of equivalent potential temperature: L/cp times 0.001."""
    p, t, td = (values[:1] for values in sounding)
    wetter = td.copy()
    q = humidity.specific_humidity(humidity.vapour_pressure_from_dew_point(td[0, 0]), p[0, 0] / 10.0) + 0.001
    wetter[0, 0] = humidity.dew_point_from_specific_humidity(q, p[0, 0] / 10.0)
    more = convection.parcels(p, t, wetter).cape_mixed_j_kg - convection.parcels(p, t, td).cape_mixed_j_kg
    warming = 0.001 * 2.5e6 / HEAT_CAPACITY_AIR
    # From memory: aloft the parcel keeps a third of that as temperature low down, nearly all of it high up.
    depth = GAS_CONSTANT_DRY * np.log(800.0 / 200.0)
    assert 0.3 * warming * depth < more[0] < 1.0 * warming * depth


def test_afternoon_keeps_the_water_and_mixes_the_top_layer_in_part(morning):
    theta, q = morning
    warm, moist = convection.afternoon(theta, q, MIXED, THETA_MIXED, Q_MIXED)
    for row, mass in enumerate(MIXED):
        within = EDGES[1:] <= mass
        np.testing.assert_allclose(moist[row, within], Q_MIXED[row], rtol=1e-14)
        above = EDGES[:-1] >= mass
        np.testing.assert_array_equal(moist[row, above], q[row, above])
        assert (warm[row] >= THETA_MIXED[row]).all()
    assert (np.diff(warm, axis=1) >= -1e-9).all()


def test_levels_fall_in_pressure_and_end_at_100_hpa(sounding):
    p, t, td = sounding
    assert (np.diff(p, axis=1) < 0.0).all()
    np.testing.assert_allclose(p[:, -1], 100.0)
    assert (td <= t).all()
    np.testing.assert_allclose(t[:, 0] + FREEZING_K, THETA_MIXED)
    assert (t[:, -1] + FREEZING_K >= 216.65 - 1e-9).all()


def test_missing_values_stay_missing_and_inputs_stay_as_they_were(sounding):
    p, t, td = (values.copy() for values in sounding)
    t[1, 5] = np.nan
    kept = p.copy(), t.copy(), td.copy()
    found = np.array(convection.parcels(p, t, td))
    assert np.isnan(found[:, 1]).all()
    assert np.isfinite(found[0, [0, 2]]).all()
    for values, before in zip((p, t, td), kept, strict=True):
        np.testing.assert_array_equal(values, before)


def test_saturated_and_bone_dry_air_is_lifted_like_its_neighbours(sounding):
    """Condensation at the very first level, or nowhere: hardly another answer than a hundredth of a kelvin away."""
    p, t, td = (values[:1].repeat(3, axis=0) for values in sounding)
    td[0, 0], td[1, 0] = t[0, 0], t[0, 0] - 0.01
    found = convection.parcels(p, t, td)
    assert found.cape_mixed_j_kg[0] == pytest.approx(found.cape_mixed_j_kg[1], rel=2e-3)
    td[2] = np.minimum(td[2], -95.0)
    assert convection.parcels(p, t, td).cape_mixed_j_kg[2] == 0.0


@pytest.fixture
def gone(monkeypatch):
    """A Python without MetPy."""
    monkeypatch.setitem(sys.modules, "metpy", None)
    monkeypatch.setitem(sys.modules, "metpy.calc", None)
    monkeypatch.setattr("importlib.util.find_spec", lambda name: None)


def test_without_metpy_the_message_says_how_to_get_it(gone, sounding):
    with pytest.raises(NotInstalled, match=r'pip install "etflux\[cape\]"'):
        convection.parcels(*sounding)


def test_without_metpy_the_check_says_it_at_the_setting(gone):
    asked = Case(with_settings(Settings(), air_cape=True), {})
    (said,) = air_checks.check(asked)
    assert (said.code, said.table, said.quantity) == ("cape-not-installed", "settings", "air_cape")
    assert air_checks.check(replace(asked, settings=Settings())) == []


def test_sentences_are_blank_without_numbers_and_leave_out_inhibition_that_is_none():
    numbers = dict.fromkeys(convection.summary({name: [np.nan] for name in NAMES}), float("nan"))
    assert convection.sentences(numbers) == ("", "")
    numbers |= {name: 0.0 for name in NAMES if name.startswith("cape")}
    first, _ = convection.sentences(numbers)
    assert "raised against" not in first


NAMES = [
    f"{kind}_{part}{end}_j_kg"
    for kind in ("cape", "cin")
    for part in ("mixed", "most")
    for end in ("", "_without_crops")
]


@pytest.fixture(scope="module")
def asked():
    """The invented county with CAPE for two days, run."""
    case, _, _ = read(EXAMPLE)
    wanted = with_settings(case.settings, air_cape=True, cape_days=2, air_worlds=False, air_ranges=False)
    return run_case(replace(case, settings=wanted))


def test_a_run_has_the_energy_of_the_days_asked_for(asked):
    table = asked.table("county_daily").set_index("date")
    brief = np.datetime64(asked.settings["brief_date"] or table.index[-1], "D")
    there = table["cape_mixed_j_kg"].notna()
    assert set(table.index[there].to_numpy().astype("datetime64[D]")) <= {brief - 1, brief}
    assert there.any()
    shown = table[there]
    assert (shown["cape_most_j_kg"] >= shown["cape_mixed_j_kg"]).all()
    wetter = shown[shown["contribution_c"] > 0.5]
    assert len(wetter)
    assert (wetter["cape_mixed_j_kg"] >= wetter["cape_mixed_without_crops_j_kg"]).all()


def test_the_runs_mixed_parcel_is_that_of_the_county_table(asked):
    """Its CAPE is MetPy's for a parcel of the table's temperature and dew point in the same surroundings."""
    county = asked.county
    day = int(np.flatnonzero(np.isfinite(county["cape_mixed_j_kg"].to_numpy()[:, 0]))[-1])
    of = county.isel(date=day, county_id=0)
    profile = county.isel(county_id=0).sel(profile_date=of["date"].to_numpy())
    theta = profile["profile_theta_c"].to_numpy().astype(float)[None] + FREEZING_K
    q = profile["profile_humidity_g_kg"].to_numpy().astype(float)[None] / 1000.0
    dew, warm = of["dew_point_mixed_c"].item(), of["theta_mixed_c"].item()
    ground = humidity.pressure_from_elevation(read(EXAMPLE)[0].table("counties")["elevation_m"].to_numpy()[:1])
    mixed = humidity.specific_humidity(humidity.vapour_pressure_from_dew_point(dew), ground)
    height = column.heights(theta, q, ground)[0]
    mass = np.interp(of["mixing_depth_m"].item(), height, EDGES)
    sounding = convection.levels(
        ground, *convection.afternoon(theta, q, [mass], [warm + FREEZING_K], mixed), [warm + FREEZING_K], mixed
    )
    p, t, td = (values[0] for values in sounding)
    cape, _ = calc.surface_based_cape_cin(p * units.hPa, t * units.degC, td * units.degC)
    assert of["cape_mixed_j_kg"].item() == pytest.approx(cape.m, rel=1e-3)


def test_without_the_setting_a_run_has_no_energy_and_loads_no_metpy():
    code = (
        "import sys; from dataclasses import replace; from etflux.case import with_settings; "
        "from etflux.workbook import read; from etflux.run import run_case; "
        f"case = read({str(EXAMPLE)!r})[0]; "
        "quick = with_settings(case.settings, air_worlds=False, air_ranges=False); "
        "found = run_case(replace(case, settings=quick)); "
        "print('metpy' in sys.modules, 'cape_mixed_j_kg' in found.county)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["False", "False"]
