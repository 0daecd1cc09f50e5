# ruff: noqa: D102  (the formulas are documented in Family)
"""The Student t family with location and scale."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions.arguments import require
from calibrate.distributions.exponentials import consistent_tails
from calibrate.distributions.family import Family
from calibrate.distributions.log_gamma import log_gamma_half_step, psi_half_step
from calibrate.distributions.normal_tails import LOG_SQRT_2PI, REACH, slopes_from_density
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values
from calibrate.distributions.tail_integrals import DROP, tail_integral

# Where 1 + r^2 is r^2 in double precision; where a tail is a power to double precision; the largest quantile.
_FAR = 1e9
_LOG_POWER = -40.0
_HUGE = 1e300
# Below this |u| quantiles are counted from the median.
_CENTRAL = 0.5


class StudentT(Family):
    """Student t distribution of (x - location)/scale; its mean exists for freedom > 1, its sd for freedom > 2."""

    name = "student_t"
    parameters = (
        Parameter("location", "location"),
        Parameter("scale", "scale", POSITIVE),
        Parameter("freedom", "shape", POSITIVE),
    )
    moments_keep = ("freedom",)

    def logpdf(self, x: Array, p: Values) -> Array:
        location, scale, freedom = p
        return _log_density((x - location) / scale, freedom) - np.log(scale)

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        location, scale, freedom = p
        t = (x - location) / scale
        return consistent_tails(np.log(special.stdtr(freedom, t)), np.log(special.stdtr(freedom, -t)))

    def x(self, u: Array, p: Values) -> Array:
        return p[0] + p[1] * _quantile(u, p[2])

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        location, scale, freedom = p
        u = np.clip(u, -REACH, REACH)
        t = _quantile(u, freedom)
        r = t / np.sqrt(freedom)
        far = np.abs(r) > _FAR
        near = np.where(far, 0.0, r)
        part = np.where(far, 1.0 / np.where(far, r, 1.0), near / (1.0 + near * near))
        score = -(freedom + 1.0) / np.sqrt(freedom) * part
        slope, curvature = slopes_from_density(u, _log_density(t, freedom), score)
        return location + scale * t, scale * slope, scale * curvature

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        scale, freedom = p[1:]
        t = _quantile(u, freedom)
        shape = np.broadcast_shapes(np.shape(t), *(q.shape for q in p))
        by_freedom = np.where(np.less(u, 0.0), -1.0, 1.0) * _upper_slope(np.abs(t), freedom)
        return np.ones(shape), np.broadcast_to(t, shape), np.broadcast_to(scale * by_freedom, shape)

    def moments(self, p: Values) -> tuple[Array, Array]:
        location, scale, freedom = p
        safe = np.where(freedom > 2.0, freedom, 3.0)
        sd = scale * np.where(freedom > 2.0, np.sqrt(safe / (safe - 2.0)), np.inf)
        return np.where(freedom > 1.0, location, np.nan), np.where(freedom > 1.0, sd, np.nan)

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        _, scale, freedom = p
        ratio = np.sqrt(freedom / (freedom - 2.0))
        zero, one = np.asarray(0.0), np.asarray(1.0)
        return (one, zero), (zero, ratio), (zero, -scale / (ratio * np.square(freedom - 2.0)))

    def from_moments(self, m: Moments) -> Values:
        (freedom,) = m.kept
        rule = "greater than 2 where mean and sd are given (else the sd is infinite)"
        require(
            self.name, "freedom", freedom > 2.0, freedom, rule, "Give location, scale and freedom instead."
        )
        return m.mean, m.sd * np.sqrt((freedom - 2.0) / freedom), freedom


def _quantile(u: Array, freedom: Array) -> Array:
    u = np.clip(u, -REACH, REACH)
    tail = special.ndtr(-np.abs(u))
    half = 0.5 * freedom
    # Far out the tail is a power of w = freedom/t^2; there the library's inverse gives out.
    log_w = (np.log(2.0 * half * tail) + special.betaln(half, 0.5)) / half
    far = log_w < _LOG_POWER
    with np.errstate(over="ignore"):
        power = np.minimum(np.sqrt(freedom) * np.exp(-0.5 * np.where(far, log_w, 0.0)), _HUGE)
    t = np.where(far, power, -special.stdtrit(freedom, np.where(far, 0.5, tail)))
    central = np.abs(u) < _CENTRAL
    if np.any(central):
        # Next to the median from P(|T| < t), a beta distribution of t^2/(freedom + t^2): small with u.
        share = special.erf(np.where(central, np.abs(u), 0.0) / np.sqrt(2.0))
        y = special.betaincinv(0.5, half, share)
        t = np.where(central, np.sqrt(freedom * y / (1.0 - y)), t)
    return np.copysign(t, u)


def _log_density(t: Array, freedom: Array) -> Array:
    r = np.abs(t) / np.sqrt(freedom)
    far = r > _FAR
    near = np.where(far, 0.0, r)
    # ln(1 + r^2), where r^2 may be no double.
    log = np.where(far, 2.0 * np.log(np.where(far, r, 1.0)), np.log1p(near * near))
    return log_gamma_half_step(0.5 * freedom) - LOG_SQRT_2PI - 0.5 * (freedom + 1.0) * log


def _log_cosh(s: Array) -> Array:
    """Return ln cosh s for s >= 0, with small relative error near zero."""
    near = np.less(s, 2.0)
    small = np.where(near, s, 0.0)
    return np.where(
        near, np.log1p(2.0 * np.sinh(0.5 * small) ** 2), s + np.log1p(np.exp(-2.0 * s)) - np.log(2.0)
    )


def _upper_slope(t: Array, freedom: Array) -> Array:
    """Return dt/d freedom for t >= 0 from the upper tail, in t = sqrt(freedom) sinh(s0 + s).

    There the density times dt/ds is proportional to cosh**-freedom.
    """
    s0 = np.arcsinh(t / np.sqrt(freedom))
    start = _log_cosh(s0)
    # ln cosh has a closed inverse.
    end = start + DROP / freedom
    short = np.less(end, 20.0)
    stop = np.where(short, np.arccosh(np.exp(np.where(short, end, 1.0))), end + np.log(2.0))
    # psi((nu + 1)/2) - psi(nu/2) - 1/nu, small for many degrees of freedom.
    constant = psi_half_step(0.5 * freedom)

    def integrand(s: Array) -> tuple[Array, ...]:
        level = _log_cosh(s0 + s)
        score = constant - 2.0 * level + (1.0 + 1.0 / freedom) * np.tanh(s0 + s) ** 2
        return (np.exp(-freedom * (level - start)) * score,)

    (integral,) = tail_integral(stop - s0, integrand)
    return 0.5 * np.sqrt(freedom) * np.cosh(s0) * integral
