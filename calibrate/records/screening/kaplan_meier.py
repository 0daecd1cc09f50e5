"""Product-limit estimate of the share that survives a load, and plotting positions of censored samples."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.records.observations import Array, Observations


@dataclass(frozen=True, slots=True, eq=False)
class KaplanMeier:
    """Steps of the estimated survival function.

    Attributes
    ----------
    values : array, shape (k,)
        Different values at which specimens failed, rising.
    at_risk : array of int, shape (k,)
        Specimens that had reached the value.
    failures : array of int, shape (k,)
        Of them, those that failed there.
    survival : array, shape (k,)
        Share beyond each value.
    variance : array, shape (k,)
        Greenwood's estimate of the variance of ``survival``; zero where the
        survival is zero and the formula has no value.
    """

    values: Array
    at_risk: NDArray[np.int64]
    failures: NDArray[np.int64]
    survival: Array
    variance: Array


@dataclass(frozen=True, slots=True, eq=False)
class PlottingPositions:
    """Positions of single specimens on probability paper.

    Attributes
    ----------
    values : array, shape (m,)
        Specimens that are not right-censored, rising.
    probability : array, shape (m,)
        Estimated share below.
    specimens : array of int, shape (m,)
        Positions in the sample, from 0.
    """

    values: Array
    probability: Array
    specimens: NDArray[np.int64]


def kaplan_meier(observations: Observations) -> KaplanMeier:
    """Return the product-limit estimate.

    Parameters
    ----------
    observations : Observations
        Right-censored specimens count as present up to their bound, and
        there too. Specimens known within an interval count with its middle,
        left-censored ones with their bound: an approximation, good when the
        intervals are short against the scatter. Under truncation the estimate
        is that of the specimens which can enter the sample.

    References
    ----------
    .. [1] E. L. Kaplan, P. Meier, Nonparametric estimation from incomplete
       observations, JASA 53 (1958) 457-481.
    .. [2] M. Greenwood, The natural duration of cancer (1926).
    """
    x, failed = observations.values, ~observations.right
    values, failures = np.unique(x[failed], return_counts=True)
    at_risk = x.size - np.searchsorted(np.sort(x), values, side="left")
    survival = np.asarray(np.cumprod(1.0 - failures / at_risk), dtype=np.float64)
    left = at_risk - failures
    terms = np.divide(failures, at_risk * left, out=np.zeros(values.size), where=left > 0)
    return KaplanMeier(
        values=values,
        at_risk=at_risk.astype(np.int64),
        failures=failures.astype(np.int64),
        survival=survival,
        variance=survival**2 * np.cumsum(terms),
    )


def plotting_positions(observations: Observations) -> PlottingPositions:
    """Return one position for each specimen that is not right-censored.

    Notes
    -----
    ``1 - (S_before + S_after)/2`` of the product-limit estimate that takes the
    specimens one by one, equal values in the order of the sample: Hazen's
    (i - 1/2)/n when none is censored. Intervals and left-censored specimens
    as in `kaplan_meier`.
    """
    x, censored = observations.values, observations.right
    order = np.lexsort((np.arange(x.size), censored, x))  # at one value failures come before survivors
    failed = ~censored[order]
    at_risk = np.arange(x.size, 0, -1.0)
    after = np.cumprod(np.where(failed, 1.0 - 1.0 / at_risk, 1.0))
    before = np.concatenate([[1.0], after[:-1]])
    chosen = order[failed]
    below = np.asarray((1.0 - 0.5 * (before + after))[failed], dtype=np.float64)
    return PlottingPositions(x[chosen], below, chosen.astype(np.int64))
