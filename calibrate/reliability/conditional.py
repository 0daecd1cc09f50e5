"""Basic variables whose model depends on the values of others."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions import Distribution

Array = npt.NDArray[np.float64]


class Conditional(ABC):
    """A distribution given the values of other basic variables.

    Attributes
    ----------
    parents : tuple of int
        Rows of the variables on which it depends.
    is_constant : bool
        False: it varies.
    """

    parents: tuple[int, ...]
    is_constant = False

    @property
    @abstractmethod
    def shape(self) -> tuple[int, ...]:
        """Shape of what it holds over situations, () or (n,)."""

    @abstractmethod
    def take(self, columns: Any) -> Conditional:
        """Return the model of some situations; ``columns`` is a slice or an array of indices."""

    @abstractmethod
    def given(self, parents: Sequence[Array]) -> Distribution:
        """Return the distribution for these values of the parents, each (n,); NaN where there is none."""

    def x(self, z: Array, parents: Sequence[Array]) -> Array:
        """Return the value at standard normal ``z``, (n,), given the parents."""
        return self.given(parents).x(z)

    @abstractmethod
    def x_slopes(self, z: Array, parents: Sequence[Array]) -> tuple[Array, Array, tuple[Array, ...]]:
        """Return x, dx/dz, and dx/d(parent) at fixed z for each parent."""


def order_of_evaluation(laws: Sequence[Distribution | Conditional]) -> tuple[int, ...]:
    """Return the rows in an order in which every variable comes after those on which it depends.

    Raises
    ------
    ValueError
        Variables depend on one another in a circle.
    """
    if not any(isinstance(law, Conditional) for law in laws):
        return tuple(range(len(laws)))
    done: list[int] = []
    while len(done) < len(laws):
        ready = [
            i
            for i, law in enumerate(laws)
            if i not in done and (not isinstance(law, Conditional) or all(j in done for j in law.parents))
        ]
        if not ready:
            raise ValueError("The conditional variables depend on one another in a circle.")
        done.extend(ready)
    return tuple(done)
