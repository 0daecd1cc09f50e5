"""Rank correlation against scipy.stats, with and without ties, small and large."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from calibrate.resistance.ranks import average_ranks, kendall, spearman


@pytest.mark.parametrize("n", [5, 9, 20, 33, 34, 80])
@pytest.mark.parametrize("ties", [False, True])
@pytest.mark.parametrize("slope", [0.0, 0.8, -2.0])
def test_coefficients_and_p_values_are_those_of_scipy(n, ties, slope):
    rng = np.random.default_rng(n)
    x = rng.normal(size=n)
    y = slope * x + rng.normal(size=n)
    if ties:
        x, y = np.round(x), np.round(2 * y)
    np.testing.assert_allclose(spearman(x, y), tuple(stats.spearmanr(x, y)), rtol=1e-10)
    np.testing.assert_allclose(kendall(x, y), tuple(stats.kendalltau(x, y)), rtol=1e-10)


def test_without_variation_there_is_no_coefficient():
    x = np.arange(6.0)
    assert np.isnan(spearman(x, np.ones(6))).all()
    assert np.isnan(kendall(np.ones(6), x)).all()


def test_perfect_order():
    x = np.arange(7.0)
    assert spearman(x, x**3) == pytest.approx((1.0, 0.0), abs=1e-12)
    # Two of 7! orders are as extreme.
    assert kendall(x, -x) == pytest.approx((-1.0, 2.0 / 5040.0), rel=1e-12)


@given(st.lists(st.integers(-5, 5), min_size=1, max_size=30))
def test_ranks_are_those_of_scipy(values):
    x = np.array(values, dtype=np.float64)
    np.testing.assert_array_equal(average_ranks(x), stats.rankdata(x))
