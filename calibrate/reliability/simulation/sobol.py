"""Simulation with randomised Sobol points; the scatter among independent randomisations gives the error.

All situations use one scrambled net of Sobol points; each has its own random digital shifts, from its own stream, and
under each shift every point is uniform. The net is extended, twice as many points in each round, so that no evaluation
is lost.

References
----------
.. [1] I. M. Sobol, "On the distribution of points in a cube and the approximate evaluation of integrals", USSR
   Computational Mathematics and Mathematical Physics 7 (1967).
.. [2] P. L'Ecuyer and C. Lemieux, "Recent advances in randomized quasi-Monte Carlo methods", in: Modeling Uncertainty
   (2002): digital shifts (from memory).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.engine import stream
from calibrate.reliability.simulation.base import Method, Task
from calibrate.reliability.simulation.batches import CELL, Block, blocks
from calibrate.reliability.simulation.goal import Goal
from calibrate.reliability.simulation.moments import ROUNDING, Estimate, Sums
from calibrate.reliability.simulation.result import NO_POINT, NONE_SEEN, NOT_FINITE, REACHED, SPENT, Tail
from calibrate.reliability.simulation.rounds import tail_of

Array = npt.NDArray[np.float64]
Counts = npt.NDArray[np.int64]

SHIFTS = 32
"""Independent randomisations of each situation."""

BITS = 30


def least(method: Method) -> int:
    """Return the fewest evaluations with which a method can begin."""
    return max(method.least, SHIFTS * CELL * method.cost + 1)


def simulate_with_nets(method: Method, task: Task, keys: Counts, goal: Goal) -> Tail:
    """Double the points until the wanted coefficient of variation is reached or the budget is spent."""
    sampler, n = method.sampler(task), task.problem.n
    # One coordinate more than there are variables, for a choice among design points.
    dimension = len(task.random) + 1
    at = np.flatnonzero(sampler.usable)
    shifts = np.zeros((dimension, n, SHIFTS), dtype=np.int64)
    for i in at:
        generator = goal.generator(method.name, int(keys[i]))
        shifts[:, i] = generator.integers(0, 2**BITS, (dimension, SHIFTS))
    sums = Sums.zeros(SHIFTS, n)
    # The origin was evaluated to learn on which side the medians lie.
    sums.evaluations[:] = 1
    code = np.where(sampler.usable, SPENT, NO_POINT).astype(np.int8)
    b = np.zeros((SHIFTS, n))
    net, size, before = _Net(dimension, stream(goal.seed, goal.purpose, "net")), _first(method, goal), 0
    last: Estimate | None = None
    found = _estimate(sums, b, sampler.control_mean, sampler.atom)
    while at.size:
        points = net.next(size)
        wide = (at[:, None] * SHIFTS + np.arange(SHIFTS)).ravel()
        for piece in blocks(wide, np.full(wide.size, size)):
            block = Block(piece.owner // SHIFTS, piece.size, piece.first)
            z, v = _shifted(points, shifts.reshape(dimension, -1), piece)
            columns = block.columns
            values = sampler.values(task.problem.take(columns, columns.size), block, z, v)
            owner, _ = piece.cells
            sums.add(owner % SHIFTS, owner // SHIFTS, values)
        if before == 0 and sampler.control_mean is not None:
            # From the other half of the shifts, so that the estimate stays unbiased.
            even, odd = list(range(0, SHIFTS, 2)), list(range(1, SHIFTS, 2))
            b[even], b[odd] = sums.coefficients(odd), sums.coefficients(even)
        before += size
        found = _not_too_soon(_estimate(sums, b, sampler.control_mean, sampler.atom), last)
        last = found
        mean, cov = found.mean[at], found.cov[at]
        undefined, reached = np.isnan(mean), cov <= goal.cov
        code[at] = np.where(
            undefined, NOT_FINITE, np.where(reached, REACHED, np.where(mean > 0.0, SPENT, NONE_SEEN))
        )
        used = sums.evaluations[at].astype(np.float64)
        at = at[~undefined & ~reached & (2.0 * used <= goal.most)]
        size = before
    return tail_of(found, sums, code, method, goal, SHIFTS - 1.0)


class _Net:
    """Scrambled Sobol points in their order, as whole numbers below 2**BITS; the same for all situations of a run."""

    def __init__(self, dimension: int, rng: np.random.Generator) -> None:
        # scipy.stats takes a second to import.
        from scipy.stats import qmc

        self._points = qmc.Sobol(dimension, scramble=True, bits=BITS, rng=rng)

    def next(self, size: int) -> Counts:
        """Return the next points, (dimension, size)."""
        points = self._points.random(size).T * 2.0**BITS
        return np.ascontiguousarray(points).astype(np.int64)


def _first(method: Method, goal: Goal) -> int:
    """Return the points of the first round, a power of two, for each shift."""
    wanted = min(method.pilot, (goal.most - 1) // method.cost) // SHIFTS
    return int(max(CELL, 2 ** int(np.log2(wanted))))


def _shifted(points: Counts, shifts: Counts, piece: Block) -> tuple[Array, Array]:
    """Return standard normal numbers for the variables, and uniform ones."""
    digits = np.empty((len(points), int(piece.size.sum())), dtype=np.int64)
    start = 0
    for owner, size, first in zip(piece.owner, piece.size, piece.first, strict=True):
        into = digits[:, start : start + size]
        np.bitwise_xor(points[:, first : first + size], shifts[:, owner, None], out=into)
        start += size
    uniform = (digits + 0.5) * 2.0**-BITS
    return special.ndtri(uniform[:-1]), uniform[-1]


def _estimate(sums: Sums, b: Array, known: Array | None, atom: Array | None) -> Estimate:
    """Return the means over the shifts, with the error from their scatter."""
    control = 0.0 if known is None else b * (sums.control - sums.count * known)
    with np.errstate(divide="ignore", invalid="ignore"):
        means = (sums.value - control) / sums.count
        # Each shift is a row: added in order, whatever the number of situations.
        mean = _added(means) / SHIFTS
        if atom is None:
            atom = np.max(sums.largest, axis=0)
        count = sums.count[0] * SHIFTS
        spread = _added((means - mean) ** 2) / (SHIFTS * (SHIFTS - 1.0)) + (atom / count) ** 2
        cov = np.where(mean > 0.0, np.hypot(np.sqrt(spread) / mean, ROUNDING), np.inf)
    return Estimate(mean, cov, count)


def _not_too_soon(found: Estimate, last: Estimate | None) -> Estimate:
    """Return the estimate with an error that falls by no more than half from one doubling to the next.

    The scatter of the shifts is uncertain itself, and to stop as soon as it happens to be small would be to trust
    the luckiest value of it.
    """
    if last is None:
        return found
    grown = found.count > last.count
    least = np.where(grown & np.isfinite(last.cov), 0.5 * last.cov, 0.0)
    kept = np.where(grown, np.maximum(found.cov, least), last.cov)
    return Estimate(found.mean, kept, found.count)


def _added(rows: Array) -> Array:
    total = np.zeros(rows.shape[1])
    for row in rows:
        total += row
    return total
