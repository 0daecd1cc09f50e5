"""Ranking of candidates: the criterion, the order, what is said of those that failed, and the distance A²."""

import numpy as np
import pytest
from scipy import stats

import calibrate
from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting import anderson_darling, compare, fit, fit_family, plotting_positions

POSITIVE = ["normal", "lognormal", "gumbel", "gumbel_min", "weibull", "frechet", "gamma", "exponential"]


@pytest.fixture
def strengths():
    return stats.lognorm(0.15, scale=40.0).rvs(60, random_state=8)


@pytest.mark.parametrize(
    ("name", "k"),
    [("exponential", 1), ("normal", 2), ("gumbel", 2), ("weibull", 2), ("gamma", 2), ("gev", 3)],
)
def test_criterion(strengths, name, k):
    found = fit_family(strengths, name)
    n, height = strengths.size, found.log_likelihood
    # Akaike's criterion and its correction, as they are usually written.
    assert found.aicc == pytest.approx(2 * k - 2 * height + 2 * k * (k + 1) / (n - k - 1), rel=1e-14)


def test_criterion_counts_only_estimated_parameters(strengths):
    held = fit_family(strengths, "weibull3", fixed={"threshold": 0.0})
    assert held.aicc == pytest.approx(fit_family(strengths, "weibull").aicc, rel=1e-12)
    free = fit_family(strengths, "lognormal3", estimate=["threshold"])
    assert free.aicc == pytest.approx(-2 * free.log_likelihood + 6 * 60 / 56, rel=1e-12)


def test_criterion_without_a_value_is_infinite_and_told():
    found = fit_family([9.0, 10.0, 12.0], "normal")
    assert found.converged
    assert found.aicc == np.inf
    assert found.reason == "AICc is not defined for 3 values and 2 estimated parameters"
    assert "aicc-undefined" in [d.code for d in found.doubts]


def test_candidates_are_ranked(strengths):
    comparison = compare(strengths, POSITIVE)
    criteria = [c.aicc for c in comparison.candidates]
    assert criteria == sorted(criteria)
    assert {c.family for c in comparison.candidates} == set(POSITIVE)
    assert comparison.recommended == comparison.candidates[0].family
    assert comparison.best is comparison.candidates[0]
    for c in comparison.candidates:
        assert c.parameters == fit_family(strengths, c.family).parameters


@pytest.mark.parametrize(
    ("law", "expected"),
    [
        (stats.norm(0.0, 1.0), "normal"),
        (stats.gumbel_r(10.0, 2.0), "gumbel"),
        (stats.gumbel_l(10.0, 2.0), "gumbel_min"),
        (stats.lognorm(0.6, scale=3.0), "lognormal"),
        (stats.invweibull(4.0, scale=3.0), "frechet"),
        (stats.weibull_min(1.8, scale=3.0), "weibull"),
    ],
)
def test_the_true_family_is_recommended_for_a_large_sample(law, expected):
    families = [*POSITIVE] if law.support()[0] == 0.0 else ["normal", "gumbel", "gumbel_min"]
    assert compare(law.rvs(1500, random_state=3), families).recommended == expected


def test_what_is_compared_when_nothing_is_named(strengths):
    names = {c.family for c in compare(strengths).candidates}
    assert names == {*POSITIVE, "gev", "student_t"}
    bounded = {c.family for c in compare(strengths, fixed={"lower": 0.0, "upper": 100.0}).candidates}
    assert bounded - names == {"beta", "truncated_normal"}
    shifted = {c.family for c in compare(strengths, estimate=["threshold"]).candidates}
    assert shifted - names == {"weibull3", "lognormal3"}


def test_failed_candidates_stay_with_their_reason():
    values = [-1.0, 2.0, 3.0, 4.0, 5.0, 7.0, 3.0, 2.5, 4.5, 3.8]
    comparison = compare(values, ["lognormal", "normal", "weibull", "gumbel"])
    order = [(c.family, c.status) for c in comparison.candidates]
    assert order[2:] == [("lognormal", "failed"), ("weibull", "failed")]
    assert {status for _, status in order[:2]} == {"converged"}
    failed = comparison.candidates[2]
    assert failed.reason == "it holds only values above zero; 1 value is not, the smallest -1"
    assert failed.distribution is None
    assert np.isnan(failed.aicc)
    assert comparison.recommended in {"normal", "gumbel"}


def test_too_few_values_for_one_candidate_is_a_reason(strengths):
    failed = compare(strengths[:3], ["normal", "gev"]).candidates[-1]
    assert failed.reason == (
        "it needs at least 4 values, one more than it has parameters to estimate; the sample has 3"
    )


def test_nothing_is_recommended_when_every_search_fails():
    comparison = compare([1.0, 2.0, 3.5, 4.0], ["gev", "student_t"])
    assert comparison.recommended is None
    assert comparison.best is None
    with pytest.raises(InputError) as error:
        fit([1.0, 2.0, 3.5, 4.0], ["gev", "student_t"])
    assert [p.message.split(":")[0] for p in error.value.problems] == [
        "The family 'gev' cannot be fitted",
        "The family 'student_t' cannot be fitted",
    ]


def test_a_candidate_that_comes_twice_counts_once(strengths):
    assert len(compare(strengths, ["normal", "gumbel", "normal"]).candidates) == 2


def test_close_rivals_are_a_doubt(strengths):
    best = compare(strengths, ["lognormal", "gamma", "exponential"]).best
    (doubt,) = best.doubts
    assert doubt.code == "close-families"
    rival = {"lognormal": "gamma", "gamma": "lognormal"}[best.family]
    assert doubt.message.startswith(f"The sample supports {rival} about as well as {best.family} ")
    assert compare(strengths, ["lognormal", "exponential"]).best.doubts == ()


def test_comparison_is_repeatable(strengths):
    first, second = compare(strengths), compare(strengths.tolist())
    for a, b in zip(first.candidates, second.candidates, strict=True):
        assert (a.family, a.parameters, a.log_likelihood) == (b.family, b.parameters, b.log_likelihood)
        assert np.array_equal(a.covariance, b.covariance, equal_nan=True)
    chosen = calibrate.fit(strengths)
    assert chosen.family == first.recommended
    assert [c.aicc for c in chosen.comparison.candidates] == [c.aicc for c in first.candidates]


@pytest.mark.parametrize(
    ("law", "own"),
    [
        (stats.norm(3.0, 2.0), distribution("normal", location=3.0, scale=2.0)),
        (stats.gumbel_r(3.0, 2.0), distribution("gumbel", location=3.0, scale=2.0)),
        (stats.lognorm(0.4, scale=3.0), distribution("lognormal", median=3.0, log_sd=0.4)),
        (stats.weibull_min(2.5, scale=4.0), distribution("weibull", scale=4.0, shape=2.5)),
    ],
)
def test_distance_from_its_definition(law, own):
    """n times the integral of (Fn - F)²/(F (1 - F)) dF, exact between the steps of Fn."""
    values = law.rvs(25, random_state=6)
    n = values.size
    f = np.concatenate([[0.0], np.sort(law.cdf(values)), [1.0]])
    level = np.arange(n + 1) / n

    def primitive(p, t):  # of (t - p)²/(p (1 - p)), whose terms vanish at the two open ends
        with np.errstate(divide="ignore", invalid="ignore"):
            at_zero, at_one = t**2 * np.log(p), (1 - t) ** 2 * np.log1p(-p)
        return np.where(t == 0, 0.0, at_zero) - np.where(t == 1, 0.0, at_one) - p

    expected = n * np.sum(primitive(f[1:], level) - primitive(f[:-1], level))
    assert anderson_darling(values, own) == pytest.approx(expected, rel=1e-11)


def test_distance_of_a_fitted_normal_family(strengths):
    own = distribution("normal", location=strengths.mean(), scale=strengths.std(ddof=1))
    expected = stats.goodness_of_fit(
        stats.norm,
        strengths,
        known_params={"loc": strengths.mean(), "scale": strengths.std(ddof=1)},
        statistic="ad",
        n_mc_samples=1,
        rng=np.random.default_rng(1),
    ).statistic
    assert anderson_darling(strengths, own) == pytest.approx(expected, rel=1e-11)


def test_distance_is_infinite_outside_the_support():
    assert anderson_darling(np.array([-1.0, 2.0]), distribution("weibull", scale=1.0, shape=2.0)) == np.inf


def test_plotting_positions():
    np.testing.assert_allclose(plotting_positions(4), [0.125, 0.375, 0.625, 0.875])
