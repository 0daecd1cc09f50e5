"""Parameter sets of every family for the shared battery: typical, skewed, narrow and heavy-tailed ones.

Each set holds the own parameters in the family's order. A family that is registered without sets fails
``test_battery.test_every_family_is_in_the_battery``.
"""

import math

import numpy as np
import pytest

from calibrate.distributions import distribution, family

INF = math.inf

CASES = {
    "normal": [(0.0, 1.0), (350.0, 28.0), (-4.0, 0.01)],
    "lognormal": [(1.0, 0.05), (420.0, 0.3), (0.02, 1.5)],
    "gumbel": [(0.0, 1.0), (0.9, 0.25), (-20.0, 3.0)],
    "gumbel_min": [(0.0, 1.0), (36.0, 0.5), (-2.0, 40.0)],
    "weibull": [(60.0, 8.0), (2.0, 1.0), (0.5, 0.6), (1.0, 80.0)],
    "frechet": [(0.7, 5.0), (1.0, 40.0), (3.0, 2.2), (2.0, 1.5), (1.0, 0.8)],
    "gamma": [(16.0, 0.5), (1.0, 3.0), (0.4, 10.0), (900.0, 0.01)],
    "uniform": [(0.0, 1.0), (-3.0, 12.0), (100.0, 100.5)],
    "exponential": [(1.0,), (0.03,), (2500.0,)],
    "weibull3": [(10.0, 5.0, 2.2), (-3.0, 1.0, 0.8), (200.0, 30.0, 9.0)],
    "lognormal3": [(100.0, 40.0, 0.4), (-50.0, 60.0, 0.05), (1.0, 0.5, 1.1)],
    "gev": [(10.0, 2.0, 0.15), (0.0, 1.0, 0.0), (4.0, 0.2, -0.3), (1.0, 1.0, 1e-9), (5.0, 0.5, 0.7), (0.0, 1.0, -1.4)],
    "beta": [(2.0, 5.0, 0.0, 1.0), (0.5, 0.7, -1.0, 3.0), (1.0, 1.0, 10.0, 20.0), (90.0, 8.0, 0.0, 50.0)],
    "student_t": [(0.0, 1.0, 4.0), (30.0, 2.0, 19.0), (-1.0, 0.5, 1.0), (0.0, 1.0, 300.0), (5.0, 1.0, 2.5)],
    "log_student_t": [(420.0, 0.1, 20.0), (1.0, 0.3, 30.0), (0.05, 0.02, 15.0)],
    "truncated_normal": [
        (1.0, 0.4, 0.0, INF), (5.0, 2.0, 3.0, 6.0), (0.0, 1.0, -INF, INF), (0.0, 2.0, -INF, -7.0), (0.0, 1.0, 4.0, 4.2),
        (-30.0, 1.0, 0.0, INF), (500.0, 1.0, 380.0, 400.0),
    ],
    "constant": [(7.5,), (-2.0,)],
}  # fmt: skip


def label(name, parameters):
    """Return a short readable name of a set, for test ids."""
    return f"{name}-{','.join(f'{p:g}' for p in parameters)}"


def sets(*, without=()):
    """Return pytest parameters (name, own parameters) for all families but some."""
    return [pytest.param(n, p, id=label(n, p)) for n, ps in CASES.items() if n not in without for p in ps]


def made(name, parameters):
    """Return the distribution with these own parameters, through the front door."""
    return distribution(name, **dict(zip(family(name).parameter_names, parameters, strict=True)))


def integrated_moments(d):
    """Return mean and sd as integrals over all quantiles, by Gauss's rule in pieces, counted in sizes from the median.

    Beyond u = 37 the heaviest of the tails with an sd holds less than 1e-20 of it.
    """
    centre, size = float(d.x(0.0)), spread(d)
    knots = np.array([-37.0, -20.0, -10.0, -6.0, -3.0, 0.0, 3.0, 6.0, 10.0, 20.0, 37.0])
    nodes, weights = np.polynomial.legendre.leggauss(60)
    half = 0.5 * np.diff(knots)[:, None]
    u = knots[:-1, None] + half * (1.0 + nodes)
    mass = half * weights * np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi)
    y = (d.x(u) - centre) / size
    offset = np.sum(mass * y)
    return centre + size * offset, size * np.sqrt(np.sum(mass * (y - offset) ** 2))


def spread(d):
    """Return the sd, or where it is infinite the distance of the quartiles, as the yardstick of errors."""
    sd = float(d.sd)
    return sd if np.isfinite(sd) else float(d.ppf(0.75) - d.ppf(0.25))
