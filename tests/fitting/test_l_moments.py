"""L-moments against plain sums, population integrals and simulation."""

import itertools
import math

import mpmath
import numpy as np
import pytest

from calibrate.distributions import distribution
from calibrate.fitting import fit_family
from calibrate.fitting.methods.l_moments import SOLUTIONS, sample_l_moments

LAWS = {
    "normal": {"location": 30.0, "scale": 4.0},
    "lognormal": {"median": 0.8, "log_sd": 0.35},
    "gumbel": {"location": 21.0, "scale": 5.0},
    "gumbel_min": {"location": -21.0, "scale": 5.0},
    "weibull": {"scale": 460.0, "shape": 6.0},
    "frechet": {"scale": 3.0, "shape": 4.5},
    "gamma": {"shape": 0.7, "scale": 12.0},
    "uniform": {"lower": -4.0, "upper": 11.0},
    "exponential": {"scale": 0.04},
    "weibull3": {"threshold": 10.0, "scale": 6.0, "shape": 1.4},
    "gev": {"location": 4.0, "scale": 0.5, "shape": 0.2},
}
ESTIMATE = {"weibull3": ("threshold",)}


def by_l_moments(values, family, **more):
    return fit_family(values, family, method="l_moments", estimate=ESTIMATE.get(family, ()), **more)


def population(family, parameters, count):
    """Return l1, l2, ... as integrals of the quantile over shifted Legendre polynomials of p (Hosking 1990)."""
    u, step = np.linspace(-12.0, 12.0, 24_001, retstep=True)
    law = distribution(family, **parameters)
    x = law.x(u)
    x = np.log(x) if family == "lognormal" else x
    p = distribution("normal", location=0.0, scale=1.0).cdf(u)
    weight = step * np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi)
    shifted = [np.polynomial.Legendre.basis(r, domain=[0.0, 1.0])(p) for r in range(count)]
    return np.array([np.sum(weight * polynomial * x) for polynomial in shifted])


def test_every_family_with_formulas_is_here():
    assert {*LAWS, "lognormal3"} == set(SOLUTIONS)


@pytest.mark.parametrize("family", LAWS)
def test_formulas_against_population_integrals(family):
    count, solve = SOLUTIONS[family]
    found = solve(population(family, LAWS[family], count))
    assert found == pytest.approx(LAWS[family], rel=1e-5)


@pytest.mark.parametrize("shape", [-2.0, -0.3, -1e-4, -1e-8, 0.0, 1e-8, 1e-4, 0.5, 0.9])
def test_shapes_of_extreme_values(shape):
    """Closed forms of Hosking and Wallis 1997, A.6, with k = -shape (from memory)."""
    k = -shape
    if k == 0.0:
        moments = np.array([np.euler_gamma, math.log(2), math.log(2) * (2 * math.log(3) / math.log(2) - 3)])
    else:
        gamma = math.gamma(1 + k)
        second = gamma * -math.expm1(-k * math.log(2)) / k
        ratio = 2 * math.expm1(-k * math.log(3)) / math.expm1(-k * math.log(2)) - 3
        moments = np.array([(1 - gamma) / k, second, second * ratio])
    found = SOLUTIONS["gev"][1](moments)
    assert found == pytest.approx({"location": 0.0, "scale": 1.0, "shape": shape}, abs=1e-7)


@pytest.mark.parametrize(
    "shape", [-20.0, -0.4, -1e-3, -1e-7, -1e-12, 0.0, 1e-12, 1e-9, 1e-7, 1e-3, 0.3, 0.5, 0.95]
)
def test_location_and_scale_of_a_given_shape(shape):
    """Closed forms of Hosking and Wallis 1997, A.7 (from memory), in 40 digits, with k = -shape."""
    x = np.random.default_rng(4).gumbel(20.0, 3.0, 25)
    first, second = (mpmath.mpf(float(v)) for v in sample_l_moments(x, 2))
    with mpmath.workdps(40):
        if shape == 0.0:
            scale = second / mpmath.log(2)
            location = first - scale * mpmath.euler
        else:
            k = -mpmath.mpf(shape)
            scale = second * k / ((1 - mpmath.mpf(2) ** -k) * mpmath.gamma(1 + k))
            location = first - scale * (1 - mpmath.gamma(1 + k)) / k
    found = fit_family(x, "gev", method="l_moments", fixed={"shape": shape})
    expected = {"location": float(location), "scale": float(scale), "shape": shape}
    assert found.parameters == pytest.approx(expected, rel=1e-13)


def test_a_given_shape_of_zero_is_the_gumbel_family():
    x = np.random.default_rng(4).gumbel(20.0, 3.0, 40)
    given, gumbel = fit_family(x, "gev", method="l_moments", fixed={"shape": 0.0}), by_l_moments(x, "gumbel")
    for name in ("location", "scale"):
        assert given.parameters[name] == pytest.approx(gumbel.parameters[name], rel=1e-14)
        assert given.standard_errors[name] == pytest.approx(gumbel.standard_errors[name], rel=1e-9)
    assert given.log_likelihood == pytest.approx(gumbel.log_likelihood, rel=1e-13)
    assert given.aicc == pytest.approx(gumbel.aicc, rel=1e-12)


def test_the_shape_that_was_estimated_gives_the_same_fit():
    x = np.random.default_rng(6).gumbel(20.0, 3.0, 40)
    free = by_l_moments(x, "gev")
    given = fit_family(x, "gev", method="l_moments", fixed={"shape": free.parameters["shape"]})
    assert given.parameters == pytest.approx(free.parameters, rel=1e-12)


@pytest.mark.parametrize("shape", [-0.3, 0.15])
def test_standard_errors_of_a_given_shape_are_the_scatter(shape):
    law = distribution("gev", location=4.0, scale=0.5, shape=shape)
    rng, count = np.random.default_rng(9), 500
    held = {"shape": shape}
    fits = [fit_family(x, "gev", method="l_moments", fixed=held) for x in law.sample(rng, (count, 60))]
    names = ("location", "scale")
    estimates = np.array([[f.parameters[n] for n in names] for f in fits])
    errors = np.array([[f.standard_errors[n] for n in names] for f in fits])
    scatter = estimates.std(axis=0, ddof=1)
    np.testing.assert_allclose(np.median(errors, axis=0), scatter, rtol=3 / math.sqrt(2 * count))
    bias = estimates.mean(axis=0) - [4.0, 0.5]
    assert np.all(np.abs(bias) < 4.0 * scatter / math.sqrt(count))


def test_sample_moments_are_means_over_all_subsets():
    """l_r is the mean over all r-subsets of sum (-1)^k C(r-1, k) x_(r-k:r)/r (Hosking 1990, his definition)."""
    x = np.random.default_rng(2).gamma(2.0, size=9)
    for r, found in enumerate(sample_l_moments(x), start=1):
        signs = [(-1) ** k * math.comb(r - 1, k) / r for k in range(r)]
        each = [np.dot(signs, sorted(s, reverse=True)) for s in itertools.combinations(x, r)]
        assert found == pytest.approx(np.mean(each), rel=1e-12)


@pytest.mark.parametrize("family", ["normal", "lognormal", "frechet", "exponential", "weibull3", "gev"])
def test_standard_errors_are_the_scatter(family):
    law, rng, count = distribution(family, **LAWS[family]), np.random.default_rng(9), 500
    n = 200 if len(LAWS[family]) == 3 else 60  # first-order theory comes later where three parameters compete
    fits = [by_l_moments(x, family) for x in law.sample(rng, (count, n))]
    estimates = np.array([[f.parameters[n] for n in f.free] for f in fits])
    errors = np.array([[f.standard_errors[n] for n in f.free] for f in fits])
    scatter = estimates.std(axis=0, ddof=1)
    np.testing.assert_allclose(np.median(errors, axis=0), scatter, rtol=3 / math.sqrt(2 * count))


@pytest.mark.parametrize("family", LAWS)
def test_the_unit_does_not_matter(family):
    values = distribution(family, **LAWS[family]).sample(np.random.default_rng(1), 50)
    one, other = by_l_moments(values, family), by_l_moments(1000.0 * values, family)
    for name, p in one.parameters.items():
        factor = 1.0 if name in {"shape", "log_sd"} else 1000.0
        assert other.parameters[name] == pytest.approx(p * factor, rel=1e-9)
        assert other.standard_errors[name] == pytest.approx(one.standard_errors[name] * factor, rel=1e-6)


@pytest.mark.parametrize(("family", "base"), [("weibull3", "weibull"), ("lognormal3", "lognormal")])
def test_a_given_threshold_is_taken_off(family, base):
    values = distribution(base, mean=20.0, cov=0.3).sample(np.random.default_rng(1), 50)
    found = fit_family(values + 7.0, family, method="l_moments", fixed={"threshold": 7.0})
    expected = by_l_moments(values, base)
    assert found.parameters == pytest.approx({"threshold": 7.0, **expected.parameters}, rel=1e-9)
    assert found.standard_errors == pytest.approx({"threshold": 0.0, **expected.standard_errors}, rel=1e-6)


@pytest.mark.parametrize(
    ("family", "values", "more", "words"),
    [
        ("lognormal3", [1, 2, 3, 5, 9], {"estimate": ["threshold"]}, "all parameters but a given threshold"),
        ("normal", [1, 2, 3, 5, 9], {"fixed": {"scale": 2.0}}, "all parameters but a given threshold"),
        (
            "weibull3",
            [0, 0, 0, 0, 0, 9],
            {"estimate": ["threshold"]},
            "no member of the family has the L-moments",
        ),
        ("gev", [0, 0, 0, 0, 0, 9], {}, "no member of the family has the L-moments"),
        ("gev", [1, 2, 3, 5, 9], {"fixed": {"scale": 2.0}}, "a given threshold or shape of 'gev'"),
        ("gev", [1, 2, 3, 5, 9], {"fixed": {"shape": 1.0}}, "a shape of 1 or more has no mean"),
        ("gev", [1, 2, 3, 5, 9], {"fixed": {"shape": -400.0}}, "no member of the family has the L-moments"),
        ("weibull", [1, 2, 3, 5, 9], {"fixed": {"shape": 2.0}}, "all parameters but"),
    ],
)
def test_what_the_method_cannot_give(family, values, more, words):
    found = fit_family(values, family, method="l_moments", **more)
    assert found.status == "failed"
    assert words in found.reason


def test_values_outside_the_fitted_support_are_told():
    values = np.concatenate([[1.0], np.linspace(50.0, 53.5, 12)])
    found = fit_family(values, "uniform", method="l_moments")
    assert "outside-support" in [d.code for d in found.doubts]
    assert found.log_likelihood == -np.inf
