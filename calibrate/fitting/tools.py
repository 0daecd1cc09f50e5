"""Small numerical pieces that several likelihoods share."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from calibrate.fitting.jets import Array, Jet, Number


def jet(value: Number) -> Jet:
    """Return a formula's result, which is a Jet as soon as one parameter is free."""
    assert isinstance(value, Jet)
    return value


def logs(x: Array) -> tuple[float, Array]:
    """Return a centre c of positive values and ln(x/c), exact to rounding also where the scatter is tiny.

    ``c`` is the median: within a factor of two of it x - c is exact, so that
    log1p keeps what the logarithm of a quotient near one would lose.
    """
    centre = float(np.median(x))
    ratio = x / centre
    near = np.abs(ratio - 1.0) <= 0.5
    y = np.log(ratio)
    return centre, np.where(near, np.log1p(np.where(near, (x - centre) / centre, 0.0)), y)


def gumbel_fit(y: Array) -> tuple[float, float]:
    """Return location and scale of the largest Gumbel likelihood (for maxima).

    With the location eliminated the scale is the only root of
    ``b - mean(y) + sum(y w)/sum(w)``, ``w = exp(-y/b)``, which rises with b.

    References
    ----------
    .. [1] N. L. Johnson, S. Kotz, N. Balakrishnan, Continuous Univariate
       Distributions, vol. 2, 2nd ed., Wiley 1995, section 22.9.3.
    """
    mean = float(np.mean(y))
    d = y - mean
    spread = float(np.sqrt(np.mean(d * d)))
    lowest = float(np.min(d))

    def condition(b: float) -> tuple[float, float]:
        w = np.exp(-(d - lowest) / b)
        w /= np.sum(w)
        first = float(np.sum(d * w))
        second = float(np.sum((d - first) ** 2 * w))
        return b + first, 1.0 + second / (b * b)

    scale = rising_root(condition, spread * math.sqrt(6.0) / math.pi, spread * 1e-6, -2.0 * lowest)
    return mean + lowest - scale * math.log(float(np.mean(np.exp(-(d - lowest) / scale)))), scale


def rising_root(
    function: Callable[[float], tuple[float, float]], start: float, low: float, high: float
) -> float:
    """Return the root of a rising function by Newton steps kept inside a shrinking bracket.

    Parameters
    ----------
    function : callable
        Value and slope.
    start, low, high : float
        First guess, and ends between which the root lies.
    """
    x = start
    for _ in range(200):
        value, slope = function(x)
        if value > 0.0:
            high = min(high, x)
        elif value < 0.0:
            low = max(low, x)
        else:
            return x
        new = x - value / slope if slope > 0.0 else 0.5 * (low + high)
        if not low < new < high:
            new = 0.5 * (low + high)
        if abs(new - x) <= 1e-15 * abs(x) or not low < new < high:
            return new
        x = new
    return x


def subset(z: Array, most: int) -> Array:
    """Return at most about ``most`` values that stand for all: evenly spaced order statistics with both ends."""
    if z.size <= 2 * most:
        return z
    ordered = np.sort(z)
    picked = np.linspace(0, z.size - 1, most).round().astype(np.intp)
    return ordered[picked]
