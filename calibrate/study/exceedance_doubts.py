"""Reservations about threshold exceedances: whether they are independent events, and the record as long as stated."""

from __future__ import annotations

import math

import numpy as np
from scipy import special

from calibrate.actions.periods import in_years
from calibrate.actions.thresholds import ExcessFit, fit_excesses
from calibrate.errors import Doubt, InputError
from calibrate.study.events import Events
from calibrate.study.model import Exceedances

GAPS = 1.0
"""Years by which times may span more, or less, than the stated length of the record."""

UNLIKELY = 0.05
"""Level of the test of the shape, and of the yearly numbers of events."""

RARE = 0.01
"""Probability below which begin and end without values, missing small excesses, or close exceedances are doubted."""

LONG_ENDS = 6.638
"""Mean intervals between events that begin and end of a record leave together with probability RARE."""

CLOSE = 2.0 / 365.25
"""Years within which exceedances come from one event if that happens too often (common practice, no source)."""

SEASON = 0.25
"""Part of the year in which all independent exceedances may fall."""

WHERE = "excesses"


def exceedance_doubts(
    fit: ExcessFit, events: Events, asked: Exceedances, dispersion: tuple[float, float] | None
) -> list[Doubt]:
    """Return what the fit itself does not doubt.

    Parameters
    ----------
    fit : ExcessFit
    events : Events
        To which it was fitted.
    asked : Exceedances
    dispersion : (float, float) or None
        Index and p-value.
    """
    found = [
        _shape(fit),
        _empty_above_threshold(fit),
        _length(events, asked, fit.rate),
        _poisson(dispersion),
        _clustered(events, asked),
        _coarse(events, asked),
    ]
    return [Doubt(*pair, WHERE) for pair in found if pair is not None]


Finding = tuple[str, str] | None
"""Code and message."""


def _shape(fit: ExcessFit) -> Finding:
    """Hold an exponential tail against one with a shape, by the likelihood ratio."""
    if not fit.exponential:
        return None
    try:
        freer = fit_excesses(fit.threshold + fit.excesses, fit.threshold)
    except InputError:
        return None
    p_value = float(special.chdtrc(1.0, max(2.0 * (freer.log_likelihood - fit.log_likelihood), 0.0)))
    if p_value >= UNLIKELY:
        return None
    return "shape-not-zero", (
        f"The family gumbel holds the shape at 0; the excesses speak for {freer.shape:.3g} (p = {p_value:.2g} by the "
        "likelihood ratio). The family gev estimates it."
    )


def _empty_above_threshold(fit: ExcessFit) -> Finding:
    smallest = float(np.min(fit.excesses))
    if -fit.n * smallest / float(np.mean(fit.excesses)) >= math.log(RARE):
        return None
    first = fit.threshold + smallest
    return "threshold-below-record", (
        f"No event lies between the threshold {fit.threshold:.6g} and {first:.6g}, although {fit.n} events should "
        "leave no such gap: the record seems to begin higher. Take a threshold just below its smallest value."
    )


def _length(events: Events, asked: Exceedances, rate: float) -> Finding:
    if not math.isfinite(events.span):
        return None
    beyond = events.span - asked.years
    spans = f"The times of the records span {events.span:.3g} years"
    if beyond > GAPS:
        return "record-length", (
            f"{spans}, the record is said to be {in_years(asked.years)} long: {beyond:.3g} years are taken as gaps. If "
            "they were observed, events are more seldom than the model says."
        )
    if -beyond > max(GAPS, LONG_ENDS / rate):
        return "record-length", (
            f"{spans}, the record is said to be {in_years(asked.years)} long: begin and end without any value are "
            "unlikely to be so long. If the record is shorter, events are more frequent than the model says."
        )
    return None


def _poisson(dispersion: tuple[float, float] | None) -> Finding:
    if dispersion is None or dispersion[1] >= UNLIKELY:
        return None
    index, p_value = dispersion
    reason = (
        "events that belong together, or years that differ; a longer run length or a higher threshold may help"
        if index > 1.0
        else "events that keep a distance"
    )
    return "not-poisson", (
        f"The yearly numbers of events scatter {'more' if index > 1.0 else 'less'} than those of independent events "
        f"(variance over mean {index:.3g}, p = {p_value:.2g}): {reason}."
    )


def _clustered(events: Events, asked: Exceedances) -> Finding:
    """Count exceedances that follow each other closely, where nothing takes them together."""
    if asked.run_length is not None:
        return None
    if events.times is None:
        return "times-not-known", (
            "The records have no times: that every exceedance is an event of its own, and that the record is as long "
            "as stated, could not be looked at."
        )
    gaps = np.diff(events.exceedances)
    close = int(np.count_nonzero(gaps <= CLOSE))
    by_chance = -math.expm1(-events.exceedances.size / asked.years / SEASON * CLOSE)
    if close == 0 or float(special.bdtrc(close - 1, gaps.size, by_chance)) >= RARE:
        return None
    return "clustered-exceedances", (
        f"{close} of {gaps.size} exceedances follow the one before within 2 days, more than independent events would "
        "even in a season of three months: they count the same event several times. State a run_length."
    )


def _coarse(events: Events, asked: Exceedances) -> Finding:
    if asked.run_length is None:
        return None
    steps = np.diff(events.exceedances)
    apart = steps[steps > 0.0]
    if apart.size == steps.size or (apart.size and float(np.min(apart)) <= asked.run_length):
        return None
    return "coarse-times", (
        f"{steps.size - apart.size} of {events.exceedances.size} exceedances share their time with another, and no two "
        "times lie within the run length: the times are too coarse to tell events apart."
    )
