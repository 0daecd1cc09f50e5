"""Directional simulation: random directions, the exact probability along each.

References
----------
.. [1] P. Bjerager, "Probability integration by directional simulation", Journal of Engineering Mechanics 114 (1988)
   (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH
from calibrate.reliability.simulation.base import Array, Flags, Task, Values
from calibrate.reliability.simulation.batches import Block
from calibrate.reliability.simulation.stretches import Path, other_side_probability

# Finer where most of the probability lies.
RADII = (0.0, *(0.5 * i for i in range(1, 17)), 9.0, 10.0, 11.0, 12.0, 13.5, REACH)


@dataclass(frozen=True, slots=True)
class DirectionalSimulation:
    """Directions uniform on the sphere, and the chi-square tail of the radius along each.

    Notes
    -----
    Rays are scanned as far as 15; each change of sign that is seen is located, so that a ray may leave and enter the
    failure domain several times.
    """

    name: str = "directional simulation"
    pilot: int = 512
    cost: int = 30
    least: int = 3000
    needs_points: bool = False
    binomial: bool = False
    bounded: bool = True

    def sampler(self, task: Task) -> DirectionalSampler:
        """Return the method made ready for the situations of a task."""
        n = task.problem.n
        return DirectionalSampler(task, np.ones(n, dtype=np.bool_), np.zeros(n, dtype=np.bool_))


@dataclass(frozen=True, slots=True, eq=False)
class DirectionalSampler:
    """Directional simulation of the situations of a task."""

    task: Task
    usable: Flags
    mixed: Flags
    atom: None = None
    control_mean: None = None

    def values(self, problem: Problem, block: Block, z: Array, v: Array) -> Values:
        """Return the probability of the other side along each direction."""
        d = len(z)

        def tail(radius: Array) -> Array:
            return np.asarray(special.chdtrc(d, radius * radius))

        direction = self.task.placed(z / np.sqrt(dot(z, z)))
        complement, origin = block.of(self.task.complement), block.of(self.task.origin)
        value, evaluations = other_side_probability(
            problem, Path(None, direction), complement, origin, RADII, tail
        )
        return Values(value, None, evaluations)
