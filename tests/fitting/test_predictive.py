"""The distribution of a further specimen: exact forms, and what uncertainty of the parameters does to tails."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.distributions import distribution
from calibrate.fitting import fit_family
from calibrate.fitting.predictive import predictive
from calibrate.records.observations import Observations

X = np.array([31.2, 28.7, 30.5, 33.1, 29.4, 27.9, 30.0, 32.2, 31.7, 29.8])
P = np.array([0.001, 0.05, 0.5, 0.95, 0.999])
SEED = 2


@pytest.mark.parametrize("method", ["likelihood", "moments"])
def test_normal_is_student(method):
    """mean + t(n - 1) s sqrt(1 + 1/n), EN 1990 D.7 (from memory), exact for either method."""
    expected = stats.t(9, X.mean(), X.std(ddof=1) * math.sqrt(1.1)).ppf(P)
    np.testing.assert_allclose(predictive(fit_family(X, "normal", method=method)).ppf(P), expected, rtol=1e-9)


def test_lognormal_is_the_same_of_the_logarithms():
    y = np.log(X)
    expected = np.exp(stats.t(9, y.mean(), y.std(ddof=1) * math.sqrt(1.1)).ppf(P))
    np.testing.assert_allclose(predictive(fit_family(X, "lognormal")).ppf(P), expected, rtol=1e-9)


@pytest.mark.parametrize("n", [4, 10, 30])
def test_exponential_is_pareto(n):
    """F(x) = 1 - (1 + x/(n mean))^-n (Lawless 2003, section 4.1, from memory), but for the quadrature."""
    x = distribution("exponential", scale=3.0).sample(np.random.default_rng(1), n)
    found = predictive(fit_family(x, "exponential")).ppf(P)
    expected = n * x.mean() * np.expm1(-np.log1p(-P) / n)
    np.testing.assert_allclose(found, expected, rtol=0.02 / n)


def test_normal_with_given_sd_is_normal():
    found = predictive(fit_family(X, "normal", fixed={"scale": 2.0})).ppf(P)
    np.testing.assert_allclose(found, stats.norm(X.mean(), 2.0 * math.sqrt(1.1)).ppf(P), rtol=1e-6)


@pytest.mark.parametrize("name", ["lognormal", "gumbel", "gumbel_min", "weibull", "frechet", "gamma", "gev"])
def test_it_is_wider_than_the_fit_in_both_tails(cases, name):
    fit = cases[name].fit(cases[name].sample(50, SEED))
    found, law = predictive(fit), fit.distribution
    assert found.shape == ()
    assert float(found.cdf(law.ppf(0.001))) > 0.001
    assert float(found.sf(law.ppf(0.999))) > 0.001


def test_large_samples_leave_the_fit(cases):
    for name in ("weibull", "gumbel", "gamma", "gev"):
        case = cases[name]
        fit = case.fit(case.sample(20_000, SEED))
        spread = float(fit.distribution.ppf(0.75) - fit.distribution.ppf(0.25))
        np.testing.assert_allclose(
            predictive(fit).ppf([0.05, 0.5, 0.99]),
            fit.distribution.ppf([0.05, 0.5, 0.99]),
            atol=0.01 * spread,
        )


@pytest.mark.parametrize("family", ["weibull", "gumbel"])
def test_a_further_specimen_lies_below_as_often_as_predicted(family):
    """Over samples of twenty, the true probability below the predicted 1 % fractile is 1 % on average."""
    law, rng, count = distribution(family, mean=30.0, cov=0.2), np.random.default_rng(5), 150
    fits = [fit_family(x, family) for x in law.sample(rng, (count, 20))]
    below = np.array([float(law.cdf(predictive(f).ppf(0.01))) for f in fits])
    plain = np.array([float(law.cdf(f.distribution.ppf(0.01))) for f in fits])
    assert np.mean(below) == pytest.approx(0.01, abs=3 * np.std(below) / math.sqrt(count) + 0.002)
    assert np.mean(plain) > np.mean(below)


def test_it_follows_the_unit(regular):
    fit = regular.fit(regular.sample(200, SEED))
    fixed = {name: regular.scaled(regular.fixed, 1000.0)[name] for name in regular.given}
    other = fit_family(fit.values * 1000.0, regular.family, fixed=fixed, estimate=regular.estimate)
    spread = float(fit.distribution.ppf(0.75) - fit.distribution.ppf(0.25))
    found, expected = predictive(other).ppf(P[1:4]), 1000.0 * predictive(fit).ppf(P[1:4])
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-3 * spread)


def test_bounds_carry_their_uncertainty():
    """Censoring at the median leaves less to know of the upper tail, not of the lower."""
    x = distribution("weibull", scale=40.0, shape=3.0).sample(np.random.default_rng(1), 60)
    cut = np.median(x)
    whole, half = (
        fit_family(seen, "weibull")
        for seen in (Observations.of(x), Observations(np.minimum(x, cut), np.where(x > cut, np.inf, x)))
    )
    excess = [float(predictive(f).ppf(0.99) / f.distribution.ppf(0.99)) - 1.0 for f in (whole, half)]
    assert excess[1] > 1.5 * excess[0] > 0.0


@pytest.mark.parametrize(
    ("method", "options"),
    [("l_moments", {}), ("probability_paper", {}), ("known_cov", {"cov": 0.1}), ("likelihood_unbiased", {})],
)
def test_every_method_with_a_covariance_has_one(method, options):
    fit = fit_family(X, "weibull", method=method, options=options)
    found = predictive(fit)
    assert float(found.ppf(0.01)) < float(fit.distribution.ppf(0.01))


def test_the_method_has_its_own_where_it_gives_one():
    prior = {"prior_mean": 30.0, "prior_cov": 0.1, "prior_n": 3.0, "prior_nu": 5.0}
    fit = fit_family(X, "normal", method="bayes", options=prior)
    assert predictive(fit) is fit.own_predictive


@pytest.mark.parametrize(
    ("family", "values", "method"),
    [
        ("uniform", X, "likelihood"),
        ("weibull", Observations(X, np.where(X > 31.0, np.inf, X)), "probability_paper"),
    ],
)
def test_there_is_none_without_a_covariance(family, values, method):
    fit = fit_family(values, family, method=method)
    assert fit.converged
    assert predictive(fit) is None
