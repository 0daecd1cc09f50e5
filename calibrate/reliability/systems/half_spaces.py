"""The component events of many situations as half spaces, and the probability of what is said about them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from calibrate.reliability.systems.cubes import Sum, cubes
from calibrate.reliability.systems.multinormal import below
from calibrate.reliability.systems.planes import conditional, flipped

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class HalfSpaces:
    """Events {Z_i <= -beta_i}.

    Attributes
    ----------
    beta : array (k, n)
        Finite.
    correlation : array (k, k, n)
    points : int
        Points of the lattice in four and more dimensions.
    names : tuple of int
        Which components the rows are.
    """

    beta: Array
    correlation: Array
    points: int
    names: tuple[int, ...]

    def mean(self, terms: Sum) -> tuple[Array, Array]:
        """Return the mean of a sum of indicators of failure, and the error of integration."""
        n = self.beta.shape[1]
        value, error = np.zeros(n), np.zeros(n)
        for cube in cubes(terms):
            rows = [self.names.index(i) for i in (*cube.failed, *cube.held)]
            signs = (1.0,) * len(cube.failed) + (-1.0,) * len(cube.held)
            b = -self.beta[rows] * np.array(signs).reshape(-1, 1)
            p, e = below(b, flipped(self.correlation[np.ix_(rows, rows)], signs), self.points)
            value = value + cube.weight * p
            error = error + abs(cube.weight) * e
        return value, error

    def together(self, components: tuple[int, ...]) -> Array:
        """Return the probability that all of some components fail."""
        rows = [self.names.index(i) for i in components]
        return below(-self.beta[rows], self.correlation[np.ix_(rows, rows)], self.points)[0]

    def given(self, component: int) -> HalfSpaces:
        """Return the other events on the edge of failure of one component."""
        row = self.names.index(component)
        others = tuple(i for i in self.names if i != component)
        return HalfSpaces(*conditional(self.beta, self.correlation, row), self.points, others)

    def take(self, at: npt.NDArray[np.intp]) -> HalfSpaces:
        """Return some situations."""
        return HalfSpaces(self.beta[:, at], self.correlation[:, :, at], self.points, self.names)
