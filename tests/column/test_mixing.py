"""Heat, mixing depth and mixing of a column, against own fine marches and the laws that must hold."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from etflux import column
from etflux.column import EDGES, LAYER_MASS

MIDDLE = 0.5 * (EDGES[1:] + EDGES[:-1])


def capped(stable_k=6.0, stable_kg=250.0, residual_kg=1400.0, cap_k=3.0, cap_kg=150.0, free=0.004):
    """A night's stable layer, a residual layer, a cap and free air as a function of mass."""

    def theta(mass):
        return (
            295.0
            + stable_k * np.clip(mass / stable_kg, 0.0, 1.0)
            + cap_k * np.clip((mass - residual_kg) / cap_kg, 0.0, 1.0)
            + free * np.maximum(mass - residual_kg - cap_kg, 0.0)
            + 0.0002 * mass
        )

    return theta


def layer_means(theta, edges=EDGES):
    fine = np.linspace(0.0, 1.0, 201)
    return np.array([theta(a + fine * (b - a)).mean() for a, b in zip(edges[:-1], edges[1:], strict=True)])


def march(theta, supply, entrainment, start_kg=2.0, steps=20_000):
    """Slab equations by small steps: dM = A dF / jump, d(theta_m) = (1 + A) dF / M, jump = theta(M) - theta_m."""
    mass = start_kg
    grid = np.linspace(0.0, start_kg, 1001)
    gap = np.trapezoid(theta(start_kg) - theta(grid), grid)
    used = gap / (1.0 + 2.0 * entrainment)
    mixed = np.trapezoid(theta(grid), grid) / start_kg + used / start_kg
    step = (supply - used) / steps
    for _ in range(steps):
        jump = theta(mass) - mixed
        grown = entrainment * step / max(jump, 1e-9)
        # Heun's step: the jump at the end of the step decides as well.
        warmer = mixed + (1.0 + entrainment) * step / mass
        later = entrainment * step / max(theta(mass + grown) - warmer, 1e-9)
        rise = 0.5 * (grown + later)
        mixed += (1.0 + entrainment) * step / (mass + 0.5 * rise)
        mass += rise
    return mass


@pytest.mark.parametrize("entrainment", [0.1, 0.2])
@pytest.mark.parametrize("supply", [500.0, 820.0, 1600.0, 4000.0, 7000.0])
def test_residual_layer_under_a_cap_follows_the_slab_equations(entrainment, supply):
    """In the stable layer, up the residual layer, in the cap, and beyond it."""
    theta = capped()
    need = column.heat_need(layer_means(theta)[None], entrainment)
    found = column.mixed_mass(need, np.array([[supply]]))[0, 0]
    assert found == pytest.approx(march(theta, supply, entrainment), rel=0.01)


def test_at_the_corner_of_the_cap_the_layers_width_decides():
    """Where the mixed layer first touches the cap, within half a layer (1.2 %), not within 1 %."""
    theta = capped()
    need = column.heat_need(layer_means(theta)[None], 0.2)
    found = column.mixed_mass(need, np.array([[950.0]]))[0, 0]
    assert found == pytest.approx(march(theta, 950.0, 0.2), abs=30.0)


def test_no_heat_mixes_nothing_and_leaves_a_stable_profile_untouched():
    theta = layer_means(capped())[None]
    need = column.heat_need(theta, [0.2])
    assert column.mixed_mass(need, np.array([[-50.0, 0.0]])) == pytest.approx(np.zeros((1, 2)), abs=0.0)
    _, after = column.mix(theta[:, :, None], np.zeros((1, 1)), np.zeros(1))
    assert np.array_equal(after[0, :, 0], theta[0])


def test_depth_rises_with_heat_and_with_entrainment_and_stops_at_the_top():
    theta = np.repeat(layer_means(capped())[None], 3, axis=0)
    need = column.heat_need(theta, [0.0, 0.1, 0.3])
    supply = np.linspace(1.0, 40_000.0, 60)
    mass = column.mixed_mass(need, np.broadcast_to(supply, (3, 60)))
    assert (np.diff(mass, axis=1) >= 0.0).all()
    assert (np.diff(mass, axis=0) >= -1e-9).all()
    assert mass[-1, -1] == EDGES[-1]


def test_without_entrainment_the_mixed_layer_ends_where_the_air_is_as_warm():
    theta = layer_means(capped())[None]
    need = column.heat_need(theta, 0.0)
    mass = column.mixed_mass(need, np.array([[2500.0]]))[0]
    mixed, _ = column.mix(theta[:, :, None], np.array([[2500.0]]), mass)
    at_top = np.interp(mass[0], MIDDLE, theta[0])
    assert mixed[0, 0] == pytest.approx(at_top, abs=0.02)


@settings(max_examples=60, deadline=None)
@given(
    st.integers(0, 2**31),
    st.floats(5.0, EDGES[-1]),
    st.floats(0.0, 9.0),
)
def test_mixing_conserves_every_tracer(seed, mass, water):
    rng = np.random.default_rng(seed)
    tracers = rng.random((4, len(LAYER_MASS), 3)) * [300.0, 0.02, 1e-3]
    added = np.array([[1e3, water, 0.5 * water]] * 4)
    mixed = np.full(4, mass) * [1.0, 0.5, 0.9, 1.0]
    value, after = column.mix(tracers, added, mixed)
    before = np.einsum("clt,l->ct", tracers, LAYER_MASS) + added
    assert np.einsum("clt,l->ct", after, LAYER_MASS) == pytest.approx(before, rel=1e-12)
    whole = EDGES[1:] <= mixed[0]
    assert after[0, whole] == pytest.approx(np.broadcast_to(value[0], (whole.sum(), 3)), rel=1e-12)
    above = EDGES[:-1] >= mixed[0]
    assert np.array_equal(after[0, above], tracers[0, above])


def test_mixing_hour_by_hour_equals_mixing_once():
    """q_m at 15 h is (integral of q up to M, plus E)/M however many steps led there."""
    rng = np.random.default_rng(3)
    start = np.sort(rng.random((5, len(LAYER_MASS), 1)) * 0.015, axis=1)[:, ::-1]
    masses, waters = np.linspace(200.0, 2345.0, 8), np.array([0.1, 0.3, 0.6, 0.8, 0.9, 0.8, 0.4, 0.1])
    state = start
    for mass, water in zip(masses, waters, strict=True):
        value, state = column.mix(state, np.full((5, 1), water), np.full(5, mass))
    once, _ = column.mix(start, np.full((5, 1), waters.sum()), np.full(5, masses[-1]))
    assert value == pytest.approx(once, rel=1e-12)


def test_many_counties_equal_one_alone_and_nan_stays_with_its_county():
    rng = np.random.default_rng(7)
    theta = np.stack([layer_means(capped(6 * rng.random(), 100 + 200 * rng.random())) for _ in range(6)])
    supply = rng.random((6, 5)) * 6000.0
    theta[2, 10] = np.nan
    supply[4, 3] = np.nan
    together = column.mixed_mass(column.heat_need(theta, 0.2), supply)
    assert np.isnan(together[2]).all()
    assert np.isnan(together[4, 3])
    assert np.isnan(together).sum() == 6
    for k in (0, 1, 3, 5):
        alone = column.mixed_mass(column.heat_need(theta[k : k + 1], 0.2), supply[k : k + 1])
        assert alone[0] == pytest.approx(together[k], rel=1e-12)


def test_heights_follow_the_hypsometric_equation():
    """A neutral, dry column: pressure falls with height along the dry adiabat."""
    theta = np.full((1, len(LAYER_MASS)), 300.0)
    pressure = np.array([100.0])
    z = column.heights(theta, np.zeros_like(theta), pressure)[0]
    # cp dT = -g dz with T = theta (p/p0)^kappa
    kappa, g, r = column.KAPPA, column.GRAVITY, column.GAS_CONSTANT_DRY
    expected = 300.0 * (r / kappa) / g * (1.0 - ((100.0 - g * EDGES / 1000.0) / 100.0) ** kappa)
    assert z == pytest.approx(expected, rel=2e-4)
    assert z[45] == pytest.approx(2500.0, rel=0.06)  # 45 layers of 60 kg m-2 reach about 2.5 km
    assert z[-1] > 5000.0


def test_heat_of_the_day_sums_to_the_day():
    day = {
        "latitude_deg": np.array([42.0, 35.0]),
        "day": 200.0,
        "rs_mj_m2_d": np.array([26.0, 20.0]),
        "rnl_mj_m2_d": np.array([4.8, 3.0]),
        "albedo": np.array([0.23, 0.2]),
        "ground_share": np.array([0.05, 0.1]),
        "latent_mj_m2_d": np.array([12.0, 3.0]),
    }
    heat = column.hourly_heat(**day)
    assert heat.evaporated_share.sum(axis=1) == pytest.approx([1.0, 1.0], abs=1e-12)
    assert (heat.available - heat.sensible).sum(axis=1) == pytest.approx(day["latent_mj_m2_d"], rel=1e-12)
    dark = heat.evaporated_share[:, [0, 1, 22, 23]]
    assert np.array_equal(dark, np.zeros_like(dark))
    positive = heat.available > 0.0
    ratio = ((heat.available - heat.sensible) / np.where(positive, heat.available, np.nan))[positive[:, 12] > 0, 8:16]
    assert np.nanmax(np.ptp(ratio, axis=1)) < 1e-12  # a constant share of the available energy


def test_contribution_is_the_difference_of_two_dew_points():
    found = column.contribution([0.018, 0.018, np.nan], [0.002, 0.018, 0.001], 98.0)
    assert found[0] == pytest.approx(1.91, abs=0.01)
    assert np.isnan(found[1:]).all()  # nothing left without it, or no humidity
