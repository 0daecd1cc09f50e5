"""Moments by quadrature of the density, from moments to parameters and back, and derivatives through the moments."""

import numpy as np
import pytest

from calibrate.distributions import distribution, family

from .cases import CASES, integrated_moments, made, sets, spread

TWO_MOMENTS = [n for n in CASES if len(family(n).moment_names) == 2]
ONES = {"threshold": 0.2, "shape": 0.1, "freedom": 6.0, "lower": 0.1, "upper": 4.0}
KEPT = {  # values beside mean 1, several where the family bends
    **{n: [{k: ONES[k] for k in family(n).moments_keep}] for n in TWO_MOMENTS},
    "gev": [{"shape": s} for s in (-0.4, -1e-7, 0.0, 1e-7, 0.2, 0.45)],
    "student_t": [{"freedom": f} for f in (2.1, 8.0, 500.0)],
    "beta": [{"lower": 0.0, "upper": 4.0}, {"lower": -10.0, "upper": 1.5}, {}],
    "truncated_normal": [{"lower": 0.0}, {"upper": 1.6}, {"lower": 0.4, "upper": 1.9}, {}],
}
MOMENTS = [
    pytest.param(n, 0.55 if n == "beta" and not k else 1.0, cov, k, id=f"{n}-{cov}-{k}")
    for n in TWO_MOMENTS
    for k in KEPT[n]
    for cov in (0.01, 0.1, 0.3)
]
INFINITE = [  # and whether the mean is infinite too
    ("frechet", (2.0, 1.5), False),
    ("frechet", (1.0, 0.8), True),
    ("gev", (5.0, 0.5, 0.7), False),
    ("gev", (0.0, 1.0, 1.2), True),
    ("student_t", (0.0, 1.0, 1.7), False),
    ("log_student_t", (1.0, 0.1, 50.0), True),
]
FINITE = [
    s
    for s in sets(without=("constant", "log_student_t"))
    if s.values not in {i[:2] for i in INFINITE} | {("student_t", (-1.0, 0.5, 1.0))}
]


@pytest.mark.parametrize(("name", "parameters"), FINITE)
def test_moments_are_integrals_over_all_quantiles(name, parameters):
    d = made(name, parameters)
    mean, sd = integrated_moments(d)
    assert float(d.mean) == pytest.approx(mean, rel=0, abs=1e-9 * sd)
    assert float(d.sd) == pytest.approx(sd, rel=1e-9)
    if d.mean != 0:
        assert float(d.cov) == pytest.approx(float(d.sd) / abs(float(d.mean)), rel=1e-12)


@pytest.mark.parametrize(("name", "parameters", "mean_too"), INFINITE)
def test_moments_that_do_not_exist_are_infinite(name, parameters, mean_too):
    d = made(name, parameters)
    assert np.isinf(d.sd)
    assert np.isinf(d.mean) == mean_too


def test_a_cauchy_variable_has_no_moments():
    d = made("student_t", (-1.0, 0.5, 1.0))
    assert np.isnan(d.mean)
    assert np.isnan(d.sd)


@pytest.mark.parametrize(("name", "mean", "cov", "kept"), MOMENTS)
def test_moments_to_parameters_and_back(name, mean, cov, kept):
    d = distribution(name, mean=mean, cov=cov, **kept)
    assert float(d.mean) == pytest.approx(mean, rel=1e-11)
    assert float(d.sd) == pytest.approx(cov * mean, rel=1e-11)
    same = distribution(name, mean=mean, sd=cov * mean, **kept)
    for p, value in d.parameters.items():
        assert float(same.parameters[p]) == pytest.approx(float(value), rel=1e-9, abs=1e-9 * spread(d))
    again = distribution(name, **d.parameters)
    np.testing.assert_array_equal(again.x([-3.0, 0.0, 3.0]), d.x([-3.0, 0.0, 3.0]))


@pytest.mark.parametrize("scale", [1e-6, 1.0, 1e12])
@pytest.mark.parametrize("cov", [1e-4, 1e-3, 0.5, 1.0, 3.0])
@pytest.mark.parametrize("name", ["lognormal", "weibull", "frechet", "gamma", "gumbel", "normal", "uniform"])
def test_moments_near_and_far_from_zero_scatter(name, cov, scale):
    d = distribution(name, mean=1.7 * scale, cov=cov)
    assert float(d.mean) == pytest.approx(1.7 * scale, rel=1e-11)
    assert float(d.cov) == pytest.approx(cov, rel=1e-10)


@pytest.mark.parametrize("name", [n for n in TWO_MOMENTS if not family(n).mean_positive and not KEPT[n][0]])
def test_negative_means_take_the_cov_of_their_size(name):
    d = distribution(name, mean=-3.0, cov=0.2)
    assert float(d.mean) == pytest.approx(-3.0)
    assert float(d.sd) == pytest.approx(0.6)


def test_the_mean_of_an_exponential_variable_is_enough():
    assert float(distribution("exponential", mean=4.0).parameters["scale"]) == 4.0


def central(f, at, step):
    """Return df/dx by Richardson's extrapolation of central differences of an elementwise f, error of order step**6."""
    h = step * np.array([1.0, 0.5, 0.25])
    differences = (f(at + h) - f(at - h)) / (2.0 * h)
    return float(np.dot(differences, [1.0, -20.0, 64.0])) / 45.0


@pytest.mark.parametrize(("name", "mean", "cov", "kept"), [m for m in MOMENTS if m.values[2] > 0.05])
@pytest.mark.parametrize("second", ["cov", "sd"])
def test_derivatives_of_parameters_by_what_was_given(name, mean, cov, kept, second):
    given = {"mean": mean, second: cov * mean if second == "sd" else cov, **kept}
    member = family(name)
    slopes = member.argument_slopes({k: np.asarray(v) for k, v in given.items()})
    own = member.solve(given)
    for argument, value in given.items():
        step = 2e-3 * cov * mean
        for p in member.parameter_names:
            if np.isinf(own[p]):
                assert slopes[p][argument] == 0.0
                continue
            expected = central(lambda v, a=argument, p=p: member.solve({**given, a: v})[p], value, step)
            size = abs(float(own[p]))
            assert float(slopes[p][argument]) == pytest.approx(expected, rel=1e-7, abs=1e-8 * (size + 1.0)), (
                p,
                argument,
            )


@pytest.mark.parametrize(("name", "parameters"), [s for s in FINITE if family(s.values[0]).moment_names])
def test_derivatives_of_moments_by_parameters(name, parameters):
    """Steps along the size of each parameter; a shape next to zero is stepped across it."""
    member = family(name)
    slopes = member.moment_slopes(tuple(np.asarray(p) for p in parameters))
    sd = float(made(name, parameters).sd)
    for i, p in enumerate(parameters):
        if not np.isfinite(p):
            continue
        unit = sd if member.parameters[i].carries_unit else max(abs(p), 0.05)
        for j in (0, 1):

            def moment(v, i=i, j=j):
                moved = tuple(np.asarray(v if k == i else q) for k, q in enumerate(parameters))
                return member.moments(moved)[j]

            expected = central(moment, p, 0.005 * unit)
            assert float(slopes[i][j]) == pytest.approx(expected, rel=1e-7, abs=1e-8 * sd / unit), (i, j)


def test_own_parameters_have_themselves_as_derivatives():
    slopes = family("gumbel").argument_slopes({"location": np.asarray(1.0), "scale": np.asarray(2.0)})
    assert {p: {a: float(v) for a, v in row.items()} for p, row in slopes.items()} == {
        "location": {"location": 1.0, "scale": 0.0}, "scale": {"location": 0.0, "scale": 1.0},
    }  # fmt: skip
