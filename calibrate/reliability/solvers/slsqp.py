"""Sequential least squares programming of scipy, one situation after the other: a check, not a tool for many.

References
----------
.. [1] D. Kraft, "A software package for sequential quadratic programming", DFVLR-FB 88-28 (1988).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import optimize

from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.search import OUTSIDE, SearchResult
from calibrate.reliability.solvers.outcome import outcome
from calibrate.reliability.solvers.starts import starts
from calibrate.reliability.status import CONVERGED, KINK, NOT_FINITE, TOO_MANY

Array = npt.NDArray[np.float64]

# Rays on which starts are made, besides that from the medians or the given point.
RAYS = 4
MOST = 100
TOLERANCE = 1e-14
# An end counts where it is this near to the limit state, and the move to the foot of the perpendicular this short.
ON_SURFACE, FOOT = 1e-6, 1e-5


def slsqp(problem: Problem, start: Array | None = None) -> Reliability:
    """Find the design point of each situation by SLSQP from several starts, with exact gradients.

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

    Notes
    -----
    Costs some milliseconds for each start.
    """
    with np.errstate(all="ignore"):
        begun = starts(problem, start, RAYS)
        m, slots, n = begun.points.shape
        ends = SearchResult(
            np.zeros((m, slots * n)),
            np.full(slots * n, TOO_MANY, dtype=np.int8),
            np.zeros(slots * n, dtype=np.int64),
        )
        for j in range(n):
            single = _Single(problem.take(np.array([j]), 1))
            for slot in range(slots):
                begin = begun.points[:, slot, j]
                if np.all(np.isfinite(begin)):
                    column = slot * n + j
                    ends.u[:, column], ends.code[column], ends.passes[column] = single.nearest(begin)
        return outcome(problem, begun, ends, MOST)


def _half_square(u: Array) -> float:
    return 0.5 * float(u @ u)


def _itself(u: Array) -> Array:
    return u


class _Single:
    """g(u) of one situation, scaled; remembers the last u, as value and gradient are asked for one after the other."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.last = np.full(problem.m, np.nan)
        self.g, self.a = np.nan, self.last
        self.calls = 0
        g, a = self.at(np.zeros(problem.m))
        length = float(np.linalg.norm(a))
        size = length if length > 0.0 else abs(g)
        self.scale = size if np.isfinite(size) and size > 0.0 else 1.0

    def at(self, u: Array) -> tuple[float, Array]:
        """Return g and its gradient."""
        if not np.array_equal(u, self.last):
            self.last, self.calls = u.copy(), self.calls + 1
            a = np.zeros((self.problem.m, 1))
            # Far out the transforms underflow; there the limit state is as it is where they still work.
            shorten = min(1.0, OUTSIDE / max(float(np.linalg.norm(u)), 1e-300))
            g = self.problem.evaluate((u * shorten)[:, None], a)[0]
            self.g, self.a = float(g[0]), a[:, 0]
        return self.g, self.a

    def nearest(self, start: Array) -> tuple[Array, int, int]:
        """Return the point where the search ends, its code, and the evaluations."""
        before = self.calls
        on_surface: Any = {
            "type": "eq",
            "fun": lambda u: self.at(u)[0] / self.scale,
            "jac": lambda u: self.at(u)[1] / self.scale,
        }
        options: Any = {"maxiter": MOST, "ftol": TOLERANCE}
        try:
            end = optimize.minimize(
                _half_square,
                start,
                jac=_itself,
                method="SLSQP",
                constraints=on_surface,
                options=options,
            )
        except ValueError:
            # scipy refuses what is not a number.
            return start, NOT_FINITE, self.calls - before + 1
        u = np.asarray(end.x, dtype=np.float64)
        code = self._code(u, int(end.status))
        return (u if np.all(np.isfinite(u)) else start), code, max(self.calls - before, 1)

    def _code(self, u: Array, status: int) -> int:
        if not np.all(np.isfinite(u)):
            return NOT_FINITE
        g, a = self.at(u)
        norm = float(np.linalg.norm(a))
        if not np.isfinite(g) or not np.isfinite(norm):
            return NOT_FINITE
        if norm == 0.0:
            return KINK
        foot = a * ((float(a @ u) - g) / norm**2)
        if abs(g) <= ON_SURFACE * norm and float(np.linalg.norm(foot - u)) <= FOOT:
            return CONVERGED
        return TOO_MANY if status == 9 else KINK
