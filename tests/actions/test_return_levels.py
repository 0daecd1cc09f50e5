"""Return periods and levels against closed forms, published figures and simulation."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.actions.maxima import fit_maxima
from calibrate.actions.return_levels import (
    YEARS,
    empirical_return_periods,
    non_exceedance,
    return_level,
    return_levels,
    return_period,
)
from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting.intervals import fractile_interval
from tests.published.test_fits_sea_levels import LEVELS


@pytest.fixture(scope="module")
def sea():
    return fit_maxima(LEVELS, "gev")


# Facts of the trade, from memory, recomputed: 2 % a year is the 50-year value; 5 % in 50 years is 975 years.
@pytest.mark.parametrize(
    ("years", "n", "probability"), [(50.0, 1.0, 0.98), (50.0, 50.0, 0.3641697), (975.2864, 50.0, 0.95)]
)
def test_return_periods_of_characteristic_values(years, n, probability):
    assert float(non_exceedance(years, n)) == pytest.approx(probability, abs=5e-8)
    assert float(return_period(probability, n)) == pytest.approx(years, rel=2e-7)


@given(st.floats(1.01, 1e12), st.floats(0.05, 1e3))
def test_return_period_inverts_non_exceedance(years, n):
    p = float(non_exceedance(years, n))
    if 1e-300 < p < 1.0 - 1e-9:
        assert float(return_period(p, n)) == pytest.approx(years, rel=1e-6)


def test_level_of_gumbel():
    law = distribution("gumbel", location=20.0, scale=3.0)
    years = np.array([1.5, 50.0, 1e9])
    expected = 20.0 - 3.0 * np.log(-np.log1p(-1.0 / years))
    np.testing.assert_allclose(return_level(law, years), expected, rtol=1e-12)


@pytest.mark.parametrize("block_years", [1 / 12, 5.0])
def test_level_belongs_to_years_whatever_the_block(block_years):
    """Gumbel maxima of blocks are those of years, moved by scale ln(block length)."""
    year = distribution("gumbel", location=20.0, scale=3.0)
    block = distribution("gumbel", location=20.0 + 3.0 * math.log(block_years), scale=3.0)
    np.testing.assert_allclose(return_level(block, YEARS, block_years), return_level(year, YEARS), rtol=1e-12)


def test_sea_levels(sea):
    """Port Pirie; S. Coles, Introduction to Statistical Modeling of Extreme Values, Springer 2001, 3.4.1 (memory)."""
    found = return_levels(sea, [10.0, 100.0])
    np.testing.assert_allclose(found.levels, [4.30, 4.69], atol=0.005)  # printed
    np.testing.assert_allclose(found.levels, [4.29621, 4.68840], atol=5e-6)  # recomputed
    assert (found.lower[1], found.upper[1]) == pytest.approx((4.50, 5.27), abs=0.01)  # printed
    assert found.beyond_record.tolist() == [False, True]
    assert found.doubts == ()


def test_usual_table(sea):
    found = return_levels(sea)
    assert found.years.tolist() == list(YEARS)
    assert np.all(np.diff(found.levels) > 0.0)
    assert np.all((found.lower < found.levels) & (found.levels < found.upper))
    assert found.method == "profile likelihood"
    narrower = return_levels(sea, confidence=0.5)
    assert np.all((found.lower < narrower.lower) & (narrower.upper < found.upper))


@pytest.mark.parametrize("family", ["gumbel", "frechet", "lognormal"])
def test_intervals_are_those_of_fractiles(family):
    found = return_levels(fit_maxima(LEVELS, family), [50.0])
    expected = fractile_interval(fit_maxima(LEVELS, family).fit, 0.98)
    assert (found.lower[0], found.upper[0]) == pytest.approx(expected, rel=1e-9)


def test_interval_without_likelihood_by_delta_method():
    """Gumbel: x_T = location + scale y, so the variance is a square in y."""
    maxima = fit_maxima(LEVELS, "gumbel", method="l_moments")
    found = return_levels(maxima, [100.0])
    y = -math.log(-math.log(0.99))
    (a, b), (_, c) = maxima.fit.covariance
    half = 1.9599640 * math.sqrt(a + 2.0 * y * b + y * y * c)
    assert found.method == "delta method"
    assert found.upper[0] - found.levels[0] == pytest.approx(half, rel=1e-7)
    assert found.levels[0] - found.lower[0] == pytest.approx(half, rel=1e-7)


def test_interval_covers_the_true_level():
    """60 records of 40 years: of 95 % intervals at least 52 cover (binomial, below with probability 0.003)."""
    law = distribution("gumbel", location=20.0, scale=3.0)
    truth = float(return_level(law, 100.0))
    rng = np.random.default_rng(8)
    covered = 0
    for _ in range(60):
        found = return_levels(fit_maxima(law.sample(rng, 40), "gumbel"), [100.0])
        covered += bool(found.lower[0] < truth < found.upper[0])
    assert covered >= 52


def test_points_of_the_plot(sea):
    years, values = empirical_return_periods(sea)
    np.testing.assert_array_equal(values, np.sort(LEVELS))
    assert years[-1] == pytest.approx(2 * 65)  # the largest of n stands for 2 n blocks
    assert years[32] == pytest.approx(2.0)  # the median


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda sea: return_level(sea.distribution, 1.0), "more than 1 year"),
        (lambda sea: return_level(sea.distribution, 50.0, -1.0), "length of a block"),
        (lambda sea: return_levels(sea, [50.0, math.nan]), "more than 1 year"),
        (lambda sea: return_levels(sea, confidence=1.0), "confidence"),
        (lambda sea: return_period(1.0), "between 0 and 1"),
        (lambda sea: non_exceedance(50.0, 0.0), "A period must be positive"),
        (lambda sea: sea.over(math.inf), "A period must be positive"),
    ],
)
def test_refusals(sea, call, message):
    with pytest.raises(InputError, match=message):
        call(sea)
