"""The registry of estimators: names, what they refuse, and the shape of small Weibull samples."""

import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.fitting import compare, fit, fit_family
from calibrate.fitting.characteristic.pivots import gumbel_rows
from calibrate.fitting.methods.registry import METHODS, method_of
from calibrate.records.observations import Observations
from calibrate.registry import registered

VALUES = np.array([18.2, 21.5, 19.9, 24.1, 20.3, 22.8, 17.6, 23.0, 21.1, 19.4, 20.8, 22.2])
INF = np.inf
RIGHT = Observations(VALUES, np.where(VALUES > 22.0, INF, VALUES))
LEFT = Observations(np.where(VALUES < 19.0, -INF, VALUES), VALUES)
INTERVAL = Observations(np.where(VALUES < 19.0, 17.0, VALUES), VALUES)
TRUNCATED = Observations(VALUES, VALUES, above=15.0)


def test_every_method_says_what_it_is():
    assert list(METHODS) == [
        "likelihood", "moments", "l_moments", "probability_paper", "lower_tail", "upper_tail", "bayes", "known_cov",
        "likelihood_unbiased",
    ]  # fmt: skip
    for name, method in METHODS.items():
        assert method_of(name) is method
        assert method.name == name
        assert method.title
        assert method.source
        assert set(method.required) <= set(method.options)


def test_a_name_comes_once():
    with pytest.raises(ValueError, match="'moments' is registered twice"):
        registered([method_of("moments"), method_of("likelihood"), method_of("moments")])


@pytest.mark.parametrize(("name", "meant"), [("likelihod", "likelihood"), ("l-moments", "l_moments")])
def test_an_unknown_name_is_refused_with_the_nearest(name, meant):
    with pytest.raises(InputError) as error:
        fit_family(VALUES, "normal", method=name)
    assert error.value.problems[0].message == f"There is no method '{name}'."
    assert f"'{meant}'" in error.value.problems[0].suggestion


@pytest.mark.parametrize(
    ("method", "seen", "words"),
    [
        ("moments", RIGHT, "right-censored observations, which the method 'moments' would misread; it needs a"),
        ("l_moments", LEFT, "left-censored observations, which the method 'l_moments' would misread; it needs a"),
        ("bayes", INTERVAL, "interval observations, which the method 'bayes' would misread"),
        ("known_cov", TRUNCATED, "truncated observations, which the method 'known_cov' would misread"),
        ("likelihood_unbiased", RIGHT, "right-censored observations, which the method"),
        ("probability_paper", TRUNCATED, "it honours interval, left-censored and right-censored"),
        ("lower_tail", LEFT, "it honours right-censored"),
        ("upper_tail", RIGHT, "it honours left-censored"),
    ],
)  # fmt: skip
def test_incomplete_samples_are_refused_by_what_would_misread_them(method, seen, words):
    family = "weibull" if method == "likelihood_unbiased" else "lognormal"
    with pytest.raises(InputError) as error:
        fit_family(seen, family, method=method)
    assert words in str(error.value)
    assert str(error.value).endswith("Use 'likelihood'.")


@pytest.mark.parametrize("seen", [RIGHT, LEFT, INTERVAL, TRUNCATED])
def test_likelihood_honours_every_kind(seen):
    assert fit_family(seen, "lognormal").converged


@pytest.mark.parametrize(
    ("method", "family", "options", "words"),
    [
        ("bayes", "gumbel", {}, "cannot estimate the family 'gumbel'; it knows normal and lognormal."),
        ("likelihood_unbiased", "normal", {}, "cannot estimate the family 'normal'; it knows weibull."),
        ("l_moments", "student_t", {}, "cannot estimate the family 'student_t'"),
        ("probability_paper", "gamma", {}, "cannot estimate the family 'gamma'"),
        ("known_cov", "normal", {}, "needs cov (cov: the known coefficient of variation)"),
        ("lower_tail", "normal", {}, "needs fraction (fraction: share of the values"),
        ("likelihood", "normal", {"cov": 0.1}, "The method 'likelihood' has no option cov; it takes none."),
        ("known_cov", "normal", {"cv": 0.1}, "has no option cv; it takes cov."),
    ],
)
def test_families_and_options_are_refused_in_words(method, family, options, words):
    with pytest.raises(InputError) as error:
        fit_family(VALUES, family, method=method, options=options)
    assert words in str(error.value)


def test_what_the_method_was_told_is_kept():
    found = fit(VALUES, "normal", method="known_cov", options={"cov": 0.1})
    assert found.method == "known_cov"
    assert found.options == {"cov": 0.1}


def test_candidates_are_those_the_method_knows():
    ranked = compare(
        VALUES, method="bayes", options={"prior_mean": 20, "prior_cov": 0.1, "prior_n": 0, "prior_nu": 0}
    )
    assert {f.family for f in ranked.candidates} == {"normal", "lognormal"}


def test_unbiased_shape_is_the_corrected_likelihood():
    plain = fit_family(VALUES, "weibull")
    found = fit_family(VALUES, "weibull", method="likelihood_unbiased")
    ratio = (12 - 2) / (12 - 0.68)
    expected = {"scale": plain.parameters["scale"], "shape": plain.parameters["shape"] * ratio}
    assert found.parameters == pytest.approx(expected, rel=1e-12)
    assert found.standard_errors["shape"] == pytest.approx(plain.standard_errors["shape"] * ratio, rel=1e-12)
    assert found.log_likelihood == pytest.approx(np.sum(found.distribution.logpdf(VALUES)), rel=1e-12)
    assert found.log_likelihood < plain.log_likelihood


def test_unbiased_shape_has_the_true_mean():
    law, rng, count = distribution("weibull", scale=30.0, shape=4.0), np.random.default_rng(3), 4000
    _, log_scales = gumbel_rows(-np.log(law.sample(rng, (count, 10))))
    shapes = (10 - 2) / (10 - 0.68) / log_scales
    error = np.std(shapes) / np.sqrt(count)
    assert abs(np.mean(shapes) - 4.0) < 3 * error + 0.01 * 4.0
    # Without the correction the mean is 1.16 of the truth (D. R. Thoman, L. J. Bain and C. E. Antle, Technometrics 11
    # (1969): unbiasing factor 0.859 for n = 10, from memory).
    assert np.mean(shapes) * 9.32 / 8.0 == pytest.approx(4.0 / 0.859, abs=3 * error + 0.01)


def test_a_shape_that_is_given_is_not_corrected():
    held = {"shape": 5.0}
    found = fit_family(VALUES, "weibull", method="likelihood_unbiased", fixed=held)
    assert found.parameters == fit_family(VALUES, "weibull", fixed=held).parameters
