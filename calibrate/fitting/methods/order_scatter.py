"""Scatter of linear combinations of ordered values, from the fitted distribution."""

from __future__ import annotations

import numpy as np

from calibrate.distributions import Distribution
from calibrate.fitting.goodness import plotting_positions
from calibrate.fitting.jets import Array


def combination_covariance(weights: Array, law: Distribution, *, log_above: float | None = None) -> Array:
    """Return the covariance of linear combinations of the ordered values of a sample, shape (m, m).

    Parameters
    ----------
    weights : array, shape (m, n)
        Of the ordered values.
    law : Distribution
        What the sample was drawn from; of shape ().
    log_above : float, optional
        Threshold, where the logarithms of the values less the threshold are combined.

    Notes
    -----
    To first order x_(i) scatters as the uniform order statistic does, over the density at its quantile (H. A. David and
    H. N. Nagaraja, Order Statistics, 3rd ed., Wiley 2003, section 10.2).
    """
    p = plotting_positions(weights.shape[1])
    fitted = law.ppf(p)
    spread = 1.0 / law.pdf(fitted)
    if log_above is not None:
        spread = spread / (fitted - log_above)
    return order_covariance(weights * spread, p) / p.size


def order_covariance(weights: Array, p: Array) -> Array:
    """Return W K W' with K_ij = min(p_i, p_j) - p_i p_j for rising p, in time proportional to n.

    sum_ij v_i w_j min(p_i, p_j) is a sum over the steps of p of the products of what lies above each.
    """
    steps = np.diff(p, prepend=0.0)
    above = np.cumsum(weights[:, ::-1], axis=1)[:, ::-1]
    mean = weights @ p
    return np.asarray((above * steps) @ above.T - np.outer(mean, mean))
