"""Threshold exceedances: generalised Pareto excesses that come as a Poisson process.

The steps of a study: `mean_residual_life` and `stability` to choose the threshold, `decluster` to make events
independent, `fit_excesses`, and `annual_maximum` for the distribution of the maximum of a period.
"""

from calibrate.actions.thresholds.clusters import Clusters, decluster, dispersion
from calibrate.actions.thresholds.diagnostics import (
    MeanResidualLife,
    Stability,
    mean_residual_life,
    stability,
)
from calibrate.actions.thresholds.excesses import ExcessFit, fit_excesses, fit_exponential_excesses
from calibrate.actions.thresholds.level_intervals import level_interval
from calibrate.actions.thresholds.periods import PeriodMaximum, annual_maximum

__all__ = [
    "Clusters",
    "ExcessFit",
    "MeanResidualLife",
    "PeriodMaximum",
    "Stability",
    "annual_maximum",
    "decluster",
    "dispersion",
    "fit_excesses",
    "fit_exponential_excesses",
    "level_interval",
    "mean_residual_life",
    "stability",
]
