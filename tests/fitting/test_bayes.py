"""Conjugate updating by hand, and the limits of no and of overwhelming prior knowledge."""

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.fitting import fit_family

X = np.array([31.2, 28.7, 30.5, 33.1, 29.4, 27.9, 30.0, 32.2])
NOTHING = {"prior_mean": 30.0, "prior_cov": 0.1, "prior_n": 0.0, "prior_nu": 0.0}
SOME = {"prior_mean": 30.0, "prior_cov": 0.1, "prior_n": 4.0, "prior_nu": 6.0}


def updated(values, family="normal", **options):
    return fit_family(values, family, method="bayes", options={**NOTHING, **options})


def test_normal_by_hand():
    """n'' = n' + n and so on, as ISO 12491:1997 writes it (from memory); squares about zero, unlike in the code."""
    found = updated(X, **SOME)
    n1, m1, nu1, s1 = 4.0, 30.0, 6.0, 3.0
    n, m, nu, s = 8, X.mean(), 7, X.std(ddof=1)
    n2, nu2 = n1 + n, nu1 + nu + 1
    m2 = (n1 * m1 + n * m) / n2
    s2 = np.sqrt((nu1 * s1**2 + n1 * m1**2 + nu * s**2 + n * m**2 - n2 * m2**2) / nu2)
    assert found.parameters == pytest.approx({"location": m2, "scale": s2}, rel=1e-12)
    t = stats.t(nu2, m2, s2 * np.sqrt(1 + 1 / n2))
    p = [0.001, 0.05, 0.5, 0.99]
    np.testing.assert_allclose(found.own_predictive.ppf(p), t.ppf(p), rtol=1e-9)
    assert found.standard_errors == pytest.approx(
        {"location": s2 / np.sqrt(n2), "scale": s2 / np.sqrt(2 * nu2)}, rel=1e-12
    )


def test_lognormal_is_the_same_of_the_logarithms():
    log_sd = np.sqrt(np.log(1 + 0.1**2))
    found = updated(X, "lognormal", **SOME)
    n2, nu2, m1 = 12.0, 14.0, np.log(30.0) - 0.5 * log_sd**2
    y = np.log(X)
    m2 = (4 * m1 + 8 * y.mean()) / n2
    squares = 6 * log_sd**2 + 4 * m1**2 + 7 * y.var(ddof=1) + 8 * y.mean() ** 2 - n2 * m2**2
    s2 = np.sqrt(squares / nu2)
    assert found.parameters == pytest.approx({"median": np.exp(m2), "log_sd": s2}, rel=1e-9)
    t = stats.t(nu2, m2, s2 * np.sqrt(1 + 1 / n2))
    np.testing.assert_allclose(found.own_predictive.ppf([0.01, 0.5]), np.exp(t.ppf([0.01, 0.5])), rtol=1e-9)


@pytest.mark.parametrize("family", ["normal", "lognormal"])
def test_without_prior_knowledge_the_prediction_is_that_of_en_1990(family):
    """EN 1990 D.7.2, V_X unknown: k_n = t(0.95; n - 1) sqrt(1 + 1/n), 2.00 for n = 8 in Table D1 (from memory)."""
    y = np.log(X) if family == "lognormal" else X
    k = stats.t(7).ppf(0.95) * np.sqrt(1 + 1 / 8)
    assert k == pytest.approx(2.00, abs=0.012)  # the printed table rounds, 0.012 at most
    expected = y.mean() - k * y.std(ddof=1)
    found = float(updated(X, family).own_predictive.ppf(0.05))
    assert found == pytest.approx(np.exp(expected) if family == "lognormal" else expected, rel=1e-9)


@pytest.mark.parametrize("family", ["normal", "lognormal"])
def test_what_is_not_counted_does_not_matter(family):
    other = updated(X, family, prior_mean=900.0, prior_cov=2.0)
    assert other.parameters == updated(X, family).parameters
    assert "prior-contradicted" not in {d.code for d in other.doubts}


def test_overwhelming_knowledge_stays():
    found = updated(X, prior_mean=30.0, prior_cov=0.05, prior_n=1e9, prior_nu=1e9)
    assert found.parameters == pytest.approx({"location": 30.0, "scale": 1.5}, rel=1e-6)
    np.testing.assert_allclose(
        found.own_predictive.ppf([0.01, 0.9]), stats.norm(30.0, 1.5).ppf([0.01, 0.9]), rtol=1e-6
    )


@pytest.mark.parametrize("prior", [NOTHING, SOME, {**SOME, "prior_n": 0.0}])
@pytest.mark.parametrize("family", ["normal", "lognormal"])
def test_two_halves_one_after_the_other_are_the_whole(family, prior):
    first = updated(X[:4], family, **prior)
    level, scatter = first.parameters.values()
    if family == "lognormal":
        cov = np.sqrt(np.expm1(scatter**2))
        mean = level * np.sqrt(1 + cov**2)
    else:
        mean, cov = level, scatter / level
    n, nu = prior["prior_n"] + 4, float(first.own_predictive.parameters["freedom"])
    second = updated(X[4:], family, prior_mean=mean, prior_cov=cov, prior_n=n, prior_nu=nu)
    whole = updated(X, family, **prior)
    assert second.parameters == pytest.approx(whole.parameters, rel=1e-12)
    predicted, expected = second.own_predictive.parameters, whole.own_predictive.parameters
    for name, value in expected.items():
        assert predicted[name] == pytest.approx(value, rel=1e-12), name


def test_a_prior_far_from_the_sample_is_doubted():
    assert "prior-contradicted" not in {d.code for d in updated(X, **SOME).doubts}
    far = updated(X, **{**SOME, "prior_mean": 45.0})
    assert "prior-contradicted" in {d.code for d in far.doubts}
    no_scatter_known = updated(X, prior_mean=45.0, prior_n=4.0)
    assert "prior-contradicted" in {d.code for d in no_scatter_known.doubts}


def test_a_prior_mean_of_zero_is_a_number_where_no_scatter_is_taken_from_it():
    assert updated(X, prior_mean=0.0).parameters == updated(X).parameters
    around_zero = X - X.mean()
    assert updated(around_zero, prior_mean=0.0, prior_n=5.0).parameters["location"] == pytest.approx(
        0.0, abs=1e-12
    )


@pytest.mark.parametrize(
    ("family", "options", "words"),
    [
        ("normal", {"prior_cov": 0.0}, "prior_cov must be positive; got 0."),
        ("normal", {"prior_n": -1.0}, "prior_n must be zero or positive; got -1."),
        ("normal", {"prior_nu": np.inf}, "prior_nu must be zero or positive; got inf."),
        ("lognormal", {"prior_mean": -3.0}, "prior_mean must be positive; got -3."),
        ("normal", {"prior_mean": np.nan}, "prior_mean must be a finite number; got nan."),
        ("normal", {"prior_mean": 0.0, "prior_nu": 3.0}, "prior_mean must not be zero"),
    ],
)
def test_knowledge_that_is_none_is_refused(family, options, words):
    with pytest.raises(InputError) as error:
        updated(X, family, **options)
    assert words in str(error.value)


def test_no_parameter_can_be_held():
    with pytest.raises(InputError, match="no parameter can be fixed"):
        fit_family(X, "normal", method="bayes", fixed={"scale": 1.0}, options=NOTHING)
