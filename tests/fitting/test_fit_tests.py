"""Tests of fit: statistics by direct formulas, p-values uniform where the family is right and small where not."""

import numpy as np
import pytest
from scipy import stats

from calibrate.distributions import distribution
from calibrate.fitting import fit_family, plotting_positions
from calibrate.fitting.fit_tests import STATISTICS, run_fit_tests
from calibrate.fitting.paper import PAPERS
from calibrate.records.observations import Observations

SEED = 2


def outcome(fit, replicates=1):
    return run_fit_tests(fit, np.random.default_rng(0), replicates)


def test_statistics_by_their_integrals_and_scipy(regular):
    values = regular.sample(30, SEED)
    fit = regular.fit(values)
    law = fit.distribution
    found = outcome(fit).statistics
    assert tuple(found) == STATISTICS
    n, x = 30, np.sort(values)
    f, s = law.cdf(x), law.sf(x)
    i = np.arange(1, n + 1)
    expected = -n - np.mean((2 * i - 1) * (np.log(f) + np.log(s[::-1])))
    assert found["anderson_darling"] == pytest.approx(expected, rel=1e-10)
    assert found["anderson_darling"] == pytest.approx(fit.anderson_darling, rel=1e-12)
    assert found["kolmogorov_smirnov"] == pytest.approx(stats.kstest(values, law.cdf).statistic, rel=1e-10)
    assert found["cramer_von_mises"] == pytest.approx(
        stats.cramervonmises(values, law.cdf).statistic, rel=1e-10
    )
    # The two tails share the weight 1/(p (1 - p)) = 1/p + 1/(1 - p).
    assert found["lower_tail"] + found["upper_tail"] == pytest.approx(expected, rel=1e-9)


def test_tail_statistics_by_their_integrals():
    """n times the integral of (F_n - p)^2 over p, or over 1 - p, by Gauss's rule between the values."""
    values = distribution("weibull", scale=40.0, shape=3.0).sample(np.random.default_rng(1), 20)
    fit = fit_family(values, "weibull")
    ends = np.concatenate([[0.0], np.sort(fit.distribution.cdf(values)), [1.0]])
    nodes, weights = np.polynomial.legendre.leggauss(200)
    half = 0.5 * np.diff(ends)[:, None]
    p = ends[:-1, None] + half * (1.0 + nodes)
    squares = half * weights * (np.arange(21)[:, None] / 20 - p) ** 2
    found = outcome(fit).statistics
    assert found["lower_tail"] == pytest.approx(20 * np.sum(squares / p), rel=1e-6)
    assert found["upper_tail"] == pytest.approx(20 * np.sum(squares / (1 - p)), rel=1e-6)


@pytest.mark.parametrize("name", ["weibull", "normal", "exponential", "lognormal3", "gamma"])
def test_correlation_is_that_of_the_plot(cases, name):
    case = cases[name]
    values = case.sample(30, SEED)
    fit = case.fit(values)
    x, p = np.sort(values), plotting_positions(30)
    paper = PAPERS.get(case.family)
    if paper is None:
        y, q = stats.norm.ppf(fit.distribution.cdf(x)), stats.norm.ppf(p)
    else:
        moved = x - fit.parameters.get("threshold", 0.0)
        y, q = np.log(moved) if paper.logarithmic else moved, paper.variate(p)
    assert outcome(fit).statistics["plot_correlation"] == pytest.approx(np.corrcoef(y, q)[0, 1], rel=1e-10)


def test_p_values_are_uniform_where_the_family_is_right():
    law, rng = distribution("weibull", scale=40.0, shape=3.0), np.random.default_rng(12)
    found = [
        run_fit_tests(fit_family(law.sample(rng, 20), "weibull"), rng, replicates=199).p_values
        for _ in range(200)
    ]
    for name in STATISTICS:
        p = np.array([each[name] for each in found])
        # p takes the values 1/200 ... 200/200; moved to the middle of each step.
        assert stats.kstest(p - 0.0025, "uniform").pvalue > 0.01, name


@pytest.mark.parametrize("statistic", STATISTICS)
def test_a_wrong_family_is_rejected(statistic):
    values = distribution("exponential", scale=3.0).sample(np.random.default_rng(4), 60)
    found = outcome(fit_family(values, "normal"), 199)
    assert found.rejected(statistic)
    right = outcome(fit_family(values, "exponential"), 199)
    assert not right.rejected(statistic)
    assert right.replicates == 199


@pytest.mark.parametrize(
    ("family", "law", "held"), [("normal", stats.norm, {}), ("weibull", stats.weibull_min, {"loc": 0})]
)
@pytest.mark.parametrize(("name", "short"), [("anderson_darling", "ad"), ("cramer_von_mises", "cvm")])
def test_p_values_of_scipy(family, law, held, name, short):
    values = 20.0 + 4.0 * np.random.default_rng(21).standard_normal(25) ** 3 / 3.0
    values = np.abs(values)
    ours = outcome(fit_family(values, family), 1999)
    theirs = stats.goodness_of_fit(
        law, values, known_params=held, statistic=short, n_mc_samples=99, rng=np.random.default_rng(1)
    )
    if (
        family == "weibull"
    ):  # scipy gives its normal family the sd with n - 1, which moves the statistic but not its rank
        assert ours.statistics[name] == pytest.approx(theirs.statistic, rel=1e-3)
    p = ours.p_values[name]
    assert abs(p - theirs.pvalue) < 4 * np.sqrt(p * (1 - p) / 99) + 0.01


def test_a_large_sample_is_compared_with_smaller_ones():
    values = distribution("normal", location=30.0, scale=4.0).sample(np.random.default_rng(3), 1000)
    found = outcome(fit_family(values, "normal"), 199)
    assert np.isnan(found.p_values["plot_correlation"])
    assert not found.rejected("plot_correlation")
    assert all(found.p_values[name] > 0.05 for name in STATISTICS if name != "plot_correlation")
    spoiled = outcome(fit_family(np.exp(values / 15.0), "normal"), 199)
    assert all(spoiled.rejected(name) for name in STATISTICS if name != "plot_correlation")


def test_the_scale_of_the_sample_does_not_matter(regular):
    fit = regular.fit(regular.sample(30, SEED))
    factor = 1000.0
    fixed = {name: regular.scaled(regular.fixed, factor)[name] for name in regular.given}
    other = fit_family(fit.values * factor, regular.family, fixed=fixed, estimate=regular.estimate)
    assert outcome(other).statistics == pytest.approx(outcome(fit).statistics, rel=1e-4)


def test_bounds_at_the_extremes_have_no_distance_in_the_tails():
    found = outcome(fit_family([1.0, 2.5, 3.1, 4.4, 7.0, 8.2], "uniform"), 99)
    for name in ("anderson_darling", "lower_tail", "upper_tail"):
        assert found.statistics[name] == np.inf
        assert np.isnan(found.p_values[name])
    assert 0.0 < found.p_values["kolmogorov_smirnov"] <= 1.0


def test_statistics_are_not_defined_for_incomplete_samples_and_failed_fits():
    seen = Observations([1.0, 2.0, 3.0, 3.0], [1.0, 2.0, 3.0, np.inf])
    assert outcome(fit_family(seen, "normal")) is None
    assert outcome(fit_family([7.0] * 6, "normal")) is None
