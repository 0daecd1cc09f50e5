"""Bootstrap intervals, and failure modes fitted as competing risks."""

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.fitting import fit_family
from calibrate.fitting.bootstrap_intervals import bootstrap_intervals
from calibrate.fitting.intervals import parameter_intervals
from calibrate.fitting.modes import fit_modes, weakest_below
from calibrate.records import Observations
from calibrate.records.screening import failure_modes


def test_intervals_of_a_normal_mean_are_students_and_of_its_sd_chi_squares():
    from scipy import stats

    x = np.random.default_rng(5).normal(30.0, 4.0, 25)
    fit = fit_family(x, "normal")
    found, fractiles = bootstrap_intervals(fit, np.random.default_rng(6), 0.9, (0.5,))
    # The basic bootstrap of the mean: normal with the fitted sd; of the sd: its ratio is a root of chi-squared over n.
    half = 1.6448536269514722 * fit.parameters["scale"] / 5.0
    assert found["location"] == pytest.approx((x.mean() - half, x.mean() + half), abs=0.15 * half)
    assert fractiles[0.5] == pytest.approx(found["location"], abs=1e-9)
    ends = [fit.parameters["scale"] / np.sqrt(stats.chi2.ppf(p, 24) / 25) for p in (0.95, 0.05)]
    assert found["scale"] == pytest.approx(tuple(ends), rel=0.04)


@pytest.mark.parametrize("method", ["moments", "l_moments", "probability_paper"])
def test_every_estimator_gets_intervals_near_those_of_the_likelihood(method):
    x = distribution("weibull", mean=50.0, cov=0.2).sample(np.random.default_rng(8), 60)
    fit = fit_family(x, "weibull", method=method)
    found, fractiles = bootstrap_intervals(fit, np.random.default_rng(9), 0.9, (0.05,))
    profile = parameter_intervals(fit_family(x, "weibull"), 0.9)
    for name, (low, high) in found.items():
        assert low < fit.parameters[name] < high
        assert (high - low) == pytest.approx(profile[name][1] - profile[name][0], rel=0.45)
    low, high = fractiles[0.05]
    assert low < float(fit.distribution.ppf(0.05)) < high


def test_modes_recover_the_strength_of_each_when_they_compete():
    rng = np.random.default_rng(12)
    truth = {
        "tear": distribution("weibull", mean=20.0, cov=0.1),
        "pull": distribution("weibull", mean=21.0, cov=0.2),
    }
    n = 4000
    strengths = np.array([d.sample(rng, n) for d in truth.values()])
    names = np.array(list(truth))[strengths.argmin(axis=0)]
    modes = failure_modes(Observations.of(strengths.min(axis=0)), list(names))
    fits = {m.name: m for m in fit_modes(modes, "weibull")}
    assert sum(m.failures for m in fits.values()) == n
    for name, law in truth.items():
        for parameter, value in law.parameters.items():
            error = fits[name].fit.standard_errors[parameter]
            assert abs(fits[name].fit.parameters[parameter] - float(value)) < 4 * error
    x = np.array([12.0, 15.0, 18.0, 21.0])
    exact = 1 - np.prod([d.sf(x) for d in truth.values()], axis=0)
    np.testing.assert_allclose(weakest_below(list(fits.values()), x), exact, atol=0.02)


def test_a_rare_mode_is_counted_and_not_fitted():
    x = np.linspace(10.0, 20.0, 12)
    modes = failure_modes(Observations.of(x), ["a"] * 10 + ["b"] * 2)
    found = {m.name: m for m in fit_modes(modes, "normal")}
    assert found["b"].fit is None
    assert (found["b"].failures, found["b"].survivors) == (2, 10)
