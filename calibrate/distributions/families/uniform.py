# ruff: noqa: D102  (the formulas are documented in Family; each takes what its base declares)
"""The uniform family."""

from __future__ import annotations

import math

import numpy as np
from scipy import special

from calibrate.distributions.bounds import require_order
from calibrate.distributions.exponentials import consistent_tails
from calibrate.distributions.family import Family
from calibrate.distributions.normal_tails import log_phi
from calibrate.distributions.parameter import Array, Moments, Parameter, Values

_ROOT_3 = math.sqrt(3.0)
_ROOT_12 = math.sqrt(12.0)


class Uniform(Family):
    """Uniform distribution between two bounds."""

    name = "uniform"
    parameters = (Parameter("lower", "bound"), Parameter("upper", "bound"))

    def support(self, p: Values) -> tuple[Array, Array]:
        return p[0], p[1]

    def check(self, p: Values) -> None:
        require_order(self.name, *p)

    def logpdf(self, x: Array, p: Values) -> Array:
        return np.broadcast_to(-np.log(p[1] - p[0]), np.broadcast_shapes(np.shape(x), p[0].shape, p[1].shape))

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        width = p[1] - p[0]
        return consistent_tails(np.log((x - p[0]) / width), np.log((p[1] - x) / width))

    def x(self, u: Array, p: Values) -> Array:
        tail = (p[1] - p[0]) * special.ndtr(-np.abs(u))
        return np.where(np.less(u, 0.0), p[0] + tail, p[1] - tail)

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        return self.x(u, p), (p[1] - p[0]) * np.exp(log_phi(u))

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        x, slope = self.x_slope(u, p)
        return x, slope, -u * slope

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        shape = np.broadcast_shapes(np.shape(u), *(q.shape for q in p))
        return np.broadcast_to(special.ndtr(-u), shape), np.broadcast_to(special.ndtr(u), shape)

    def moments(self, p: Values) -> tuple[Array, Array]:
        return p[0] + 0.5 * (p[1] - p[0]), (p[1] - p[0]) / _ROOT_12

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        half, rate = np.asarray(0.5), np.asarray(1.0 / _ROOT_12)
        return (half, -rate), (half, rate)

    def from_moments(self, m: Moments) -> Values:
        half = _ROOT_3 * m.sd
        return m.mean - half, m.mean + half
