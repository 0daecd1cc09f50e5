"""The lower triangular factor of correlation matrices, and where a matrix fails to be one."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError
from calibrate.reliability.rows import add_rows

Array = npt.NDArray[np.float64]

SMALLEST = 1e-10
"""Eigenvalue below which a matrix counts as singular: some variable is a combination of others."""

_MOST_TRIED = 20_000


@dataclass(frozen=True, slots=True, eq=False)
class CorrelationFactor:
    """Factor of a correlation matrix R = L L^T.

    Attributes
    ----------
    lower : array (m, m) or (m, m, n)
        L, lower triangular; NaN where R failed.
    smallest : array () or (n,)
        Smallest eigenvalue of R; NaN where R contains NaN.
    failed : array of bool () or (n,)
        Where R is not positive definite (smallest eigenvalue at most :data:`SMALLEST`) or contains NaN.
    block : tuple of int
        In the first situation with the smallest eigenvalue, variables whose own matrix already fails, as few as
        possible: the worst pair, else the worst triple, else what is left when one variable after the other is taken
        away as long as the rest fails. Empty where every R is positive definite.
    """

    lower: Array
    smallest: Array
    failed: npt.NDArray[np.bool_]
    block: tuple[int, ...]


def correlation_factor(coefficients: npt.ArrayLike) -> CorrelationFactor:
    """Return the lower triangular factors of correlation matrices.

    Parameters
    ----------
    coefficients : array_like (m, m) or (m, m, n)
        Symmetric, with a unit diagonal; NaN marks coefficients that do not exist.

    Returns
    -------
    CorrelationFactor

    Raises
    ------
    InputError
        The shape is another, a matrix is not symmetric, its diagonal is not 1, or a coefficient is outside [-1, 1].
    """
    r = np.asarray(coefficients, dtype=np.float64)
    _check(r)
    m = r.shape[0]
    columns = r.reshape(m * m, -1)
    # Situations share few matrices; each is looked at once.
    distinct, of_situation = np.unique(columns, axis=1, return_inverse=True)
    stacked = np.ascontiguousarray(distinct.T).reshape(-1, m, m)
    smallest = np.full(len(stacked), np.nan)
    whole = ~np.isnan(stacked).any(axis=(1, 2))
    smallest[whole] = np.linalg.eigvalsh(stacked[whole])[:, 0]
    failed = ~(smallest > SMALLEST)
    lower = _cholesky(np.where(failed, np.nan, distinct.reshape(m, m, -1)))
    at, shape = np.ravel(of_situation), r.shape[2:]
    block: tuple[int, ...] = ()
    if np.any(failed & whole):
        block = _block(stacked[at[int(np.nanargmin(smallest[at]))]])
    return CorrelationFactor(
        lower[..., at].reshape(r.shape), smallest[at].reshape(shape), failed[at].reshape(shape), block
    )


def _check(r: Array) -> None:
    if r.ndim not in (2, 3) or r.shape[0] != r.shape[1] or r.shape[0] == 0:
        raise InputError(f"Correlation matrices have the shape (m, m) or (m, m, n); got {r.shape}.")
    diagonal = np.diagonal(r)
    if not np.all(diagonal == 1.0):
        wrong = float(diagonal[diagonal != 1.0][0])
        raise InputError(f"The diagonal of a correlation matrix must be 1; got {wrong:g}.")
    other = np.swapaxes(r, 0, 1)
    if not np.array_equal(r, other, equal_nan=True):
        at = np.argwhere((r != other) & ~(np.isnan(r) & np.isnan(other)))[0]
        i, j = int(at[0]), int(at[1])
        values = f"{float(r[tuple(at)]):g} and {float(other[tuple(at)]):g}"
        raise InputError(
            f"A correlation matrix must be symmetric; the coefficients of variables {i + 1} and {j + 1} are {values}."
        )
    outside = np.abs(r) > 1.0
    if outside.any():
        raise InputError(f"A correlation must lie between -1 and 1; got {float(r[outside][0]):g}.")


def _cholesky(r: Array) -> Array:
    """Return L for r (m, m, k), every sum in the order of the variables."""
    lower = np.zeros_like(r)
    for j in range(len(r)):
        for i in range(j, len(r)):
            rest = r[i, j] - add_rows(lower[i, :j] * lower[j, :j]) if j else np.array(r[i, j])
            # A pivot is at least the smallest eigenvalue, up to rounding.
            lower[i, j] = np.sqrt(np.maximum(rest, 0.0)) if i == j else rest / lower[j, j]
    return lower


def _block(r: Array) -> tuple[int, ...]:
    """Return variables, as few as possible, whose submatrix of r (m, m) fails."""
    m = len(r)
    tried = 0
    for size in range(2, min(m, 4)):
        sets = np.array(list(combinations(range(m), size)), dtype=np.intp)
        tried += len(sets)
        if tried > _MOST_TRIED:
            break
        least = np.linalg.eigvalsh(r[sets[:, :, None], sets[:, None, :]])[:, 0]
        worst = int(np.argmin(least))
        if least[worst] <= SMALLEST:
            return tuple(int(i) for i in sets[worst])
    left = list(range(m))
    for variable in range(m):
        fewer = [i for i in left if i != variable]
        if len(fewer) > 1 and np.linalg.eigvalsh(r[np.ix_(fewer, fewer)])[0] <= SMALLEST:
            left = fewer
    return tuple(left)
