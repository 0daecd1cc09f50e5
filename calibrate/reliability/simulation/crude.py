"""Crude Monte Carlo: the part of the samples that fail."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from calibrate.reliability.problem import Problem
from calibrate.reliability.simulation.base import Array, Flags, Task, Values, evaluated, other_side
from calibrate.reliability.simulation.batches import Block


@dataclass(frozen=True, slots=True)
class CrudeMonteCarlo:
    """Independent standard normal samples; intervals are those of Clopper and Pearson."""

    name: str = "crude monte carlo"
    pilot: int = 1024
    cost: int = 1
    least: int = 100
    needs_points: bool = False
    binomial: bool = True
    bounded: bool = True

    def sampler(self, task: Task) -> CrudeSampler:
        """Return the method made ready for the situations of a task."""
        n = task.problem.n
        return CrudeSampler(task, np.ones(n, dtype=np.bool_), np.zeros(n, dtype=np.bool_))


@dataclass(frozen=True, slots=True, eq=False)
class CrudeSampler:
    """Crude Monte Carlo of the situations of a task."""

    task: Task
    usable: Flags
    mixed: Flags
    atom: None = None
    control_mean: None = None

    def values(self, problem: Problem, block: Block, z: Array, v: Array) -> Values:
        """Return 1 where a sample lies on the other side of the limit state."""
        g = evaluated(problem, self.task.placed(z))
        return Values(other_side(g, block.of(self.task.complement)), None, 1)
