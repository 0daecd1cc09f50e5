"""From the ends of searches to design points with a status in the words of FORM."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import numpy.typing as npt

from calibrate.reliability.candidates import Candidates
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.rows import dot
from calibrate.reliability.search import SearchResult
from calibrate.reliability.settings import FormSettings
from calibrate.reliability.solvers.starts import Starts
from calibrate.reliability.status import (
    CONVERGED,
    HIDDEN,
    KINK,
    NO_FAILURE,
    NO_SAFETY,
    NOT_FINITE,
    SEVERAL,
    TOO_MANY,
    has_beta,
)
from calibrate.reliability.verify import BEYOND, settle

Array = npt.NDArray[np.float64]

# Part by which a failure seen on a ray must be nearer than the design point to contradict it.
CONTRADICTS = 1e-6


def outcome(problem: Problem, begun: Starts, ends: SearchResult, most: int) -> Reliability:
    """Return the nearest of the points at which searches ended.

    Parameters
    ----------
    problem : Problem
        Of n situations.
    begun : Starts
        With slots for each situation.
    ends : SearchResult
        Of the start in slot s of situation j in column s n + j; what never began has no passes.
    most : int
        Passes after which a search was given up.
    """
    m, slots, n = begun.points.shape
    side, column = begun.side, np.tile(np.arange(n), slots)
    wide = problem.take(column, slots * n)
    points = settle(wide, ends.u)
    wide_side = np.tile(side, slots)
    # Beyond the point the limit state must have the other sign: it may touch zero and turn back.
    beyond = np.where(points.good, -(points.beta + wide_side * BEYOND) * points.alpha, 0.0)
    crosses = points.good & (wide_side * wide.value(beyond) < 0.0)
    began = ends.passes > 0
    pool = Candidates.empty(m, slots, side)
    slot = np.repeat(np.arange(slots), n)
    code = np.where(began, ends.code, TOO_MANY).astype(np.int8)
    pool.put(slot, column, replace(points, good=crosses & began), code, ends.passes)
    off = np.abs(points.beta + dot(points.alpha, ends.u))
    pool.end[:, slot, column] = np.where(began, ends.u, np.nan)
    pool.off[slot, column] = np.where(began & (crosses | (ends.code == KINK)), off, np.inf)
    return _told(problem, pool, begun, most, begun.evaluations + int(np.sum(ends.passes)) + 2 * slots * n)


def _told(problem: Problem, pool: Candidates, begun: Starts, most: int, evaluations: int) -> Reliability:
    slot, nearest = pool.best()
    some, seen = np.isfinite(nearest), begun.seen
    code = np.full(nearest.size, CONVERGED, dtype=np.int8)
    code[pool.several(slot, nearest, FormSettings().several)] = SEVERAL
    code[seen < nearest * (1.0 - CONTRADICTS)] = HIDDEN
    code[pool.stuck(nearest, most)] = KINK
    code[~some & (pool.side > 0.0)] = NO_FAILURE
    code[~some & (pool.side < 0.0)] = NO_SAFETY
    code[~some & np.isinf(seen) & begun.undefined] = NOT_FINITE
    crossed = ~some & np.isfinite(seen)
    code[crossed] = KINK
    unfinished = pool.unfinished(most)
    ends = ((TOO_MANY, unfinished), (NOT_FINITE, pool.code == NOT_FINITE), (KINK, pool.code == KINK))
    for reason, where in ends:
        code[crossed & np.any(where, axis=0)] = reason
    code[~begun.defined] = NOT_FINITE
    found = pool.points(slot)
    none = ~has_beta(code)
    for values in (found.beta, found.u, found.x, found.alpha, found.norm):
        values[..., none] = np.nan
    passes = np.where(some, pool.passes[slot, np.arange(slot.size)], np.max(pool.passes, axis=0))
    return Reliability(
        problem.limit_state.variables, found.beta, found.u, found.x, found.alpha, found.norm,
        code, passes, evaluations,
    )  # fmt: skip
