"""Standardised transforms (x(z) - mean)/sd as series of Hermite polynomials in the standard normal variable z.

The coefficients are integrals over one variable, by the trapezoidal rule, which converges exponentially for the
transforms of all families (Trefethen & Weideman, SIAM Review 56 (2014) 385, from memory). Transforms for which it
does not (mixtures with gaps, tails whose variance hardly exists) get panels and a longer series.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Protocol

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.distributions.normal_tails import log_phi
from calibrate.reliability.dependence.panels import REACH, Panels, rule, steep_panels

Array = npt.NDArray[np.float64]

ORDERS = 200
"""Length of the series of a smooth transform."""

LONG = 2400
"""Length of the series of any other."""

_STEP = 0.125
_CHUNK = 1024
# A rule that misses mean or variance by more than this, or a series that misses so much of the variance, is too coarse.
_MISSED = 1e-8
_MISSED_SERIES = 1e-7
# He_k(z)/sqrt(k!) stays below exp(z^2/4) times 1.09 (Cramer), so that what is less than this no longer counts.
_TAIL = 1e-11


class Expanded(Protocol):
    """Functions of a standard normal variable with their series: see :class:`Standardised`."""

    values: Array
    series: list[Array]
    panels: list[Panels | None]

    def at(self, i: int, z: Array) -> Array:
        """Return the function of element i at z, (nodes,)."""


class Standardised:
    """Standardised transforms of the elements of a distribution, with their series.

    Parameters
    ----------
    distribution : Distribution
        Shape () or (k,).

    Attributes
    ----------
    values : array, shape (k, nodes)
        (x(z) - mean)/sd at the nodes of the trapezoidal rule; NaN where there is no finite sd or no scatter.
    series : list of array
        For each element the coefficients a_1, a_2, ... by He_k(z)/sqrt(k!): of length 1 (normal), :data:`ORDERS`,
        :data:`LONG`, or empty where there is none.
    panels : list of Panels or None
        For each element the transform on panels where the trapezoidal rule is too coarse.
    """

    def __init__(self, distribution: Distribution) -> None:
        self.distribution = distribution
        count = distribution.shape[0] if distribution.shape else 1
        mean = np.broadcast_to(distribution.mean, distribution.shape).reshape(-1)
        sd = np.broadcast_to(distribution.sd, distribution.shape).reshape(-1)
        usable = np.isfinite(mean) & np.isfinite(sd) & (sd > 0.0)
        self.mean, self.sd = np.where(usable, mean, np.nan), np.where(usable, sd, np.nan)
        nodes, weights, _ = table()
        self.values = np.empty((count, nodes.size))
        for start in range(0, count, _CHUNK):
            part = slice(start, start + _CHUNK)
            x = self._x(part, nodes)
            self.values[part] = (x - self.mean[part, None]) / self.sd[part, None]
        self.series: list[Array] = []
        self.panels: list[Panels | None] = []
        for i, (h, good) in enumerate(zip(self.values, usable, strict=True)):
            series, panels = self._expand(i, h, weights) if good else (np.empty(0), None)
            self.series.append(series)
            self.panels.append(panels)

    def at(self, i: int, z: Array) -> Array:
        """Return the standardised transform of element i at z, (nodes,)."""
        return np.asarray((self._x(slice(i, i + 1), z)[0] - self.mean[i]) / self.sd[i])

    def _x(self, part: slice, z: Array) -> Array:
        # Where the variance does not exist x may overflow; what is made of it is NaN anyway.
        with np.errstate(over="ignore", invalid="ignore"):
            if not self.distribution.shape:
                return np.asarray(self.distribution.x(z))[None]
            chosen = self.distribution.take(part)
            return np.ascontiguousarray(chosen.x(np.broadcast_to(z[:, None], (z.size, *chosen.shape))).T)

    def _expand(self, i: int, h: Array, weights: Array) -> tuple[Array, Panels | None]:
        if self.distribution.is_normal:
            return np.ones(1), None
        moments = abs(np.sum(weights * h)), abs(np.sum(weights * h * h) - 1.0)
        # Sums along rows of one length: the same order of addition whatever else is computed.
        series = np.sum(table()[2] * h, axis=1)
        if max(moments) <= _MISSED and abs(np.sum(series * series) - 1.0) <= _MISSED_SERIES:
            return series, None
        nodes = table()[0]
        counts = np.exp(-0.25 * nodes * nodes) * np.abs(h) > _TAIL
        panels = steep_panels(lambda z: self.at(i, z), float(np.max(np.abs(nodes[counts]))) + _STEP)
        return long_series(panels), panels


def extreme_products(a: Expanded, i: int, b: Expanded, j: int) -> tuple[float, float]:
    """Return E[h_i(z) h_j(-z)] and E[h_i(z) h_j(z)], the reach of the correlation of two elements."""
    first, second = a.panels[i], b.panels[j]
    if first is None and second is None:
        weighted = table()[1] * a.values[i]
        opposite, same = (float(np.sum(weighted * h)) for h in (b.values[j][::-1], b.values[j]))
        return opposite, same
    if first is None or second is None:
        if first is None:
            return extreme_products(b, j, a, i)
        weighted = first.weights * first.values
        opposite, same = (float(np.sum(weighted * b.at(j, s * first.nodes))) for s in (-1.0, 1.0))
        return opposite, same
    found = []
    for sign in (-1.0, 1.0):
        z, weights = rule(np.union1d(first.ends, sign * second.ends))
        found.append(float(np.sum(weights * a.at(i, z) * b.at(j, sign * z))))
    return found[0], found[1]


@lru_cache(maxsize=1)
def table() -> tuple[Array, Array, Array]:
    """Return nodes, weights and, for each order from 1, weights times polynomials."""
    half = np.arange(_STEP, REACH, _STEP)
    z = np.concatenate((-half[::-1], [0.0], half))
    weights = _STEP * np.exp(log_phi(z))
    rows = np.empty((ORDERS, z.size))
    before, now = np.ones(z.size), z
    for k in range(1, ORDERS + 1):
        rows[k - 1] = now * weights
        before, now = now, (z * now - np.sqrt(k) * before) / np.sqrt(k + 1.0)
    for array in (z, weights, rows):
        array.setflags(write=False)
    return z, weights, rows


def long_series(h: Panels) -> Array:
    """Return the coefficients of a function on panels, of length :data:`LONG`."""
    weighted = h.weights * h.values
    series = np.empty(LONG)
    before, now = np.ones(h.nodes.size), h.nodes
    for k in range(1, LONG + 1):
        series[k - 1] = np.sum(weighted * now)
        before, now = now, (h.nodes * now - np.sqrt(k) * before) / np.sqrt(k + 1.0)
    return series
