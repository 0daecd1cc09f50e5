"""The maximum of a period from threshold exceedances.

Exceedances come as a Poisson process of rate lambda per year with generalised Pareto excesses. For x above the
threshold u the maximum of n years has

    F(x) = exp(-lambda n (1 + shape (x - u)/scale)**(-1/shape)),

a generalised extreme value distribution, exactly. Below the threshold the record says only that the maximum lies
there with probability exp(-lambda n).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.actions.periods import in_years
from calibrate.distributions import Distribution, distribution
from calibrate.errors import Doubt, InputError, Problem

Array = NDArray[np.float64]

SELDOM = 0.05
"""Probability of a period without exceedance from which a doubt is recorded."""


@dataclass(frozen=True, slots=True, eq=False)
class PeriodMaximum:
    """The distribution of the maximum of a period.

    Attributes
    ----------
    distribution : Distribution
        `gev`, or `gumbel` for shape 0. Exact above the threshold; below it the lower tail is that of the family, which
        the record does not know.
    threshold : float
    expected : float
        Exceedances of the threshold in the period, on average.
    years : float
        The period.
    doubts : tuple of Doubt
    """

    distribution: Distribution
    threshold: float
    expected: float
    years: float
    doubts: tuple[Doubt, ...]

    @property
    def mass_below(self) -> float:
        """Probability that nothing exceeds the threshold, which is F(threshold)."""
        return math.exp(-self.expected)

    def conditional_cdf(self, x: ArrayLike) -> Array:
        """Return F(x) given that the threshold is exceeded at least once; 0 up to the threshold."""
        above = self.distribution.cdf(x) - self.mass_below
        return np.asarray(np.maximum(above, 0.0) / -math.expm1(-self.expected))

    def conditional_ppf(self, p: ArrayLike) -> Array:
        """Return the quantile given that the threshold is exceeded at least once."""
        exceeded = -math.expm1(-self.expected)
        return self.distribution.isf(exceeded * (1.0 - np.asarray(p, dtype=np.float64)))


def annual_maximum(
    rate: float, threshold: float, scale: float, shape: float, years: float = 1.0
) -> PeriodMaximum:
    """Return the distribution of the maximum of a year, or of any number of years.

    Parameters
    ----------
    rate : float
        Exceedances (independent events) per year.
    threshold, scale, shape : float
        Of the generalised Pareto excesses; a positive shape is a heavy tail.
    years : float
        Length of the period.

    Returns
    -------
    PeriodMaximum
        Location ``threshold + scale ((rate years)**shape - 1)/shape``, scale ``scale (rate years)**shape``, the same
        shape.

    Raises
    ------
    InputError
        A rate, scale or period that is not positive, or a number that is not finite.

    References
    ----------
    S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, sections 4.2.1 and 7.3
    (from memory).
    """
    given = {"rate": rate, "threshold": threshold, "scale": scale, "shape": shape, "years": years}
    positive = ("rate", "scale", "years")
    problems = [
        Problem(f"The {name} must be a {'positive' if name in positive else 'finite'} number; got {value!r}.")
        for name, value in given.items()
        if not (math.isfinite(value) and (name not in positive or value > 0.0))
    ]
    if problems:
        raise InputError(problems)
    log_m = math.log(rate) + math.log(years)
    location = threshold + scale * log_m * float(special.exprel(shape * log_m))
    if shape == 0.0:
        law = distribution("gumbel", location=location, scale=scale)
    else:
        law = distribution("gev", location=location, scale=scale * math.exp(shape * log_m), shape=shape)
    mass = math.exp(-rate * years)
    doubts = []
    if mass > SELDOM:
        message = (
            f"With {rate:.3g} exceedances a year the maximum of {in_years(years)} stays below the threshold "
            f"{threshold:.6g} with probability {mass:.2g}; what the distribution says of such values is not from the "
            "record. A lower threshold would tell more."
        )
        doubts.append(Doubt("seldom-exceeded", message, "excesses"))
    return PeriodMaximum(law, float(threshold), rate * years, float(years), tuple(doubts))
