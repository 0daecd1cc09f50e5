"""Least squares on probability paper: exact lines, plotting positions, and the scatter of the estimates."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.distributions import distribution
from calibrate.fitting import fit_family, plotting_positions
from calibrate.fitting.methods.order_scatter import order_covariance
from calibrate.fitting.paper import PAPERS, positions
from calibrate.records.observations import Observations

INF = np.inf
LAWS = {
    "normal": {"location": 30.0, "scale": 4.0},
    "lognormal": {"median": 0.8, "log_sd": 0.35},
    "gumbel": {"location": 21.0, "scale": 5.0},
    "gumbel_min": {"location": -21.0, "scale": 5.0},
    "weibull": {"scale": 460.0, "shape": 6.0},
    "frechet": {"scale": 3.0, "shape": 4.5},
    "exponential": {"scale": 0.04},
    "weibull3": {"threshold": 10.0, "scale": 6.0, "shape": 1.4},
    "lognormal3": {"threshold": -5.0, "median": 6.0, "log_sd": 0.4},
}


def on_paper(values, family):
    held = {k: v for k, v in LAWS[family].items() if k == "threshold"}
    return fit_family(values, family, method="probability_paper", fixed=held)


def test_every_paper_is_here():
    assert set(LAWS) == set(PAPERS)


@pytest.mark.parametrize("family", LAWS)
def test_quantiles_of_a_member_give_that_member(family):
    values = distribution(family, **LAWS[family]).ppf(plotting_positions(25))
    found = on_paper(values[::-1], family)
    assert found.parameters == pytest.approx(LAWS[family], rel=1e-9)
    assert found.log_likelihood == pytest.approx(np.sum(found.distribution.logpdf(values)), rel=1e-12)


@pytest.mark.parametrize("family", ["normal", "lognormal", "gumbel", "weibull", "frechet", "exponential"])
def test_standard_errors_are_the_scatter(family):
    law, rng, count = distribution(family, **LAWS[family]), np.random.default_rng(9), 400
    fits = [on_paper(x, family) for x in law.sample(rng, (count, 60))]
    estimates = np.array([[f.parameters[n] for n in f.free] for f in fits])
    errors = np.array([[f.standard_errors[n] for n in f.free] for f in fits])
    scatter = estimates.std(axis=0, ddof=1)
    np.testing.assert_allclose(errors.mean(axis=0), scatter, rtol=3 / math.sqrt(2 * count))


def test_weights_meet_the_covariance_of_uniform_order_statistics():
    p = plotting_positions(30)
    weights = np.random.default_rng(1).normal(size=(2, 30))
    kernel = np.minimum.outer(p, p) - np.outer(p, p)
    np.testing.assert_allclose(order_covariance(weights, p), weights @ kernel @ weights.T, rtol=1e-12)


def test_positions_of_a_complete_sample_are_those_of_hazen():
    values, p = positions(Observations.of([5.0, 1.0, 3.0, 3.0]))
    np.testing.assert_array_equal(values, [1.0, 3.0, 3.0, 5.0])
    np.testing.assert_allclose(p, [0.125, 0.375, 0.625, 0.875], rtol=1e-14)


def test_positions_under_right_censoring_halve_the_steps_of_kaplan_meier():
    rng = np.random.default_rng(3)
    life, limit = rng.weibull(2.0, 40), rng.weibull(2.0, 40) * 1.2
    seen = Observations(np.minimum(life, limit), np.where(life > limit, INF, life))
    survival = stats.ecdf(stats.CensoredData.right_censored(seen.values, seen.right)).sf
    after = survival.evaluate(np.sort(life[life <= limit]))
    before = np.concatenate([[1.0], after[:-1]])
    values, p = positions(seen)
    np.testing.assert_array_equal(values, np.sort(life[life <= limit]))
    np.testing.assert_allclose(p, 1.0 - 0.5 * (before + after), rtol=1e-12)


def test_a_survivor_at_the_load_of_a_failure_counts_as_stronger():
    values, p = positions(Observations([2.0, 2.0, 3.0, 1.0], [INF, 2.0, 3.0, 1.0]))
    np.testing.assert_array_equal(values, [1.0, 2.0, 3.0])
    np.testing.assert_allclose(p, [0.125, 0.375, 0.75], rtol=1e-14)


def test_a_value_below_a_limit_of_detection_keeps_its_rank():
    seen = Observations([-INF, 2.0, 3.0, 5.0], [1.0, 2.0, 3.0, 5.0])
    values, p = positions(seen)
    np.testing.assert_array_equal(values, [2.0, 3.0, 5.0])
    np.testing.assert_allclose(p, [0.375, 0.625, 0.875], rtol=1e-14)


@pytest.mark.parametrize("family", ["weibull", "normal"])
def test_a_line_through_the_failures_of_a_test_that_ended_early(family):
    """Quantile data cut at their 60th of 100: the failures keep their places, and so the line."""
    values = distribution(family, **LAWS[family]).ppf(plotting_positions(100))
    seen = Observations(np.minimum(values, values[59]), np.where(values > values[59], INF, values))
    found = on_paper(seen, family)
    assert found.parameters == pytest.approx(LAWS[family], rel=1e-9)
    assert all(math.isnan(e) for e in found.standard_errors.values())
    assert [d.code for d in found.doubts] == ["no-standard-errors"]


@pytest.mark.parametrize(
    ("family", "values", "more", "words"),
    [
        (
            "normal",
            [1, 2, 3, 5, 9],
            {"fixed": {"scale": 2.0}},
            "only the threshold can be, and must be, fixed",
        ),
        (
            "weibull3",
            [1, 2, 3, 5, 9],
            {"estimate": ["threshold"]},
            "only the threshold can be, and must be, fixed",
        ),
        ("normal", Observations([4.0, 5.0, 5.0], [4.0, INF, INF]), {}, "fewer than two different values"),
    ],
)
def test_what_paper_cannot_give(family, values, more, words):
    found = fit_family(values, family, method="probability_paper", **more)
    assert found.status == "failed"
    assert words in found.reason
