"""`calibrate.fit` as the manual shows it."""

from collections.abc import Mapping

import numpy as np
import pytest

import calibrate
from calibrate.distributions import family
from calibrate.distributions.registry import FAMILIES
from calibrate.fitting import FITTABLE, Fit

VALUES = [512.0, 498.0, 530.0, 521.0, 507.0, 515.0, 541.0, 489.0, 526.0, 503.0, 518.0, 509.0]

GIVEN = {
    "weibull3": {"threshold": 450.0},
    "lognormal3": {"threshold": 400.0},
    "beta": {"lower": 400.0, "upper": 650.0},
    "truncated_normal": {"lower": 400.0},
}


@pytest.fixture(params=[name for name in FITTABLE if name != "student_t"])
def fitted(request):
    """A fit by every family, but the one for which this light-tailed sample has no maximum."""
    return calibrate.fit(VALUES, request.param, fixed=GIVEN.get(request.param))


def test_all_families_can_be_fitted_but_the_constant_and_what_is_only_predicted():
    assert set(FITTABLE) == set(FAMILIES) - {"constant", "log_student_t"}


def test_mappings_are_keyed_by_the_names_of_the_parameters(fitted):
    names = family(fitted.family).parameter_names
    for mapping in (fitted.parameters, fitted.standard_errors):
        assert isinstance(mapping, Mapping)
        assert tuple(mapping) == names
        assert all(type(value) is float for value in mapping.values())
    assert fitted.covariance.shape == (len(fitted.free), len(fitted.free))
    assert set(fitted.free) <= set(names)


def test_numbers_of_a_fit_are_plain(fitted):
    for value in (fitted.log_likelihood, fitted.aicc, fitted.anderson_darling):
        assert type(value) is float
    assert np.isfinite([fitted.log_likelihood, fitted.aicc]).all()
    # The bounds of a uniform fit are values of the sample, where the logarithms in A² have no bound.
    assert np.isfinite(fitted.anderson_darling) == (fitted.family != "uniform")
    assert fitted.n == len(VALUES)
    assert fitted.status == "converged"


def test_distribution_belongs_to_the_parameters(fitted):
    again = calibrate.distribution(fitted.family, **fitted.parameters)
    x = np.array([495.0, 515.0, 535.0])
    np.testing.assert_array_equal(fitted.distribution.cdf(x), again.cdf(x))
    assert fitted.distribution.shape == ()


def test_example_of_the_manual():
    f = calibrate.fit(VALUES, family="lognormal")
    logs = np.log(VALUES)
    expected = {"median": np.exp(logs.mean()), "log_sd": logs.std()}
    assert f.parameters == pytest.approx(expected, rel=1e-12)
    # Standard errors of mean and standard deviation of normal logarithms, by the information: s/√n and s/√(2n).
    errors = {"median": expected["median"] * logs.std() / np.sqrt(12), "log_sd": logs.std() / np.sqrt(24)}
    assert f.standard_errors == pytest.approx(errors, rel=1e-9)
    assert f.comparison is None


@pytest.mark.parametrize("families", [["lognormal", "weibull"], ("weibull", "lognormal"), "best"])
def test_best_of_several(families):
    f = calibrate.fit(VALUES, families)
    assert isinstance(f, Fit)
    candidates = f.comparison.candidates
    assert f.aicc == min(c.aicc for c in candidates if c.converged)
    assert f.family == f.comparison.recommended
    if families != "best":
        assert {c.family for c in candidates} == set(families)


def test_best_is_the_default():
    assert calibrate.fit(VALUES).parameters == calibrate.fit(VALUES, "best").parameters


def test_a_failed_search_is_an_input_error_with_its_reason():
    with pytest.raises(
        calibrate.InputError, match=r"^The family 'student_t' cannot be fitted: the likelihood "
    ):
        calibrate.fit(VALUES, "student_t")
    assert issubclass(calibrate.InputError, ValueError)


@pytest.mark.parametrize("kind", [list, tuple, np.array, lambda v: np.array(v, dtype=np.float32)])
def test_any_row_of_numbers(kind):
    assert calibrate.fit(kind(VALUES), "gumbel").parameters == calibrate.fit(VALUES, "gumbel").parameters


def test_words_of_a_fit():
    words = repr(calibrate.fit([1.0, 2.0, 3.0, 4.0], "normal"))
    assert words == "<Fit of normal(location=2.5, scale=1.11803) to 4 values>"
