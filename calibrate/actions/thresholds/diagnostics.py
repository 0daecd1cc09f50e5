"""How the threshold is chosen: figures that are straight or level where the generalised Pareto family holds.

Above a threshold from which it holds, the mean excess is linear in the threshold with slope shape/(1 - shape), and the
shape and the modified scale, scale - shape threshold, do not depend on the threshold.

References
----------
S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, sections 4.3.1 and 4.3.4; A. C.
Davison and R. L. Smith, J. R. Statist. Soc. B 52 (1990) 393-442 (both from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.actions.maxima import checked_confidence
from calibrate.actions.thresholds.excesses import LEAST, fit_excesses
from calibrate.errors import InputError
from calibrate.fitting.fits import checked_values

Array = NDArray[np.float64]
Counts = NDArray[np.intp]

MOST = 50
"""Thresholds that are chosen where none are given."""

LEFT = 10
"""Exceedances that are left above the highest of them."""


@dataclass(frozen=True, slots=True, eq=False)
class MeanResidualLife:
    """Mean excess over thresholds.

    Attributes
    ----------
    thresholds, mean, lower, upper : array, shape (k,)
        Intervals by the normal distribution of the mean.
    count : array of int, shape (k,)
        Exceedances of each.
    """

    thresholds: Array
    mean: Array
    lower: Array
    upper: Array
    count: Counts


@dataclass(frozen=True, slots=True, eq=False)
class Stability:
    """Shape and modified scale of the excesses over thresholds.

    Attributes
    ----------
    thresholds : array, shape (k,)
    shape, modified_scale : array, shape (k,)
        NaN where the excesses could not be fitted, which ``reasons`` explains.
    shape_interval, modified_scale_interval : array, shape (2, k)
        From the observed information; NaN for a shape below -0.5.
    count : array of int, shape (k,)
        Exceedances of each.
    reasons : tuple of str, length k
        Empty where there is a fit.
    """

    thresholds: Array
    shape: Array
    modified_scale: Array
    shape_interval: Array
    modified_scale_interval: Array
    count: Counts
    reasons: tuple[str, ...]


def mean_residual_life(
    values: ArrayLike, thresholds: ArrayLike | None = None, confidence: float = 0.95
) -> MeanResidualLife:
    """Return the mean excess over thresholds with intervals.

    Parameters
    ----------
    values : array_like, shape (n,)
    thresholds : array_like, shape (k,), optional
        Each exceeded by at least two values. Default: up to 50, evenly spaced from the smallest value to that which
        leaves ten values above it.
    confidence : float
        Of the two-sided intervals.

    Raises
    ------
    InputError
        The values are no sample or too few, or a threshold is too high.
    """
    x, u = _prepared(values, thresholds, 2)
    ordered = np.sort(x)
    first = np.searchsorted(ordered, u, side="right")
    count = ordered.size - first
    # Sums of deviations from each threshold itself: differences of cumulated squares would cancel.
    excess = [ordered[i:] - t for i, t in zip(first, u, strict=True)]
    mean = np.array([float(np.mean(e)) for e in excess])
    half = _normal(confidence) * np.array([float(np.std(e, ddof=1)) for e in excess]) / np.sqrt(count)
    return MeanResidualLife(u, mean, mean - half, mean + half, count)


def stability(values: ArrayLike, thresholds: ArrayLike | None = None, confidence: float = 0.95) -> Stability:
    """Return shape and modified scale of generalised Pareto excesses over thresholds, with intervals.

    Parameters
    ----------
    values, thresholds, confidence
        As in `mean_residual_life`; each threshold is exceeded by at least three values.
    """
    x, u = _prepared(values, thresholds, LEAST)
    z = _normal(confidence)
    count = np.array([int(np.sum(x > t)) for t in u])
    estimates, half = np.full((2, u.size), np.nan), np.full((2, u.size), np.nan)
    reasons = []
    for i, t in enumerate(u):
        try:
            found = fit_excesses(x, float(t))
        except InputError as error:
            reasons.append(str(error))
            continue
        reasons.append("")
        turned = np.array([1.0, -t])
        estimates[:, i] = found.shape, found.scale - found.shape * t
        variances = found.covariance[1, 1], turned @ found.covariance @ turned
        half[:, i] = z * np.sqrt(variances)
    ends = np.array([estimates - half, estimates + half])
    return Stability(u, estimates[0], estimates[1], ends[:, 0], ends[:, 1], count, tuple(reasons))


def _prepared(values: ArrayLike, thresholds: ArrayLike | None, least: int) -> tuple[Array, Array]:
    x = checked_values(values)
    if thresholds is None:
        distinct = np.unique(x)
        left = x.size - np.searchsorted(np.sort(x), distinct, side="right")
        usable = distinct[left >= LEFT]
        if not usable.size:
            raise InputError(
                f"{x.size} values are too few to choose thresholds that leave {LEFT} above them."
            )
        return x, np.unique(np.linspace(usable[0], usable[-1], min(MOST, usable.size)))
    u = checked_values(thresholds)
    for t in u:
        over = int(np.sum(x > t))
        if over < least:
            raise InputError(
                f"{over} of {x.size} values exceed the threshold {t:g}; at least {least} are needed."
            )
    return x, u


def _normal(confidence: float) -> float:
    return float(special.ndtri(0.5 + 0.5 * checked_confidence(confidence)))
