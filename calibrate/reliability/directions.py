"""Where a search begins: rays from the origin, and where the limit state changes its sign along them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH

Array = npt.NDArray[np.float64]

RADII = (0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 3.75, 4.5, 5.5, 7.0, 9.0, 12.0, REACH)
# Up to this number of variables every corner of the cube is a direction, beyond it 16 corners.
ALL_CORNERS = 4


def fixed_directions(m: int, random: tuple[int, ...]) -> tuple[Array, Array]:
    """Return unit vectors along the axes and towards corners, shapes (m, n_axes) and (m, n_corners).

    Parameters
    ----------
    m : int
        Number of variables.
    random : tuple of int
        The rows that vary; the others stay zero.
    """
    k = len(random)
    rows = list(random)
    axes = np.zeros((m, 2 * k))
    axes[rows, :k] = np.eye(k)
    axes[rows, k:] = -np.eye(k)
    if k <= 1:
        return axes, np.zeros((m, 0))
    if k <= ALL_CORNERS:
        signs = 1.0 - 2.0 * ((np.arange(2**k) >> np.arange(k)[:, None]) & 1)
    else:
        signs = _walsh(k)
    corners = np.zeros((m, signs.shape[1]))
    corners[rows] = signs / np.sqrt(k)
    return axes, corners


def _walsh(k: int) -> Array:
    """Return k rows of 16 signs: Walsh functions, which are mutually orthogonal, with their signs shuffled."""
    points = np.arange(16)
    rows = []
    for i in range(k):
        bits = points & (i % 15 + 1)
        parity = bits ^ (bits >> 2)
        parity = (parity ^ (parity >> 1)) & 1
        # From the sixteenth variable on rows would repeat; a rotation by the round keeps them apart.
        rows.append(np.roll(1.0 - 2.0 * parity, i // 15))
    return np.array(rows)


@dataclass(frozen=True, slots=True)
class Rays:
    """What was seen along rays.

    Attributes
    ----------
    start : array (k,)
        Radius near the first change of sign; NaN where none was seen.
    seen : array (k,)
        Smallest radius at which the other sign was seen; inf where none was.
    undefined : bool array (k,)
        Whether a value was NaN.
    """

    start: Array
    seen: Array
    undefined: npt.NDArray[np.bool_]


def scan(problem: Problem, direction: Array, side: Array, g_origin: Array) -> Rays:
    """Look along rays for the first change of sign.

    Parameters
    ----------
    direction : array (m, k)
        Unit vectors.
    side : array (k,)
        1 where the origin is safe, -1 where it fails.
    g_origin : array (k,)
        Limit state at the origin.
    """
    k = side.size
    start = np.full(k, np.nan)
    seen = np.full(k, np.inf)
    undefined = np.zeros(k, dtype=np.bool_)
    before, inner = side * g_origin, 0.0
    for radius in RADII:
        value = side * problem.value(direction * radius)
        undefined |= np.isnan(value)
        first = (value <= 0.0) & np.isinf(seen)
        share = before / (before - value)
        share = np.where(np.isfinite(share), np.clip(share, 0.05, 1.0), 0.5)
        start = np.where(first, inner + share * (radius - inner), start)
        seen = np.where(first, radius, seen)
        before, inner = value, radius
    return Rays(start, seen, undefined)


def unit(vectors: Array, instead: Array) -> Array:
    """Return unit vectors, ``instead`` where a vector is zero or not finite; both (m, k)."""
    length = np.sqrt(dot(vectors, vectors))
    usable = np.isfinite(length) & (length > 0.0)
    return np.where(usable, vectors / np.where(usable, length, 1.0), instead)
