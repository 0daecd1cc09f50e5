"""Correlated standard normal variables as linear combinations of independent ones, z = L u."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Correlation:
    """The lower triangular factor of a correlation matrix, R = L L^T.

    Attributes
    ----------
    factor : array (m, m) or (m, m, n)
        L; the same in all situations, or of each.
    pattern : tuple of tuple of int
        For each row the columns that are not zero in all situations, the last one on the diagonal.
    """

    factor: Array
    pattern: tuple[tuple[int, ...], ...]

    @classmethod
    def of(cls, factor: Array) -> Correlation | None:
        """Return the correlation with this factor; None where it is the unit matrix."""
        size = factor.shape[0]
        rows = [(*(j for j in range(i) if np.any(factor[i, j] != 0.0)), i) for i in range(size)]
        if all(len(row) == 1 for row in rows):
            return None
        fixed = np.array(factor)
        fixed.setflags(write=False)
        return cls(fixed, tuple(rows))

    def take(self, columns: Any) -> Correlation:
        """Return the correlation of some situations."""
        return self if self.factor.ndim == 2 else Correlation(self.factor[..., columns], self.pattern)

    def forward(self, u: Array) -> Array:
        """Return L u, (m, n), in a fixed order of addition."""
        z = np.empty_like(u)
        for i, columns in enumerate(self.pattern):
            if len(columns) == 1:
                z[i] = u[i]
                continue
            total = self.factor[i, columns[0]] * u[columns[0]]
            for j in columns[1:]:
                total = total + self.factor[i, j] * u[j]
            z[i] = total
        return z

    def backward(self, a: Array) -> None:
        """Replace the rows of ``a``, (m, n), by those of L^T a."""
        m = len(self.pattern)
        for j in range(m):
            # Row j of the result needs rows j and later only, which are still the old ones.
            total = self.factor[j, j] * a[j] if len(self.pattern[j]) > 1 else a[j]
            for i in range(j + 1, m):
                if j in self.pattern[i]:
                    total = total + self.factor[i, j] * a[i]
            a[j] = total

    def solve_transposed(self, a: Array) -> Array:
        """Return the w with L^T w = a, (m, n): what ``backward`` turns into ``a``."""
        m = len(self.pattern)
        w = np.empty_like(a)
        for j in reversed(range(m)):
            rest = a[j]
            for i in range(j + 1, m):
                if j in self.pattern[i]:
                    rest = rest - self.factor[i, j] * w[i]
            w[j] = rest / self.factor[j, j] if len(self.pattern[j]) > 1 else rest
        return w

    def matrix(self) -> Array:
        """Return L L^T, of the shape of the factor."""
        return np.asarray(np.einsum("ik...,jk...->ij...", self.factor, self.factor))
