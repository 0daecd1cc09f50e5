"""The fast iteration: Hasofer-Lind-Rackwitz-Fiessler steps, accelerated, for all situations at once.

It is lean on purpose. What it does not bring to an end within its passes, or what later checks find suspicious,
goes to the safeguarded search.

References
----------
.. [1] R. Rackwitz and B. Fiessler, "Structural reliability under combined random load sequences", Computers &
   Structures 9 (1978).
.. [2] D. G. Anderson, "Iterative procedures for nonlinear integral equations", Journal of the ACM 12 (1965);
   depth one, for each situation by itself.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH, FormSettings

Array = npt.NDArray[np.float64]

# Points are kept within REACH, so that mixtures stay within (1 + 2 * 0.7) REACH = 36; from 37.5 on probabilities
# underflow. A mixture of 1 would stay at the old point for ever.
MIX_LEAST, MIX_MOST = -0.7, 0.75
# Finished situations are dropped from the arrays once they are this share: dropping costs about half a pass.
DROP_SHARE = 0.3


@dataclass(frozen=True, slots=True)
class FastResult:
    """Where the fast iteration ended.

    Attributes
    ----------
    u : array (m, n)
        Last point; zero where it did not end well.
    done : bool array (n,)
        Whether the last step was shorter than the tolerance.
    passes : int array (n,)
        Evaluations of limit state and gradient.
    first_g, first_a : array (n,), (m, n)
        Limit state and gradient at the start.
    """

    u: Array
    done: npt.NDArray[np.bool_]
    passes: npt.NDArray[np.int64]
    first_g: Array
    first_a: Array


def iterate(problem: Problem, start: Array, settings: FormSettings) -> FastResult:
    """Iterate from ``start``, shape (m, n), each column not longer than REACH."""
    done = np.zeros(problem.n, dtype=np.bool_)
    passes = np.full(problem.n, settings.passes)
    columns = np.arange(problem.n)
    active = np.ones(problem.n, dtype=np.bool_)
    limit = settings.tolerance**2
    u = start.copy()
    a, step, point, old_step, old_point, work = (np.empty_like(u) for _ in range(6))
    blocks: list[tuple[npt.NDArray[np.int64], Array]] = []
    old_size = np.zeros(problem.n)
    first_g, first_a = old_size, a
    for k in range(settings.passes):
        g = problem.evaluate(u, a)[0]
        if k == 0:
            first_g, first_a = g.copy(), a.copy()
        _perpendicular(a, u, g, work, point)
        np.subtract(point, u, out=step)
        size = dot(step, step, work)
        if k == 0:
            u[:] = point
        else:
            _mix(size, dot(step, old_step, work), old_size, point, old_point, u)
        going = active & (size > limit)
        drop = False
        left = int(np.count_nonzero(going))
        if left < np.count_nonzero(active):
            left_now = np.flatnonzero(active & ~going)
            passes[columns[left_now]] = k + 1
            ended = left_now[size[left_now] <= limit]
            done[columns[ended]] = True
            blocks.append((columns[ended], u.take(ended, axis=1)))
            if left == 0:
                break
            active = going
            # What is not finite must not reach the transforms again.
            drop = bool(ended.size < left_now.size or left <= (1.0 - DROP_SHARE) * active.size)
        if drop:
            keep = np.flatnonzero(active)
            columns = columns.take(keep)
            problem = problem.take(keep, left)
            u, step, point = (rows.take(keep, axis=1) for rows in (u, step, point))
            size = size.take(keep)
            old_step, old_point, a, work = (np.empty_like(u) for _ in range(4))
            active = np.ones(left, dtype=np.bool_)
        step, old_step = old_step, step
        point, old_point = old_point, point
        old_size = size
    return FastResult(_assembled(blocks, start), done, passes, first_g, first_a)


def _assembled(blocks: list[tuple[npt.NDArray[np.int64], Array]], start: Array) -> Array:
    """Return the blocks in the order of their columns, zeros elsewhere; one gather beats many scatters."""
    if not blocks:
        return np.zeros_like(start)
    order = np.concatenate([at for at, _ in blocks])
    whole = np.concatenate([block for _, block in blocks], axis=1)
    if order.size < start.shape[1]:
        end = np.zeros_like(start)
        end[:, order] = whole
        return end
    back = np.empty_like(order)
    back[order] = np.arange(order.size)
    return whole.take(back, axis=1)


def _perpendicular(a: Array, u: Array, g: Array, work: Array, point: Array) -> None:
    """Write the foot of the perpendicular from the origin on the linearised limit state, within reach."""
    square = dot(a, a, work)
    factor = dot(a, u, work)
    np.subtract(factor, g, out=factor)
    np.divide(factor, square, out=factor)
    length = factor * factor
    np.multiply(length, square, out=length)
    if not np.max(length) <= REACH**2:
        factor = np.where(length > REACH**2, factor * (REACH / np.sqrt(length)), factor)
    np.multiply(a, factor, out=point)


def _mix(size: Array, across: Array, old_size: Array, point: Array, old_point: Array, u: Array) -> None:
    """Write the mixture of the last two points whose steps, mixed alike, nearly cancel."""
    mix = size - across
    np.subtract(mix, across, out=across)
    np.add(across, old_size, out=across)
    np.divide(mix, across, out=mix)
    # fmax also turns the 0/0 of situations that have ended into a number.
    np.minimum(np.fmax(mix, MIX_LEAST, out=mix), MIX_MOST, out=mix)
    np.subtract(old_point, point, out=u)
    np.multiply(u, mix, out=u)
    np.add(u, point, out=u)
