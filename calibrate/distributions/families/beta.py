# ruff: noqa: D102  (the formulas are documented in Family)
"""The beta family between two bounds."""

from __future__ import annotations

import numpy as np
from scipy import special

from calibrate.distributions.arguments import require
from calibrate.distributions.bounds import require_between, require_order
from calibrate.distributions.exponentials import consistent_tails
from calibrate.distributions.family import Family
from calibrate.distributions.log_gamma import stirling_error
from calibrate.distributions.normal_tails import LOG_SQRT_2PI, REACH, slopes_from_density
from calibrate.distributions.parameter import POSITIVE, Array, Moments, Parameter, Values
from calibrate.distributions.tail_integrals import DROP, tail_integral, tail_length

_TINY = 1e-300
# Logarithm of the distance to a bound, in widths, from which the first term of the tail is exact to rounding.
_LOG_POWER = -36.0


class Beta(Family):
    """Beta distribution of t = (x - lower)/(upper - lower); f proportional to t**(a - 1) (1 - t)**(b - 1)."""

    name = "beta"
    parameters = (
        Parameter("shape_1", "shape", POSITIVE),
        Parameter("shape_2", "shape", POSITIVE),
        Parameter("lower", "bound", default=0.0),
        Parameter("upper", "bound", default=1.0),
    )
    moments_keep = ("lower", "upper")

    def support(self, p: Values) -> tuple[Array, Array]:
        return p[2], p[3]

    def check(self, p: Values) -> None:
        require_order(self.name, p[2], p[3])

    def logpdf(self, x: Array, p: Values) -> Array:
        a, b, lower, upper = p
        width = upper - lower
        t, s = (x - lower) / width, (upper - x) / width
        inside = (t > 0.0) & (s > 0.0)
        value = _log_density(np.where(inside, t, 0.5), np.where(inside, s, 0.5), a, b)
        ends = special.xlogy(a - 1.0, t) + special.xlogy(b - 1.0, s) - special.betaln(a, b)
        return np.where(inside, value, ends) - np.log(width)

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        a, b, lower, upper = p
        width = upper - lower
        t, s = (x - lower) / width, (upper - x) / width
        return consistent_tails(np.log(special.betainc(a, b, t)), np.log(special.betainc(b, a, s)))

    def x(self, u: Array, p: Values) -> Array:
        return _placed(*_quantile(u, p[0], p[1]), p[2], p[3])

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        a, b, lower, upper = p
        u = np.clip(u, -REACH, REACH)
        t, s = _quantile(u, a, b)
        score = (a - 1.0) / t - (b - 1.0) / s
        slope, curvature = slopes_from_density(u, _log_density(t, s, a, b), score)
        width = upper - lower
        return _placed(t, s, lower, upper), width * slope, width * curvature

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        a, b, lower, upper = p
        t, s = _quantile(u, a, b)
        u, t, s, a, b, width = np.broadcast_arrays(u, t, s, a, b, upper - lower)
        low = np.less(u, 0.0)
        # Above the median 1 - t follows the beta distribution with the shapes exchanged.
        own, other = _lower_slopes(*(np.where(low, i, j) for i, j in ((t, s), (s, t), (a, b), (b, a))))
        by_1 = width * np.where(low, own, -other)
        by_2 = width * np.where(low, other, -own)
        return by_1, by_2, s, t

    def moments(self, p: Values) -> tuple[Array, Array]:
        a, b, lower, upper = p
        n = a + b
        width = upper - lower
        return lower + width * (a / n), width * np.sqrt(a * b / (n + 1.0)) / n

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        a, b, lower, upper = p
        n = a + b
        width = upper - lower
        sd = self.moments(p)[1]
        common = 0.5 / (n + 1.0) + 1.0 / n
        unit = sd / width
        return (
            (width * b / n**2, sd * (0.5 / a - common)),
            (-width * a / n**2, sd * (0.5 / b - common)),
            (b / n, -unit),
            (a / n, unit),
        )

    def from_moments(self, m: Moments) -> Values:
        lower, upper = m.kept
        require_order(self.name, lower, upper)
        require_between(self.name, m.mean, lower, upper)
        width = upper - lower
        share, rest, unit = (m.mean - lower) / width, (upper - m.mean) / width, m.sd / width
        limit = np.sqrt(share * rest)
        sd, limit_sd = np.broadcast_arrays(m.sd, width * limit)
        good = sd < limit_sd
        if not good.all():
            largest = float(limit_sd.ravel()[int(np.argmin(good.ravel()))])
            require(
                self.name, "sd", good, sd, f"less than {largest:g} for this mean and these bounds",
                "Give a smaller sd or wider bounds.",
            )  # fmt: skip
        # share rest / unit^2 - 1, without cancellation where the sd is nearly the largest possible.
        total = (limit - unit) * (limit + unit) / np.square(unit)
        return share * total, rest * total, lower, upper


def _placed(t: Array, s: Array, lower: Array, upper: Array) -> Array:
    """Return x from the distances t and s = 1 - t to the bounds, counted from the nearer bound."""
    width = upper - lower
    return np.where(np.less(t, s), lower + width * t, upper - width * s)


def _quantile(u: Array, a: Array, b: Array) -> tuple[Array, Array]:
    """Return t and 1 - t, both with small relative error, each side from its own tail."""
    u, a, b = np.broadcast_arrays(np.clip(u, -REACH, REACH), a, b)
    low = u < 0.0
    tail = special.ndtr(-np.abs(u))
    first, second = np.where(low, a, b), np.where(low, b, a)
    # Next to the bound the tail is a power of the distance; there the library's inverse gives out.
    log_power = (np.log(first * tail) + special.betaln(first, second)) / first
    next_to = log_power + np.log1p(second) < _LOG_POWER
    near = special.betaincinv(first, second, np.where(next_to, 0.5, tail))
    near = np.where(next_to, np.exp(np.where(next_to, log_power, 0.0)), near)
    far = 1.0 - near
    late = near > 0.5
    if np.any(late):
        complement = special.betainccinv(np.where(late, second, 1.0), np.where(late, first, 1.0), tail)
        far = np.where(late, complement, far)
        near = np.where(late, 1.0 - far, near)
    near, far = np.maximum(near, _TINY), np.maximum(far, _TINY)
    return np.where(low, near, far), np.where(low, far, near)


def _log_density(t: Array, s: Array, a: Array, b: Array) -> Array:
    """Return ln f on (0, 1), written around the mean so that large shapes lose nothing."""
    n = a + b
    deviance = a * _minus_log(t, a / n, b * t - a * s, a) + b * _minus_log(s, b / n, a * s - b * t, b)
    constant = 0.5 * np.log(a / n * b) - LOG_SQRT_2PI
    correction = stirling_error(n) - stirling_error(a) - stirling_error(b)
    return constant + correction - deviance - np.log(t) - np.log(s)


def _minus_log(t: Array, mean: Array, d: Array, a: Array) -> Array:
    """Return d/a - ln(t/mean), d = n t - a; small where t is near the mean."""
    r = d / a
    near = np.greater(r, -0.5)
    return r - np.where(near, np.log1p(np.where(near, r, 0.0)), np.log(np.where(near, 1.0, t / mean)))


def _lower_slopes(t: Array, s: Array, a: Array, b: Array) -> tuple[Array, Array]:
    """Return dt/da and dt/db from the lower tail, in the logit of t reduced by z.

    There the density times dt/dz is t**a (1 - t)**b up to a constant, log-concave.
    """
    n = a + b
    odds = t / s
    log_t, log_s = np.log(t), np.log(s)

    def drop(z: Array) -> tuple[Array, Array]:
        w = odds * np.exp(-z)
        # ln(1 + odds) - ln(1 + w), as the logarithm of a ratio near one.
        return a * z + n * np.log1p(s * odds * np.expm1(-z)), a - n * w / (1.0 + w)

    length = tail_length(drop, (DROP - n * log_s) / a)
    total = special.psi(n)
    own, other = total - special.psi(a), total - special.psi(b)

    def integrand(z: Array) -> tuple[Array, ...]:
        fall = np.log1p(t * np.expm1(-z))
        weight = np.exp(-(a * z + n * fall))
        return weight * (log_t - z - fall + own), weight * (log_s - fall + other)

    by_a, by_b = tail_integral(length, integrand)
    return -t * s * by_a, -t * s * by_b
