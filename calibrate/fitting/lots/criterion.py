"""The restricted likelihood of one-way random effects, exact for lots of any sizes."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from calibrate.fitting.lots.grouping import Array, Grouped


@dataclass(frozen=True, slots=True, eq=False)
class Criterion:
    """The criterion as a function of the ratio of variances; everything else is eliminated in closed form.

    The model is ``z_ij = mean + b_i + e_ij`` with variances ``between`` and ``within`` and ratio
    ``r = between/within``. A lot of size m counts with the weight ``w = m/(1 + r m)``, so that only the distinct
    sizes matter: k lots cost no more than the number of their different sizes.

    Attributes
    ----------
    n, k : int
        Specimens and lots.
    within : float
        Sum of squares within lots.
    sizes, counts, means, spreads : array, shape (s,)
        Each distinct size, the number of its lots, the mean of their means and the sum of squares about it.

    References
    ----------
    .. [1] H. D. Patterson, R. Thompson, Recovery of inter-block information when block sizes are unequal,
       Biometrika 58 (1971) 545-554.
    .. [2] D. A. Harville, Bayesian inference for variance components using only error contrasts, Biometrika 61
       (1974) 383-385: the constant, which makes it the density of n - 1 orthonormal contrasts.
    .. [3] S. R. Searle, G. Casella, C. E. McCulloch, Variance Components, Wiley 1992, chapters 3 and 6.
    """

    n: int
    k: int
    within: float
    sizes: Array
    counts: Array
    means: Array
    spreads: Array

    @classmethod
    def of(cls, g: Grouped) -> Criterion:
        """Return the criterion of a sample, in the units of z."""
        sizes, code, counts = np.unique(g.sizes, return_inverse=True, return_counts=True)
        means = np.bincount(code, g.offsets) / counts
        spreads = np.asarray(np.bincount(code, (g.offsets - means[code]) ** 2), dtype=np.float64)
        return cls(g.n, g.k, g.within, sizes.astype(float), counts.astype(float), means, spreads)

    def weights(self, ratio: Array) -> tuple[Array, Array, Array]:
        """Return w, the sum of weights and the weighted mean: shapes (..., s), (...), (...)."""
        w = self.sizes / (1.0 + ratio[..., None] * self.sizes)
        total = w @ self.counts
        return w, total, (w * self.counts) @ self.means / total

    def residual(self, ratio: Array) -> Array:
        """Return the within variance that is best for each ratio: the weighted sum of squares over n - 1."""
        w, _, mean = self.weights(ratio)
        return np.asarray((self.within + np.sum(w * self._squares(mean), axis=-1)) / (self.n - 1))

    def deviance(self, ratio: Array) -> Array:
        """Return minus twice the log-likelihood at the best within variance for each ratio, shape of ``ratio``."""
        _, total, _ = self.weights(ratio)
        freedom = self.n - 1
        return np.asarray(
            freedom * (math.log(2.0 * math.pi) + 1.0 + np.log(self.residual(ratio)))
            + np.log1p(ratio[..., None] * self.sizes) @ self.counts
            + np.log(total / self.n)
        )

    def slope(self, ratio: Array) -> Array:
        """Return d deviance / d ratio."""
        w, total, mean = self.weights(ratio)
        pull = np.sum(w * w * self._squares(mean), axis=-1) / self.residual(ratio)
        return np.asarray(total - (w * w) @ self.counts / total - pull)

    def ends(self) -> float:
        """Return a ratio beyond which the deviance only rises (two lots or more, some scatter within).

        With ``w < 1/r`` the falling part of the slope stays below ``(n - 1) S/(r² within)``, S the sum of squares
        of the lot means. The rising part is at least the sum of weights without the largest, and from
        ``r = 1/smallest size`` on each of them exceeds ``1/(2 r)``.
        """
        grand = float(self.counts @ self.means) / self.k
        squares = float(np.sum(self._squares(np.asarray(grand))))
        return max(1.0 / float(self.sizes[0]), 2.0 * (self.n - 1) * squares / ((self.k - 1) * self.within))

    def _squares(self, mean: Array) -> Array:
        """Return the sum of squares of lot means about a mean, by size: shape (..., s)."""
        return np.asarray(self.spreads + self.counts * (self.means - mean[..., None]) ** 2)
