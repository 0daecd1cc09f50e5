"""The gradient projection method for design points, for all situations and starts at once.

Each step goes along the projection of -u on the tangent plane of the limit state, the steepest way towards the origin,
and back to the limit state by Newton steps along the gradient. Its length comes from the change of the projected
gradient over the step before (Barzilai and Borwein), and is shortened where the distance does not decrease.

References
----------
.. [1] P.-L. Liu and A. Der Kiureghian, "Optimization algorithms for structural reliability", Structural Safety 9
   (1991): the method.
.. [2] J. B. Rosen, "The gradient projection method for nonlinear programming, II", Journal of the Society for
   Industrial and Applied Mathematics 9 (1961): the return to the constraint.
.. [3] J. Barzilai and J. M. Borwein, "Two-point step size gradient methods", IMA Journal of Numerical Analysis 8
   (1988): the length of steps.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.rows import dot
from calibrate.reliability.search import OUTSIDE, SearchResult
from calibrate.reliability.settings import FormSettings
from calibrate.reliability.solvers.outcome import outcome
from calibrate.reliability.solvers.starts import starts
from calibrate.reliability.status import CONVERGED, KINK, NOT_FINITE, TOO_MANY

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

# Rays on which starts are made, besides that from the medians or the given point.
RAYS = 8
BLOCK = 16_000
MOST = 300
# Newton steps back to the limit state, their greatest length, and the distance at which it is reached.
RETURNS, LONGEST_RETURN, RETURNED = 25, 3.0, 1e-11
LONGEST_MOVE = 3.0
SHORTEST, SHORTEN = 1e-8, 0.3
LEAST_STEP, MOST_STEP = 1e-3, 20.0
MEMORY = 4
DECREASE, ROUNDING = 1e-4, 1e-10


@dataclass(slots=True)
class _Place:
    """Points on the limit state, columns last: gradient, projected direction, whether the limit state was reached."""

    u: Array
    a: Array
    direction: Array
    reached: Flags
    finite: Flags
    passes: npt.NDArray[np.int64]

    def take(self, keep: npt.NDArray[np.int64]) -> _Place:
        """Return some columns."""
        return _Place(*(getattr(self, name).take(keep, axis=-1) for name in self.__slots__))

    def replaced(self, where: Flags, new: _Place) -> _Place:
        """Return the columns of another place where asked."""
        return _Place(*(np.where(where, getattr(new, f), getattr(self, f)) for f in self.__slots__))


def gradient_projection(problem: Problem, start: Array | None = None) -> Reliability:
    """Find the design point of each situation by gradient projection from several starts.

    Parameters
    ----------
    problem : Problem
        Of n situations with m variables.
    start : array (m, n), optional
        First points; without them, the medians.

    Returns
    -------
    Reliability
        The nearest of the points found. Points on kinks are not found; such a situation says so in its status.
    """
    size = max(1, BLOCK // (RAYS + 1))
    parts = []
    with np.errstate(all="ignore"):
        # A problem of no situations goes through as one empty piece.
        for at in range(0, max(problem.n, 1), size):
            piece = slice(at, min(at + size, problem.n))
            part = problem.take(piece, piece.stop - at)
            parts.append(_piece(part, None if start is None else start[:, piece]))
    if len(parts) == 1:
        return parts[0]
    names = ("beta", "u", "x", "alpha", "gradient_norm", "code", "iterations")
    joined = {name: np.concatenate([getattr(p, name) for p in parts], axis=-1) for name in names}
    return Reliability(parts[0].variables, **joined, evaluations=sum(p.evaluations for p in parts))


def _piece(problem: Problem, start: Array | None) -> Reliability:
    begun = starts(problem, start, RAYS)
    m, slots, n = begun.points.shape
    points = begun.points.reshape(m, slots * n)
    at = np.flatnonzero(np.isfinite(points[0]))
    part = problem.take(at % max(n, 1), at.size)
    found = project(part, points[:, at], FormSettings().tolerance)
    ends = SearchResult(
        np.zeros((m, slots * n)),
        np.full(slots * n, TOO_MANY, dtype=np.int8),
        np.zeros(slots * n, dtype=np.int64),
    )
    ends.u[:, at], ends.code[at], ends.passes[at] = found.u, found.code, found.passes
    return outcome(problem, begun, ends, MOST)


def project(problem: Problem, start: Array, tolerance: float) -> SearchResult:
    """Search from ``start``, shape (m, n), until the projected step is shorter than the tolerance."""
    n = start.shape[1]
    end, code, passes = start.copy(), np.full(n, TOO_MANY, dtype=np.int8), np.zeros(n, dtype=np.int64)
    if n == 0:
        return SearchResult(end, code, passes)
    columns = np.arange(n)
    here = _returned(problem, start)
    step, past = np.ones(n), np.repeat(0.5 * dot(here.u, here.u)[None], MEMORY, axis=0)
    while True:
        size = dot(here.direction, here.direction)
        why = np.full(columns.size, TOO_MANY, dtype=np.int8)
        why[step < SHORTEST] = KINK
        why[~here.reached] = TOO_MANY
        why[~here.finite] = NOT_FINITE
        why[here.reached & (size <= tolerance**2)] = CONVERGED
        ended = (why != TOO_MANY) | ~here.reached | (here.passes >= MOST)
        if ended.any():
            at, into = np.flatnonzero(ended), columns[ended]
            end[:, into], code[into], passes[into] = here.u[:, at], why[at], here.passes[at]
            keep = np.flatnonzero(~ended)
            if keep.size == 0:
                return SearchResult(end, code, passes)
            columns, step, past, here = columns[keep], step[keep], past[:, keep], here.take(keep)
            problem = problem.take(keep, keep.size)
        here, step, past = _moved(problem, here, step, past)


def _moved(problem: Problem, here: _Place, step: Array, past: Array) -> tuple[_Place, Array, Array]:
    """Try the step of each column; move where it is good, shorten it where it is not."""
    square = dot(here.direction, here.direction)
    step = np.minimum(step, LONGEST_MOVE / np.sqrt(square))
    there = _returned(problem, here.u + step * here.direction)
    half = 0.5 * dot(there.u, there.u)
    good = there.reached & (half <= np.max(past, axis=0) - DECREASE * step * square + ROUNDING * (1.0 + half))
    passes = here.passes + there.passes
    move, bend = there.u - here.u, here.direction - there.direction
    along = dot(move, bend)
    length = np.where(along > 0.0, dot(move, move) / along, 2.0 * step)
    step = np.where(good, np.clip(length, LEAST_STEP, MOST_STEP), SHORTEN * step)
    past = np.where(good, np.vstack([past[1:], half]), past)
    here = here.replaced(good, there)
    here.passes = passes
    return here, step, past


def _returned(problem: Problem, start: Array) -> _Place:
    """Go from each point to the limit state by Newton steps along the gradient."""
    n = start.shape[1]
    u, a, kept = start.copy(), np.empty_like(start), np.zeros_like(start)
    reached, finite = np.zeros(n, dtype=np.bool_), np.ones(n, dtype=np.bool_)
    passes = np.zeros(n, dtype=np.int64)
    going = np.ones(n, dtype=np.bool_)
    for _ in range(RETURNS):
        g = problem.evaluate(u, a)[0]
        passes += going
        square = dot(a, a)
        usable = np.isfinite(g) & np.isfinite(square) & (square > 0.0)
        kept = np.where(going & usable, a, kept)
        off = np.abs(g) / np.sqrt(square)
        at_end = going & usable & (off <= RETURNED * (1.0 + np.sqrt(dot(u, u))))
        reached |= at_end
        finite &= ~(going & ~usable)
        going &= usable & ~at_end
        part = np.minimum(1.0, LONGEST_RETURN / off)
        following = u - a * (part * g / square)
        inside = dot(following, following) <= OUTSIDE**2
        going &= inside
        if not going.any():
            break
        u = np.where(going, following, u)
    square = dot(kept, kept)
    direction = kept * (dot(kept, u) / np.where(square > 0.0, square, 1.0)) - u
    return _Place(u, kept, direction, reached, finite, passes)
