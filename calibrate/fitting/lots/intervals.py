"""Intervals for the scatter between and within lots, from the profile of the restricted likelihood.

A parameter's interval is the range that it takes in the region where the log-likelihood falls short of its maximum
by less than half the chi-squared fractile with one degree of freedom. For a given ratio of variances the region is
an interval of the within variance whose ends are the roots of one convex function, so that each limit is a search
along one line. The restricted likelihood of uneven lots can have two maxima; an interval then spans both parts.

References
----------
.. [1] D. J. Venzon, S. H. Moolgavkar, A method for computing profile-likelihood-based confidence intervals,
   Applied Statistics 37 (1988) 87-94: the definition; the search here is along the ratio of variances.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from scipy.special import ndtri

from calibrate.fitting.lots.criterion import Criterion
from calibrate.fitting.lots.grouping import Array
from calibrate.fitting.lots.result import Interval

GRID = 41
ZOOMS = 5
"""Five grids, each over two steps of the one before: 1e-7 of the first range, 1e-13 of a smooth maximum."""
NEAR = 1e-10
"""Below this the parabola's root with one more term is as exact as the difference of exponentials."""
STEPS = 16
"""Newton's steps: full precision for every level up to 1 - 1e-12, from two values on; three to six are usual."""
EDGE = 1e-7
"""The deviance at the edge of the region is known to rounding only."""


def fall(level: float) -> float:
    """Return by how much the deviance may exceed its minimum: the chi-squared fractile, one degree of freedom."""
    return float(ndtri(0.5 + 0.5 * level) ** 2)


def variance_factor(excess: Array, freedom: int, *, upper: bool) -> Array:
    """Return an end of ``{v: 1/v - 1 + ln v <= excess/freedom}`` for a factor v on a variance.

    The left side is the deviance of a variance with ``freedom`` contrasts over its best one. With v = exp(-s) the
    condition is convex in s; Newton's steps on either side of zero start at the parabola's root.
    """
    side = -1.0 if upper else 1.0
    e = np.maximum(excess, 0.0) / freedom
    near = e < NEAR
    far = np.where(near, 1.0, e)
    s = side * np.sqrt(2.0 * far)
    for _ in range(STEPS):
        rise = np.expm1(s)
        step = (rise - s - far) / rise
        s = s - step
        if np.all(np.abs(step) <= 1e-14 * np.abs(s)):
            break
    return np.asarray(np.exp(-np.where(near, side * np.sqrt(2.0 * e) - e / 3.0, s)))


def ratio_interval(c: Criterion, best: float, level: float) -> Interval:
    """Return the profile interval of the ratio of variances around its estimate."""
    from scipy.optimize import brentq

    grain = float(c.sizes[-1])
    limit = float(c.deviance(np.asarray(best))) + fall(level)

    def excess(t: float) -> float:
        return float(c.deviance(np.asarray(math.expm1(t) / grain))) - limit

    estimate = math.log1p(grain * best)
    top = max(estimate, math.log1p(grain * c.ends()))
    while excess(top) <= 0.0:
        top += 1.0
    upper = brentq(excess, _last_inside(c, estimate, top, limit, grain), top, xtol=1e-14)
    if excess(0.0) <= 0.0:
        return 0.0, math.expm1(upper) / grain
    lower = brentq(excess, 0.0, _last_inside(c, estimate, 0.0, limit, grain), xtol=1e-14)
    return math.expm1(lower) / grain, math.expm1(upper) / grain


def _last_inside(c: Criterion, inside: float, outside: float, limit: float, grain: float) -> float:
    """Return the point of a grid that lies in the region and nearest to the outer end."""
    t = np.linspace(inside, outside, 4 * GRID)
    within = c.deviance(np.expm1(t) / grain) <= limit
    within[0] = True
    return float(t[np.flatnonzero(within)[-1]])


def sd_intervals(c: Criterion, best: float, ratios: Interval, level: float) -> tuple[Interval, Interval]:
    """Return the profile intervals of the sds between and within lots, in the unit of the criterion."""
    grain = float(c.sizes[-1])
    limit = float(c.deviance(np.asarray(best))) + fall(level)
    low, high = (math.log1p(grain * r) for r in ratios)

    def within(t: Array, *, upper: bool) -> Array:
        """Return an end of the within variance; NaN in a gap between two parts of the region."""
        ratio = np.expm1(t) / grain
        excess = limit - c.deviance(ratio)
        end = c.residual(ratio) * variance_factor(excess, c.n - 1, upper=upper)
        return np.asarray(np.where(excess < -EDGE, np.nan, end))

    def between(t: Array, *, upper: bool) -> Array:
        return np.expm1(t) / grain * within(t, upper=upper)

    def interval(variance: Callable[..., Array]) -> Interval:
        smallest = -_largest(lambda t: -variance(t, upper=False), low, high)
        return math.sqrt(smallest), math.sqrt(_largest(lambda t: variance(t, upper=True), low, high))

    return interval(between), interval(within)


def _largest(function: Callable[[Array], Array], low: float, high: float) -> float:
    """Return the largest value between two ends by ever finer grids."""
    value = -math.inf
    for _ in range(ZOOMS):
        t = np.linspace(low, high, GRID)
        values = function(t)
        i = int(np.nanargmax(values))
        value = max(value, float(values[i]))
        low, high = float(t[max(i - 1, 0)]), float(t[min(i + 1, GRID - 1)])
    return value


def sd_interval(sd: float, freedom: int, level: float) -> Interval:
    """Return the profile interval of one sd estimated with so many degrees of freedom."""
    excess = np.asarray(fall(level))
    low, high = (sd * math.sqrt(float(variance_factor(excess, freedom, upper=u))) for u in (False, True))
    return low, high
