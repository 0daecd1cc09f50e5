"""Mean and standard deviation of a normal population of which some specimens are known by a bound only."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.records.observations import Array, Observations

_STEPS = 100


def censored_normal(observations: Observations) -> tuple[float, float] | None:
    """Return mean and standard deviation by maximum likelihood, or None without a unique maximum.

    Specimens known within two finite bounds count with the middle. At least
    two different exact (or middle) values are needed.

    Notes
    -----
    In ``1/sd`` and ``mean/sd`` the log-likelihood is concave, so that Newton's
    method with halved steps ends at the only maximum.

    References
    ----------
    .. [1] R. J. Olsen, Note on the uniqueness of the maximum likelihood
       estimator for the Tobit model, Econometrica 46 (1978) 1211-1215 (from
       memory, recomputed).
    """
    x, right, left = observations.values, observations.right, observations.left
    exact = x[~right & ~left]
    if exact.size < 2 or exact.min() == exact.max():
        return None
    centre, width = float(np.median(exact)), float(exact.std())
    y = (x - centre) / width
    at = np.array([1.0, float(np.mean((exact - centre) / width))])
    value, slope, curvature = _likelihood(at, y, right, left)
    for _ in range(_STEPS):
        step = np.linalg.solve(curvature, -slope)
        gain = float(slope @ step)
        if gain < 1e-22 * max(1.0, abs(value)):
            break
        share = 1.0
        while share > 1e-12:
            tried = at + share * step
            if tried[0] > 0.0:
                found = _likelihood(tried, y, right, left)
                if found[0] >= value + 1e-4 * share * gain:
                    at = tried
                    value, slope, curvature = found
                    break
            share *= 0.5
        else:  # no rise above rounding: this is the top
            break
    return centre + width * float(at[1] / at[0]), width / float(at[0])


def _likelihood(
    at: Array, y: Array, right: NDArray[np.bool_], left: NDArray[np.bool_]
) -> tuple[float, Array, Array]:
    """Return log-likelihood, gradient and Hessian in (1/sd, mean/sd)."""
    precision, shift = at
    known = y[~right & ~left]
    residual = precision * known - shift
    value = known.size * math.log(precision) - 0.5 * float(residual @ residual)
    slope = np.array([known.size / precision - float(residual @ known), float(residual.sum())])
    cross = float(known.sum())
    curvature = -np.array(
        [[known.size / precision**2 + float(known @ known), -cross], [-cross, float(known.size)]]
    )
    for bounds, sign in ((y[right], -1.0), (y[left], 1.0)):
        t = sign * (precision * bounds - shift)  # the bound's distance inside the possible side
        log_p = special.log_ndtr(t)
        mills = np.exp(-0.5 * t * t - 0.5 * math.log(2.0 * math.pi) - log_p)
        bend = -mills * (mills + t)
        direction = sign * np.stack([bounds, -np.ones_like(bounds)])
        value += float(log_p.sum())
        slope = slope + direction @ mills
        curvature = curvature + (direction * bend) @ direction.T
    return value, slope, curvature
