# ruff: noqa: D102  (the formulas are documented in Family)
"""The two-parameter Weibull family."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions.extremes import ExtremeFamily
from calibrate.distributions.log_gamma import excess
from calibrate.distributions.normal_tails import log_hazard_slope
from calibrate.distributions.parameter import POSITIVE, Array, Parameter, Values
from calibrate.distributions.powers import power_from_cov


class Weibull(ExtremeFamily):
    """Weibull distribution of minima; F = 1 - exp(-(x/scale)**shape)."""

    name = "weibull"
    parameters = (Parameter("scale", "scale", POSITIVE), Parameter("shape", "shape", POSITIVE))
    mean_positive = True
    of_maxima = False

    def support(self, p: Values) -> tuple[Array, Array]:
        return np.asarray(0.0), np.asarray(np.inf)

    def from_k(self, k: Array, p: Values) -> tuple[Array, Array, Array]:
        scale, shape = p
        x = scale * np.exp(k / shape)
        slope = x / shape
        return x, slope, slope / shape

    def to_k(self, x: Array, p: Values) -> Array:
        return p[1] * np.log(x / p[0])

    def logpdf(self, x: Array, p: Values) -> Array:
        scale, shape = p
        t = x / scale
        return special.xlogy(shape - 1.0, t) - t**shape + np.log(shape / scale)

    def log_abs_slope(self, k: Array, p: Values) -> Array:
        return np.log(p[0] / p[1]) + k / p[1]

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        k, k1 = log_hazard_slope(-u)
        inverse = -1.0 / p[1]
        x = p[0] * np.exp(k / p[1])
        return x, x * k1 * inverse

    def slopes_at_k(self, k: Array, p: Values) -> Values:
        scale, shape = p
        ratio = np.exp(k / shape)
        return np.broadcast_to(ratio, np.shape(ratio * scale)), -scale * ratio * k / shape**2

    def moments(self, p: Values) -> tuple[Array, Array]:
        scale, shape = p
        y = 1.0 / shape
        mean = scale * special.gamma(1.0 + y)
        return mean, mean * np.sqrt(np.expm1(y**2 * excess(y)[0]))

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        scale, shape = p
        y = 1.0 / shape
        mean, sd = self.moments(p)
        value, slope = excess(y)
        mean_by_y = mean * special.psi(1.0 + y)
        sd_by_y = sd * special.psi(1.0 + y) + mean**2 * np.exp(y**2 * value) * slope * y / (2.0 * sd)
        return (mean / scale, sd / scale), (-mean_by_y * y**2, -sd_by_y * y**2)

    def from_moments(self, mean: Array, sd: Array, cov: Array, kept: Values) -> Values:
        y = power_from_cov(cov)
        return mean / special.gamma(1.0 + y), 1.0 / y

    def minimum_parameters(self, p: Values, ratio: Array) -> Values | None:
        scale, shape = p
        return scale * ratio ** (-1.0 / shape), shape
