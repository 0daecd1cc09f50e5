"""Scatter between and within lots by the analysis of variance: closed forms."""

from __future__ import annotations

import math

import numpy as np

from calibrate.fitting.lots.grouping import Grouped
from calibrate.fitting.lots.result import AnovaScatter


def anova_scatter(g: Grouped) -> AnovaScatter:
    """Return the estimates that equate mean squares with their expectations.

    References
    ----------
    .. [1] S. R. Searle, G. Casella, C. E. McCulloch, Variance Components, Wiley 1992, section 3.6.
    """
    between, within = mean_squares(g)
    n0 = (g.n - float(np.sum(g.sizes.astype(float) ** 2)) / g.n) / (g.k - 1) if g.k > 1 else math.nan
    variance = (between - within) / n0
    return AnovaScatter(
        between_mean_square=between * g.unit**2,
        within_mean_square=within * g.unit**2,
        mean_size=n0,
        between_sd=g.unit * math.sqrt(max(variance, 0.0)) if not math.isnan(variance) else math.nan,
        within_sd=g.unit * math.sqrt(within),
        between_variance=variance * g.unit**2,
    )


def mean_squares(g: Grouped) -> tuple[float, float]:
    """Return the mean squares between and within lots in the unit of z; NaN without a degree of freedom."""
    mean = float(g.sizes @ g.offsets) / g.n
    between = float(g.sizes @ (g.offsets - mean) ** 2) / (g.k - 1) if g.k > 1 else math.nan
    within = g.within / (g.n - g.k) if g.n > g.k else math.nan
    return between, within
