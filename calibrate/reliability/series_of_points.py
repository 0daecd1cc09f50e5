"""The failure probability of several design points: half spaces in series."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.systems.logic import series
from calibrate.reliability.systems.system import system_probability

Array = npt.NDArray[np.float64]


def series_probability(beta: Array, alpha: Array) -> Array:
    """Return the probability that any of the half spaces at the points is entered, shape (n,).

    Parameters
    ----------
    beta : array (k, n)
        Signed distances; NaN where a situation has fewer points.
    alpha : array (k, m, n)
        Unit gradients there.

    Returns
    -------
    array (n,)
        First-order probability of the series system; NaN where there is no point. Where the origin fails (the first
        beta is negative) it is the safe region that is the union, and the result its complement.

    Notes
    -----
    M. Hohenbichler and R. Rackwitz, "First-order concepts in system reliability", Structural Safety 1 (1983): the
    correlation of two half spaces is the scalar product of their unit gradients.
    """
    # Those that are there first, in their order.
    order = np.argsort(np.isnan(beta), axis=0, kind="stable")
    beta = np.take_along_axis(beta, order, axis=0)
    alpha = np.take_along_axis(alpha, order[:, None, :], axis=0)
    count = np.count_nonzero(~np.isnan(beta), axis=0)
    fails = beta[0] < 0.0
    outward = np.where(fails, -beta, beta)
    union = np.full(beta.shape[1], np.nan)
    for c in range(1, len(beta) + 1):
        at = np.flatnonzero(count == c)
        if at.size and c == 1:
            union[at] = special.ndtr(-outward[0, at])
        elif at.size:
            logic = series([f"point_{i}" for i in range(1, c + 1)])
            half_spaces = outward[:c, at], logic
            union[at] = system_probability(*half_spaces, alpha=alpha[:c, :, at], slopes=False).probability
    return np.where(fails, 1.0 - union, union)
