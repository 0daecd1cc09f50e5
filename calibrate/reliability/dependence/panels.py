"""Integrals against the normal density of functions with jumps or steep rises, by Gauss's rule on panels."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from calibrate.distributions.normal_tails import log_phi

Array = npt.NDArray[np.float64]

REACH = 37.4
"""How far out integrals go: the density is just above the smallest double."""

_NODES, _WEIGHTS = (0.5 * a for a in np.polynomial.legendre.leggauss(16))
# Fine enough for every smooth transform times the polynomials of the longest series.
_WIDTH = 0.5

_PARTS = 8
_TOLERANCE = 1e-11
_DEPTH = 14


class Panels(NamedTuple):
    """A function on panels.

    Attributes
    ----------
    ends : array
        Ends of the panels, ascending.
    nodes, weights : array
        Gauss's rule on the panels; the weights include the density.
    values : array
        The function at the nodes.
    """

    ends: Array
    nodes: Array
    weights: Array
    values: Array


def rule(ends: Array) -> tuple[Array, Array]:
    """Return nodes and weights (the density included) on the panels between these ends."""
    nodes, weights = _on(ends[:-1], ends[1:])
    return nodes.ravel(), weights.ravel()


def steep_panels(h: Callable[[Array], Array], reach: float) -> Panels:
    """Return h on panels between -reach and reach on which Gauss's rule integrates h and h**2 times the density.

    Panels are divided as long as their parts give another value, so that jumps end up in panels without weight.
    """
    start = np.linspace(-reach, reach, 2 * math.ceil(reach / _WIDTH) + 1)
    low, high = start[:-1], start[1:]
    nodes, weights, values = _evaluated(h, low, high)
    kept = []
    for depth in range(_DEPTH + 1):
        steps = low + (high - low) * np.linspace(0.0, 1.0, _PARTS + 1)[:, None]
        steps[-1] = high
        part_low, part_high = steps[:-1].T, steps[1:].T
        parts = _evaluated(h, part_low.ravel(), part_high.ravel())
        total = np.sum(_integrals(*parts[1:]).reshape(2, -1, _PARTS), axis=2)
        wrong = np.any(np.abs(total - _integrals(weights, values)) > _TOLERANCE, axis=0)
        wrong &= depth < _DEPTH
        kept.append(tuple(a[~wrong] for a in (low, high, nodes, weights, values)))
        if not wrong.any():
            break
        again = np.repeat(wrong, _PARTS)
        low, high = part_low[wrong].ravel(), part_high[wrong].ravel()
        nodes, weights, values = (a[again] for a in parts)
    low, high, nodes, weights, values = (np.concatenate(a) for a in zip(*kept, strict=True))
    order = np.argsort(low)
    ends = np.append(low[order], np.max(high))
    return Panels(ends, *(a[order].ravel() for a in (nodes, weights, values)))


def _on(low: Array, high: Array) -> tuple[Array, Array]:
    width = (high - low)[:, None]
    nodes = 0.5 * (high + low)[:, None] + width * _NODES
    return nodes, width * _WEIGHTS * np.exp(log_phi(nodes))


def _evaluated(h: Callable[[Array], Array], low: Array, high: Array) -> tuple[Array, Array, Array]:
    nodes, weights = _on(low, high)
    return nodes, weights, h(nodes.ravel()).reshape(nodes.shape)


def _integrals(weights: Array, values: Array) -> Array:
    return np.stack((np.sum(weights * values, axis=1), np.sum(weights * values * values, axis=1)))
