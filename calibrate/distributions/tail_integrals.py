"""Integrals over the tail of a log-concave density, for exact derivatives by shape parameters.

With F(x; p) = Phi(u) at fixed u, dx/dp = -(dF/dp)/f, and dF/dp is the integral of ``f d(ln f)/dp`` over either tail.
In a coordinate s >= 0 that runs from x into its tail and in which the density is log-concave, the integral relative
to f at x is ``int exp(-drop(s)) score(s) ds``, and a fixed Gauss-Legendre rule over the part that matters is exact
to rounding.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from calibrate.distributions.parameter import Array

# Where the density has fallen by exp(-REACH) the rest no longer changes a double.
DROP = 40.0
_NODES, _WEIGHTS = (0.5 * a for a in np.polynomial.legendre.leggauss(40))
_NODES = _NODES + 0.5
_NEWTON = 60


def tail_length(drop: Callable[[Array], tuple[Array, Array]], beyond: Array) -> Array:
    """Return s where a convex drop reaches :data:`DROP`.

    Parameters
    ----------
    drop : callable
        s -> (drop, d drop/ds), convex, zero at s = 0.
    beyond : array
        Values of s at or beyond the solution; from there Newton's method falls monotonically.
    """
    s = beyond
    done: Any = False
    for _ in range(_NEWTON):
        value, slope = drop(s)
        step = (value - DROP) / slope
        # An element that is done rests, so that its bits do not depend on its neighbours.
        s = np.where(done, s, s - step)
        done |= np.abs(step) <= 0.01 * s
        if np.all(done):
            break
    return s


def tail_integral(length: Array, integrand: Callable[[Array], tuple[Array, ...]]) -> list[Array]:
    """Return the integrals from 0 to ``length`` of each array that ``integrand(s)`` returns.

    Notes
    -----
    Two panels in the root of s, because a long exponential decay may follow a short bend near s = 0.
    """
    total: list[Array] = []
    for start, width in ((0.0, 0.15), (0.15, 0.85)):
        for node, weight in zip(_NODES, _WEIGHTS, strict=True):
            v = start + width * node
            terms = integrand(length * v * v)
            scaled = [2.0 * v * weight * width * t for t in terms]
            total = scaled if not total else [a + b for a, b in zip(total, scaled, strict=True)]
    return [length * t for t in total]
