"""What records of actions say beside the values: how far down was measured, and how much of a block was observed."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import Problem
from calibrate.records.cells import Refusal
from calibrate.records.columns import find, numbers, problem
from calibrate.records.grid import Grid

Array = NDArray[np.float64]


def below_detection(lower: Array, upper: Array, limit: float) -> tuple[Array, Array]:
    """Return the bounds with every value below a detection limit known only to lie below it, zeros among them.

    Parameters
    ----------
    lower, upper : array, shape (n,)
        Bounds of each value; equal where it was observed.
    limit : float
        In the unit of the values.

    Returns
    -------
    lower, upper : array, shape (n,)
        What was known by other bounds stays as it was.
    """
    below = (lower == upper) & (upper < limit)
    return np.where(below, -np.inf, lower), np.where(below, limit, upper)


def read_coverage(grid: Grid, column: str, problems: list[Problem]) -> Array:
    """Return which part of each block was observed, shape (n,).

    Parts that are not above 0 and at most 1 add problems.
    """
    index = find(grid, column)
    found = numbers(grid, index, problems)
    for row, share in zip(grid.rows, found, strict=True):
        if np.isfinite(share) and not 0.0 < share <= 1.0:
            refusal = Refusal(
                f"{share:g} is no part of a block: it must be above 0 and at most 1.",
                "Write 0.95 for 95 %; leave blocks without observations out and state 'blocks'.",
            )
            problems.append(problem(grid, row.number, grid.header[index], refusal))
    return found
