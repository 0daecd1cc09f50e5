"""Fractile factors at the ends of their range, against mpmath and scipy."""

import mpmath as mp
import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.fitting.characteristic import (
    factors,
    prediction_factor,
    prediction_factor_known,
    tolerance_factor,
    tolerance_factor_known,
)
from calibrate.fitting.characteristic.factors import general_tolerance_factor


def probability(k, n, z):
    """P(mean of n standard normal values + z <= k s), integrated over s with 18 digits."""
    with mp.workdps(18):
        k, z, v = mp.mpf(float(k)), mp.mpf(float(z)), mp.mpf(n - 1)
        root, width = mp.sqrt(n), 1 / mp.sqrt(2 * v)

        def integrand(s):
            log_density = v / 2 * mp.log(v / 2) - mp.loggamma(v / 2) + (v - 1) * mp.log(s) - v * s * s / 2
            return 2 * mp.exp(log_density) * mp.ncdf(root * (k * s - z))

        breaks = {max(mp.mpf(0), 1 + width * j) for j in (-14, -8, -4, -2, -1, 0, 1, 2, 4, 8, 16)}
        breaks |= {z / k + d / (root * abs(k)) for d in (-8, -3, 0, 3, 8)}
        return mp.quad(integrand, sorted(b for b in breaks if b >= 0))


@pytest.mark.parametrize(
    ("n", "fractile", "confidence"),
    [
        (2, 1e-6, 0.99),
        (2, 0.05, 0.01),  # k is almost zero
        (2, 0.499, 0.01),  # k is far below zero
        (3, 0.4, 0.25),
        (10, 0.05, 0.75),
        (30, 0.2, 0.05),
        (1_000, 0.499, 0.99),
        (100_000, 1e-6, 0.99),
        (100_000, 0.05, 0.01),
    ],
)
def test_tolerance_factor_solves_its_equation(n, fractile, confidence):
    k = tolerance_factor(n, fractile, confidence)
    z = -stats.norm.ppf(fractile)
    assert float(probability(k, n, z) - confidence) == pytest.approx(0.0, abs=1e-12)


def test_tolerance_factor_against_scipy_over_its_range():
    n, p, c = np.meshgrid(
        [2, 3, 5, 10, 100, 1e4, 1e5],
        [1e-6, 1e-3, 0.05, 0.3, 0.499],
        [0.01, 0.25, 0.5, 0.75, 0.99],
        indexing="ij",
    )
    expected = stats.nct.ppf(c, n - 1.0, -stats.norm.ppf(p) * np.sqrt(n)) / np.sqrt(n)
    np.testing.assert_allclose(tolerance_factor(n, p, c), expected, rtol=1e-10, atol=1e-12)


def test_tolerance_factor_of_the_median_is_student_t():
    n, c = np.array([[2], [10], [1000]]), np.array([0.05, 0.5, 0.75, 0.99])
    np.testing.assert_allclose(
        tolerance_factor(n, 0.5, c), stats.t.ppf(c, n - 1) / np.sqrt(n), rtol=1e-10, atol=1e-12
    )


@pytest.mark.parametrize(("size", "freedom"), [(2.0, 1.3), (3.3, 1.7), (9.7, 6.3)])
def test_general_factor_with_fractional_freedom(size, freedom):
    c = np.array([0.25, 0.75, 0.95])
    expected = stats.nct.ppf(c, freedom, -stats.norm.ppf(0.05) * np.sqrt(size)) / np.sqrt(size)
    np.testing.assert_allclose(general_tolerance_factor(size, freedom, 0.05, c), expected, rtol=1e-7)


def test_prediction_factor_far_out_is_cauchy_for_two_specimens():
    p = np.array([1e-6, 1e-3, 0.05])
    np.testing.assert_allclose(prediction_factor(2, p), np.sqrt(1.5) / np.tan(np.pi * p), rtol=1e-12)


@pytest.mark.parametrize(
    "factor",
    [
        lambda n, p: tolerance_factor(n, p, 0.75),
        lambda n, p: tolerance_factor_known(n, p, 0.75),
        prediction_factor,
        prediction_factor_known,
    ],
    ids=["tolerance", "tolerance, known sd", "prediction", "prediction, known sd"],
)
class TestEveryFactor:
    def test_upper_fractiles_mirror_lower_ones(self, factor):
        p = np.array([0.001, 0.05, 0.3])
        np.testing.assert_allclose(factor(7, 1.0 - p), factor(7, p), rtol=1e-9)

    def test_tends_to_the_normal_distance(self, factor):
        assert factor(10**8, 0.05) == pytest.approx(1.6448536, abs=2e-4)

    def test_falls_with_the_size_of_the_sample(self, factor):
        assert np.all(np.diff(factor(np.arange(2, 200), 0.05)) < 0.0)

    def test_batch_and_single_calls_give_the_same_bits(self, factor):
        n = np.array([2, 9, 40])
        assert np.array_equal(factor(n, 0.05), [factor(m, 0.05) for m in n])

    def test_too_few_specimens(self, factor):
        with pytest.raises(InputError, match=r"number of specimens must be at least \d; got 0"):
            factor([5, 0], 0.05)

    @pytest.mark.parametrize("p", [0.0, 1.0, -0.2, np.nan])
    def test_no_fractile(self, factor, p):
        with pytest.raises(InputError, match="must lie between 0 and 1, both excluded"):
            factor(5, [0.05, p])


def test_known_sd_needs_less_than_an_estimated_one():
    n = np.arange(2, 50)
    assert np.all(tolerance_factor_known(n, 0.05, 0.75) < tolerance_factor(n, 0.05, 0.75))
    np.testing.assert_allclose(tolerance_factor_known(n, 0.05, 0.5), 1.6448536269514722, rtol=1e-14)


def test_pieces_do_not_show(monkeypatch):
    n = np.arange(2, 52).reshape(5, 10)
    whole = tolerance_factor(n, 0.05, 0.75)
    monkeypatch.setattr(factors, "_CHUNK", 7)
    assert np.array_equal(tolerance_factor(n, 0.05, 0.75), whole)


def test_no_factors():
    assert tolerance_factor(np.zeros(0), 0.05, 0.75).shape == (0,)
