"""Several stations with one shape: the tail that no single short record can tell.

The likelihood of all stations, assumed independent of each other, with a location and scale for each and a common
shape of the generalised extreme value family.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.actions.maxima import CONFIDENCE, few_blocks, shape_sign
from calibrate.errors import Doubt, InputError, Problem
from calibrate.fitting import Fit, fit_family
from calibrate.fitting.censored import Search, search_of
from calibrate.fitting.fits import observed
from calibrate.fitting.newton import Maximum, maximise
from calibrate.records.observations import Observations

Array = NDArray[np.float64]

DIFFERENT = 0.05
"""p-value of the likelihood-ratio test below which a doubt is recorded."""

FARTHEST = 1.0
"""How far from the estimate an end of the shape's interval is sought."""

ENOUGH = 2
"""Climbs that reached a maximum, after which no other start is tried."""

LEAST = 4
"""Maxima of a station: one more than it has parameters of its own likelihood."""

WHERE = "fit.gev"


@dataclass(frozen=True, slots=True, eq=False)
class PooledShape:
    """A shape common to several stations.

    Attributes
    ----------
    shape : float
        Positive is a heavy tail.
    standard_error : float
        From the information of all stations; NaN for a shape below -0.5.
    interval : (float, float)
        By profile likelihood, 95 %; NaN where an end was not found.
    fits : mapping of str to Fit
        Of each station with the common shape; their standard errors take the shape as known.
    separate : mapping of str to Fit
        Of each station with its own shape.
    log_likelihood, separate_log_likelihood : float
        Of all stations together; the latter is NaN where a station has no fit of its own.
    statistic, freedom, p_value : float, int, float
        Likelihood-ratio test of the common shape against separate ones; NaN for one station.
    doubts : tuple of Doubt
    """

    shape: float
    standard_error: float
    interval: tuple[float, float]
    fits: Mapping[str, Fit]
    separate: Mapping[str, Fit]
    log_likelihood: float
    separate_log_likelihood: float
    statistic: float
    freedom: int
    p_value: float
    doubts: tuple[Doubt, ...]


def fit_pooled_shape(
    samples: Mapping[str, ArrayLike | Observations] | Sequence[ArrayLike | Observations],
) -> PooledShape:
    """Fit generalised extreme values with one shape to the block maxima of several stations.

    Parameters
    ----------
    samples : mapping or sequence of array_like or Observations
        Block maxima of each station, at least four of each, in any unit; a sequence is named "1", "2", ...

    Raises
    ------
    InputError
        A sample is none or too small, or the likelihood has no maximum.

    Notes
    -----
    Stations that feel the same storms are not independent: their shape is estimated without bias, but more
    uncertain than the standard error says.

    References
    ----------
    S. Coles, An Introduction to Statistical Modeling of Extreme Values, Springer 2001, sections 2.6.5-2.6.6
    (from memory).
    """
    seen = _stations(samples)
    likelihood = _Likelihood.of(tuple(seen.values()))
    separate = {name: fit_family(s, "gev") for name, s in seen.items()}
    top = _top(likelihood, seen, separate)
    shape = float(top.t[-1])
    fits = {name: fit_family(s, "gev", fixed={"shape": shape}) for name, s in seen.items()}
    problems = [
        Problem(f"Station '{k}' cannot be fitted: {f.reason}.") for k, f in fits.items() if not f.converged
    ]
    if problems:
        raise InputError(problems)
    joint = likelihood.total * top.value - likelihood.log_units
    alone = sum(f.log_likelihood for f in separate.values())
    freedom = len(seen) - 1
    statistic = max(2.0 * (alone - joint), 0.0) if freedom else math.nan
    p_value = float(special.chdtrc(freedom, statistic)) if math.isfinite(statistic) else math.nan
    error = math.nan
    if shape >= -0.5:
        error = math.sqrt(float(np.linalg.inv(-top.hessian * likelihood.total)[-1, -1]))
    interval = likelihood.shape_interval(top, tuple(seen.values()))
    doubts = few_blocks(sum(s.n for s in seen.values()), WHERE) + shape_sign(interval, WHERE)
    doubts += _station_doubts(separate, p_value)
    return PooledShape(
        shape, error, interval, fits, separate, joint, alone, statistic, freedom, p_value, tuple(doubts)
    )


def _stations(
    samples: Mapping[str, ArrayLike | Observations] | Sequence[ArrayLike | Observations],
) -> dict[str, Observations]:
    named = samples if isinstance(samples, Mapping) else {str(i + 1): s for i, s in enumerate(samples)}
    if not named:
        raise InputError("There is no station to pool.")
    seen, problems = {}, []
    for name, sample in named.items():
        try:
            seen[name] = observed(sample)
        except InputError as error:
            problems += [Problem(f"Station '{name}': {p.message}") for p in error.problems]
            continue
        if seen[name].n < LEAST:
            few = f"Station '{name}' has {seen[name].n} maxima; at least {LEAST} are needed."
            problems.append(Problem(few, suggestion="Leave it out."))
    if problems:
        raise InputError(problems)
    return seen


def _station_doubts(separate: Mapping[str, Fit], p_value: float) -> list[Doubt]:
    doubts = []
    failed = [name for name, f in separate.items() if not f.converged]
    if failed:
        message = (
            f"{', '.join(failed)}: no fit with an own shape exists, so the common shape cannot be tested against "
            "separate ones."
        )
        doubts.append(Doubt("pooling-not-tested", message, WHERE))
    if p_value < DIFFERENT:
        message = (
            f"The stations differ in shape more than chance explains (likelihood ratio, p = {p_value:.2g}); one shape "
            "for all of them may be wrong for each."
        )
        doubts.append(Doubt("stations-differ", message, WHERE))
    return doubts


def _top(likelihood: _Likelihood, seen: Mapping[str, Observations], separate: Mapping[str, Fit]) -> Maximum:
    """Return the larger maximum over climbs from the mean of the separate shapes, from zero and from other shapes."""
    converged = [f for f in separate.values() if f.converged]
    shapes = [0.0, 0.15, -0.15]
    if converged:
        own = [f.parameters["shape"] for f in converged]
        shapes.insert(0, float(np.average(own, weights=[f.n for f in converged])))
    ends = []
    for shape in shapes:
        start = likelihood.start(tuple(seen.values()), shape)
        if start is not None:
            with np.errstate(all="ignore"):
                ends.append(maximise(likelihood, start))
        if sum(end.converged for end in ends) == ENOUGH:
            break
    tops = [end for end in ends if end.converged]
    if not tops:
        message = "The likelihood of all stations with one shape has no maximum that could be found."
        alone = [
            Problem(f"Station '{k}' by itself: {f.reason}.") for k, f in separate.items() if not f.converged
        ]
        raise InputError([Problem(message, suggestion="Leave out stations that have no fit."), *alone])
    return max(tops, key=lambda top: top.value)


@dataclass(frozen=True, slots=True, eq=False)
class _Likelihood:
    """Mean log-likelihood of all stations by location and ln scale of each, and the common shape, scaled."""

    stations: tuple[Search, ...]
    total: int
    log_units: float

    @classmethod
    def of(cls, samples: tuple[Observations, ...]) -> _Likelihood:
        stations = tuple(search_of(s, "gev", {}, ("location", "scale", "shape")) for s in samples)
        log_units = sum(s.seen.n_exact * math.log(s.data.unit) for s in stations)
        return cls(stations, sum(s.n for s in samples), log_units)

    def start(self, samples: Sequence[Observations], shape: float) -> Array | None:
        """Return the coordinates at which every station is fitted best with this shape; None if one is not."""
        t: list[float] = []
        for station, sample in zip(self.stations, samples, strict=True):
            found = fit_family(sample, "gev", fixed={"shape": shape})
            if not found.converged:
                return None
            inner = {r.name: station.data.inward(r.kind, found.parameters[r.name]) for r in station.free}
            t += station.coordinates(inner)[:2].tolist()
        return np.array([*t, shape])

    def __call__(self, t: Array) -> tuple[float, Array, Array]:
        """Return value, gradient and Hessian."""
        value, gradient, hessian = 0.0, np.zeros(t.size), np.zeros((t.size, t.size))
        for i, station in enumerate(self.stations):
            own = [2 * i, 2 * i + 1, t.size - 1]
            share = station.seen.n / self.total
            v, g, h = station(t[own])
            value += share * v
            gradient[own] += share * g
            hessian[np.ix_(own, own)] += share * h
        return value, gradient, hessian

    def shape_interval(self, top: Maximum, samples: Sequence[Observations]) -> tuple[float, float]:
        """Return the shapes at which the profile log-likelihood has fallen by half the quantile of chi-square."""
        drop = 0.5 * float(special.chdtri(1.0, 1.0 - CONFIDENCE)) / self.total
        low, high = (self._end(_Profile(self, top, tuple(samples), sign), drop) for sign in (-1.0, 1.0))
        return low, high

    def _end(self, profile: _Profile, drop: float) -> float:
        from scipy.optimize import brentq

        inner, step = 0.0, 0.02
        while inner < FARTHEST:
            outer = inner + step
            fallen = profile(outer)
            if not math.isfinite(fallen):
                return math.nan
            if fallen >= drop:
                distance = brentq(lambda d: profile(d) - drop, inner, outer, xtol=1e-8)
                return float(profile.top.t[-1]) + profile.sign * float(distance)
            inner, step = outer, 1.5 * step
        return math.nan


@dataclass(frozen=True, slots=True, eq=False)
class _Profile:
    """By how much the largest mean log-likelihood falls at a distance from the estimated shape on one side."""

    likelihood: _Likelihood
    top: Maximum
    samples: tuple[Observations, ...]
    sign: float

    def __call__(self, distance: float) -> float:
        shape = float(self.top.t[-1]) + self.sign * distance
        end = self._climbed(self.top.t[:-1], shape)
        if not end.converged:  # the estimates of the other parameters may not hold all values with this shape
            start = self.likelihood.start(self.samples, shape)
            if start is None:
                return math.nan
            end = self._climbed(start[:-1], shape)
        return self.top.value - end.value if end.converged else math.nan

    def _climbed(self, start: Array, shape: float) -> Maximum:
        def fixed(t: Array) -> tuple[float, Array, Array]:
            value, gradient, hessian = self.likelihood(np.append(t, shape))
            return value, gradient[:-1], hessian[:-1, :-1]

        with np.errstate(all="ignore"):
            return maximise(fixed, start)
