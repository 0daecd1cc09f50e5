"""Where the solvers start: a given point or the medians, and the nearest changes of sign on rays."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.directions import RADII, axes, corners, scan, unit
from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Starts:
    """Starts of n situations.

    Attributes
    ----------
    points : array (m, slots, n)
        NaN where a situation has fewer.
    g : array (n,)
        Limit state at the medians.
    side : array (n,)
        1 where the medians are safe, -1 where they fail.
    seen : array (n,)
        Least radius at which the other sign was seen; inf where none was.
    defined, undefined : bool array (n,)
        Whether the limit state is finite at the medians; whether it is not a number somewhere on a ray.
    evaluations : int
        Evaluations of the limit state, counted by situation.
    """

    points: Array
    g: Array
    side: Array
    seen: Array
    defined: npt.NDArray[np.bool_]
    undefined: npt.NDArray[np.bool_]
    evaluations: int


def starts(problem: Problem, start: Array | None, rays: int) -> Starts:
    """Return the start of each situation and the nearest changes of sign on up to ``rays`` rays."""
    m, n = problem.m, problem.n
    a = np.empty((m, n))
    g = problem.evaluate(np.zeros((m, n)), a)[0]
    side = np.where(g < 0.0, -1.0, 1.0)
    first = np.zeros((m, n)) if start is None else np.array(start)
    length = np.sqrt(dot(first, first))
    first = np.where(np.isfinite(length), first, 0.0) * np.minimum(
        1.0, REACH / np.where(length > 0.0, length, 1.0)
    )
    first = np.where(np.isfinite(first), first, 0.0)
    fixed = np.concatenate([axes(m, problem.random), corners(m, problem.random)], axis=1)
    down = unit(-side * a, np.zeros((m, n)))
    directions = np.concatenate([down[:, None], np.repeat(fixed[:, :, None], n, axis=2)], axis=1)
    slots = directions.shape[1]
    wide = problem.take(np.tile(np.arange(n), slots), slots * n)
    view = scan(wide, directions.reshape(m, -1), np.tile(side, slots), np.tile(g, slots))
    radius = view.start.reshape(slots, n)
    order = np.argsort(radius, axis=0, kind="stable")[:rays]
    radius = np.take_along_axis(radius, order, axis=0)
    nearest = np.take_along_axis(directions, order[None], axis=1) * radius
    points = np.concatenate([first[:, None], nearest], axis=1)
    return Starts(
        points, np.array(g), side, np.min(view.seen.reshape(slots, n), axis=0),
        np.isfinite(g), np.any(view.undefined.reshape(slots, n), axis=0), n + len(RADII) * wide.n,
    )  # fmt: skip
