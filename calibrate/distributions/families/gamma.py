# ruff: noqa: D102  (the formulas are documented in Family)
"""The gamma family."""

from __future__ import annotations

import math

import numpy as np
from scipy import special

from calibrate.distributions.exponentials import consistent_tails, relative_deviance
from calibrate.distributions.family import Family
from calibrate.distributions.log_gamma import stirling_error
from calibrate.distributions.normal_tails import LOG_SQRT_2PI, REACH, slopes_from_density
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values
from calibrate.distributions.tail_integrals import DROP, tail_integral, tail_length

_TINY = 1e-300


class Gamma(Family):
    """Gamma distribution; f proportional to x**(shape - 1) exp(-x/scale)."""

    name = "gamma"
    parameters = (Parameter("shape", "shape", POSITIVE), Parameter("scale", "scale", POSITIVE))
    mean_positive = True
    limits = (0.0, math.inf)

    def logpdf(self, x: Array, p: Values) -> Array:
        shape, scale = p
        q = x / scale
        at_zero = np.where(shape == 1.0, 0.0, np.where(shape < 1.0, np.inf, -np.inf))
        value = _log_density(np.where(q > 0.0, q, 1.0), shape)
        return np.where(q > 0.0, value, at_zero) - np.log(scale)

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        q = x / p[1]
        return consistent_tails(np.log(special.gammainc(p[0], q)), np.log(special.gammaincc(p[0], q)))

    def x(self, u: Array, p: Values) -> Array:
        return p[1] * _quantile(u, p[0])

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        shape, scale = p
        u = np.clip(u, -REACH, REACH)
        q = _quantile(u, shape)
        slope, curvature = slopes_from_density(u, _log_density(q, shape), (shape - 1.0) / q - 1.0)
        return scale * q, scale * slope, scale * curvature

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        shape, scale = p
        q = _quantile(u, shape)
        u, q, k = np.broadcast_arrays(u, q, shape)
        low = np.less(u, 0.0)
        # The side that is not wanted gets a harmless argument.
        lower = _lower_slope(np.where(low, q, 0.5 * k), k)
        by_shape = np.where(low, lower, _upper_slope(np.where(low, k, q), k))
        out = np.broadcast_shapes(q.shape, scale.shape)
        return scale * by_shape, np.broadcast_to(q, out)

    def moments(self, p: Values) -> tuple[Array, Array]:
        shape, scale = p
        return shape * scale, np.sqrt(shape) * scale

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        shape, scale = p
        root = np.sqrt(shape)
        return (scale, 0.5 * scale / root), (shape, root)

    def from_moments(self, m: Moments) -> Values:
        return 1.0 / np.square(m.cov), m.mean * np.square(m.cov)


def _quantile(u: Array, shape: Array) -> Array:
    """Return x for scale 1, each side from its own tail."""
    tail = special.ndtr(-np.abs(np.clip(u, -REACH, REACH)))
    low = np.less(u, 0.0)
    if np.all(low):
        q = special.gammaincinv(shape, tail)
    elif not np.any(low):
        q = special.gammainccinv(shape, tail)
    else:
        q = np.where(low, special.gammaincinv(shape, tail), special.gammainccinv(shape, tail))
    return np.asarray(np.maximum(q, _TINY))


def _log_density(q: Array, shape: Array) -> Array:
    """Return ln f for scale 1, written around q = shape so that large shapes lose nothing."""
    deviance = shape * relative_deviance(q / shape)
    return 0.5 * np.log(shape) - np.log(q) - LOG_SQRT_2PI - deviance - stirling_error(shape)


def _lower_slope(q: Array, k: Array) -> Array:
    """Return dq/dk from the lower tail, in s = ln(q/t)."""

    def drop(s: Array) -> tuple[Array, Array]:
        return k * s + q * np.expm1(-s), k - q * np.exp(-s)

    offset = np.log(q) - special.psi(k)
    length = tail_length(drop, (DROP + q) / k)
    (integral,) = tail_integral(length, lambda s: (np.exp(-drop(s)[0]) * (offset - s),))
    return -q * integral


def _upper_slope(q: Array, k: Array) -> Array:
    """Return dq/dk from the upper tail, in s = ln(t/q)."""

    def drop(s: Array) -> tuple[Array, Array]:
        return q * np.expm1(s) - k * s, q * np.exp(s) - k

    # exp(s) - 1 >= s + s^2/2 bounds the length; so does repeating exp(s) = 1 + (DROP + k s)/q from above.
    beyond = (k - q + np.sqrt((q - k) ** 2 + 2.0 * DROP * q)) / q
    for _ in range(3):
        beyond = np.minimum(beyond, np.logaddexp(0.0, np.log(DROP + k * beyond) - np.log(q)))
    offset = np.log(q) - special.psi(k)
    length = tail_length(drop, beyond)
    (integral,) = tail_integral(length, lambda s: (np.exp(-drop(s)[0]) * (offset + s),))
    return q * integral
