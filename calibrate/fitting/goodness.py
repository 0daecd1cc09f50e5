"""How well a fitted distribution holds the sample, and how fits with different parameters compare."""

from __future__ import annotations

import math

import numpy as np

from calibrate.distributions import Distribution
from calibrate.fitting.jets import Array


def anderson_darling(x: Array, distribution: Distribution) -> float:
    """Return the distance A² between the sample and a distribution.

    Parameters
    ----------
    x : array, shape (n,)
        The sample, in any order.
    distribution : Distribution
        Of shape ().

    Returns
    -------
    float
        Infinite where a value lies outside the support.

    Notes
    -----
    ``A² = -n - sum (2 i - 1) [ln F(x_i) + ln(1 - F(x_(n+1-i)))]/n`` over the
    ordered values; both logarithms are computed in their own tail. No critical
    value belongs to it here: with estimated parameters it depends on the
    family and its shape.

    References
    ----------
    .. [1] T. W. Anderson, D. A. Darling, A test of goodness of fit, JASA 49
       (1954) 765-769.
    """
    ordered = np.sort(x)
    n = ordered.size
    weight = 2.0 * np.arange(1, n + 1) - 1.0
    with np.errstate(all="ignore"):
        terms = distribution.logcdf(ordered) + distribution.logsf(ordered)[::-1]
    value = -n - float(np.sum(weight * terms)) / n
    return value if not math.isnan(value) else math.inf


def aicc(log_likelihood: float, k: int, n: int) -> float:
    """Return Akaike's criterion with the correction for small samples.

    ``-2 L + 2 k n/(n - k - 1)``, infinite for ``n <= k + 1``, where it is not
    defined; ``k`` counts the estimated parameters.

    References
    ----------
    .. [1] C. M. Hurvich, C.-L. Tsai, Regression and time series model
       selection in small samples, Biometrika 76 (1989) 297-307.
    """
    if math.isnan(log_likelihood):
        return math.nan
    if n <= k + 1:
        return math.inf
    return -2.0 * log_likelihood + 2.0 * k * n / (n - k - 1)


def bic(log_likelihood: float, k: int, n: int) -> float:
    """Return the Bayesian information criterion, -2 L + k ln n (G. Schwarz, Ann. Statist. 6 (1978) 461-464)."""
    return -2.0 * log_likelihood + k * math.log(n)


def plotting_positions(n: int) -> Array:
    """Return Hazen's positions (i - 1/2)/n of ordered values on probability paper, shape (n,)."""
    return (np.arange(n) + 0.5) / n
