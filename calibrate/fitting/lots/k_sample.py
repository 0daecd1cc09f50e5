"""The k-sample Anderson-Darling statistic, many divisions of one sample at once, and its permutation p-value."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.fitting.lots.grouping import Array, Grouped

CHUNK = 500_000
"""Largest number of labels that are held at once."""


def anderson_darling_k(g: Grouped, rng: np.random.Generator, replicates: int) -> tuple[float, float]:
    """Return the standardised statistic and the share of random divisions with one as large.

    Parameters
    ----------
    g : Grouped
        Four specimens or more, two lots or more.
    rng : Generator
        Draws the random divisions.
    replicates : int
        How many.

    Returns
    -------
    statistic, p_value : float
        The statistic has mean 0 and sd 1 where all lots come from one population; ties count by mid-ranks. The
        p-value counts the sample itself as one division, so it is never 0, and holds for any sizes and ties.

    References
    ----------
    .. [1] F. W. Scholz, M. A. Stephens, K-sample Anderson-Darling tests, JASA 82 (1987) 918-924, equations (4)
       to (7).
    """
    order = np.argsort(g.values, kind="stable")
    # Lots by name, not by first appearance: the same draws whatever the order of the rows.
    by_name = np.array(sorted(range(g.k), key=g.names.__getitem__))
    sizes = g.sizes[by_name]
    small = np.int16 if g.k < np.iinfo(np.int16).max else np.int64  # the short type is sorted by radix
    labels = np.argsort(by_name)[g.codes[order]].astype(small)
    distance = _Distance(g.values[order], sizes)
    observed = float(distance(labels[None, :])[0])
    bound = observed - 1e-9 * max(1.0, observed)  # divisions that differ by rounding only are as large
    start = np.repeat(np.arange(g.k, dtype=small), sizes)
    larger, left = 0, replicates
    while left > 0:
        rows = min(left, max(1, CHUNK // g.n))
        shuffled = rng.permuted(np.tile(start, (rows, 1)), axis=1)
        larger += int(np.count_nonzero(distance(shuffled) >= bound))
        left -= rows
    return (observed - (g.k - 1)) / _null_sd(g), (1 + larger) / (1 + replicates)


class _Distance:
    """A² by mid-ranks of divisions of one ordered sample.

    ``A² = (n - 1)/n sum over lots i, ties j of W_j (n M_ij - n_i r_j)²/n_i`` with r the mid-ranks of the whole
    sample and M those counted in the lot. Written out, only the part with M² depends on the division. A specimen
    adds 1 to M beyond its tie and 1/2 in it, so that this part is a sum over the specimens of a lot in their
    order: with ``2 m - 1`` for the m-th of them, and less by a quarter for each pair within a tie.
    """

    def __init__(self, ordered: Array, sizes: NDArray[np.int64]) -> None:
        n = ordered.size
        start = np.flatnonzero(np.r_[True, np.diff(ordered) > 0.0])
        number = np.diff(np.r_[start, n]).astype(float)
        rank = start + 0.5 * number
        weight = number / n / (rank * (n - rank) - 0.25 * n * number)
        beyond = np.cumsum(weight[::-1])[::-1] - 0.5 * weight
        self.tie = np.repeat(np.arange(start.size), number.astype(np.int64))
        self.tied = start.size < n
        self.weight, self.beyond = weight[self.tie], beyond[self.tie]
        self.place = np.concatenate([np.arange(1, size + 1) for size in sizes])
        self.share = 1.0 / np.repeat(sizes, sizes)
        self.factor = (n - 1.0) / n
        self.square = float(n) ** 2
        self.fixed = n * float(weight @ rank**2)

    def __call__(self, labels: NDArray[Any]) -> Array:
        """Return A² for each row of labels in the order of the values, shape (rows,)."""
        order = np.argsort(labels, axis=1, kind="stable")
        squares = self.beyond[order] @ ((2.0 * self.place - 1.0) * self.share)
        own = self.weight[order]
        if self.tied:
            own *= self._pairs(order)
        return np.asarray(self.factor * (self.square * (squares - 0.25 * own @ self.share) - self.fixed))

    def _pairs(self, order: NDArray[np.int64]) -> Array:
        """Return 2 m - 1 for the m-th specimen of a lot in a tie: they sum to the square of their number."""
        tie = self.tie[order]
        column = np.arange(order.shape[1])
        first = np.ones(order.shape, dtype=bool)
        first[:, 1:] = (tie[:, 1:] != tie[:, :-1]) | (self.place[1:] == 1)
        run = column - np.maximum.accumulate(np.where(first, column, 0), axis=1)
        return np.asarray(2.0 * run + 1.0, dtype=np.float64)


def _null_sd(g: Grouped) -> float:
    """Return the sd of A² where all lots come from one population."""
    n, k = g.n, g.k
    inverse = 1.0 / np.arange(1, n)
    sums = np.cumsum(inverse)
    h_sizes = float(np.sum(1.0 / g.sizes))
    h = float(sums[-1])
    # sum over i < j of 1/((n - i) j)
    later = h - sums
    weight = float(np.sum(inverse[::-1] * later))
    a = (4.0 * weight - 6.0) * (k - 1) + (10.0 - 6.0 * weight) * h_sizes
    b = (
        (2.0 * weight - 4.0) * k**2
        + 8.0 * h * k
        + (2.0 * weight - 14.0 * h - 4.0) * h_sizes
        - 8.0 * h
        + 4.0 * weight
        - 6.0
    )
    c = (
        (6.0 * h + 2.0 * weight - 2.0) * k**2
        + (4.0 * h - 4.0 * weight + 6.0) * k
        + (2.0 * h - 6.0) * h_sizes
        + 4.0 * h
    )
    d = (2.0 * h + 6.0) * k**2 - 4.0 * h * k
    return math.sqrt((a * n**3 + b * n**2 + c * n + d) / ((n - 1.0) * (n - 2.0) * (n - 3.0)))
