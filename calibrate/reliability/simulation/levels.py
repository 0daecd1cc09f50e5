"""Independent runs of subset simulation until each situation has the wanted precision."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.simulation.base import Task
from calibrate.reliability.simulation.goal import Goal
from calibrate.reliability.simulation.interval import binomial, of_mean
from calibrate.reliability.simulation.result import NONE_SEEN, NOT_FINITE, REACHED, SPENT, Tail
from calibrate.reliability.simulation.subset import LENGTH, LEVELS, run

Array = npt.NDArray[np.float64]
Counts = npt.NDArray[np.int64]

SIZE = 1000
"""Samples of a level."""

# Runs that are worked on at once.
TOGETHER = 64
# From this number of runs on, the error comes from their scatter.
SCATTER = 12
GROWTH = 4.0
# The formula for one run leaves out that its levels depend on each other; runs scattered by up to this much more.
BETWEEN_LEVELS = 1.25
MARGIN = 1.1


@dataclass(frozen=True, slots=True)
class SubsetSimulation:
    """Runs of 1000 samples per level, fewer where the budget is small; their mean is the estimate.

    Notes
    -----
    One run has a coefficient of variation of about a third at a probability of 1e-4; the wanted one is reached by
    repetition, because the mean of unbiased runs is unbiased.
    """

    name: str = "subset simulation"
    least: int = 2000
    needs_points: bool = False


@dataclass(frozen=True, slots=True, eq=False)
class _Totals:
    """Sums over the runs of each situation, (n,) each."""

    runs: Counts
    value: Array
    square: Array
    variation: Array
    largest: Array
    evaluations: Counts
    undefined: npt.NDArray[np.bool_]

    @classmethod
    def begun(cls, n: int) -> _Totals:
        """Return totals of no runs, with the evaluation at the origin that told on which side the medians lie."""
        value, square, variation, largest = (np.zeros(n) for _ in range(4))
        runs, evaluations = np.zeros(n, dtype=np.int64), np.ones(n, dtype=np.int64)
        return cls(runs, value, square, variation, largest, evaluations, np.zeros(n, dtype=np.bool_))

    def mean(self) -> tuple[Array, Array]:
        """Return the mean of the runs and its coefficient of variation."""
        n = self.runs.astype(np.float64)
        with np.errstate(divide="ignore", invalid="ignore"):
            mean = self.value / n
            # The largest run is counted once more: few runs seldom show how large one can be.
            spread = np.maximum(self.square - n * (mean * mean), 0.0) + self.largest**2 / n
            scatter = spread / np.maximum(n - 1.0, 1.0) / (mean * mean)
            single = BETWEEN_LEVELS * self.variation / n
            cov = np.sqrt(np.where(self.runs >= SCATTER, scatter, single) / n)
        return mean, np.where(mean > 0.0, cov, np.inf)


def simulate_by_levels(method: SubsetSimulation, task: Task, keys: Counts, goal: Goal) -> Tail:
    """Repeat runs until the wanted coefficient of variation is reached or the budget is spent."""
    n = task.problem.n
    size = min(SIZE, goal.most // (10 * LENGTH) * LENGTH)
    totals = _Totals.begun(n)
    step = size - size // LENGTH
    first = min(LEVELS, (goal.most - 1 - size) // step)
    code = np.full(n, SPENT, dtype=np.int8)
    at, more = np.arange(n), np.ones(n, dtype=np.int64)
    levels = np.full(n, first, dtype=np.int64)
    while at.size:
        _repeat(method, task, keys, goal, at, more, size, levels, totals)
        mean, cov = (values[at] for values in totals.mean())
        undefined, reached = totals.undefined[at], cov <= goal.cov
        code[at] = np.where(
            undefined, NOT_FINITE, np.where(reached, REACHED, np.where(mean > 0.0, SPENT, NONE_SEEN))
        )
        runs, used = totals.runs[at], totals.evaluations[at]
        with np.errstate(invalid="ignore"):
            need = np.where(np.isfinite(cov), runs * ((cov / goal.cov) ** 2 * MARGIN - 1.0), 1.0)
        need = np.minimum(np.maximum(np.ceil(need), 1.0), GROWTH * runs)
        # Runs differ by a level: none is begun that could not be ended.
        left = (goal.most - used) // (used // runs + step)
        more = np.where(reached | undefined, 0, np.minimum(need, np.maximum(left, 0))).astype(np.int64)
        at, more = at[more > 0], more[more > 0]
        levels = np.full(n, LEVELS, dtype=np.int64)
    return _tail(totals, code, size, goal)


def _repeat(
    method: SubsetSimulation,
    task: Task,
    keys: Counts,
    goal: Goal,
    at: Counts,
    more: Counts,
    size: int,
    levels: Counts,
    totals: _Totals,
) -> None:
    """Add runs of some situations to the totals, each run with a stream of its own."""
    owners = np.repeat(at, more)
    numbers = totals.runs[owners] + np.arange(owners.size) - np.repeat(np.cumsum(more) - more, more)
    for start in range(0, owners.size, TOGETHER):
        owner, number = owners[start : start + TOGETHER], numbers[start : start + TOGETHER]
        generators = [
            goal.generator(method.name, int(keys[i]), int(k)) for i, k in zip(owner, number, strict=True)
        ]
        found = run(task, owner, generators, size, levels[owner])
        np.add.at(totals.runs, owner, 1)
        np.add.at(totals.value, owner, found.probability)
        np.add.at(totals.square, owner, found.probability**2)
        np.add.at(totals.variation, owner, found.variation)
        np.maximum.at(totals.largest, owner, found.probability)
        np.add.at(totals.evaluations, owner, found.evaluations)
        np.logical_or.at(totals.undefined, owner, found.undefined)


def _tail(totals: _Totals, code: npt.NDArray[np.int8], size: int, goal: Goal) -> Tail:
    mean, cov = totals.mean()
    known = code != NOT_FINITE
    mean, cov = np.where(known, mean, np.nan), np.where(known, cov, np.nan)
    runs = totals.runs.astype(np.float64)
    # The error of few runs comes from the many samples of their levels.
    freedom = np.where(totals.runs >= SCATTER, runs - 1.0, float(size))
    lower, upper = of_mean(mean, cov, freedom, goal.confidence)
    none = code == NONE_SEEN
    # The first level of each run is crude Monte Carlo, which bounds what was not seen.
    bounds = binomial(np.zeros(runs.size), runs * size, goal.confidence)
    lower, upper = np.where(none, bounds[0], lower), np.where(none, bounds[1], upper)
    return Tail(mean, cov, lower, upper, totals.evaluations, code)
