"""Clusters of exceedances: one event each, so that events can be taken as independent."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.errors import InputError
from calibrate.fitting.fits import checked_values

Array = NDArray[np.float64]
Counts = NDArray[np.intp]


@dataclass(frozen=True, slots=True, eq=False)
class Clusters:
    """The events of a record.

    Attributes
    ----------
    peaks, times : array, shape (c,)
        Largest value of each cluster and when it occurred (the first time, if several are equal).
    begins, ends : array, shape (c,)
        Times of the first and the last exceedance of each cluster.
    sizes : array of int, shape (c,)
        Exceedances in each.
    threshold, run_length : float
    """

    peaks: Array
    times: Array
    begins: Array
    ends: Array
    sizes: Counts
    threshold: float
    run_length: float

    @property
    def extremal_index(self) -> float:
        """Clusters per exceedance, between 0 and 1; 1 where every exceedance is an event of its own."""
        return self.peaks.size / float(np.sum(self.sizes)) if self.peaks.size else math.nan


def decluster(values: ArrayLike, times: ArrayLike, threshold: float, run_length: float) -> Clusters:
    """Group exceedances into clusters by the runs method.

    Parameters
    ----------
    values, times : array_like, shape (n,)
        In any order; times in any unit.
    threshold : float
        Values above it are exceedances.
    run_length : float
        Exceedances more than this apart in time belong to different clusters; in the unit of the times. For values
        at every unit of time, r means that a cluster ends with r successive values not above the threshold.

    Raises
    ------
    InputError
        Values or times are no such rows of equal length, the run length is negative, or nothing exceeds the threshold.

    References
    ----------
    R. L. Smith and I. Weissman, J. R. Statist. Soc. B 56 (1994) 515-528 (from memory).
    """
    x, t = checked_values(values), checked_values(times)
    if x.size != t.size:
        raise InputError(f"There are {x.size} values and {t.size} times.")
    if not (math.isfinite(run_length) and run_length >= 0.0):
        raise InputError(f"A run length must be zero or more; got {run_length!r}.")
    over = x > threshold
    if not over.any():
        raise InputError(f"None of the {x.size} values exceeds the threshold {threshold:g}.")
    x, t = x[over], t[over]
    order = np.argsort(t, kind="stable")
    x, t = x[order], t[order]
    begin = np.flatnonzero(np.concatenate(([True], np.diff(t) > run_length)))
    end = np.append(begin[1:], x.size)
    peaks = np.maximum.reduceat(x, begin)
    at = np.array([a + int(np.argmax(x[a:b])) for a, b in zip(begin, end, strict=True)])
    return Clusters(peaks, t[at], t[begin], t[end - 1], end - begin, float(threshold), float(run_length))


def dispersion(counts: ArrayLike) -> tuple[float, float]:
    """Return variance over mean of the yearly numbers of events, and the p-value against the Poisson process.

    Parameters
    ----------
    counts : array_like, shape (n,)
        Events of each year with a whole record, at least two years.

    Returns
    -------
    index, p_value : float
        The index is near 1 for a Poisson process; more points to clusters or seasons of different years. Two-sided
        p-value from the chi-square distribution of (n - 1) index.

    References
    ----------
    C. Cunnane, Water Resour. Res. 15 (1979) 489-494 (from memory).
    """
    n = checked_values(counts)
    if n.size < 2 or np.any(n < 0.0) or np.any(n != np.round(n)) or not np.any(n):
        raise InputError("Numbers of events must be whole numbers of at least two years, not all zero.")
    index = float(np.var(n, ddof=1) / np.mean(n))
    statistic, freedom = index * (n.size - 1), n.size - 1
    tails = float(special.chdtr(freedom, statistic)), float(special.chdtrc(freedom, statistic))
    return index, min(1.0, 2.0 * min(tails))
