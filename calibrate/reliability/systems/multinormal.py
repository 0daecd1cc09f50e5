"""Probabilities of the multivariate normal distribution for many situations at once, by the way that suits each."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.errors import InputError
from calibrate.reliability.systems.bivariate import FAR, bivariate
from calibrate.reliability.systems.one_factor import loadings, one_factor
from calibrate.reliability.systems.separation import POINTS, separation
from calibrate.reliability.systems.trivariate import trivariate

Array = npt.NDArray[np.float64]

# What rounding may add to a correlation of 1.
_OVER = 1e-9
_ROUNDING = 1e-14
_BIVARIATE_ERROR = 1e-12


@dataclass(frozen=True, slots=True, eq=False)
class Probability:
    """Probabilities of n situations.

    Attributes
    ----------
    value : array (n,)
    error : array (n,)
        Estimate of the error of integration: of rounding and quadrature up to three variables and with one common
        factor; otherwise the standard error over the random shifts of a lattice.
    """

    value: Array
    error: Array


def orthant(beta: Array, correlation: Array, *, points: int = POINTS) -> Probability:
    """Return P(all Z_i <= -beta_i) of standard normal variables: the first-order probability of a parallel system.

    Parameters
    ----------
    beta : array (k, n)
        One bound for each variable; a situation with NaN gets NaN.
    correlation : array (k, k) or (k, k, n)
        Symmetric, unit diagonal; it may be singular.
    points : int
        Points of the lattice for four and more variables without a common factor, a power of 2; each of eight
        shifts has as many.

    Returns
    -------
    Probability
        With one variable from its distribution; with two to about 1e-12 of the value, also in far tails; where the
        correlation is that of one common factor, by one integral; with three variables by one integral over the
        bivariate distribution; otherwise by separation of variables.

    Raises
    ------
    InputError
        The shapes do not fit together, or ``points`` is no power of 2.
    """
    beta, correlation = checked(beta, correlation)
    check_points(points)
    bad = unusable(beta, correlation)
    b, r = neutral(beta, correlation, bad)
    value, error = below(-b, r, points)
    return Probability(np.where(bad, np.nan, value), np.where(bad, np.nan, error))


def check_points(points: int) -> None:
    """Raise unless this is a number of points that a lattice may have."""
    if points < 16 or points & (points - 1):
        raise InputError(f"points = {points} must be a power of 2 of at least 16.")


def checked(beta: Array, correlation: Array) -> tuple[Array, Array]:
    """Return both as float64 arrays (k, n) and (k, k, n), or raise."""
    beta = np.asarray(beta, dtype=np.float64)
    correlation = np.asarray(correlation, dtype=np.float64)
    if beta.ndim != 2 or not len(beta):
        raise InputError(f"beta has shape {beta.shape}; expected (components, situations).")
    k, n = beta.shape
    if correlation.shape == (k, k):
        correlation = correlation[:, :, None]
    if correlation.shape not in ((k, k, n), (k, k, 1)):
        raise InputError(f"correlation has shape {correlation.shape}; expected {(k, k)} or {(k, k, n)}.")
    return beta, np.broadcast_to(correlation, (k, k, n))


def unusable(beta: Array, correlation: Array) -> npt.NDArray[np.bool_]:
    """Return which situations have no probability: NaN, or correlations beyond 1."""
    bad = np.any(np.isnan(beta), axis=0)
    for row in correlation:
        # Written so that NaN is unusable too.
        bad |= ~np.all(np.abs(row) <= 1.0 + _OVER, axis=0)
    return np.asarray(bad)


def neutral(beta: Array, correlation: Array, bad: npt.NDArray[np.bool_]) -> tuple[Array, Array]:
    """Return finite bounds, and harmless numbers in place of the situations that are unusable."""
    unit = np.eye(len(beta))[:, :, None]
    correlation = np.where(unit > 0.0, 1.0, np.clip(correlation, -1.0, 1.0))
    return np.where(bad, 1.0, np.clip(beta, -FAR, FAR)), np.where(bad, unit, correlation)


def below(b: Array, correlation: Array, points: int = POINTS) -> tuple[Array, Array]:
    """Return P(all Z_i <= b_i) and its error for finite b (k, n) and correlation (k, k, n)."""
    k, n = b.shape
    if k == 0:
        return np.ones(n), np.zeros(n)
    if k == 1:
        value = special.ndtr(b[0])
        return value, _ROUNDING * value
    if k == 2:
        value = bivariate(b[0], b[1], correlation[0, 1])
        return value, _BIVARIATE_ERROR * value
    value, error = np.empty(n), np.empty(n)
    loading, simple = loadings(correlation)
    at = np.flatnonzero(simple)
    if at.size:
        value[at], error[at] = one_factor(b[:, at], loading[:, at])
    at = np.flatnonzero(~simple)
    if at.size and k == 3:
        value[at], error[at] = trivariate(b[:, at], correlation[:, :, at])
    elif at.size:
        value[at], error[at] = separation(b[:, at], correlation[:, :, at], points)
    return value, error
