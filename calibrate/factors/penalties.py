"""How a departure of beta from the target is penalised."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
import numpy.typing as npt

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.registry import registered

Array = npt.NDArray[np.float64]


class Penalty(ABC):
    """A convex function of r = beta - target; zero and smallest at r = 0."""

    name: ClassVar[str]
    formula: ClassVar[str]
    """The objective, as the report prints it."""
    source: ClassVar[str]

    @abstractmethod
    def value(self, r: Array) -> Array:
        """Return the penalty."""

    @abstractmethod
    def slope(self, r: Array) -> Array:
        """Return its first derivative."""

    @abstractmethod
    def curvature(self, r: Array) -> Array:
        """Return its second derivative."""

    def objective(self, r: Array, weight: Array) -> float:
        """Return the objective for weights that sum to 1."""
        return float(np.dot(weight, self.value(r)))


@dataclass(frozen=True, slots=True)
class Squared(Penalty):
    """Squared departure."""

    name: ClassVar[str] = "squared"
    formula: ClassVar[str] = "Σ w (β − β_T)²"
    source: ClassVar[str] = (
        "M. H. Faber and J. D. Sørensen, JCSS paper on code calibration, 2002 (recalled from memory)"
    )

    def value(self, r: Array) -> Array:
        """Return r²."""
        return r * r

    def slope(self, r: Array) -> Array:
        """Return 2 r."""
        return 2.0 * r

    def curvature(self, r: Array) -> Array:
        """Return 2."""
        return np.full_like(r, 2.0)


@dataclass(frozen=True, slots=True)
class Asymmetric(Penalty):
    """Departure below the target costs more than above: r/d - 1 + exp(-r/d).

    Source: A. Friis-Hansen and J. D. Sørensen, JCSS paper comparing utility and target approaches; formula and
    d = 0.23 recalled from memory.
    """

    d: float = 0.23
    name: ClassVar[str] = "asymmetric"
    formula: ClassVar[str] = "Σ w [(β − β_T)/d − 1 + exp(−(β − β_T)/d)]"
    source: ClassVar[str] = "Friis-Hansen and Sørensen, JCSS (recalled from memory)"

    def value(self, r: Array) -> Array:
        """Return r/d - 1 + exp(-r/d)."""
        t = r / self.d
        return np.asarray(t + np.expm1(-t))

    def slope(self, r: Array) -> Array:
        """Return (1 - exp(-r/d))/d."""
        return np.asarray(-np.expm1(-r / self.d) / self.d)

    def curvature(self, r: Array) -> Array:
        """Return exp(-r/d)/d²."""
        return np.asarray(np.exp(-r / self.d) / self.d**2)


@dataclass(frozen=True, slots=True)
class Minimax(Penalty):
    """Largest departure of any situation with weight."""

    name: ClassVar[str] = "minimax"
    formula: ClassVar[str] = "max |β − β_T|"
    source: ClassVar[str] = "Chebyshev approximation; common practice, no source"

    def value(self, r: Array) -> Array:
        """Return |r|."""
        return np.abs(r)

    def slope(self, r: Array) -> Array:
        """Return the sign of r."""
        return np.sign(r)

    def curvature(self, r: Array) -> Array:
        """Return 0."""
        return np.zeros_like(r)

    def objective(self, r: Array, weight: Array) -> float:
        """Return the largest penalty."""
        return float(np.max(np.abs(r)))


PENALTIES: Mapping[str, type[Penalty]] = registered((Squared, Asymmetric, Minimax))


def make_penalty(name: str, d: float = 0.23) -> Penalty:
    """Return the penalty of this name.

    Parameters
    ----------
    name : str
        ``squared``, ``asymmetric`` or ``minimax``.
    d : float
        Scale of the asymmetric penalty, in units of beta; others ignore it.

    Raises
    ------
    InputError
        No penalty has that name, or ``d`` is not positive.
    """
    if name not in PENALTIES:
        raise InputError(Problem(f"There is no penalty '{name}'.", suggestion=did_you_mean(name, PENALTIES)))
    if name == Asymmetric.name:
        if not (np.isfinite(d) and d > 0):
            raise InputError(f"The scale d of the asymmetric penalty must be positive; got {d:g}.")
        return Asymmetric(d)
    return PENALTIES[name]()
