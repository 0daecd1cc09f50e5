"""The safeguarded search: sequential quadratic programming from many starts at once.

Minimises the distance to the origin on g(u) = 0. The Hessian of the Lagrangian is estimated by damped BFGS updates,
beginning with that of the distance, so that the first step is the HLRF step; a step is accepted when it lowers the
merit function |u|^2/2 + c |g|, compared with the last few so that curvature does not forbid good steps.

References
----------
.. [1] M. J. D. Powell, "A fast algorithm for nonlinearly constrained optimization calculations", Lecture Notes in
   Mathematics 630 (1978): damped update and penalty.
.. [2] Y. Zhang and A. Der Kiureghian, "Two improved algorithms for reliability analysis", IFIP WG 7.5 (1995):
   merit function and line search for HLRF steps.
.. [3] L. Grippo, F. Lampariello and S. Lucidi, "A nonmonotone line search technique for Newton's method", SIAM
   Journal on Numerical Analysis 23 (1986).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import apply, dot
from calibrate.reliability.settings import FormSettings
from calibrate.reliability.status import CONVERGED, KINK, NOT_FINITE, TOO_MANY

Array = npt.NDArray[np.float64]

MEMORY = 3
LONGEST_STEP = 4.0
# Trial points may leave the reach on the way, but not the range in which probabilities are normal numbers.
OUTSIDE = 24.0
SHORTEST = 1e-7
DECREASE = 1e-4
ROUNDING = 1e-13


@dataclass(frozen=True, slots=True)
class SearchResult:
    """Where each search ended.

    Attributes
    ----------
    u : array (m, n)
        Last point; the design point where the code is CONVERGED.
    code : int8 array (n,)
        CONVERGED, TOO_MANY, NOT_FINITE, or KINK when no step from the last point was any good.
    passes : int array (n,)
        Evaluations of limit state and gradient.
    """

    u: Array
    code: npt.NDArray[np.int8]
    passes: npt.NDArray[np.int64]


@dataclass(slots=True)
class _State:
    """Everything that a search knows of its columns; arrays with the columns last."""

    columns: npt.NDArray[np.int64]
    u: Array
    g: Array
    a: Array
    inverse: Array
    penalty: Array
    fraction: Array
    fresh: npt.NDArray[np.bool_]
    old_square: Array
    old_g: Array

    def take(self, keep: npt.NDArray[np.int64]) -> _State:
        """Return the state of some columns."""
        fields = (getattr(self, name) for name in self.__slots__)
        return _State(*(f.take(keep, axis=-1) for f in fields))


def search(problem: Problem, start: Array, settings: FormSettings) -> SearchResult:
    """Search from ``start``, shape (m, n), each column within OUTSIDE."""
    m, n = start.shape
    end = start.copy()
    code = np.full(n, TOO_MANY, dtype=np.int8)
    passes = np.full(n, settings.search_passes)
    a = np.empty_like(start)
    g = problem.evaluate(start, a)[0]
    identity = np.repeat(np.eye(m)[:, :, None], n, axis=2)
    square = 0.5 * dot(start, start)
    state = _State(
        np.arange(n), start.copy(), g.copy(), a, identity, np.zeros(n), np.ones(n), np.ones(n, dtype=np.bool_),
        np.repeat(square[None], MEMORY, axis=0), np.repeat(np.abs(g)[None], MEMORY, axis=0),
    )  # fmt: skip
    for k in range(1, settings.search_passes + 1):
        direction, multiplier, part = _direction(state)
        ended, why = _ended(state, direction, settings)
        if ended.any():
            at = np.flatnonzero(ended)
            into = state.columns[at]
            end[:, into] = state.u[:, at]
            code[into] = why[at]
            passes[into] = k
            keep = np.flatnonzero(~ended)
            if keep.size == 0:
                break
            state = state.take(keep)
            problem = problem.take(keep, keep.size)
            direction, multiplier, part = direction[:, keep], multiplier[keep], part[keep]
        if k == settings.search_passes:
            end[:, state.columns] = state.u
            break
        _advance(problem, state, direction, multiplier, part)
    return SearchResult(end, code, passes)


def _direction(s: _State) -> tuple[Array, Array, Array]:
    """Return the step towards the solution of the quadratic programme, its multiplier, and what part it is."""
    p = apply(s.inverse, s.u)
    q = apply(s.inverse, s.a)
    multiplier = (s.g - dot(s.a, p)) / dot(s.a, q)
    direction = -(p + multiplier * q)
    length = np.sqrt(dot(direction, direction))
    part = np.minimum(1.0, LONGEST_STEP / np.maximum(length, 1e-300))
    return direction * part, multiplier, part


def _ended(
    s: _State, direction: Array, settings: FormSettings
) -> tuple[npt.NDArray[np.bool_], npt.NDArray[np.int8]]:
    """Return which columns are at an end, and why."""
    square = dot(s.a, s.a)
    step = s.a * ((dot(s.a, s.u) - s.g) / square) - s.u
    size = dot(step, step)
    usable = np.isfinite(s.g) & np.isfinite(square)
    why = np.full(s.g.size, TOO_MANY, dtype=np.int8)
    why[~np.isfinite(dot(direction, direction))] = KINK
    why[s.fraction < SHORTEST] = KINK
    why[~(square > 0.0)] = KINK
    why[~usable] = NOT_FINITE
    why[size <= settings.tolerance**2] = CONVERGED
    return why != TOO_MANY, why


def _advance(problem: Problem, s: _State, direction: Array, multiplier: Array, part: Array) -> None:
    """Try the step of each column; move where it is good, shorten it where it is not."""
    weight = np.abs(multiplier)
    s.penalty = np.maximum(1.5 * weight, 0.5 * (s.penalty + weight))
    trial = s.u + s.fraction * direction
    square = dot(trial, trial)
    outside = ~(square <= OUTSIDE**2)
    trial[:, outside] = s.u[:, outside]
    a = np.empty_like(trial)
    g = problem.evaluate(trial, a)[0]
    here = 0.5 * dot(s.u, s.u) + s.penalty * np.abs(s.g)
    slope = dot(s.u, direction) - s.penalty * np.abs(s.g)
    merit = 0.5 * square + s.penalty * np.abs(g)
    past = np.max(s.old_square + s.penalty * s.old_g, axis=0)
    allowed = np.maximum(here, past) + DECREASE * s.fraction * np.minimum(slope, 0.0)
    good = (merit <= allowed + ROUNDING * np.abs(allowed)) & ~outside & np.isfinite(dot(a, a))
    # The quadratic programme has B d = -(u + multiplier a): B times the move is known without B.
    curved = -s.fraction * part * (s.u + multiplier * s.a)
    _update(s, trial - s.u, multiplier * (a - s.a), curved, good)
    s.u = np.where(good, trial, s.u)
    s.a = np.where(good, a, s.a)
    s.g = np.where(good, g, s.g)
    s.old_square = np.where(good, np.vstack([s.old_square[1:], 0.5 * square]), s.old_square)
    s.old_g = np.where(good, np.vstack([s.old_g[1:], np.abs(g)]), s.old_g)
    s.fraction = np.where(good, 1.0, s.fraction * np.where(s.fraction > 0.05, 0.4, 0.1))
    # A search that is stuck forgets its curvature once before it gives up.
    again = (s.fraction < SHORTEST) & ~s.fresh
    s.inverse = np.where(again, np.eye(len(s.u))[:, :, None], s.inverse)
    s.fraction = np.where(again, 1.0, s.fraction)
    s.fresh = again | (s.fresh & ~good)


def _update(s: _State, move: Array, bend: Array, curved: Array, good: npt.NDArray[np.bool_]) -> None:
    """Bring the inverse Hessian of the Lagrangian up to date where the step was good."""
    change = move + bend
    along = dot(move, change)
    expected = dot(move, curved)
    damp = np.where(along < 0.2 * expected, 0.8 * expected / (expected - along), 1.0)
    change = damp * change + (1.0 - damp) * curved
    along = dot(move, change)
    usable = good & (along > 1e-14 * dot(move, move)) & np.isfinite(along)
    scale = 1.0 / np.where(usable, along, 1.0)
    turned = apply(s.inverse, change)
    factor = scale * (1.0 + scale * dot(change, turned))
    update = factor * move[:, None] * move[None] - scale * (
        turned[:, None] * move[None] + move[:, None] * turned[None]
    )
    s.inverse = np.where(usable, s.inverse + update, s.inverse)
