"""Annex D.8 for parts of a series of tests: subsets with their own level, or the lowest tests alone.

Both serve where the errors of the whole series scatter too widely, or are no lognormal sample (EN 1990:2002,
D.8.2.2.5, from memory).
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.resistance.annex_d import AnnexD8, BasicVariables, evaluated
from calibrate.resistance.component_tests import LEAST_TESTS, ComponentTests
from calibrate.resistance.error_scatter import ErrorScatter, cluster_doubts, complete
from calibrate.resistance.fractile_factors import Fractiles
from calibrate.resistance.model_factor import WHERE, ModelFactor, errors_of, has_scatter

Array = NDArray[np.float64]

SCATTERS = ("pooled", "own", "series")

COMPLETE_SURVIVORS = ("refuse", "as_failed", "leave_out")
"""What may become of survivors here; the censored likelihood is for a whole series."""

UNEQUAL = 0.05
"""p-value of equal scatter below which pooling is doubted."""

LEAST_TAIL = 4
FEW_IN_TAIL = 10
"""Tests on the line of a tail: the least, and the number below which the line is called uncertain."""


@dataclass(frozen=True, slots=True, eq=False)
class SubsetsD8:
    """D.8 with a mean correction of its own for every subgroup.

    Attributes
    ----------
    subsets : mapping of label to AnnexD8
        In the order of their first test.
    scatter : str
        One of `SCATTERS`.
    together : AnnexD8
        All tests with one b, for comparison.
    pooled_v_delta : float
        From the errors about the b and the log-mean of each subgroup; NaN if every subgroup has one test.
    freedom : int
        Of the pooled scatter: tests less subgroups.
    equal_scatter_p : float
        p-value of Bartlett's test that the subgroups have one scatter; NaN if fewer than two can be compared.
    doubts : tuple of Doubt
        On the division; those of the evaluations are with them.
    """

    subsets: Mapping[Any, AnnexD8]
    scatter: str
    together: AnnexD8
    pooled_v_delta: float
    freedom: int
    equal_scatter_p: float
    doubts: tuple[Doubt, ...]


@dataclass(frozen=True, slots=True, eq=False)
class TailD8:
    """D.8 with the lognormal distribution that follows the lowest errors.

    Attributes
    ----------
    tail, whole : AnnexD8
        With the line of the tail, and with all tests as usual.
    share : float
        Part of the tests asked for.
    count : int
        Tests on the line.
    log_mean, log_sd : float
        Of the line, of the logarithm of the errors about the b of all tests.
    quantile, log_delta : array, shape (n,)
        Probability paper: normal quantile of the plotting position and logarithm of the error, rising; the line goes
        through the first ``count``.
    """

    tail: AnnexD8
    whole: AnnexD8
    share: float
    count: int
    log_mean: float
    log_sd: float
    quantile: Array
    log_delta: Array


def annex_d8_subsets(
    tests: ComponentTests,
    covs: Mapping[str, float],
    *,
    scatter: str = "pooled",
    gradient: Mapping[str, float] | None = None,
    propagation: str | None = None,
    nominal: ArrayLike | None = None,
    fractiles: Fractiles | None = None,
    survivors: str = "refuse",
    where: str = WHERE,
) -> SubsetsD8:
    """Evaluate every subgroup with its own b.

    Parameters
    ----------
    tests : ComponentTests
        With a column of subgroups.
    scatter : {"pooled", "own", "series"}
        V_delta and k_n of a subgroup of n_g among n tests in G subgroups. ``pooled``: V_delta from all errors about the
        level of their subgroup, k_n = t(n - G) sqrt(1 + 1/n_g), exact for equal true scatter. ``own``: both from the
        subgroup alone, at least 4 tests. ``series``: V_delta of the subgroup, at least 4 tests, with the k_n of all
        n tests, which D.8.2.2.5 permits; it leaves out most of the uncertainty of a small subgroup's V_delta.
    survivors : {"refuse", "as_failed", "leave_out"}
    covs, gradient, propagation, nominal, fractiles, where
        As in `calibrate.resistance.annex_d.annex_d8`, the same for all subgroups.

    Raises
    ------
    InputError
        No subgroups, one that is too small or without scatter, or what `annex_d8` refuses.
    """
    if scatter not in SCATTERS:
        raise InputError(f"The scatter of subsets is '{scatter}'. {did_you_mean(scatter, SCATTERS)}")
    if not tests.subgroups:
        raise InputError("The tests have no column of subgroups to divide them by.")
    asked = fractiles or Fractiles()
    variables = BasicVariables(covs, gradient, propagation, nominal)
    whole, noted = _complete(tests, survivors, where)
    noted = (*noted, *cluster_doubts(whole, where))
    together = _all(whole, variables, asked, noted, where)
    models = {label: _model(whole, label, scatter, f"{where}.{label}") for label in whole.subgroups}
    freedom = whole.n - len(models)
    spread = sum(float(np.sum((m.log_delta - m.log_mean) ** 2)) for m in models.values())
    pooled = math.sqrt(math.expm1(spread / freedom)) if freedom else math.nan
    if scatter == "pooled" and not (freedom and any(has_scatter(m) for m in models.values())):
        raise InputError("No subgroup has scatter, so there is none to pool.")

    def error(model: ModelFactor) -> ErrorScatter:
        if scatter == "pooled":
            return ErrorScatter(model.b, pooled, model.n, freedom)
        return ErrorScatter(model.b, model.cov, whole.n if scatter == "series" else model.n)

    subsets = {
        label: evaluated(model, error(model), variables, asked, noted, f"{where}.{label}")
        for label, model in models.items()
    }
    comparable = [m.log_delta for m in models.values() if has_scatter(m)]
    p_value = math.nan
    if len(comparable) > 1:
        from scipy import stats

        p_value = float(stats.bartlett(*comparable).pvalue)
    doubts = _division_doubts(scatter, p_value, models, where)
    return SubsetsD8(subsets, scatter, together, pooled, freedom, p_value, tuple(doubts))


def annex_d8_tail(
    tests: ComponentTests,
    covs: Mapping[str, float],
    share: float = 0.5,
    *,
    gradient: Mapping[str, float] | None = None,
    propagation: str | None = None,
    nominal: ArrayLike | None = None,
    fractiles: Fractiles | None = None,
    survivors: str = "refuse",
    where: str = WHERE,
) -> TailD8:
    """Evaluate a resistance model with the lognormal distribution that its lowest errors follow.

    Parameters
    ----------
    tests : ComponentTests
    share : float
        Part of the tests, from the lowest error, through which the line goes; above 0 and at most 1. It must hold at
        least 4 tests; a part is rounded up.
    survivors : {"refuse", "as_failed", "leave_out"}
    covs, gradient, propagation, nominal, fractiles, where
        As in `calibrate.resistance.annex_d.annex_d8`.

    Raises
    ------
    InputError
        The share is outside its range, or holds too few tests or no scatter; what `annex_d8` refuses.

    Notes
    -----
    On lognormal probability paper the logarithms of the errors, in rising order, stand over the normal quantiles of
    their positions (i - 3/8)/(n + 1/4) (G. Blom, 1958, from memory), which are nearly their expected places, so that
    the line of a normal sample has hardly any bias. A straight line by least squares, ln delta = m + s u, through the
    lowest ones gives b exp(m + s²/2) and V_delta = sqrt(exp(s²) - 1), and D.8 goes on with them. k_n is that of all
    tests, as D.8.2.2.5 permits for subsets. No statement with a stated probability follows: the line is an
    approximation of one tail, and how uncertain it is depends on the share.
    """
    if not 0.0 < share <= 1.0:
        raise InputError(
            f"The share of the tests in the tail is {share:g}; it must be above 0 and at most 1."
        )
    asked = fractiles or Fractiles()
    variables = BasicVariables(covs, gradient, propagation, nominal)
    series, noted = _complete(tests, survivors, where)
    noted = (*noted, *cluster_doubts(series, where))
    whole = _all(series, variables, asked, noted, where)
    n = series.n
    # A share such as 0.1 of 70 tests is 7 tests, whatever rounding makes of the product.
    count = math.ceil(share * n - 1e-9)
    if count < LEAST_TAIL:
        raise InputError(
            Problem(
                f"A share of {share:g} of {n} tests holds {count}; the line of a tail needs at least {LEAST_TAIL}.",
                suggestion=f"The least share is {LEAST_TAIL / n:.3g}.",
            )
        )
    assert isinstance(whole.model, ModelFactor)
    y = np.sort(whole.model.log_delta)
    u = special.ndtri((np.arange(1, n + 1) - 0.375) / (n + 0.25))
    x, low = u[:count] - float(np.mean(u[:count])), y[:count]
    s = float(np.dot(x, low) / np.dot(x, x))
    m = float(np.mean(low)) - s * float(np.mean(u[:count]))
    if not s > 1e-13:
        raise InputError(f"The {count} lowest errors are equal, so their line has no slope.")
    error = ErrorScatter(whole.b * math.exp(m + 0.5 * s * s), math.sqrt(math.expm1(s * s)), n)
    doubts = _tail_doubts(count, n, where)
    tail = evaluated(whole.model, error, variables, asked, (*noted, *doubts), where)
    return TailD8(tail, whole, share, count, m, s, u, y)


def _complete(tests: ComponentTests, survivors: str, where: str) -> tuple[ComponentTests, tuple[Doubt, ...]]:
    if survivors not in COMPLETE_SURVIVORS:
        hint = did_you_mean(survivors, COMPLETE_SURVIVORS)
        raise InputError(f"Here survivors cannot be taken as '{survivors}'. {hint}")
    return complete(tests, survivors, where)


def _all(
    tests: ComponentTests,
    variables: BasicVariables,
    asked: Fractiles,
    noted: tuple[Doubt, ...],
    where: str,
) -> AnnexD8:
    model = errors_of(tests.experimental, tests.predicted, where)
    if not has_scatter(model):
        raise InputError(
            f"All {tests.n} ratios of measured to predicted resistance are equal, so there is no scatter to estimate."
        )
    return evaluated(model, ErrorScatter(model.b, model.cov, model.n), variables, asked, noted, where)


def _model(tests: ComponentTests, label: Any, scatter: str, where: str) -> ModelFactor:
    chosen = tests.in_subgroup(label)
    model = errors_of(tests.experimental[chosen], tests.predicted[chosen], where)
    if scatter == "pooled":
        return model
    if model.n < LEAST_TESTS:
        raise InputError(
            Problem(
                f"The subgroup '{label}' has {model.n} {'test' if model.n == 1 else 'tests'}; its own scatter needs at "
                f"least {LEAST_TESTS}.",
                suggestion="Pool the scatter, or join it with another subgroup.",
            )
        )
    if not has_scatter(model):
        raise InputError(f"The subgroup '{label}' has no scatter to estimate.")
    return model


def _division_doubts(
    scatter: str, p_value: float, models: Mapping[Any, ModelFactor], where: str
) -> list[Doubt]:
    doubts = []
    if scatter == "pooled" and p_value < UNEQUAL:
        widest = max(models, key=lambda k: -1.0 if math.isnan(models[k].cov) else models[k].cov)
        message = (
            f"The subgroups do not scatter alike (Bartlett's test, p = {p_value:.2g}), so that pooled scatter is too "
            f"small for some: '{widest}' has V_delta = {models[widest].cov:.3g} by itself."
        )
        doubts.append(Doubt("unequal-scatter", message, where))
    if scatter == "series":
        message = (
            "The factors k are those of the whole series although each subgroup has its own V_delta; the uncertainty "
            "of that V_delta is larger than they allow for."
        )
        doubts.append(Doubt("factors-of-series", message, where))
    return doubts


def _tail_doubts(count: int, n: int, where: str) -> list[Doubt]:
    message = (
        f"b and V_delta follow the lowest {count} of {n} errors; no stated probability belongs to the result."
    )
    doubts = [Doubt("tail-only", message, where)]
    if count < FEW_IN_TAIL:
        message = f"The line of the tail goes through {count} points; another series would give another line."
        doubts.append(Doubt("few-in-tail", message, where))
    return doubts
