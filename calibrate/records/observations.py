"""What is known of each specimen: a value, a bound on one side, or an interval."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.errors import InputError

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class Observations:
    """n specimens, each known exactly or within bounds.

    Parameters
    ----------
    lower, upper : array, shape (n,)
        The specimen's value lies between them. Equal: observed exactly. ``upper`` infinite: right-censored (it had
        not failed at ``lower``). ``lower`` minus infinite: left-censored. Both finite and different: interval.
    above, below : float
        Truncation: only specimens with ``above`` < value < ``below`` could enter the sample at all (a proof load, a
        grading threshold, a detection limit below which nothing was recorded).

    Raises
    ------
    InputError
        Bounds that are not numbers, in the wrong order or unbounded on both sides, or a specimen outside the
        truncation limits.
    """

    lower: Array
    upper: Array
    above: float = -np.inf
    below: float = np.inf

    def __post_init__(self) -> None:
        for name in ("lower", "upper"):
            bound = np.array(getattr(self, name), dtype=np.float64)
            bound.flags.writeable = False
            object.__setattr__(self, name, bound)
        if np.isnan(self.lower).any() or np.isnan(self.upper).any():
            raise InputError("An observation is not a number.")
        wrong = (self.lower > self.upper) | (self.lower == np.inf) | (self.upper == -np.inf)
        if wrong.any():
            i = int(np.argmax(wrong))
            raise InputError(
                f"Observation {i + 1} has bounds {self.lower[i]:g} and {self.upper[i]:g} in the wrong order."
            )
        unknown = np.isneginf(self.lower) & np.isposinf(self.upper)
        if unknown.any():
            raise InputError(f"Observation {int(np.argmax(unknown)) + 1} has no bound on either side.")
        if not self.above < self.below:
            raise InputError(
                f"The truncation limits {self.above:g} and {self.below:g} leave nothing between them."
            )
        outside = (self.upper <= self.above) | (self.lower >= self.below)
        if outside.any():
            i = int(np.argmax(outside))
            shown = self.lower[i] if np.isfinite(self.lower[i]) else self.upper[i]
            raise InputError(
                f"Observation {i + 1} ({shown:g}) lies outside the truncation limits {self.above:g} and {self.below:g}."
            )

    @classmethod
    def of(cls, values: ArrayLike) -> Observations:
        """Return a complete sample."""
        x = np.array(values, dtype=np.float64)
        return cls(x, x)

    @property
    def n(self) -> int:
        """Number of specimens."""
        return int(self.lower.size)

    @property
    def exact(self) -> Flags:
        """Which were observed exactly."""
        return np.asarray(self.lower == self.upper)

    @property
    def right(self) -> Flags:
        """Which are right-censored."""
        return np.isposinf(self.upper)

    @property
    def left(self) -> Flags:
        """Which are left-censored."""
        return np.isneginf(self.lower)

    @property
    def interval(self) -> Flags:
        """Which are known within two finite bounds."""
        return np.asarray(~self.exact & ~self.right & ~self.left)

    @property
    def n_exact(self) -> int:
        """Number of specimens observed exactly."""
        return int(np.count_nonzero(self.exact))

    @property
    def truncated(self) -> bool:
        """Whether part of the population could not enter the sample."""
        return bool(np.isfinite(self.above) or np.isfinite(self.below))

    @property
    def censored(self) -> bool:
        """Whether any specimen is known by bounds only."""
        return not bool(self.exact.all())

    @property
    def complete(self) -> bool:
        """Whether all specimens are exact and none could be missing."""
        return not self.censored and not self.truncated

    @property
    def values(self) -> Array:
        """One number for each specimen: the value, the finite bound, or the middle of the interval."""
        if not self.censored:
            return self.lower
        finite_lower = np.where(self.left, self.upper, self.lower)
        finite_upper = np.where(self.right, self.lower, self.upper)
        return np.asarray(np.where(self.exact, self.lower, 0.5 * (finite_lower + finite_upper)))

    def taken(self, chosen: Any) -> Observations:
        """Return some of the specimens, by mask or index."""
        return Observations(self.lower[chosen], self.upper[chosen], self.above, self.below)

    def scaled(self, factor: float) -> Observations:
        """Return the same in another unit; ``factor`` is positive."""
        return Observations(
            self.lower * factor, self.upper * factor, self.above * factor, self.below * factor
        )
