"""Differences of the log-gamma function that keep their relative accuracy for small and for large arguments."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions.parameter import Array

_ORDERS = np.arange(2, 40)
_ZETA = special.zeta(_ORDERS.astype(np.float64))
# ln Gamma(1 + y) = -gamma y + sum (-1)^j zeta(j)/j y^j (Abramowitz & Stegun 6.1.33), without the linear term.
_LOG_GAMMA = np.where(_ORDERS % 2 == 0, 1.0, -1.0) * _ZETA / _ORDERS
_EXCESS = _LOG_GAMMA * (2.0**_ORDERS - 2.0)
_NEAR = 0.12


def _polynomial(coefficients: Array, y: Array) -> Array:
    return np.polynomial.polynomial.polyval(y, coefficients, tensor=False)


def excess(y: Array) -> tuple[Array, Array]:
    """Return ``L(y)/y**2`` and ``dL/dy / y`` for ``L = ln Gamma(1 + 2y) - 2 ln Gamma(1 + y)``, y > -1/2.

    Notes
    -----
    ``exp(L) - 1`` is the squared coefficient of variation of ``E**y`` for a standard exponential E, from which
    follow Weibull (y = 1/shape), Frechet (y = -1/shape) and generalised extreme values (y = -shape). Near zero both
    logarithms nearly cancel; there a series is used.
    """
    y = np.asarray(y, dtype=np.float64)
    near = np.abs(y) < _NEAR
    small = np.where(near, y, 0.0)
    value = _polynomial(_EXCESS, small)
    slope = _polynomial(_EXCESS * _ORDERS, small)
    if not np.all(near):
        large = np.where(near, 1.0, y)
        direct = special.gammaln(1.0 + 2.0 * large) - 2.0 * special.gammaln(1.0 + large)
        value = np.where(near, value, direct / large**2)
        direct_slope = 2.0 * (special.psi(1.0 + 2.0 * large) - special.psi(1.0 + large))
        slope = np.where(near, slope, direct_slope / large)
    return value, slope
