"""Intervals by parametric bootstrap, for estimators that have no likelihood to profile.

Samples are drawn from the fit and fitted in the same way; the interval turns the ratios (differences) of their
estimates to the fit around it (basic bootstrap; A. C. Davison and D. V. Hinkley, Bootstrap Methods, Cambridge 1997,
section 5.2; from memory).
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.fitting.intervals import NONE, Interval
from calibrate.fitting.registry import model_of
from calibrate.fitting.replicates import Replicates, replicate
from calibrate.fitting.result import Fit

REPLICATES = 999


def bootstrap_intervals(
    fit: Fit, rng: np.random.Generator, confidence: float = 0.95, fractiles: tuple[float, ...] = ()
) -> tuple[Mapping[str, Interval], Mapping[float, Interval]]:
    """Return intervals of every estimated parameter and of some fractiles.

    Parameters
    ----------
    fit : Fit
        Converged, of a complete sample, by any method.
    rng : numpy.random.Generator
    confidence : float
        Of the two-sided intervals.
    fractiles : tuple of float
        Non-exceedance probabilities.

    Returns
    -------
    parameters, fractiles : mappings
        NaN where fewer than 50 simulated samples could be fitted.
    """
    assert fit.distribution is not None
    simulated = replicate(fit, REPLICATES, fit.n, rng)
    positive = {r.name: r.positive for r in model_of(fit.family).rules}
    parameters = {
        name: _turned(
            simulated,
            np.ravel(simulated.laws.parameters[name]),
            fit.parameters[name],
            confidence,
            positive[name],
        )
        for name in fit.free
    }
    found = {}
    for p in fractiles:
        u = float(special.ndtri(p))
        values = np.ravel(np.broadcast_to(simulated.laws.x(u), (simulated.x.shape[0], 1)))
        found[p] = _turned(simulated, values, float(fit.distribution.x(u)), confidence, False)
    return parameters, found


def _turned(
    simulated: Replicates, values: NDArray[np.float64], estimate: float, confidence: float, positive: bool
) -> Interval:
    if simulated.x.shape[0] < 50:
        return NONE
    tails = [0.5 * (1.0 - confidence), 0.5 * (1.0 + confidence)]
    if positive:
        low, high = np.quantile(values / estimate, tails)
        return float(estimate / high), float(estimate / low)
    low, high = np.quantile(values - estimate, tails)
    return float(estimate - high), float(estimate - low)
