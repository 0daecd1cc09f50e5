"""Count, mean, scatter and shape of a sample, with what a normal sample would show by chance."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike


@dataclass(frozen=True, slots=True)
class Moments:
    """Summary of n values; None where a figure is not defined.

    Attributes
    ----------
    n : int
    mean, median, minimum, maximum : float
    sd : float or None
        With n - 1; None for one value.
    cov : float or None
        ``sd/|mean|``; None where the mean is zero.
    skewness, kurtosis : float or None
        Adjusted skewness G1 (from three values) and excess kurtosis G2 (from
        four); None also where all values are equal.
    skewness_se, kurtosis_se : float or None
        Their standard errors in normal samples, exact for every n.
    """

    n: int
    mean: float
    sd: float | None
    cov: float | None
    skewness: float | None
    skewness_se: float | None
    kurtosis: float | None
    kurtosis_se: float | None
    median: float
    minimum: float
    maximum: float


def moments(values: ArrayLike) -> Moments:
    """Return the summary of a sample.

    Parameters
    ----------
    values : array_like, shape (n,)
        Finite, n >= 1.

    Notes
    -----
    ``G1 = g1 sqrt(n(n-1))/(n-2)`` and
    ``G2 = ((n+1) g2 + 6)(n-1)/((n-2)(n-3))`` with the moment ratios g1, g2.
    In normal samples ``var G1 = 6n(n-1)/((n-2)(n+1)(n+3))`` and
    ``var G2 = 4 var G1 (n^2-1)/((n-3)(n+5))``.

    References
    ----------
    .. [1] D. N. Joanes, C. A. Gill, Comparing measures of sample skewness and
       kurtosis, The Statistician 47 (1998) 183-189 (from memory, recomputed).
    """
    x = np.asarray(values, dtype=np.float64)
    n = int(x.size)
    low, high = float(x.min()), float(x.max())
    unit = max(abs(low), abs(high)) or 1.0  # so that no square or sum can overflow
    y = x / unit
    mean = min(max(float(y.mean()) * unit, low), high)
    d = y - y.mean()
    sd = None if n < 2 else 0.0 if low == high else math.sqrt(float(d @ d) / (n - 1)) * unit
    skewness_se = math.sqrt(6.0 * n * (n - 1) / ((n - 2) * (n + 1.0) * (n + 3))) if n > 2 else None
    kurtosis_se = None
    if skewness_se is not None and n > 3:
        kurtosis_se = 2.0 * skewness_se * math.sqrt((n * n - 1.0) / ((n - 3) * (n + 5.0)))
    skewness = kurtosis = None
    if low < high:
        z = d / np.abs(d).max()
        m2 = float(np.mean(z**2))
        if n > 2:
            skewness = float(np.mean(z**3)) / m2**1.5 * math.sqrt(n * (n - 1.0)) / (n - 2)
        if n > 3:
            excess = float(np.mean(z**4)) / m2**2 - 3.0
            kurtosis = ((n + 1) * excess + 6.0) * (n - 1) / ((n - 2) * (n - 3.0))
    return Moments(
        n=n,
        mean=mean,
        sd=sd,
        cov=None if sd is None or mean == 0.0 else sd / abs(mean),
        skewness=skewness,
        skewness_se=skewness_se,
        kurtosis=kurtosis,
        kurtosis_se=kurtosis_se,
        median=float(np.median(y)) * unit,
        minimum=low,
        maximum=high,
    )


def robust_sd(values: ArrayLike) -> float:
    """Return 1.4826 times the median distance from the median: the standard deviation of a normal core."""
    x = np.asarray(values, dtype=np.float64)
    return 1.482602218505602 * float(np.median(np.abs(x - np.median(x))))
