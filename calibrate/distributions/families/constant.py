# ruff: noqa: D102  (the formulas are documented in Family; each takes what its base declares)
"""The family without scatter."""

from __future__ import annotations

import numpy as np

from calibrate.distributions.family import Family
from calibrate.distributions.parameter import Array, Parameter, Values


class Constant(Family):
    """One value with probability one; x does not depend on u."""

    name = "constant"
    parameters = (Parameter("value", "location"),)
    moment_names = ()
    is_constant = True

    def support(self, p: Values) -> tuple[Array, Array]:
        return p[0], p[0]

    def logpdf(self, x: Array, p: Values) -> Array:
        return np.where(x == p[0], np.inf, -np.inf)

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        return np.where(x >= p[0], 0.0, -np.inf), np.where(x >= p[0], -np.inf, 0.0)

    def u(self, x: Array, p: Values) -> Array:
        """Return 0: every u leads to the value."""
        return np.zeros(np.broadcast_shapes(np.shape(x), p[0].shape))

    def x(self, u: Array, p: Values) -> Array:
        return np.broadcast_to(p[0], np.broadcast_shapes(np.shape(u), p[0].shape))

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        x = self.x(u, p)
        return x, np.zeros(x.shape), np.zeros(x.shape)

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        return (np.ones(np.broadcast_shapes(np.shape(u), p[0].shape)),)

    def moments(self, p: Values) -> tuple[Array, Array]:
        return p[0], np.zeros(p[0].shape)

    def maximum_parameters(self, p: Values, ratio: Array) -> Values | None:
        return p

    def minimum_parameters(self, p: Values, ratio: Array) -> Values | None:
        return p
