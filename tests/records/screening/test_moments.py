"""Moments against scipy, their standard errors against known tables and simulation."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from calibrate.records.screening import moments
from calibrate.records.screening.moments import robust_sd


@pytest.mark.parametrize("n", [4, 5, 17, 400])
def test_figures_are_those_of_scipy(n):
    x = np.random.default_rng(n).gamma(2.0, 3.0, n)
    m = moments(x)
    assert (m.n, m.minimum, m.maximum) == (n, x.min(), x.max())
    expected = [x.mean(), x.std(ddof=1), stats.variation(x, ddof=1), np.median(x)]
    np.testing.assert_allclose([m.mean, m.sd, m.cov, m.median], expected, rtol=1e-13)
    assert m.skewness == pytest.approx(stats.skew(x, bias=False), rel=1e-11)
    assert m.kurtosis == pytest.approx(stats.kurtosis(x, bias=False), rel=1e-11)


@pytest.mark.parametrize(
    ("n", "skewness", "kurtosis"),
    [(10, 0.687, 1.334), (20, 0.512, 0.992), (30, 0.427, 0.833), (100, 0.241, 0.478)],
)
def test_standard_errors_as_printed_in_tables(n, skewness, kurtosis):
    # Values that statistics textbooks print for these n (from memory, recomputed).
    m = moments(np.arange(n))
    assert m.skewness_se == pytest.approx(skewness, abs=5e-4)
    assert m.kurtosis_se == pytest.approx(kurtosis, abs=5e-4)


def test_standard_errors_are_the_scatter_in_normal_samples():
    n, repeats = 12, 40_000
    x = np.random.default_rng(1).normal(size=(repeats, n))
    m = moments(x[0])
    for se, seen in (
        (m.skewness_se, stats.skew(x, 1, False)),
        (m.kurtosis_se, stats.kurtosis(x, 1, bias=False)),
    ):
        scatter = seen.std()
        fourth = np.mean((seen - seen.mean()) ** 4) / scatter**4
        assert se == pytest.approx(scatter, rel=4.0 * np.sqrt((fourth - 1.0) / (4.0 * repeats)))


def test_what_is_not_defined_is_none():
    one, two, three = (moments(np.arange(1.0, n + 1.0)) for n in (1, 2, 3))
    assert (one.sd, one.cov, one.skewness_se) == (None, None, None)
    assert two.sd == pytest.approx(np.sqrt(0.5))
    assert (two.skewness, two.skewness_se) == (None, None)
    assert three.skewness == pytest.approx(0.0, abs=1e-15)
    assert (three.kurtosis, three.kurtosis_se) == (None, None)
    equal = moments([0.1] * 7)
    assert (equal.mean, equal.sd, equal.cov, equal.skewness, equal.kurtosis) == (0.1, 0.0, 0.0, None, None)
    assert moments([-1.0, 1.0]).cov is None
    assert moments([-3.0, -1.0]).cov == pytest.approx(np.sqrt(2.0) / 2.0)


def test_huge_values_do_not_overflow():
    m = moments([1e300, 2e300, 4e300, 5e300])
    assert m.mean == pytest.approx(3e300)
    assert m.skewness == pytest.approx(stats.skew([1, 2, 4, 5], bias=False), abs=1e-12)


@given(st.integers(4, 30), st.floats(1e-6, 1e6), st.randoms(use_true_random=False))
def test_scale_and_order_do_not_matter(n, factor, random):
    x = np.random.default_rng(n).normal(10.0, 1.0, n)
    shuffled = list(x)
    random.shuffle(shuffled)
    a, b = moments(x), moments(np.array(shuffled) * factor)
    np.testing.assert_allclose(b.mean, a.mean * factor, rtol=1e-12)
    np.testing.assert_allclose(b.sd, a.sd * factor, rtol=1e-12)
    np.testing.assert_allclose([b.skewness, b.kurtosis], [a.skewness, a.kurtosis], rtol=1e-9, atol=1e-9)


def test_robust_sd_is_that_of_a_normal_core():
    x = stats.norm(3.0, 2.0).ppf((np.arange(9999) + 0.5) / 9999)
    assert robust_sd(x) == pytest.approx(stats.median_abs_deviation(x, scale="normal"), rel=1e-12)
    assert robust_sd(np.append(x, [1e6] * 500)) == pytest.approx(2.0, rel=0.1)
