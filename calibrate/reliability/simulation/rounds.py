"""Simulation with independent samples, in rounds until each situation has the wanted precision."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.reliability.simulation.base import Method, Sampler, Task
from calibrate.reliability.simulation.batches import BLOCK, CELL, FRESH, PIECE, Block, blocks, rounded
from calibrate.reliability.simulation.goal import Goal
from calibrate.reliability.simulation.interval import binomial, of_mean
from calibrate.reliability.simulation.moments import Estimate, Sums, estimate
from calibrate.reliability.simulation.result import (
    NO_POINT,
    NONE_SEEN,
    NOT_FINITE,
    REACHED,
    SPENT,
    Tail,
)

Array = npt.NDArray[np.float64]
Counts = npt.NDArray[np.int64]
Codes = npt.NDArray[np.int8]

# The samples of a situation grow at most by this factor in a round: a first estimate may rest on few failures.
GROWTH = 8.0
# Growth where no failure was seen yet.
BLIND = 4.0
# What is asked for beyond the estimated need, so that most situations need no further round.
MARGIN = 1.1


def simulate_in_rounds(method: Method, task: Task, keys: Counts, goal: Goal) -> Tail:
    """Sample until the wanted coefficient of variation is reached or the budget is spent."""
    sampler, n = method.sampler(task), task.problem.n
    sums = Sums.zeros(3, n)
    # The origin was evaluated to learn on which side the medians lie.
    sums.evaluations[:] = 1
    code = np.where(sampler.usable, SPENT, NO_POINT).astype(np.int8)
    at = np.flatnonzero(sampler.usable)
    generators = {int(i): goal.generator(method.name, int(keys[i])) for i in at}
    sizes = _first(method, goal, at.size)
    halves: Counts | None = sizes // (2 * CELL)
    # Fresh memory for every block would cost more than what is done in it.
    room = np.empty((len(task.random), max(BLOCK, PIECE)))
    while at.size:
        for block in blocks(at, sizes):
            _run(block, task, sampler, generators, sums, room, halves)
        found = estimate(sums, sampler.control_mean, sampler.atom)
        code[at], sizes = _judged(found, sums, at, goal)
        for i in at[sizes == 0]:
            del generators[int(i)]
        at, sizes = at[sizes > 0], sizes[sizes > 0]
        halves = None
    found = estimate(sums, sampler.control_mean, sampler.atom)
    return tail_of(found, sums, code, method, goal)


def _first(method: Method, goal: Goal, n: int) -> Counts:
    """Return the samples of the first round: at least a cell for each half."""
    affordable = (goal.most - 1) // (method.cost * CELL) * CELL
    return np.full(n, max(2 * CELL, min(method.pilot, affordable)), dtype=np.int64)


def _run(
    block: Block,
    task: Task,
    sampler: Sampler,
    generators: dict[int, np.random.Generator],
    sums: Sums,
    room: Array,
    halves: Counts | None,
) -> None:
    columns = block.columns
    # Where no uniform numbers are needed the places within a cell stand for them.
    z, v = room[:, : columns.size], np.tile((np.arange(CELL) + 0.5) / CELL, columns.size // CELL)
    by_cell = v.reshape(-1, CELL)
    start = 0
    for i, size in zip(block.owner.tolist(), block.size.tolist(), strict=True):
        generator = generators[i]
        for row in z:
            generator.standard_normal(out=row[start : start + size])
        if sampler.mixed[i]:
            v[start : start + size] = generator.random(size)
        else:
            fresh = by_cell[start // CELL : (start + size) // CELL, :FRESH]
            fresh += (0.5 - generator.random(fresh.shape)) / CELL
        start += size
    values = sampler.values(task.problem.take(columns, columns.size), block, z, v)
    owner, order = block.cells
    fold = np.full(owner.size, 2) if halves is None else np.where(order < halves[0], 0, 1)
    sums.add(fold, owner, values)


def _judged(found: Estimate, sums: Sums, at: Counts, goal: Goal) -> tuple[Codes, Counts]:
    """Return how the situations stand and how many samples each needs next; 0 ends it."""
    mean, cov, count = found.mean[at], found.cov[at], found.count[at]
    used = sums.evaluations[at].astype(np.float64)
    undefined = np.isnan(mean)
    reached = cov <= goal.cov
    with np.errstate(invalid="ignore"):
        need = np.where(np.isfinite(cov), count * ((cov / goal.cov) ** 2 * MARGIN - 1.0), BLIND * count)
    need = np.minimum(np.maximum(need, CELL), GROWTH * count)
    left = np.floor((goal.most - used) / (used / count * CELL)) * CELL
    sizes = np.minimum(
        rounded(np.where(reached | undefined, 0.0, need)), np.maximum(left, 0.0).astype(np.int64)
    )
    code = np.where(undefined, NOT_FINITE, np.where(reached, REACHED, np.where(mean > 0.0, SPENT, NONE_SEEN)))
    return code.astype(np.int8), sizes


def tail_of(
    found: Estimate, sums: Sums, code: Codes, method: Method, goal: Goal, freedom: float | None = None
) -> Tail:
    """Return the result of estimates.

    Parameters
    ----------
    found, sums : Estimate, Sums
        What the samples gave.
    code : int8 array (n,)
        How each situation ended.
    freedom : float, optional
        Degrees of freedom of the error, where it comes from few repetitions in place of all samples.
    """
    known = (code != NOT_FINITE) & (code != NO_POINT)
    count = np.where(known, found.count, 1.0)
    mean, cov = np.where(known, found.mean, np.nan), np.where(known, found.cov, np.nan)
    degrees = np.maximum(count - 1.0, 1.0) if freedom is None else np.full(count.size, freedom)
    lower, upper = of_mean(mean, cov, degrees, goal.confidence)
    none = code == NONE_SEEN
    if method.bounded:
        lower_exact, upper_exact = binomial(
            np.where(none, 0.0, np.rint(mean * count)), count, goal.confidence
        )
        exact = known if method.binomial and freedom is None else none
        lower, upper = np.where(exact, lower_exact, lower), np.where(exact, upper_exact, upper)
    else:
        # Weights have no useful bound: what lies away from the points is unknown.
        lower, upper = np.where(none, 0.0, lower), np.where(none, np.nan, upper)
    samples = np.where(code == NO_POINT, 0, sums.evaluations)
    return Tail(mean, cov, lower, upper, samples, code)
