"""A known coefficient of variation: closed forms of the level that is left to estimate."""

import math

import numpy as np
import pytest
from scipy import optimize, stats

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting import fit_family

X = np.array([31.2, 28.7, 30.5, 33.1, 29.4, 27.9, 30.0, 32.2, 31.7, 29.8])
COV = 0.08
MEAN = float(X.mean())
N = X.size


def known(family, values=X, cov=COV, **more):
    return fit_family(values, family, method="known_cov", options={"cov": cov}, **more)


def scale_of(shape):
    """Return the scale of largest likelihood for a Weibull shape; negative shapes are Frechet's."""
    return np.mean(X**shape) ** (1 / shape)


def weibull_shape():
    def excess(k):
        return math.gamma(1 + 2 / k) / math.gamma(1 + 1 / k) ** 2 - 1 - COV**2

    return optimize.brentq(excess, 2.0, 60.0)


def frechet_shape():
    def excess(k):
        return math.gamma(1 - 2 / k) / math.gamma(1 - 1 / k) ** 2 - 1 - COV**2

    return optimize.brentq(excess, 2.5, 100.0)


LOG_SD = math.sqrt(math.log(1 + COV**2))
GUMBEL = COV * MEAN * math.sqrt(6) / math.pi
CLOSED = {
    "normal": {"location": MEAN, "scale": COV * MEAN},
    "lognormal": {"median": stats.gmean(X), "log_sd": LOG_SD},
    "gumbel": {"location": MEAN - np.euler_gamma * GUMBEL, "scale": GUMBEL},
    "weibull": {"scale": scale_of(weibull_shape()), "shape": weibull_shape()},
    "gamma": {"shape": COV**-2, "scale": MEAN * COV**2},
    "frechet": {"scale": scale_of(-frechet_shape()), "shape": frechet_shape()},
}
# Relative standard error of the level: the likelihood's where it sets the scale, sd/sqrt(n) for the mean.
RELATIVE = {
    "normal": COV, "lognormal": LOG_SD, "gumbel": COV, "weibull": 1 / weibull_shape(), "gamma": COV,
    "frechet": 1 / frechet_shape(),
}  # fmt: skip


@pytest.mark.parametrize("family", CLOSED)
def test_estimates_in_closed_form(family):
    found = known(family)
    assert found.parameters == pytest.approx(CLOSED[family], rel=1e-8)
    assert float(found.distribution.cov) == pytest.approx(COV, rel=1e-8)
    assert found.log_likelihood == pytest.approx(np.sum(found.distribution.logpdf(X)), rel=1e-10)


@pytest.mark.parametrize("family", CLOSED)
def test_only_the_level_is_uncertain_and_counted(family):
    found = known(family)
    shape = {"lognormal": "log_sd", "weibull": "shape", "gamma": "shape", "frechet": "shape"}.get(family)
    level = next(iter(name for name in found.parameters if name != shape))
    expected = RELATIVE[family] * found.parameters[level] / math.sqrt(N)
    assert found.standard_errors[level] == pytest.approx(expected, rel=1e-6)
    if shape:
        assert found.standard_errors[shape] == 0.0
    # One estimated quantity in the criterion.
    assert found.aicc == pytest.approx(-2 * found.log_likelihood + 2 * N / (N - 2), rel=1e-12)


@pytest.mark.parametrize("family", ["normal", "lognormal", "gumbel"])
def test_standard_error_of_the_level_is_its_scatter(family):
    law, rng = distribution(family, mean=30.0, cov=COV), np.random.default_rng(6)
    fits = [known(family, x) for x in law.sample(rng, (200, 20))]
    level = next(iter(p for p, e in fits[0].standard_errors.items() if e > 0.0))
    scatter = np.std([f.parameters[level] for f in fits], ddof=1)
    assert np.mean([f.standard_errors[level] for f in fits]) == pytest.approx(scatter, rel=4 / math.sqrt(400))


def test_a_negative_mean_has_no_cov():
    found = known("normal", -X)
    assert found.status == "failed"
    assert "positive mean" in found.reason


@pytest.mark.parametrize("cov", [0.0, -0.1, math.nan, math.inf])
def test_a_cov_is_positive(cov):
    with pytest.raises(InputError, match="The known cov must be positive"):
        known("normal", cov=cov)


def test_nothing_else_can_be_held():
    with pytest.raises(InputError, match="no other parameter can be fixed"):
        known("normal", fixed={"location": 30.0})
