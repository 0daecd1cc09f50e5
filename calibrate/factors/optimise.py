"""The optimal factors: sequential convex programs with exact derivatives, within bounds and above a floor.

Squared and asymmetric penalties: Gauss-Newton steps, the floor as linear inequalities in every situation that comes
near it. Minimax: the epigraph form as a linear program. Steps are kept within a trust region and accepted by an exact
penalty function, so that the floor is never relaxed silently.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.optimize import linprog

from calibrate.factors.least_distance import least_squares_with_bounds
from calibrate.factors.objective import Flags, Goal
from calibrate.factors.penalties import Minimax
from calibrate.factors.response import Evaluation, Response

Array = npt.NDArray[np.float64]

MAX_PASSES = 60
STEP_TOLERANCE = 1e-9
"""Relative to the width of the bounds; beta is then good to about 1e-9 as well."""
FLOOR_TOLERANCE = 1e-9
RIDGE = 1e-13
NEAR_FLOOR = 3.0
"""Inequalities farther from the floor than so many times the largest step's effect are left out."""


SAME_OPTIMUM = 1e-3
"""Distance in parts of the bounds within which two optima are one."""


@dataclass(frozen=True, slots=True, eq=False)
class Optimum:
    """Where the optimiser ended.

    Attributes
    ----------
    evaluation : Evaluation
    value : float
        Objective there.
    shortfall : float
        By how much the floor is missed.
    converged : bool
        Whether the last step was shorter than the tolerance.
    passes : int
        Evaluations of all situations.
    """

    evaluation: Evaluation
    value: float
    shortfall: float
    converged: bool
    passes: int


def bounds(response: Response) -> tuple[Array, Array]:
    """Return lower and upper bounds of the free factors."""
    lower = np.array([f.lower for f in response.free], dtype=np.float64)
    upper = np.array([f.upper for f in response.free], dtype=np.float64)
    return lower, upper


def optimise(
    response: Response,
    goal: Goal,
    first: Evaluation,
    progress: Callable[[int], None] | None = None,
    known: Array | None = None,
) -> Optimum:
    """Return the local optimum that descends from ``first``, whose factors lie within the bounds.

    A descent that comes close to ``known``, the factors of an optimum, ends there: it leads to that one.
    The rows that take part are those of the current point; a step that loses one of them is not taken.
    """
    lower, upper = bounds(response)
    width = upper - lower
    here, passes = first, 1
    radius = 0.5
    converged = False
    while passes < MAX_PASSES:
        rows = goal.rows(here)
        now, miss = goal.value(here.beta, rows), goal.shortfall(here.beta, rows)
        step, promised = _step(here, goal, rows, lower, upper, radius)
        size = float(np.max(np.abs(step) / width))
        at_known = known is not None and float(np.max(np.abs(here.gamma - known) / width)) < SAME_OPTIMUM
        if size <= STEP_TOLERANCE or at_known:
            converged = True
            break
        there = response(np.clip(here.gamma + step, lower, upper), here)
        passes += 1
        if progress is not None:
            progress(passes)
        then, then_miss = goal.value(there.beta, rows), goal.shortfall(there.beta, rows)
        price = _price(now, promised, miss)
        gain = (now + price * miss) - (then + price * then_miss)
        expected = (now + price * miss) - (promised[0] + price * promised[1])
        noise = 1e-13 * max(1.0, abs(now))
        if np.isfinite(then) and gain > -noise and (gain >= 0.1 * expected or size < 1e-6):
            here = there
            radius = min(1.0, max(radius, 2.0 * size)) if gain >= 0.7 * expected else radius
        elif np.isfinite(then) and gain > 0.0:
            here, radius = there, 0.5 * size
        else:
            radius = 0.25 * size
            if radius <= STEP_TOLERANCE:
                converged = True
                break
    rows = goal.rows(here)
    return Optimum(here, goal.value(here.beta, rows), goal.shortfall(here.beta, rows), converged, passes)


def _price(now: float, promised: tuple[float, float], miss: float) -> float:
    """Return a price of missing the floor that makes the step worth taking."""
    if miss <= FLOOR_TOLERANCE:
        return 100.0 * max(1.0, now)
    saved = miss - promised[1]
    risen = max(0.0, promised[0] - now)
    return max(100.0 * max(1.0, now), 10.0 * risen / saved if saved > 0 else 0.0)


def _step(
    here: Evaluation, goal: Goal, rows: Flags, lower: Array, upper: Array, radius: float
) -> tuple[Array, tuple[float, float]]:
    """Return the step, and objective and shortfall that the model promises for it."""
    width = upper - lower
    # Scaled unknowns: parts of the width of the bounds.
    jacobian = here.jacobian[:, rows] * width[:, None]
    beta = here.beta[rows]
    low = np.maximum((lower - here.gamma) / width, -radius)
    high = np.minimum((upper - here.gamma) / width, radius)
    low, high = np.minimum(low, 0.0), np.maximum(high, 0.0)
    share = goal.share(rows)
    if isinstance(goal.penalty, Minimax):
        step = _minimax_step(beta, jacobian, goal, low, high)
    else:
        step = _smooth_step(beta, jacobian, share, goal, low, high)
    if step is None and goal.floor is not None:
        step = _raising_step(beta, jacobian, goal.floor, low, high)
    if step is None:
        step = np.zeros_like(low)
    step = np.clip(step, low, high)
    modelled = beta + step @ jacobian
    value = goal.penalty.objective(modelled - goal.target, share)
    miss = 0.0 if goal.floor is None else max(0.0, goal.floor - float(modelled.min()))
    return step * width, (value, miss)


def _smooth_step(
    beta: Array, jacobian: Array, share: Array, goal: Goal, low: Array, high: Array
) -> Array | None:
    r = beta - goal.target
    curvature = share * goal.penalty.curvature(r)
    root = np.sqrt(curvature)
    a = (jacobian * root).T
    b = -share * goal.penalty.slope(r) / np.where(root > 0, root, 1.0)
    # The ridge picks the shortest of equally good steps where factors cannot be told apart.
    scale = np.linalg.norm(a, ord="fro")
    f = low.size
    if scale == 0.0:
        return np.zeros(f)  # no factor moves any beta
    a = np.vstack([a, np.sqrt(RIDGE) * scale * np.eye(f)])
    b = np.concatenate([b, np.zeros(f)])
    g, h = [np.eye(f), -np.eye(f)], [low, -high]
    if goal.floor is not None:
        reach = np.abs(jacobian).T @ np.maximum(high, -low)
        near = beta - goal.floor <= NEAR_FLOOR * reach
        g.append(jacobian[:, near].T)
        h.append(goal.floor - beta[near])
    return least_squares_with_bounds(a, b, np.vstack(g), np.concatenate(h))


def _minimax_step(beta: Array, jacobian: Array, goal: Goal, low: Array, high: Array) -> Array | None:
    """Minimise t subject to |r + J d| <= t and the floor."""
    r = beta - goal.target
    f = low.size
    matrix = np.vstack([jacobian.T, -jacobian.T])
    matrix = np.hstack([matrix, -np.ones((matrix.shape[0], 1))])
    limit = np.concatenate([-r, r])
    if goal.floor is not None:
        floor_rows = np.hstack([-jacobian.T, np.zeros((beta.size, 1))])
        matrix = np.vstack([matrix, floor_rows])
        limit = np.concatenate([limit, beta - goal.floor])
    return _program(f, matrix, limit, low, high)


def _raising_step(beta: Array, jacobian: Array, floor: float, low: Array, high: Array) -> Array | None:
    """Raise the smallest beta as far as the step may go, not beyond the floor: minimise t >= floor - beta - J d."""
    f = low.size
    matrix = np.hstack([-jacobian.T, -np.ones((beta.size, 1))])
    return _program(f, matrix, beta - floor, low, high)


def _program(f: int, matrix: Array, limit: Array, low: Array, high: Array) -> Array | None:
    cost = np.zeros(f + 1)
    cost[-1] = 1.0
    box = [*zip(low, high, strict=True), (0.0, None)]
    result = linprog(cost, A_ub=matrix, b_ub=limit, bounds=box, method="highs")
    return None if result.status != 0 or result.x is None else np.asarray(result.x[:f])
