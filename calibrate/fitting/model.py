"""The base of every likelihood: a family declares its log-density and where to start, the rest is computed."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np

from calibrate.fitting.jets import Array, Jet, Number

Kind = Literal["location", "scale", "shape", "threshold"]
Origin = Literal["zero", "mean", "lowest"]


@dataclass(frozen=True, slots=True)
class Rule:
    """What the search has to know about one parameter.

    ``location`` and ``threshold`` move and stretch with the values, ``scale``
    stretches, ``shape`` stays. Scales and positive shapes are sought as
    logarithms; a threshold as the logarithm of its distance below the
    smallest value, so that it stays below.
    """

    name: str
    kind: Kind
    positive: bool = False


@dataclass(frozen=True, slots=True, eq=False)
class Data:
    """The sample as the search sees it: ``z = (x - shift)/unit``, ``unit`` a power of two.

    Attributes
    ----------
    z : array, shape (n,)
    shift, unit : float
    """

    z: Array
    shift: float
    unit: float

    @property
    def n(self) -> int:
        """Number of values."""
        return int(self.z.size)

    def inward(self, kind: Kind, value: float) -> float:
        """Return a parameter as it reads for z."""
        if kind in {"location", "threshold"}:
            return (value - self.shift) / self.unit
        return value / self.unit if kind == "scale" else value

    def outward(self, kind: Kind, value: float) -> float:
        """Return a parameter of z as it reads for x."""
        if kind in {"location", "threshold"}:
            return self.shift + self.unit * value
        return value * self.unit if kind == "scale" else value

    def stretch(self, kind: Kind) -> float:
        """Return d outward / d inward."""
        return 1.0 if kind == "shape" else self.unit


class NoMaximumError(Exception):
    """The likelihood of this sample has no maximum; the message says why, as part of a sentence."""


class Model(ABC):
    """Likelihood of one family for complete samples; stateless.

    A subclass declares the class attributes and the formulas. All formulas
    see standardised data z and parameters that belong to z.

    Attributes
    ----------
    family : str
        Name of the family.
    rules : tuple of Rule
        Own parameters in the family's order.
    origin : {"zero", "mean", "lowest"}
        What is subtracted from the values before they are scaled; "zero"
        where the family itself is tied to zero.
    preset : mapping
        Parameters that are fixed unless given, with their values.
    closed : tuple of str
        Parameters that cannot be estimated: they must be given or preset.
    asked : tuple of str
        Parameters that must be given, or named as to be estimated.
    third : {"skewness", "kurtosis"} or None
        The moment that determines a further parameter in the method of
        moments, and ``third_parameter``, that parameter.
    regular : bool
        Whether the maximum is one where the gradient vanishes.
    """

    family: ClassVar[str]
    rules: ClassVar[tuple[Rule, ...]]
    origin: ClassVar[Origin] = "zero"
    preset: ClassVar[Mapping[str, float]] = {}
    closed: ClassVar[tuple[str, ...]] = ()
    asked: ClassVar[tuple[str, ...]] = ()
    third: ClassVar[Literal["skewness", "kurtosis"] | None] = None
    third_parameter: ClassVar[str] = ""
    regular: ClassVar[bool] = True

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the parameters."""
        return tuple(rule.name for rule in self.rules)

    def refusal(self, x: Array, fixed: Mapping[str, float]) -> str | None:
        """Say why the family cannot hold these values at all (original units), or return None."""
        return None

    @abstractmethod
    def log_density(self, z: Number, p: Mapping[str, Number]) -> Jet:
        """Return the log-density of each value; free parameters are Jets, fixed ones floats."""

    def allowed(self, z: Array, p: Mapping[str, float]) -> bool:
        """Whether the log-density is finite for all values and the search may go there."""
        return True

    def exact(self, z: Array, fixed: Mapping[str, float]) -> dict[str, float] | None:
        """Return the maximum where formulas or a search in one dimension give it, else None.

        Called only if no more is fixed than what must be (``preset``, ``closed``, ``asked``).
        """
        return None

    @abstractmethod
    def starts(self, z: Array, fixed: Mapping[str, float]) -> Sequence[Mapping[str, float]]:
        """Return points from which to climb, values for all parameters that are not fixed.

        Raises
        ------
        NoMaximumError
            If it is already plain that the likelihood has no maximum.
        """

    def notes(self, z: Array, p: Mapping[str, float], free: Sequence[str]) -> list[tuple[str, str]]:
        """Return reservations about a maximum that was found, each a code and a message."""
        return []

    def obstacle(self, z: Array, p: Mapping[str, float]) -> str:
        """Say what kept the search from a maximum, given where it ended."""
        return "the search for the largest likelihood did not converge"

    def irregular(self, p: Mapping[str, float], free: Sequence[str]) -> str | None:
        """Say why standard errors from the information do not hold at this maximum, or return None."""
        return None


def needs_above(x: Array, bound: float, what: str) -> str | None:
    """Return the refusal of a family that holds only values above a bound."""
    lowest = float(np.min(x))
    if lowest > bound:
        return None
    count = int(np.sum(x <= bound))
    plural = "value is" if count == 1 else "values are"
    return f"it holds only values above {what}; {count} {plural} not, the smallest {lowest:.12g}"
