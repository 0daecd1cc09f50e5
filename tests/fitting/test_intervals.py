"""Profile-likelihood intervals against closed forms, a profile by another route, and their coverage."""

import math

import numpy as np
import pytest
from scipy import optimize, special, stats

from calibrate.distributions import distribution
from calibrate.fitting import fit_family
from calibrate.fitting.censored import log_likelihood
from calibrate.fitting.intervals import fractile_interval, parameter_intervals
from calibrate.records.observations import Observations

INF = np.inf
SEED = 2
X = np.array([31.2, 28.7, 30.5, 33.1, 29.4, 27.9, 30.0, 32.2, 31.7, 29.8])


def drop(confidence):
    """Return by how much the log-likelihood may fall."""
    return 0.5 * stats.chi2(1).ppf(confidence)


@pytest.mark.parametrize("confidence", [0.5, 0.9, 0.95, 0.999])
def test_mean_of_a_normal_sample(confidence):
    """n ln(1 + (mean - m)^2/s^2) = chi2 with s the sd of largest likelihood."""
    found = parameter_intervals(fit_family(X, "normal"), confidence)["location"]
    half = np.std(X) * math.sqrt(math.expm1(2 * drop(confidence) / X.size))
    np.testing.assert_allclose(found, [X.mean() - half, X.mean() + half], rtol=1e-6)


def test_scale_of_an_exponential_sample():
    """n (r - 1 - ln r) = chi2/2 with r the ratio of mean and scale."""
    found = parameter_intervals(fit_family(X, "exponential"), 0.9)["scale"]

    def excess(r):
        return X.size * (r - 1 - math.log(r)) - drop(0.9)

    ends = X.mean() / optimize.brentq(excess, 1.0, 9.0), X.mean() / optimize.brentq(excess, 0.05, 1.0)
    np.testing.assert_allclose(found, ends, rtol=1e-6)


def test_sd_of_a_normal_sample():
    """At a given sd the best location stays the mean: n (ln(s/s0) + (s0/s)^2/2 - 1/2) = chi2/2."""
    found = parameter_intervals(fit_family(X, "normal"), 0.95)["scale"]
    s0 = np.std(X)
    for s in found:
        assert X.size * (math.log(s / s0) + 0.5 * (s0 / s) ** 2 - 0.5) == pytest.approx(drop(0.95), rel=1e-4)
    assert found[0] < s0 < found[1]


def profile(seen, fractile):
    """Return the log-likelihood of a Weibull sample maximised over the shape at a given fractile."""

    def height(k, x_p):
        scale = x_p / (-math.log1p(-fractile)) ** (1 / k)
        return log_likelihood(distribution("weibull", scale=scale, shape=k), seen)

    def best(x_p):
        found = optimize.minimize_scalar(
            lambda t: -height(math.exp(t), x_p), bounds=(-1.0, 5.0), method="bounded", options={"xatol": 1e-9}
        )
        return -found.fun

    return best


@pytest.mark.parametrize("kind", ["complete", "right", "left", "truncated"])
def test_fractile_of_a_weibull_sample_by_another_route(kind):
    x = distribution("weibull", scale=40.0, shape=3.0).sample(np.random.default_rng(1), 40)
    seen = {
        "complete": Observations.of(x),
        "right": Observations(np.minimum(x, 38.0), np.where(x > 38.0, INF, x)),
        "left": Observations(np.where(x < 25.0, -INF, x), np.maximum(x, 25.0)),
        "truncated": Observations(x[x > 20.0], x[x > 20.0], above=20.0),
    }[kind]
    fit = fit_family(seen, "weibull")
    low, high = fractile_interval(fit, 0.05, 0.9)
    best = profile(seen, 0.05)
    assert low < float(fit.distribution.ppf(0.05)) < high
    for end in (low, high):
        assert fit.log_likelihood - best(end) == pytest.approx(drop(0.9), rel=1e-3)


def test_ends_lie_on_the_level_and_hold_the_estimate(regular):
    fit = regular.fit(regular.sample(200, SEED))
    found = parameter_intervals(fit, 0.9)
    assert list(found) == list(fit.free)
    for name, (low, high) in found.items():
        assert low < fit.parameters[name] < high, name
        # In a large sample both ends are about 1.645 standard errors away.
        for end in (low, high):
            away = abs(end - fit.parameters[name]) / fit.standard_errors[name]
            assert 0.8 < away < 3.5, (name, away)


def test_coverage_of_the_five_per_cent_fractile():
    law, rng, count = distribution("weibull", scale=40.0, shape=3.0), np.random.default_rng(15), 150
    truth, hits = float(law.ppf(0.05)), 0
    for x in law.sample(rng, (count, 40)):
        low, high = fractile_interval(fit_family(x, "weibull"), 0.05, 0.9)
        hits += low < truth < high
    assert abs(hits / count - 0.9) < 3 * math.sqrt(0.09 / count) + 0.02


@pytest.mark.parametrize("name", ["weibull", "normal", "gev", "lognormal3, estimated"])
def test_the_unit_does_not_matter(cases, name):
    case, factor = cases[name], 1e6
    fit = case.fit(case.sample(200, SEED))
    other = case.fit(fit.values * factor)
    low, high = fractile_interval(fit, 0.05)
    np.testing.assert_allclose(fractile_interval(other, 0.05), [low * factor, high * factor], rtol=1e-4)
    one, two = parameter_intervals(fit), parameter_intervals(other)
    for parameter in fit.free:
        scaled = [case.scaled({parameter: end}, factor)[parameter] for end in one[parameter]]
        np.testing.assert_allclose(two[parameter], scaled, rtol=1e-4)


def test_an_interval_of_a_fractile_follows_a_transformation():
    """The logarithm of a lognormal variable is normal: so are the ends."""
    log_ends = fractile_interval(fit_family(np.log(X), "normal"), 0.05, 0.9)
    ends = fractile_interval(fit_family(X, "lognormal"), 0.05, 0.9)
    np.testing.assert_allclose(np.log(ends), log_ends, rtol=1e-6)


def test_a_moved_location_is_all_of_a_median():
    fit = fit_family(X, "normal")
    np.testing.assert_allclose(fractile_interval(fit, 0.5), parameter_intervals(fit)["location"], rtol=1e-6)
    assert float(special.ndtri(0.5)) == 0.0


def test_a_family_of_extremes_has_none():
    fit = fit_family(X, "uniform")
    assert all(math.isnan(end) for pair in parameter_intervals(fit).values() for end in pair)
    assert all(math.isnan(end) for end in fractile_interval(fit, 0.05))
