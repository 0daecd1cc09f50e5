"""Probabilities that a value lies between bounds, and their exact derivatives by the parameters.

From dF/dp = -f dx/dp at fixed u, with the derivatives of x that every family has.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution
from calibrate.distributions.normal_tails import u_from_log_tails

Array = NDArray[np.float64]


def log_probability(
    law: Distribution, lower: Array, upper: Array, names: tuple[str, ...] = ()
) -> tuple[Array, Array]:
    """Return ln P(lower < x < upper), and its derivatives by the named parameters.

    Parameters
    ----------
    law : Distribution
        Of shape (), or of shape (K, 1) where no derivatives are asked for.
    lower, upper : array, shape (k,)
        May be infinite.
    names : tuple of str

    Returns
    -------
    log_p : array, shape (k,) or (K, k)
    slopes : array, shape (len(names), k)
    """
    below, above = _end(law, lower, names), _end(law, upper, names)
    log_p = _between(below, above)
    slopes = [below.weight(name, log_p) - above.weight(name, log_p) for name in names]
    return log_p, np.array(slopes) if names else np.zeros((0, *log_p.shape))


@dataclass(frozen=True, slots=True, eq=False)
class _End:
    """Probabilities at one end of intervals, and dx/dp at fixed u there."""

    log_cdf: Array
    log_sf: Array
    log_density: Array
    slopes: Mapping[str, Array]

    def weight(self, name: str, log_p: Array) -> Array:
        """Return f dx/dp over the interval's probability; 0 at an infinite end."""
        ratio = np.exp(self.log_density - log_p)
        return np.where(ratio > 0.0, ratio * self.slopes[name], 0.0)


def _end(law: Distribution, x: Array, names: tuple[str, ...]) -> _End:
    finite = np.isfinite(x)
    low = x == -np.inf
    if not finite.any():
        nothing = np.zeros(x.shape)
        sure, never = nothing, np.full(x.shape, -np.inf)
        return _End(
            np.where(low, never, sure), np.where(low, sure, never), never, dict.fromkeys(names, nothing)
        )
    safe = x if finite.all() else np.where(finite, x, law.x(0.0))
    log_cdf, log_sf = law.logcdf(safe), law.logsf(safe)
    log_density, slopes = np.asarray(-np.inf), {}
    if names:
        u = u_from_log_tails(log_cdf, log_sf)
        inside = finite & np.isfinite(u)
        at_u = law.parameter_slopes(np.where(inside, u, 0.0))
        slopes = {name: np.broadcast_to(at_u[name], x.shape) for name in names}
        log_density = np.where(inside, law.logpdf(safe), -np.inf)
    log_cdf = np.where(finite, log_cdf, np.where(low, -np.inf, 0.0))
    log_sf = np.where(finite, log_sf, np.where(low, 0.0, -np.inf))
    return _End(log_cdf, log_sf, log_density, slopes)


def _between(below: _End, above: _End) -> Array:
    """Return the log-probability between two ends, as a difference in the tail in which it does not cancel."""
    low_tail = below.log_cdf + above.log_cdf < below.log_sf + above.log_sf
    return np.where(
        low_tail,
        _log_difference(above.log_cdf, below.log_cdf),
        _log_difference(below.log_sf, above.log_sf),
    )


def _log_difference(larger: Array, smaller: Array) -> Array:
    """Return ln(exp(larger) - exp(smaller))."""
    gap = smaller - larger
    return np.asarray(larger + np.where(gap > -0.693, np.log(-np.expm1(gap)), np.log1p(-np.exp(gap))))
