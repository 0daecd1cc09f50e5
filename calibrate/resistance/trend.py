"""Whether the error of the prediction depends on the prediction or on one of its inputs."""

from __future__ import annotations

import itertools
import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Literal, NamedTuple, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.errors import Doubt, InputError, Problem, did_you_mean
from calibrate.records.censored_regression import regress
from calibrate.resistance.positive_values import Array, inside_unit, positive_values, same_length
from calibrate.resistance.ranks import average_ranks, kendall, spearman

DecideBy = Literal["spearman", "kendall", "slope"]
Stopped = Literal["left out", "regression"]

LEAST = 4
"""Exact tests below which nothing is said of a trend."""

EXACT_UP_TO = 8
"""Number of tests up to which the p-value of Spearman's coefficient comes from all permutations."""


@dataclass(frozen=True, slots=True, eq=False)
class Trends:
    """Trend of the error delta against k covariates; NaN where a number cannot be had, with the reason.

    Attributes
    ----------
    names : tuple of str
        The covariates: first the prediction, then the inputs, k together.
    n : int
        Tests whose delta is known exactly.
    stopped : int
        Tests that were stopped before failure.
    stopped_are : {"left out", "regression"}
        What was done with them: the ranks never take them in, the slope does for "regression".
    spearman, spearman_p, kendall, kendall_p : array, shape (k,)
        Rank coefficients between delta and covariate, with two-sided p-values.
    intercept, slope, slope_error, slope_p : array, shape (k,)
        ln delta = intercept + slope ln covariate, standard error and two-sided p-value of the slope.
    slope_interval : array, shape (k, 2)
        By Student's t, of coverage 1 - level.
    r_squared : array, shape (k,)
        NaN where stopped tests were taken in.
    residual_sd : array, shape (k,)
        Of ln delta about the line.
    adjusted_p : array, shape (k,)
        The p-value of the deciding test after Holm's control over all covariates.
    decided_by : {"spearman", "kendall", "slope"}
    level : float
    flagged : bool array, shape (k,)
        ``adjusted_p < level``.
    reasons : tuple of str
        By covariate why something is NaN; otherwise empty.
    doubts : tuple of Doubt
    """

    names: tuple[str, ...]
    n: int
    stopped: int
    stopped_are: Stopped
    spearman: Array
    spearman_p: Array
    kendall: Array
    kendall_p: Array
    intercept: Array
    slope: Array
    slope_error: Array
    slope_p: Array
    slope_interval: Array
    r_squared: Array
    residual_sd: Array
    adjusted_p: Array
    decided_by: DecideBy
    level: float
    flagged: NDArray[np.bool_]
    reasons: tuple[str, ...]
    doubts: tuple[Doubt, ...]

    @property
    def with_trend(self) -> tuple[str, ...]:
        """The covariates with a trend at the controlled level."""
        return tuple(name for name, flag in zip(self.names, self.flagged, strict=True) if flag)


class _Line(NamedTuple):
    """The log-linear regression on one covariate."""

    intercept: float
    slope: float
    error: float
    p: float
    low: float
    high: float
    r_squared: float
    residual_sd: float


_NO_LINE = _Line(*(math.nan,) * 8)


def trends(
    delta: ArrayLike,
    prediction: ArrayLike,
    inputs: Mapping[str, ArrayLike] | None = None,
    *,
    stopped: ArrayLike | None = None,
    stopped_are: Stopped = "left out",
    decide_by: DecideBy | None = None,
    level: float = 0.05,
    where: str = "resistance",
) -> Trends:
    """Test the error of the prediction for trends.

    Parameters
    ----------
    delta : array, shape (n,)
        Measured over predicted, above zero; of a stopped test what it had reached. With or without a mean correction.
    prediction : array, shape (n,)
        Predicted resistances, in one unit, above zero.
    inputs : mapping of str to array, shape (n,)
        The inputs of the prediction as measured. One that is not positive everywhere has no log-linear regression.
    stopped : bool array, shape (n,), optional
        Which tests were stopped before failure, so that their delta is a lower bound.
    stopped_are : {"left out", "regression"}
        Whether the slopes leave the stopped tests out, or take them in as lower bounds (normal residual, maximum
        likelihood). The rank coefficients always leave them out.
    decide_by : {"spearman", "kendall", "slope"}, optional
        The one test by which covariates are flagged. By default Spearman's coefficient, which no single test can
        sway much; the slope where stopped tests are taken in.
    level : float
        Probability of any false alarm over all covariates together.
    where : str
        Place that the doubts name.

    Returns
    -------
    Trends

    Raises
    ------
    InputError
        Wrong lengths, values that are not finite or not positive, fewer than four exact tests, an input named
        "prediction", unknown options.

    Notes
    -----
    Three tests are shown, one decides: taking the smallest of three p-values would alarm more often than the level
    says. Holm's procedure holds the level whatever the dependence between the covariates, as prediction and inputs
    are dependent by construction. A covariate that cannot be tested is not counted.

    Spearman's p-value comes from all permutations for up to eight tests (Student's t approximation gives zero for a
    perfect order of four), from Student's t beyond.

    All three tests take the tests as independent. Where clusters differ in their means and a covariate is much the same
    within each cluster, they alarm more often than the level says.

    References
    ----------
    .. [1] S. Holm, A simple sequentially rejective multiple test procedure, Scand. J. Statist. 6 (1979) 65-70.
    .. [2] M. G. Kendall, Rank Correlation Methods, Griffin 1948 (from memory).
    """
    d = positive_values(delta, "delta")
    covariates = _covariates(prediction, inputs or {}, d.size)
    open_ended = _stopped(stopped, d.size)
    decided_by: DecideBy = decide_by or (
        "slope" if stopped_are == "regression" and open_ended.any() else "spearman"
    )
    _check_options(stopped_are, decided_by)
    inside_unit(level, "The level of the trend tests")
    exact = ~open_ended
    n = int(np.count_nonzero(exact))
    if n < LEAST:
        raise InputError(
            f"A trend needs at least {LEAST} tests that ended in failure; got {n}"
            + (f" and {d.size - n} stopped ones." if n < d.size else ".")
        )
    taken = stopped_are == "regression" and bool(open_ended.any())
    ranks = np.full((4, len(covariates)), np.nan)
    lines, reasons = [], []
    for j, x in enumerate(covariates.values()):
        reason = ""
        if np.ptp(x[exact]) == 0.0:
            reason = "the covariate is the same in all tests that failed"
        elif np.ptp(d[exact]) == 0.0:
            reason = "delta is the same in all tests"
        else:
            ranks[:, j] = _ranks(d[exact], x[exact])
        line = _NO_LINE
        if not reason and np.any(x <= 0.0):
            reason = "not positive everywhere, so there is no regression on its logarithm"
        elif not reason:
            keep = np.ones(d.size, dtype=np.bool_) if taken else exact
            found = _line(np.log(d[keep]), np.log(x[keep]), open_ended[keep], level)
            line, reason = (found, "") if found else (_NO_LINE, "the censored regression has no maximum")
        lines.append(line)
        reasons.append(reason)
    table = np.array(lines, dtype=np.float64)
    by = {"spearman": ranks[1], "kendall": ranks[3], "slope": table[:, 3]}[decided_by]
    adjusted = holm(by)
    with np.errstate(invalid="ignore"):
        flagged = adjusted < level
    names = tuple(covariates)
    return Trends(
        names=names, n=n, stopped=d.size - n, stopped_are=stopped_are,
        spearman=ranks[0], spearman_p=ranks[1], kendall=ranks[2], kendall_p=ranks[3],
        intercept=table[:, 0], slope=table[:, 1], slope_error=table[:, 2], slope_p=table[:, 3],
        slope_interval=table[:, 4:6], r_squared=table[:, 6], residual_sd=table[:, 7],
        adjusted_p=adjusted, decided_by=decided_by, level=level, flagged=flagged, reasons=tuple(reasons),
        doubts=_doubts(names, ranks[0], table[:, 1], adjusted, flagged, d.size - n, taken, decided_by, where),
    )  # fmt: skip


def holm(p: ArrayLike) -> Array:
    """Return p-values adjusted by Holm's step-down procedure, NaN left alone and not counted.

    Parameters
    ----------
    p : array_like, shape (k,)

    Returns
    -------
    array, shape (k,)
        Rejecting where they are below a level errs, in any true hypothesis, at most with that probability.
    """
    given = np.asarray(p, dtype=np.float64)
    result = np.full(given.shape, np.nan)
    at = np.flatnonzero(np.isfinite(given))
    order = at[np.argsort(given[at], kind="stable")]
    steps = (order.size - np.arange(order.size)) * given[order]
    result[order] = np.minimum(np.maximum.accumulate(steps), 1.0)
    return result


def _covariates(prediction: ArrayLike, inputs: Mapping[str, ArrayLike], n: int) -> dict[str, Array]:
    if "prediction" in inputs:
        raise InputError(
            "An input is named 'prediction', which is the name of the prediction itself; rename it."
        )
    x = positive_values(prediction, "The prediction")
    if x.size != n:
        raise InputError(f"There are {n} values of delta and {x.size} predictions: each test needs both.")
    return {"prediction": x, **{name: same_length(v, f"Input '{name}'", n) for name, v in inputs.items()}}


def _stopped(stopped: ArrayLike | None, n: int) -> NDArray[np.bool_]:
    if stopped is None:
        return np.zeros(n, dtype=np.bool_)
    marks = np.asarray(stopped)
    if marks.shape != (n,) or marks.dtype != np.bool_:
        raise InputError(f"Which tests were stopped must be told by true or false for each of the {n} tests.")
    return marks


def _check_options(stopped_are: str, decided_by: str) -> None:
    for what, given, known in (
        ("Stopped tests are", stopped_are, get_args(Stopped)),
        ("A trend is decided by", decided_by, get_args(DecideBy)),
    ):
        if given not in known:
            allowed = " or ".join(repr(k) for k in known)
            raise InputError(
                Problem(f"{what} {allowed}; got {given!r}.", suggestion=did_you_mean(str(given), known))
            )


def _ranks(d: Array, x: Array) -> tuple[float, float, float, float]:
    """Return Spearman's and Kendall's coefficients, each with its p-value."""
    rho, p = spearman(x, d)
    if d.size <= EXACT_UP_TO:
        p = _permutation_p(average_ranks(x), average_ranks(d))
    tau, tau_p = kendall(x, d)
    return rho, p, tau, tau_p


def _permutation_p(a: Array, b: Array) -> float:
    """Return how many orders are at least as far from no correlation; exact with ties, too."""
    a, b = a - np.mean(a), b - np.mean(b)
    products = b[_orders(a.size)] @ a
    return float(np.mean(np.abs(products) >= abs(float(a @ b)) * (1.0 - 1e-12) - 1e-12))


@lru_cache(maxsize=EXACT_UP_TO)
def _orders(n: int) -> NDArray[np.int8]:
    return np.array(list(itertools.permutations(range(n))), dtype=np.int8)


def _line(y: Array, x: Array, open_ended: NDArray[np.bool_], level: float) -> _Line | None:
    """Return the regression of y on x; None where a censored likelihood has no maximum."""
    from scipy.special import stdtr, stdtrit

    # About the middle of x the two coefficients are all but uncorrelated, whatever the unit of the covariate.
    middle = float(np.mean(x))
    design = np.column_stack([np.ones_like(x), x - middle])
    if not open_ended.any():
        from statsmodels.regression.linear_model import OLS

        fit = OLS(y, design).fit()
        low, high = fit.conf_int(level)[1]
        mean, slope = (float(v) for v in fit.params)
        numbers = (float(fit.bse[1]), float(fit.pvalues[1]), float(low), float(high), float(fit.rsquared))
        return _Line(mean - slope * middle, slope, *numbers, math.sqrt(float(fit.mse_resid)))
    found = regress(design, y, np.where(open_ended, np.inf, y))
    if found is None:
        return None
    mean, slope = (float(v) for v in found.coefficients)
    error = math.sqrt(float(found.covariance[1, 1]))
    reach = -float(stdtrit(found.freedom, 0.5 * level)) * error
    p = 2.0 * float(stdtr(found.freedom, -abs(slope) / error))
    interval = (slope - reach, slope + reach)
    return _Line(mean - slope * middle, slope, error, p, *interval, math.nan, found.residual_sd)


def _doubts(
    names: tuple[str, ...],
    spearman: Array,
    slope: Array,
    adjusted: Array,
    flagged: NDArray[np.bool_],
    stopped: int,
    taken: bool,
    decided_by: DecideBy,
    where: str,
) -> tuple[Doubt, ...]:
    found = []
    decided = {"spearman": "by its ranks", "kendall": "by Kendall's ranks", "slope": "by the slope"}[
        decided_by
    ]
    for j in np.flatnonzero(flagged):
        direction = "falls" if (slope[j] if np.isfinite(slope[j]) else spearman[j]) < 0.0 else "rises"
        power = f", about as its power {slope[j]:.2g}" if np.isfinite(slope[j]) else ""
        text = (
            f"The model factor is not independent of '{names[j]}': it {direction} with it{power} (Spearman "
            f"{spearman[j]:.2f}; {decided}: p = {adjusted[j]:.2g} after control over all covariates). A single "
            "factor is unsafe at one end of the tests. Correct the formula, split the tests or restrict the range."
        )
        found.append(Doubt("trend", text, where))
    if stopped and not taken:
        tests = "1 test that was" if stopped == 1 else f"{stopped} tests that were"
        text = (
            f"The search for trends leaves out {tests} stopped before failure. Where the load at the stop depends on "
            "an input, this alone can make or hide a trend; a regression with lower bounds takes them in."
        )
        found.append(Doubt("stopped-left-out", text, where))
    return tuple(found)
