"""Scatter between and within lots of any sizes: exact one-way restricted maximum likelihood."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from calibrate.errors import InputError
from calibrate.fitting.lots.anova import anova_scatter
from calibrate.fitting.lots.criterion import Criterion
from calibrate.fitting.lots.doubts import lot_doubts
from calibrate.fitting.lots.grouping import Grouped, Scale, grouped
from calibrate.fitting.lots.intervals import ratio_interval, sd_interval, sd_intervals
from calibrate.fitting.lots.result import Interval, LotScatter, LotShare

GRID = 400
ANY: Interval = (0.0, 1.0)


@dataclass(frozen=True, slots=True)
class _Estimate:
    """Results in the unit of z; deviance without the part of the unit."""

    mean: float
    between: float
    within: float
    total: float
    effective_n: float
    deviance: float
    between_interval: Interval
    within_interval: Interval
    intraclass_interval: Interval


def lot_scatter(
    values: ArrayLike,
    lots: ArrayLike,
    *,
    scale: Scale = "as measured",
    level: float = 0.90,
    where: str = "lots",
) -> LotScatter:
    """Estimate mean, scatter between lots and scatter within lots.

    Parameters
    ----------
    values : array, shape (n,)
        Specimens that were observed exactly, n >= 2.
    lots : sequence, shape (n,)
        Lot of each, as text or number.
    scale : {"as measured", "logarithmic"}
        Whether x or ln x is normal between and within lots.
    level : float
        Nominal coverage of the intervals, between 0 and 1.
    where : str
        Place that the doubts name.

    Returns
    -------
    LotScatter
        In the unit of the values (of ln x on the logarithmic scale).

    Raises
    ------
    InputError
        Wrong lengths or level, values that are not finite or all the same, a specimen without lot.

    Notes
    -----
    The restricted likelihood is maximised over the ratio of variances alone, with mean and within variance in
    closed form: a grid over all ratios that can hold the maximum, zero included, then the root of the slope. A
    maximum at zero is a pooled fit. Where no lot has any scatter the ratio is infinite and the lot means are an
    ordinary sample.

    Intervals by profile likelihood are approximate: near a true ratio of zero they cover more than they claim.

    References
    ----------
    .. [1] S. R. Searle, G. Casella, C. E. McCulloch, Variance Components, Wiley 1992, chapters 3, 6 and 7.
    """
    if not 0.0 < level < 1.0:
        raise InputError(f"The level of an interval lies between 0 and 1; got {level:g}.")
    g = grouped(values, lots, scale)
    e = _estimate(g, level)
    intraclass = e.between**2 / e.total**2 if math.isfinite(e.total) else math.nan
    u = g.unit
    return LotScatter(
        scale=scale,
        mean=g.centre + u * e.mean,
        between_sd=u * e.between,
        within_sd=u * e.within,
        total_sd=u * e.total,
        intraclass=intraclass,
        shares=_shares(g, e),
        effective_n=e.effective_n,
        se_mean=u * e.total / math.sqrt(e.effective_n),
        level=level,
        between_interval=(u * e.between_interval[0], u * e.between_interval[1]),
        within_interval=(u * e.within_interval[0], u * e.within_interval[1]),
        intraclass_interval=e.intraclass_interval,
        log_likelihood=-0.5 * e.deviance - (g.n - 1) * math.log(u),
        anova=anova_scatter(g),
        doubts=lot_doubts(g, intraclass, e.intraclass_interval, e.effective_n, where),
    )


def _estimate(g: Grouped, level: float) -> _Estimate:
    """Return the estimates, for each way in which the sample may fail to tell something."""
    c = Criterion.of(g)
    zero = np.asarray(0.0)
    pooled = float(np.sqrt(c.residual(zero)))
    if g.k == 1:
        interval = sd_interval(pooled, g.n - 1, level)
        nan = math.nan
        deviance = float(c.deviance(zero))
        return _Estimate(float(c.means[0]), nan, pooled, nan, nan, deviance, (0.0, math.inf), interval, ANY)
    if g.k == g.n:
        upper = sd_interval(pooled, g.n - 1, level)[1]
        mean, deviance = float(c.weights(zero)[2]), float(c.deviance(zero))
        return _Estimate(mean, math.nan, math.nan, pooled, g.n, deviance, (0.0, upper), (0.0, upper), ANY)
    if g.within == 0.0:
        between = float(np.std(g.offsets, ddof=1))
        interval = sd_interval(between, g.k - 1, level)
        mean = float(np.mean(g.offsets))
        return _Estimate(mean, between, 0.0, between, g.k, -math.inf, interval, (0.0, 0.0), (1.0, 1.0))
    ratio = best_ratio(c)
    r = np.asarray(ratio)
    _, total, mean_ = c.weights(r)
    variance = float(c.residual(r))
    ratios = ratio_interval(c, ratio, level)
    between_interval, within_interval = sd_intervals(c, ratio, ratios, level)
    return _Estimate(
        mean=float(mean_),
        between=math.sqrt(ratio * variance),
        within=math.sqrt(variance),
        total=math.sqrt((1.0 + ratio) * variance),
        effective_n=(1.0 + ratio) * float(total),
        deviance=float(c.deviance(r)),
        between_interval=between_interval,
        within_interval=within_interval,
        intraclass_interval=(ratios[0] / (1.0 + ratios[0]), ratios[1] / (1.0 + ratios[1])),
    )


def best_ratio(c: Criterion) -> float:
    """Return the ratio of variances with the largest restricted likelihood, 0 included.

    Needs two lots or more, one of them with two specimens or more, and some scatter within. The grid is uniform
    in ``ln(1 + r m)``, m the largest lot: the weights have no finer structure than that.
    """
    from scipy.optimize import brentq

    grain = float(c.sizes[-1])

    def slope(t: float) -> float:
        ratio = np.asarray(math.expm1(t) / grain)
        return float(c.slope(ratio) * (1.0 + grain * ratio))

    t = np.linspace(0.0, math.log1p(grain * c.ends()), GRID)
    slopes = c.slope(np.expm1(t) / grain)
    falls = np.flatnonzero((slopes[:-1] < 0.0) & (slopes[1:] >= 0.0))
    stationary = [0.0] + [brentq(slope, t[i], t[i + 1], xtol=1e-15, rtol=1e-14) for i in falls]
    ratios = np.expm1(np.array(stationary)) / grain
    return float(ratios[int(np.argmin(c.deviance(ratios)))])


def _shares(g: Grouped, e: _Estimate) -> tuple[LotShare, ...]:
    """Return what a figure by lot shows."""
    sizes = g.sizes.astype(float)
    if g.k == 1 or e.within == 0.0:
        pull = np.ones(g.k)
    else:
        ratio = (e.between / e.within) ** 2
        pull = sizes * ratio / (1.0 + sizes * ratio)
    shrunken = e.mean + pull * (g.offsets - e.mean)
    return tuple(
        LotShare(
            name=name,
            size=int(size),
            mean=g.centre + g.unit * float(offset),
            sd=g.unit * math.sqrt(square / (size - 1)) if size > 1 else math.nan,
            lowest=float(np.min(x)),
            highest=float(np.max(x)),
            shrunken_mean=g.centre + g.unit * float(shrunk),
        )
        for name, size, offset, square, x, shrunk in zip(
            g.names, g.sizes, g.offsets, g.squares, g.by_lot(), shrunken, strict=True
        )
    )
