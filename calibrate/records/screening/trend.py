"""Whether the values drift in the order of testing."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from calibrate.records.observations import Array

LEVEL = 0.05

_ALL_PAIRS = 1000
"""Up to this size the slope is the median over all pairs."""


@dataclass(frozen=True, slots=True)
class Trend:
    """Trend in the order of testing.

    Attributes
    ----------
    tau : float
        Kendall's tau-b of value and order.
    p_value : float
        Two-sided, of no trend (Mann-Kendall).
    slope, slope_low, slope_high : float
        Change of the value for one step of the order, and its 95 % interval.
    n_runs, n_above, n_below : int
        Runs above and below the median, and the values there; values equal
        to the median are left out.
    runs_p_value : float or None
        Two-sided, exact, of that many or few runs; None where all values lie
        on one side.
    """

    tau: float
    p_value: float
    slope: float
    slope_low: float
    slope_high: float
    n_runs: int
    n_above: int
    n_below: int
    runs_p_value: float | None


def trend(values: ArrayLike, order: ArrayLike) -> Trend | None:
    """Test for a trend.

    Parameters
    ----------
    values : array_like, shape (n,)
    order : array_like, shape (n,)
        Rank, time, date or ISO text of a date: numbers are used as they are,
        anything else by its rank. Equal entries are tested at the same time;
        for the runs they keep the order of the sample.

    Returns
    -------
    Trend or None
        None below four values, or where all values or all orders are equal.

    Notes
    -----
    The slope is the median of the slopes between all pairs with the interval
    of Sen; above 1000 values, between the pairs that lie half the sample
    apart, with the interval of a sign test.

    References
    ----------
    .. [1] M. G. Kendall, Rank Correlation Methods, 4th ed. (1970).
    .. [2] P. K. Sen, Estimates of the regression coefficient based on
       Kendall's tau, JASA 63 (1968) 1379-1389.
    .. [3] H. Theil, A rank-invariant method of linear and polynomial
       regression analysis (1950): complete and incomplete method.
    """
    from scipy import stats

    x = np.asarray(values, dtype=np.float64)
    t = _numbers(order)
    if x.size < 4 or np.ptp(x) == 0.0 or np.ptp(t) == 0.0:
        return None
    kendall = stats.kendalltau(t, x)
    if x.size <= _ALL_PAIRS:
        found = stats.theilslopes(x, t, alpha=0.95)
        slope, low, high = float(found.slope), float(found.low_slope), float(found.high_slope)
    else:
        slope, low, high = _incomplete_slope(x, t)
    above, runs_p = runs_test(x[np.argsort(t, kind="stable")])
    return Trend(
        tau=float(kendall.statistic),
        p_value=float(kendall.pvalue),
        slope=slope,
        slope_low=low,
        slope_high=high,
        n_runs=int(1 + np.count_nonzero(above[1:] != above[:-1])) if above.size else 0,
        n_above=int(np.count_nonzero(above)),
        n_below=int(np.count_nonzero(~above)),
        runs_p_value=runs_p,
    )


def _numbers(order: ArrayLike) -> Array:
    t = np.asarray(order)
    if t.dtype.kind in "fiub":
        return np.asarray(t, dtype=np.float64)
    return np.asarray(np.unique(t, return_inverse=True)[1], dtype=np.float64)


def _incomplete_slope(x: Array, t: Array) -> tuple[float, float, float]:
    by_time = np.argsort(t, kind="stable")
    x, t = x[by_time], t[by_time]
    half = x.size // 2
    run = t[x.size - half :] - t[:half]
    slopes = np.sort((x[x.size - half :] - x[:half])[run > 0.0] / run[run > 0.0])
    m = slopes.size  # never zero: were all pairs at one time each, all values would be at one time
    cut = max(int((m - 1.959963984540054 * math.sqrt(m)) / 2.0), 0)
    return float(np.median(slopes)), float(slopes[cut]), float(slopes[m - 1 - cut])


def runs_test(x: Array) -> tuple[np.ndarray, float | None]:
    """Return which values lie above the median, and the two-sided p-value of the runs of them.

    Values equal to the median are left out.

    References
    ----------
    .. [1] A. Wald, J. Wolfowitz, On a test whether two samples are from the
       same population, Annals of Mathematical Statistics 11 (1940) 147-162.
    """
    middle = np.median(x)
    above = x[x != middle] > middle
    m, n = int(np.count_nonzero(above)), int(np.count_nonzero(~above))
    if m == 0 or n == 0:
        return above, None
    seen = 1 + int(np.count_nonzero(above[1:] != above[:-1]))
    r = np.arange(2, 2 * min(m, n) + 2)
    k = r // 2
    even = np.log(2.0) + _log_comb(m - 1, k - 1) + _log_comb(n - 1, k - 1)
    odd = np.logaddexp(
        _log_comb(m - 1, k) + _log_comb(n - 1, k - 1), _log_comb(m - 1, k - 1) + _log_comb(n - 1, k)
    )
    chance = np.exp(np.where(r % 2 == 0, even, odd) - _log_comb(m + n, np.array(m)))
    few, many = float(chance[r <= seen].sum()), float(chance[r >= seen].sum())
    return above, min(1.0, 2.0 * min(few, many))


def _log_comb(n: int, k: Array | np.ndarray) -> Array:
    with np.errstate(divide="ignore"):
        inside = (k >= 0) & (k <= n)
        safe = np.where(inside, k, 0)
        value = special.gammaln(n + 1.0) - special.gammaln(safe + 1.0) - special.gammaln(n - safe + 1.0)
    return np.asarray(np.where(inside, value, -np.inf))
