"""Rank correlation without scipy.stats, whose import takes longer than a small study; tests hold it against that."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, stdtr

Array = NDArray[np.float64]

EXACT_UP_TO = 33
"""Sample size without ties up to which Kendall's p-value counts permutations."""


def average_ranks(x: Array) -> Array:
    """Return the ranks from 1, equal values sharing their mean."""
    _, where, count = np.unique(x, return_inverse=True, return_counts=True)
    return np.asarray((np.cumsum(count) - 0.5 * (count - 1.0))[where])


def spearman(x: Array, y: Array) -> tuple[float, float]:
    """Return Spearman's coefficient and its two-sided p-value by Student's t; NaN without variation."""
    a, b = average_ranks(x), average_ranks(y)
    if np.ptp(a) == 0.0 or np.ptp(b) == 0.0:
        return math.nan, math.nan
    r = float(np.corrcoef(a, b)[0, 1])
    freedom = x.size - 2
    with np.errstate(divide="ignore"):
        t = abs(r) * np.sqrt(freedom / max((1.0 + r) * (1.0 - r), 0.0)) if abs(r) < 1.0 else math.inf
    return r, float(2.0 * stdtr(freedom, -t))


def kendall(x: Array, y: Array) -> tuple[float, float]:
    """Return Kendall's tau-b and its two-sided p-value; NaN without variation.

    Notes
    -----
    M. G. Kendall, Rank Correlation Methods (4th ed. 1970, from memory): exact up to 33 values without ties, otherwise
    normal with the variance that allows for ties.
    """
    n = x.size
    above = np.triu_indices(n, 1)
    agreement = float(np.sum(np.sign(x[:, None] - x)[above] * np.sign(y[:, None] - y)[above]))
    pairs = 0.5 * n * (n - 1.0)
    (x_ties, x_0, x_1), (y_ties, y_0, y_1) = (_ties(v) for v in (x, y))
    if pairs in (x_ties, y_ties):
        return math.nan, math.nan
    tau = agreement / math.sqrt((pairs - x_ties) * (pairs - y_ties))
    if x_ties == y_ties == 0.0 and n <= EXACT_UP_TO:
        return tau, _exact(n, round(0.5 * (pairs - abs(agreement))))
    m = n * (n - 1.0)
    variance = (m * (2.0 * n + 5.0) - x_1 - y_1) / 18.0 + 2.0 * x_ties * y_ties / m
    variance += x_0 * y_0 / (9.0 * m * (n - 2.0))
    return tau, float(2.0 * ndtr(-abs(agreement) / math.sqrt(variance)))


def _ties(x: Array) -> tuple[float, float, float]:
    count = np.unique(x, return_counts=True)[1].astype(np.float64)
    pairs = count * (count - 1.0)
    return (
        float(np.sum(0.5 * pairs)),
        float(np.sum(pairs * (count - 2.0))),
        float(np.sum(pairs * (2.0 * count + 5.0))),
    )


def _exact(n: int, discordant: int) -> float:
    """Return twice the share of permutations of n with at most so many inversions."""
    if 4 * discordant == n * (n - 1):
        return 1.0
    ways = np.ones(1)
    for size in range(2, n + 1):
        # The next value may be put before 0 to size - 1 of those that are there.
        ways = np.convolve(ways, np.ones(size))[: discordant + 1] / size
    return float(min(1.0, 2.0 * np.sum(ways)))
