"""Mixtures: one of several members of a family, each with its weight.

A further value of a variable with uncertain parameters is such a mixture, and so is an action whose parameters
depend on the class of a site.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions.distribution import Distribution
from calibrate.distributions.normal_tails import slopes_from_density, u_from_log_tails
from calibrate.distributions.parameter import Array
from calibrate.errors import InputError

MAX_STEPS = 60


@dataclass(frozen=True, slots=True, eq=False)
class Mixture(Distribution):
    """Mixture of members of one family; of shape ().

    ``family`` and ``values`` are those of the first component; ``parameter_slopes`` are not defined, since a mixture
    has no own parameters.

    Parameters
    ----------
    components : Distribution
        Parameters of shape (K,).
    weights : array, shape (K,)
        Positive, sum 1.
    """

    components: Distribution
    weights: Array

    def __repr__(self) -> str:
        return f"<mixture of {self.weights.size} {self.family.name} distributions>"

    @property
    def is_normal(self) -> bool:
        """Whether x is a linear function of u; a mixture never is."""
        return False

    @property
    def support(self) -> tuple[Array, Array]:
        """Ends of the support."""
        lower, upper = self.components.support
        return np.asarray(np.min(lower)), np.asarray(np.max(upper))

    def logpdf(self, x: npt.ArrayLike) -> Array:
        """Return the log-density; -inf outside the support."""
        return self._mixed(self.components.logpdf(self._column(x)))

    def _log_tails(self, x: Array) -> tuple[Array, Array]:
        column = self._column(x)
        return self._mixed(self.components.logcdf(column)), self._mixed(self.components.logsf(column))

    def u(self, x: npt.ArrayLike) -> Array:
        """Return the standard normal value of x."""
        return u_from_log_tails(*self._log_tails(np.asarray(x, dtype=np.float64)))

    def x(self, u: npt.ArrayLike) -> Array:
        """Return x(u): the root of U(x) = u between the smallest and the largest value of the components.

        Newton steps on U(x), which is near linear for like components, kept inside the shrinking bracket.
        """
        u = np.asarray(u, dtype=np.float64)
        each = self.components.x(self._column(u.reshape(-1)))
        low, high = each.min(axis=-1), each.max(axis=-1)
        x = np.asarray(np.sum(each * self.weights, axis=-1))
        x = np.where((x > low) & (x < high), x, 0.5 * (low + high))
        found, left, wanted = x.copy(), np.arange(x.size), u.reshape(-1)
        with np.errstate(all="ignore"):
            for _ in range(MAX_STEPS):
                log_cdf, log_sf = self._log_tails(x)
                here = u_from_log_tails(log_cdf, log_sf)
                slope = np.exp(self.logpdf(x) + 0.5 * here * here + 0.9189385332046727)
                above = here > wanted
                high, low = np.where(above, x, high), np.where(above, low, x)
                moved = x - (here - wanted) / slope
                moved = np.where((moved >= low) & (moved <= high), moved, 0.5 * (low + high))
                found[left] = moved
                # What has arrived is left alone: in a gap between components an element takes many more steps.
                going = ~(np.abs(moved - x) <= 1e-14 * np.maximum(np.abs(x), np.abs(high - low)))
                if not going.any():
                    break
                left, x, wanted, low, high = (v[going] for v in (left, moved, wanted, low, high))
        return found.reshape(u.shape)

    def x_slope(self, u: npt.ArrayLike) -> tuple[Array, Array]:
        """Return x and dx/du."""
        x, slope, _ = self.x_curvature(u)
        return x, slope

    def x_curvature(self, u: npt.ArrayLike) -> tuple[Array, Array, Array]:
        """Return x, dx/du and d2x/du2."""
        u = np.asarray(u, dtype=np.float64)
        x = self.x(u)
        column = self._column(x)
        log_each = self.components.logpdf(column) + np.log(self.weights)
        log_density = _log_sum(log_each)
        with np.errstate(all="ignore"):
            own_u = self.components.u(column)
            _, first, second = self.components.x_curvature(np.clip(own_u, -37.0, 37.0))
            # From f = phi(u)/x'(u): f'/f = -(u + x''/x')/x'.
            score = -(own_u + second / first) / first
            share = np.exp(log_each - log_density[..., None])
            mixed = np.sum(np.where(share > 0.0, share * score, 0.0), axis=-1)
        slope, curvature = slopes_from_density(u, log_density, mixed)
        return x, slope, curvature

    def parameter_slopes(self, u: npt.ArrayLike) -> dict[str, Array]:
        """Return an empty mapping."""
        del u
        return {}

    def _moments(self) -> tuple[Array, Array]:
        mean, sd = np.broadcast_arrays(self.components.mean, self.components.sd)
        centre = np.dot(self.weights, mean)
        return np.asarray(centre), np.sqrt(np.dot(self.weights, sd**2 + (mean - centre) ** 2))

    def take(self, columns: Any) -> Distribution:
        """Return the distribution itself: it does not vary with the situation."""
        del columns
        return self

    def scaled(self, factor: float) -> Distribution:
        """Return the distribution of ``factor`` times the variable, factor > 0."""
        return mixture(self.components.scaled(factor), self.weights)

    @staticmethod
    def _column(x: npt.ArrayLike) -> Array:
        return np.asarray(x, dtype=np.float64)[..., None]

    def _mixed(self, logs: Array) -> Array:
        return _log_sum(logs + np.log(self.weights))


def _log_sum(logs: Array) -> Array:
    """Return ln sum exp over the last axis; the general function of scipy takes longer than all else in a mixture."""
    top = np.asarray(logs.max(axis=-1))
    safe = np.where(np.isfinite(top), top, 0.0)
    with np.errstate(divide="ignore", over="ignore"):
        return np.asarray(safe + np.log(np.sum(np.exp(logs - safe[..., None]), axis=-1)))


def mixture(components: Distribution, weights: npt.ArrayLike) -> Mixture:
    """Return the mixture of the members of a family.

    Parameters
    ----------
    components : Distribution
        Parameters of shape (K,).
    weights : array_like, shape (K,)
        Not negative, not all zero; scaled to sum 1. Components without weight are left out.

    Raises
    ------
    InputError
        Weights that do not fit.
    """
    w = np.asarray(weights, dtype=np.float64)
    if len(components.shape) != 1 or w.shape != components.shape:
        raise InputError(f"A mixture of {components.shape} components needs as many weights; got {w.shape}.")
    if not (np.isfinite(w).all() and (w >= 0.0).all() and w.sum() > 0.0):
        raise InputError("The weights of a mixture must be zero or positive, and not all zero.")
    w = w / w.sum()
    kept = np.flatnonzero(w > 0.0)
    chosen = components.take(kept)
    w = w[kept]
    w.setflags(write=False)
    first = tuple(np.asarray(v.flat[0]) for v in chosen.values)
    return Mixture(chosen.family, first, (), chosen, w)
