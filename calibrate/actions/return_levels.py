"""Return periods and return levels: what is exceeded in a year with probability 1/T.

Years are independent and alike; a return period T in years is the reciprocal of the annual exceedance probability.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.actions.arguments import positive
from calibrate.actions.maxima import MaximaFit, checked_confidence
from calibrate.distributions import Distribution
from calibrate.errors import Doubt, InputError
from calibrate.fitting import Fit, plotting_positions
from calibrate.fitting.intervals import fractile_interval

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

YEARS = (2.0, 5.0, 10.0, 20.0, 50.0, 100.0, 200.0, 500.0, 1000.0)
"""Return periods of the usual table."""


def non_exceedance(years: ArrayLike, n: ArrayLike = 1.0) -> Array:
    """Return the probability (1 - 1/T)**n that the level of return period T is not exceeded in n years.

    Parameters
    ----------
    years : array_like
        Return period T, more than 1.
    n : array_like
        Length of the period in years, positive; less than one year for part of a year.

    Examples
    --------
    >>> round(float(non_exceedance(50, 50)), 7)
    0.3641697
    """
    return np.exp(positive("A period", n) * np.log1p(-1.0 / _return_periods(years)))


def return_period(probability: ArrayLike, n: ArrayLike = 1.0) -> Array:
    """Return the return period T, in years, of the level that is not exceeded in n years with a probability.

    Parameters
    ----------
    probability : array_like
        Of non-exceedance, between 0 and 1.
    n : array_like
        Length of the period in years, positive.

    Examples
    --------
    >>> round(float(return_period(0.95, 50)), 4)
    975.2864
    """
    p = np.asarray(probability, dtype=np.float64)
    if not np.all((p > 0.0) & (p < 1.0)):
        raise InputError(f"A probability of non-exceedance must lie between 0 and 1; got {probability!r}.")
    return np.asarray(-1.0 / np.expm1(np.log(p) / positive("A period", n)))


def return_level(distribution: Distribution, years: ArrayLike, block_years: float = 1.0) -> Array:
    """Return the level with return period T.

    Parameters
    ----------
    distribution : Distribution
        Of the maximum of one block, shape () or (n,).
    years : array_like
        Return period T in years, more than 1; broadcast with the distribution.
    block_years : float
        Length of a block, the period to which the distribution belongs.

    Raises
    ------
    InputError
        A return period of one year or less, or a block length that is not positive.
    """
    return distribution.isf(_block_exceedance(years, block_years))


@dataclass(frozen=True, slots=True, eq=False)
class ReturnLevels:
    """Return levels with intervals.

    Attributes
    ----------
    years, levels, lower, upper : array, shape (m,)
        Ends are NaN where none was found, infinite never.
    beyond_record : array of bool, shape (m,)
        Whether the return period is longer than the record.
    confidence : float
        Of the two-sided intervals, each by itself.
    method : str
        ``profile likelihood``, or ``delta method`` where there is no likelihood to profile.
    doubts : tuple of Doubt
    """

    years: Array
    levels: Array
    lower: Array
    upper: Array
    beyond_record: Flags
    confidence: float
    method: str
    doubts: tuple[Doubt, ...]


def return_levels(maxima: MaximaFit, years: ArrayLike = YEARS, confidence: float = 0.95) -> ReturnLevels:
    """Return the levels of several return periods with intervals.

    Parameters
    ----------
    maxima : MaximaFit
        Profile-likelihood intervals if it was fitted by likelihood; else the delta method with the covariance of the
        estimates, symmetric and too low for long return periods.
    years : array_like, shape (m,)
        Return periods, each more than 1.
    confidence : float
        Of the two-sided intervals.

    Raises
    ------
    InputError
        As `return_level`, or for a confidence that is none.
    """
    checked_confidence(confidence)
    periods = np.atleast_1d(_return_periods(years))
    exceedance = _block_exceedance(periods, maxima.block_years)
    profile = maxima.fit.method == "likelihood"
    if profile:
        ends = [fractile_interval(maxima.fit, float(1.0 - q), confidence) for q in exceedance]
    else:
        ends = [_by_delta(maxima.fit, float(-special.ndtri(q)), confidence) for q in exceedance]
    lower, upper = np.array(ends, dtype=np.float64).T
    levels = maxima.distribution.isf(exceedance)
    doubts = []
    lost = periods[~(np.isfinite(lower) & np.isfinite(upper))]
    if lost.size:
        listed = ", ".join(f"{t:g}" for t in lost)
        message = f"No interval was found for the levels of return period {listed} years."
        doubts.append(Doubt("no-interval", message, f"fit.{maxima.fit.family}"))
    method = "profile likelihood" if profile else "delta method"
    beyond = periods > maxima.years
    return ReturnLevels(periods, levels, lower, upper, beyond, confidence, method, tuple(doubts))


def empirical_return_periods(maxima: MaximaFit) -> tuple[Array, Array]:
    """Return return periods in years and values of the ordered maxima, for the points of a return-level plot.

    Hazen's plotting positions, as on probability paper. Maxima known by bounds stand at one bound or the middle.

    Returns
    -------
    years, values : array, shape (n,)
    """
    ordered = np.sort(maxima.fit.values)
    p = plotting_positions(ordered.size)
    return return_period(p, maxima.block_years), ordered


def _by_delta(fit: Fit, u: float, confidence: float) -> tuple[float, float]:
    assert fit.distribution is not None
    slopes = fit.distribution.parameter_slopes(u)
    gradient = np.array([float(slopes[name]) for name in fit.free])
    variance = float(gradient @ fit.covariance @ gradient)
    half = float(special.ndtri(0.5 + 0.5 * confidence)) * math.sqrt(variance)
    level = float(fit.distribution.x(u))
    return level - half, level + half


def _block_exceedance(years: ArrayLike, block_years: float) -> Array:
    blocks = positive("The length of a block", block_years)
    return np.asarray(-np.expm1(blocks * np.log1p(-1.0 / _return_periods(years))))


def _return_periods(years: ArrayLike) -> Array:
    t = np.asarray(years, dtype=np.float64)
    if not np.all(np.isfinite(t) & (t > 1.0)):
        raise InputError(f"A return period must be more than 1 year; got {years!r}.")
    return t
