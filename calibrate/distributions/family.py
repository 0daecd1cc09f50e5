"""The base of every family: a family declares parameters and formulas, the base computes the rest."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Mapping
from typing import ClassVar

import numpy as np
import numpy.typing as npt

from calibrate.distributions import arguments as args
from calibrate.distributions.implicit import slopes_by_moments
from calibrate.distributions.normal_tails import u_from_log_tails
from calibrate.distributions.parameter import Array, Moments, Parameter, Values


class Family(ABC):
    """A family of distributions; stateless, one instance per registry entry.

    A subclass declares ``name``, ``parameters`` and the formulas below. ``p`` is the tuple of own parameters in
    declared order; every formula is elementwise and broadcasts. Formulas in x are called within the support only.

    Attributes
    ----------
    name : str
        Name in study files.
    parameters : tuple of Parameter
        Own parameters, in order.
    moments_keep : tuple of str
        Own parameters that are given beside mean and cov or sd (threshold, bounds, shape, freedom).
    moment_names : tuple of str
        ``("mean", "sd")``; ``("mean",)`` when the mean alone is enough; ``()`` when moments are not taken.
    mean_positive : bool
        Whether only positive means exist.
    limits : (float, float)
        Ends of the support where they depend on no parameter.
    """

    name: ClassVar[str]
    parameters: ClassVar[tuple[Parameter, ...]]
    moments_keep: ClassVar[tuple[str, ...]] = ()
    moment_names: ClassVar[tuple[str, ...]] = ("mean", "sd")
    mean_positive: ClassVar[bool] = False
    limits: ClassVar[tuple[float, float]] = (-math.inf, math.inf)
    is_constant: ClassVar[bool] = False
    is_normal: ClassVar[bool] = False

    def __repr__(self) -> str:
        return f"<family {self.name}>"

    def __eq__(self, other: object) -> bool:
        return type(self) is type(other)

    def __hash__(self) -> int:
        return hash(type(self))

    # Formulas in x ------------------------------

    def support(self, p: Values) -> tuple[Array, Array]:
        """Return the ends of the support."""
        return np.asarray(self.limits[0]), np.asarray(self.limits[1])

    @abstractmethod
    def logpdf(self, x: Array, p: Values) -> Array:
        """Return the log-density within the support."""

    @abstractmethod
    def log_tails(self, x: Array, p: Values) -> tuple[Array, Array]:
        """Return ln F and ln(1 - F) within the support, each with small relative error."""

    def u(self, x: Array, p: Values) -> Array:
        """Return the standard normal value of x within the support."""
        return u_from_log_tails(*self.log_tails(x, p))

    # Formulas in standard normal space ------------------------------

    def x(self, u: Array, p: Values) -> Array:
        """Return x(u)."""
        return self.x_slope(u, p)[0]

    def x_slope(self, u: Array, p: Values) -> tuple[Array, Array]:
        """Return x and dx/du."""
        x, slope, _ = self.x_curvature(u, p)
        return x, slope

    @abstractmethod
    def x_curvature(self, u: Array, p: Values) -> tuple[Array, Array, Array]:
        """Return x, dx/du and d2x/du2."""

    @abstractmethod
    def parameter_slopes(self, u: Array, p: Values) -> Values:
        """Return dx/dp at fixed u, one array per own parameter."""

    # Moments ------------------------------

    @abstractmethod
    def moments(self, p: Values) -> tuple[Array, Array]:
        """Return mean and standard deviation; inf or NaN where they do not exist."""

    def moment_slopes(self, p: Values) -> tuple[tuple[Array, Array], ...]:
        """Return (d mean/dp, d sd/dp) for each own parameter."""
        raise args.refuse(self.name, "moments are not taken.")

    def from_moments(self, m: Moments) -> Values:
        """Return own parameters; InputError when no member of the family has these moments."""
        raise args.refuse(self.name, "moments are not taken.")

    def check(self, p: Values) -> None:  # noqa: B027  (most families have nothing to add)
        """Raise InputError for own parameters that make no distribution together (reversed bounds)."""

    # Extremes ------------------------------

    def maximum_parameters(self, p: Values, ratio: Array) -> Values | None:
        """Return parameters of this family for F**ratio, or None when it leaves the family."""
        return None

    def minimum_parameters(self, p: Values, ratio: Array) -> Values | None:
        """Return parameters of this family for 1 - (1 - F)**ratio, or None when it leaves the family."""
        return None

    # What callers use ------------------------------

    @property
    def parameter_names(self) -> tuple[str, ...]:
        """Names of the own parameters, in order."""
        return tuple(q.name for q in self.parameters)

    def log_density(self, x: Array, **parameters: Array) -> Array:
        """Return the log-density of x for own parameters given by name; -inf outside the support."""
        x = np.asarray(x, dtype=np.float64)
        p = tuple(np.asarray(parameters[n], dtype=np.float64) for n in self.parameter_names)
        return self.log_density_everywhere(x, p)

    def log_density_everywhere(self, x: Array, p: Values) -> Array:
        """Return the log-density, -inf outside the support, NaN where x is NaN."""
        inside, safe = self.within(x, p)
        with np.errstate(divide="ignore"):
            return np.where(inside, self.logpdf(safe, p), np.where(np.isnan(x), np.nan, -np.inf))

    def within(self, x: Array, p: Values) -> tuple[npt.NDArray[np.bool_], Array]:
        """Say where x lies in the support; elsewhere replace it by the median, so that formulas stay finite."""
        lower, upper = self.support(p)
        inside = (x >= lower) & (x <= upper) & np.isfinite(x)
        if np.all(inside):
            return inside, x
        return inside, np.where(inside, x, self.x(np.zeros_like(x), p))

    def argument_sets(self) -> tuple[tuple[str, ...], ...]:
        """Return the accepted sets of required argument names; parameters with a default are left out."""
        own = tuple(q.name for q in self.parameters if q.default is None)
        kept = tuple(q.name for q in self.parameters if q.name in self.moments_keep and q.default is None)
        if not self.moment_names:
            return (own,)
        if self.moment_names == ("mean",):
            return (("mean", *kept), own)
        return (("mean", "cov", *kept), ("mean", "sd", *kept), own)

    def carries_unit(self, argument: str) -> bool:
        """Say whether an argument is measured in the unit of the variable."""
        if argument in {"mean", "sd"}:
            return True
        return any(q.carries_unit for q in self.parameters if q.name == argument)

    def solve(self, arguments: Mapping[str, Array]) -> dict[str, Array]:
        """Return own parameters from any accepted set of arguments.

        Parameters
        ----------
        arguments : mapping of str to array
            Own parameters, or mean with cov or sd (and what ``moments_keep`` names). Arrays broadcast.

        Returns
        -------
        dict of str to array
            One array per own parameter, in declared order.

        Raises
        ------
        InputError
            An argument is unknown, missing, contradictory or outside its domain; all of these at once.
        """
        given = args.checked(self, arguments)
        return dict(zip(self.parameter_names, self._solved(given), strict=True))

    def _solved(self, given: Mapping[str, Array]) -> Values:
        if "mean" not in given:
            p = tuple(given[n] for n in self.parameter_names)
        else:
            p = self.from_moments(args.moments_of(given, self.moments_keep))
        self.check(p)
        return p

    def argument_slopes(self, arguments: Mapping[str, Array]) -> dict[str, dict[str, Array]]:
        """Return the exact derivative of each own parameter by each given argument.

        Returns
        -------
        dict of str to dict of str to array
            ``{parameter: {argument: d parameter / d argument}}``.

        Raises
        ------
        InputError
            As :meth:`solve`.
        """
        given = args.checked(self, arguments)
        p = self._solved(given)
        names = self.parameter_names
        if "mean" not in given:
            return {n: {a: np.asarray(float(n == a)) for a in arguments} for n in names}
        free = tuple(i for i, n in enumerate(names) if n not in self.moments_keep)
        by_moment = slopes_by_moments(self.moment_slopes(p), free, len(self.moment_names))
        slopes: dict[str, dict[str, Array]] = {}
        for i, name in enumerate(names):
            row = {a: np.asarray(float(a == name)) for a in arguments}
            if i in free:
                mean_slope, sd_slope, kept_slopes = by_moment[i]
                row["mean"] = mean_slope
                if "cov" in given:
                    mean, cov = given["mean"], given["cov"]
                    row["mean"] = mean_slope + sd_slope * cov * np.sign(mean)
                    row["cov"] = sd_slope * np.abs(mean)
                elif "sd" in given:
                    row["sd"] = sd_slope
                row |= {names[j]: s for j, s in kept_slopes.items() if names[j] in arguments}
            slopes[name] = row
        return slopes
