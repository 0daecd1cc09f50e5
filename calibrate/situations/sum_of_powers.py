"""The one positive root of sums of powers, c1·z^e1 + … + ck·z^ek, for many coefficient sets at once.

References
----------
Descartes' rule of signs for real exponents: G. J. O. Jameson, "Counting zeros of generalised polynomials:
Descartes' rule of signs and Laguerre's extensions", The Mathematical Gazette 90 (2006), recalled from memory.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

MAX_PASSES = 100


def solve_powers(
    exponents: Sequence[float], coefficients: Sequence[Array], near: Array | None = None
) -> tuple[Array, npt.NDArray[np.int8], npt.NDArray[np.bool_]]:
    """Return the root where it is provably the only passage from negative to positive.

    Parameters
    ----------
    exponents : sequence of float
        Ascending, k of them.
    coefficients : sequence of arrays, each shape (n,)
        One for each exponent.
    near : array, shape (n,), optional
        Guesses; they do not change the root beyond rounding.

    Returns
    -------
    size : array, shape (n,)
        The root; NaN where there is none.
    code : int8 array, shape (n,)
        0 solved, 1 not negative from the start, 2 negative throughout, 3 not finite.
    open : bool array, shape (n,)
        Where the signs alone do not decide.
    """
    rows = np.stack(coefficients)
    n = rows.shape[1]
    sign = np.sign(rows)
    changes = np.zeros(n, dtype=np.int64)
    first = np.zeros(n)
    last = np.zeros(n)
    for row in sign:
        changes += (row * last) < 0
        first = np.where(first == 0, row, first)
        last = np.where(row == 0, last, row)
    finite = np.all(np.isfinite(rows), axis=0)
    solvable = finite & (changes == 1) & (first < 0)
    code = np.where(first < 0, 2, 1).astype(np.int8)
    code[~finite] = 3
    code[solvable] = 0
    open_ = finite & (changes > 1)
    size = np.full(n, np.nan)
    if solvable.any():
        columns = np.flatnonzero(solvable)
        guess = None if near is None else near[columns]
        size[columns] = _root(np.asarray(exponents), rows[:, columns], guess)
    return size, code, open_


def _root(exponents: Array, rows: Array, near: Array | None) -> Array:
    if exponents.size == 2:
        return np.asarray((-rows[0] / rows[1]) ** (1.0 / (exponents[1] - exponents[0])))
    logs = np.log(np.abs(rows))
    up, down = rows > 0, rows < 0
    t = _start(exponents, logs, up, down) if near is None else np.log(near)
    t = np.where(np.isfinite(t), t, _start(exponents, logs, up, down))
    low, high = np.full(t.size, -np.inf), np.full(t.size, np.inf)
    for _ in range(MAX_PASSES):
        h, slope = _log_ratio(exponents, logs, up, down, t)
        low, high = np.where(h < 0, t, low), np.where(h >= 0, t, high)
        moved = t - h / slope
        # Newton's step where it stays inside what is known, else halve the enclosure.
        outside = ~((moved > low) & (moved < high)) & np.isfinite(low) & np.isfinite(high)
        moved = np.where(outside, 0.5 * (low + high), moved)
        done = np.abs(moved - t) <= 1e-15 * np.maximum(np.abs(t), 1.0)
        t = moved
        if done.all():
            break
    return _polished(exponents, rows, np.exp(t))


def _start(exponents: Array, logs: Array, up: npt.NDArray[np.bool_], down: npt.NDArray[np.bool_]) -> Array:
    """Balance the largest term of each sign at z = 1."""
    i = np.argmax(np.where(up, logs, -np.inf), axis=0)
    j = np.argmax(np.where(down, logs, -np.inf), axis=0)
    columns = np.arange(logs.shape[1])
    return np.asarray((logs[j, columns] - logs[i, columns]) / (exponents[i] - exponents[j]))


def _log_ratio(
    exponents: Array, logs: Array, up: npt.NDArray[np.bool_], down: npt.NDArray[np.bool_], t: Array
) -> tuple[Array, Array]:
    """Return ln of positive over negative terms at ln z = t, and its derivative; it increases with t."""
    terms = logs + exponents[:, None] * t
    top = terms.max(axis=0, where=np.isfinite(terms), initial=-np.inf)
    size = np.exp(terms - top)
    positive, negative = np.where(up, size, 0.0), np.where(down, size, 0.0)
    p, q = positive.sum(axis=0), negative.sum(axis=0)
    # Sums that underflow are replaced by the least number, whose slope still points to the root.
    p, q = np.maximum(p, 1e-300), np.maximum(q, 1e-300)
    mean_up = (exponents[:, None] * positive).sum(axis=0) / p
    mean_down = (exponents[:, None] * negative).sum(axis=0) / q
    slope = mean_up - mean_down
    least = np.min(np.diff(exponents))
    return np.log(p) - np.log(q), np.maximum(slope, least)


def _polished(exponents: Array, rows: Array, z: Array) -> Array:
    """Take one Newton step in z, which removes the rounding of the logarithm."""
    powers = z ** exponents[:, None]
    value = (rows * powers).sum(axis=0)
    slope = (rows * exponents[:, None] * powers).sum(axis=0) / z
    moved = z - value / slope
    return np.where((moved > 0) & np.isfinite(moved), moved, z)
