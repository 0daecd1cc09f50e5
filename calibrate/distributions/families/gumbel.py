# ruff: noqa: D102  (the formulas are documented in Family)
"""The Gumbel family of maxima."""

from __future__ import annotations

import math

import numpy as np

from calibrate.distributions.extremes import ExtremeFamily
from calibrate.distributions.normal_tails import log_hazard_slope
from calibrate.distributions.parameter import POSITIVE, Array, Parameter, Values

SD_PER_SCALE = math.pi / math.sqrt(6.0)


class Gumbel(ExtremeFamily):
    """Gumbel distribution of maxima; F = exp(-exp(-(x - location)/scale)), the location is the mode."""

    name = "gumbel"
    parameters = (Parameter("location", "location"), Parameter("scale", "scale", POSITIVE))
    of_maxima = True

    def support(self, p: Values) -> tuple[Array, Array]:
        return np.asarray(-np.inf), np.asarray(np.inf)

    def from_k(self, k: Array, p: Values) -> tuple[Array, Array, Array]:
        location, scale = p
        return location - scale * k, -scale, np.zeros(())

    def to_k(self, x: Array, p: Values) -> Array:
        return (p[0] - x) / p[1]

    def log_abs_slope(self, k: Array, p: Values) -> Array:
        return np.log(p[1])

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        k, k1 = log_hazard_slope(u)
        return p[0] - p[1] * k, -p[1] * k1

    def slopes_at_k(self, k: Array, p: Values) -> Values:
        shape = np.broadcast_shapes(np.shape(k), *(q.shape for q in p))
        return np.ones(shape), np.broadcast_to(-k, shape)

    def moments(self, p: Values) -> tuple[Array, Array]:
        return p[0] + np.euler_gamma * p[1], SD_PER_SCALE * p[1]

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        return (
            (np.asarray(1.0), np.asarray(0.0)),
            (np.asarray(np.euler_gamma), np.asarray(SD_PER_SCALE)),
        )

    def from_moments(self, mean: Array, sd: Array, cov: Array, kept: Values) -> Values:
        scale = sd / SD_PER_SCALE
        return mean - np.euler_gamma * scale, scale

    def maximum_parameters(self, p: Values, ratio: Array) -> Values | None:
        return p[0] + p[1] * np.log(ratio), p[1]
