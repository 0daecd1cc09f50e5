# ruff: noqa: D102  (the formulas are documented in Family)
"""What families of extremes share: x is a simple function of the log-hazard k(u) = ln(-ln Phi(u)).

Families of maxima have ``F(x) = exp(-exp(k))``, families of minima ``1 - F(x) = exp(-exp(k))``.
"""

from __future__ import annotations

from abc import abstractmethod
from typing import ClassVar

import numpy as np

from calibrate.distributions.exponentials import log1mexp
from calibrate.distributions.family import Family
from calibrate.distributions.normal_tails import (
    from_log_hazard,
    log_hazard,
    log_hazard_curvature,
    log_hazard_slope,
)
from calibrate.distributions.parameter import Array, Values


class ExtremeFamily(Family):
    """A family given by x(k) and its inverse.

    Attributes
    ----------
    of_maxima : bool
        Whether k belongs to F (maxima) or to 1 - F (minima).
    """

    of_maxima: ClassVar[bool]

    @abstractmethod
    def from_k(self, k: Array, p: Values) -> tuple[Array, Array, Array]:
        """Return x, dx/dk and d2x/dk2."""

    @abstractmethod
    def to_k(self, x: Array, p: Values) -> Array:
        """Return k(x) within the support."""

    @abstractmethod
    def log_abs_slope(self, k: Array, p: Values) -> Array:
        """Return ln |dx/dk|."""

    @abstractmethod
    def slopes_at_k(self, k: Array, p: Values) -> Values:
        """Return dx/dp at fixed k."""

    def logpdf(self, x: Array, p: Values) -> Array:
        k = self.to_k(x, p)
        # exp(k) wins at both ends of the support unless the slope balances it.
        return k - np.exp(k) - self.log_abs_slope(k, p)

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        with np.errstate(over="ignore"):
            tail = -np.exp(self.to_k(x, p))
        other = log1mexp(tail)
        return (tail, other) if self.of_maxima else (other, tail)

    def u(self, x: Array, p: Values) -> Array:
        u = from_log_hazard(self.to_k(x, p))
        return u if self.of_maxima else -u

    def x(self, u: Array, p: Values) -> Array:
        return self.from_k(log_hazard(u if self.of_maxima else -u), p)[0]

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        k, k1 = log_hazard_slope(u if self.of_maxima else -u)
        x, slope, _ = self.from_k(k, p)
        return x, slope * (k1 if self.of_maxima else -k1)

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        k, k1, k2 = log_hazard_curvature(u if self.of_maxima else -u)
        x, slope, curvature = self.from_k(k, p)
        return x, slope * (k1 if self.of_maxima else -k1), curvature * k1 * k1 + slope * k2

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        return self.slopes_at_k(log_hazard(u if self.of_maxima else -u), p)
