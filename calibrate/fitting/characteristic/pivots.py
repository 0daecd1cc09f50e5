"""Simulated pivots of Gumbel populations: the factors of tolerance limits and predictions, exact but for the draw."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

Array = NDArray[np.float64]

REPLICATES = 20_000
_BLOCK = 1_000_000
"""Numbers held at a time; it bounds the memory and has no effect on the result."""

LARGEST = 200
"""Sample size up to which samples are simulated; beyond, the factor is extrapolated along its known asymptote."""


@dataclass(frozen=True, slots=True, eq=False)
class Pivots:
    """Estimates from simulated samples of a standard population: location 0, scale 1.

    Attributes
    ----------
    location, scale : array, shape (replicates,)
    n : int
        Size of the simulated samples.
    normal : bool
        Normal population, mean and sd with n - 1; otherwise Gumbel of maxima, largest likelihood.
    """

    location: Array
    scale: Array
    n: int
    normal: bool

    def quantile(self, tail: float, upper: bool) -> float:
        """Return the standard population's quantile with ``tail`` below it, or above it if ``upper``."""
        if self.normal:
            return float(special.ndtri(tail)) * (-1.0 if upper else 1.0)
        return -math.log(-math.log1p(-tail) if upper else -math.log(tail))

    def _tails(self, x: Array, upper: bool) -> Array:
        if self.normal:
            return np.asarray(special.ndtr(-x if upper else x))
        with np.errstate(over="ignore"):
            below = -np.exp(-x)
        return np.asarray(-np.expm1(below) if upper else np.exp(below))

    def tolerance(self, n: int, tail: float, upper: bool, level: float) -> tuple[float, float]:
        """Return k such that location - k scale lies below the quantile with probability ``level``.

        Parameters
        ----------
        n : int
            Size of the sample in hand; the simulated ones have this size, or `LARGEST` if it is larger.
        tail, upper
            The quantile, as in `quantile`.
        level : float
            Probability.

        Returns
        -------
        k, standard_error : float
            The second from the spacing of the simulated pivots around k.

        Notes
        -----
        (location - x_p)/scale has a distribution without parameters. For n > `LARGEST`, k = -w + a/sqrt(n) + b/n with a
        from the expected information and b from the simulation; the next term is below the simulation's own error.
        """
        w = self.quantile(tail, upper)
        pivot = (self.location - w) / self.scale
        k, error = spaced_quantile(pivot, level)
        slope = float(special.ndtri(level)) * math.sqrt(self._information_variance(w))
        return self._extrapolated(n, k, w, slope), error * self.n / n

    def prediction(self, n: int, tail: float, upper: bool) -> tuple[float, float]:
        """Return k such that a further value lies below location - k scale with probability ``tail``.

        ``upper``: above it. Arguments, second result and large n as in `tolerance`.
        """
        from scipy.optimize import brentq

        def excess(k: float) -> float:
            share = float(np.mean(self._tails(self.location - k * self.scale, upper)))
            return math.log(share) - math.log(tail) if share > 0.0 else -1e3

        w = self.quantile(tail, upper)
        step = 1.0 if upper else -1.0
        inner = outer = -w
        # The scales of small samples may be tiny: the limit lies far out.
        while excess(outer) > 0.0:
            outer -= step * (1.0 + abs(outer))
        while excess(inner) < 0.0:
            inner += step * (1.0 + abs(inner))
        k = float(brentq(excess, inner, outer, xtol=1e-12, rtol=1e-13))
        shares = self._tails(self.location - k * self.scale, upper)
        h = 1e-4 * (1.0 + abs(k))
        slope = abs(excess(k + h) - excess(k - h)) / (2.0 * h) * tail
        error = float(np.std(shares)) / math.sqrt(shares.size) / slope
        return self._extrapolated(n, k, w, 0.0), error * self.n / n

    def _extrapolated(self, n: int, k: float, w: float, slope: float) -> float:
        if n == self.n:
            return k
        rest = (k + w - slope / math.sqrt(self.n)) * self.n
        return -w + slope / math.sqrt(n) + rest / n

    def _information_variance(self, w: float) -> float:
        """Return n times the asymptotic variance of location + w scale."""
        if self.normal:
            return 1.0 + 0.5 * w * w
        shift = 1.0 - np.euler_gamma + w
        return 1.0 + 6.0 / math.pi**2 * shift * shift


def simulated(
    n: int, rng: np.random.Generator, *, normal: bool = False, replicates: int = REPLICATES
) -> Pivots:
    """Simulate samples of a standard population and estimate each.

    Parameters
    ----------
    n : int
        Size of the sample in hand, at least 2; no more than `LARGEST` are simulated.
    rng : numpy.random.Generator
    normal : bool
        Population and estimators as in `Pivots`.
    replicates : int
    """
    size = min(n, LARGEST)
    rows = max(1, _BLOCK // size)
    locations, scales = [], []
    for at in range(0, replicates, rows):
        shape = (min(rows, replicates - at), size)
        if normal:
            x = rng.standard_normal(shape)
            location, scale = np.mean(x, axis=1), np.std(x, axis=1, ddof=1)
        else:
            location, scale = gumbel_rows(-np.log(rng.standard_exponential(shape)))
        locations.append(location)
        scales.append(scale)
    return Pivots(np.concatenate(locations), np.concatenate(scales), size, normal)


def spaced_quantile(x: Array, level: float) -> tuple[float, float]:
    """Return a quantile of simulated numbers and its standard error, from the spacing of the numbers around it."""
    half = math.sqrt(level * (1.0 - level) / x.size)
    levels = np.clip([level, level - half, level + half], 0.0, 1.0)
    value, low, high = (float(q) for q in np.quantile(x, levels, method="median_unbiased"))
    return value, 0.5 * (high - low)


def gumbel_rows(y: Array) -> tuple[Array, Array]:
    """Return location and scale of the largest Gumbel likelihood (for maxima) of every row.

    Parameters
    ----------
    y : array, shape (rows, n)
        No row may be without scatter.

    Notes
    -----
    With the location eliminated the scale is the only root of ``b + sum(d w)/sum(w)``, ``w = exp(-d/b)``, d being the
    deviations from the mean; it rises with b and its root lies below -min(d). Newton steps, halved towards a bracket,
    are taken for all rows until none moves.

    References
    ----------
    .. [1] N. L. Johnson, S. Kotz, N. Balakrishnan, Continuous Univariate Distributions, vol. 2, 2nd ed., Wiley 1995,
       section 22.9.3.
    """
    mean = np.mean(y, axis=1)
    d = y - mean[:, None]
    lowest = np.min(d, axis=1)
    from_lowest = d - lowest[:, None]
    high = -lowest
    low = 1e-6 * high
    b = np.clip(np.std(y, axis=1) * (math.sqrt(6.0) / math.pi), low, high)
    for _ in range(100):
        w = np.exp(from_lowest / -b[:, None])
        total = np.sum(w, axis=1)
        first = np.einsum("ij,ij->i", from_lowest, w) / total
        second = np.einsum("ij,ij,ij->i", from_lowest, from_lowest, w) / total
        value = b + first + lowest
        high, low = np.where(value > 0.0, b, high), np.where(value < 0.0, b, low)
        new = b - value / (1.0 + (second - first * first) / (b * b))
        new = np.where((new >= low) & (new <= high), new, 0.5 * (low + high))
        moved = np.max(np.abs(new - b) / b)
        b = new
        if moved < 1e-9:
            break
    total = np.mean(np.exp(from_lowest / -b[:, None]), axis=1)
    return mean + lowest - b * np.log(total), b
