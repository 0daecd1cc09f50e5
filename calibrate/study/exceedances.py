"""Variables that are the maximum of a period, from threshold exceedances: fit, return levels, other thresholds."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.return_levels import YEARS, ReturnLevels, return_period
from calibrate.actions.thresholds import (
    ExcessFit,
    MeanResidualLife,
    PeriodMaximum,
    Stability,
    dispersion,
    fit_excesses,
    fit_exponential_excesses,
    level_interval,
    mean_residual_life,
    stability,
)
from calibrate.distributions import Distribution
from calibrate.errors import Doubt
from calibrate.fitting import plotting_positions
from calibrate.records import Sample
from calibrate.study.events import Events, find_events
from calibrate.study.exceedance_doubts import GAPS, exceedance_doubts
from calibrate.study.model import Exceedances, Study, Variable

Array = NDArray[np.float64]

CONFIDENCE = 0.95
"""Of the intervals of return levels and of the figures for the choice of a threshold."""

WIDER = 8
"""Times the number of exceedances of the chosen threshold that the lowest one looked at leaves above it."""

LEFT = 10
"""Events that are left above a threshold that is looked at beside the chosen one."""

THRESHOLDS = 25
"""Thresholds that are looked at."""


@dataclass(frozen=True, slots=True, eq=False)
class ExceedanceModel:
    """A variable that is the maximum of a period, in the unit of the records unless said otherwise.

    Attributes
    ----------
    fit : ExcessFit
        Of the excesses of the events, with their rate.
    events : Events
    run_length : float or None
        In years.
    maximum : PeriodMaximum
        Of the period of the variable.
    distribution : Distribution
        The same in SI units.
    dispersion : (float, float) or None
        Variance over mean of the yearly numbers of events, and its p-value; None where they are not known.
    levels : ReturnLevels
        A return period is the reciprocal of the probability that the level is exceeded in a year.
    empirical : (array, array)
        Return periods in years and values of the ordered events.
    mean_residual_life, stability
        Of the events over a range of thresholds, each threshold with its own events.
    doubts : tuple of Doubt
    """

    fit: ExcessFit
    events: Events
    run_length: float | None
    maximum: PeriodMaximum
    distribution: Distribution
    dispersion: tuple[float, float] | None
    levels: ReturnLevels
    empirical: tuple[Array, Array]
    mean_residual_life: MeanResidualLife
    stability: Stability
    doubts: tuple[Doubt, ...]

    @property
    def family(self) -> str:
        """Family of the maximum."""
        return self.distribution.family.name

    @property
    def n(self) -> int:
        """Number of events."""
        return self.fit.n


def exceedance_model(study: Study, variable: Variable) -> ExceedanceModel:
    """Fit the exceedances of a variable and return the maximum of its period.

    Raises
    ------
    InputError
        The excesses cannot be fitted.
    """
    asked, period = variable.exceedances, variable.period
    assert asked is not None
    assert period is not None
    assert variable.records is not None
    sample = study.records[variable.records]
    events = find_events(sample, asked)
    estimate = fit_exponential_excesses if variable.families == ("gumbel",) else fit_excesses
    fit = estimate(events.peaks, asked.threshold, asked.years)
    maximum = fit.maximum(period)
    levels = _levels(fit)
    found = _dispersion(events, asked)
    looked_at = _thresholds(sample, asked)
    # What lies below the threshold matters for the periods that the study computes with, not for a single year.
    combined = any(a.name == variable.name for a in study.combination)
    whole = variable.converted and not combined
    periods = (study.reference_period, *study.other_periods) if whole else (period,)
    doubts = (
        *fit.doubts,
        *fit.maximum(min(periods)).doubts,
        *levels.doubts,
        *exceedance_doubts(fit, events, asked, found),
    )
    return ExceedanceModel(
        fit=fit,
        events=events,
        run_length=asked.run_length,
        maximum=maximum,
        distribution=maximum.distribution.scaled(sample.unit.factor),
        dispersion=found,
        levels=levels,
        empirical=_empirical(fit),
        mean_residual_life=_mean_residual_life(looked_at),
        stability=_stability(looked_at),
        doubts=tuple(Doubt(d.code, d.message, f"variables.{variable.name}") for d in doubts),
    )


def _dispersion(events: Events, asked: Exceedances) -> tuple[float, float] | None:
    """Compare the years where there are at least two, and no gaps that make them differ."""
    counts = events.yearly_counts()
    if counts.size < 2 or not counts.any() or events.span - asked.years > GAPS:
        return None
    return dispersion(counts)


def _levels(fit: ExcessFit) -> ReturnLevels:
    years = np.array(YEARS)
    # The level of annual probability 1/T is that of the rate -ln(1 - 1/T).
    apart = -1.0 / np.log1p(-1.0 / years)
    above = fit.rate * apart > 1.0
    years, apart = years[above], apart[above]
    ends = np.array([level_interval(fit, float(t), CONFIDENCE) for t in apart]).reshape(-1, 2)
    lost = years[~np.isfinite(ends).all(axis=1)]
    doubts = []
    if lost.size:
        listed = ", ".join(f"{t:g}" for t in lost)
        message = f"No interval was found for the levels of return period {listed} years."
        doubts.append(Doubt("no-interval", message, "excesses"))
    return ReturnLevels(
        years, fit.level(apart), ends[:, 0], ends[:, 1], years > fit.years, CONFIDENCE, "profile likelihood",
        tuple(doubts),
    )  # fmt: skip


def _empirical(fit: ExcessFit) -> tuple[Array, Array]:
    """Return Hazen's plotting positions of the events, by the rate at which they are exceeded."""
    above = 1.0 - plotting_positions(fit.n)
    return return_period(np.exp(-fit.rate * above)), fit.threshold + np.sort(fit.excesses)


# Choice of the threshold ------------------------------


def _thresholds(sample: Sample, asked: Exceedances) -> list[tuple[float, Array]]:
    """Return thresholds about the chosen one with the largest values of their events."""
    ordered = np.sort(sample.values)
    n = ordered.size
    wide = WIDER * int(np.count_nonzero(ordered > asked.threshold))
    low = min(float(ordered[max(n - wide - 1, 0)]), asked.threshold)
    high = max(float(ordered[max(n - LEFT - 1, 0)]), asked.threshold)
    looked_at = np.unique(np.append(np.linspace(low, high, THRESHOLDS), asked.threshold))
    found = [(float(t), find_events(sample, asked, float(t)).peaks) for t in looked_at]
    return [(t, peaks) for t, peaks in found if peaks.size >= LEFT or t == asked.threshold]


def _mean_residual_life(looked_at: list[tuple[float, Array]]) -> MeanResidualLife:
    parts = [mean_residual_life(peaks, [t], CONFIDENCE) for t, peaks in looked_at]
    names = ("thresholds", "mean", "lower", "upper", "count")
    return MeanResidualLife(*(np.concatenate([getattr(p, name) for p in parts]) for name in names))


def _stability(looked_at: list[tuple[float, Array]]) -> Stability:
    parts = [stability(peaks, [t], CONFIDENCE) for t, peaks in looked_at]
    names = ("thresholds", "shape", "modified_scale", "shape_interval", "modified_scale_interval", "count")
    joined = {name: np.concatenate([getattr(p, name) for p in parts], axis=-1) for name in names}
    return Stability(**joined, reasons=tuple(p.reasons[0] for p in parts))
