# ruff: noqa: D102  (the formulas are documented in Family; each takes what its base declares)
"""The normal family."""

from __future__ import annotations

import numpy as np

from calibrate.distributions.family import Family
from calibrate.distributions.normal_tails import log_ndtr, log_phi
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values


class Normal(Family):
    """Normal distribution; x = location + scale u."""

    name = "normal"
    parameters = (Parameter("location", "location"), Parameter("scale", "scale", POSITIVE))
    is_normal = True

    def logpdf(self, x: Array, p: Values) -> Array:
        location, scale = p
        return log_phi((x - location) / scale) - np.log(scale)

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        z = self.u(x, p)
        return log_ndtr(z), log_ndtr(-z)

    def u(self, x: Array, p: Values) -> Array:
        location, scale = p
        return (x - location) / scale

    def x(self, u: Array, p: Values) -> Array:
        location, scale = p
        return location + scale * u

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        x = self.x(u, p)
        return x, np.broadcast_to(p[1], np.shape(x))

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        x, slope = self.x_slope(u, p)
        return x, slope, np.zeros(np.shape(x))

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        shape = np.broadcast_shapes(np.shape(u), *(q.shape for q in p))
        return np.ones(shape), np.broadcast_to(u, shape)

    def moments(self, p: Values) -> tuple[Array, Array]:
        return p[0], p[1]

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        zero, one = np.asarray(0.0), np.asarray(1.0)
        return (one, zero), (zero, one)

    def from_moments(self, m: Moments) -> Values:
        return m.mean, m.sd
