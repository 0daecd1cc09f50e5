"""The method of moments: what it reproduces, and its standard errors against many samples and closed forms."""

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.fitting import fit_family

# family, given, estimated on request, moments that must be met
MET = [
    ("normal", {}, (), "mean sd"),
    ("lognormal", {}, (), "mean sd"),
    ("gumbel", {}, (), "mean sd"),
    ("gumbel_min", {}, (), "mean sd"),
    ("weibull", {}, (), "mean sd"),
    ("frechet", {}, (), "mean sd"),
    ("gamma", {}, (), "mean sd"),
    ("uniform", {}, (), "mean sd"),
    ("exponential", {}, (), "mean"),
    ("weibull3", {"threshold": 0.1}, (), "mean sd"),
    ("lognormal3", {"threshold": -1.0}, (), "mean sd"),
    ("weibull3", {}, ("threshold",), "mean sd skewness"),
    ("lognormal3", {}, ("threshold",), "mean sd skewness"),
    ("gev", {}, (), "mean sd skewness"),
    ("gev", {"shape": 0.1}, (), "mean sd"),
    ("beta", {"lower": 0.0, "upper": 9.0}, (), "mean sd"),
    ("student_t", {}, (), "mean sd kurtosis"),
    ("student_t", {"freedom": 3.0}, (), "mean sd"),
    ("truncated_normal", {"lower": 0.0, "upper": 9.0}, (), "mean sd"),
    ("truncated_normal", {"lower": 0.0}, (), "mean sd"),
    ("truncated_normal", {"upper": 9.0}, (), "mean sd"),
]


def quadrature(distribution, order):
    """Return the standardised moment of a distribution, by Gauss-Legendre over its quantiles in normal space."""
    nodes, weights = np.polynomial.legendre.leggauss(400)
    u = 12.0 * nodes
    density = 12.0 * weights * stats.norm.pdf(u)
    x = distribution.x(u)
    mean = np.sum(density * x)
    return np.sum(density * (x - mean) ** order) / np.sum(density * (x - mean) ** 2) ** (order / 2)


@pytest.fixture
def values():
    """Values right of zero, skewed, with tails heavier than the normal ones."""
    return stats.lognorm(0.35, scale=2.0).rvs(60, random_state=4)


@pytest.mark.parametrize(("name", "given", "estimate", "moments"), MET)
def test_moments_of_the_sample_are_met(values, name, given, estimate, moments):
    fitted = fit_family(values, name, method="moments", fixed=given, estimate=estimate).distribution
    assert float(fitted.mean) == pytest.approx(np.mean(values), rel=1e-12)
    if "sd" in moments:
        assert float(fitted.sd) == pytest.approx(np.std(values, ddof=1), rel=1e-12)
    if "skewness" in moments:
        assert quadrature(fitted, 3) == pytest.approx(stats.skew(values), rel=1e-6)
    if "kurtosis" in moments:
        freedom = float(fitted.parameters["freedom"])
        assert 3.0 + 6.0 / (freedom - 4.0) == pytest.approx(stats.kurtosis(values, fisher=False), rel=1e-12)


def test_standard_errors_of_mean_and_standard_deviation(values):
    n, d = values.size, values - values.mean()
    m2, m4 = np.mean(d**2), np.mean(d**4)
    found = fit_family(values, "normal", method="moments").standard_errors
    assert found["location"] == pytest.approx(np.sqrt(m2 / n), rel=1e-9)
    # Variance of the sample standard deviation: (m4 - m2²)/(4 m2 n) (Stuart and Ord, Kendall's Advanced Theory of
    # Statistics, vol. 1, section 10.15; from memory).
    assert found["scale"] == pytest.approx(np.sqrt((m4 - m2**2) / (4 * m2 * n)), rel=1e-6)


@pytest.mark.parametrize(
    ("name", "law", "given", "estimate"),
    [
        ("gumbel", stats.gumbel_r(3.0, 2.0), {}, ()),
        ("lognormal", stats.lognorm(0.3, scale=5.0), {}, ()),
        ("weibull", stats.weibull_min(3.0, scale=5.0), {}, ()),
        ("gamma", stats.gamma(4.0, scale=2.0), {}, ()),
        ("exponential", stats.expon(scale=4.0), {}, ()),
        ("uniform", stats.uniform(1.0, 4.0), {}, ()),
        ("weibull3", stats.weibull_min(3.0, 2.0, 5.0), {}, ("threshold",)),
        ("gev", stats.genextreme(0.2, 2.0, 5.0), {}, ()),
        ("beta", stats.beta(2.0, 3.0), {"lower": 0.0, "upper": 1.0}, ()),
    ],
)
def test_standard_errors_are_the_scatter_between_samples(name, law, given, estimate):
    samples = law.rvs((60, 1000), random_state=11)
    fits = [fit_family(s, name, method="moments", fixed=given, estimate=estimate) for s in samples]
    for p in fits[0].free:
        scatter = np.std([f.parameters[p] for f in fits], ddof=1)
        stated = np.sqrt(np.mean([f.standard_errors[p] ** 2 for f in fits]))
        # The scatter of 60 estimates is known to 9 per cent (one standard error); the bound is three of them.
        assert stated == pytest.approx(scatter, rel=0.28), p


def test_exact_parameters_of_a_gumbel_family(values):
    found = fit_family(values, "gumbel", method="moments").parameters
    scale = np.std(values, ddof=1) * np.sqrt(6.0) / np.pi
    expected = {"location": np.mean(values) - np.euler_gamma * scale, "scale": scale}
    assert found == pytest.approx(expected, rel=1e-13)


def test_likelihood_at_the_moments_is_below_the_largest(values):
    for name in ("gumbel", "lognormal", "weibull", "gamma"):
        moments, largest = (fit_family(values, name, method=m) for m in ("moments", "likelihood"))
        assert moments.log_likelihood < largest.log_likelihood
        assert moments.method == "moments"


def test_values_outside_the_fitted_bounds_are_doubted():
    found = fit_family([1.0, 1.0, 1.0, 1.0, 1.0, 9.0, 1.0, 1.0, 1.0, 1.0], "uniform", method="moments")
    assert found.log_likelihood == -np.inf
    doubt = next(d for d in found.doubts if d.code == "outside-support")
    assert doubt.message == "1 value lies outside the fitted distribution's support."


def test_a_parameter_that_the_moments_determine_cannot_be_held(values):
    with pytest.raises(
        InputError, match="The method of moments of 'gamma' determines shape; use method 'likeli"
    ):
        fit_family(values, "gamma", method="moments", fixed={"shape": 2.0})


@pytest.mark.parametrize(
    ("name", "given", "estimate", "reason"),
    [
        ("student_t", {}, (), "kurtosis of the sample"),
        ("lognormal3", {}, ("threshold",), "skewness of the sample, -"),
        ("truncated_normal", {"lower": 0.0, "upper": 4.0}, (), "sd must be less than"),
    ],
)
def test_moments_that_no_member_has(name, given, estimate, reason):
    found = fit_family([0.1, 0.2, 3.7, 3.8, 3.9], name, method="moments", fixed=given, estimate=estimate)
    assert found.status == "failed"
    assert reason in found.reason
