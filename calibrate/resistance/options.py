"""What to do about a trend of the model factor: leave it, correct the formula, split the tests, restrict the range."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibrate.errors import Doubt, InputError, Problem
from calibrate.resistance.closed_form import (
    CHARACTERISTIC,
    DESIGN,
    ClosedForm,
    FractileFactor,
    closed_form,
)
from calibrate.resistance.positive_values import Array, positive_number, positive_values

Kind = Literal["leave", "correct", "split", "lower part", "upper part"]

LEAST = 4
"""Tests for the whole table: the line leaves two degrees of freedom, one when a test is left out."""

LEAST_IN_PART = 3
"""Tests in a part, so that with one left out there is still a scatter to judge it by."""

FEW_IN_PART = 10
"""Tests below which a mean of its own for a part is doubted (common practice, no source)."""


@dataclass(frozen=True, slots=True, eq=False)
class Option:
    """One way to deal with the trend.

    Attributes
    ----------
    kind : {"leave", "correct", "split", "lower part", "upper part"}
    n : int
        Tests that it rests on.
    parameters : int
        Estimated ones, the scatter included.
    limits : array, shape (subsets, 2)
        Range of the covariate within the tests of each subset, lowest and highest.
    b : array, shape (subsets,)
        Mean correction: the mean of the lognormal model factor, exp(mean of ln delta + Q²/2); for "correct" that at
        the geometric mean of the covariate.
    slope : float
        The corrected prediction is multiplied by (covariate/reference)**slope; 0 for the others.
    reference : float
        Geometric mean of the covariate in all tests.
    cov : float
        V of the model factor about its means, sqrt(exp(Q²) - 1).
    log_likelihood : float
        Largest, of the lognormal density of delta.
    bic : float
        parameters ln n - 2 log-likelihood; lower is better, among options on the same tests only.
    cross_validation : float
        Mean log density of each test as predicted from the others; higher is better.
    same_data : bool
        Whether it rests on all tests, so that log-likelihood and BIC may be compared.
    closed_form : ClosedForm
        Fractiles over the (corrected) prediction, partial factor, and Q of the resistance.
    worst_beta, best_beta : float
        Of the resistance alone, over the covariate within the option's tests.
    worst_at : float
        Where the former is.
    """

    kind: Kind
    n: int
    parameters: int
    limits: Array
    b: Array
    slope: float
    reference: float
    cov: float
    log_likelihood: float
    bic: float
    cross_validation: float
    same_data: bool
    closed_form: ClosedForm
    worst_beta: float
    best_beta: float
    worst_at: float


@dataclass(frozen=True, slots=True, eq=False)
class TrendOptions:
    """The table of options for one covariate.

    Attributes
    ----------
    covariate : str
    split_at : float
        The lower part has covariates up to it, included.
    line : tuple of float
        Mean of ln delta at the reference, slope, and residual sd of the fitted trend: what the betas take as true.
    alpha_r, target : float
    options : tuple of Option
        Leave, correct, split, lower part, upper part.
    doubts : tuple of Doubt
    """

    covariate: str
    split_at: float
    line: tuple[float, float, float]
    alpha_r: float
    target: float
    options: tuple[Option, ...]
    doubts: tuple[Doubt, ...]

    def option(self, kind: Kind) -> Option:
        """Return the option of this kind."""
        return next(o for o in self.options if o.kind == kind)


@dataclass(frozen=True, slots=True, eq=False)
class _Truth:
    """The fitted trend, taken as true, and what is asked of the resistance."""

    mean: float
    slope: float
    log_sd: float
    reference: float
    alpha_r: float
    characteristic: FractileFactor
    design: FractileFactor
    other_log_sd: float

    def beta(self, covariate: Array, log_design: Array) -> Array:
        """Return beta of the resistance alone where the design resistance is exp(log_design) predictions."""
        local = self.mean + self.slope * np.log(covariate / self.reference)
        return (local - log_design) / (self.alpha_r * math.hypot(self.log_sd, self.other_log_sd))


def trend_options(
    delta: ArrayLike,
    covariate: ArrayLike,
    name: str,
    *,
    split_at: float | None = None,
    characteristic: FractileFactor = CHARACTERISTIC,
    design: FractileFactor = DESIGN,
    other_log_sd: float = 0.0,
    alpha_r: float = 0.8,
    target: float = 3.8,
    where: str = "resistance",
) -> TrendOptions:
    """Compare what can be done about the trend of the model factor with one covariate.

    Parameters
    ----------
    delta : array, shape (n,)
        Measured over predicted, of tests that ended in failure, without mean correction. At least four.
    covariate : array, shape (n,)
        Above zero; the prediction itself may be it.
    name : str
        Of the covariate.
    split_at : float, optional
        Where to split and to restrict, by default the median of the covariate.
    characteristic, design : FractileFactor
        How far below the mean of the logarithm the fractiles lie. The defaults do not allow for the number of tests.
    other_log_sd : float
        Scatter of the logarithm of the prediction in use, at least 0.
    alpha_r, target : float
        Sensitivity factor of the resistance and target reliability index, above zero.
    where : str
        Place that the doubts name.

    Raises
    ------
    InputError
        Wrong lengths, values that are not finite or not positive, fewer than four tests, a covariate or delta without
        scatter, a split that leaves fewer than three tests on one side.

    Notes
    -----
    Each option is a normal linear model of ln delta: one mean; a line in ln covariate; a mean for each subset with
    one scatter for both (EN 1990:2002, D.8.2.2.5 permits the scatter of all tests with subsets for the mean); one mean
    for the tests of a part. Unbiased variances enter V and the factors, largest likelihoods the BIC.

    Cross-validation: the left-out test is judged by the Student t density that the other tests predict,
    e_i/(1 - h_i) being its distance and s_(i)²/(1 - h_i) its squared scale with h_i the leverage, over delta_i as ln
    delta is what is normal. The wider t of a small part is its price for few tests.

    Worst beta: take the fitted line, mean m(c) and residual scatter, as the truth about ln(R/prediction) and
    Q² = Q_delta² + Q_rt² as its variance. In the design-value format the resistance takes the share alpha_R of the
    target, so that a design resistance meets the target if P(R < r_d) = Phi(-alpha_R beta). With
    P(R < r_d) = Phi((ln r_d - m)/Q) the index of the resistance alone is beta = (m(c) - ln r_d(c))/(alpha_R Q): the
    local median over the design resistance, as logarithm. It is linear in ln c within a subset, hence least at an
    end of it. The local mean of the resistance is its median times exp(Q²/2); using it would be too favourable by
    Q/(2 alpha_R). The line's own uncertainty is not in it.

    References
    ----------
    .. [1] EN 1990:2002, D.8.2.2.5 and Annex C (from memory).
    .. [2] G. Schwarz, Estimating the dimension of a model, Annals of Statistics 6 (1978) 461-464.
    """
    d = positive_values(delta, "delta", LEAST)
    c = positive_values(covariate, f"Covariate '{name}'", LEAST)
    if c.size != d.size:
        raise InputError(
            f"There are {d.size} values of delta and {c.size} of '{name}': each test needs both."
        )
    for what, x in (("delta", d), (f"Covariate '{name}'", c)):
        if np.ptp(x) == 0.0:
            raise InputError(f"{what} is the same in all tests: there is no trend to deal with.")
    positive_number(alpha_r, "alpha_R")
    positive_number(target, "The target reliability index")
    positive_number(other_log_sd, "The other scatter of the resistance", zero=True)
    at = float(np.median(c)) if split_at is None else float(split_at)
    low = c <= at
    _check_parts(low, at, name, c)
    y = np.log(d)
    reference = math.exp(float(np.mean(np.log(c))))
    x = np.log(c / reference)
    line = _Model.of(y, np.column_stack([np.ones_like(x), x]))
    mean, slope = (float(v) for v in line.coefficients)
    if not line.log_sd > 1e-12 * float(np.ptp(y)):
        raise InputError(
            "delta follows the trend without any residual scatter: correct the formula, there is nothing to weigh."
        )
    truth = _Truth(mean, slope, line.log_sd, reference, alpha_r, characteristic, design, other_log_sd)
    one = np.ones((d.size, 1))
    parts = np.column_stack([low, ~low]).astype(np.float64)
    options = (
        _option("leave", _Model.of(y, one), c, one, truth),
        _option("correct", line, c, one, truth, slope),
        _option("split", _Model.of(y, parts), c, parts, truth),
        _option("lower part", _Model.of(y[low], one[low]), c[low], one[low], truth, same_data=False),
        _option("upper part", _Model.of(y[~low], one[~low]), c[~low], one[~low], truth, same_data=False),
    )
    doubts = _doubts(options, name, int(low.sum()), int((~low).sum()), at, target, where)
    return TrendOptions(name, at, (mean, slope, line.log_sd), alpha_r, target, options, doubts)


@dataclass(frozen=True, slots=True, eq=False)
class _Model:
    """A normal linear model of ln delta, fitted by least squares."""

    coefficients: Array
    log_sd: float
    log_likelihood: float
    cross_validation: float

    @classmethod
    def of(cls, y: Array, design: Array) -> _Model:
        from scipy.special import gammaln

        n, p = design.shape
        q, r = np.linalg.qr(design)
        coefficients = np.linalg.solve(r, q.T @ y)
        e = y - design @ coefficients
        rest = 1.0 - np.sum(q * q, axis=1)
        rss = float(e @ e)
        with np.errstate(divide="ignore"):
            likelihood = -0.5 * n * (math.log(2.0 * math.pi) + float(np.log(rss / n)) + 1.0) - float(
                np.sum(y)
            )
        freedom = n - 1 - p
        # What is left of the residual sum of squares without test i; zero where the others agree exactly.
        others = np.maximum(rss - e * e / rest, 1e-30 * rss)
        scale = np.sqrt(others / freedom / rest)
        with np.errstate(divide="ignore", invalid="ignore"):
            t = e / rest / scale
            constant = float(gammaln(0.5 * (freedom + 1)) - gammaln(0.5 * freedom))
            density = (
                constant
                - 0.5 * math.log(freedom * math.pi)
                - np.log(scale)
                - 0.5 * (freedom + 1) * np.log1p(t * t / freedom)
                - y
            )
        return cls(coefficients, math.sqrt(rss / (n - p)), likelihood, float(np.mean(density)))


def _option(
    kind: Kind,
    model: _Model,
    c: Array,
    membership: Array,
    truth: _Truth,
    slope: float = 0.0,
    same_data: bool = True,
) -> Option:
    n, subsets = membership.shape
    means = model.coefficients[:subsets]
    form = closed_form(means, model.log_sd, n, truth.characteristic, truth.design, truth.other_log_sd)
    limits = np.array([[np.min(c[m]), np.max(c[m])] for m in membership.T.astype(np.bool_)])
    log_design = np.log(form.design)[:, None] + slope * np.log(limits / truth.reference)
    betas = truth.beta(limits, log_design)
    parameters = model.coefficients.size + 1
    return Option(
        kind=kind, n=n, parameters=parameters, limits=limits, b=np.exp(means + 0.5 * model.log_sd**2),
        slope=slope, reference=truth.reference, cov=math.sqrt(math.expm1(model.log_sd**2)),
        log_likelihood=model.log_likelihood, bic=parameters * math.log(n) - 2.0 * model.log_likelihood,
        cross_validation=model.cross_validation, same_data=same_data, closed_form=form,
        worst_beta=float(np.min(betas)), best_beta=float(np.max(betas)),
        worst_at=float(limits.reshape(-1)[int(np.argmin(betas))]),
    )  # fmt: skip


def _check_parts(low: NDArray[np.bool_], at: float, name: str, c: Array) -> None:
    for part, count in (("up to", int(low.sum())), ("above", int((~low).sum()))):
        if count < LEAST_IN_PART:
            raise InputError(
                Problem(
                    f"Splitting the tests at {name} = {at:g} leaves {count} with values {part} it; at least "
                    f"{LEAST_IN_PART} are needed on each side.",
                    suggestion=f"The tests reach from {np.min(c):g} to {np.max(c):g}; choose another value.",
                )
            )


def _doubts(
    options: tuple[Option, ...],
    name: str,
    below: int,
    above: int,
    at: float,
    target: float,
    where: str,
) -> tuple[Doubt, ...]:
    found = []
    leave = options[0]
    if leave.worst_beta < target:
        text = (
            f"If the trend with '{name}' is left as it is, the reliability index of the resistance at {name} = "
            f"{leave.worst_at:.4g} is {leave.worst_beta:.2f} against a target of {target:g}."
        )
        found.append(Doubt("trend-left", text, where))
    split = options[2]
    if split.worst_beta < target:
        text = (
            f"Splitting takes the trend with '{name}' out of the scatter but leaves it within the subsets: at {name} = "
            f"{split.worst_at:.4g} the reliability index of the resistance is {split.worst_beta:.2f} against a target "
            f"of {target:g} ({leave.worst_beta:.2f} without splitting)."
        )
        found.append(Doubt("trend-within-subsets", text, where))
    if min(below, above) < FEW_IN_PART:
        text = (
            f"Splitting at {name} = {at:.4g} leaves {below} and {above} tests: a mean of so few is uncertain."
        )
        found.append(Doubt("few-tests-in-part", text, where))
    return tuple(found)
