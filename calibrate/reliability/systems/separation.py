"""Multivariate normal probabilities by separation of variables and lattice rules.

A. Genz, "Numerical computation of multivariate normal probabilities", Journal of Computational and Graphical
Statistics 1 (1992) 141-149, with the order of the variables of G. J. Gibson, C. A. Glasbey and D. A. Elston (1994): the
one whose bound is expected to be hardest to meet comes first. The points are those of a rank-1 lattice built component
by component (F. Y. Kuo and I. H. Sloan), folded at the middle of each side, with eight random shifts. In far tails each
variable of integration is shifted first: Z. I. Botev, "The normal law under linear restrictions", Journal of the Royal
Statistical Society B 79 (2017) 125-148 (all from memory).
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.engine import stream
from calibrate.reliability.systems.quadrature import add_nodes

Array = npt.NDArray[np.float64]

SHIFTS = 8
POINTS = 1024
"""Points of the lattice, for each shift."""

# A variable that the ones before determine has no scatter of its own; conditional variances below are rounding.
_DETERMINED = 1e-13
# Smallest coefficient by which one variable is said to move another.
_MOVES = 1e-6
# Passes of the iteration for the tilt, the part of each correction that is made, the change that still counts as met,
# and the largest tilt.
_TILT_STEPS, _DAMPING, _TILTED, _MOST = 60, 0.35, 0.1, 40.0
# Numbers that are worked on at once.
_BLOCK = 1 << 18


@lru_cache(maxsize=32)
def points(dimensions: int, count: int) -> Array:
    """Return the points of all shifts, shape (dimensions, SHIFTS, count), within (0, 1)."""
    i = np.arange(count)
    candidates = np.arange(1, count // 2, 2)
    x = (candidates[:, None] * i % count) / count
    kernel = 2.0 * np.pi**2 * (x * x - x + 1.0 / 6.0)
    product = np.ones(count)
    lattice = np.empty((dimensions, count))
    for d in range(dimensions):
        factor = 1.0 + 0.8**d * kernel
        best = 0 if d == 0 else int(np.argmin(np.round(np.mean(product * factor, axis=1), 12)))
        product = product * factor[best]
        lattice[d] = x[best]
    shifts = stream(0, "multinormal", dimensions).random((dimensions, SHIFTS, 1))
    w = (lattice[:, None, :] + shifts) % 1.0
    w = np.clip(1.0 - np.abs(2.0 * w - 1.0), 1e-15, 1.0 - 1e-15)
    w.setflags(write=False)
    return w


def separation(b: Array, correlation: Array, count: int = POINTS) -> tuple[Array, Array]:
    """Return P(all Z_i <= b_i) and its standard error for b (k, n) and correlation (k, k, n)."""
    k, n = b.shape
    value, error = np.empty(n), np.empty(n)
    w = points(k - 1, count)
    size = max(1, _BLOCK // (SHIFTS * count))
    for at in range(0, n, size):
        piece = slice(at, at + size)
        bound, factor = _ordered(b[:, piece], correlation[:, :, piece])
        with np.errstate(over="ignore", invalid="ignore"):
            tilt = _tilt(bound, factor)
        value[piece], error[piece] = _integrated(bound, factor, tilt, w)
    return value, error


def _ordered(b: Array, correlation: Array) -> tuple[Array, Array]:
    """Return the bounds and the triangular factor with the variables in the order of integration."""
    k, n = b.shape
    b, rest = b.copy(), correlation.copy()
    factor, mean = np.zeros((k, k, n)), np.zeros((k, n))
    for i in range(k):
        variance = np.array([rest[j, j] for j in range(i, k)])
        free = variance > _DETERMINED
        z = (b[i:] - mean[i:]) / np.sqrt(np.where(free, variance, 1.0))
        # What is determined by others comes last; it costs no integration.
        pick = i + np.argmin(np.where(free, special.log_ndtr(z), 1.0), axis=0)
        order = np.repeat(np.arange(k)[:, None], n, axis=1)
        order[i] = pick
        order = np.where((np.arange(k)[:, None] == pick) & (np.arange(k)[:, None] != i), i, order)
        b, mean = (np.take_along_axis(a, order, axis=0) for a in (b, mean))
        factor = np.take_along_axis(factor, order[:, None, :], axis=0)
        rest = np.take_along_axis(rest, order[:, None, :], axis=0)
        rest = np.take_along_axis(rest, order[None, :, :], axis=1)
        free_here = rest[i, i] > _DETERMINED
        scatter = np.where(free_here, np.sqrt(np.where(free_here, rest[i, i], 1.0)), 0.0)
        factor[i, i] = scatter
        t = (b[i] - mean[i]) / np.where(free_here, scatter, 1.0)
        y = -np.exp(-0.5 * t * t - special.log_ndtr(t)) / np.sqrt(2.0 * np.pi)
        for j in range(i + 1, k):
            factor[j, i] = np.where(free_here, rest[j, i] / np.where(free_here, scatter, 1.0), 0.0)
            mean[j] = mean[j] + factor[j, i] * y
        for j in range(i + 1, k):
            for m in range(i + 1, j + 1):
                rest[j, m] = rest[j, m] - factor[j, i] * factor[m, i]
                rest[m, j] = rest[j, m]
    return b, factor


def _tilt(b: Array, factor: Array) -> Array:
    """Return the shift (k, n) of each variable of integration; 0 for the last, and where no good one is found.

    The conditions are those of the saddle point of the logarithm of the integrand. Any shift is right; only the
    scatter of the integrand depends on how well they are met.
    """
    k, n = b.shape
    scatter = np.array([factor[i, i] for i in range(k)])
    free = scatter > 0.0
    row = factor / np.where(free, scatter, 1.0)[:, None, :] * free[:, None, :]
    bound = b / np.where(free, scatter, 1.0)
    shift, mills = np.zeros((k, n)), np.zeros((k, n))
    change = np.zeros(n)
    for _ in range(_TILT_STEPS):
        x: list[Array] = []
        for i in range(k):
            t = bound[i] - shift[i]
            for j, before in enumerate(x):
                t = t - row[i, j] * before
            mills[i] = np.where(
                free[i], np.exp(-0.5 * t * t - special.log_ndtr(t)) / np.sqrt(2.0 * np.pi), 0.0
            )
            x.append(shift[i] - mills[i])
        change = np.zeros(n)
        for j in range(k - 1):
            wanted = np.zeros(n)
            for i in range(j + 1, k):
                wanted = wanted - row[i, j] * mills[i]
            change = np.maximum(change, np.abs(wanted - shift[j]))
            shift[j] = shift[j] + _DAMPING * (wanted - shift[j])
    met = np.isfinite(change) & (change < _TILTED) & (np.max(np.abs(shift), axis=0) < _MOST)
    return np.where(met, shift, 0.0)


def _integrated(b: Array, factor: Array, tilt: Array, w: Array) -> tuple[Array, Array]:
    k, n = b.shape
    shape = (w.shape[2], w.shape[1], n)
    # In logarithms, because a tilt may be large where the rest is small.
    exponent = np.zeros(shape)
    bounding = _bounding(factor)
    y: list[Array] = []
    for i in range(k):
        free = factor[i, i] > 0.0
        high = np.where(free, _room(b, factor, i, y) / np.where(free, factor[i, i], 1.0), np.inf)
        low = np.full(shape, -np.inf)
        for j in range(i + 1, k):
            here = bounding[j] == i
            if here.any():
                slope = np.where(here, factor[j, i], 1.0)
                limit = _room(b, factor, j, y) / slope
                high = np.where(here & (slope > 0.0), np.minimum(high, limit), high)
                low = np.where(here & (slope < 0.0), np.maximum(low, limit), low)
        # In the tail in which the interval lies.
        mirrored = low > tilt[i]
        start = special.ndtr(np.where(mirrored, tilt[i] - high, low - tilt[i]))
        end = special.ndtr(np.where(mirrored, tilt[i] - low, high - tilt[i]))
        e = np.maximum(end - start, 0.0)
        with np.errstate(divide="ignore"):
            exponent += np.log(e)
        if i < k - 1:
            # The value still rises with w, so that the integrand is the same function in both tails.
            share = np.where(mirrored, 1.0 - w[i].T[:, :, None], w[i].T[:, :, None])
            own = special.ndtri(np.clip(start + share * e, 1e-320, 1.0 - 1e-16))
            own = np.where(free, np.where(mirrored, -own, own), 0.0)
            y.append(own + tilt[i])
            # phi(y) / phi(y - tilt)
            exponent -= tilt[i] * (own + 0.5 * tilt[i])
    by_shift = add_nodes(np.exp(exponent)) / w.shape[2]
    value = add_nodes(by_shift) / SHIFTS
    spread = add_nodes((by_shift - value) ** 2) / (SHIFTS * (SHIFTS - 1.0))
    return value, np.sqrt(spread)


def _bounding(factor: Array) -> npt.NDArray[np.intp]:
    """Return for each variable without scatter of its own the last one that moves it, (k, n); -1 for all others.

    Such a variable bounds that one (A. Genz and K.-S. Kwong, 2000, for singular distributions).
    """
    k, _, n = factor.shape
    last = np.full((k, n), -1, dtype=np.intp)
    for j in range(k):
        for i in range(j):
            last[j] = np.where(np.abs(factor[j, i]) > _MOVES, i, last[j])
        last[j] = np.where(factor[j, j] > 0.0, -1, last[j])
    return last


def _room(b: Array, factor: Array, j: int, y: list[Array]) -> Array:
    """Return what the variables before leave of a bound."""
    room: Array = np.asarray(b[j])
    for i, before in enumerate(y):
        room = room - factor[j, i] * before
    return room
