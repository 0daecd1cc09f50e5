"""Sums over the variables, in a fixed order.

numpy's own reductions add in an order that depends on the shape, and matrix products on the library: with these
loops a situation gets the same bits alone and in any batch.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]


def add_rows(rows: Array) -> Array:
    """Return the sum over the first axis, added in its order."""
    if len(rows) == 1:
        return np.array(rows[0])
    total: Array = rows[0] + rows[1]
    for row in rows[2:]:
        np.add(total, row, out=total)
    return total


def dot(a: Array, b: Array, buffer: Array | None = None) -> Array:
    """Return the scalar product of each column of a with that of b, both (m, k); ``buffer`` is overwritten."""
    return add_rows(np.multiply(a, b, out=buffer))


def apply(matrix: Array, vector: Array) -> Array:
    """Return matrix times vector for each column: (m, m, k) with (m, k)."""
    return add_rows(np.swapaxes(matrix, 0, 1) * vector[:, None, :])
