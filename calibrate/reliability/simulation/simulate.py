"""Failure probabilities of many situations by simulation, one random stream for each situation."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.engine import run_chunks
from calibrate.errors import InputError
from calibrate.errors import Problem as Trouble
from calibrate.reliability.problem import Problem
from calibrate.reliability.result import Reliability
from calibrate.reliability.rows import dot
from calibrate.reliability.simulation.base import Method, Task, evaluated
from calibrate.reliability.simulation.batches import keep_memory
from calibrate.reliability.simulation.goal import Goal
from calibrate.reliability.simulation.levels import SubsetSimulation, simulate_by_levels
from calibrate.reliability.simulation.registry import method_of
from calibrate.reliability.simulation.result import Simulation, Tail
from calibrate.reliability.simulation.rounds import simulate_in_rounds
from calibrate.reliability.simulation.sobol import least, simulate_with_nets

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

AnyMethod = Method | SubsetSimulation

# Situations per piece of work.
CHUNK = 500


def simulate(
    problem: Problem,
    method: str,
    *,
    seed: int,
    keys: IntArray | None = None,
    cov: float = 0.02,
    most: int = 1_000_000,
    reliability: Reliability | None = None,
    points: Array | None = None,
    purpose: str = "simulation",
    sobol: bool = False,
    progress: Callable[[int, int], None] | None = None,
    confidence: float = 0.95,
    workers: int = 1,
    chunk: int | None = None,
) -> Simulation:
    """Estimate the failure probability of each situation.

    Parameters
    ----------
    problem : Problem
        n situations of m variables.
    method : str
        A name of :data:`METHODS`.
    seed : int
        Seed of the random streams, at least 0.
    keys : int array (n,), optional
        What identifies each situation, at least 0; the same key draws the same numbers. Default 0, 1, ...
    cov : float
        Coefficient of variation of the estimated probability at which a situation is done.
    most : int
        Evaluations of the limit state that a situation may take, at least 100. Where a sample takes several
        evaluations the last round may exceed it by a few per cent.
    reliability : Reliability, optional
        Design points, from FORM.
    points : array (k, m, n) or (m, n), optional
        Design points in standard normal space, NaN where a situation has fewer than k; default ``reliability.u``.
    purpose : str
        What the draws are for; another purpose gives other numbers.
    sobol : bool
        Whether to use randomised Sobol points in place of independent samples.
    progress : callable, optional
        Called with the number of situations done and n.
    confidence : float
        Confidence of the two-sided intervals.
    workers : int
        Number of threads.
    chunk : int, optional
        Situations per piece of work; no result depends on it.

    Returns
    -------
    Simulation
        Every situation has a status; numerical trouble is never an exception.

    Raises
    ------
    InputError
        An argument is out of range or missing, or the method is unknown.

    Notes
    -----
    Where the medians fail, the probability of survival is sampled, and ``cov`` is that of its estimate. One evaluation
    at the origin tells which one it is.
    """
    chosen = method_of(method)
    _check(problem, chosen, seed, cov, most, confidence, sobol)
    keys = _checked_keys(keys, problem.n)
    where = _checked_points(problem, chosen, reliability, points)
    goal = Goal(cov, int(most), confidence, seed, purpose)
    work = _Work(problem, chosen, keys, where, _directions(where, reliability, points), goal, sobol)
    keep_memory()
    parts = run_chunks(
        work, problem.n, chunk=CHUNK if chunk is None else chunk, workers=workers, progress=progress
    )
    parts = parts or [work(slice(0, 0))]
    tail = Tail(*(_joined([getattr(part[0], name) for part in parts]) for name in Tail.__slots__))
    complement = _joined([part[1] for part in parts])
    return Simulation.of(chosen.name, confidence, tail, complement)


@dataclass(frozen=True, slots=True, eq=False)
class _Work:
    """The function of a chunk."""

    problem: Problem
    method: AnyMethod
    keys: IntArray
    points: Array | None
    direction: Array | None
    goal: Goal
    sobol: bool

    def __call__(self, piece: slice) -> tuple[Tail, npt.NDArray[np.bool_]]:
        problem = self.problem.take(piece, piece.stop - piece.start)
        origin = evaluated(problem, np.zeros((problem.m, problem.n)))
        complement = origin <= 0.0
        task = Task(
            problem,
            origin,
            complement,
            None if self.points is None else self.points[:, :, piece],
            None if self.direction is None else self.direction[:, piece],
        )
        if isinstance(self.method, SubsetSimulation):
            return simulate_by_levels(self.method, task, self.keys[piece], self.goal), complement
        run = simulate_with_nets if self.sobol else simulate_in_rounds
        return run(self.method, task, self.keys[piece], self.goal), complement


def _joined(parts: Sequence[npt.NDArray[Any]]) -> npt.NDArray[Any]:
    whole = np.concatenate(parts)
    whole.setflags(write=False)
    return whole


def _check(
    problem: Problem, method: AnyMethod, seed: int, cov: float, most: int, confidence: float, sobol: bool
) -> None:
    if not (isinstance(seed, int | np.integer) and seed >= 0):
        raise InputError(f"A seed must be a whole number of at least 0; got {seed!r}.")
    if not 0.0 < cov < np.inf:
        raise InputError(f"The wanted coefficient of variation must be positive; got {cov!r}.")
    if sobol and isinstance(method, SubsetSimulation):
        message = "Sobol points do not serve subset simulation, whose samples depend on each other."
        raise InputError(Trouble(message, suggestion="Leave sobol out, or name another method."))
    needed = method.least if isinstance(method, SubsetSimulation) or not sobol else least(method)
    if not needed <= most < np.inf:
        points = " with Sobol points" if sobol else ""
        message = f"{method.name.capitalize()}{points} needs at least {needed} evaluations for each situation"
        raise InputError(f"{message}; got most = {most!r}.")
    if not 0.0 < confidence < 1.0:
        raise InputError(f"A confidence must lie between 0 and 1; got {confidence!r}.")
    if not problem.random:
        raise InputError("Nothing varies: at least one variable must be random.")


def _checked_keys(keys: IntArray | None, n: int) -> IntArray:
    if keys is None:
        return np.arange(n, dtype=np.int64)
    keys = np.asarray(keys)
    if keys.shape != (n,) or keys.dtype.kind not in "iu":
        message = f"Keys must be whole numbers of shape ({n},)"
        raise InputError(f"{message}; got shape {keys.shape} of type {keys.dtype}.")
    if n and keys.min() < 0:
        raise InputError(f"Keys must be at least 0; got {keys.min()}.")
    return keys.astype(np.int64)


def _checked_points(
    problem: Problem, method: AnyMethod, reliability: Reliability | None, points: Array | None
) -> Array | None:
    if not method.needs_points:
        return None
    if points is None:
        if reliability is None:
            message = f"{method.name.capitalize()} needs design points."
            raise InputError(Trouble(message, suggestion="Give reliability, from FORM, or points."))
        points = reliability.u
    points = np.asarray(points, dtype=np.float64)
    if points.ndim == 2:
        points = points[None]
    if points.ndim != 3 or len(points) == 0 or points.shape[1:] != (problem.m, problem.n):
        message = f"Design points must have shape (k, {problem.m}, {problem.n})"
        raise InputError(f"{message}; got {points.shape}.")
    return points


def _directions(where: Array | None, reliability: Reliability | None, points: Array | None) -> Array | None:
    """Return unit vectors from the origin towards the nearest design points."""
    if where is None:
        return None
    if points is None and reliability is not None:
        # Also where the design point is the origin itself.
        return np.asarray(np.where(reliability.beta >= 0.0, -1.0, 1.0) * reliability.alpha)
    square = np.stack([dot(point, point) for point in where])
    nearest = np.argmin(np.where(np.isfinite(square), square, np.inf), axis=0)
    columns = np.arange(where.shape[2])
    length = np.sqrt(square[nearest, columns])
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(where[nearest, :, columns].T / length)
