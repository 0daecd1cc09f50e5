"""Maxima and minima of any positive number of independent repetitions, for every family.

F**ratio turns an action of one period into that of another; the ratio need not be an integer. In standard normal
space it is a map of u that no family needs to know, accurate in both tails; families that are closed under it
(Gumbel, Frechet, generalised extreme values; Weibull, exponential for minima) use their closed form.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from calibrate.distributions.arguments import as_array, require
from calibrate.distributions.distribution import Distribution
from calibrate.distributions.mixture import Mixture
from calibrate.distributions.normal_tails import (
    from_log_hazard,
    log_hazard,
    log_hazard_curvature,
    log_hazard_slope,
    log_ndtr,
)
from calibrate.distributions.parameter import Array
from calibrate.distributions.quadrature import moments_over_u


@dataclass(frozen=True, slots=True, eq=False)
class Extreme(Distribution):
    """Distribution of the maximum (minimum) of ``ratio`` repetitions of a base.

    ``family``, ``parameters`` and ``parameter_slopes`` are those of the base, so that a caller can follow a
    derivative back to what the base was made from.

    Parameters
    ----------
    base : Distribution
        Distribution of one repetition.
    ratio : array
        Number of repetitions, any positive number, shape () or (n,).
    of_maxima : bool
        Maximum (F**ratio) or minimum (1 - (1 - F)**ratio).
    equivalent : Distribution or None
        The same distribution as a member of the base's family, where one exists.
    """

    base: Distribution
    ratio: Array
    of_maxima: bool
    equivalent: Distribution | None

    def __repr__(self) -> str:
        kind = "maximum_of" if self.of_maxima else "minimum_of"
        return f"{kind}({self.base!r}, {np.array2string(self.ratio, threshold=6)})"

    @property
    def is_normal(self) -> bool:
        """Whether x is a linear function of u; raising to a power never leaves it so."""
        return False

    # The map of u ------------------------------

    def base_u(self, u: Array) -> Array:
        """Return the base's standard normal value that corresponds to u."""
        sign = 1.0 if self.of_maxima else -1.0
        return sign * from_log_hazard(log_hazard(sign * u) - np.log(self.ratio))

    def _base_u_slope(self, u: Array) -> tuple[Array, Array]:
        sign = 1.0 if self.of_maxima else -1.0
        k, k1 = log_hazard_slope(sign * u)
        v = from_log_hazard(k - np.log(self.ratio))
        return sign * v, k1 / log_hazard_slope(v)[1]

    def _base_u_curvature(self, u: Array) -> tuple[Array, Array, Array]:
        # k(v) = k(u) - ln(ratio) differentiated twice: k1(v) v' = k1(u), k2(v) v'^2 + k1(v) v'' = k2(u).
        sign = 1.0 if self.of_maxima else -1.0
        k, k1, k2 = log_hazard_curvature(sign * u)
        v = from_log_hazard(k - np.log(self.ratio))
        _, v_k1, v_k2 = log_hazard_curvature(v)
        slope = k1 / v_k1
        return sign * v, slope, sign * (k2 - v_k2 * slope * slope) / v_k1

    # Distribution ------------------------------

    def x(self, u: npt.ArrayLike) -> Array:
        """Return x(u)."""
        u = np.asarray(u, dtype=np.float64)
        return self.base.x(self.base_u(u)) if self.equivalent is None else self.equivalent.x(u)

    def x_slope(self, u: npt.ArrayLike) -> tuple[Array, Array]:
        """Return x and dx/du."""
        u = np.asarray(u, dtype=np.float64)
        if self.equivalent is not None:
            return self.equivalent.x_slope(u)
        v, v1 = self._base_u_slope(u)
        x, slope = self.base.x_slope(v)
        return x, slope * v1

    def x_curvature(self, u: npt.ArrayLike) -> tuple[Array, Array, Array]:
        """Return x, dx/du and d2x/du2."""
        u = np.asarray(u, dtype=np.float64)
        if self.equivalent is not None:
            return self.equivalent.x_curvature(u)
        v, v1, v2 = self._base_u_curvature(u)
        x, slope, curvature = self.base.x_curvature(v)
        return x, slope * v1, curvature * v1 * v1 + slope * v2

    def parameter_slopes(self, u: npt.ArrayLike) -> dict[str, Array]:
        """Return dx/dp at fixed u for each own parameter p of the base."""
        return self.base.parameter_slopes(self.base_u(np.asarray(u, dtype=np.float64)))

    def u(self, x: npt.ArrayLike) -> Array:
        """Return the standard normal value of x."""
        if self.equivalent is not None:
            return self.equivalent.u(x)
        sign = 1.0 if self.of_maxima else -1.0
        return sign * from_log_hazard(log_hazard(sign * self.base.u(x)) + np.log(self.ratio))

    def _log_tails(self, x: Array) -> tuple[Array, Array]:
        u = self.u(x)
        return log_ndtr(u), log_ndtr(-u)

    def logpdf(self, x: npt.ArrayLike) -> Array:
        """Return the log-density; -inf outside the support."""
        if self.equivalent is not None:
            return self.equivalent.logpdf(x)
        tail = self.base.logcdf(x) if self.of_maxima else self.base.logsf(x)
        power = self.ratio - 1.0
        with np.errstate(invalid="ignore"):
            factor = np.where(power == 0, 0.0, power * tail)
            return np.where(np.isneginf(tail), -np.inf, np.log(self.ratio) + factor + self.base.logpdf(x))

    def _moments(self) -> tuple[Array, Array]:
        if self.equivalent is not None:
            return self.equivalent.mean, self.equivalent.sd
        mean, sd = moments_over_u(self.x, self.shape)
        # The heavier tail decides whether a moment exists, and repetition leaves its order.
        base_mean, base_sd = self.base.mean, self.base.sd
        return np.where(np.isfinite(base_mean), mean, base_mean), np.where(np.isfinite(base_sd), sd, base_sd)

    def take(self, columns: Any) -> Distribution:
        """Return the distribution of some situations; ``columns`` indexes the last axis."""
        if not self.shape:
            return self
        ratio = self.ratio[..., columns] if self.ratio.ndim else self.ratio
        equivalent = None if self.equivalent is None else self.equivalent.take(columns)
        return _extreme(self.base.take(columns), ratio, self.of_maxima, equivalent)

    def scaled(self, factor: float) -> Distribution:
        """Return the distribution of ``factor`` times the variable, factor > 0."""
        equivalent = None if self.equivalent is None else self.equivalent.scaled(factor)
        return _extreme(self.base.scaled(factor), self.ratio, self.of_maxima, equivalent)


def _extreme(base: Distribution, ratio: Array, of_maxima: bool, equivalent: Distribution | None) -> Extreme:
    shape = np.broadcast_shapes(base.shape, ratio.shape)
    ratio.setflags(write=False)
    return Extreme(base.family, base.values, shape, base, ratio, of_maxima, equivalent)


def _repeated(base: Distribution, ratio: npt.ArrayLike, of_maxima: bool) -> Distribution:
    ratio = as_array(base.family.name, "ratio", ratio)
    positive = (ratio > 0) & np.isfinite(ratio)
    require(base.family.name, "the ratio of periods", positive, ratio, "positive and finite")
    if base.is_constant or np.all(ratio == 1.0):
        return base
    if isinstance(base, Extreme) and base.of_maxima == of_maxima:
        return _repeated(base.base, base.ratio * ratio, of_maxima)
    equivalent = None
    # A mixture has the name of a family, but is none of its members.
    if not isinstance(base, Extreme | Mixture):
        declared = base.family.maximum_parameters if of_maxima else base.family.minimum_parameters
        closed = declared(base.values, ratio)
        equivalent = None if closed is None else Distribution.of(base.family, closed)
    return _extreme(base, ratio, of_maxima, equivalent)


def ratio_slope(base: Distribution, ratio: npt.ArrayLike, u: npt.ArrayLike, *, of_maxima: bool) -> Array:
    """Return dx/d ratio at fixed u of the maximum (minimum) of ``ratio`` repetitions.

    Parameters
    ----------
    base : Distribution
        Distribution of one repetition.
    ratio : float or array
        Number of repetitions, positive.
    u : array
        Standard normal values of the extreme.
    of_maxima : bool
    """
    sign = 1.0 if of_maxima else -1.0
    r, u = np.asarray(ratio, dtype=np.float64), np.asarray(u, dtype=np.float64)
    w = from_log_hazard(log_hazard(sign * u) - np.log(r))
    # k(w) = k(u) - ln r, so that dw/d ln r = -1/k'(w).
    slope = base.x_slope(sign * w)[1]
    return np.asarray(-sign * slope / (log_hazard_slope(w)[1] * r))


def maximum_of(base: Distribution, ratio: npt.ArrayLike) -> Distribution:
    """Return the distribution F**ratio of the maximum of ``ratio`` independent repetitions.

    Parameters
    ----------
    base : Distribution
        Distribution of one repetition.
    ratio : float or array
        Reference period over the base's period; any positive number, shape () or (n,).

    Returns
    -------
    Distribution
        An :class:`Extreme`, or the base itself when nothing changes. Its ``parameters`` and ``parameter_slopes``
        are the base's; ``equivalent`` is the member of the same family, if there is one.

    Raises
    ------
    InputError
        A ratio is not positive.
    """
    return _repeated(base, ratio, True)


def minimum_of(base: Distribution, ratio: npt.ArrayLike) -> Distribution:
    """Return the distribution 1 - (1 - F)**ratio of the minimum of ``ratio`` independent repetitions.

    Parameters, return value and errors are those of :func:`maximum_of`.
    """
    return _repeated(base, ratio, False)
