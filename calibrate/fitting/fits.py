"""From values and names of families to fits: what callers use."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import ArrayLike

from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.fitting.jets import Array
from calibrate.fitting.methods.registry import method_of
from calibrate.fitting.model import Model
from calibrate.fitting.registry import default_candidates, model_of
from calibrate.fitting.result import Comparison, Fit
from calibrate.fitting.single import FEW, Choice, fit_one, no_fit
from calibrate.records.observations import Observations

__all__ = ["CLOSE_AICC", "FEW", "checked_values", "compare", "fit", "fit_family", "observed"]

CLOSE_AICC = 2.0
"""Difference of AICc below which rivals count as about equally supported (Burnham and Anderson 2002, 2.6)."""

_NUMBERS = "iufO"
"""Kinds of arrays that hold real numbers; text, truth values and complex numbers would convert in silence."""


def fit_family(
    values: ArrayLike | Observations,
    family: str,
    *,
    method: str = "likelihood",
    fixed: Mapping[str, float] | None = None,
    estimate: Iterable[str] = (),
    options: Mapping[str, float] | None = None,
) -> Fit:
    """Fit one family to a sample.

    Parameters
    ----------
    values : array_like, shape (n,), or Observations
        Finite numbers in any unit; Observations where some are bounds or part of the population is missing.
    family : str
        Name of the family.
    method : str
        Estimator: ``likelihood``, ``moments``, ``l_moments``, ``probability_paper``, ``lower_tail``, ``upper_tail``,
        ``bayes``, ``known_cov`` or ``likelihood_unbiased``.
    fixed : mapping, optional
        Parameters that are not estimated, with their values in the unit of
        ``values``. Bounds of `beta` are 0 and 1 unless given; a bound of
        `truncated_normal` must be given.
    estimate : iterable of str, optional
        ``("threshold",)`` estimates the threshold of `weibull3` and
        `lognormal3`, which must otherwise be in ``fixed``.
    options : mapping, optional
        What the method takes: ``fraction`` of a tail, a known ``cov``, prior knowledge.

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
    seen = observed(values)
    return fit_one(
        seen, Choice(model_of(family), method_of(method), fixed or {}, tuple(estimate), options or {})
    )


def compare(
    values: ArrayLike | Observations,
    families: Sequence[str] | None = None,
    *,
    method: str = "likelihood",
    fixed: Mapping[str, float] | None = None,
    estimate: Iterable[str] = (),
    options: Mapping[str, float] | None = None,
) -> Comparison:
    """Fit several families and rank them by AICc.

    Parameters
    ----------
    values, method, fixed, estimate, options
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
    seen = observed(values)
    fixed, estimate = dict(fixed or {}), tuple(estimate)
    estimator = method_of(method)
    names = tuple(dict.fromkeys(families or ()))
    if families is None:
        names = default_candidates(fixed, estimate)
        names = tuple(n for n in names if not estimator.families or n in estimator.families)
    if not names:
        raise InputError("No family is named.")
    chosen = [model_of(name) for name in names]
    _check_names_used(chosen, (*fixed, *estimate))
    fits: list[Fit] = []
    refusals: list[Problem] = []
    for model in chosen:
        own = {name: value for name, value in fixed.items() if name in model.names}
        choice = Choice(model, estimator, own, tuple(e for e in estimate if e in model.names), options or {})
        try:
            fits.append(fit_one(seen, choice))
        except InputError as error:
            refusals += error.problems
            reason = "; ".join(_as_reason(p, model.family) for p in error.problems)
            fits.append(no_fit(seen, choice, (), reason))
    if len(refusals) >= len(fits):
        raise InputError(dict.fromkeys(refusals))
    converged = sorted((f for f in fits if f.converged), key=lambda f: (f.aicc, -f.log_likelihood))
    failed = [f for f in fits if not f.converged]
    if converged:
        converged[0] = _with_rivals(converged[0], converged[1:])
    return Comparison((*converged, *failed), converged[0].family if converged else None)


def fit(
    values: ArrayLike | Observations,
    family: str | Sequence[str] = "best",
    *,
    method: str = "likelihood",
    fixed: Mapping[str, float] | None = None,
    estimate: Iterable[str] = (),
    options: Mapping[str, float] | None = None,
) -> Fit:
    """Fit a family, or the best supported of several, to a sample.

    Parameters
    ----------
    values : array_like, shape (n,), or Observations
        Finite numbers, or what is known of each specimen.
    family : str or sequence of str
        One family; several candidates; or ``"best"``, all that suit. Of
        several the one with the smallest AICc is returned, and
        ``.comparison`` holds them all.
    method, fixed, estimate, options
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
        found = fit_family(values, family, method=method, fixed=fixed, estimate=estimate, options=options)
        if not found.converged:
            raise InputError(f"The family '{found.family}' cannot be fitted: {found.reason}.")
        return found
    names = None if isinstance(family, str) else tuple(family)
    comparison = compare(values, names, method=method, fixed=fixed, estimate=estimate, options=options)
    best = comparison.best
    if best is None:
        raise InputError(
            [Problem(f"The family '{c.family}' cannot be fitted: {c.reason}.") for c in comparison.candidates]
        )
    return dataclasses.replace(best, comparison=comparison)


def observed(values: ArrayLike | Observations) -> Observations:
    """Return observations, checked; plain values are a complete sample."""
    if isinstance(values, Observations):
        if not values.n:
            raise InputError("There are no values.")
        return values
    x = checked_values(values)
    return Observations(x, x)


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
