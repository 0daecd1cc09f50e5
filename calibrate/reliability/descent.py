"""Is there anything on the other side of the limit state within reach? Downhill in a ball around the origin."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH

Array = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

STEPS = 80
FIRST_STEP = 3.0
SHORTER = 0.94
BISECTIONS = 12


def reach_other_side(problem: Problem, start: Array, side: Array) -> tuple[Array, Flags]:
    """Go against the gradient of g (with it, where the origin fails), within reach, until g changes its sign.

    Parameters
    ----------
    start : array (m, n)
        First points.
    side : array (n,)
        1 where the origin is safe, -1 where it fails.

    Returns
    -------
    point : array (m, n)
        Near the limit state, on the line from the origin to a point of the other side; NaN where none was reached.
    undefined : bool array (n,)
        Whether a value was NaN on the way.

    Notes
    -----
    Steps have a length of their own, that shrinks geometrically, and are projected on the ball: a projected
    subgradient method, indifferent to the scale of g.
    """
    u = start.copy()
    a = np.empty_like(u)
    across = np.full_like(u, np.nan)
    missed = np.ones(side.size, dtype=np.bool_)
    undefined = np.zeros(side.size, dtype=np.bool_)
    length = FIRST_STEP
    for _ in range(STEPS):
        g = problem.evaluate(u, a)[0]
        undefined |= np.isnan(g)
        hit = missed & (side * g <= 0.0)
        across = np.where(hit, u, across)
        missed &= ~hit
        if not missed.any():
            break
        norm = np.sqrt(dot(a, a))
        moving = np.isfinite(norm) & (norm > 0.0)
        step = np.where(moving, -side * length / np.where(moving, norm, 1.0), 0.0)
        u = u + step * np.where(moving, a, 0.0)
        radius = np.sqrt(dot(u, u))
        u = u * np.where(radius > REACH, REACH / np.maximum(radius, REACH), 1.0)
        length *= SHORTER
    return _on_the_line(problem, across, side), undefined


def _on_the_line(problem: Problem, across: Array, side: Array) -> Array:
    """Return the point between the origin and ``across`` at which g changes its sign."""
    target = np.where(np.isnan(across), 0.0, across)
    low, high = np.zeros(side.size), np.ones(side.size)
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        beyond = side * problem.value(target * middle) <= 0.0
        low, high = np.where(beyond, low, middle), np.where(beyond, middle, high)
    return across * high
