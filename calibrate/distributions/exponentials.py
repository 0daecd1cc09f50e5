"""Elementary functions without cancellation: relative exponentials, logarithms near one, sums of log-tails."""

from __future__ import annotations

import math

import numpy as np
from scipy import special

from calibrate.distributions.parameter import Array

LOG_HALF = -math.log(2.0)

exprel = special.exprel

# d/dw (exp(w) - 1)/w = sum n w^(n-1)/(n+1)!; twenty terms reach double precision for |w| < 1.
_EXPREL_SLOPE = np.array([n / math.factorial(n + 1) for n in range(1, 21)])


def exprel_slope(w: Array) -> Array:
    """Return the derivative of ``(exp(w) - 1)/w``."""
    near = np.abs(w) < 1.0
    small = np.where(near, w, 0.0)
    large = np.where(near, 1.0, w)
    series = np.polynomial.polynomial.polyval(small, _EXPREL_SLOPE)
    return np.asarray(np.where(near, series, (large * np.exp(large) - np.expm1(large)) / large**2))


def log1p_ratio(w: Array) -> Array:
    """Return ``ln(1 + w)/w``, 1 at w = 0."""
    safe = np.where(w == 0.0, 1.0, w)
    with np.errstate(divide="ignore"):
        return np.where(w == 0.0, 1.0, np.log1p(safe) / safe)


def log1mexp(a: Array) -> Array:
    """Return ``ln(1 - exp(a))`` for ``a <= 0`` without cancellation.

    Notes
    -----
    The switch at ``-ln 2`` follows M. Maechler, "Accurately computing log(1 - exp(-|a|))" (2012).
    """
    a = np.minimum(a, 0.0)
    near = np.greater(a, LOG_HALF)
    with np.errstate(divide="ignore"):
        return np.where(near, np.log(-np.expm1(np.where(near, a, LOG_HALF))), np.log1p(-np.exp(a)))


def consistent_tails(log_cdf: Array, log_sf: Array) -> tuple[Array, Array]:
    """Replace the larger of two log-tails by the complement of the smaller, whose relative error is small."""
    low = np.less(log_cdf, log_sf)
    return np.where(low, log_cdf, log1mexp(log_sf)), np.where(low, log1mexp(log_cdf), log_sf)


def relative_deviance(r: Array) -> Array:
    """Return ``r - 1 - ln r`` for r > 0; small where r is near one."""
    near = np.greater(r, 0.5)
    d = np.where(near, r - 1.0, 0.0)
    return np.where(near, d - np.log1p(d), r - 1.0 - np.log(np.where(near, 1.0, r)))
