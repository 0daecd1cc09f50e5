"""A limit state together with its basic variables, as a function on standard normal space.

Without dependence each variable has an axis of its own. Correlated variables go through correlated normal ones,
z = L u (Nataf), and conditional ones are computed from others, each after those on which it depends (Rosenblatt).

References
----------
.. [1] A. Der Kiureghian and P.-L. Liu, "Structural reliability under incomplete probability information", Journal of
   Engineering Mechanics 112 (1986): the Nataf model.
.. [2] M. Hohenbichler and R. Rackwitz, "Non-normal dependent vectors in structural safety", Journal of the Engineering
   Mechanics Division 107 (1981): the Rosenblatt transformation.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution
from calibrate.reliability.conditional import Conditional, order_of_evaluation
from calibrate.reliability.correlation import Correlation
from calibrate.reliability.limit_state import LimitState

Array = npt.NDArray[np.float64]
Law = Distribution | Conditional

# Step of the central differences of exact gradients, in units of u, where no exact Hessian is known: about the fourth
# root of the rounding error of gradients that are themselves differences.
HESSIAN_STEP = 1e-3


@dataclass(frozen=True, slots=True, eq=False)
class Linear:
    """dx/du at the points of one evaluation.

    Attributes
    ----------
    slopes : sequence of array (n,)
        dx_i/dz_i of each variable.
    by_parents : sequence of tuple of array (n,)
        dx_i/dx_j for each variable j on which i depends; empty for all but conditional ones.
    """

    slopes: Sequence[Array]
    by_parents: Sequence[tuple[Array, ...]] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """g(u) for a batch of situations.

    Parameters
    ----------
    limit_state : LimitState
        In physical space.
    distributions : tuple of Distribution or Conditional
        One for each variable, parameters of shape () or (n,).
    n : int
        Number of situations.
    correlation : Correlation, optional
        Of the standard normal variables behind the basic ones; None where they are independent.
    """

    limit_state: LimitState
    distributions: tuple[Law, ...]
    n: int
    correlation: Correlation | None = None

    @property
    def m(self) -> int:
        """Number of variables."""
        return len(self.distributions)

    @property
    def random(self) -> tuple[int, ...]:
        """The rows that vary at all."""
        return tuple(i for i, d in enumerate(self.distributions) if not d.is_constant)

    @property
    def dependent(self) -> bool:
        """Whether any variable depends on another."""
        return self.correlation is not None or any(isinstance(d, Conditional) for d in self.distributions)

    def take(self, columns: Any, n: int) -> Problem:
        """Return the problem of n of the situations, possibly repeated."""
        distributions = tuple(d.take(columns) for d in self.distributions)
        correlation = None if self.correlation is None else self.correlation.take(columns)
        return Problem(self.limit_state.take(columns), distributions, n, correlation)

    def z(self, u: Array) -> Array:
        """Return the standard normal value of each variable given those on which it depends, (m, n)."""
        return u if self.correlation is None else self.correlation.forward(u)

    def x(self, u: Array) -> list[Array]:
        """Return the rows of physical values at u, (m, n)."""
        z = self.z(u)
        x: list[Any] = [None] * self.m
        for i in order_of_evaluation(self.distributions):
            law = self.distributions[i]
            x[i] = law.x(z[i]) if isinstance(law, Distribution) else law.x(z[i], [x[j] for j in law.parents])
        return x

    def value(self, u: Array) -> Array:
        """Return g, shape (n,), at u of shape (m, n)."""
        return self.limit_state.value(self.x(u))

    def transform(self, u: Array) -> tuple[list[Array], Linear]:
        """Return the rows of x at u, (m, n), and their derivatives."""
        z = self.z(u)
        x: list[Any] = [None] * self.m
        slopes: list[Any] = [None] * self.m
        by_parents: list[tuple[Array, ...]] = [()] * self.m
        for i in order_of_evaluation(self.distributions):
            law = self.distributions[i]
            if isinstance(law, Distribution):
                x[i], slopes[i] = law.x_slope(z[i])
            else:
                x[i], slopes[i], by_parents[i] = law.x_slopes(z[i], [x[j] for j in law.parents])
        return x, Linear(slopes, by_parents)

    def evaluate(self, u: Array, a: Array) -> tuple[Array, list[Array], Linear]:
        """Return g, the rows of x and their derivatives; write the gradient dg/du into ``a``, shape (m, n)."""
        x, linear = self.transform(u)
        g, by_x = self.limit_state.gradient(x, None, linear.slopes)
        self.pull(by_x, linear, a)
        return g, x, linear

    def pull(self, by_x: Sequence[Any], linear: Linear, a: Array) -> None:
        """Write dg/du into ``a``, (m, n), from dg/dx."""
        for row, slope, by in zip(a, linear.slopes, self.total_slopes(by_x, linear), strict=True):
            np.multiply(by, slope, out=row)
        if self.correlation is not None:
            self.correlation.backward(a)

    def total_slopes(self, by_x: Sequence[Any], linear: Linear) -> list[Any]:
        """Return dg/dx with what each variable does through those that depend on it."""
        total = list(by_x)
        if not any(isinstance(d, Conditional) for d in self.distributions):
            return total
        for i in reversed(order_of_evaluation(self.distributions)):
            law = self.distributions[i]
            if isinstance(law, Conditional):
                for j, slope in zip(law.parents, linear.by_parents[i], strict=True):
                    total[j] = total[j] + total[i] * slope
        return total

    def push(self, linear: Linear, move: Array) -> list[Array]:
        """Return the change of the rows of x, of first order, for a change of u, (m, n)."""
        along = self.z(move)
        moved: list[Any] = [None] * self.m
        for i in order_of_evaluation(self.distributions):
            law = self.distributions[i]
            moved[i] = linear.slopes[i] * along[i]
            if isinstance(law, Conditional):
                for j, slope in zip(law.parents, linear.by_parents[i], strict=True):
                    moved[i] = moved[i] + slope * moved[j]
        return moved

    def hessian(self, u: Array) -> Array:
        """Return the second derivatives of g by u, shape (m, m, n), at u of shape (m, n).

        Exact where the limit state knows its own and no variable is conditional; else central differences of the
        gradient.
        """
        if any(isinstance(d, Conditional) for d in self.distributions):
            return self._hessian_by_differences(u)
        z = self.z(u)
        laws = [law for law in self.distributions if isinstance(law, Distribution)]
        x, slopes, bends = zip(*(law.x_curvature(row) for law, row in zip(laws, z, strict=True)), strict=True)
        found = self.limit_state.hessian(x)
        if found is None:
            return self._hessian_by_differences(u)
        by_x, by_two = found
        h = np.empty((self.m, self.m, self.n))
        for i in range(self.m):
            for j in range(i + 1):
                h[i, j] = by_two[i][j] * (slopes[i] * slopes[j])
                h[j, i] = h[i, j]
            h[i, i] += by_x[i] * bends[i]
        if self.correlation is not None:
            # L^T H L: first over the rows, then, by symmetry, over the columns.
            for j in range(self.m):
                self.correlation.backward(h[:, j])
            for i in range(self.m):
                self.correlation.backward(h[i])
        return h

    def _hessian_by_differences(self, u: Array) -> Array:
        h = np.zeros((self.m, self.m, self.n))
        above, below = np.empty_like(u), np.empty_like(u)
        for i in self.random:
            step = np.zeros((self.m, 1))
            step[i] = HESSIAN_STEP
            self.evaluate(u + step, above)
            self.evaluate(u - step, below)
            h[i] = (above - below) / (2.0 * HESSIAN_STEP)
        return 0.5 * (h + np.swapaxes(h, 0, 1))
