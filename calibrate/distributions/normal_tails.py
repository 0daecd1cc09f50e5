"""Functions of the standard normal distribution that keep their relative accuracy in both tails.

The central one is the log-hazard ``k(u) = ln(-ln Phi(u))``. Distributions of extremes are simple functions of
it, and raising any distribution function to the power r shifts it, ``ln(-r ln F) = k + ln r``.
"""

from __future__ import annotations

import math

import numpy as np
from scipy import special

from calibrate.distributions.exponentials import log1mexp
from calibrate.distributions.parameter import Array

LOG_SQRT_2PI = 0.5 * math.log(2.0 * math.pi)
INV_SQRT_2PI = 1.0 / math.sqrt(2.0 * math.pi)

# Phi(-37.5) is the last probability that is still a normal double; beyond, logarithms take over.
REACH = 37.5

log_ndtr = special.log_ndtr
ndtri_exp = special.ndtri_exp


def log_phi(u: Array) -> Array:
    """Return the logarithm of the standard normal density."""
    return -0.5 * u * u - LOG_SQRT_2PI


def u_from_log_tails(log_cdf: Array, log_sf: Array) -> Array:
    """Return the standard normal value with these log-probabilities, from whichever tail is smaller."""
    low = log_cdf < log_sf
    tail = ndtri_exp(np.where(low, log_cdf, log_sf))
    return np.where(low, tail, -tail)


def slopes_from_density(u: Array, log_density: Array, score: Array) -> tuple[Array, Array]:
    """Return dx/du and d2x/du2 of F(x) = Phi(u) from ln f(x) and d ln f/dx.

    Notes
    -----
    f x' = phi(u); differentiated once more, x'' = -x' (u + x' d ln f/dx).
    """
    slope = np.exp(log_phi(u) - log_density)
    return slope, -slope * (u + score * slope)


def _within_reach(u: Array) -> bool:
    return bool(np.size(u) == 0 or np.max(np.abs(u)) < REACH)


def log_hazard(u: Array) -> Array:
    """Return ``k = ln(-ln Phi(u))``."""
    if not _within_reach(u):
        return _everywhere(u)[0]
    q = special.ndtr(-np.abs(u))
    return np.log(-np.where(np.less(u, 0.0), np.log(q), np.log1p(-q)))


def log_hazard_slope(u: Array) -> tuple[Array, Array]:
    """Return ``k`` and ``dk/du``, which is negative."""
    k, slope, _ = _everywhere(u)
    return k, slope


def log_hazard_curvature(u: Array) -> tuple[Array, Array, Array]:
    """Return ``k``, ``dk/du`` and ``d2k/du2``."""
    k, slope, h = _everywhere(u)
    return k, slope, -slope * (u + h + slope)


def _everywhere(u: Array) -> tuple[Array, Array, Array]:
    """Return k, dk/du and phi/Phi; what an element gets does not depend on how far out its neighbours are."""
    if _within_reach(u):
        return _near(u)
    inside = np.abs(u) < REACH
    pairs = zip(_near(np.where(inside, u, 0.0)), _far(u), strict=True)
    k, slope, h = (np.where(inside, near, far) for near, far in pairs)
    return k, slope, h


def _near(u: Array) -> tuple[Array, Array, Array]:
    """Return k, dk/du and phi/Phi where Phi neither underflows nor its complement vanishes."""
    q = special.ndtr(-np.abs(u))
    low = np.less(u, 0.0)
    log_cdf = np.where(low, np.log(q), np.log1p(-q))
    h = np.exp(-0.5 * u * u) * INV_SQRT_2PI
    h = h / np.where(low, q, 1.0 - q)
    return np.log(-log_cdf), h / log_cdf, h


def _far(u: Array) -> tuple[Array, Array, Array]:
    """Return the same where probabilities underflow: -ln Phi(u) tends to Phi(-u) from above."""
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        upper = np.greater(u, 8.0)
        log_cdf = log_ndtr(u)
        log_sf = log_ndtr(-u)
        k = np.where(upper, log_sf + 0.5 * np.exp(log_sf), np.log(-log_cdf))
        h = np.exp(log_phi(u) - log_cdf)
        slope = -np.where(upper, np.exp(log_phi(u) - k - log_cdf), h / -log_cdf)
        # The quotients of infinities above have these limits.
        slope = np.where(np.isfinite(slope), slope, np.where(upper, -np.abs(u), 0.0))
        h = np.where(np.isfinite(h), h, np.abs(u))
    return k, slope, h


def from_log_hazard(k: Array) -> Array:
    """Return the ``u`` whose log-hazard is ``k``; the inverse of :func:`log_hazard`."""
    with np.errstate(over="ignore", divide="ignore"):
        minus_log_cdf = np.exp(k)
        log_sf = np.where(np.less(k, -40.0), k, log1mexp(-minus_log_cdf))
    return u_from_log_tails(-minus_log_cdf, log_sf)
