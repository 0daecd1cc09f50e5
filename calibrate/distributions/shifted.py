# ruff: noqa: D102  (the formulas are documented in Family)
"""Families of x - threshold: everything but the threshold is the base family's."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from calibrate.distributions.arguments import require
from calibrate.distributions.family import Family
from calibrate.distributions.parameter import Array, Moments, Parameter, Values


class ShiftedFamily(Family):
    """A positive two-parameter family moved by a threshold, the lower end of its support.

    Attributes
    ----------
    base : Family
        The family of x - threshold, with support (0, inf).
    """

    base: ClassVar[Family]
    threshold: ClassVar[Parameter] = Parameter("threshold", "location")
    moments_keep = ("threshold",)

    def support(self, p: Values) -> tuple[Array, Array]:
        return p[0], np.asarray(np.inf)

    def logpdf(self, x: Array, p: Values) -> Array:
        return self.base.logpdf(x - p[0], p[1:])

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        return self.base.log_tails(x - p[0], p[1:])

    def u(self, x: Array, p: Values) -> Array:
        return self.base.u(x - p[0], p[1:])

    def x(self, u: Array, p: Values) -> Array:
        return p[0] + self.base.x(u, p[1:])

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        x, slope = self.base.x_slope(u, p[1:])
        return p[0] + x, slope

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        x, slope, curvature = self.base.x_curvature(u, p[1:])
        return p[0] + x, slope, curvature

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        shape = np.broadcast_shapes(np.shape(u), *(q.shape for q in p))
        return np.ones(shape), *(np.broadcast_to(s, shape) for s in self.base.parameter_slopes(u, p[1:]))

    def moments(self, p: Values) -> tuple[Array, Array]:
        mean, sd = self.base.moments(p[1:])
        return p[0] + mean, sd

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        return (np.asarray(1.0), np.asarray(0.0)), *self.base.moment_slopes(p[1:])

    def from_moments(self, m: Moments) -> Values:
        (threshold,) = m.kept
        above = m.mean - threshold
        mean, _ = np.broadcast_arrays(m.mean, threshold)
        require(self.name, "mean", above > 0, mean, "greater than the threshold")
        return threshold, *self.base.from_moments(Moments(above, m.sd, m.sd / above))

    def maximum_parameters(self, p: Values, ratio: Array) -> Values | None:
        closed = self.base.maximum_parameters(p[1:], ratio)
        return None if closed is None else (p[0], *closed)

    def minimum_parameters(self, p: Values, ratio: Array) -> Values | None:
        closed = self.base.minimum_parameters(p[1:], ratio)
        return None if closed is None else (p[0], *closed)
