"""Conversion of reliability indices between periods: many digits, round trips, bounds by the direct computation."""

import mpmath as mp
import numpy as np
import pytest

from calibrate.actions.periods import (
    beta_of_one_period,
    beta_of_period,
    other_period,
    over_period,
    require_same_period,
)
from calibrate.distributions import distribution
from calibrate.errors import InputError

BETAS = np.array([-3.0, -0.4, 0.0, 1.5, 4.2, 8.0, 12.0])
RATIOS = np.array([1e-3, 0.02, 1.0, 50.0, 1e4])


@pytest.mark.parametrize("ratio", RATIOS)
def test_against_many_digits(ratio):
    converted = beta_of_period(BETAS, ratio)
    with mp.workdps(60):
        for beta, got in zip(BETAS, converted, strict=True):
            log_cdf = mp.mpf(ratio) * mp.log(mp.ncdf(mp.mpf(beta)))
            # The smaller tail is compared, where rounding of beta itself shows least.
            there = mp.log(mp.ncdf(mp.mpf(got))) if abs(got) < 35 else None
            if there is None:
                assert float(log_cdf) < -600.0
                continue
            assert float(mp.log(there / log_cdf)) == pytest.approx(0.0, abs=1e-12 * (1.0 + got * got))


def test_far_below_zero_the_square_of_beta_grows_with_the_ratio():
    # ln Phi(beta) tends to -beta**2/2 - ln(-beta sqrt(2 pi)): the first term alone holds to the ratio of the two.
    assert float(beta_of_period(-12.0, 1e4)) == pytest.approx(-12.0 * 100.0, rel=0.03)


@pytest.mark.parametrize("interval", [1.0, 7.5, 50.0])
def test_there_and_back(interval):
    over = beta_of_period(BETAS, 50.0, interval)
    np.testing.assert_allclose(beta_of_one_period(over, 50.0, interval), BETAS, rtol=1e-11, atol=1e-13)
    np.testing.assert_allclose(beta_of_period(over, 1.0 / 50.0, interval), BETAS, rtol=1e-11, atol=1e-13)


def test_full_dependence_and_equal_periods_change_nothing():
    np.testing.assert_allclose(beta_of_period(BETAS, 50.0, 50.0), BETAS, rtol=1e-12, atol=1e-14)
    np.testing.assert_allclose(beta_of_period(BETAS, 0.02, 50.0), BETAS, rtol=1e-12, atol=1e-14)
    np.testing.assert_allclose(beta_of_period(BETAS, 1.0), BETAS, rtol=1e-12, atol=1e-14)


def test_arrays_broadcast_and_what_has_no_beta_keeps_none():
    table = beta_of_period(np.array([np.nan, 3.0, np.inf]), RATIOS[:, None])
    assert table.shape == (5, 3)
    assert np.isnan(table[:, 0]).all()
    assert np.isposinf(table[:, 2]).all()
    assert [float(beta_of_period(3.0, r)) for r in RATIOS] == table[:, 1].tolist()


@pytest.mark.parametrize(
    ("ratio", "interval", "message"),
    [
        (0.0, 1.0, "ratio of periods must be positive and finite; got 0"),
        (np.inf, 1.0, "ratio of periods must be positive"),
        (50.0, 0.5, "between 1 and 50 .* got 0.5"),
        (50.0, 60.0, "between 1 and 50 .* got 60"),
        (0.02, [1.0, 51.0], "between 1 and 50 .* got 51"),
    ],
)
def test_refusals(ratio, interval, message):
    with pytest.raises(InputError, match=message):
        beta_of_period(4.0, ratio, interval)


# What the two ways have to do with each other ------------------------------


def beta_of_years(cov_r, years):
    """Return beta of a lognormal resistance against the maximum of a Gumbel action, by quadrature over resistance."""
    strength = distribution("lognormal", mean=4.2, cov=cov_r)
    action = over_period(distribution("gumbel", mean=1.0, cov=0.25), 1.0, years)
    nodes, weights = np.polynomial.legendre.leggauss(400)
    u = 9.0 * nodes
    pf = np.sum(9.0 * weights * np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi) * action.sf(strength.x(u)))
    return -float(distribution("normal", mean=0.0, sd=1.0).ppf(pf))


def test_the_direct_index_is_above_the_converted_one():
    """E[F(R)**n] >= E[F(R)]**n (Jensen): a resistance that stays makes the years dependent, more so as it scatters."""
    gaps = [
        beta_of_years(cov_r, 50.0) - float(beta_of_period(beta_of_years(cov_r, 1.0), 50.0))
        for cov_r in (0.05, 0.2, 0.35)
    ]
    assert 1e-7 < gaps[0] < gaps[1] < gaps[2]
    assert gaps[2] > 0.01


def test_without_scatter_of_what_stays_both_ways_agree():
    direct = beta_of_years(1e-6, 50.0)
    assert direct == pytest.approx(float(beta_of_period(beta_of_years(1e-6, 1.0), 50.0)), abs=1e-6)


def test_an_action_goes_to_another_period_and_back():
    annual = distribution("lognormal", mean=1.0, cov=0.3)
    fifty = over_period(annual, 1.0, 50.0)
    assert float(fifty.cdf(1.9)) == pytest.approx(float(annual.cdf(1.9)) ** 50, rel=1e-12)
    assert float(over_period(fifty, 50.0, 1.0).x(1.3)) == pytest.approx(float(annual.x(1.3)), rel=1e-12)
    with pytest.raises(InputError, match="reference period must be positive"):
        over_period(annual, 1.0, 0.0)


# What is told to people ------------------------------


def test_both_figures_and_the_reason_in_one_sentence():
    converted = other_period(4.7, 1.0, 50.0)
    assert converted.sentence == (
        "β = 4.70 for 1 year converts to 3.83 for 50 years under full independence."
    )
    both = other_period(4.7, 1.0, 50.0, independence=10.0, direct=4.02).sentence
    assert "4.36 for 50 years under independence intervals of 10 years" in both
    assert "computed directly it is 4.02, because" in both
    assert "intervals of 10 years" in other_period(3.8, 50.0, 1.0, independence=10.0).sentence


def test_an_index_and_a_target_of_different_periods_are_refused():
    require_same_period(4.2, 50.0, 3.8, 50.0)
    with pytest.raises(InputError) as caught:
        require_same_period(4.2, 1.0, 3.8, 50.0, direct=3.3)
    assert str(caught.value) == (
        "β is for 1 year, the target 3.8 is for 50 years. Over 50 years this design has about 3.30 (direct) / 3.21 "
        "(converted). Choose one period for actions, β and target."
    )
