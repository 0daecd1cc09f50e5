"""The way of the iteration to the design point of one situation, step by step."""

from __future__ import annotations

from dataclasses import dataclass, field, fields

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError
from calibrate.reliability.form import design_points
from calibrate.reliability.hlrf import iterate
from calibrate.reliability.problem import Linear, Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH, FormSettings
from calibrate.reliability.verify import CORRECTION

Array = npt.NDArray[np.float64]

STEP, LAST, SEARCHED = "step", "design point", "found by search"


@dataclass(frozen=True, slots=True, eq=False)
class Trace:
    """The points at which the limit state was evaluated, in their order.

    Attributes
    ----------
    variables : tuple of str
        Names of the columns of u and x.
    u, x : array (steps, m)
        Points in standard normal and physical space.
    g : array (steps,)
        Limit state there.
    beta : array (steps,)
        Signed distance of the limit state linearised there: (g - grad g . u) / |grad g|.
    distance : array (steps,)
        Distance of the point itself from the origin.
    what : tuple of str
        Of each row: ``step``; the last is the ``design point`` that the steps lead to, or was ``found by search``
        where it lies elsewhere. Without design point all rows are steps.
    status : str
        How the situation ended.
    """

    variables: tuple[str, ...]
    u: Array
    x: Array
    g: Array
    beta: Array
    distance: Array
    what: tuple[str, ...]
    status: str


@dataclass(frozen=True, slots=True, eq=False)
class _Recorded(Problem):
    """A problem that remembers where it was evaluated."""

    points: list[Array] = field(default_factory=list)

    def evaluate(self, u: Array, a: Array) -> tuple[Array, list[Array], Linear]:
        self.points.append(u[:, 0].copy())
        return Problem.evaluate(self, u, a)


def trace(problem: Problem, *, start: Array | None = None, settings: FormSettings | None = None) -> Trace:
    """Follow the iteration of one situation.

    Parameters
    ----------
    problem : Problem
        Of one situation.
    start : array (m, 1), optional
        Where to begin in standard normal space, within a distance of 15 from the origin; without it, at the medians.
    settings : FormSettings, optional
        Tolerances and limits, as for FORM.

    Returns
    -------
    Trace
        The steps are those of FORM, evaluated once more.

    Raises
    ------
    InputError
        The problem has not exactly one situation, or the start does not fit.
    """
    if problem.n != 1:
        raise InputError(f"the problem has {problem.n} situations; the way of exactly one can be followed.")
    begin = np.zeros((problem.m, 1)) if start is None else np.asarray(start, dtype=np.float64)
    if begin.shape != (problem.m, 1):
        raise InputError(f"start has shape {begin.shape}; it must be {(problem.m, 1)}.")
    if not float(dot(begin, begin)[0]) <= REACH**2:
        raise InputError(f"start = {begin[:, 0]}: it must be finite and within {REACH:g} of the origin.")
    settings = settings or FormSettings()
    recorded = _Recorded(**{f.name: getattr(problem, f.name) for f in fields(Problem)})
    with np.errstate(all="ignore"):
        fast = iterate(recorded, begin, settings)
        found = design_points(problem, start=start, settings=settings)
        points = recorded.points
        what = [STEP] * len(points)
        if found.converged[0]:
            move = fast.u - found.u
            same = fast.done[0] and dot(move, move)[0] <= CORRECTION**2
            points = [*points, found.u[:, 0]]
            what.append(LAST if same else SEARCHED)
        u = np.stack(points, axis=1)
        part = problem.take(np.zeros(len(points), dtype=np.intp), len(points))
        a = np.empty_like(u)
        g, x, _ = part.evaluate(u, a)
        beta = (g - dot(a, u)) / np.sqrt(dot(a, a))
        if found.converged[0]:
            # On a kink the gradient of either branch alone does not lead to the point.
            beta[-1] = found.beta[0]
    rows = np.stack([np.broadcast_to(row, g.shape) for row in x], axis=1)
    distance = np.sqrt(dot(u, u))
    return Trace(found.variables, u.T, rows, np.array(g), beta, distance, tuple(what), str(found.status[0]))
