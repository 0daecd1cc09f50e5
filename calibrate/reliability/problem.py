"""A limit state together with its basic variables, as a function on standard normal space."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.reliability.limit_state import LimitState

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """g(u) for a batch of situations.

    Parameters
    ----------
    limit_state : LimitState
        In physical space.
    distributions : tuple of Distribution
        One for each variable, parameters of shape () or (n,).
    n : int
        Number of situations.
    """

    limit_state: LimitState
    distributions: tuple[Distribution, ...]
    n: int

    @property
    def m(self) -> int:
        """Number of variables."""
        return len(self.distributions)

    @property
    def random(self) -> tuple[int, ...]:
        """The rows that vary at all."""
        return tuple(i for i, d in enumerate(self.distributions) if not d.is_constant)

    def take(self, columns: Any, n: int) -> Problem:
        """Return the problem of n of the situations, possibly repeated."""
        distributions = tuple(d.take(columns) for d in self.distributions)
        return Problem(self.limit_state.take(columns), distributions, n)

    def value(self, u: Array) -> Array:
        """Return g, shape (n,), at u of shape (m, n)."""
        return self.limit_state.value([d.x(row) for d, row in zip(self.distributions, u, strict=True)])

    def evaluate(self, u: Array, a: Array) -> tuple[Array, list[Array], list[Array]]:
        """Return g, the rows of x and those of dx/du; write the gradient dg/du into ``a``, shape (m, n)."""
        x, slopes = [], []
        for distribution, row in zip(self.distributions, u, strict=True):
            value, slope = distribution.x_slope(row)
            x.append(value)
            slopes.append(slope)
        g, by_x = self.limit_state.gradient(x, None, slopes)
        for row, slope, by in zip(a, slopes, by_x, strict=True):
            np.multiply(by, slope, out=row)
        return g, x, slopes
