"""Tolerance limits for any family and for samples with bounds, by refitting samples drawn anew."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution
from calibrate.errors import Doubt, InputError
from calibrate.fitting.characteristic.pivotal import coarse
from calibrate.fitting.characteristic.pivots import spaced_quantile
from calibrate.fitting.characteristic.result import INTERVAL_LEVEL, CharacteristicValue, Request, ordered
from calibrate.records.observations import Observations

Array = NDArray[np.float64]
Refit = Callable[[Observations], Distribution | None]
"""Fits the family to a sample; None if it cannot be fitted."""

ROUTES = ("point", "tolerance")
REPLICATES = 999
MOST_FAILURES = 0.1
SIDE = 0.16
"""Tail of the quantile that fixes the spread, unless the fractile is farther out; a normal sd from the median."""

FEW = 10
"""Number of exact values below which a doubt is recorded."""


def bootstrap_value(
    observations: Observations,
    request: Request,
    refit: Refit,
    rng: np.random.Generator | None,
    replicates: int = REPLICATES,
) -> CharacteristicValue:
    """Return the estimated fractile, or its limit by a bootstrap of a pivot.

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
    and all. The pivot is (median - fractile)/spread [1]_: median and spread (from the median to a quantile on the
    side of the fractile) of the refitted distribution, the fractile of the first fit; all of logarithms if the family
    has no values below zero. For families with location and scale alone, or whose logarithms are such, its distribution
    has no parameters and the limit is exact but for the draw; for others it is nearly so. With gamma populations of cov
    0.2 to 0.8 and 6 to 20 values, limits at 75 % and 95 % covered in 72 to 79 % and 93 to 97 % of simulated samples;
    bias-corrected percentiles of the refitted fractiles did in 65 to 76 % and 82 to 92 %. With Weibull samples of 10 of
    which 40 % were censored it was 69 % and 89 %, against 64 % and 79 %.

    References
    ----------
    .. [1] B. Efron, R. J. Tibshirani, An Introduction to the Bootstrap, Chapman & Hall 1993, section 12.5.
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
    assert request.confidence is not None
    of_logs = bool(np.all(fitted.support[0] >= 0.0))
    first = _summary(fitted, request, of_logs)
    pivots = _pivots(observations, fitted, first, request, refit, rng, replicates)

    def limit(level: float) -> tuple[float, float]:
        k, error = spaced_quantile(pivots, level)
        moved = first.median + request.sign * k * first.spread
        value = math.exp(moved) if of_logs else moved
        return value, error * first.spread * (value if of_logs else 1.0)

    value, error = limit(request.confidence)
    half = 0.5 * INTERVAL_LEVEL
    failed = replicates - pivots.size
    origin = "the fitted distribution" if observations.complete else "the specimens, with replacement"
    note = (
        f"Limit by the bootstrap of a pivot with {pivots.size} samples drawn from {origin}; its standard error from "
        f"the simulation is {error:.3g}."
    )
    return request.answer(
        observations.values,
        value=value,
        **common,
        interval=ordered(limit(0.5 - half)[0], limit(0.5 + half)[0]),
        statement=request.statement(observations.n, extra="by bootstrap"),
        notes=(note,),
        monte_carlo_error=error,
        doubts=(*coarse(value, error, request), *_own_doubts(observations, request, failed, replicates)),
    )


@dataclass(frozen=True, slots=True)
class _Summary:
    """A distribution as the pivot sees it, of logarithms where these are used."""

    fractile: float
    median: float
    spread: float


def _summary(fitted: Distribution, request: Request, of_logs: bool) -> _Summary:
    tail = min(request.fractile, 1.0 - request.fractile, SIDE)
    points = fitted.ppf(np.array([request.fractile, 0.5, tail if request.lower else 1.0 - tail]))
    with np.errstate(divide="ignore", invalid="ignore"):
        fractile, median, side = (float(q) for q in (np.log(points) if of_logs else points))
    return _Summary(fractile, median, abs(median - side))


def _fitted(refit: Refit, observations: Observations) -> Distribution | None:
    try:
        return refit(observations)
    except InputError:
        return None


def _pivots(
    observations: Observations,
    fitted: Distribution,
    first: _Summary,
    request: Request,
    refit: Refit,
    rng: np.random.Generator,
    replicates: int,
) -> Array:
    n = observations.n
    of_logs = bool(np.all(fitted.support[0] >= 0.0))
    found = []
    for _ in range(replicates):
        if observations.complete:
            sample = Observations.of(fitted.sample(rng, n))
        else:
            sample = observations.taken(rng.integers(0, n, n))
        again = _fitted(refit, sample)
        if again is None:
            continue
        drawn = _summary(again, request, of_logs)
        if drawn.spread > 0.0 and math.isfinite(drawn.median) and math.isfinite(drawn.spread):
            found.append(-request.sign * (drawn.median - first.fractile) / drawn.spread)
    failed = replicates - len(found)
    if failed > MOST_FAILURES * replicates:
        raise InputError(
            f"The family '{request.family}' cannot be fitted to {failed} of {replicates} samples drawn from this one; "
            "the sample is too small or too little of it is exact for a limit."
        )
    return np.array(found)


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
