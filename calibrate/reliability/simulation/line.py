"""Line sampling: random lines along the important direction, the exact probability along each.

References
----------
.. [1] P. S. Koutsourelakis, H. J. Pradlwarter and G. I. Schueller, "Reliability of structures in high dimensions, part
   I: algorithms and applications", Probabilistic Engineering Mechanics 19 (2004) (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from calibrate.reliability.problem import Problem
from calibrate.reliability.rows import dot
from calibrate.reliability.settings import REACH
from calibrate.reliability.simulation.base import Array, Flags, Task, Values, evaluated
from calibrate.reliability.simulation.batches import Block
from calibrate.reliability.simulation.stretches import Path, other_side_probability

# Places on a line, from far on the near side of the origin: what lies before them has a probability of 6e-16.
PLACES = tuple(float(t) for t in range(-8, int(REACH) + 1))


@dataclass(frozen=True, slots=True)
class LineSampling:
    """Lines through random points of the plane across the direction of the nearest design point.

    Notes
    -----
    Lines are scanned from -8 to 15 and each change of sign is located, so that no single crossing is presumed. Where
    every line meets the limit state once the estimate along a line is Phi(-c).
    """

    name: str = "line sampling"
    pilot: int = 256
    cost: int = 32
    least: int = 3000
    needs_points: bool = True
    binomial: bool = False
    bounded: bool = True

    def sampler(self, task: Task) -> LineSampler:
        """Return the method made ready for the situations of a task."""
        assert task.direction is not None
        usable: Flags = np.asarray(np.isfinite(task.direction).all(axis=0))
        direction = np.where(usable, task.direction, 0.0)[task.random]
        n = task.problem.n
        return LineSampler(task, usable, np.zeros(n, dtype=np.bool_), direction)


@dataclass(frozen=True, slots=True, eq=False)
class LineSampler:
    """Line sampling of the situations of a task.

    Attributes
    ----------
    direction : array (d, n)
        Unit vectors towards the design points, rows that vary only.
    """

    task: Task
    usable: Flags
    mixed: Flags
    direction: Array
    atom: None = None
    control_mean: None = None

    def values(self, problem: Problem, block: Block, z: Array, v: Array) -> Values:
        """Return the probability of the other side along each line."""
        direction = block.of(self.direction)
        z -= direction * dot(direction, z)
        path = Path(self.task.placed(z), self.task.placed(direction))
        complement = block.of(self.task.complement)
        g = evaluated(problem, path(PLACES[0]))
        value, evaluations = other_side_probability(
            problem, path, complement, g, PLACES, lambda t: np.asarray(special.ndtr(-t))
        )
        return Values(value, None, evaluations + 1)
