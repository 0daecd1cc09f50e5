"""Rounding of the values, and loads at which suspiciously many specimens are recorded."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.records.observations import Array, Observations
from calibrate.records.screening.censored_normal import censored_normal
from calibrate.records.screening.moments import robust_sd

TIE_LEVEL = 0.01
"""Of the test for too many equal values, over all values of the sample."""

_SHARE_FOR_TIES = 0.8
_DENSITY_RATIO = 2.0
_DIGITS = 10
_MOST = 5


@dataclass(frozen=True, slots=True)
class Tie:
    """Equal values that rounding alone does not explain.

    Attributes
    ----------
    value : float
    count : int
        Specimens observed exactly with that value.
    position : {"minimum", "maximum", "inside"}
        Where it lies among the exact values.
    p_value : float
        Of so many equal values by rounding, times the number of different
        values tried, at most 1.
    specimens : tuple of int
        Positions in the sample, from 0.
    mean_now : float or None
        Mean when the specimens are taken as failures at that value (by the
        normal likelihood of all observations).
    mean_if_survivors, mean_if_below : float or None
        Mean when the true values lie above (rig limit, proof load), or below
        (limit of detection); normal likelihood; None where it has no maximum.
    """

    value: float
    count: int
    position: Literal["minimum", "maximum", "inside"]
    p_value: float
    specimens: tuple[int, ...]
    mean_now: float | None
    mean_if_survivors: float | None
    mean_if_below: float | None


@dataclass(frozen=True, slots=True)
class Repeats:
    """Rounding and repeated values of the exact observations.

    Attributes
    ----------
    resolution : float or None
        Largest step 1, 2 or 5 times a power of ten of which all values are
        multiples; None where they show more than ten digits or are all zero.
    resolution_of_most : float or None
        The same for at least 80 % of the different values.
    n_distinct : int
    tied_share : float
        Share of the specimens whose value occurs more than once.
    rounding_share : float or None
        Variance ``resolution^2/12`` that rounding adds, relative to the
        sample variance.
    ties : tuple of Tie
        The heaviest first, five at most.
    """

    resolution: float | None
    resolution_of_most: float | None
    n_distinct: int
    tied_share: float
    rounding_share: float | None
    ties: tuple[Tie, ...]


def resolution(values: ArrayLike, share: float = 1.0) -> float | None:
    """Return the largest step (1, 2, 5)·10^k on which the values lie.

    Parameters
    ----------
    values : array_like, shape (n,)
    share : float
        Share of the different values that have to lie on the grid.

    Returns
    -------
    float or None
        None where more than ten digits are needed or all values are zero.
    """
    x = np.unique(np.abs(np.asarray(values, dtype=np.float64)))
    top = float(x[-1])
    if top == 0.0:
        return None
    needed = math.ceil(share * x.size - 1e-9)
    highest = math.floor(math.log10(top))
    for k in range(highest, highest - _DIGITS, -1):
        # An integer power of ten is exact, its inverse is not.
        decimal = x / 10.0**k if k >= 0 else x * 10.0**-k
        for m in (5, 2, 1):
            count = decimal / m
            on_grid = np.abs(count - np.rint(count)) <= 8.0 * np.finfo(float).eps * count
            if np.count_nonzero(on_grid) >= needed and (count[on_grid] > 0.5).any():
                return float(m * 10.0**k if k >= 0 else m / 10.0**-k)
    return None


def repeats(observations: Observations) -> Repeats:
    """Return rounding, repeated values and loads shared by too many specimens.

    Parameters
    ----------
    observations : Observations
        At least one exact value.

    Notes
    -----
    Let h be the step to which most values are rounded, a decimal one or, after
    a conversion of units, any other, and v a value that m
    specimens share. Were the density at v at most twice the average around
    it, each other specimen in a window of b more steps would fall on v with
    probability ``q = 2/(2 + b)`` at most; with K specimens in the window but
    not on v, the chance of m or more is the binomial upper tail
    ``P(Bin(m-1+K, q) >= m-1)`` (one specimen puts v there). The window reaches
    one robust standard deviation to both sides, but not beyond the ends of the
    sample. The chance is multiplied by the number of different values
    (Bonferroni). Where rounding is coarser than a standard deviation nothing
    can be said. The argument needs no family; the factor two is a
    precaution for peaked densities (own derivation).
    """
    where = np.flatnonzero(observations.exact)
    x = observations.values[where]
    # Equal to twelve digits is equal: arithmetic on the values may have left its rounding errors.
    key = np.rint(x / (float(np.abs(x).max()) or 1.0) * 1e12)
    _, first, inverse, counts = np.unique(key, return_index=True, return_inverse=True, return_counts=True)
    distinct = x[first]
    step, common = resolution(x), resolution(x, _SHARE_FOR_TIES)
    variance = float(np.var(x, ddof=1)) if x.size > 1 and distinct.size > 1 else 0.0
    ties = []
    if distinct.size > 1 and counts.max() >= 3:
        chance = _chances(x, distinct, counts.astype(np.int64), common)
        as_they_are = censored_normal(observations)
        for i in sorted(np.flatnonzero((counts >= 3) & (chance < TIE_LEVEL)), key=lambda i: -counts[i])[
            :_MOST
        ]:
            specimens = where[inverse == i]
            ties.append(
                Tie(
                    value=float(distinct[i]),
                    count=int(counts[i]),
                    position="minimum" if i == 0 else "maximum" if i == distinct.size - 1 else "inside",
                    p_value=float(chance[i]),
                    specimens=tuple(int(s) for s in specimens),
                    mean_now=None if as_they_are is None else as_they_are[0],
                    mean_if_survivors=_mean_if(observations, specimens, upwards=True),
                    mean_if_below=_mean_if(observations, specimens, upwards=False),
                )
            )
    return Repeats(
        resolution=step,
        resolution_of_most=common,
        n_distinct=int(distinct.size),
        tied_share=float(counts[counts > 1].sum()) / x.size,
        rounding_share=step**2 / 12.0 / variance if step is not None and variance > 0.0 else None,
        ties=tuple(ties),
    )


def _chances(x: Array, distinct: Array, counts: NDArray[np.int64], common: float | None) -> Array:
    """Return the chance of each count, times the number of different values, shape (distinct,)."""
    spread = robust_sd(x) or robust_sd(distinct) or float(np.std(x))
    step = common or _other_step(distinct) or 10.0**-_DIGITS * float(np.abs(x).max())
    if step > spread:
        return np.ones(distinct.size)
    reach = math.floor(spread / step + 1e-9) * step * (1.0 + 1e-9)
    below = np.concatenate([[0], np.cumsum(counts)])
    first = below[np.searchsorted(distinct, distinct - reach, side="left")]
    last = below[np.searchsorted(distinct, distinct + reach, side="right")]
    around = last - first - counts
    # Beyond the ends of the sample there may be no density: the window stops there.
    width = np.minimum(distinct + reach, distinct[-1]) - np.maximum(distinct - reach, distinct[0])
    q = _DENSITY_RATIO / (_DENSITY_RATIO + np.rint(width / step))
    p = special.betainc(np.maximum(counts - 1.0, 1.0), around + 1.0, q)
    return np.asarray(np.minimum(np.where(counts > 1, p, 1.0) * distinct.size, 1.0))


def _other_step(distinct: Array) -> float | None:
    """Return the smallest distance between values if most distances are multiples of it."""
    gaps = np.diff(distinct)
    step = float(gaps.min())
    count = gaps / step
    on_grid = np.abs(count - np.rint(count)) < 1e-4 * count
    return step if np.mean(on_grid) >= _SHARE_FOR_TIES else None


def _mean_if(observations: Observations, specimens: Array, *, upwards: bool) -> float | None:
    lower, upper = observations.lower.copy(), observations.upper.copy()
    if upwards:
        upper[specimens] = np.inf
    else:
        lower[specimens] = -np.inf
    found = censored_normal(Observations(lower, upper))
    return None if found is None else found[0]
