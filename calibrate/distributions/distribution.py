"""A distribution: a family with parameters that are arrays over situations."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.distributions.family import Family
from calibrate.distributions.parameter import Array, Values


def frozen(values: Values) -> tuple[Values, tuple[int, ...]]:
    """Return the values write-protected, arrays spread to their common shape, scalars left as they are."""
    shape = np.broadcast_shapes(*(v.shape for v in values))
    fixed = []
    for value in values:
        array = np.array(np.broadcast_to(value, shape) if value.ndim else value, dtype=np.float64)
        array.setflags(write=False)
        fixed.append(array)
    return tuple(fixed), shape


@dataclass(frozen=True, slots=True, eq=False)
class Distribution:
    """A family and its own parameters; immutable.

    Made by :func:`calibrate.distributions.distribution`. All methods broadcast their argument with the parameters
    and may return read-only views.

    Parameters
    ----------
    family : Family
        The family.
    values : tuple of array
        Own parameters in the family's order, each of shape () or ``shape``.
    shape : tuple of int
        Shape of the parameters together: () or (n_situations,).
    """

    family: Family
    values: Values
    shape: tuple[int, ...]

    @classmethod
    def of(cls, family: Family, values: Values) -> Distribution:
        """Return the distribution with these checked own parameters."""
        return cls(family, *frozen(values))

    def __repr__(self) -> str:
        texts = ", ".join(f"{n}={np.array2string(v, threshold=6)}" for n, v in self.parameters.items())
        return f"{self.family.name}({texts})"

    @property
    def parameters(self) -> Mapping[str, Array]:
        """Own parameters by name, in the family's order."""
        return MappingProxyType(dict(zip(self.family.parameter_names, self.values, strict=True)))

    @property
    def is_constant(self) -> bool:
        """Whether there is no scatter."""
        return self.family.is_constant

    @property
    def is_normal(self) -> bool:
        """Whether x is a linear function of u."""
        return self.family.is_normal

    # Physical space ------------------------------

    @property
    def support(self) -> tuple[Array, Array]:
        """Ends of the support, possibly infinite."""
        return self.family.support(self.values)

    def logpdf(self, x: npt.ArrayLike) -> Array:
        """Return the log-density; -inf outside the support."""
        return self.family.log_density_everywhere(np.asarray(x, dtype=np.float64), self.values)

    def pdf(self, x: npt.ArrayLike) -> Array:
        """Return the density."""
        return np.exp(self.logpdf(x))

    def _log_tails(self, x: Array) -> tuple[Array, Array]:
        inside, safe = self.family.within(x, self.values)
        with np.errstate(divide="ignore"):
            log_cdf, log_sf = self.family.log_tails(safe, self.values)
        if np.all(inside):
            return log_cdf, log_sf
        below = x < self.family.x(np.zeros_like(x), self.values)
        outside_cdf = np.where(np.isnan(x), np.nan, np.where(below, -np.inf, 0.0))
        outside_sf = np.where(np.isnan(x), np.nan, np.where(below, 0.0, -np.inf))
        return np.where(inside, log_cdf, outside_cdf), np.where(inside, log_sf, outside_sf)

    def logcdf(self, x: npt.ArrayLike) -> Array:
        """Return ln F(x)."""
        return self._log_tails(np.asarray(x, dtype=np.float64))[0]

    def logsf(self, x: npt.ArrayLike) -> Array:
        """Return ln(1 - F(x))."""
        return self._log_tails(np.asarray(x, dtype=np.float64))[1]

    def cdf(self, x: npt.ArrayLike) -> Array:
        """Return F(x)."""
        return np.exp(self.logcdf(x))

    def sf(self, x: npt.ArrayLike) -> Array:
        """Return 1 - F(x) with small relative error."""
        return np.exp(self.logsf(x))

    def mass_below(self, x: npt.ArrayLike) -> Array:
        """Return the probability of values up to x."""
        return self.cdf(x)

    def ppf(self, p: npt.ArrayLike) -> Array:
        """Return the quantile of non-exceedance probability p; NaN outside [0, 1]."""
        return self._quantile(special.ndtri(np.asarray(p, dtype=np.float64)))

    def isf(self, q: npt.ArrayLike) -> Array:
        """Return the quantile of exceedance probability q; NaN outside [0, 1]."""
        return self._quantile(-special.ndtri(np.asarray(q, dtype=np.float64)))

    def _quantile(self, u: Array) -> Array:
        """Return x(u), also at infinite u."""
        finite = np.isfinite(u)
        if np.all(finite):
            return self.x(u)
        lower, upper = self.support
        ends = np.where(np.isnan(u), np.nan, np.where(u < 0, lower, upper))
        return np.where(finite, self.x(np.where(finite, u, 0.0)), ends)

    # Standard normal space ------------------------------

    def x(self, u: npt.ArrayLike) -> Array:
        """Return the value at standard normal ``u``, F(x) = Phi(u).

        Notes
        -----
        For |u| <= 12 the error is at most 1e-9 max(|x|, sd).
        """
        return self.family.x(np.asarray(u, dtype=np.float64), self.values)

    def x_slope(self, u: npt.ArrayLike) -> tuple[Array, Array]:
        """Return x and dx/du."""
        return self.family.x_slope(np.asarray(u, dtype=np.float64), self.values)

    def x_curvature(self, u: npt.ArrayLike) -> tuple[Array, Array, Array]:
        """Return x, dx/du and d2x/du2."""
        return self.family.x_curvature(np.asarray(u, dtype=np.float64), self.values)

    def parameter_slopes(self, u: npt.ArrayLike) -> dict[str, Array]:
        """Return dx/dp at fixed u for each own parameter p."""
        slopes = self.family.parameter_slopes(np.asarray(u, dtype=np.float64), self.values)
        return dict(zip(self.family.parameter_names, slopes, strict=True))

    def u(self, x: npt.ArrayLike) -> Array:
        """Return the standard normal value of x; -inf and inf outside the support."""
        x = np.asarray(x, dtype=np.float64)
        inside, safe = self.family.within(x, self.values)
        with np.errstate(divide="ignore"):
            u = self.family.u(safe, self.values)
        if np.all(inside):
            return u
        below = x < self.family.x(np.zeros_like(x), self.values)
        return np.where(inside, u, np.where(np.isnan(x), np.nan, np.where(below, -np.inf, np.inf)))

    # Moments ------------------------------

    @property
    def mean(self) -> Array:
        """Mean; inf or NaN where it does not exist."""
        return np.asarray(self._moments()[0])

    @property
    def sd(self) -> Array:
        """Standard deviation; inf or NaN where it does not exist."""
        return np.asarray(self._moments()[1])

    @property
    def cov(self) -> Array:
        """Coefficient of variation, sd/|mean|."""
        mean, sd = self._moments()
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(sd / np.abs(mean))

    def _moments(self) -> tuple[Array, Array]:
        return self.family.moments(self.values)

    # Other distributions ------------------------------

    def sample(self, rng: np.random.Generator, size: int | tuple[int, ...] | None = None) -> Array:
        """Draw values with the given Generator.

        Parameters
        ----------
        rng : numpy.random.Generator
            Source of randomness.
        size : int or tuple of int, optional
            Shape of the result; it must broadcast with ``shape``, which is the default.
        """
        return np.asarray(self.x(rng.standard_normal(self.shape if size is None else size)))

    def take(self, columns: Any) -> Distribution:
        """Return the distribution of some situations; ``columns`` indexes the last axis."""
        if not self.shape:
            return self
        if isinstance(columns, np.ndarray) and columns.dtype.kind == "i":
            values = tuple(v.take(columns, axis=-1) if v.ndim else v for v in self.values)
        else:
            values = tuple(v[..., columns] if v.ndim else v for v in self.values)
        for value in values:
            value.setflags(write=False)
        return Distribution(self.family, values, np.broadcast_shapes(*(v.shape for v in values)))

    def scaled(self, factor: float) -> Distribution:
        """Return the distribution of ``factor`` times the variable, factor > 0 (a change of unit)."""
        parameters = zip(self.family.parameters, self.values, strict=True)
        return Distribution.of(self.family, tuple(v * factor if q.carries_unit else v for q, v in parameters))
