"""The events of a record: exceedances of a threshold, those close in time taken together."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.thresholds import decluster
from calibrate.records import Sample
from calibrate.study.model import Exceedances
from calibrate.units import parse_unit

Array = NDArray[np.float64]

YEAR = parse_unit("year").factor
"""Seconds."""

WHOLE = 0.95
"""Part of a year that must have been recorded for its number of events to count."""


@dataclass(frozen=True, slots=True, eq=False)
class Events:
    """Independent events above a threshold, in the unit of the records.

    Attributes
    ----------
    peaks : array, shape (c,)
        The largest value of each.
    times : array, shape (c,), or None
        When it occurred, in years from the first value of the records.
    exceedances : array, shape (n,)
        Times of all values above the threshold, rising, in years; NaN where they are not known.
    span : float
        Years from the first to the last value of the records; NaN where they are not known.
    """

    peaks: Array
    times: Array | None
    exceedances: Array
    span: float

    @property
    def n(self) -> int:
        """Number of events."""
        return int(self.peaks.size)

    @property
    def extremal_index(self) -> float:
        """Events per exceedance; 1 where every exceedance is an event of its own."""
        return self.n / self.exceedances.size

    def yearly_counts(self) -> NDArray[np.intp]:
        """Return the events of each whole year after the first value.

        Where the first value is an event itself it does not count: the years would begin with one.
        """
        if self.times is None:
            return np.zeros(0, dtype=np.intp)
        years = math.floor(self.span + 1.0 - WHOLE)
        inside = self.times[(self.times > 0.0) & (self.times <= years)]
        return np.bincount(np.ceil(inside).astype(np.intp) - 1, minlength=years)[:years]


def find_events(sample: Sample, asked: Exceedances, threshold: float | None = None) -> Events:
    """Return the events above the threshold of a variable, or above another one.

    Parameters
    ----------
    sample : Sample
        With times where a run length is stated.
    asked : Exceedances
    threshold : float, optional
        In the unit of the records.

    Raises
    ------
    InputError
        Nothing exceeds the threshold although a run length is stated.
    """
    level = asked.threshold if threshold is None else threshold
    over = sample.values > level
    if sample.times is None:
        unknown = np.full(int(np.count_nonzero(over)), np.nan)
        return Events(sample.values[over], None, unknown, math.nan)
    times = (sample.times - np.min(sample.times)) / YEAR
    span = float(np.max(times))
    if asked.run_length is None:
        return Events(sample.values[over], times[over], np.sort(times[over]), span)
    found = decluster(sample.values, times, level, asked.run_length)
    return Events(found.peaks, found.times, np.sort(times[over]), span)
