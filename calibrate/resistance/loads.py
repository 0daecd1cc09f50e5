"""Dead and live load of a calibration: factors, ratio, bias and scatter, and what follows from them."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import ArrayLike

from calibrate.errors import InputError, Problem
from calibrate.resistance.positive_values import Array


@dataclass(frozen=True, slots=True, eq=False)
class LoadStatistics:
    """Dead load D and live load L; numbers, or arrays that broadcast, say over dead-to-live ratios.

    Parameters
    ----------
    dead_factor, live_factor : array_like
        Load factors of the design check.
    dead_to_live : array_like
        Nominal dead over nominal live load.
    dead_bias, live_bias : array_like
        Mean over nominal.
    dead_cov, live_cov : array_like
        Coefficients of variation.

    Raises
    ------
    InputError
        Values that are not finite and above zero (zero is allowed for ratio and scatter), or do not broadcast.
    """

    dead_factor: Array
    live_factor: Array
    dead_to_live: Array
    dead_bias: Array
    live_bias: Array
    dead_cov: Array
    live_cov: Array

    def __init__(
        self,
        *,
        dead_factor: ArrayLike,
        live_factor: ArrayLike,
        dead_to_live: ArrayLike,
        dead_bias: ArrayLike,
        live_bias: ArrayLike,
        dead_cov: ArrayLike,
        live_cov: ArrayLike,
    ) -> None:
        given = (dead_factor, live_factor, dead_to_live, dead_bias, live_bias, dead_cov, live_cov)
        problems = []
        for item, value in zip(fields(self), given, strict=True):
            array = np.array(value, dtype=np.float64)
            array.setflags(write=False)
            zero = item.name in ("dead_to_live", "dead_cov", "live_cov")
            fine = np.isfinite(array) & ((array >= 0.0) if zero else (array > 0.0))
            if not np.all(fine):
                rule = "zero or above" if zero else "above zero"
                label = item.name.replace("_", " ").capitalize()
                problems.append(Problem(f"{label}: must be finite and {rule}; got {value!r}."))
            object.__setattr__(self, item.name, array)
        if problems:
            raise InputError(problems)
        try:
            self.shape  # noqa: B018
        except ValueError:
            raise InputError(
                "The numbers of dead and live load do not broadcast against each other."
            ) from None

    @property
    def shape(self) -> tuple[int, ...]:
        """Broadcast shape of all numbers."""
        return np.broadcast_shapes(*(getattr(self, item.name).shape for item in fields(self)))

    @property
    def factored(self) -> Array:
        """Design load over nominal live load."""
        return self.dead_factor * self.dead_to_live + self.live_factor

    @property
    def mean(self) -> Array:
        """Mean load over nominal live load."""
        return self.dead_bias * self.dead_to_live + self.live_bias

    @property
    def calibration_coefficient(self) -> Array:
        """Design load over mean load, C_phi."""
        return self.factored / self.mean

    @property
    def cov(self) -> Array:
        """Coefficient of variation of the sum of both loads, V_Q."""
        dead = self.dead_bias * self.dead_to_live * self.dead_cov
        return np.hypot(dead, self.live_bias * self.live_cov) / self.mean

    @property
    def cov_unweighted(self) -> Array:
        """Root of V_D² + V_L², whatever the ratio of the loads: what the practice of foundations uses for V_Q."""
        return np.hypot(self.dead_cov, self.live_cov)
