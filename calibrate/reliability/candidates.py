"""Candidates for the design point of each situation, and which of them is it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH
from calibrate.reliability.status import CONVERGED, KINK, TOO_MANY
from calibrate.reliability.verify import Points

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]
Codes = npt.NDArray[np.int8]
Counts = npt.NDArray[np.int64]

# Distances that differ by less are the same; the earlier start is taken.
TIE = 1e-9
# Points are the same when they are nearer to one another than this part of their distance from the origin.
SAME = 0.05
# A search that got stuck this much nearer than the best point, on the limit state, points to a kink there.
NEARER = 1e-4
ON_SURFACE = 1e-3
FIELDS = ("beta", "u", "x", "alpha", "norm")


@dataclass(frozen=True, slots=True)
class Candidates:
    """One slot for each start, one column for each situation; filled as searches end.

    Attributes
    ----------
    side : array (n,)
        Sign that beta must have.
    beta, norm : array (slots, n)
    u, x, alpha : array (m, slots, n)
    code : int8 array (slots, n)
        How the search ended; TOO_MANY where there was none.
    passes : int array (slots, n)
    end : array (m, slots, n)
        Last point of a search; NaN where there was none.
    off : array (slots, n)
        Distance of that from the limit state, in u.
    """

    side: Array
    beta: Array
    norm: Array
    u: Array
    x: Array
    alpha: Array
    code: Codes
    passes: Counts
    end: Array
    off: Array

    @classmethod
    def empty(cls, m: int, slots: int, side: Array) -> Candidates:
        """Return slots without a candidate."""
        shape = (slots, side.size)
        deep = [np.full((m, *shape), np.nan) for _ in range(4)]
        code = np.full(shape, TOO_MANY, dtype=np.int8)
        passes = np.zeros(shape, dtype=np.int64)
        beta, norm = np.full(shape, np.nan), np.full(shape, np.nan)
        off = np.full(shape, np.inf)
        return cls(side, beta, norm, deep[0], deep[1], deep[2], code, passes, deep[3], off)

    def put(self, slot: Counts, column: Counts, points: Points, code: Codes, passes: Counts) -> None:
        """Enter points, one for each pair of slot and column."""
        for name in FIELDS:
            getattr(self, name)[..., slot, column] = getattr(points, name)
        self.code[slot, column] = np.where((code == CONVERGED) & ~points.good, TOO_MANY, code)
        self.passes[slot, column] = passes

    @property
    def distance(self) -> Array:
        """Distance of the valid candidates, inf for the others; (slots, n).

        A candidate whose beta has the wrong sign lies where a ray from the origin comes out of the other side
        again, so it is not the nearest.
        """
        size = np.abs(self.beta)
        right = (self.beta * self.side >= 0.0) | (size <= TIE)
        return np.where((self.code == CONVERGED) & right & (size <= REACH), size, np.inf)

    def best(self) -> tuple[Counts, Array]:
        """Return the slot of the nearest candidate of each situation and its distance, inf where there is none."""
        distance = self.distance
        nearest = np.min(distance, axis=0)
        return np.argmax(distance <= nearest * (1.0 + TIE) + TIE, axis=0), nearest

    def several(self, slot: Counts, nearest: Array, share: float) -> Flags:
        """Return where another point has more than ``share`` of the probability of the nearest."""
        columns = np.arange(nearest.size)
        first = self.u[:, slot, columns]
        least = special.log_ndtr(-nearest) + np.log(share)
        found = np.zeros(nearest.size, dtype=np.bool_)
        for u, distance in zip(np.moveaxis(self.u, 1, 0), self.distance, strict=True):
            apart = u - first
            other = dot(apart, apart) > (SAME * np.maximum(nearest, 1.0)) ** 2
            found |= np.isfinite(distance) & other & (special.log_ndtr(-distance) > least)
        return found

    def unfinished(self, most: int) -> Flags:
        """Return which searches, (slots, n), used up ``most`` passes and came to no end."""
        return np.asarray((self.code == TOO_MANY) & (self.passes >= most))

    def stuck(self, nearest: Array, most: int) -> Flags:
        """Return where a search got stuck on the limit state, nearer than the nearest candidate.

        At a corner of more than two branches searches wander without end; ``most`` is their number of passes.
        """
        radius = np.sqrt(np.sum(self.end**2, axis=0))
        stuck = ((self.code == KINK) | self.unfinished(most)) & (self.off < ON_SURFACE)
        return np.asarray(np.any(stuck & (radius < nearest * (1.0 - NEARER)), axis=0))

    def points(self, slot: Counts) -> Points:
        """Return the candidates of these slots."""
        columns = np.arange(slot.size)
        picked = {name: getattr(self, name)[..., slot, columns] for name in FIELDS}
        return Points(good=self.code[slot, columns] == CONVERGED, **picked)
