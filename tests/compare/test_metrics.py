"""Measures of agreement: hand-worked numbers, published definitions, and how they behave."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from etflux import compare
from etflux.compare.metrics import METRICS

MEASURED = np.array([2.0, 4.0, 6.0, 8.0])
MODELLED = np.array([3.0, 4.0, 5.0, 10.0])


def test_hand_worked():
    """Worked by hand: differences 1, 0, -1, 2; measured mean 5."""
    found = compare.scores(MODELLED, MEASURED)
    assert found["n"] == 4
    assert found["bias"] == pytest.approx(0.5)
    assert found["rmse"] == pytest.approx(np.sqrt(6.0 / 4.0))
    assert found["slope_through_origin"] == pytest.approx((6.0 + 16.0 + 30.0 + 80.0) / (4.0 + 16.0 + 36.0 + 64.0))
    # Willmott (1981): 1 - 6 / [(2+3)² + (1+1)² + (0+1)² + (5+3)²]
    assert found["index_of_agreement"] == pytest.approx(1.0 - 6.0 / (25.0 + 4.0 + 1.0 + 64.0))
    assert found["r_squared"] == pytest.approx(stats.linregress(MEASURED, MODELLED).rvalue ** 2)


@pytest.mark.parametrize("name", sorted(METRICS))
def test_pairs_without_both_do_not_count(name):
    gaps = np.array([np.nan, 1.0]), np.array([1.0, np.nan])
    with_gaps = METRICS[name](np.append(MODELLED, gaps[0]), np.append(MEASURED, gaps[1]))
    assert with_gaps == pytest.approx(METRICS[name](MODELLED, MEASURED))


@pytest.mark.parametrize("name", sorted(set(METRICS) - {"n"}))
def test_nothing_known_is_nan(name):
    assert np.isnan(METRICS[name]([np.nan], [1.0]))


def test_a_constant_has_no_correlation():
    assert np.isnan(compare.r_squared([1.0, 1.0, 1.0], [1.0, 2.0, 3.0]))
    assert np.isnan(compare.slope_through_origin([1.0, 2.0], [0.0, 0.0]))


values = st.lists(st.floats(-50.0, 50.0), min_size=3, max_size=30)


@given(values, st.floats(-5.0, 5.0))
def test_a_shift_is_bias_and_rmse(numbers, shift):
    truth = np.array(numbers)
    assert compare.bias(truth + shift, truth) == pytest.approx(shift, abs=1e-9)
    assert compare.rmse(truth + shift, truth) == pytest.approx(abs(shift), abs=1e-9)


@given(values, values)
def test_agreement_is_between_nothing_and_all(a, b):
    n = min(len(a), len(b))
    found = compare.index_of_agreement(a[:n], b[:n])
    assert np.isnan(found) or -1e-9 <= found <= 1.0 + 1e-9
    assert compare.rmse(a[:n], b[:n]) >= abs(compare.bias(a[:n], b[:n])) - 1e-9


def test_outside_a_band_is_never_the_nearer_series_inside_it():
    outside = compare.outside_band([1.0, 2.5, 5.0, np.nan], [2.0] * 4, [3.0] * 4)
    assert outside == pytest.approx([-1.0, 0.0, 2.0, np.nan], nan_ok=True)
