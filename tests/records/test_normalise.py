"""Normalisation to reference conditions, and the regression behind fitted exponents."""

import numpy as np
import pytest
import statsmodels.api as sm
from scipy.optimize import minimize
from scipy.stats import norm

from calibrate.errors import InputError
from calibrate.records import Covariate, ReadOptions, read_column
from calibrate.records.censored_regression import _censored, regress
from calibrate.units import parse_unit

MM, KN = parse_unit("mm"), parse_unit("kN")
THICKNESS = Covariate(column="t", reference=1.5, unit=MM, exponent=1.3)
FIT = Covariate(column="t", reference=1.5, unit=MM, exponent="fit")


def load_tests(seed, n, *, below=None):
    """Return a file of loads 14 kN (t/1.5 mm)^1.3 with a log sd of 0.1; survivors where ``below`` was not reached."""
    rng = np.random.default_rng(seed)
    t, w = rng.choice([1.5, 2.0], n) * rng.uniform(0.97, 1.03, n), rng.uniform(20.0, 60.0, n)
    load = 14.0 * (t / 1.5) ** 1.3 * np.exp(0.1 * rng.standard_normal(n))
    cells = [f"{x:.12g}" if below is None or x < below else f">{below}" for x in load]
    lines = [f"{c},{a:.12g},{b:.12g}\n" for c, a, b in zip(cells, t, w, strict=True)]
    return "F,t,w\n" + "".join(lines), load, t, w


def read(path, *covariates, **options):
    return read_column(path, "F", unit=KN, options=ReadOptions(normalise=covariates, **options))


def test_a_given_exponent(write):
    path = write("F,t\n14,1.5\n>20,2.0\n10..11,1.2\n")
    sample = read(path, THICKNESS, censoring=True)
    factors = np.array([1.0, (1.5 / 2.0) ** 1.3, (1.5 / 1.2) ** 1.3])
    np.testing.assert_allclose(sample.observations.lower, [14, 20, 10] * factors, rtol=1e-14)
    np.testing.assert_allclose(sample.observations.upper, [14, np.inf, 11 * factors[2]], rtol=1e-14)
    result = sample.normalisation
    np.testing.assert_allclose(result.factors, factors, rtol=1e-14)
    np.testing.assert_array_equal(result.before.lower, [14.0, 20.0, 10.0])
    np.testing.assert_array_equal(result.added_variance, 0.0)
    assert (result.covariates, result.references, result.fitted) == (("t",), (1.5,), (False,))
    assert (result.residual_sd, result.freedom) == (None, None)


def test_the_standard_error_of_a_given_exponent_adds_variance(write):
    known = Covariate(column="t", reference=1.5, unit=MM, exponent=1.3, standard_error=0.2)
    result = read(write("F,t\n14,1.5\n20,2\n"), known).normalisation
    np.testing.assert_allclose(result.added_variance, [0.0, (0.2 * np.log(2.0 / 1.5)) ** 2], rtol=1e-13)


def test_the_units_of_column_and_reference_may_differ(write):
    inches = ReadOptions(normalise=(THICKNESS,), units={"t": parse_unit("in")})
    sample = read_column(write("F,t\n14,0.1\n"), "F", unit=KN, options=inches)
    np.testing.assert_allclose(sample.values, 14 * (1.5 / 2.54) ** 1.3, rtol=1e-14)


def test_a_fitted_exponent_is_least_squares_on_logarithms(write):
    content, load, t, w = load_tests(1, 40)
    width = Covariate(column="w", reference=30.0, unit=MM, exponent="fit")
    sample = read(write(content), FIT, width)
    design = sm.add_constant(np.column_stack([np.log(t / 1.5), np.log(w / 30.0)]))
    witness = sm.OLS(np.log(load), design).fit()
    result = sample.normalisation
    np.testing.assert_allclose(result.exponents, witness.params[1:], rtol=1e-8)
    np.testing.assert_allclose(result.standard_errors, witness.bse[1:], rtol=1e-8)
    np.testing.assert_allclose(result.covariance, witness.cov_params()[1:, 1:], rtol=1e-8)
    np.testing.assert_allclose(result.residual_sd, np.sqrt(witness.scale), rtol=1e-8)
    assert result.freedom == witness.df_resid
    z = design[:, 1:]
    expected = [row @ witness.cov_params()[1:, 1:] @ row for row in z]
    np.testing.assert_allclose(result.added_variance, expected, rtol=1e-8)
    # what is left shows no trend with the covariates
    left = sm.OLS(np.log(sample.values), design).fit()
    np.testing.assert_allclose(left.params[1:], 0.0, atol=1e-9)


def test_given_and_fitted_exponents_together(write):
    content, load, t, w = load_tests(2, 30)
    width = Covariate(column="w", reference=30.0, unit=MM, exponent=-0.1, standard_error=0.05)
    result = read(write(content), width, FIT).normalisation
    response = np.log(load) + 0.1 * np.log(w / 30.0)
    witness = sm.OLS(response, sm.add_constant(np.log(t / 1.5))).fit()
    np.testing.assert_allclose(result.exponents, [-0.1, witness.params[1]], rtol=1e-8)
    np.testing.assert_allclose(result.standard_errors, [0.05, witness.bse[1]], rtol=1e-8)
    assert result.fitted == (False, True)


def test_known_exponents_are_recovered_also_with_survivors(write):
    """Over 60 samples the mean is 1.3 within 3 standard errors; leaving survivors out would bend it far down."""
    found, naive = [], []
    for seed in range(60):
        content, load, t, _ = load_tests(100 + seed, 40, below=18.0)
        found.append(read(write(content), FIT, censoring=True).normalisation.exponents[0])
        failed = load < 18.0
        naive.append(np.polyfit(np.log(t[failed]), np.log(load[failed]), 1)[0])
    error = np.std(found, ddof=1) / np.sqrt(len(found))
    assert abs(np.mean(found) - 1.3) < 3.0 * error
    assert np.mean(naive) < 1.3 - 6.0 * error


def negative_log_likelihood(theta, design, lower, upper):
    """Independent of the code under test: in (coefficients, log sd), with scipy's distribution functions."""
    sd = np.exp(theta[-1])
    mean = design @ theta[:-1]
    exact = lower == upper
    total = norm.logpdf(lower[exact], mean[exact], sd).sum()
    low, high = (norm.cdf(b[~exact], mean[~exact], sd) for b in (lower, upper))
    return -(total + np.log(high - low).sum())


def test_regression_with_every_kind_of_bound_is_maximum_likelihood():
    rng = np.random.default_rng(5)
    design = np.column_stack([np.ones(80), rng.normal(size=80)])
    y = design @ [2.0, 0.7] + 0.5 * rng.standard_normal(80)
    lower, upper = y.copy(), y.copy()
    upper[:15] = np.inf
    lower[15:30] = -np.inf
    lower[30:45], upper[30:45] = np.floor(4 * y[30:45]) / 4, np.floor(4 * y[30:45]) / 4 + 0.25
    found = regress(design, lower, upper)
    args = (design, lower, upper)
    best = minimize(
        negative_log_likelihood, [2.0, 0.7, -0.7], args=args, method="BFGS", options={"gtol": 1e-6}
    )
    m, p = 35, 2
    np.testing.assert_allclose(found.coefficients, best.x[:2], atol=1e-6)
    np.testing.assert_allclose(found.residual_sd * np.sqrt((m - p) / m), np.exp(best.x[2]), rtol=1e-6)
    step = 1e-4 * np.eye(3)
    f = [[[negative_log_likelihood(best.x + s * a + r * b, *args) for s in (1, -1) for r in (1, -1)] for b in step]
         for a in step]  # fmt: skip
    information = np.array([[(q[0] - q[1] - q[2] + q[3]) / 4e-8 for q in row] for row in f])
    witness = np.linalg.inv(information)[:2, :2] * m / (m - p)
    np.testing.assert_allclose(found.covariance, witness, rtol=1e-4)


def test_newton_without_bounds_is_least_squares():
    rng = np.random.default_rng(6)
    design = np.column_stack([np.ones(12), rng.normal(size=12)])
    y = design @ [1.0, -2.0] + rng.standard_normal(12)
    plain = regress(design, y, y)
    newton = _censored(design, y, y, np.array([0.5, -1.0]), 2.0)
    np.testing.assert_allclose(newton.coefficients, plain.coefficients, rtol=1e-9)
    np.testing.assert_allclose(newton.covariance, plain.covariance, rtol=1e-8)
    np.testing.assert_allclose(newton.residual_sd, plain.residual_sd, rtol=1e-9)


@pytest.mark.parametrize(
    ("content", "covariates", "words"),
    [
        ("F,t\n14,0\n15,-1\n", (THICKNESS,), "rods.csv:2: Column 't': '0' is not positive, as a power law needs."),
        ("F,t\n14,x\n", (THICKNESS,), "rods.csv:2: Column 't': 'x' is not a number."),
        ("F,t\n14,1\n", (Covariate(column="T", reference=1.5, unit=MM, exponent=1),), "column 'T'. Did you mean 't'?"),
        ("F,t\n14,1\n15,2\n", (FIT,), "at least 3 specimens must be observed exactly, not 2. Give the exponents"),
        ("F,t\n14,1\n>15,2\n16,3\n", (FIT,), "at least 3 specimens must be observed exactly, not 2."),
        ("F,t\n14,2\n15,2\n16,2\n", (FIT,), "cannot be told from the values: the covariates do not vary."),
        ("F,t,w\n14,2,4\n15,3,6\n16,4,8\n15,2.5,5\n",
         (FIT, Covariate(column="w", reference=2, unit=MM, exponent="fit")), "do not vary independently."),
        ("F,t\n14,1\n-2,2\n16,3\n<0,4\n17,5\n", (FIT,), "rods.csv:3: -2 is not positive, so an exponent"),
        ("F,t\n1,1\n2,2\n3,3\n>4,4\n", (FIT,), "finds no maximum of the likelihood. Give the exponents as numbers."),
    ],
)  # fmt: skip
def test_refused_normalisations(write, refusal, content, covariates, words):
    options = ReadOptions(normalise=covariates, censoring=True)
    assert words in refusal(write(content), column="F", unit=KN, options=options)


def test_a_reference_of_another_quantity_is_refused(write, refusal):
    options = ReadOptions(normalise=(THICKNESS,), units={"t": KN})
    text = refusal(write("F,t\n14,1\n"), column="F", unit=KN, options=options)
    assert "Column 't' is a force (kg·m/s²), its reference 1.5 mm is a length (m)." in text


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"reference": 0.0}, "reference 0 must be positive"),
        ({"exponent": "best"}, "exponent 'best' must be a number or 'fit'"),
        ({"exponent": np.inf}, "must be a finite number"),
        ({"standard_error": -1.0}, "must not be negative"),
        ({"exponent": "fit", "standard_error": 0.1}, "finds its own standard error"),
    ],
)
def test_refused_covariates(change, words):
    with pytest.raises(InputError, match=words):
        Covariate(**{"column": "t", "reference": 1.5, "unit": MM, "exponent": 1.3, **change})


def test_options_that_contradict_each_other():
    with pytest.raises(InputError, match="after normalisation each specimen would have its own"):
        ReadOptions(normalise=(FIT,), above=3.0)
    with pytest.raises(InputError, match="'t' is stated twice"):
        ReadOptions(normalise=(FIT, THICKNESS))
