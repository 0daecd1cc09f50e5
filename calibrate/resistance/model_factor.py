"""The factor by which tests differ from the prediction: its level b and the scatter of the error terms.

Two estimators that are not the same. EN 1990 Annex D takes the slope b of measured against predicted resistance, in
which large specimens weigh more, and the sd of the logarithms of the error terms about it. With tests that did not
fail, the ratio of measured to predicted resistance is taken as lognormal and its log-mean and log-sd have the largest
likelihood; every test weighs the same there.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from calibrate.errors import Doubt, InputError, Problem
from calibrate.fitting import Fit, fit_family
from calibrate.records.observations import Observations
from calibrate.resistance.component_tests import ComponentTests

Array = NDArray[np.float64]

WHERE = "resistance"
"""Place of the doubts unless the caller names another."""

REJECTED = 0.05
"""p-value below which normality of the log errors is doubted."""

WEAK_CORRELATION = 0.9
"""Correlation of measured and predicted resistance below which a doubt is recorded (common practice, no source)."""

LEAST_FOR_NORMALITY = 4
MOST_FOR_SHAPIRO = 5000
"""Sizes between which p-values of normality are known; of Shapiro and Wilk's test by its approximation."""


@dataclass(frozen=True, slots=True)
class Normality:
    """Whether the log errors look normal; NaN where a test is not defined.

    Attributes
    ----------
    anderson_darling, anderson_darling_p : float
        A² (1 + 0.75/n + 2.25/n²) with mean and sd estimated, and its p-value.
    shapiro_wilk, shapiro_wilk_p : float
        W and its p-value.
    """

    anderson_darling: float
    anderson_darling_p: float
    shapiro_wilk: float
    shapiro_wilk_p: float

    @property
    def rejected(self) -> bool:
        """Whether either test speaks against normality at the level of 5 %."""
        return self.anderson_darling_p < REJECTED or self.shapiro_wilk_p < REJECTED


@dataclass(frozen=True, slots=True, eq=False)
class ModelFactor:
    """Mean correction and error terms of EN 1990 Annex D.8.

    Attributes
    ----------
    n : int
        Number of tests.
    b : float
        Least-squares slope of measured against predicted resistance, through the origin.
    delta, log_delta : array, shape (n,)
        Error terms re/(b rt) and their logarithms.
    log_mean, log_variance : float
        Of ``log_delta``; the variance with n - 1, NaN for one test.
    cov : float
        V_delta, sqrt(exp(log_variance) - 1).
    correlation : float
        Of measured and predicted resistance; NaN if either is the same for all tests.
    normality : Normality
        Of ``log_delta``.
    doubts : tuple of Doubt
    """

    n: int
    b: float
    delta: Array
    log_delta: Array
    log_mean: float
    log_variance: float
    cov: float
    correlation: float
    normality: Normality
    doubts: tuple[Doubt, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class CensoredModelFactor:
    """Lognormal ratio of measured to predicted resistance, of largest likelihood, survivors as lower bounds.

    Attributes
    ----------
    n, n_failed : int
        Number of tests, and of those that failed.
    log_mean, log_sd : float
        Of the logarithm of the ratio; the sd as the likelihood gives it, without a correction for the sample's size.
    log_mean_error, log_sd_error : float
        Standard errors.
    b : float
        Mean of the ratio, exp(log_mean + log_sd²/2).
    cov : float
        V_delta, sqrt(exp(log_sd²) - 1).
    fit : Fit
    doubts : tuple of Doubt
    """

    n: int
    n_failed: int
    log_mean: float
    log_sd: float
    log_mean_error: float
    log_sd_error: float
    b: float
    cov: float
    fit: Fit
    doubts: tuple[Doubt, ...] = ()


def model_factor(tests: ComponentTests, where: str = WHERE) -> ModelFactor:
    """Return b, the error terms and their scatter.

    Parameters
    ----------
    tests : ComponentTests
        All of them failed.
    where : str
        Place of the doubts.

    Raises
    ------
    InputError
        Some tests did not fail, or the ratio of measured to predicted resistance has no scatter.

    Notes
    -----
    b = sum(re rt)/sum(rt²), delta = re/(b rt), Delta = ln delta, s² = sum (Delta - mean)²/(n - 1),
    V_delta² = exp(s²) - 1 (EN 1990:2002, D.8.2.2.3 and D.8.2.2.4, from memory).
    """
    if tests.n_failed < tests.n:
        survivors = tests.n - tests.n_failed
        raise InputError(
            Problem(
                f"{survivors} of {tests.n} tests did not fail; b and the errors of Annex D.8 need the resistance of "
                "every test.",
                suggestion="Use the censored model factor, or say how survivors are to be taken.",
            )
        )
    found = errors_of(tests.experimental, tests.predicted, where)
    if not has_scatter(found):
        raise InputError(
            f"All {tests.n} ratios of measured to predicted resistance are equal, so there is no scatter to estimate."
        )
    return found


def censored_model_factor(tests: ComponentTests, where: str = WHERE) -> CensoredModelFactor:
    """Return the lognormal ratio of measured to predicted resistance, survivors taken as lower bounds.

    Parameters
    ----------
    tests : ComponentTests
        At least two of them failed.
    where : str
        Place of the doubts.

    Raises
    ------
    InputError
        Fewer than two failures, or the likelihood has no maximum.

    Notes
    -----
    Tests are taken to be stopped for reasons that say nothing of the specimen's own resistance, such as the capacity of
    the rig (J. F. Lawless, Statistical Models and Methods for Lifetime Data, 2nd ed., Wiley 2003, section 2.2).
    """
    if tests.n_failed < 2:
        raise InputError(
            f"Of {tests.n} tests {tests.n_failed} failed; the scatter of the model needs at least two failures."
        )
    ratio = tests.ratio
    found = fit_family(Observations(ratio, np.where(tests.survived, np.inf, ratio)), "lognormal")
    if found.distribution is None:
        raise InputError(f"The ratio of measured to predicted resistance cannot be fitted: {found.reason}.")
    median, log_sd = found.parameters["median"], found.parameters["log_sd"]
    return CensoredModelFactor(
        n=tests.n,
        n_failed=tests.n_failed,
        log_mean=math.log(median),
        log_sd=log_sd,
        log_mean_error=found.standard_errors["median"] / median,
        log_sd_error=found.standard_errors["log_sd"],
        b=median * math.exp(0.5 * log_sd**2),
        cov=math.sqrt(math.expm1(log_sd**2)),
        fit=found,
        doubts=tuple(Doubt(d.code, d.message, where) for d in found.doubts),
    )


def errors_of(experimental: Array, predicted: Array, where: str = WHERE) -> ModelFactor:
    """Return b and the errors of at least one test; the arrays have shape (n,) and are above zero."""
    # Scaled, so that the squares of numbers in small units cannot overflow.
    scale = float(np.max(predicted))
    r = predicted / scale
    b = float(np.dot(experimental / scale, r) / np.dot(r, r))
    delta = experimental / (b * predicted)
    log_delta = np.log(delta)
    n = int(delta.size)
    variance = float(np.var(log_delta, ddof=1)) if n > 1 else math.nan
    correlation = math.nan
    if np.ptp(experimental) > 0.0 and np.ptp(predicted) > 0.0:
        correlation = float(np.corrcoef(experimental / scale, r)[0, 1])
    normality = normality_of(log_delta)
    return ModelFactor(
        n=n,
        b=b,
        delta=delta,
        log_delta=log_delta,
        log_mean=float(np.mean(log_delta)),
        log_variance=variance,
        cov=math.sqrt(math.expm1(variance)),
        correlation=correlation,
        normality=normality,
        doubts=tuple(_doubts(correlation, normality, where)),
    )


def has_scatter(found: ModelFactor) -> bool:
    """Return whether the errors differ by more than rounding."""
    return float(np.ptp(found.log_delta)) > 1e-13


def normality_of(x: Array) -> Normality:
    """Test a sample of shape (n,) for normality with unknown mean and sd.

    References
    ----------
    R. B. D'Agostino, M. A. Stephens, Goodness-of-Fit Techniques, Dekker 1986, Table 4.9 (Anderson-Darling, from
    memory); P. Royston, Applied Statistics 44 (1995) 547-551 (Shapiro-Wilk, by scipy).
    """
    n = int(x.size)
    sd = float(np.std(x, ddof=1)) if n > 1 else 0.0
    if n < LEAST_FOR_NORMALITY or not float(np.ptp(x)) > 1e-13:
        return Normality(math.nan, math.nan, math.nan, math.nan)
    z = np.sort((x - float(np.mean(x))) / sd)
    weight = 2.0 * np.arange(1, n + 1) - 1.0
    distance = -n - float(np.sum(weight * (special.log_ndtr(z) + special.log_ndtr(-z[::-1])))) / n
    modified = distance * (1.0 + 0.75 / n + 2.25 / n**2)
    w, w_p = math.nan, math.nan
    if n <= MOST_FOR_SHAPIRO:
        from scipy import stats

        shapiro = stats.shapiro(z)
        w, w_p = float(shapiro.statistic), float(shapiro.pvalue)
    return Normality(modified, _anderson_darling_p(modified), w, w_p)


def _anderson_darling_p(a: float) -> float:
    if a < 0.2:
        return -math.expm1(-13.436 + 101.14 * a - 223.73 * a * a)
    if a < 0.34:
        return -math.expm1(-8.318 + 42.796 * a - 59.938 * a * a)
    if a < 0.6:
        return math.exp(0.9177 - 4.279 * a - 1.38 * a * a)
    # The parabola of the exponent turns at 153; p is zero to any purpose long before.
    return math.exp(1.2937 - 5.709 * a + 0.0186 * a * a) if a < 13.0 else 0.0


def _doubts(correlation: float, normality: Normality, where: str) -> list[Doubt]:
    doubts = []
    if correlation < WEAK_CORRELATION:
        message = (
            f"Measured and predicted resistance have a correlation of {correlation:.2f}, below {WEAK_CORRELATION:g}: "
            "the model explains little of what was measured, and the scatter may hide a wrong model."
        )
        doubts.append(Doubt("weak-correlation", message, where))
    if normality.rejected:
        message = (
            "The logarithms of the errors do not look normal (p = "
            f"{normality.anderson_darling_p:.2g} by Anderson and Darling, {normality.shapiro_wilk_p:.2g} by Shapiro "
            "and Wilk); fractiles far out rest on that assumption. Look for subsets, or evaluate the lower tail alone."
        )
        doubts.append(Doubt("errors-not-lognormal", message, where))
    return doubts
