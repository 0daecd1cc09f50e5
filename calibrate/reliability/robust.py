"""What becomes of situations that the fast iteration did not settle beyond doubt: a search from many starts."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from calibrate.reliability.candidates import NEARER, Candidates
from calibrate.reliability.descent import BISECTIONS, STEPS, reach_other_side
from calibrate.reliability.directions import RADII, axes, between, corners, scan, unit
from calibrate.reliability.kink import meet
from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.search import search
from calibrate.reliability.settings import FormSettings
from calibrate.reliability.status import (
    CONVERGED,
    HIDDEN,
    KINK,
    NO_FAILURE,
    NO_SAFETY,
    NOT_FINITE,
    SEVERAL,
    TOO_MANY,
)
from calibrate.reliability.verify import BEYOND, Points, settle

Array = npt.NDArray[np.float64]
Codes = npt.NDArray[np.int8]
Counts = npt.NDArray[np.int64]

# Situations times starts that are worked on at once.
BLOCK = 16_000
# Radius of starts on rays along which no change of sign was seen.
BLIND = 2.0
# Part by which a failure seen on a ray must be nearer than the design point to contradict it.
CONTRADICTS = 1e-6


@dataclass(frozen=True, slots=True)
class Settled:
    """Points with the code of each situation and what they took.

    Attributes
    ----------
    points : Points
        Design points; meaningless where the code says that there is none.
    code : int8 array (n,)
        See :mod:`calibrate.reliability.status`.
    passes : int array (n,)
        Evaluations of limit state and gradient on the way to the point.
    evaluations : int
        Evaluations of the limit state in all, counted by situation.
    """

    points: Points
    code: Codes
    passes: Counts
    evaluations: int


def resolve(problem: Problem, found: Points, passes: Counts, settings: FormSettings) -> Settled:
    """Search every situation of the problem from many starts.

    Parameters
    ----------
    problem : Problem
        The situations in question, n of them.
    found : Points
        What the fast iteration found there.
    passes : int array (n,)
        Its passes.
    """
    size = max(1, BLOCK // (3 * problem.m + 30))
    names = Points.__slots__
    parts = []
    for at in range(0, problem.n, size):
        piece = slice(at, min(at + size, problem.n))
        parts.append(
            _resolve(problem.take(piece, piece.stop - at), found.take(piece), passes[piece], settings)
        )
    return Settled(
        Points(*(np.concatenate([getattr(p.points, name) for p in parts], axis=-1) for name in names)),
        np.concatenate([p.code for p in parts]),
        np.concatenate([p.passes for p in parts]),
        sum(p.evaluations for p in parts),
    )


def _resolve(problem: Problem, found: Points, passes: Counts, settings: FormSettings) -> Settled:
    n, m = problem.n, problem.m
    a = np.empty((m, n))
    g, x, _ = problem.evaluate(np.zeros((m, n)), a)
    side = np.where(g < 0.0, -1.0, 1.0)
    direction, always = _directions(problem, found, a, side)
    slots = always.size
    found = replace(found, good=found.good & _crosses(problem, found, found.u, side))
    pool = Candidates.empty(m, slots + 1, side)
    pool.put(np.full(n, slots), np.arange(n), found, np.where(found.good, CONVERGED, TOO_MANY), passes)
    # Slot s of situation j is column s n + j of everything wide.
    wide = problem.take(np.tile(np.arange(n), slots), slots * n)
    wide_side = np.tile(side, slots)
    view = scan(wide, direction, wide_side, np.tile(g, slots))
    radius = np.where(np.isnan(view.start) & np.repeat(always, n), BLIND, view.start)
    evaluations = 2 * n + len(RADII) * wide.n
    evaluations += _run(wide, direction * radius, np.flatnonzero(~np.isnan(radius)), pool, settings)
    seen = np.min(view.seen.reshape(slots, n), axis=0)
    undefined = np.any(view.undefined.reshape(slots, n), axis=0)
    lost = np.isinf(pool.best()[1]) & np.isinf(seen) & np.isfinite(g)
    if lost.any():
        at = np.flatnonzero(np.tile(lost, slots))
        point = np.full((m, wide.n), np.nan)
        bad = np.zeros(wide.n, dtype=np.bool_)
        point[:, at], bad[at] = reach_other_side(
            wide.take(at, at.size), direction[:, at] * BLIND, wide_side[at]
        )
        undefined |= np.any(bad.reshape(slots, n), axis=0)
        size = np.sqrt(np.sum(point**2, axis=0))
        seen = np.fmin(seen, np.min(np.where(np.isnan(size), np.inf, size).reshape(slots, n), axis=0))
        evaluations += at.size * (STEPS + BISECTIONS)
        evaluations += _run(wide, point, np.flatnonzero(~np.isnan(size)), pool, settings)
    evaluations += _kinks(wide, pool, seen, settings)
    defined = np.isfinite(g)
    for row in x:
        defined &= np.isfinite(row)
    return _judged(pool, seen, defined, undefined, evaluations, settings)


def _directions(
    problem: Problem, found: Points, a: Array, side: Array
) -> tuple[Array, npt.NDArray[np.bool_]]:
    """Return unit vectors (m, slots n), and of which slots a start is made whatever is seen along them."""
    n, m = problem.n, problem.m
    along = axes(m, problem.random)
    others = [corners(m, problem.random), between(m, problem.random)]
    down = np.zeros((m, n))
    down[problem.random[0] if problem.random else 0] = 1.0
    down = unit(-side * a, down)
    point = unit(np.where(found.good, found.u, np.nan), down)
    flips = [np.where(np.arange(m)[:, None] == i, -point, point) for i in problem.random]
    own = np.stack([down, -down, point, -point, *flips], axis=1)
    fixed = np.repeat(np.concatenate([along, *others], axis=1)[:, :, None], n, axis=2)
    direction = np.concatenate([own, fixed], axis=1)
    always = np.zeros(direction.shape[1], dtype=np.bool_)
    always[:4] = True
    always[own.shape[1] : own.shape[1] + along.shape[1]] = True
    return direction.reshape(m, -1), always


def _run(wide: Problem, start: Array, at: Counts, pool: Candidates, settings: FormSettings) -> int:
    """Search from the columns ``at`` of ``start`` and enter what comes of it; return the evaluations."""
    if at.size == 0:
        return 0
    part = wide.take(at, at.size)
    result = search(part, start[:, at], settings)
    slot, column = np.divmod(at, pool.side.size)
    points = settle(part, result.u)
    crosses = _crosses(part, points, result.u, pool.side[column])
    points = replace(points, good=points.good & crosses)
    pool.put(slot, column, points, result.code, result.passes)
    pool.end[:, slot, column] = result.u
    # By the linearisation at the end of the search, g/|a| = beta + alpha u.
    off = np.abs(points.beta + dot(points.alpha, result.u))
    # The end of a search that wandered says something only where a failure is seen beside it.
    pool.off[slot, column] = np.where(crosses | (result.code == KINK), off, np.inf)
    return int(np.sum(result.passes)) + 2 * at.size


def _crosses(problem: Problem, points: Points, end: Array, side: Array) -> npt.NDArray[np.bool_]:
    """Return where the limit state has the other sign just beyond the points, or the ends where there are none.

    A limit state may touch zero and turn back, as ``abs`` and squares do. And a step of the linearisation may be
    short without a zero nearby, where the gradient grows without bound, as at the end of a root.
    """
    # Of an end that counts as nearer than a design point this is nearer still.
    further = end * (1.0 + 0.5 * NEARER)
    beyond = np.where(points.good, -(points.beta + side * BEYOND) * points.alpha, further)
    return np.asarray(side * problem.value(beyond) < 0.0)


def _kinks(wide: Problem, pool: Candidates, seen: Array, settings: FormSettings) -> int:
    """Where searches failed and nothing better explains it, look for kinks at their ends; return the evaluations."""
    nearest = pool.best()[1]
    needed = (
        (np.isinf(nearest) & np.isfinite(seen))
        | (seen < nearest * (1.0 - CONTRADICTS))
        | pool.stuck(nearest, settings.search_passes)
    )
    tried = ~np.isnan(pool.end[0]) & ((pool.code == KINK) | (pool.code == TOO_MANY))
    slot, column = np.nonzero(tried & needed)
    if slot.size == 0:
        return 0
    part = wide.take(slot * pool.side.size + column, slot.size)
    points, evaluations = meet(part, pool.end[:, slot, column], pool.side[column], settings)
    at = np.flatnonzero(points.good)
    code = np.full(at.size, CONVERGED, dtype=np.int8)
    pool.put(slot[at], column[at], points.take(at), code, pool.passes[slot[at], column[at]])
    return evaluations


def _judged(
    pool: Candidates,
    seen: Array,
    defined: npt.NDArray[np.bool_],
    undefined: npt.NDArray[np.bool_],
    evaluations: int,
    settings: FormSettings,
) -> Settled:
    slot, nearest = pool.best()
    some = np.isfinite(nearest)
    code = np.full(nearest.size, CONVERGED, dtype=np.int8)
    code[pool.several(slot, nearest, settings.several)] = SEVERAL
    # Nothing is told that was contradicted: a failure seen nearer, a search that got stuck nearer.
    code[seen < nearest * (1.0 - CONTRADICTS)] = HIDDEN
    code[pool.stuck(nearest, settings.search_passes)] = KINK
    code[~some & (pool.side > 0.0)] = NO_FAILURE
    code[~some & (pool.side < 0.0)] = NO_SAFETY
    code[~some & np.isinf(seen) & undefined] = NOT_FINITE
    crossed = ~some & np.isfinite(seen)
    code[crossed] = KINK
    unfinished = pool.unfinished(settings.search_passes)
    ends = ((TOO_MANY, unfinished), (NOT_FINITE, pool.code == NOT_FINITE), (KINK, pool.code == KINK))
    for reason, where in ends:
        code[crossed & np.any(where, axis=0)] = reason
    code[~defined] = NOT_FINITE
    passes = pool.passes[slot, np.arange(slot.size)]
    return Settled(pool.points(slot), code, np.where(some, passes, np.max(pool.passes, axis=0)), evaluations)
