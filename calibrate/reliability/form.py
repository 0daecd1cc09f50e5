"""FORM over many situations at once.

Each chunk goes through four stages: the accelerated iteration (:mod:`.hlrf`), an evaluation that makes everything
consistent and a look at the other side of the origin (:mod:`.verify`), and for what is not beyond doubt then a
search from many starts (:mod:`.robust`). Every operation is elementwise over situations, so a situation's result is
the same, to the last bit, alone or in any batch.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.engine import run_chunks
from calibrate.reliability.conditional import Conditional
from calibrate.reliability.correlation import Correlation
from calibrate.reliability.hlrf import iterate
from calibrate.reliability.limit_state import LimitState
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.robust import resolve
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH, FormSettings
from calibrate.reliability.status import CONVERGED, has_beta
from calibrate.reliability.verify import Flags, Points, settle, suspicious, unruly

Array = npt.NDArray[np.float64]


def form(
    limit_state: LimitState,
    distributions: Sequence[Distribution | Conditional],
    n: int,
    *,
    correlation: Correlation | None = None,
    start: Array | None = None,
    settings: FormSettings | None = None,
    workers: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> Reliability:
    """Find the design point of each of n situations.

    Parameters
    ----------
    limit_state : LimitState
        g > 0 is safe; its values are numbers or arrays of shape (n,).
    distributions : sequence of Distribution or Conditional
        One for each of ``limit_state.variables``, parameters of shape () or (n,).
    n : int
        Number of situations.
    correlation : Correlation, optional
        Of the standard normal variables behind the basic ones; without it, they are independent.
    start : array (m, n), optional
        Points in standard normal space to begin at, usually the last design points; where one is not finite the
        medians serve.
    settings : FormSettings, optional
        Tolerances and limits.
    workers : int
        Number of threads.
    progress : callable, optional
        Called with the number of situations done and n.

    Returns
    -------
    Reliability
        Every situation has a status; numerical trouble is never an exception.

    Raises
    ------
    ValueError
        Shapes do not fit together.

    Notes
    -----
    Design points are looked for within a distance of 15 from the origin. The nearest point is wanted, not any
    stationary one: a situation whose limit state is not plainly monotonic between the design point and its mirror
    image, or that has kinks, is searched from many starts, and the nearest point found is returned.
    """
    distributions = tuple(distributions)
    if not distributions:
        raise ValueError("At least one basic variable is needed.")
    if len(distributions) != len(limit_state.variables):
        text = f"{len(limit_state.variables)} variables, {len(distributions)} distributions"
        raise ValueError(f"The limit state and the distributions do not fit together: {text}.")
    for name, distribution in zip(limit_state.variables, distributions, strict=True):
        if distribution.shape not in ((), (n,)):
            raise ValueError(f"{name}: parameters have shape {distribution.shape}, expected () or ({n},).")
    if start is not None and start.shape != (len(distributions), n):
        raise ValueError(f"start has shape {start.shape}, expected {(len(distributions), n)}.")
    if correlation is not None and correlation.factor.shape[0] != len(distributions):
        text = f"{correlation.factor.shape[0]} rows, {len(distributions)} distributions"
        raise ValueError(f"The correlation and the distributions do not fit together: {text}.")
    problem = Problem(limit_state, distributions, n, correlation)
    return design_points(problem, start=start, settings=settings, workers=workers, progress=progress)


def design_points(
    problem: Problem,
    *,
    start: Array | None = None,
    settings: FormSettings | None = None,
    workers: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> Reliability:
    """Find the design point of each situation of a problem; see :func:`form`."""
    settings = settings or FormSettings()
    task = _Task(problem, start, settings)
    parts = run_chunks(task, problem.n, chunk=settings.chunk, workers=workers, progress=progress)
    variables = problem.limit_state.variables
    return _joined(variables, parts) if parts else _nothing(variables)


@dataclass(frozen=True, slots=True)
class _Task:
    """The function of a chunk."""

    problem: Problem
    start: Array | None
    settings: FormSettings

    def __call__(self, piece: slice) -> Reliability:
        with np.errstate(all="ignore"):
            problem = self.problem.take(piece, piece.stop - piece.start)
            start = None if self.start is None else self.start[:, piece]
            return _chunk(problem, start, self.settings)


def _chunk(problem: Problem, start: Array | None, settings: FormSettings) -> Reliability:
    cold = start is None
    begin = np.zeros((problem.m, problem.n)) if start is None else _within_reach(start)
    fast = iterate(problem, begin, settings)
    points = settle(problem, fast.u)
    good = points.good & fast.done & (np.abs(points.beta) <= REACH)
    points = replace(points, good=good)
    passes = fast.passes
    code = np.full(problem.n, CONVERGED, dtype=np.int8)
    evaluations = int(np.sum(passes)) + problem.n
    doubtful = ~good
    if settings.verify:
        if problem.limit_state.kinks:
            doubtful = np.ones(problem.n, dtype=np.bool_)
        else:
            doubtful |= suspicious(
                problem, points, fast.first_g if cold else None, fast.first_a if cold else None
            )
            evaluations += problem.n
            if not problem.limit_state.affine:
                doubtful, more = _looked_at_more(problem, points, doubtful)
                evaluations += more
    if doubtful.any():
        at = np.flatnonzero(doubtful)
        settled = resolve(problem.take(at, at.size), points.take(at), passes[at], settings)
        for name in Points.__slots__:
            getattr(points, name)[..., at] = getattr(settled.points, name)
        code[at] = settled.code
        passes[at] = settled.passes
        evaluations += settled.evaluations
        none = ~has_beta(code)
        for values in (points.beta, points.u, points.x, points.alpha, points.norm):
            values[..., none] = np.nan
    return Reliability(
        problem.limit_state.variables, points.beta, points.u, points.x, points.alpha, points.norm,
        code, passes, evaluations,
    )  # fmt: skip


def _looked_at_more(problem: Problem, points: Points, doubtful: Flags) -> tuple[Flags, int]:
    """Return which situations are doubtful after all, and the evaluations that this took."""
    at = np.flatnonzero(~doubtful)
    if at.size == 0:
        return doubtful, 0
    whole = at.size == problem.n
    found, part = (points, problem) if whole else (points.take(at), problem.take(at, at.size))
    doubtful = doubtful.copy()
    doubtful[at] = unruly(part, found)
    return doubtful, at.size * (8 + 2 * problem.m)


def _within_reach(start: Array) -> Array:
    """Return the starts, the origin in place of those that are not finite, shortened where they are too far."""
    square = dot(start, start)
    usable = np.isfinite(square)
    shorten = np.where(square > REACH**2, REACH / np.sqrt(square), 1.0)
    return np.where(usable, start, 0.0) * np.where(usable, shorten, 1.0)


def _joined(variables: tuple[str, ...], parts: Sequence[Reliability]) -> Reliability:
    def whole(name: str) -> npt.NDArray[Any]:
        array = np.concatenate([getattr(p, name) for p in parts], axis=-1)
        array.setflags(write=False)
        return array

    return Reliability(
        variables, whole("beta"), whole("u"), whole("x"), whole("alpha"), whole("gradient_norm"), whole("code"),
        whole("iterations"), sum(p.evaluations for p in parts),
    )  # fmt: skip


def _nothing(variables: tuple[str, ...]) -> Reliability:
    none, rows = np.zeros(0), np.zeros((len(variables), 0))
    code, count = np.zeros(0, dtype=np.int8), np.zeros(0, dtype=np.int64)
    return Reliability(variables, none, rows, rows, rows, none, code, count, 0)
