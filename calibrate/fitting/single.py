"""One family, one sample, one method: from observations to a Fit."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from calibrate.distributions import Distribution, family
from calibrate.errors import Doubt, InputError
from calibrate.fitting.goodness import aicc, anderson_darling, bic
from calibrate.fitting.jets import Array
from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.methods.base import Method
from calibrate.fitting.model import Model
from calibrate.fitting.result import Fit
from calibrate.fitting.settings import Settled, settle
from calibrate.records.observations import Observations

FEW = 10
"""Number of values below which a doubt is recorded."""


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """How one family is to be fitted."""

    model: Model
    method: Method
    fixed: Mapping[str, Any] = field(default_factory=dict)
    estimate: tuple[str, ...] = ()
    options: Mapping[str, float] = field(default_factory=dict)


def fit_one(seen: Observations, choice: Choice) -> Fit:
    """Fit one family; what the sample cannot give is a failed Fit with a reason.

    Raises
    ------
    InputError
        The choice itself is wrong, the method does not honour the sample, the sample is too small for the family,
        or values lie outside its support.
    """
    model, method = choice.model, choice.method
    settled = settle(model, choice.fixed, choice.estimate)
    method.check(seen, model.family, choice.options)
    k = len(settled.free)
    if seen.n < k + 1:
        plural = "parameter" if k == 1 else "parameters"
        raise InputError(
            f"The family '{model.family}' needs at least {k + 1} values, one more than it has {plural} to "
            f"estimate; the sample has {seen.n}."
        )
    x = seen.values
    refusal = model.refusal(x, settled.fixed)
    if refusal is not None:
        raise InputError(f"The family '{model.family}' cannot be fitted: {refusal}.")
    if _all_equal(x) and model.family != "exponential" and seen.exact.any() and not seen.interval.any():
        reason = "all values are equal, and the likelihood of any family with scatter grows without bound"
        return no_fit(seen, choice, settled.free, reason)
    found = method.estimate(seen, model, settled.fixed, settled.free, choice.options)
    if found.reason:
        return no_fit(seen, choice, settled.free, found.reason)
    return _finished(seen, choice, settled, found)


def _finished(seen: Observations, choice: Choice, settled: Settled, found: Estimate) -> Fit:
    name = choice.model.family
    values = tuple(np.asarray(v) for v in found.parameters.values())
    if not all(np.isfinite(v) or p in settled.fixed for p, v in found.parameters.items()):
        return no_fit(seen, choice, settled.free, "the estimates are too large to be numbers")
    fitted = Distribution.of(family(name), values)
    errors = dict(zip(found.free, np.sqrt(np.diag(found.covariance)).tolist(), strict=True))
    k = len(found.free) if found.estimated is None else found.estimated
    criterion = aicc(found.log_likelihood, k, seen.n)
    where = f"fit.{name}"
    doubts = [Doubt(code, message, where) for code, message in found.notes]
    reason = ""
    if math.isinf(criterion) and math.isfinite(found.log_likelihood):
        reason = f"AICc is not defined for {seen.n} values and {k} estimated parameters"
        doubts.append(Doubt("aicc-undefined", reason + ".", where))
    doubts += _general_doubts(seen, fitted, name, found, settled)
    covariance = found.covariance.copy()
    covariance.flags.writeable = False
    return Fit(
        family=name,
        method=choice.method.name,
        distribution=fitted,
        parameters=found.parameters,
        standard_errors={p: errors.get(p, 0.0) for p in found.parameters},
        covariance=covariance,
        free=found.free,
        log_likelihood=found.log_likelihood,
        aicc=criterion,
        bic=bic(found.log_likelihood, k, seen.n),
        anderson_darling=anderson_darling(seen.values, fitted) if seen.complete else math.nan,
        status="converged",
        reason=reason,
        observations=seen,
        options=dict(choice.options),
        fixed=dict(settled.fixed),
        doubts=tuple(doubts),
        own_predictive=_predictive(found),
    )


def _predictive(found: Estimate) -> Distribution | None:
    if found.predictive is None:
        return None
    name, parameters = found.predictive
    member = family(name)
    return Distribution.of(member, tuple(np.asarray(parameters[p]) for p in member.parameter_names))


def _general_doubts(
    seen: Observations, fitted: Distribution, name: str, found: Estimate, settled: Settled
) -> list[Doubt]:
    doubts = []
    if seen.n < FEW:
        message = (
            f"Only {seen.n} values: the family and its tail rest on judgement more than on this sample, and the "
            "uncertainty of the parameters is not carried further."
        )
        doubts.append(Doubt("few-values", message, f"fit.{name}"))
    if seen.censored and seen.n_exact < FEW <= seen.n:
        message = f"Only {seen.n_exact} of {seen.n} specimens were observed exactly; the others are bounds."
        doubts.append(Doubt("few-exact-values", message, f"fit.{name}"))
    if "threshold" in found.parameters and "threshold" not in settled.fixed and seen.n_exact:
        doubts += _threshold_doubts(seen, found.parameters["threshold"], name)
    if found.predictive is None and not np.isfinite(fitted.sd):
        message = "The fitted tail is so heavy that the standard deviation is infinite."
        doubts.append(Doubt("no-standard-deviation", message, f"fit.{name}"))
    return doubts


def _threshold_doubts(seen: Observations, threshold: float, name: str) -> list[Doubt]:
    """Doubt a threshold that lies within one step of the smallest values below the smallest value."""
    ordered = np.unique(seen.values[seen.exact])
    if ordered.size < 2:
        return []
    step = float(ordered[1] - ordered[0])
    if threshold <= ordered[0] - step:
        return []
    message = (
        f"The estimated threshold {threshold:.6g} lies less than one step ({step:.3g}) below the smallest value "
        f"{ordered[0]:.6g}; it asserts that weaker specimens do not exist, which {seen.n} values cannot show."
    )
    return [Doubt("threshold-near-smallest", message, f"fit.{name}")]


def no_fit(seen: Observations, choice: Choice, free: tuple[str, ...], reason: str) -> Fit:
    """Return the fit that does not exist."""
    k = len(free)
    return Fit(
        family=choice.model.family,
        method=choice.method.name,
        distribution=None,
        parameters={},
        standard_errors={},
        covariance=np.full((k, k), np.nan),
        free=free,
        log_likelihood=math.nan,
        aicc=math.nan,
        bic=math.nan,
        anderson_darling=math.nan,
        status="failed",
        reason=reason,
        observations=seen,
        options=dict(choice.options),
        fixed={},
    )


def _all_equal(x: Array) -> bool:
    return float(np.ptp(x)) <= 1e-13 * float(np.max(np.abs(x)))
