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
ROUND = 24
"""Directions in a plane."""


def axes(m: int, random: tuple[int, ...]) -> Array:
    """Return unit vectors both ways along the axes, shape (m, 2 k).

    Parameters
    ----------
    m : int
        Number of variables.
    random : tuple of int
        The k rows that vary; the others stay zero.
    """
    return _placed(np.concatenate([np.eye(len(random)), -np.eye(len(random))], axis=1), m, random)


def corners(m: int, random: tuple[int, ...]) -> Array:
    """Return unit vectors towards corners of the cube: all of them for few variables, else 16; shape (m, n)."""
    k = len(random)
    if k <= 1:
        return np.zeros((m, 0))
    signs = 1.0 - 2.0 * ((np.arange(2**k) >> np.arange(k)[:, None]) & 1) if k <= ALL_CORNERS else _walsh(k)
    return _placed(signs / np.sqrt(k), m, random)


def between(m: int, random: tuple[int, ...]) -> Array:
    """Return unit vectors between axes and corners where these alone leave wide gaps: two or three variables."""
    k = len(random)
    if k == 2:
        turn = 2.0 * np.pi * np.arange(ROUND) / ROUND
        # Every third is an axis or a corner already.
        turn = turn[np.arange(ROUND) % 3 != 0]
        return _placed(np.array([np.cos(turn), np.sin(turn)]), m, random)
    if k == 3:
        signs = np.array([(a, b) for a in (1.0, -1.0) for b in (1.0, -1.0)]).T / np.sqrt(2.0)
        edges = np.zeros((3, 12))
        for at, pair in enumerate(((0, 1), (0, 2), (1, 2))):
            edges[list(pair), 4 * at : 4 * at + 4] = signs
        return _placed(edges, m, random)
    return np.zeros((m, 0))


def _placed(vectors: Array, m: int, random: tuple[int, ...]) -> Array:
    placed = np.zeros((m, vectors.shape[1]))
    placed[list(random)] = vectors
    return placed


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
        Smallest radius at which the other sign, or zero, was seen; inf where none was.
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
