"""The same fit to many simulated samples at once: what bootstrap tests and intervals rest on."""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution, family
from calibrate.errors import InputError
from calibrate.fitting.batch_newton import fit_rows
from calibrate.fitting.characteristic.pivots import gumbel_rows
from calibrate.fitting.methods.registry import method_of
from calibrate.fitting.paper import PAPERS
from calibrate.fitting.registry import model_of
from calibrate.fitting.result import Fit
from calibrate.records.observations import Observations

Array = NDArray[np.float64]

ONE_BY_ONE = 199
"""Replicates where samples must be fitted one after the other."""

RowFitter = Callable[[Array], dict[str, Array]]

_NORMAL = ("normal", "lognormal", "lognormal3")
_GUMBEL = ("gumbel", "gumbel_min", "weibull", "frechet", "weibull3")


@dataclass(frozen=True, slots=True, eq=False)
class Replicates:
    """Simulated samples of one fitted distribution, and the fit of each.

    Attributes
    ----------
    x : array, shape (B, n)
        Samples, each sorted.
    laws : Distribution
        The fitted distributions, parameters of shape (B, 1).
    asked : int
        Samples drawn; those without a fit are left out of ``x`` and ``laws``.
    """

    x: Array
    laws: Distribution
    asked: int


def replicate(fit: Fit, count: int, n: int, rng: np.random.Generator) -> Replicates:
    """Draw samples of n values from a fit and fit each in the same way.

    Parameters
    ----------
    fit : Fit
        Converged, of a complete sample.
    count : int
        Number of samples; fewer are drawn where they must be fitted one by one.
    n : int
        Size of each.
    rng : numpy.random.Generator
    """
    assert fit.distribution is not None
    rows = _row_fitter(fit)
    if rows is None:
        count = min(count, ONE_BY_ONE)
    x = np.sort(fit.distribution.sample(rng, (count, n)), axis=1)
    with np.errstate(all="ignore"):
        found = rows(x) if rows is not None else _one_by_one(fit, x)
    good = np.ones(count, dtype=np.bool_)
    for name, values in found.items():
        if name not in fit.fixed:
            good &= np.isfinite(values)
    member = family(fit.family)
    parameters = tuple(np.broadcast_to(found[p], count)[good, None] for p in member.parameter_names)
    return Replicates(x[good], Distribution.of(member, parameters), count)


def _row_fitter(fit: Fit) -> RowFitter | None:
    """Return the function that fits all rows at once, or None where there is none."""
    name, fixed = fit.family, fit.fixed
    if fit.method == "moments" and model_of(name).third_parameter not in fit.free:
        return lambda x: _by_moments(name, fixed, x)
    if fit.method != "likelihood":
        return None
    simple = set(fixed) <= {"threshold"}
    if simple and "threshold" not in fit.free:
        if name in _NORMAL or name in _GUMBEL:
            return lambda x: _on_paper(name, fixed, x)
        if name == "exponential":
            return lambda x: {"scale": x.mean(axis=1)}
        if name == "uniform":
            return lambda x: {"lower": x[:, 0], "upper": x[:, -1]}
    model = model_of(name)
    if not model.regular or "threshold" in fit.free:
        return None
    return lambda x: fit_rows(model, fixed, fit.free, fit.parameters, x)


def _on_paper(name: str, fixed: Mapping[str, float], x: Array) -> dict[str, Array]:
    """Estimate families that are normal or Gumbel on their paper."""
    paper = PAPERS[name]
    threshold = fixed.get("threshold", 0.0)
    y = np.log(x - threshold) if paper.logarithmic else x
    if name in _NORMAL:
        level = y.mean(axis=1)
        scale = np.sqrt(np.mean((y - level[:, None]) ** 2, axis=1))
    else:
        sign = -1.0 if name in ("gumbel_min", "weibull", "weibull3") else 1.0
        level, scale = gumbel_rows(sign * y)
        level = sign * level
    found = {paper.scale_name: 1.0 / scale if paper.inverse else scale}
    found[paper.level_name] = np.exp(level) if paper.logarithmic else level
    return {**{k: np.asarray(v) for k, v in fixed.items()}, **found}


def _by_moments(name: str, fixed: Mapping[str, float], x: Array) -> dict[str, Array]:
    """Return the parameters that have the mean and the standard deviation (n - 1) of each row."""
    member = family(name)
    sd = x.std(axis=1, ddof=1)
    kept = {k: np.asarray(v) for k, v in fixed.items() if k in member.moments_keep}
    given = {"mean": x.mean(axis=1), "sd": sd} if len(member.moment_names) == 2 else {"mean": x.mean(axis=1)}
    try:
        return member.solve({**kept, **given})
    except InputError:  # some rows have moments that no member has; the others are solved one by one
        found = {p: np.full(x.shape[0], np.nan) for p in member.parameter_names}
        for k in range(x.shape[0]):
            with contextlib.suppress(InputError):
                for p, value in member.solve({**kept, **{m: v[k] for m, v in given.items()}}).items():
                    found[p][k] = value
        return found


def _one_by_one(fit: Fit, x: Array) -> dict[str, Array]:
    model, method = model_of(fit.family), method_of(fit.method)
    names = family(fit.family).parameter_names
    found = np.full((len(names), x.shape[0]), np.nan)
    for k, row in enumerate(x):
        try:
            estimate = method.estimate(Observations(row, row), model, fit.fixed, fit.free, fit.options)
        except InputError:
            continue
        if not estimate.reason:
            found[:, k] = [estimate.parameters[p] for p in names]
    return dict(zip(names, found, strict=True))
