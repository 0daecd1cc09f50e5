# ruff: noqa: D102  (the formulas are documented in Family)
"""The lognormal family."""

from __future__ import annotations

import math

import numpy as np

from calibrate.distributions.family import Family
from calibrate.distributions.normal_tails import log_ndtr, log_phi
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values


class Lognormal(Family):
    """Lognormal distribution; x = median exp(log_sd u)."""

    name = "lognormal"
    parameters = (Parameter("median", "scale", POSITIVE), Parameter("log_sd", "shape", POSITIVE))
    mean_positive = True
    limits = (0.0, math.inf)

    def logpdf(self, x: Array, p: Values) -> Array:
        u = self.u(x, p)
        # At x = 0 the log-density is -inf: the square outweighs the logarithm.
        log_x = np.log(np.where(x > 0, x, 1.0))
        return log_phi(u) - np.log(p[1]) - log_x

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        u = self.u(x, p)
        return log_ndtr(u), log_ndtr(-u)

    def u(self, x: Array, p: Values) -> Array:
        median, log_sd = p
        return np.log(x / median) / log_sd

    def x(self, u: Array, p: Values) -> Array:
        median, log_sd = p
        return median * np.exp(log_sd * u)

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        x = self.x(u, p)
        return x, p[1] * x

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        x, slope = self.x_slope(u, p)
        return x, slope, p[1] * slope

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        ratio = np.exp(p[1] * u)
        return np.broadcast_to(ratio, np.shape(p[0] * ratio)), p[0] * ratio * u

    def moments(self, p: Values) -> tuple[Array, Array]:
        median, log_sd = p
        mean = median * np.exp(0.5 * log_sd**2)
        return mean, mean * np.sqrt(np.expm1(log_sd**2))

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        median, log_sd = p
        mean, sd = self.moments(p)
        by_log_sd = log_sd * sd + mean**2 * log_sd * np.exp(log_sd**2) / sd
        return (mean / median, sd / median), (log_sd * mean, by_log_sd)

    def from_moments(self, m: Moments) -> Values:
        return m.mean / np.sqrt(1.0 + m.cov**2), np.sqrt(np.log1p(m.cov**2))
