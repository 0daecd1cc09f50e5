"""An action that is not always there: zero with some probability, and the maximum of its repetitions."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.actions.arguments import positive
from calibrate.distributions import Distribution, distribution, maximum_of
from calibrate.distributions.exponentials import log1mexp
from calibrate.distributions.normal_tails import LOG_SQRT_2PI, log_ndtr, log_phi, u_from_log_tails
from calibrate.errors import InputError, Problem

Array = npt.NDArray[np.float64]

_STANDARD = distribution("normal", location=0.0, scale=1.0)
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(12)
_WIDTH = 0.25
_REACH = 37.0


@dataclass(frozen=True, slots=True, eq=False)
class Intermittent(Distribution):
    """Maximum of repetitions of an action that is present in each with a probability below one.

    F(x) = (1 - p + p F0(x))**n for x >= 0, and 0 below: without any presence, or with negative values only, the
    maximum is zero, so that zero has a probability of its own. ``family``, ``parameters`` and ``parameter_slopes``
    are those of the action when present.

    Parameters
    ----------
    base : Distribution
        F0, the action when present.
    presence : array
        p, shape () or (n,).
    repetitions : array
        n, shape () or (n,).
    """

    base: Distribution
    presence: Array
    repetitions: Array

    def __repr__(self) -> str:
        p, n = (np.array2string(a, threshold=6) for a in (self.presence, self.repetitions))
        return f"intermittent({self.base!r}, presence={p}, repetitions={n})"

    @property
    def is_normal(self) -> bool:
        """Whether x is a linear function of u; it never is."""
        return False

    @property
    def support(self) -> tuple[Array, Array]:
        """Ends of the support; zero always belongs to it."""
        return np.zeros(()), np.maximum(self.base.support[1], 0.0)

    @property
    def u_of_zero(self) -> Array:
        """Standard normal value up to which the maximum is zero."""
        return self.u(0.0)

    def _log_tails(self, x: Array) -> tuple[Array, Array]:
        with np.errstate(divide="ignore"):
            # ln F = n ln(1 - p (1 - F0)), in which nothing cancels.
            log_cdf = self.repetitions * log1mexp(np.log(self.presence) + self.base.logsf(x))
            log_cdf = np.where(x < 0.0, -np.inf, log_cdf)
            return log_cdf, log1mexp(log_cdf)

    def u(self, x: npt.ArrayLike) -> Array:
        """Return the standard normal value of x, -inf below zero."""
        return u_from_log_tails(*self._log_tails(np.asarray(x, dtype=np.float64)))

    def logpdf(self, x: npt.ArrayLike) -> Array:
        """Return the log-density; -inf below zero, inf at zero, which has a probability of its own."""
        x = np.asarray(x, dtype=np.float64)
        n = self.repetitions
        with np.errstate(divide="ignore", invalid="ignore"):
            log_one = log1mexp(np.log(self.presence) + self.base.logsf(x))
            value = np.log(n * self.presence) + (n - 1.0) * log_one + self.base.logpdf(x)
        return np.where(x < 0.0, -np.inf, np.where(x == 0.0, np.inf, value))

    # Standard normal space ------------------------------

    def _base_u(self, w: Array) -> Array:
        """Return the base's standard normal value from that of one repetition, -inf where it is absent."""
        with np.errstate(divide="ignore"):
            log_sf = np.minimum(log_ndtr(-w) - np.log(self.presence), 0.0)
            return u_from_log_tails(log1mexp(log_sf), log_sf)

    def x(self, u: npt.ArrayLike) -> Array:
        """Return x(u)."""
        u = np.asarray(u, dtype=np.float64)
        v = self._base_u(np.asarray(maximum_of(_STANDARD, self.repetitions).x(u)))
        here = np.isfinite(v)
        return np.where(here, np.maximum(self.base.x(np.where(here, v, 0.0)), 0.0), 0.0)

    def x_slope(self, u: npt.ArrayLike) -> tuple[Array, Array]:
        """Return x and dx/du, 0 where the maximum is zero."""
        x, slope, _ = self.x_curvature(u)
        return x, slope

    def x_curvature(self, u: npt.ArrayLike) -> tuple[Array, Array, Array]:
        """Return x, dx/du and d2x/du2, both 0 where the maximum is zero."""
        u = np.asarray(u, dtype=np.float64)
        w, w1, w2 = maximum_of(_STANDARD, self.repetitions).x_curvature(u)
        v = self._base_u(w)
        safe = np.where(np.isfinite(v), v, 0.0)
        x, slope, curvature = self.base.x_curvature(safe)
        here = np.isfinite(v) & (x > 0.0)
        with np.errstate(over="ignore", invalid="ignore"):
            # p phi(v) dv = phi(w) dw, differentiated once more for the second.
            v_w = np.exp(log_phi(w) - log_phi(safe) - np.log(self.presence))
            v_ww = v_w * (safe * v_w - w)
            v1 = v_w * w1
            v2 = v_ww * w1 * w1 + v_w * w2
            first, second = slope * v1, curvature * v1 * v1 + slope * v2
        return np.where(here, x, 0.0), np.where(here, first, 0.0), np.where(here, second, 0.0)

    def parameter_slopes(self, u: npt.ArrayLike) -> dict[str, Array]:
        """Return dx/dp at fixed u for each own parameter p of the base; 0 where the maximum is zero."""
        u = np.asarray(u, dtype=np.float64)
        v = self._base_u(np.asarray(maximum_of(_STANDARD, self.repetitions).x(u)))
        safe = np.where(np.isfinite(v), v, 0.0)
        here = np.isfinite(v) & (self.base.x(safe) > 0.0)
        return {name: np.where(here, s, 0.0) for name, s in self.base.parameter_slopes(safe).items()}

    # Moments and other distributions ------------------------------

    def _moments(self) -> tuple[Array, Array]:
        # E x**k = integral of x0(v)**k n p (1 - p Phi(-v))**(n - 1) phi(v) dv over the values above zero: a smooth
        # integrand once it is cut at x0 = 0.
        cut = np.maximum(np.broadcast_to(self.base.u(0.0), self.shape), -_REACH)
        pieces = np.arange(0.0, 1.0, _WIDTH / (2.0 * _REACH))
        t = np.concatenate([p + _WIDTH / (4.0 * _REACH) * (1.0 + _NODES) for p in pieces])
        weights = np.tile(_WEIGHTS, pieces.size) * _WIDTH / (4.0 * _REACH)
        column = (-1,) + (1,) * len(self.shape)
        length = _REACH - cut
        v = cut + length * t.reshape(column)
        n = self.repetitions
        with np.errstate(divide="ignore"):
            log_one = np.logaddexp(np.log1p(-self.presence), np.log(self.presence) + log_ndtr(v))
        log_density = np.log(n * self.presence) + (n - 1.0) * log_one
        mass = weights.reshape(column) * length * np.exp(log_density - 0.5 * v * v - LOG_SQRT_2PI)
        with np.errstate(over="ignore", invalid="ignore"):
            x = self.base.x(v)
            mean = np.sum(mass * x, axis=0)
            zero = np.exp(self._log_tails(np.zeros(self.shape))[0])
            sd = np.sqrt(np.sum(mass * (x - mean) ** 2, axis=0) + zero * mean**2)
        base_mean, base_sd = self.base.mean, self.base.sd
        return np.where(np.isfinite(base_mean), mean, base_mean), np.where(np.isfinite(base_sd), sd, base_sd)

    def take(self, columns: Any) -> Distribution:
        """Return the distribution of some situations; ``columns`` indexes the last axis."""
        if not self.shape:
            return self
        p, n = (a[..., columns] if a.ndim else a for a in (self.presence, self.repetitions))
        return _made(self.base.take(columns), p, n)

    def scaled(self, factor: float) -> Distribution:
        """Return the distribution of ``factor`` times the variable, factor > 0."""
        return _made(self.base.scaled(factor), self.presence, self.repetitions)


def _made(base: Distribution, presence: Array, repetitions: Array) -> Intermittent:
    shape = np.broadcast_shapes(base.shape, presence.shape, repetitions.shape)
    p, n = np.array(presence), np.array(repetitions)
    p.setflags(write=False)
    n.setflags(write=False)
    return Intermittent(base.family, base.values, shape, base, p, n)


def intermittent(
    base: Distribution, presence: npt.ArrayLike, repetitions: npt.ArrayLike = 1.0
) -> Distribution:
    """Return the maximum of an action's repetitions, in each of which it is present with this probability.

    Parameters
    ----------
    base : Distribution
        The action when present, in one repetition.
    presence : float or array
        Probability of being present, above 0 and at most 1.
    repetitions : float or array
        Any positive number of independent repetitions.

    Returns
    -------
    Distribution
        :class:`Intermittent`; for presence 1, ``maximum_of(base, repetitions)``, negative values included.

    Raises
    ------
    InputError
        A presence or a number of repetitions is out of range, or the action has no scatter.
    """
    n = positive("The number of repetitions", repetitions)
    p = positive("The probability of presence", presence)
    if (p > 1.0).any():
        raise InputError(f"The probability of presence is at most 1; got {float(p.max()):g}.")
    if (p == 1.0).all():
        return maximum_of(base, n)
    if base.is_constant:
        text = "An intermittent action needs scatter when it is present; got a constant."
        raise InputError(
            Problem(text, suggestion="Give it a distribution, or make it part of the limit state.")
        )
    return _made(base, p, n)
