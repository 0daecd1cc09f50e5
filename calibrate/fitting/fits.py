"""From values and names of families to fits: what callers use."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, cast

import numpy as np
from numpy.typing import ArrayLike

from calibrate.distributions import Distribution, family
from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.fitting.goodness import aicc, anderson_darling
from calibrate.fitting.jets import Array
from calibrate.fitting.likelihood import Estimate, maximum_likelihood
from calibrate.fitting.model import Model
from calibrate.fitting.moments import method_of_moments
from calibrate.fitting.registry import default_candidates, model_of
from calibrate.fitting.result import Comparison, Fit, Method
from calibrate.fitting.settings import Settled, settle

FEW = 10
"""Number of values below which a doubt is recorded."""

CLOSE_AICC = 2.0
"""Difference of AICc below which rivals count as about equally supported (Burnham and Anderson 2002, 2.6)."""

_NUMBERS = "iufO"
"""Kinds of arrays that hold real numbers; text, truth values and complex numbers would convert in silence."""

METHODS = {"likelihood": maximum_likelihood, "moments": method_of_moments}


def fit_family(
    values: ArrayLike,
    family: str,
    *,
    method: str = "likelihood",
    fixed: Mapping[str, float] | None = None,
    estimate: Iterable[str] = (),
) -> Fit:
    """Fit one family to a complete sample.

    Parameters
    ----------
    values : array_like, shape (n,)
        Finite numbers, in any unit.
    family : str
        Name of the family.
    method : {"likelihood", "moments"}
        Estimator.
    fixed : mapping, optional
        Parameters that are not estimated, with their values in the unit of
        ``values``. Bounds of `beta` are 0 and 1 unless given; a bound of
        `truncated_normal` must be given.
    estimate : iterable of str, optional
        ``("threshold",)`` estimates the threshold of `weibull3` and
        `lognormal3`, which must otherwise be in ``fixed``.

    Returns
    -------
    Fit
        With status "failed" and a reason if the numerics find no estimate.

    Raises
    ------
    InputError
        The values, or the choice of parameters, are not such that the family
        can be fitted: among others not at least one value more than there are
        parameters to estimate, or values outside the family's support.
    """
    x = checked_values(values)
    return _fit(x, model_of(family), _method(method), fixed or {}, tuple(estimate))


def compare(
    values: ArrayLike,
    families: Sequence[str] | None = None,
    *,
    method: str = "likelihood",
    fixed: Mapping[str, float] | None = None,
    estimate: Iterable[str] = (),
) -> Comparison:
    """Fit several families and rank them by AICc.

    Parameters
    ----------
    values, method, fixed, estimate
        As in `fit_family`; ``fixed`` and ``estimate`` apply to those families
        that have the parameters they name.
    families : sequence of str, optional
        Candidates. Default: every family that can be fitted to such values,
        without `uniform`, without threshold families unless the threshold is
        fixed or to be estimated, without `beta` and `truncated_normal` unless
        a bound is fixed.

    Raises
    ------
    InputError
        If the values are no sample, a name is unknown, or no candidate at all
        can take the values.
    """
    x = checked_values(values)
    fixed, estimate = dict(fixed or {}), tuple(estimate)
    names = default_candidates(fixed, estimate) if families is None else tuple(dict.fromkeys(families))
    if not names:
        raise InputError("No family is named.")
    chosen = [model_of(name) for name in names]
    _check_names_used(chosen, (*fixed, *estimate))
    fits: list[Fit] = []
    refusals: list[Problem] = []
    for model in chosen:
        own = {name: value for name, value in fixed.items() if name in model.names}
        try:
            fits.append(_fit(x, model, _method(method), own, tuple(e for e in estimate if e in model.names)))
        except InputError as error:
            refusals += error.problems
            reason = "; ".join(_as_reason(p, model.family) for p in error.problems)
            fits.append(_failed(x, model, _method(method), (), reason))
    if len(refusals) >= len(fits):
        raise InputError(dict.fromkeys(refusals))
    converged = sorted((f for f in fits if f.converged), key=lambda f: (f.aicc, -f.log_likelihood))
    failed = [f for f in fits if not f.converged]
    if converged:
        converged[0] = _with_rivals(converged[0], converged[1:])
    return Comparison((*converged, *failed), converged[0].family if converged else None)


def fit(
    values: ArrayLike,
    family: str | Sequence[str] = "best",
    *,
    method: str = "likelihood",
    fixed: Mapping[str, float] | None = None,
    estimate: Iterable[str] = (),
) -> Fit:
    """Fit a family, or the best supported of several, to a complete sample.

    Parameters
    ----------
    values : array_like, shape (n,)
        Finite numbers.
    family : str or sequence of str
        One family; several candidates; or ``"best"``, all that suit. Of
        several the one with the smallest AICc is returned, and
        ``.comparison`` holds them all.
    method, fixed, estimate
        As in `fit_family`.

    Raises
    ------
    InputError
        As in `fit_family`, or if no candidate could be fitted.

    Examples
    --------
    >>> f = fit([512.0, 498.0, 530.0, 521.0, 507.0, 515.0], family="normal")
    >>> round(f.parameters["location"], 3)
    513.833
    """
    if isinstance(family, str) and family != "best":
        found = fit_family(values, family, method=method, fixed=fixed, estimate=estimate)
        if not found.converged:
            raise InputError(f"The family '{found.family}' cannot be fitted: {found.reason}.")
        return found
    names = None if isinstance(family, str) else tuple(family)
    comparison = compare(values, names, method=method, fixed=fixed, estimate=estimate)
    best = comparison.best
    if best is None:
        raise InputError(
            [Problem(f"The family '{c.family}' cannot be fitted: {c.reason}.") for c in comparison.candidates]
        )
    return dataclasses.replace(best, comparison=comparison)


def checked_values(values: ArrayLike) -> Array:
    """Return a read-only copy of a sample, or raise InputError for what is none."""
    refusal = InputError("The values must be numbers.")
    try:
        raw = np.asarray(values)
        x = np.array(raw, dtype=np.float64) if raw.dtype.kind in _NUMBERS else None
    except (TypeError, ValueError) as error:
        raise refusal from error
    if x is None:
        raise refusal
    if x.ndim != 1:
        raise InputError(f"The values must be one row of numbers; they have {x.ndim} dimensions.")
    if x.size == 0:
        raise InputError("There are no values.")
    bad = np.flatnonzero(~np.isfinite(x))
    if bad.size:
        raise InputError(f"Value {bad[0] + 1} of {x.size} is {x[bad[0]]}; all must be finite.")
    x.flags.writeable = False
    return x


def _method(method: str) -> Method:
    if method not in METHODS:
        message = f"There is no method '{method}'."
        raise InputError(Problem(message, suggestion=did_you_mean(method, METHODS)))
    return cast(Method, method)


def _fit(x: Array, model: Model, method: Method, fixed: Mapping[str, Any], estimate: tuple[str, ...]) -> Fit:
    settled = settle(model, fixed, estimate)
    k = len(settled.free)
    if x.size < k + 1:
        plural = "parameter" if k == 1 else "parameters"
        raise InputError(
            f"The family '{model.family}' needs at least {k + 1} values, one more than it has {plural} to "
            f"estimate; the sample has {x.size}."
        )
    refusal = model.refusal(x, settled.fixed)
    if refusal is not None:
        raise InputError(f"The family '{model.family}' cannot be fitted: {refusal}.")
    if _all_equal(x) and model.family != "exponential":
        reason = "all values are equal, and the likelihood of any family with scatter grows without bound"
        return _failed(x, model, method, settled.free, reason)
    found = METHODS[method](x, model, settled.fixed, settled.free)
    if found.reason:
        return _failed(x, model, method, settled.free, found.reason)
    return _finished(x, model, method, settled, found)


def _finished(x: Array, model: Model, method: Method, settled: Settled, found: Estimate) -> Fit:
    values = tuple(np.asarray(v) for v in found.parameters.values())
    if not all(np.isfinite(v) or name in settled.fixed for name, v in found.parameters.items()):
        return _failed(x, model, method, settled.free, "the estimates are too large to be numbers")
    fitted = Distribution.of(family(model.family), values)
    errors = dict(zip(found.free, np.sqrt(np.diag(found.covariance)).tolist(), strict=True))
    k = len(found.free)
    criterion = aicc(found.log_likelihood, k, x.size)
    doubts = [Doubt(code, message, f"fit.{model.family}") for code, message in found.notes]
    reason = ""
    if math.isinf(criterion) and math.isfinite(found.log_likelihood):
        reason = f"AICc is not defined for {x.size} values and {k} estimated parameters"
        doubts.append(Doubt("aicc-undefined", reason + ".", f"fit.{model.family}"))
    doubts += _general_doubts(x, fitted, model.family)
    covariance = found.covariance.copy()
    covariance.flags.writeable = False
    return Fit(
        model.family, method, fitted, found.parameters,
        {name: errors.get(name, 0.0) for name in found.parameters},
        covariance, found.free, found.log_likelihood, criterion, anderson_darling(x, fitted),
        "converged", reason, x, tuple(doubts),
    )  # fmt: skip


def _general_doubts(x: Array, fitted: Distribution, name: str) -> list[Doubt]:
    doubts = []
    if x.size < FEW:
        message = (
            f"Only {x.size} values: the family and its tail rest on judgement more than on this sample, and the "
            "uncertainty of the parameters is not carried further."
        )
        doubts.append(Doubt("few-values", message, f"fit.{name}"))
    if not np.isfinite(fitted.sd):
        message = "The fitted tail is so heavy that the standard deviation is infinite."
        doubts.append(Doubt("no-standard-deviation", message, f"fit.{name}"))
    return doubts


def _with_rivals(best: Fit, others: Sequence[Fit]) -> Fit:
    close = [f.family for f in others if f.aicc - best.aicc < CLOSE_AICC]
    if not close:
        return best
    message = (
        f"The sample supports {', '.join(close)} about as well as {best.family} (AICc within {CLOSE_AICC:g}); they may "
        "differ in the tail that decides the reliability."
    )
    doubt = Doubt("close-families", message, f"fit.{best.family}")
    return dataclasses.replace(best, doubts=(*best.doubts, doubt))


def _failed(x: Array, model: Model, method: Method, free: tuple[str, ...], reason: str) -> Fit:
    k = len(free)
    return Fit(
        model.family, method, None, {}, {}, np.full((k, k), np.nan), free,
        math.nan, math.nan, math.nan, "failed", reason, x,
    )  # fmt: skip


def _all_equal(x: Array) -> bool:
    return float(np.ptp(x)) <= 1e-13 * float(np.max(np.abs(x)))


def _as_reason(problem: Problem, name: str) -> str:
    text = problem.message.removeprefix(f"The family '{name}' cannot be fitted: ")
    text = text.replace(f"The family '{name}'", "it", 1) if text.startswith("The family") else text
    return text.rstrip(".")


def _check_names_used(models: Sequence[Model], names: Iterable[str]) -> None:
    known = dict.fromkeys(name for model in models for name in model.names)
    problems = [
        Problem(f"None of the families has a parameter '{name}'.", suggestion=did_you_mean(name, known))
        for name in names
        if name not in known
    ]
    if problems:
        raise InputError(problems)
