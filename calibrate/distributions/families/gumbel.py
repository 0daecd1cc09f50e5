# ruff: noqa: D102  (the formulas are documented in Family; each takes what its base declares)
"""The Gumbel families of maxima and of minima."""

from __future__ import annotations

import math
from typing import ClassVar

import numpy as np

from calibrate.distributions.extremes import ExtremeFamily
from calibrate.distributions.normal_tails import log_hazard_slope
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values

SD_PER_SCALE = math.pi / math.sqrt(6.0)


class _Gumbel(ExtremeFamily):
    """x = location - sign scale k; the location is the mode."""

    parameters = (Parameter("location", "location"), Parameter("scale", "scale", POSITIVE))
    sign: ClassVar[float]

    def from_k(self, k: Array, p: Values) -> tuple[Array, Array, Array]:
        slope = -self.sign * p[1]
        return p[0] + slope * k, slope, np.zeros(())

    def to_k(self, x: Array, p: Values) -> Array:
        return (x - p[0]) / (-self.sign * p[1])

    def log_abs_slope(self, k: Array, p: Values) -> Array:
        return np.log(p[1])

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        k, k1 = log_hazard_slope(u if self.of_maxima else -u)
        return p[0] - self.sign * p[1] * k, -p[1] * k1

    def slopes_at_k(self, k: Array, p: Values) -> Values:
        shape = np.broadcast_shapes(np.shape(k), *(q.shape for q in p))
        return np.ones(shape), np.broadcast_to(-self.sign * k, shape)

    def moments(self, p: Values) -> tuple[Array, Array]:
        return p[0] + self.sign * np.euler_gamma * p[1], SD_PER_SCALE * p[1]

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        by_scale = np.asarray(self.sign * np.euler_gamma), np.asarray(SD_PER_SCALE)
        return (np.asarray(1.0), np.asarray(0.0)), by_scale

    def from_moments(self, m: Moments) -> Values:
        scale = m.sd / SD_PER_SCALE
        return m.mean - self.sign * np.euler_gamma * scale, scale


class Gumbel(_Gumbel):
    """Gumbel distribution of maxima; F = exp(-exp(-(x - location)/scale))."""

    name = "gumbel"
    of_maxima = True
    sign = 1.0

    def maximum_parameters(self, p: Values, ratio: Array) -> Values | None:
        return p[0] + p[1] * np.log(ratio), p[1]


class GumbelMin(_Gumbel):
    """Gumbel distribution of minima; F = 1 - exp(-exp((x - location)/scale))."""

    name = "gumbel_min"
    of_maxima = False
    sign = -1.0

    def minimum_parameters(self, p: Values, ratio: Array) -> Values | None:
        return p[0] - p[1] * np.log(ratio), p[1]
