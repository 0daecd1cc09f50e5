# ruff: noqa: D102  (the formulas are documented in Family; each takes what its base declares)
"""The exponential family."""

from __future__ import annotations

import math

import numpy as np

from calibrate.distributions.extremes import ExtremeFamily
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values


class Exponential(ExtremeFamily):
    """Exponential distribution; F = 1 - exp(-x/scale). Mean and sd both equal the scale."""

    name = "exponential"
    parameters = (Parameter("scale", "scale", POSITIVE),)
    moment_names = ("mean",)
    mean_positive = True
    limits = (0.0, math.inf)
    of_maxima = False

    def from_k(self, k: Array, p: Values) -> tuple[Array, Array, Array]:
        x = p[0] * np.exp(k)
        return x, x, x

    def to_k(self, x: Array, p: Values) -> Array:
        return np.log(x / p[0])

    def log_abs_slope(self, k: Array, p: Values) -> Array:
        return np.log(p[0]) + k

    def logpdf(self, x: Array, p: Values) -> Array:
        return -x / p[0] - np.log(p[0])

    def slopes_at_k(self, k: Array, p: Values) -> Values:
        ratio = np.exp(k)
        return (np.broadcast_to(ratio, np.broadcast_shapes(np.shape(ratio), p[0].shape)),)

    def moments(self, p: Values) -> tuple[Array, Array]:
        return p[0], p[0]

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        return ((np.asarray(1.0), np.asarray(1.0)),)

    def from_moments(self, m: Moments) -> Values:
        return (m.mean,)

    def minimum_parameters(self, p: Values, ratio: Array) -> Values | None:
        return (p[0] / ratio,)
