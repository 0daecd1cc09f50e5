"""Probabilities, densities, quantiles and moments against scipy.stats, for every family that it has."""

import numpy as np
import pytest
from scipy import stats

from calibrate.distributions import family_names

from .cases import INF, made, sets, spread

P = np.array([1e-9, 1e-6, 1e-3, 0.05, 0.3, 0.5, 0.8, 0.98])

# Own parameters -> the same distribution there. Its generalised extreme values count the shape the other way round.
PEERS = {
    "normal": stats.norm,
    "lognormal": lambda median, log_sd: stats.lognorm(log_sd, scale=median),
    "gumbel": stats.gumbel_r,
    "gumbel_min": stats.gumbel_l,
    "weibull": lambda scale, shape: stats.weibull_min(shape, scale=scale),
    "frechet": lambda scale, shape: stats.invweibull(shape, scale=scale),
    "gamma": lambda shape, scale: stats.gamma(shape, scale=scale),
    "uniform": lambda lower, upper: stats.uniform(lower, upper - lower),
    "exponential": lambda scale: stats.expon(scale=scale),
    "weibull3": lambda threshold, scale, shape: stats.weibull_min(shape, threshold, scale),
    "lognormal3": lambda threshold, median, log_sd: stats.lognorm(log_sd, threshold, median),
    "gev": lambda location, scale, shape: stats.genextreme(-shape, location, scale),
    "beta": lambda a, b, lower, upper: stats.beta(a, b, lower, upper - lower),
    "student_t": lambda location, scale, freedom: stats.t(freedom, location, scale),
    "truncated_normal": lambda location, scale, lower, upper: stats.truncnorm(
        (lower - location) / scale, (upper - location) / scale, location, scale
    ),
}
UNKNOWN_THERE = ("constant", "log_student_t")

# Far beyond the parent's centre the peer loses half its digits; test_against_mpmath.py and test_moments.py have these.
PEER_LACKS_DIGITS = {
    ("truncated_normal", (-30.0, 1.0, 0.0, INF)),
    ("truncated_normal", (500.0, 1.0, 380.0, 400.0)),
}
SETS = [s for s in sets(without=UNKNOWN_THERE) if s.values not in PEER_LACKS_DIGITS]
# Where moments do not exist, and next to shape 0, the peer's are wrong; test_moments.py has these by other routes.
PEER_LACKS_MOMENTS = {
    ("frechet", (2.0, 1.5)), ("frechet", (1.0, 0.8)), ("student_t", (-1.0, 0.5, 1.0)),
    ("gev", (5.0, 0.5, 0.7)), ("gev", (1.0, 1.0, 1e-9)),
}  # fmt: skip
WITH_MOMENTS = [s for s in SETS if s.values not in PEER_LACKS_MOMENTS]


def test_every_family_has_a_peer_or_is_known_to_have_none():
    assert {*PEERS, *UNKNOWN_THERE} == set(family_names())


@pytest.mark.parametrize(("name", "parameters"), SETS)
def test_quantiles(name, parameters):
    d, peer = made(name, parameters), PEERS[name](*parameters)
    rounding = 1e-12 * spread(d)
    np.testing.assert_allclose(d.ppf(P), peer.ppf(P), rtol=1e-9, atol=rounding)
    np.testing.assert_allclose(d.isf(P), peer.isf(P), rtol=1e-9, atol=rounding)


@pytest.mark.parametrize(("name", "parameters"), SETS)
def test_probabilities_and_densities(name, parameters):
    d, peer = made(name, parameters), PEERS[name](*parameters)
    x = np.concatenate((peer.ppf(P), peer.isf(P)))
    pdf = peer.pdf(x)
    np.testing.assert_allclose(d.pdf(x), pdf, rtol=1e-9)
    # Next to a bound the peer rounds the distance to it.
    rounding = 1e-15 * max(np.max(np.abs(v)) for v in (x, *parameters) if np.all(np.isfinite(v))) * pdf
    for method in ("cdf", "sf"):
        expected = getattr(peer, method)(x)
        assert np.all(np.abs(getattr(d, method)(x) - expected) <= 1e-9 * expected + rounding), method


@pytest.mark.parametrize(("name", "parameters"), WITH_MOMENTS)
def test_moments(name, parameters):
    d, peer = made(name, parameters), PEERS[name](*parameters)
    np.testing.assert_allclose(d.mean, peer.mean(), rtol=1e-9, atol=1e-12 * float(peer.std()))
    np.testing.assert_allclose(d.sd, peer.std(), rtol=1e-9)
