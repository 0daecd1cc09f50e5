"""Sums over samples, and the unbiased estimate that they give with a control variate.

Each situation's samples fall into folds. The coefficient of the control is estimated from other folds than the one
in which it is used, so that the estimate stays unbiased: from the other half in the two halves of the first round,
and from the whole first round afterwards.

References
----------
.. [1] A. N. Avramidis and J. R. Wilson, "A splitting scheme for control variates", Operations Research Letters 14
   (1993) (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.simulation.base import Values
from calibrate.reliability.simulation.batches import CELL

Array = npt.NDArray[np.float64]
Counts = npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False)
class Sums:
    """Sums over the samples of each fold (rows) and situation (columns).

    Attributes
    ----------
    count, value, square : array (folds, n)
        Number of samples, sums of the values and of their squares.
    control, product, control_square : array (folds, n)
        Sums of the controls, of value times control, and of the squares of the controls.
    largest : array (folds, n)
        Largest value, where there is no control.
    evaluations : int array (n,)
        Evaluations of the limit state.
    """

    count: Array
    value: Array
    square: Array
    control: Array
    product: Array
    control_square: Array
    largest: Array
    evaluations: Counts

    @classmethod
    def zeros(cls, folds: int, n: int) -> Sums:
        """Return empty sums."""
        value, square, control, product, control_square, largest = (np.zeros((folds, n)) for _ in range(6))
        evaluations = np.zeros(n, dtype=np.int64)
        return cls(
            np.zeros((folds, n)), value, square, control, product, control_square, largest, evaluations
        )

    def add(self, fold: Counts, owner: Counts, values: Values) -> None:
        """Add whole cells of samples.

        Parameters
        ----------
        fold, owner : int array (cells,)
            Fold and situation of each cell.
        values : Values
            Of ``CELL`` samples for each cell.
        """
        y, c = values.value, values.control
        # One flat index: numpy is several times faster with it than with a pair.
        where = fold * self.count.shape[1] + owner
        _add(self.count, where, float(CELL))
        _add(self.value, where, _by_cell(y))
        _add(self.square, where, _by_cell(y * y))
        if c is None:
            with np.errstate(invalid="ignore"):
                np.maximum.at(self.largest.reshape(-1), where, y.reshape(-1, CELL).max(axis=1))
        else:
            _add(self.control, where, _by_cell(c))
            _add(self.product, where, _by_cell(y * c))
            _add(self.control_square, where, _by_cell(c * c))
        taken = values.evaluations
        each = taken * CELL if isinstance(taken, int) else taken.reshape(-1, CELL).sum(axis=1)
        np.add.at(self.evaluations, owner, each)

    def coefficients(self, folds: list[int]) -> Array:
        """Return the coefficient of the control that leaves the least variance in these folds, shape (n,)."""
        n, y, c, yc, cc = (
            sum_of(rows, folds)
            for rows in (self.count, self.value, self.control, self.product, self.control_square)
        )
        with np.errstate(divide="ignore", invalid="ignore"):
            spread = cc - c * (c / n)
            common = yc - y * (c / n)
            # Where the control hardly varies its coefficient is rounding.
            return np.asarray(np.where(spread > 1e-12 * cc, common / spread, 0.0))


def sum_of(rows: Array, folds: list[int]) -> Array:
    """Return the sum of some rows, added in their order."""
    total: Array = rows[folds[0]].copy()
    for fold in folds[1:]:
        total += rows[fold]
    return total


def _add(total: Array, where: Counts, values: Array | float) -> None:
    """Add to a total of shape (folds, n) in the order of the values, which is that of the samples."""
    np.add.at(total.reshape(-1), where, values)


def _by_cell(values: Array) -> Array:
    return np.asarray(values.reshape(-1, CELL).sum(axis=1))


@dataclass(frozen=True, slots=True, eq=False)
class Estimate:
    """Means with their coefficients of variation, (n,) each, and how many of the samples stand behind them."""

    mean: Array
    cov: Array
    count: Array


# Roots are found and sums are formed to better than this.
ROUNDING = 1e-8


def estimate(sums: Sums, control_mean: Array | None, atom: Array | None) -> Estimate:
    """Return the estimates of sums with three folds: two halves of the first round, and the rest.

    Parameters
    ----------
    control_mean : array (n,) or None
        Exact mean of the control.
    atom : array (n,) or None
        Its square is added to the sums of squares; None stands for the largest value seen.
    """
    if atom is None:
        atom = np.max(sums.largest, axis=0)
    known = np.zeros_like(atom) if control_mean is None else control_mean
    plain = np.zeros_like(sums.value)
    mean, cov = _with(sums, plain, known, atom)
    if control_mean is not None:
        chosen = np.stack([sums.coefficients(others) for others in ([1], [0], [0, 1])])
        better, its_cov = _with(sums, chosen, known, atom)
        # A coefficient of few samples may do harm in the first round.
        use = (better > 0.0) & (its_cov < cov)
        mean, cov = np.where(use, better, mean), np.where(use, its_cov, cov)
    return Estimate(mean, cov, sum_of(sums.count, [0, 1, 2]))


def _with(sums: Sums, b: Array, known: Array, atom: Array) -> tuple[Array, Array]:
    """Return mean and coefficient of variation with these coefficients, (3, n)."""
    total = sums.value - b * (sums.control - sums.count * known)
    square = (
        sums.square
        - 2.0 * b * (sums.product - known * sums.value)
        + b * b * (sums.control_square - 2.0 * known * sums.control + sums.count * (known * known))
    )
    n = sum_of(sums.count, [0, 1, 2])
    folds = [0, 1, 2]
    with np.errstate(divide="ignore", invalid="ignore"):
        mean = sum_of(total, folds) / n
        spread = np.maximum(sum_of(square, folds) - n * (mean * mean), 0.0) + atom * atom
        cov = np.sqrt(spread / (n * (n - 1.0))) / mean
    return mean, np.where(mean > 0.0, np.hypot(cov, ROUNDING), np.inf)
