"""A limit state that is pushed away around points, so that a search ends at another point.

References
----------
.. [1] A. Der Kiureghian and T. Dakessian, "Multiple design points in first and second-order reliability", Structural
   Safety 20 (1998): form and size of the bulges.
"""

from __future__ import annotations

from dataclasses import dataclass, field, fields
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Linear, Problem
from calibrate.reliability.rows import dot

Array = npt.NDArray[np.float64]

# Radius of a bulge, and the distance by which it moves the limit state along the gradient, in parts of beta.
RADIUS, PUSH = 1.1, 0.75
# A design point near the origin gets the bulge of one at this distance.
LEAST_BETA = 1.0


def _none() -> Array:
    return np.zeros(0)


@dataclass(frozen=True, slots=True, eq=False)
class Bulged(Problem):
    """A problem with s (r^2 - |u - c|^2)^2 added to g within the distance r of each centre c.

    Values and gradients have the bulges, the Hessian has not: what a search of this leads to is judged on the problem
    without them.

    Attributes
    ----------
    centre : array (m, k, n)
        k centres for each situation; NaN where there are fewer.
    radius, scale : array (k, n)
        r and s.
    """

    centre: Array = field(default_factory=_none)
    radius: Array = field(default_factory=_none)
    scale: Array = field(default_factory=_none)

    @classmethod
    def around(cls, problem: Problem, centre: Array, beta: Array, norm: Array, side: Array) -> Bulged:
        """Return the problem with a bulge around each of its design points.

        Parameters
        ----------
        problem : Problem
        centre : array (m, k, n)
            Design points, NaN where there are fewer.
        beta, norm : array (k, n)
            Their distances and the lengths of dg/du there.
        side : array (n,)
            1 where the origin is safe, -1 where it fails: bulges are added to the side of the origin.
        """
        size = np.maximum(np.abs(beta), LEAST_BETA)
        radius, push = RADIUS * size, PUSH * size
        scale = side * push * norm / (radius**2 - push**2) ** 2
        return cls(**_own(problem), centre=centre, radius=radius, scale=scale)

    def take(self, columns: Any, n: int) -> Bulged:
        """Return the problem of n of the situations, possibly repeated."""
        inner = Problem.take(self, columns, n)
        centre, radius, scale = (a[..., columns] for a in (self.centre, self.radius, self.scale))
        return Bulged(**_own(inner), centre=centre, radius=radius, scale=scale)

    def value(self, u: Array) -> Array:
        """Return g with the bulges, shape (n,), at u of shape (m, n)."""
        g = np.array(Problem.value(self, u))
        for _, inside, scale in self._bulges(u):
            g += scale * inside**2
        return g

    def evaluate(self, u: Array, a: Array) -> tuple[Array, list[Array], Linear]:
        """Return g with the bulges, the rows of x and their derivatives; write dg/du into ``a``, shape (m, n)."""
        g, x, linear = Problem.evaluate(self, u, a)
        g = np.array(g)
        for away, inside, scale in self._bulges(u):
            g += scale * inside**2
            a -= 4.0 * scale * inside * away
        return g, x, linear

    def _bulges(self, u: Array) -> list[tuple[Array, Array, Array]]:
        """Return for each centre u - c, r^2 - |u - c|^2 or zero outside, and s."""
        found = []
        for centre, radius, scale in zip(
            np.moveaxis(self.centre, 1, 0), self.radius, self.scale, strict=True
        ):
            there = np.isfinite(scale)
            away = np.where(there, u - centre, 0.0)
            inside = np.maximum(radius**2 - dot(away, away), 0.0)
            found.append((away, np.where(there, inside, 0.0), np.where(there, scale, 0.0)))
        return found


def _own(problem: Problem) -> dict[str, Any]:
    """Return the fields of a plain problem."""
    return {f.name: getattr(problem, f.name) for f in fields(Problem)}
