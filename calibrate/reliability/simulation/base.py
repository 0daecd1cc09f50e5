"""What the methods have in common: a probability is the mean of a value that each draws and evaluates."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
import numpy.typing as npt

from calibrate.reliability.problem import Problem
from calibrate.reliability.simulation.batches import Block

Array = npt.NDArray[np.float64]
Counts = npt.NDArray[np.int64]
Flags = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class Task:
    """The situations of one piece of work, with what is known of them.

    Attributes
    ----------
    problem : Problem
        n situations of m variables.
    origin : array (n,)
        Limit state at the origin, where all variables have their medians.
    complement : bool array (n,)
        Whether the medians fail: survival is then what is sampled.
    points : array (k, m, n) or None
        Design points, NaN where a situation has fewer than k.
    direction : array (m, n) or None
        Unit vectors from the origin towards the other side of the limit state; NaN where unknown.
    """

    problem: Problem
    origin: Array
    complement: Flags
    points: Array | None
    direction: Array | None

    @property
    def random(self) -> list[int]:
        """The rows that vary."""
        return list(self.problem.random)

    def placed(self, z: Array) -> Array:
        """Return points of all m rows from those of the rows that vary, (d, k)."""
        if len(z) == self.problem.m:
            return z
        u = np.zeros((self.problem.m, z.shape[1]))
        u[self.random] = z
        return u


@dataclass(frozen=True, slots=True, eq=False)
class Values:
    """What samples gave.

    Attributes
    ----------
    value : array (k,)
        Unbiased for the sampled probability; NaN where the limit state is not defined.
    control : array (k,) or None
        A value of known mean that was seen in the same samples.
    evaluations : int or int array (k,)
        Evaluations of the limit state that each sample took.
    """

    value: Array
    control: Array | None
    evaluations: int | Counts


class Sampler(Protocol):
    """A method made ready for the situations of a task.

    Attributes
    ----------
    usable : bool array (n,)
        Where there is anything to sample around.
    mixed : bool array (n,)
        Where a sample needs a uniform number besides the normal ones.
    control_mean : array (n,) or None
        Mean of the control.
    atom : array (n,) or None
        What a sample of a part of the failure domain that was not seen may add; None stands for the largest value
        seen. Its square is added to the sum of squares, so that samples that agree by luck do not pass for certainty.
    """

    @property
    def usable(self) -> Flags: ...  # noqa: D102

    @property
    def mixed(self) -> Flags: ...  # noqa: D102

    @property
    def control_mean(self) -> Array | None: ...  # noqa: D102

    @property
    def atom(self) -> Array | None: ...  # noqa: D102

    def values(self, problem: Problem, block: Block, z: Array, v: Array) -> Values:
        """Evaluate samples.

        Parameters
        ----------
        problem : Problem
            The situation of each of the k samples.
        block : Block
            Whose samples they are.
        z : array (d, k)
            Standard normal numbers for the rows that vary; may be overwritten.
        v : array (k,)
            Uniform numbers where ``mixed`` is set; elsewhere evenly spread over each cell, the first of them at random
            within their places.
        """


class Method(Protocol):
    """A method whose samples are independent.

    Attributes
    ----------
    name : str
        The field's name of the method.
    pilot : int
        Samples of the first round.
    cost : int
        Usual evaluations of the limit state per sample.
    least : int
        Fewest evaluations with which it can begin.
    needs_points : bool
        Whether design points must be known.
    binomial : bool
        Whether the values are 0 and 1, so that exact intervals exist.
    bounded : bool
        Whether no value exceeds 1, so that many zeros bound the mean.
    """

    @property
    def name(self) -> str: ...  # noqa: D102

    @property
    def pilot(self) -> int: ...  # noqa: D102

    @property
    def cost(self) -> int: ...  # noqa: D102

    @property
    def least(self) -> int: ...  # noqa: D102

    @property
    def needs_points(self) -> bool: ...  # noqa: D102

    @property
    def binomial(self) -> bool: ...  # noqa: D102

    @property
    def bounded(self) -> bool: ...  # noqa: D102

    def sampler(self, task: Task) -> Sampler:
        """Return the method made ready for the situations of a task."""


def other_side(g: Array, complement: Flags) -> Array:
    """Return 1.0 where a sample fails, or survives where the medians fail; NaN where g is NaN."""
    other = ((g <= 0.0) ^ complement).astype(np.float64)
    undefined = np.isnan(g)
    if undefined.any():
        other[undefined] = np.nan
    return other


def evaluated(problem: Problem, u: Array) -> Array:
    """Return g without numpy's warnings."""
    with np.errstate(all="ignore"):
        return problem.value(u)
