"""Transforms, derivatives and probabilities of every family against its slow twin, for u from -12 to 12."""

import functools

import mpmath as mp
import numpy as np
import pytest

from calibrate.distributions import family

from . import twins
from .cases import made, sets, spread

U = np.array([-12.0, -8.2, -5.0, -2.6, -1.0, 0.0, 1e-7, 0.7, 2.0, 3.8, 6.5, 12.0])
EPS = np.finfo(float).eps

SETS = sets(without=("constant",))


@pytest.fixture(autouse=True)
def _many_digits():
    with mp.workdps(twins.DIGITS):
        yield


@functools.cache
def points(name, parameters):
    """Return the parameters, and u, exact x and density at each u, as mpmath numbers."""
    exact = tuple(mp.mpf(p) for p in parameters)
    near = made(name, parameters).x(U)
    us = [mp.mpf(u) for u in U]
    return exact, [(u, *twins.quantile(name, u, exact, x)) for u, x in zip(us, near, strict=True)]


def assert_close(got, expected, relative, absolute):
    """Assert an error of at most ``relative`` times the value, or ``absolute`` where that is more."""
    for u, a, b in zip(U, np.broadcast_to(got, U.shape), expected, strict=True):
        assert abs(a - b) <= max(relative * abs(b), absolute), f"u = {u}: {a} instead of {mp.nstr(b, 17)}"


@pytest.mark.parametrize(("name", "parameters"), SETS)
def test_quantiles(name, parameters):
    d = made(name, parameters)
    expected = [x for _, x, _ in points(name, parameters)[1]]
    for got in (d.x(U), d.x_slope(U)[0], d.x_curvature(U)[0]):
        assert_close(got, expected, 1e-9, 1e-9 * spread(d))


@pytest.mark.parametrize(("name", "parameters"), SETS)
def test_derivatives_by_u(name, parameters):
    d = made(name, parameters)
    size = mp.mpf(spread(d))
    slopes, curvatures = [], []
    exact, at = points(name, parameters)
    for u, x, pdf in at:
        slope = twins.phi(u) / pdf
        slopes.append(slope)
        curvatures.append(-slope * (u + slope * twins.density_slope(name, exact, x, size)))
    _, slope, curvature = d.x_curvature(U)
    for got in (slope, d.x_slope(U)[1]):
        assert_close(got, slopes, 1e-9, 1e-12 * spread(d))
    assert_close(curvature, curvatures, 1e-9, 1e-12 * spread(d))


@pytest.mark.parametrize(("name", "parameters"), SETS)
def test_derivatives_by_parameters(name, parameters):
    d = made(name, parameters)
    got = d.parameter_slopes(U)
    exact, at = points(name, parameters)
    assert tuple(got) == family(name).parameter_names
    for i, slopes in enumerate(got.values()):
        expected = [twins.parameter_slope(name, u, exact, x, pdf, i) for u, x, pdf in at]
        assert_close(slopes, expected, 1e-9, 1e-12 * spread(d))


@pytest.mark.parametrize("u", [-1.0, -0.3, 0.0, 0.3])
def test_derivatives_by_shapes_of_a_density_that_is_all_ends(u):
    """So small shapes leave a bend and a long decay in the integrals; far out x itself is no double any more."""
    parameters = (0.05, 0.1, 0.0, 1.0)
    d = made("beta", parameters)
    exact = tuple(mp.mpf(p) for p in parameters)
    x, pdf = twins.quantile("beta", mp.mpf(u), exact, float(d.x(u)))
    for i, slope in enumerate(d.parameter_slopes(u).values()):
        expected = twins.parameter_slope("beta", mp.mpf(u), exact, x, pdf, i)
        assert abs(float(slope) - expected) <= max(1e-9 * abs(expected), 1e-12)


@pytest.mark.parametrize(("name", "parameters"), SETS)
def test_probabilities_and_densities(name, parameters):
    """Relative error of at most 1e-9, or what the rounding of x and the parameters explains."""
    d = made(name, parameters)
    exact, _ = points(name, parameters)
    lower, upper = twins.ends(name, exact)
    size = mp.mpf(spread(d))
    compared = 0
    for x in d.x(U):
        if not lower < x < upper:
            continue
        rounding = 4 * EPS * max(abs(v) for v in (x, *parameters) if np.isfinite(v))
        cdf, sf, pdf = twins.TWINS[name](mp.mpf(x), *exact)
        rate = abs(twins.density_slope(name, exact, mp.mpf(x), size))
        if rounding * max(rate, pdf / cdf, pdf / sf) > 1e-3:
            continue  # x agrees with an end of the support in nearly all digits
        compared += 1
        pairs = (
            (d.cdf, d.logcdf, cdf, pdf / cdf),
            (d.sf, d.logsf, sf, pdf / sf),
            (d.pdf, d.logpdf, pdf, rate),
        )
        for value, logarithm, expected, condition in pairs:
            allowed = 1e-9 + rounding * condition
            assert abs(value(x) - expected) <= allowed * expected
            assert abs(logarithm(x) - mp.log(expected)) <= allowed
    assert compared >= 6


@pytest.mark.parametrize(("name", "parameters"), SETS)
def test_ends_of_the_support(name, parameters):
    expected = twins.ends(name, tuple(mp.mpf(p) for p in parameters))
    np.testing.assert_allclose(made(name, parameters).support, [float(e) for e in expected], rtol=4 * EPS)
