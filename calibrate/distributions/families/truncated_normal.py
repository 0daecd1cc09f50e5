# ruff: noqa: D102  (the formulas are documented in Family)
"""The truncated normal family."""

from __future__ import annotations

import math

import numpy as np

from calibrate.distributions.arguments import refuse, require
from calibrate.distributions.beyond_bound import Beyond, beyond
from calibrate.distributions.bounds import require_between, require_order
from calibrate.distributions.exponentials import consistent_tails
from calibrate.distributions.family import Family
from calibrate.distributions.normal_tails import log_ndtr, log_phi, u_from_log_tails
from calibrate.distributions.parameter import BOUND, POSITIVE, Array, Moments, Parameter, Values
from calibrate.distributions.truncation import largest_sd, log_interval, solve_parent, truncated_moments

# A parent further from its bounds than this leaves an exponential tail, which has its own family.
_FARTHEST = 2000.0
# From here on an interval beside the parent's centre is counted from its nearer bound.
_FAR = 3.0
# How close to the largest possible sd a parent is still sought.
_MARGIN = 1e-6


class TruncatedNormal(Family):
    """Normal distribution given that it lies between its bounds; location and scale are the parent's."""

    name = "truncated_normal"
    parameters = (
        Parameter("location", "location"),
        Parameter("scale", "scale", POSITIVE),
        Parameter("lower", "bound", BOUND, default=-math.inf),
        Parameter("upper", "bound", BOUND, default=math.inf),
    )
    moments_keep = ("lower", "upper")

    def support(self, p: Values) -> tuple[Array, Array]:
        return p[2], p[3]

    def check(self, p: Values) -> None:
        location, scale, lower, upper = p
        require_order(self.name, lower, upper)
        outside = np.maximum((lower - location) / scale, (location - upper) / scale)
        where, _ = np.broadcast_arrays(location, outside)
        rule = f"at most {_FARTHEST:g} times the scale outside the bounds"
        require(
            self.name, "location", outside <= _FARTHEST, where, rule, "Consider the family 'exponential'."
        )

    def logpdf(self, x: Array, p: Values) -> Array:
        return log_phi((x - p[0]) / p[1]) - np.log(p[1]) - _log_mass(p)

    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        location, scale, lower, upper = p
        a, b = _ends(p)
        z = (x - location) / scale
        log_mass = _log_mass(p)
        below = log_interval(a, z, (x - lower) / scale) - log_mass
        above = log_interval(z, b, (upper - x) / scale) - log_mass
        return consistent_tails(below, above)

    def x(self, u: Array, p: Values) -> Array:
        location, scale, lower, upper = p
        x = location + scale * _parent_u(u, p)
        side, far = _far_side(u, p)
        if far is not None:
            x = _pick(side, x, lower + scale * far.offset, upper - scale * far.offset)
        return np.clip(x, lower, upper)

    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        scale = p[1]
        z = _parent_u(u, p)
        # phi(u) du mass = phi(z) dz.
        slope = np.exp(log_phi(u) - log_phi(z) + _log_mass(p))
        side, far = _far_side(u, p)
        if far is not None:
            a, b = _ends(p)
            slope = _pick(side, slope, far.slope, far.slope)
            z = _pick(side, z, a + far.offset, b - far.offset)
        return self.x(u, p), scale * slope, scale * slope * (z * slope - u)

    def parameter_slopes(self, u: Array, p: Values) -> Values:
        a, b = _ends(p)
        z = _parent_u(u, p)
        # phi(z) dz = phi(a) Phi(-u) da + phi(b) Phi(u) db.
        by_lower = np.exp(log_ndtr(-u) + 0.5 * (z - a) * (z + a))
        by_upper = np.exp(log_ndtr(u) + 0.5 * (z - b) * (z + b))
        ends = np.where(np.isfinite(a), a, 0.0) * by_lower + np.where(np.isfinite(b), b, 0.0) * by_upper
        slopes = 1.0 - by_lower - by_upper, z - ends, by_lower, by_upper
        side, far = _far_side(u, p)
        if far is None:
            return slopes
        above = far.by_location, far.by_scale, far.by_near, far.by_far
        below = far.by_location, -far.by_scale, far.by_far, far.by_near
        return tuple(_pick(side, *s) for s in zip(slopes, above, below, strict=True))

    def moments(self, p: Values) -> tuple[Array, Array]:
        location, scale = p[:2]
        m = truncated_moments(np.zeros(()), np.asarray(-0.5), *_ends(p))
        return location + scale * m.mean, scale * np.sqrt(m.m2)

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        a, b = _ends(p)
        m = truncated_moments(np.zeros(()), np.asarray(-0.5), a, b)
        sd = np.sqrt(m.m2)
        log_mass = _log_mass(p)
        # Derivatives of the mean and the variance of z by its bounds: f(a) (m - a) and f(a) (m2 - (a - m)^2).
        rows = []
        for end, sign in ((a, 1.0), (b, -1.0)):
            finite = np.isfinite(end)
            near = np.where(finite, end, 0.0)
            density = np.where(finite, np.exp(log_phi(near) - log_mass), 0.0) * sign
            rows.append((density * (m.mean - near), density * (m.m2 - (near - m.mean) ** 2) / (2.0 * sd)))
        # Covariances of z and of its squared deviation with the scores z and z^2 of location and scale.
        cross = m.m3 + 2.0 * m.mean * m.m2
        square = m.m4 + 2.0 * m.mean * m.m3 - m.m2**2
        return (m.m2, m.m3 / (2.0 * sd)), (cross, square / (2.0 * sd)), rows[0], rows[1]

    def from_moments(self, m: Moments) -> Values:
        lower, upper = m.kept
        require_order(self.name, lower, upper)
        require_between(self.name, m.mean, lower, upper)
        sd, most = np.broadcast_arrays(m.sd, largest_sd(m.mean, lower, upper))
        good = sd < most * (1.0 - _MARGIN)
        if not good.all():
            limit = float(most.ravel()[int(np.argmin(good.ravel()))])
            rule = f"less than {limit:g} for this mean and these bounds"
            hint = (
                "No normal distribution cut at these bounds scatters more; give a smaller sd or wider bounds,"
            )
            require(self.name, "sd", good, sd, rule, f"{hint} or use the family 'beta'.")
        eta_1, eta_2, converged = solve_parent((lower - m.mean) / m.sd, (upper - m.mean) / m.sd)
        if not np.all(converged):
            at = int(np.argmin(np.ravel(converged))) + 1
            raise refuse(self.name, f"no parent was found for the mean and sd of situation {at}.")
        scale = np.sqrt(-0.5 / eta_2)
        return m.mean + m.sd * eta_1 * scale**2, m.sd * scale, lower, upper


def _ends(p: Values) -> tuple[Array, Array]:
    """Return the bounds in units of the parent."""
    location, scale, lower, upper = p
    return (lower - location) / scale, (upper - location) / scale


def _log_mass(p: Values) -> Array:
    """Return ln of the parent's probability between the bounds."""
    return log_interval(*_ends(p), (p[3] - p[2]) / p[1])


def _parent_u(u: Array, p: Values) -> Array:
    """Return z, Phi(z) = Phi(a) Phi(-u) + Phi(b) Phi(u), a sum of positive terms in either tail."""
    a, b = _ends(p)
    below, above = log_ndtr(-u), log_ndtr(u)
    log_cdf = np.logaddexp(log_ndtr(a) + below, log_ndtr(b) + above)
    log_sf = np.logaddexp(log_ndtr(-a) + below, log_ndtr(-b) + above)
    return u_from_log_tails(log_cdf, log_sf)


def _far_side(u: Array, p: Values) -> tuple[Array, Beyond | None]:
    """Say on which side of the parent's centre the interval lies far out (1, -1, 0), and count from its bound."""
    a, b = _ends(p)
    side = np.where(a > _FAR, 1.0, np.where(b < -_FAR, -1.0, 0.0))
    if not np.any(side):
        return side, None
    start = np.where(side == 0.0, _FAR, np.maximum(a, -b))
    gap = np.where(side == 0.0, np.inf, (p[3] - p[2]) / p[1])
    return side, beyond(np.where(side < 0.0, -u, u), start, gap)


def _pick(side: Array, near: Array, above: Array, below: Array) -> Array:
    return np.where(side == 0.0, near, np.where(side > 0.0, above, below))
