# ruff: noqa: D102  (the formulas are documented in Family; each takes what its base declares)
"""The generalised extreme value family of maxima."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions.arguments import require
from calibrate.distributions.exponentials import exprel, exprel_slope, log1p_ratio
from calibrate.distributions.extremes import ExtremeFamily
from calibrate.distributions.log_gamma import excess, log_gamma_ratio
from calibrate.distributions.parameter import POSITIVE, REAL, Array, Moments, Parameter, Values


class Gev(ExtremeFamily):
    """Generalised extreme values; F = exp(-(1 + shape z)**(-1/shape)), z = (x - location)/scale.

    A positive shape has a heavy upper tail, a negative one an upper bound, shape 0 is Gumbel. The mean exists for
    shape < 1, the sd for shape < 1/2.
    """

    name = "gev"
    parameters = (
        Parameter("location", "location"),
        Parameter("scale", "scale", POSITIVE),
        Parameter("shape", "shape", REAL),
    )
    moments_keep = ("shape",)
    of_maxima = True

    def support(self, p: Values) -> tuple[Array, Array]:
        location, scale, shape = p
        end = location - scale / np.where(shape == 0.0, 1.0, shape)
        return np.where(shape > 0.0, end, -np.inf), np.where(shape < 0.0, end, np.inf)

    def from_k(self, k: Array, p: Values) -> tuple[Array, Array, Array]:
        location, scale, shape = p
        w = -shape * k
        slope = -scale * np.exp(w)
        return location - scale * k * exprel(w), slope, -shape * slope

    def to_k(self, x: Array, p: Values) -> Array:
        location, scale, shape = p
        z = (x - location) / scale
        return -z * log1p_ratio(np.maximum(shape * z, -1.0))

    def log_abs_slope(self, k: Array, p: Values) -> Array:
        return np.log(p[1]) - p[2] * k

    def logpdf(self, x: Array, p: Values) -> Array:
        k = self.to_k(x, p)
        below = np.greater(k, 700.0)
        safe = np.where(below, 0.0, k)
        return np.where(below, -np.inf, (1.0 + p[2]) * safe - np.exp(safe) - np.log(p[1]))

    def slopes_at_k(self, k: Array, p: Values) -> Values:
        shape = np.broadcast_shapes(np.shape(k), *(q.shape for q in p))
        w = -p[2] * k
        by_scale = -k * exprel(w)
        return np.ones(shape), np.broadcast_to(by_scale, shape), p[1] * k**2 * exprel_slope(w)

    def moments(self, p: Values) -> tuple[Array, Array]:
        location, scale, shape = p
        mean = np.where(shape < 1.0, _mean(np.where(shape < 1.0, shape, 0.0))[0], np.inf)
        sd = np.where(shape < 0.5, _sd(np.where(shape < 0.5, shape, 0.0))[0], np.inf)
        return location + scale * mean, scale * sd

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        _, scale, shape = p
        mean, mean_slope = _mean(shape)
        sd, sd_slope = _sd(shape)
        return (np.asarray(1.0), np.asarray(0.0)), (mean, sd), (scale * mean_slope, scale * sd_slope)

    def from_moments(self, m: Moments) -> Values:
        (shape,) = m.kept
        rule = "less than 0.5 where mean and sd are given (else the sd is infinite)"
        require(self.name, "shape", shape < 0.5, shape, rule, "Give location, scale and shape instead.")
        scale = m.sd / _sd(shape)[0]
        return m.mean - scale * _mean(shape)[0], scale, shape

    def maximum_parameters(self, p: Values, ratio: Array) -> Values | None:
        location, scale, shape = p
        shift = np.log(ratio)
        return location + scale * shift * exprel(shape * shift), scale * np.exp(shape * shift), shape


def _mean(shape: Array) -> tuple[Array, Array]:
    """Return (Gamma(1 - shape) - 1)/shape, the mean for location 0 and scale 1, and its slope."""
    y = -shape
    ratio, slope = log_gamma_ratio(y)
    w = y * ratio
    return -exprel(w) * ratio, exprel_slope(w) * (ratio + y * slope) * ratio + exprel(w) * slope


def _sd(shape: Array) -> tuple[Array, Array]:
    """Return the sd for scale 1 and its slope."""
    y = -shape
    value, slope = excess(y)
    w = y * y * value
    sd = special.gamma(1.0 + y) * np.sqrt(exprel(w) * value)
    growth = exprel_slope(w) / exprel(w) * (2.0 * y * value + y * y * slope) + slope / value
    return sd, -sd * (special.psi(1.0 + y) + 0.5 * growth)
