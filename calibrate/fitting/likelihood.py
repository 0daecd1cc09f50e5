"""Maximum likelihood of any model: scale the values, climb, and read the information at the top."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from calibrate.fitting.jets import Array, Function, Jet, Number, seed, total
from calibrate.fitting.model import Data, Model, NoMaximumError, Rule
from calibrate.fitting.newton import Maximum, maximise
from calibrate.fitting.tools import subset

SUBSET = 1000
"""Values from which a large sample's search starts; only the last steps see all of them."""

EXACT = 1e-18
"""Decrement below which a solution by formula is left as it is."""


@dataclass(frozen=True, slots=True, eq=False)
class Estimate:
    """What an estimator found, in the unit of the sample.

    ``parameters`` holds all parameters in the family's order, empty if
    ``reason`` says why there is no estimate; ``covariance`` belongs to
    ``free`` and is NaN where it does not hold; ``notes`` are pairs of code and
    message. ``estimated`` is the number of quantities that the sample determined, where that is not the number of
    free parameters. ``predictive`` is family and parameters of the distribution of a further specimen that carries
    the uncertainty of the parameters, where the method itself gives it.
    """

    parameters: Mapping[str, float]
    free: tuple[str, ...]
    covariance: Array
    log_likelihood: float
    reason: str = ""
    notes: tuple[tuple[str, str], ...] = ()
    estimated: int | None = None
    predictive: tuple[str, Mapping[str, float]] | None = None

    @classmethod
    def failed(cls, free: tuple[str, ...], reason: str) -> Estimate:
        """Return the estimate that does not exist."""
        return cls({}, free, np.full((len(free), len(free)), np.nan), math.nan, reason)


def standardised(x: Array, model: Model) -> Data:
    """Return the values scaled by a power of two, which loses no bit, after subtracting the model's origin."""
    coarse = _power_of_two(float(np.max(np.abs(x))))
    scaled = x / coarse
    if model.origin == "zero":
        shift = 0.0
        size = math.exp(float(np.mean(np.log(np.abs(scaled[scaled != 0.0])))))
    else:
        shift = float(np.min(scaled)) if model.origin == "lowest" else float(np.mean(scaled))
        size = float(np.std(scaled))
    fine = _power_of_two(size)
    return Data((scaled - shift) / fine, shift * coarse, fine * coarse)


def _power_of_two(size: float) -> float:
    return math.ldexp(1.0, math.frexp(size)[1]) if size > 0.0 else 1.0


def maximum_likelihood(x: Array, model: Model, fixed: Mapping[str, float], free: tuple[str, ...]) -> Estimate:
    """Estimate the free parameters by maximum likelihood.

    Parameters
    ----------
    x : array, shape (n,)
        Values that the family can hold, not all equal unless the model is
        `exponential`.
    model : Model
        The likelihood.
    fixed : mapping
        Values of all other parameters, in the unit of the sample.
    free : tuple of str
        Parameters to estimate, in the family's order.
    """
    data = standardised(x, model)
    rules = {rule.name: rule for rule in model.rules}
    inner = {name: data.inward(rules[name].kind, value) for name, value in fixed.items()}
    with np.errstate(all="ignore"):
        try:
            search = _Search(model, data.z, inner, tuple(rules[name] for name in free))
            if not model.regular:
                return _irregular(search, data, fixed)
            top = search.run()
        except NoMaximumError as error:
            return Estimate.failed(free, str(error))
    p = search.parameters(top.t)
    if not top.converged:
        return Estimate.failed(free, model.obstacle(data.z, p))
    return _estimate(search, data, fixed, top)


def _estimate(search: _Search, data: Data, fixed: Mapping[str, float], top: Maximum) -> Estimate:
    model = search.model
    p = search.parameters(top.t)
    stretch = np.array([data.stretch(r.kind) * search.slope(r, p[r.name]) for r in search.free])
    covariance = np.linalg.inv(-top.hessian * data.n) * np.outer(stretch, stretch)
    covariance = 0.5 * (covariance + covariance.T)
    free = tuple(r.name for r in search.free)
    notes = [*model.notes(data.z, p, free)]
    irregular = model.irregular(p, free)
    if irregular is not None:
        covariance = np.full(covariance.shape, np.nan)
        notes.append(("not-regular", irregular))
    log_likelihood = data.n * (top.value - math.log(data.unit))
    return Estimate(
        _outward(search, data, fixed, p),
        free,
        np.asarray(covariance, dtype=np.float64),
        log_likelihood,
        "",
        tuple(notes),
    )


def _irregular(search: _Search, data: Data, fixed: Mapping[str, float]) -> Estimate:
    """Return the estimate of a model whose maximum is not where a gradient vanishes."""
    model = search.model
    p = model.exact(data.z, search.fixed)
    assert p is not None
    free = tuple(r.name for r in search.free)
    value = search.value(p)
    if not math.isfinite(value):
        return Estimate.failed(free, "the likelihood has no maximum")
    reason = model.irregular(p, free)
    notes = (("not-regular", reason),) if reason else ()
    covariance = np.full((len(free), len(free)), np.nan)
    log_likelihood = data.n * (value - math.log(data.unit))
    return Estimate(
        _outward(search, data, fixed, p),
        free,
        np.asarray(covariance, dtype=np.float64),
        log_likelihood,
        "",
        notes,
    )


def _outward(
    search: _Search, data: Data, fixed: Mapping[str, float], p: Mapping[str, float]
) -> dict[str, float]:
    rules = search.model.rules
    return {r.name: fixed.get(r.name, data.outward(r.kind, p[r.name])) for r in rules}


@dataclass(frozen=True, slots=True, eq=False)
class _Search:
    """The climb over the free coordinates t, in which every parameter may take any value."""

    model: Model
    z: Array
    fixed: Mapping[str, float]
    free: tuple[Rule, ...]

    def run(self) -> Maximum:
        settled = {*self.model.preset, *self.model.closed, *self.model.asked}
        if settled.issuperset(self.fixed):
            found = self.model.exact(self.z, self.fixed)
            if found is not None:
                return self._confirmed(self.coordinates(found))
        return self._climbed()

    def _confirmed(self, t: Array) -> Maximum:
        value, gradient, hessian = self.function(self.z)(t)
        if np.all(np.isfinite(hessian)) and np.all(np.linalg.eigvalsh(-hessian) > 0.0):
            decrement = float(gradient @ np.linalg.solve(-hessian, gradient))
            if decrement <= EXACT:
                return Maximum(t, value, gradient, hessian, decrement, 0)
        return maximise(self.function(self.z), t)

    def _climbed(self) -> Maximum:
        few = subset(self.z, SUBSET)
        function = self.function(few)
        starts = [self.coordinates(p) for p in self.model.starts(self.z, self.fixed)]
        ends = [maximise(function, t) for t in starts]
        if few.size < self.z.size:
            whole = self.function(self.z)
            converged = [end.t for end in ends if end.converged]
            ends = [maximise(whole, t) for t in _distinct(converged)] or [maximise(whole, t) for t in starts]
        tops = [end for end in ends if end.converged]
        if tops:
            return max(tops, key=lambda end: end.value)
        return max(ends, key=lambda end: end.value if math.isfinite(end.value) else -math.inf)

    def coordinates(self, p: Mapping[str, float]) -> Array:
        t = []
        for rule in self.free:
            value = p[rule.name]
            if rule.kind == "threshold":
                t.append(math.log(float(np.min(self.z)) - value))
            else:
                t.append(math.log(value) if rule.positive else value)
        return np.array(t)

    def parameters(self, t: Sequence[float] | Array) -> dict[str, float]:
        p = dict(self.fixed)
        for rule, ti in zip(self.free, t, strict=True):
            if rule.kind == "threshold":
                p[rule.name] = float(np.min(self.z)) - math.exp(ti)
            else:
                p[rule.name] = math.exp(ti) if rule.positive else float(ti)
        return p

    def slope(self, rule: Rule, value: float) -> float:
        """Return d parameter / d coordinate; the second derivative is the same but for a location."""
        if rule.kind == "threshold":
            return value - float(np.min(self.z))
        return value if rule.positive else 1.0

    def value(self, p: Mapping[str, float]) -> float:
        """Return the mean log-likelihood."""
        return self.function(self.z)(self.coordinates(p))[0]

    def function(self, z: Array) -> Function:
        """Return the mean log-likelihood of z with its derivatives as a function of t."""
        count = len(self.free)
        nowhere = (-math.inf, np.full(count, np.nan), np.full((count, count), np.nan))

        def evaluate(t: Array) -> tuple[float, Array, Array]:
            if np.max(np.abs(t)) > 600.0:  # beyond, the exponential of a coordinate is no number
                return nowhere
            p = self.parameters(t)
            if not self.model.allowed(z, p):
                return nowhere
            seeded: dict[str, Number] = dict(p)
            for i, rule in enumerate(self.free):
                slope = self.slope(rule, p[rule.name])
                curve = slope if rule.positive or rule.kind == "threshold" else 0.0
                seeded[rule.name] = seed(i, count, p[rule.name], slope, curve)
            density: Jet = self.model.log_density(z, seeded)
            value, gradient, hessian = total(density, z.size)
            if not math.isfinite(value):
                return nowhere
            return value / z.size, gradient / z.size, hessian / z.size

        return evaluate


def _distinct(points: Sequence[Array]) -> list[Array]:
    """Return the points without near repetitions: several starts mostly lead to one top."""
    kept: list[Array] = []
    for t in points:
        if all(float(np.max(np.abs(t - k))) > 1e-6 for k in kept):
            kept.append(t)
    return kept
