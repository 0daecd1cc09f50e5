# ruff: noqa: D102  (the formulas are documented in Family; each takes what its base declares)
"""What Weibull and Frechet share: x = scale E**y with E standard exponential, y = 1/shape or -1/shape."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from scipy import special

from calibrate.distributions.extremes import ExtremeFamily
from calibrate.distributions.log_gamma import excess
from calibrate.distributions.normal_tails import log_hazard_slope
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values

_STEPS = 40


class PowerFamily(ExtremeFamily):
    """Families with x = scale exp(k/shape) (minima) or scale exp(-k/shape) (maxima)."""

    parameters = (Parameter("scale", "scale", POSITIVE), Parameter("shape", "shape", POSITIVE))
    mean_positive = True
    limits = (0.0, math.inf)

    def _power(self, shape: Array) -> Array:
        return -1.0 / shape if self.of_maxima else 1.0 / shape

    def from_k(self, k: Array, p: Values) -> tuple[Array, Array, Array]:
        y = self._power(p[1])
        x = p[0] * np.exp(y * k)
        return x, y * x, y * y * x

    def to_k(self, x: Array, p: Values) -> Array:
        return np.log(x / p[0]) / self._power(p[1])

    def log_abs_slope(self, k: Array, p: Values) -> Array:
        return np.log(p[0] / p[1]) + self._power(p[1]) * k

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        k, k1 = log_hazard_slope(u if self.of_maxima else -u)
        x = p[0] * np.exp(k * self._power(p[1]))
        return x, x * k1 * (-1.0 / p[1])

    def slopes_at_k(self, k: Array, p: Values) -> Values:
        y = self._power(p[1])
        ratio = np.exp(y * k)
        by_scale = np.broadcast_to(ratio, np.broadcast_shapes(np.shape(ratio), p[0].shape))
        return by_scale, -p[0] * ratio * k * y / p[1]

    def moments(self, p: Values) -> tuple[Array, Array]:
        y = self._power(p[1])
        has_sd = np.greater(y, -0.5)
        safe = np.where(has_sd, y, 0.0)
        with np.errstate(over="ignore"):
            mean = p[0] * np.where(
                np.greater(y, -1.0), special.gamma(1.0 + np.maximum(y, -0.9999999)), np.inf
            )
            sd = mean * np.where(has_sd, np.sqrt(np.expm1(safe**2 * excess(safe)[0])), np.inf)
        return mean, sd

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        scale, shape = p
        y = self._power(shape)
        mean, sd = self.moments(p)
        value, slope = excess(y)
        growth = special.psi(1.0 + y)
        by_excess = mean**2 * np.exp(y**2 * value) * (2.0 * y * value + y**2 * slope) / (2.0 * sd)
        y_by_shape = -y / shape
        return (mean / scale, sd / scale), (
            mean * growth * y_by_shape,
            (sd * growth + by_excess) * y_by_shape,
        )

    def from_moments(self, m: Moments) -> Values:
        y = negative_power(m.cov) if self.of_maxima else positive_power(m.cov)
        return m.mean / special.gamma(1.0 + y), np.abs(1.0 / y)


def positive_power(cov: Array) -> Array:
    """Return y > 0 for which E**y has this coefficient of variation.

    Notes
    -----
    With ``L = y**2 V`` of :func:`excess`, L = ln(1 + cov**2). Newton's method for ln L against ln y, a curve whose
    slope stays between 1 and 2, converges from any start.
    """
    log_target = np.log(np.log1p(np.square(cov)))
    # Small cov: L = pi^2/6 y^2. Large: L grows like 2 ln 2 y.
    small = 0.5 * (log_target - math.log(math.pi**2 / 6))
    log_y = np.where(log_target < 0, small, log_target - math.log(2 * math.log(2)))
    done: Any = False
    for _ in range(_STEPS):
        y = np.exp(log_y)
        value, slope = excess(y)
        step = (np.log(value) + 2.0 * log_y - log_target) / (2.0 + y * slope / value)
        # An element that is done rests, so that its bits do not depend on its neighbours.
        log_y = np.where(done, log_y, log_y - step)
        done |= np.abs(step) < 1e-15
        if np.all(done):
            break
    return np.exp(log_y)


def negative_power(cov: Array) -> Array:
    """Return y in (-1/2, 0) for which E**y has this coefficient of variation.

    Notes
    -----
    As :func:`positive_power`, in the variable s = -ln(1 + 2y): there ln L against ln s is nearly straight, from
    slope 2 near zero to slope 1 where the variance grows without bound.
    """
    target = np.log1p(np.square(cov))
    log_s = np.log(np.where(target < 1.0, 2.0 * np.sqrt(target / (math.pi**2 / 6)), target + 0.5))
    done: Any = False
    for _ in range(_STEPS):
        s = np.exp(log_s)
        y = 0.5 * np.expm1(-s)
        value, slope = excess(y)
        # d ln L/d ln s = (2/y + V'/V) dy/ds s with dy/ds = -exp(-s)/2.
        rate = -(2.0 / y + slope / value) * 0.5 * np.exp(-s) * s
        step = (np.log(value) + 2.0 * np.log(-y) - np.log(target)) / rate
        log_s = np.where(done, log_s, log_s - np.clip(step, -1.0, 1.0))
        done |= np.abs(step) < 1e-15
        if np.all(done):
            break
    return 0.5 * np.expm1(-np.exp(log_s))
