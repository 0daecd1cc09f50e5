"""Correlation of two variables as a power series in the correlation of the standard normal variables behind them."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.dependence.hermite import Expanded, extreme_products

Array = npt.NDArray[np.float64]
Index = npt.NDArray[np.intp]

_STEPS = 100
# What quadrature may miss of the reach: a correlation this close to its end is the end.
_ROUNDING = 1e-10


def pair_series(
    a: Expanded, b: Expanded, i: Index, j: Index, *, limit: float = math.inf
) -> Iterator[tuple[Index, PowerSeries]]:
    """Yield series of the same length together: the places among the pairs (i, j) of elements, and their series.

    Pairs of which one element has no series are left out.

    Parameters
    ----------
    a, b : Expanded
        The functions of the two variables.
    i, j : array of int
        The elements of a and b that belong together.
    limit : float
        Size of what the sum can be at most, where it is known: 1 for correlations.
    """
    lengths = np.array([min(a.series[p].size, b.series[q].size) for p, q in zip(i, j, strict=True)])
    for length in np.unique(lengths[lengths > 0]):
        at = np.flatnonzero(lengths == length)
        products = np.stack([a.series[i[p]][:length] * b.series[j[p]][:length] for p in at], axis=1)
        if length == 1:
            # One is normal: rho is proportional to rho0.
            low, high = -products[0], products[0]
        else:
            reach = np.array([extreme_products(a, i[p], b, j[p]) for p in at])
            low, high = np.maximum(reach[:, 0], -limit), np.minimum(reach[:, 1], limit)
        yield at, PowerSeries(products, low, high)


class PowerSeries:
    """rho(rho0) = sum_k c_k rho0**k, c (orders, pairs), with what lies beyond the last order.

    The value of the remainder at -1 and 1 is known, because the correlation itself is. Coefficients fall like
    k**(-3/2) where both transforms jump at the same place; sums beyond order K are then R(1) w(-K ln rho0),
    w(s) = exp(-s) - sqrt(pi s) erfc(sqrt(s)), half the exponential integral of order 3/2.
    """

    def __init__(self, products: Array, lowest: Array, highest: Array) -> None:
        self.c, self.lowest, self.highest = products, lowest, highest
        self.rest_low = lowest - self._sum(np.full(lowest.size, -1.0))[0]
        self.rest_high = highest - self._sum(np.ones(lowest.size))[0]

    def of(self, pairs: Index) -> PowerSeries:
        """Return the series of some of the pairs, possibly repeated."""
        return PowerSeries(self.c[:, pairs], self.lowest[pairs], self.highest[pairs])

    def _sum(self, r: Array) -> tuple[Array, Array]:
        value, slope = np.zeros(r.size), np.zeros(r.size)
        for c in self.c[::-1]:
            slope = slope * r + value
            value = value * r + c
        return value * r, slope * r + value

    def value(self, r: Array) -> tuple[Array, Array]:
        """Return rho and d rho/d rho0 inside (-1, 1)."""
        value, slope = self._sum(r)
        order, size = self.c.shape[0], np.maximum(np.abs(r), 1e-300)
        s = np.maximum(-order * np.log(size), 1e-30)
        root, tail = np.sqrt(math.pi * s), special.erfc(np.sqrt(s))
        rest = np.where(r < 0.0, self.rest_low, self.rest_high)
        # dw/ds = -sqrt(pi/s) erfc(sqrt(s))/2, ds/dr = -K/r.
        bend = 0.5 * order * root / s * tail / size
        return value + rest * (np.exp(-s) - root * tail), slope + np.sign(r) * rest * bend

    def solve(self, rho: float) -> Array:
        """Return rho0 for rho: Newton's method inside a shrinking bracket; NaN out of reach."""
        at_low, at_high = rho <= self.lowest, rho >= self.highest
        out = (rho < self.lowest - _ROUNDING) | (rho > self.highest + _ROUNDING)
        low, high = np.full(self.lowest.size, -1.0), np.ones(self.lowest.size)
        r = rho / np.where(rho < 0.0, -self.lowest, self.highest)
        r = np.where(at_low | at_high, 0.0, r)
        done = at_low | at_high
        for _ in range(_STEPS):
            value, slope = self.value(r)
            above = value > rho
            high, low = np.where(above, r, high), np.where(above, low, r)
            with np.errstate(divide="ignore", invalid="ignore"):
                moved = r - (value - rho) / slope
            moved = np.where((moved >= low) & (moved <= high), moved, 0.5 * (low + high))
            # What has arrived stays, so that no pair depends on how far others are.
            moved = np.where(done, r, moved)
            done = done | (np.abs(moved - r) <= 1e-15)
            r = moved
            if done.all():
                break
        r = np.where(at_low, -1.0, np.where(at_high, 1.0, r))
        return np.where(out, np.nan, r)
