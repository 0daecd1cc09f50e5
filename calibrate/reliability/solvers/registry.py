"""The solvers by name; a new one is one file and one line here."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError, did_you_mean
from calibrate.errors import Problem as Slip
from calibrate.registry import registered
from calibrate.reliability.form import design_points
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.solvers.gradient_projection import gradient_projection
from calibrate.reliability.solvers.slsqp import slsqp

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Solver:
    """A way to find design points.

    Attributes
    ----------
    name : str
    source : str
        Where the method was published.
    run : callable
        ``run(problem, start) -> Reliability``; start is None or an array (m, n).
    """

    name: str
    source: str
    run: Callable[[Problem, Array | None], Reliability]


def _steps(problem: Problem, start: Array | None) -> Reliability:
    return design_points(problem, start=start)


SOLVERS: Mapping[str, Solver] = registered(
    (
        Solver(
            "hasofer-lind-rackwitz-fiessler",
            "R. Rackwitz and B. Fiessler, Computers & Structures 9 (1978); with checks and a search from many starts",
            _steps,
        ),
        Solver(
            "gradient projection",
            "P.-L. Liu and A. Der Kiureghian, Structural Safety 9 (1991)",
            gradient_projection,
        ),
        Solver(
            "slsqp",
            "D. Kraft, A software package for sequential quadratic programming, DFVLR-FB 88-28 (1988); one situation "
            "after the other, for checks",
            slsqp,
        ),
    )
)


def solver_names() -> tuple[str, ...]:
    """Return the names of all solvers, the usual one first."""
    return tuple(SOLVERS)


def solve(problem: Problem, name: str, start: Array | None = None) -> Reliability:
    """Find the design point of each situation by the solver of this name.

    Parameters
    ----------
    problem : Problem
        Of n situations with m variables.
    name : str
        See :func:`solver_names`.
    start : array (m, n), optional
        Points in standard normal space to begin at; where one is not finite the medians serve.

    Returns
    -------
    Reliability
        With the same statuses whatever the solver.

    Raises
    ------
    InputError
        No solver has that name, or the start has another shape.
    """
    if name not in SOLVERS:
        raise InputError(Slip(f"there is no solver '{name}'.", suggestion=did_you_mean(name, SOLVERS)))
    if start is not None and np.shape(start) != (problem.m, problem.n):
        raise InputError(f"start has shape {np.shape(start)}; it must be {(problem.m, problem.n)}.")
    return SOLVERS[name].run(problem, start)
