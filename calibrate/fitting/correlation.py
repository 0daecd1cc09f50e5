"""Correlation estimated from paired records, with its confidence interval."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import special

from calibrate.errors import InputError, Problem, did_you_mean

Array = npt.NDArray[np.float64]

KINDS = ("product-moment", "rank")

FEWEST = 4
"""Fewest pairs: the variance of the transformed coefficient is proportional to 1/(n - 3)."""


@dataclass(frozen=True, slots=True)
class CorrelationEstimate:
    """An estimate of correlation.

    Attributes
    ----------
    kind : str
        "product-moment" (Pearson) or "rank" (Spearman).
    coefficient : float
    lower, upper : float
        Two-sided confidence interval. For the product-moment it assumes that the pairs follow a bivariate normal
        distribution; it covers too seldom where tails are heavier.
    n : int
        Number of pairs.
    p_independent : float
        Two-sided p-value of the hypothesis that the variables are independent.
    confidence : float
        Confidence of the interval.
    """

    kind: str
    coefficient: float
    lower: float
    upper: float
    n: int
    p_independent: float
    confidence: float


def estimate_correlation(
    x: npt.ArrayLike, y: npt.ArrayLike, kind: str = "product-moment", *, confidence: float = 0.95
) -> CorrelationEstimate:
    """Return the correlation of paired values with its interval.

    Parameters
    ----------
    x, y : array_like, shape (n,)
        Complete pairs, n >= 4, each variable in its own unit.
    kind : {"product-moment", "rank"}
        Pearson's coefficient of the values, or Spearman's of their ranks (equal values share their mean rank).
    confidence : float
        Confidence of the two-sided interval.

    Raises
    ------
    InputError
        Values that are not pairs of finite numbers, fewer than four of them, a variable without scatter, an unknown
        kind, or a confidence outside (0, 1).

    Notes
    -----
    Product-moment: R. A. Fisher, Metron 1 (1921): artanh r is nearly normal with variance 1/(n - 3) for bivariate
    normal pairs. Rank: D. G. Bonett & T. A. Wright, Psychometrika 65 (2000) 23: variance (1 + r**2/2)/(n - 3), good
    for |r| < 0.95. The p-value takes r sqrt((n - 2)/(1 - r**2)) as Student's t, which is exact for the product-moment
    of normal pairs and an approximation for ranks. All from memory.
    """
    if kind not in KINDS:
        raise InputError(
            Problem(f"there is no kind of correlation '{kind}'.", suggestion=did_you_mean(kind, KINDS))
        )
    if not 0.0 < confidence < 1.0:
        raise InputError(f"The confidence must lie between 0 and 1; got {confidence:g}.")
    a, b = _pairs(x, y)
    r = _coefficient(a, b) if kind == "product-moment" else _coefficient(_ranks(a), _ranks(b))
    n = a.size
    variance = (1.0 if kind == "product-moment" else 1.0 + 0.5 * r * r) / (n - 3.0)
    half = -float(special.ndtri(0.5 * (1.0 - confidence))) * math.sqrt(variance)
    lower = upper = r
    p_independent = 0.0
    if abs(r) < 1.0:
        lower, upper = math.tanh(math.atanh(r) - half), math.tanh(math.atanh(r) + half)
        t = abs(r) * math.sqrt((n - 2.0) / ((1.0 + r) * (1.0 - r)))
        p_independent = float(2.0 * special.stdtr(n - 2, -t))
    return CorrelationEstimate(kind, r, lower, upper, n, p_independent, confidence)


def _pairs(x: npt.ArrayLike, y: npt.ArrayLike) -> tuple[Array, Array]:
    a, b = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if a.ndim != 1 or b.ndim != 1 or a.size != b.size:
        raise InputError(f"Correlation needs pairs of values; got the shapes {a.shape} and {b.shape}.")
    if a.size < FEWEST:
        raise InputError(f"Correlation needs at least {FEWEST} pairs of values; got {a.size}.")
    for name, values in (("first", a), ("second", b)):
        if not np.isfinite(values).all():
            at = int(np.argmin(np.isfinite(values)))
            raise InputError(
                f"Correlation needs finite pairs; pair {at + 1} has {values[at]} as its {name} value."
            )
        if np.all(values == values[0]):
            raise InputError(
                f"Correlation needs scatter in both variables; all {name} values are {values[0]:g}."
            )
    return a, b


def _coefficient(x: Array, y: Array) -> float:
    a, b = _unit(x), _unit(y)
    return float(np.clip(np.sum(a * b), -1.0, 1.0))


def _unit(x: Array) -> Array:
    """Return the deviations from the mean, scaled to length 1; scaled first, so that no square overflows."""
    deviation = x / np.max(np.abs(x))
    deviation = deviation - np.mean(deviation)
    deviation = deviation / np.max(np.abs(deviation))
    return np.asarray(deviation / math.sqrt(float(np.sum(deviation * deviation))))


def _ranks(x: Array) -> Array:
    """Return the ranks from 1, equal values sharing their mean."""
    _, where, count = np.unique(x, return_inverse=True, return_counts=True)
    return np.asarray((np.cumsum(count) - 0.5 * (count - 1.0))[where])
