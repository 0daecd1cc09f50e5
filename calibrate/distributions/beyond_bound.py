"""The standard normal tail beyond a bound far from the centre, counted from that bound.

There z itself carries rounding errors that are large against the scatter, and so do differences of tails; the offset
d = z - a does not. With the Mills ratio m, ``Phi(-z)/Phi(-a) = exp(-(a d + d^2/2)) m(z)/m(a)``.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import special

from calibrate.distributions.normal_tails import log_ndtr, log_phi
from calibrate.distributions.parameter import Array

_ROOT_2 = math.sqrt(2.0)
# The start is an upper bound and the equation convex: Newton's method falls on the solution, here in five steps.
_STEPS = 7
_NODES, _WEIGHTS = (0.5 * a for a in np.polynomial.legendre.leggauss(6))
_NODES = _NODES + 0.5


@dataclass(frozen=True, slots=True)
class Beyond:
    """A standard normal variable between a > 0 and a + gap, at standard normal u.

    Parameters
    ----------
    offset, slope : array
        d = z - a and dd/du.
    by_location, by_scale : array
        Derivatives of x/scale by the parent's location and of x by its scale at fixed bounds.
    by_near, by_far : array
        Derivatives of x by the bound at a and the one at a + gap.
    """

    offset: Array
    slope: Array
    by_location: Array
    by_scale: Array
    by_near: Array
    by_far: Array


def beyond(u: Array, a: Array, gap: Array) -> Beyond:
    """Return the transform from the bound at a.

    Parameters
    ----------
    u : array
        Standard normal values of the truncated variable.
    a : array
        The bound nearer to the centre, positive, best above 3.
    gap : array
        Distance of the other bound, possibly infinite.
    """
    at_bound = _mills(a)
    finite = np.isfinite(gap)
    width = np.where(finite, gap, 1.0)
    log_rest = np.where(finite, -_log_drop(width, a, at_bound), -np.inf)
    inside = -np.expm1(log_rest)
    low = np.less(u, 0.0)
    below = -np.log1p(-special.ndtr(np.where(low, u, 0.0)) * inside)
    level = np.where(low, below, -np.logaddexp(log_ndtr(-u), log_rest + log_ndtr(u)))
    d = 2.0 * level / (a + np.sqrt(a * a + 2.0 * level))
    for _ in range(_STEPS):
        d = np.maximum(d - (_log_drop(d, a, at_bound) - level) * _mills(a + d), 0.0)
    z = a + d
    near = _mills(z) / at_bound
    to_far = np.where(finite, np.exp(-0.5 * np.maximum(width - d, 0.0) * (a + width + z)), 0.0)
    far = _mills(a + width) / at_bound * to_far
    by_far = special.ndtr(u) * to_far
    by_location = (_mills_fall(d, a, at_bound) + far - np.exp(log_rest) + np.expm1(-level) * to_far) / inside
    return Beyond(
        offset=d,
        slope=np.exp(log_phi(u) + level) * inside * _mills(z),
        by_location=by_location,
        by_scale=d + a * by_location - width * by_far,
        by_near=(near - far) / inside,
        by_far=by_far,
    )


def _mills(z: Array) -> Array:
    """Return Phi(-z)/phi(z)."""
    return np.asarray(math.sqrt(0.5 * math.pi) * special.erfcx(z / _ROOT_2))


def _mills_fall(d: Array, a: Array, at_bound: Array) -> Array:
    """Return 1 - m(a + d)/m(a), for small d as the integral of m' = z m - 1."""
    short = a * d < 2.0
    s = np.where(short, d, 0.0)
    total = np.zeros(np.shape(s))
    for node, weight in zip(_NODES, _WEIGHTS, strict=True):
        t = a + node * s
        total = total + weight * (1.0 - t * _mills(t))
    return np.where(short, s * total, at_bound - _mills(a + d)) / at_bound


def _log_drop(d: Array, a: Array, at_bound: Array) -> Array:
    """Return -ln(Phi(-a - d)/Phi(-a))."""
    return d * (a + 0.5 * d) - np.log(_mills(a + d) / at_bound)
