"""The log-gamma function in the combinations that moments and densities need, without cancellation."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions.normal_tails import LOG_SQRT_2PI
from calibrate.distributions.parameter import Array

# ln Gamma(1 + y) = -gamma y + sum_{j>=2} (-1)^j zeta(j)/j y^j (Abramowitz & Stegun 6.1.33).
_ORDERS = np.arange(2, 42)
_SERIES = np.where(_ORDERS % 2 == 0, 1.0, -1.0) * special.zeta(_ORDERS.astype(np.float64)) / _ORDERS
_EXCESS = _SERIES * (2.0**_ORDERS - 2.0)
_RATIO = np.concatenate(([-np.euler_gamma], _SERIES))
_NEAR = 0.12

# ln Gamma(x) = (x - 1/2) ln x - x + ln sqrt(2 pi) + sum B_2j / (2j (2j - 1) x^(2j - 1)) (A. & S. 6.1.40).
_STIRLING = (1 / 12, -1 / 360, 1 / 1260, -1 / 1680, 1 / 1188, -691 / 360360, 1 / 156)
_STIRLING_FROM = 12.0


def _polynomial(coefficients: Array, y: Array) -> Array:
    total = np.zeros(np.shape(y))
    for c in coefficients[::-1]:
        total = total * y + c
    return total


def _with_slope(coefficients: Array, y: Array) -> tuple[Array, Array]:
    powers = np.arange(1, len(coefficients))
    return _polynomial(coefficients, y), _polynomial(coefficients[1:] * powers, y)


def excess(y: Array) -> tuple[Array, Array]:
    """Return V and dV/dy for ``y**2 V = ln Gamma(1 + 2y) - 2 ln Gamma(1 + y)``, y > -1/2.

    Notes
    -----
    ``exp(y**2 V) - 1`` is the squared coefficient of variation of ``E**y`` for a standard exponential E; Weibull
    (y = 1/shape), Frechet (y = -1/shape) and generalised extreme values (y = -shape) follow from it.
    """
    y = np.asarray(y, dtype=np.float64)
    near = np.abs(y) < _NEAR
    value, slope = _with_slope(_EXCESS, np.where(near, y, 0.0))
    if np.all(near):
        return value, slope
    large = np.where(near, 1.0, y)
    direct = (special.gammaln(1.0 + 2.0 * large) - 2.0 * special.gammaln(1.0 + large)) / large**2
    direct_slope = 2.0 * (special.psi(1.0 + 2.0 * large) - special.psi(1.0 + large)) / large**2
    direct_slope = direct_slope - 2.0 * direct / large
    return np.where(near, value, direct), np.where(near, slope, direct_slope)


def log_gamma_ratio(y: Array) -> tuple[Array, Array]:
    """Return ``G = ln Gamma(1 + y)/y`` and dG/dy, y > -1."""
    y = np.asarray(y, dtype=np.float64)
    near = np.abs(y) < _NEAR
    value, slope = _with_slope(_RATIO, np.where(near, y, 0.0))
    if np.all(near):
        return value, slope
    large = np.where(near, 1.0, y)
    direct = special.gammaln(1.0 + large) / large
    direct_slope = (special.psi(1.0 + large) - direct) / large
    return np.where(near, value, direct), np.where(near, slope, direct_slope)


def stirling_error(x: Array) -> Array:
    """Return ``ln Gamma(x) - [(x - 1/2) ln x - x + ln sqrt(2 pi)]`` for x > 0."""
    x = np.asarray(x, dtype=np.float64)
    large = x > _STIRLING_FROM
    inverse = 1.0 / np.where(large, x, _STIRLING_FROM)
    series = inverse * _polynomial(np.array(_STIRLING), inverse * inverse)
    if np.all(large):
        return series
    small = np.where(large, 1.0, x)
    direct = special.gammaln(small) - (small - 0.5) * np.log(small) + small - LOG_SQRT_2PI
    return np.where(large, series, direct)


def psi_half_step(x: Array) -> Array:
    """Return ``psi(x + 1/2) - psi(x) - 1/(2x)`` for x > 0, which falls like 1/(8 x^2)."""
    x = np.asarray(x, dtype=np.float64)
    large = x > 20.0
    w = 1.0 / np.square(np.where(large, x, 20.0))
    # Difference of the expansions of psi (A. & S. 6.3.18) at x + 1/2 and x.
    series = w * (1 / 8 + w * (-1 / 64 + w * (1 / 128 + w * (-17 / 2048 + w * (31 / 2048)))))
    small = np.where(large, 1.0, x)
    direct = special.psi(small + 0.5) - special.psi(small) - 0.5 / small
    return np.where(large, series, direct)


def log_gamma_half_step(x: Array) -> Array:
    """Return ``ln Gamma(x + 1/2) - ln Gamma(x) - ln(x)/2`` for x > 0, which falls like -1/(8x)."""
    x = np.asarray(x, dtype=np.float64)
    large = x > 20.0
    inverse = 1.0 / np.where(large, x, 20.0)
    w = inverse * inverse
    series = inverse * (-1 / 8 + w * (1 / 192 + w * (-1 / 640 + w * (17 / 14336 + w * (-31 / 18432)))))
    small = np.where(large, 1.0, x)
    direct = special.gammaln(small + 0.5) - special.gammaln(small) - 0.5 * np.log(small)
    return np.where(large, series, direct)
