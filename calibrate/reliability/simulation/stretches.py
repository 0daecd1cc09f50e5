"""The probability of the other side of the limit state along paths, with every crossing that a scan shows."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from calibrate.reliability.problem import Problem
from calibrate.reliability.simulation.base import Array, Counts, Flags, evaluated
from calibrate.reliability.simulation.root import between


@dataclass(frozen=True, slots=True, eq=False)
class Path:
    """Straight paths in standard normal space, base + t direction, one for each column.

    Attributes
    ----------
    base : array (m, k) or None
        None where all paths begin at the origin.
    direction : array (m, k)
        Unit vectors.
    """

    base: Array | None
    direction: Array

    def __call__(self, t: Array | float) -> Array:
        """Return the points at t, a number or an array (k,)."""
        along = self.direction * t
        return along if self.base is None else np.add(self.base, along, out=along)

    def take(self, at: Counts) -> Path:
        """Return some of the paths, possibly repeated."""
        base = None if self.base is None else np.take(self.base, at, axis=1)
        return Path(base, np.take(self.direction, at, axis=1))


def other_side_probability(
    problem: Problem,
    path: Path,
    complement: Flags,
    g: Array,
    knots: Sequence[float],
    tail: Callable[[Array], Array],
) -> tuple[Array, Counts]:
    """Return the probability of the other side along each path, and the evaluations that it took.

    Parameters
    ----------
    problem : Problem
        Of the k paths.
    path : Path
        The paths.
    complement : bool array (k,)
        Where the other side is the safe one.
    g : array (k,)
        Limit state at the first knot.
    knots : sequence of float
        Where the limit state is looked at; two crossings between neighbours cancel unseen. Before the first and
        beyond the last, the side does not change.
    tail : callable
        Probability beyond t.

    Returns
    -------
    array (k,), int array (k,)
        NaN where the limit state is not defined at a knot or near a crossing.
    """
    k = g.size
    before = (g <= 0.0) ^ complement
    total = before.astype(np.float64)
    undefined = np.isnan(g)
    found: list[tuple[Counts, Array, Array, Array, Array]] = []
    inner = knots[0]
    for outer in knots[1:]:
        value = evaluated(problem, path(outer))
        undefined |= np.isnan(value)
        now = (value <= 0.0) ^ complement
        at = np.flatnonzero(now != before)
        found.append((at, np.full(at.size, inner), np.full(at.size, outer), g[at], value[at]))
        g, before, inner = value, now, outer
    evaluations = np.full(k, len(knots) - 1, dtype=np.int64)
    at, lower, upper, g_lower, g_upper = (np.concatenate(parts) for parts in zip(*found, strict=True))
    if at.size:
        part, along = problem.take(at, at.size), path.take(at)

        def function(t: Array, some: Counts | None) -> Array:
            if some is None:
                return evaluated(part, along(t))
            return evaluated(part.take(some, some.size), along.take(some)(t))

        root, passes = between(function, lower, upper, g_lower, g_upper)
        entering = (g_upper <= 0.0) ^ complement[at]
        # Crossings are listed by knots, so each path's are added from the inside outwards.
        np.add.at(total, at, np.where(entering, 1.0, -1.0) * tail(root))
        np.add.at(evaluations, at, passes)
    total[undefined] = np.nan
    return total, evaluations
