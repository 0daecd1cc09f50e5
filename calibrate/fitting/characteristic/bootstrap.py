"""Tolerance limits for any family and for samples with bounds, by refitting samples drawn anew."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.distributions import Distribution
from calibrate.errors import Doubt, InputError
from calibrate.fitting.characteristic.pivotal import coarse
from calibrate.fitting.characteristic.result import INTERVAL_LEVEL, CharacteristicValue, Request, ordered
from calibrate.records.observations import Observations

Array = NDArray[np.float64]
Refit = Callable[[Observations], Distribution | None]
"""Fits the family to a sample; None if it cannot be fitted."""

ROUTES = ("point", "tolerance")
REPLICATES = 999
MOST_FAILURES = 0.1
FEW = 20
"""Number of exact values below which bootstrap limits are known to miss the stated confidence noticeably."""


def bootstrap_value(
    observations: Observations,
    request: Request,
    refit: Refit,
    rng: np.random.Generator | None,
    replicates: int = REPLICATES,
) -> CharacteristicValue:
    """Return the estimated fractile, or its bias-corrected percentile limit.

    Parameters
    ----------
    observations : Observations
        Complete, censored or truncated.
    request : Request
        Route one of `ROUTES`.
    refit : callable
        Observations in, the fitted distribution (of shape ()) out; None or InputError if there is none.
    rng : numpy.random.Generator or None
        Needed for ``tolerance``.
    replicates : int
        Samples drawn.

    Raises
    ------
    InputError
        The sample itself, or more than a tenth of those drawn from it, cannot be fitted.

    Notes
    -----
    Complete samples are drawn from the fitted distribution, others by drawing their specimens with replacement, bounds
    and all. The limit is the quantile of the refitted fractiles at ``Phi(2 z0 + z)``, z being the normal
    distance of the level and z0 that of the share of refitted fractiles below the estimate [1]_. Its coverage is
    right up to terms of order 1/sqrt(n).

    References
    ----------
    .. [1] B. Efron, R. J. Tibshirani, An Introduction to the Bootstrap, Chapman & Hall 1993, section 14.3 (there with
       an acceleration, here zero).
    """
    fitted = _fitted(refit, observations)
    if fitted is None:
        raise InputError(f"The family '{request.family}' cannot be fitted to this sample.")
    estimate = float(fitted.ppf(request.fractile))
    common: dict[str, Any] = {"factor": None, "point_estimate": estimate, "cov_used": float(fitted.cov)}
    if not observations.complete:
        common |= {"mean": float(fitted.mean), "cov": float(fitted.cov)}
    if request.route == "point":
        return request.answer(observations.values, value=estimate, **common)
    if rng is None:
        raise InputError("Bootstrap limits are simulated and need a generator (rng).")
    drawn = _drawn_fractiles(observations, fitted, request, refit, rng, replicates)
    confidence = request.confidence
    assert confidence is not None
    value, error = _limit(drawn, estimate, 1.0 - confidence if request.lower else confidence)
    half = 0.5 * INTERVAL_LEVEL
    failed = replicates - drawn.size
    manner = (
        "from the fitted distribution" if observations.complete else "with replacement from the specimens"
    )
    note = (
        f"Bias-corrected percentile limit from {drawn.size} samples drawn {manner}; its standard error from the "
        f"simulation is {error:.3g}."
    )
    return request.answer(
        observations.values,
        value=value,
        **common,
        interval=ordered(*(_limit(drawn, estimate, 0.5 + side * half)[0] for side in (-1.0, 1.0))),
        statement=request.statement(observations.n, extra="by bootstrap"),
        notes=(note,),
        monte_carlo_error=error,
        doubts=(*coarse(value, error, request), *_own_doubts(observations, request, failed, replicates)),
    )


def _fitted(refit: Refit, observations: Observations) -> Distribution | None:
    try:
        return refit(observations)
    except InputError:
        return None


def _drawn_fractiles(
    observations: Observations,
    fitted: Distribution,
    request: Request,
    refit: Refit,
    rng: np.random.Generator,
    replicates: int,
) -> Array:
    n = observations.n
    found = []
    for _ in range(replicates):
        if observations.complete:
            sample = Observations.of(fitted.sample(rng, n))
        else:
            sample = observations.taken(rng.integers(0, n, n))
        again = _fitted(refit, sample)
        fractile = math.nan if again is None else float(again.ppf(request.fractile))
        if math.isfinite(fractile):
            found.append(fractile)
    failed = replicates - len(found)
    if failed > MOST_FAILURES * replicates:
        raise InputError(
            f"The family '{request.family}' cannot be fitted to {failed} of {replicates} samples drawn from this one; "
            "the sample is too small or too little of it is exact for a limit."
        )
    return np.array(found)


def _limit(drawn: Array, estimate: float, level: float) -> tuple[float, float]:
    """Return the bias-corrected quantile and its Monte Carlo standard error from the spacing around it."""
    least = 0.5 / drawn.size
    share = np.mean(drawn < estimate) + 0.5 * np.mean(drawn == estimate)
    shift = special.ndtri(np.clip(share, least, 1.0 - least))
    corrected = float(special.ndtr(2.0 * shift + special.ndtri(level)))
    half = math.sqrt(corrected * (1.0 - corrected) / drawn.size)
    levels = np.clip([corrected, corrected - half, corrected + half], 0.0, 1.0)
    value, low, high = (float(q) for q in np.quantile(drawn, levels, method="median_unbiased"))
    return value, 0.5 * (high - low)


def _own_doubts(
    observations: Observations, request: Request, failed: int, replicates: int
) -> tuple[Doubt, ...]:
    doubts = []
    if failed:
        message = f"{failed} of {replicates} samples drawn anew could not be fitted and were left out."
        doubts.append(Doubt("refits-failed", message, request.where))
    if observations.n_exact < FEW:
        message = (
            f"A bootstrap limit from {observations.n_exact} exact values holds its stated confidence roughly."
        )
        doubts.append(Doubt("bootstrap-few-values", message, request.where))
    return tuple(doubts)
